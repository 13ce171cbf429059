"""The circuits of a job: one for each candidate, to the job's last time."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

from trueturn.audit.grid import steps_at
from trueturn.errors import JobError
from trueturn.export.cost import Cost, cost_of
from trueturn.export.hardware import Hardware
from trueturn.export.table import CostTable
from trueturn.rotations import Rotations

if TYPE_CHECKING:
    from trueturn.audit.job import Job, Progress

__all__ = ["circuit_words", "job_candidate", "job_circuit", "job_costs", "job_hardware", "job_labels", "job_least"]

NO_STEPS = "steps not known (least): give --steps N, or --search to find them"


def job_hardware(job: Job) -> Hardware:
    """Return what the circuits of a job are written for: every pair joined where it does not say."""
    return Hardware() if job.device is None else job.device.hardware


def job_labels(job: Job) -> list[str]:
    """Return a name for each candidate: formula and rule, and its number where two share them."""
    labels = [candidate.label for candidate in job.formula_candidates]
    return [f"{number} {label}" if labels.count(label) > 1 else label for number, label in enumerate(labels, start=1)]


def job_candidate(job: Job, name: str | None) -> int:
    """Return the place of a candidate that is named by its label, its number, or its formula where only one has it.

    Raises
    ------
    JobError
        No candidate or several have this name, or None is given and there are several.
    """
    labels = job_labels(job)
    formulas = [candidate.formula.name for candidate in job.formula_candidates]
    if name is None:
        if len(labels) == 1:
            return 0
        raise _refuse(job, "--candidate: missing; " + _choices(labels))
    if name.isdecimal() and 1 <= int(name) <= len(labels):
        return int(name) - 1
    for names in (labels, formulas):
        if names.count(name) == 1:
            return names.index(name)
    if name in formulas:
        raise _refuse(job, f"--candidate: several have this formula ({name}); " + _choices(labels))
    near = difflib.get_close_matches(name, labels, n=1, cutoff=0.5)
    hint = f"did you mean {near[0]!r}? " if near else ""
    raise _refuse(job, f"--candidate: unknown ({name}); " + hint + _choices(labels))


def job_circuit(job: Job, place: int, steps: int | None) -> Rotations:
    """Return the circuit of a candidate to the job's last time, as an audit runs it.

    Parameters
    ----------
    job : Job
    place : int
    steps : int or None
        Overrides the candidate's own; needed where that is ``least``.

    Raises
    ------
    JobError
        The step count is not known.
    AuditError
        The circuit is read on the way and a time falls between its steps.
    """
    candidate = job.formula_candidates[place]
    count = candidate.steps if steps is None else steps
    if not isinstance(count, int):
        key = f"candidate[{place + 1}].steps"
        raise JobError(
            f"{key}: not known before an audit (least); run trueturn audit first and give its count with --steps",
            path=_path(job),
            key=key,
        )
    partition = candidate.partition(job.operator)
    if job.readout == "separate":
        return candidate.formula.rotations(partition, job.times[-1], count)
    counts = steps_at(job.times, count)
    whole = Rotations([], [], [], job.operator.qubits)
    for time, was, done, before in zip(job.times, (0.0, *job.times[:-1]), counts, (0, *counts[:-1]), strict=True):
        whole = whole + candidate.formula.rotations(partition, time - was, done - before)
    return whole


def job_costs(job: Job, steps: int | None, searched: Mapping[int, int | str] | None = None) -> CostTable:
    """Count every candidate of a job whose step count is known; the others say what is missing.

    Parameters
    ----------
    job : Job
    steps : int or None
        Overrides the step count of every candidate.
    searched : mapping of int to int or str, optional
        What `job_least` found.

    Raises
    ------
    JobError
        No step count is known.
    AuditError
        As `job_circuit` does.
    """
    hardware = job_hardware(job)
    rows: dict[str, Cost | str] = {}
    for place, label in enumerate(job_labels(job)):
        own = job.formula_candidates[place].steps
        known = own if steps is None else steps
        if not isinstance(known, int):
            known = (searched or {}).get(place, NO_STEPS)
        rows[label] = cost_of(job_circuit(job, place, known), hardware) if isinstance(known, int) else known
    if searched is None and all(row == NO_STEPS for row in rows.values()):
        key = "candidate[1].steps"
        message = "not known before an audit (least); give --steps N, or --search to find them as an audit does"
        raise JobError(f"{key}: {message}", path=_path(job), key=key)
    return CostTable(rows)


def job_least(job: Job, threads: int | None = None, progress: Progress | None = None) -> dict[int, int | str]:
    """Search the least step counts that a job leaves open, as its audit does; where none meets the tolerance, say so.

    Returns
    -------
    dict of int to int or str
        By the place of the candidate.

    Raises
    ------
    AuditError, MemoryRefusedError
        As the audit does.
    """
    places = [place for place, candidate in enumerate(job.formula_candidates) if candidate.steps == "least"]
    if not places:
        return {}
    found = replace(job, candidates=tuple(job.formula_candidates[place] for place in places)).audit(threads, progress)
    return {
        place: row.steps if row.verdict == "meets" else f"no step count found: {row.note or row.verdict}"
        for place, row in zip(places, found.rows, strict=True)
    }


def circuit_words(job: Job, place: int, steps: int | None) -> str:
    """Say in words what a circuit of a job is, for the head of a file."""
    candidate = job.formula_candidates[place]
    count = candidate.steps if steps is None else steps
    return "\n".join(
        [
            job.title or "Untitled job",
            f"Formula {candidate.label}; {count} steps to time {job.times[-1]!r}; source: {candidate.formula.source}",
        ]
    )


def _choices(labels: list[str]) -> str:
    return "give one of: " + "; ".join(f"{number} ({label})" for number, label in enumerate(labels, start=1))


def _refuse(job: Job, message: str) -> JobError:
    return JobError(message, path=_path(job), key="candidate")


def _path(job: Job) -> str:
    return "" if job.path is None else str(job.path)
