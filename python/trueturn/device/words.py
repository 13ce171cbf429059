"""The sentences of a budget."""

from __future__ import annotations

from collections.abc import Sequence

from trueturn.audit.figures import count, nearest, plain, upper
from trueturn.device.result import Spending

__all__ = ["FAILURES", "statement", "steps_words"]

FAILURES = (
    "Each two-qubit gate in the causal cone fails independently with the given probability, and a failure may do anything "
    "to its two qubits; one-qubit gates, preparation and readout are perfect. Under this model the gates' share is proven. "
    "Errors that always point the same way are not covered."
)


def statement(rows: Sequence[Spending], tolerance: float, width: float, rate: float) -> str:
    """Say the answer in plain words: what to run, or what stands in the way and what would help."""
    for row in rows:
        if row.verdict == "meets":
            fewer = (
                ""
                if row.fewest_steps is None or row.fewest_steps == row.steps
                else f"; by its law {steps_words(row.fewest_steps)} suffice"
            )
            merit = "least total" if rate > 0.0 else "fewest gates"
            return (
                f"{row.label} with {steps_words(row.steps)} has the {merit} of those that meet {plain(tolerance)}: total "
                f"{upper(row.total, 3)}{fewer}."
            )
    best = rows[0]
    if best.shots > tolerance:
        needed = (
            "with the other shares no number of shots is enough"
            if best.needed_shots is None
            else f"{count(best.needed_shots)} are needed, with {best.label}"
        )
        return f"No step count meets {plain(tolerance)}: shots alone are off by up to {nearest(best.shots)}; {needed}."
    if best.synthesis > tolerance:
        return f"No step count meets {plain(tolerance)}: synthesis alone is off by up to {nearest(best.synthesis)}."
    rates = [(row.allowed_error, row.label) for row in rows if row.allowed_error is not None]
    if rates:
        enough, label = max(rates)
        remedy = f"A two-qubit error rate of {nearest(enough)} instead of {plain(rate)} would do, with {label}."
    else:
        remedy = "Not even perfect gates would do within the step counts searched."
    if best.total - best.shots >= width:
        return f"No step count meets {plain(tolerance)}, and none is better than a guess. {remedy}"
    shares = (
        f"algorithm {nearest(best.algorithmic)}, gates {nearest(best.gates)}"
        + (f", synthesis {nearest(best.synthesis)}" if best.synthesis else "")
        + (f", shots {nearest(best.shots)}" if best.shots else "")
    )
    return (
        f"No step count meets {plain(tolerance)}. The least total is {upper(best.total, 3)}, by {best.label} with "
        f"{steps_words(best.steps)} ({shares}). {remedy}"
    )


def steps_words(steps: int) -> str:
    """Write a step count."""
    return f"{count(steps)} step{'s' if steps > 1 else ''}"
