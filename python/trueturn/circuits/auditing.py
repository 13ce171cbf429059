"""What a job says about circuits that were read from files: the target that they are judged by, the rates of their gates."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Unpack

from trueturn.audit.given_circuit import GivenCircuit
from trueturn.circuits.reading import Reading, read_circuit
from trueturn.export.hardware import RATES
from trueturn.export.job import job_hardware
from trueturn.export.table import CostTable

if TYPE_CHECKING:
    from trueturn.audit.job import Job

__all__ = ["circuit_costs", "job_for_circuits"]


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
    asked: Reading = {**reading, "qubits": job.operator.qubits}
    for path in paths:
        circuit = read_circuit(path, **asked)
        candidates.append(GivenCircuit(circuit.evolution, path.name))
        notes += [f"{path.name}: {note}" for note in circuit.notes]
    if len(job.times) > 1:
        notes.append(f"circuits are read out at their end: only the last time of the job is judged, {job.times[-1]:g}")
    title = f"{', '.join(path.name for path in paths)}: {job.title}" if job.title else ""
    return replace(job, candidates=tuple(candidates), times=job.times[-1:], title=title), notes


def circuit_costs(paths: Sequence[Path], job: Job | None, **reading: Unpack[Reading]) -> tuple[CostTable, list[str]]:
    """Count the gates that stand in files, at the rates of a job's device, and return what the reader must know.

    Raises
    ------
    QasmError, ArgumentError
        As `read_circuit` does.
    """
    device = {} if job is None else {name: getattr(job_hardware(job), name) for name in (*RATES, "synthesis_error")}
    rows, notes = {}, []
    for path in paths:
        circuit = read_circuit(path, **reading)
        name = path.name if [other.name for other in paths].count(path.name) == 1 else str(path)
        rows[name] = circuit.cost(**device)
        notes += [f"{path.name}: {note}" for note in circuit.notes]
    return CostTable(rows), notes
