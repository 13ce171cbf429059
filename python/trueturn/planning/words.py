"""The sentences of a plan."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from trueturn.audit.figures import count, nearest, plain, upper
from trueturn.planning.costs import cost_words

if TYPE_CHECKING:
    from trueturn.planning.result import PlanRow

__all__ = ["CAUTIONS", "amount", "bound_words", "budget_words", "figure", "reason"]

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
    by = cost[0]
    text = f"{best.label} with {steps} meets {plain(tolerance)} with {amount(by, best.costs[by])}"
    following = next((row for row in rows[1:] if row.verdict == "meets" and row.costs[by] > best.costs[by]), None)
    if following is not None:
        text += f", the fewest here; next is {following.label} with {amount(by, following.costs[by])}"
    elif len(rows) > 1:
        equal = sum(row.verdict == "meets" for row in rows) - 1
        text += f"; {equal} more cost the same" if equal else "; no other way meets it"
    return f"{text}."


def budget_words(tolerance: float, synthesis_error: float | None) -> str:
    """Say how the tolerance is shared."""
    if synthesis_error is None:
        return f"The whole tolerance of {plain(tolerance)} is the circuit's; no error of synthesis is counted."
    return (
        f"Of the tolerance of {plain(tolerance)}, {plain(synthesis_error)} is set aside for the synthesis of rotations; "
        f"circuits are held to the rest."
    )


def bound_words(row: PlanRow) -> str:
    """Write the proven step count with how many times the least one it is, or a dash."""
    if row.bound_steps is None:
        return "–"
    if row.overpays is None:
        return count(row.bound_steps)
    return f"{count(row.bound_steps)} (×{nearest(row.overpays, 2)})"
