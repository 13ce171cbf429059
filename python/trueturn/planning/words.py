"""The sentences of a plan."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from trueturn.audit.figures import count, interval, nearest, plain, upper
from trueturn.audit.report.words import tolerance_words
from trueturn.planning.costs import cost_words

if TYPE_CHECKING:
    from trueturn.planning.result import Plan, PlanRow

__all__ = [
    "CAUTIONS",
    "amount",
    "bound_words",
    "budget_words",
    "efficient_words",
    "error_words",
    "figure",
    "grounds",
    "headline",
    "interruption",
    "left_out",
    "reason",
]

CAUTIONS = (
    "A least step count is measured, for these times and, unless whole operators are compared, this start state and these "
    "observables; the proven count holds for every start state, in exact arithmetic.",
)


def figure(name: str, value: float) -> str:
    """Write one cost: counts in full, seconds and the user's own figures to three digits."""
    if name in ("two_qubit_gates", "depth", "rotations", "t_count"):
        return count(int(value))
    return nearest(value)


def amount(name: str, value: float) -> str:
    """Write one cost with its unit."""
    words = cost_words(name)
    return f"{figure(name, value)} {words[:-1] if value == 1 and words.endswith('s') else words}"


def reason(rows: Sequence[PlanRow], cost: Sequence[str], tolerance: float) -> str:
    """Say in one sentence why the first of the ranked rows is recommended, or why none is."""
    best = rows[0]
    steps = f"{count(best.steps)} step{'' if best.steps == 1 else 's'}"
    if best.verdict != "meets":
        return (
            f"No way is shown to meet {plain(tolerance)}; the closest is {best.label} with {steps}, "
            f"whose error is at most {upper(best.error[1])}" + (f" ({best.note})." if best.note else ".")
        )
    if not best.room:
        closest = min(
            (row for row in rows if row.verdict == "meets"), key=lambda row: row.error[1] + (row.noise or 0.0)
        )
        return (
            f"No way that meets {plain(tolerance)} has room for the noise of the device; the closest is {closest.label}, "
            f"with an error of at most {upper(closest.error[1])} and at most {upper(closest.noise or 0.0)} from failing gates. "
            "trueturn budget weighs noise against steps."
        )
    by = cost[0]
    text = f"{best.label} with {steps} meets {plain(tolerance)} with {amount(by, best.costs[by])}"
    following = next((row for row in rows[1:] if row.room and row.costs[by] > best.costs[by]), None)
    if following is not None:
        text += f", the fewest here; next is {following.label} with {amount(by, following.costs[by])}"
    elif len(rows) > 1:
        equal = sum(row.room for row in rows) - 1
        if equal:
            text += f"; {equal} more cost{'s' if equal == 1 else ''} the same"
        elif any(row.verdict == "meets" for row in rows[1:]):
            text += "; no other way that meets it has room for the noise of the device"
        else:
            text += "; no other way meets it"
    return f"{text}."


def budget_words(tolerance: float, synthesis_error: float | None) -> str:
    """Say how the tolerance is shared."""
    if synthesis_error is None:
        return f"The whole tolerance of {plain(tolerance)} is the circuit's; no error of synthesis is counted."
    return (
        f"Of the tolerance of {plain(tolerance)}, {plain(synthesis_error)} is set aside for the synthesis of rotations; "
        f"circuits are held to the rest."
    )


def headline(plan: Plan) -> str:
    """Say in one sentence how many ways there are and how they fare."""
    tally = {name: sum(row.verdict == name for row in plan.rows) for name in ("meets", "misses", "undecided")}
    rest = ", ".join(f"{number} {name}" for name, number in tally.items() if name != "meets" and number)
    keep = "keeps" if tally["meets"] == 1 else "keep"
    total = f"{count(len(plan.rows))} way{'' if len(plan.rows) == 1 else 's'}"
    return f"{count(tally['meets'])} of {total} {keep} the {tolerance_words(plan)}" + (f" ({rest})" if rest else "")


def interruption(plan: Plan) -> str:
    """Say what an interrupt left undone."""
    left = len(plan.unsearched)
    rest = (
        f"{count(left)} way{' was' if left == 1 else 's were'} not begun" if left else "the last search is not complete"
    )
    return f"Interrupted: {rest}; what follows is the best so far."


def efficient_words(plan: Plan) -> str:
    """Say what the efficient rows are."""
    names = " and ".join(filter(None, (", ".join(map(cost_words, plan.compared[:-1])), cost_words(plan.compared[-1]))))
    return f"no other way that meets the tolerance beats it in {names}."


def grounds(plan: Plan) -> list[str]:
    """Say what a theorem asks for, how the tolerance is shared, and what the search took."""
    found = []
    row = next((row for row in plan.rows if row.overpays is not None), None)
    if row is not None:
        found.append(
            f"Proven for every start: {row.label} with {count(row.bound_steps or 0)} steps, "
            f"{nearest(row.overpays or 0.0, 2)} times the measured {count(row.steps)} ({row.bound_steps_source})."
        )
    if plan.synthesis_error is not None:
        found.append(budget_words(plan.tolerance, plan.synthesis_error))
    own = sum(not row.same_as for row in plan.rows)
    found.append(f"{count(plan.evolutions)} circuits were run for {count(own)} answer{'' if own == 1 else 's'}.")
    return found


def left_out(plan: Plan) -> list[str]:
    """Name the ways that were left out, those of one reason together."""
    by_reason: dict[str, list[str]] = {}
    for label, why in plan.left_out.items():
        by_reason.setdefault(why, []).append(label)
    return [f"Left out: {'; '.join(labels)} ({why})." for why, labels in by_reason.items()]


def error_words(row: PlanRow, plan: Plan) -> str:
    """Write a row's error interval, with enough digits to tell it from the error that is allowed."""
    return interval(*row.error, plan.allowed)


def bound_words(row: PlanRow) -> str:
    """Write the proven step count with how many times the least one it is, or a dash."""
    if row.bound_steps is None:
        return "–"
    if row.overpays is None:
        return count(row.bound_steps)
    return f"{count(row.bound_steps)} (×{nearest(row.overpays, 2)})"
