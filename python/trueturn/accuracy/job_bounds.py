"""What the proven bounds say about the candidates of a job, at any size that the algebra holds and without a state."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from trueturn.accuracy.bounds import Bound, bound
from trueturn.accuracy.proven_steps import proven_steps
from trueturn.audit.figures import count, plain, upper
from trueturn.audit.grid import grid_unit
from trueturn.audit.job import Job
from trueturn.reference.certificate import norm_bound

if TYPE_CHECKING:
    from rich.console import RenderableType

__all__ = ["BoundRow", "document", "job_bounds", "page"]

LONGEST = 12
"""Characters of a count beyond which a column would not fit; more than this is no circuit anyway."""


@dataclass(frozen=True)
class BoundRow:
    """One candidate.

    Attributes
    ----------
    label : str
        Formula and rule.
    steps : int or None
        The candidate's own count, or for ``"least"`` the one proven; None where none is proven.
    error : float or None
        Proven bound on the job's quantity with that many steps.
    bound : Bound or None
        The tightest bound on the operator behind it.
    proven_steps : int or None
        Least steps whose bound meets the tolerance, on the grid of the times.
    random_steps : int or None
        The same for the mean over random inputs; only for states.
    note : str
        Why there is no proven count.
    """

    label: str
    steps: int | None
    error: float | None
    bound: Bound | None
    proven_steps: int | None
    random_steps: int | None
    note: str = ""


def job_bounds(task: Job) -> tuple[BoundRow, ...]:
    """Bound every candidate of a job.

    Notes
    -----
    Errors of an observable O are at most 2 ‖O‖ times the distance of the operators, the identity in O left out, and
    those of a state at most that distance. The last time is the longest, so a bound there covers the earlier ones, which
    take fewer of the same steps.
    """
    factor = error_factor(task)
    time = task.times[-1]
    unit = grid_unit(task.times) if task.readout == "along" else 1
    rows = []
    for candidate in task.formula_candidates:
        partition = candidate.partition(task.operator)
        formula = candidate.formula
        proven, why = proven_steps(formula, partition, time, task.tolerance, factor, unit)
        note = why if proven is None else ""
        at_random: int | None = None
        if task.quantity == "state" and proven is not None:
            at_random, _ = proven_steps(formula, partition, time, task.tolerance, factor, unit, "random")
        steps = candidate.steps if isinstance(candidate.steps, int) else proven
        found = None if steps is None else bound(formula, partition, time, steps, method="tightest")
        value = None if found is None else factor * min(found.value, 2.0 if task.quantity == "state" else 1.0)
        rows.append(BoundRow(candidate.label, steps, value, found, proven, at_random, note))
    return tuple(rows)


def error_factor(task: Job) -> float:
    """Return what the distance of the operators is multiplied by."""
    if task.quantity == "state":
        return 1.0
    if task.relative_to == "norm":
        return 2.0
    return 2.0 * max(norm_bound(observable) for observable in task.observables.values())


def document(task: Job, rows: tuple[BoundRow, ...]) -> dict[str, Any]:
    """Give bounds as plain data; numbers that are not finite become null."""
    return {
        "kind": "trueturn bounds",
        "schema": 1,
        "title": task.title,
        "qubits": task.operator.qubits,
        "terms": len(task.operator),
        "time": task.times[-1],
        "tolerance": task.tolerance,
        "quantity": task.quantity,
        "rows": [
            {
                "candidate": row.label,
                "steps": row.steps,
                "bound": _finite(row.error),
                "meets": row.error is not None and row.error <= task.tolerance,
                "proven_steps": row.proven_steps,
                "proven_steps_random_inputs": row.random_steps,
                "note": row.note,
                "operator_bound": None if row.bound is None else _one(row.bound),
                "alternatives": [] if row.bound is None else [_one(other) for other in row.bound.alternatives],
                "left_out": [] if row.bound is None else list(row.bound.left_out),
            }
            for row in rows
        ],
    }


def _one(found: Bound) -> dict[str, Any]:
    return {
        "value": _finite(found.value),
        "kind": found.kind,
        "method": found.method,
        "theorem": found.theorem,
        "source": found.source,
        "norms": found.route,
    }


def _finite(value: float | None) -> float | None:
    return value if value is not None and value < float("inf") else None


def page(task: Job, rows: tuple[BoundRow, ...]) -> RenderableType:
    """Lay bounds out: a table, then for each candidate which bound was taken and what the others give."""
    from rich.console import Group
    from rich.padding import Padding
    from rich.table import Table
    from rich.text import Text

    what = "state" if task.quantity == "state" else "observables"
    heading = (
        f"{task.operator.qubits} qubits, {count(len(task.operator))} terms, time {plain(task.times[-1])}; "
        f"error of the {what} within {plain(task.tolerance)}"
    )
    table = Table(box=None, padding=(0, 2, 0, 0), header_style="dim")
    table.add_column("candidate")
    for name in ("steps", "error ≤", "steps proven"):
        table.add_column(Text(name), justify="right")
    if task.quantity == "state":
        table.add_column(Text("on average"), justify="right")
    for row in rows:
        cells = [_count(row.steps), "–" if row.error is None else upper(row.error, 3), _count(row.proven_steps)]
        cells += [_count(row.random_steps)] if task.quantity == "state" else []
        table.add_row(row.label, *cells)
    lines: list[RenderableType] = [Text(task.title, style="bold"), Text(heading), Text(), table, Text()]
    for row in rows:
        lines.append(Text(row.label, style="bold"))
        if row.note:
            lines.append(Padding(Text(row.note), (0, 0, 0, 2)))
        if row.bound is None:
            continue
        for other in row.bound.alternatives:
            taken = "taken" if other == row.bound else ""
            told = f"{upper(other.value, 3):>8}  {other.theorem}; norms: {other.route or 'none'} {taken}"
            lines.append(Padding(Text(told.rstrip()), (0, 0, 0, 2)))
        lines += [Padding(Text(f"not computed: {one}"), (0, 0, 0, 2)) for one in row.bound.left_out]
        lines.append(Padding(Text(f"source: {row.bound.source}", style="dim"), (0, 0, 0, 2)))
    lines += [Text(), Text(EXPLANATION)]
    return Group(*lines)


def _count(value: int | None) -> str:
    if value is None:
        return "–"
    return count(value) if len(str(value)) <= LONGEST else f"{value:.2e}"


EXPLANATION = (
    "All bounds are proven: the error is never larger, and mostly smaller. The lines under a candidate bound the operator, "
    "‖S − exp(−iHt)‖; observables multiply that by 2‖O‖. Steps proven: the least that the tightest bound proves. On "
    "average: for the root mean square over random inputs, no statement about any one input."
)
