"""The sentences of a budget."""

from __future__ import annotations

from collections.abc import Sequence

from trueturn.audit.figures import count, nearest, plain, upper
from trueturn.device.result import Spending

__all__ = ["ASSUMPTIONS", "statement"]

ASSUMPTIONS = (
    "Each two-qubit gate in the causal cone fails independently with the given probability, and a failure may do anything "
    "to its two qubits; one-qubit gates, preparation and readout are perfect. Under this model the gates' share is proven. "
    "Errors that always point the same way are not covered.",
    "Two-qubit gates are 2(w-1) for a rotation of weight w, as the circuit is given; nothing is routed.",
)


def statement(rows: Sequence[Spending], tolerance: float, width: float, rate: float) -> str:
    """Say the answer in plain words: what to run, or what stands in the way and what would help."""
    for row in rows:
        if row.verdict == "meets":
            fewer = (
                ""
                if row.fewest_steps is None or row.fewest_steps == row.steps
                else f"; by its law {count(row.fewest_steps)} steps suffice"
            )
            return (
                f"{row.label} with {count(row.steps)} steps has the least total of those that meet {plain(tolerance)}: "
                f"{upper(row.total, 3)}{fewer}."
            )
    best = rows[0]
    fixed = best.synthesis + best.shots
    if best.shots > tolerance:
        return (
            f"No step count meets {plain(tolerance)}: shots alone are off by up to {nearest(best.shots)}; "
            f"{_shots_words(best)}."
        )
    if best.synthesis > tolerance:
        return f"No step count meets {plain(tolerance)}: synthesis alone is off by up to {nearest(best.synthesis)}."
    shares = (
        f"algorithm {nearest(best.algorithmic)}, gates {nearest(best.gates)}"
        + (f", synthesis {nearest(best.synthesis)}" if best.synthesis else "")
        + (f", shots {nearest(best.shots)}" if best.shots else "")
    )
    useless = " That is no better than a guess." if best.total - fixed >= width else ""
    rates = [(row.allowed_error, row.label) for row in rows if row.allowed_error is not None]
    if rates:
        needed, label = max(rates)
        remedy = f" A two-qubit error rate of {nearest(needed)} instead of {plain(rate)} would do, with {label}."
    else:
        remedy = " Not even perfect gates would do within the step counts searched."
    return (
        f"No step count meets {plain(tolerance)}. The least total is {upper(best.total, 3)}, by {best.label} with "
        f"{count(best.steps)} steps ({shares}).{useless}{remedy}"
    )


def _shots_words(row: Spending) -> str:
    if row.needed_shots is None:
        return "and with the other shares no number of shots is enough"
    return f"{count(row.needed_shots)} shots are needed"
