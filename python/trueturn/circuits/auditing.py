"""A job's target for circuits that were read from files."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Unpack

from trueturn.audit.given_circuit import GivenCircuit
from trueturn.circuits.reading import Reading, read_circuit

if TYPE_CHECKING:
    from trueturn.audit.job import Job

__all__ = ["job_for_circuits"]


def job_for_circuits(
    job: Job,
    paths: Sequence[Path],
    **reading: Unpack[Reading],
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
        circuit = read_circuit(path, **{**reading, "qubits": job.operator.qubits})
        candidates.append(GivenCircuit(circuit.evolution, path.name))
        notes += [f"{path.name}: {note}" for note in circuit.notes]
    if len(job.times) > 1:
        notes.append(f"circuits are read out at their end: only the last time of the job is judged, {job.times[-1]:g}")
    title = f"{', '.join(path.name for path in paths)}: {job.title}" if job.title else ""
    return replace(job, candidates=tuple(candidates), times=job.times[-1:], title=title), notes
