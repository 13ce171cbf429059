"""A job's target for circuits that were read from files."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from trueturn.audit.given_circuit import GivenCircuit
from trueturn.circuits.reading import Range, read_circuit

if TYPE_CHECKING:
    from trueturn.audit.job import Job

__all__ = ["job_for_circuits"]


def job_for_circuits(
    job: Job,
    paths: Sequence[Path],
    prepare: Range | None = None,
    basis: Range | None = None,
    start_layout: Sequence[int] | None = None,
    end_layout: Sequence[int] | None = None,
    quarter_turns: str = "auto",
) -> tuple[Job, list[str]]:
    """Return the job with the circuits as its candidates, and what the reader must know.

    The circuits are judged at the job's last time, to which they are taken to evolve, on the qubits of its Hamiltonian.

    Raises
    ------
    QasmError, ArgumentError
        As `read_circuit` does.
    """
    candidates, notes = [], []
    for path in paths:
        circuit = read_circuit(
            path,
            prepare=prepare,
            basis=basis,
            start_layout=start_layout,
            end_layout=end_layout,
            quarter_turns=quarter_turns,
            qubits=job.operator.qubits,
        )
        candidates.append(GivenCircuit(circuit.evolution, path.name, file=True))
        notes += [f"{path.name}: {note}" for note in circuit.notes]
    if len(job.times) > 1:
        notes.append(f"circuits are read out at their end: only the last time of the job is judged, {job.times[-1]:g}")
    title = f"{', '.join(path.name for path in paths)}: {job.title}" if job.title else ""
    return replace(job, candidates=tuple(candidates), times=job.times[-1:], title=title), notes
