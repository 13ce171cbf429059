"""Budgets of a job file: one for each of its observables, at its last time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from trueturn.device.budget import device_budget
from trueturn.device.result import Budget
from trueturn.errors import JobError
from trueturn.reference.certificate import norm_bound

if TYPE_CHECKING:
    from trueturn.audit.job import Job, Progress

__all__ = ["job_budgets", "job_document"]


def job_budgets(
    job: Job, errors: str = "measured", threads: int | None = None, progress: Progress | None = None
) -> dict[str, Budget]:
    """Make the budget of each observable of a job.

    Parameters
    ----------
    job : Job
        With a device and observables.
    errors : "measured" or "proven"
        Where algorithmic errors come from: the start state is evolved, or bounds are taken and no state is needed.
    threads : int, optional
        Overrides the job's own.
    progress : callable, optional

    Returns
    -------
    dict of str to Budget
        By the observables' names.

    Raises
    ------
    JobError
        The job has no device, no two-qubit error rate, or no observables.
    ArgumentError, FormulaError, MemoryRefusedError, ToleranceError
        As for `device_budget`.
    """
    path = "" if job.path is None else str(job.path)
    if job.device is None or job.device.two_qubit_error is None:
        key = "device" if job.device is None else "device.two_qubit_error"
        remedy = "add a section [device] with a line such as two_qubit_error = 0.003"
        raise JobError(f"{key}: missing; {remedy}", path=path, key=key)
    if not job.observables:
        remedy = 'a budget is for expectations: add [target.observables] with a line such as edge = "Z_0"'
        raise JobError(f"target.observables: missing; {remedy}", path=path, key="target.observables")
    candidates = tuple(dict.fromkeys(replace(candidate, steps="least") for candidate in job.formula_candidates))
    found = {}
    for name, observable in job.observables.items():
        scale = norm_bound(observable) if job.relative_to == "norm" else 1.0
        found[name] = device_budget(
            job.operator,
            job.times[-1],
            candidates,
            observable,
            job.tolerance * (scale or 1.0),
            two_qubit_error=job.device.two_qubit_error,
            shots=job.device.shots,
            synthesis_error=job.device.synthesis_error,
            confidence=job.device.confidence,
            state=job.required_start().state() if errors == "measured" else None,
            device=job.device.hardware,
            most_steps=job.most_steps,
            threads=job.threads if threads is None else threads,
            progress=progress,
        )
    return found


def job_document(job: Job, budgets: Mapping[str, Budget]) -> dict[str, Any]:
    """Give the budgets of a job as plain data."""
    return {
        "kind": "trueturn budgets",
        "schema": 1,
        "title": job.title,
        "budgets": {name: budget.to_dict() for name, budget in budgets.items()},
    }
