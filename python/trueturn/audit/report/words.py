"""The sentences that the terminal, the page and audit.json share."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from trueturn._terms_file import one_a_line
from trueturn.audit.figures import count, interval, outward, plain, upper

if TYPE_CHECKING:
    from trueturn.audit.result import Audit, PointError, Row
    from trueturn.operator import Operator

__all__ = [
    "HARDWARE",
    "asked_words",
    "certificate_line",
    "cost_words",
    "headline",
    "operator_lines",
    "recommendation",
    "tolerance_words",
    "worst",
    "worst_words",
]

HARDWARE = (
    "This is a verdict on ideal circuits. It does not validate a machine: noise, calibration and shot "
    "statistics need their own validation."
)


def tolerance_words(audit: Audit) -> str:
    """Say what is asked of a candidate, to follow "keep the" or to stand alone."""
    tolerance = plain(audit.tolerance)
    when = f"at t = {plain(audit.times[0])}" if len(audit.times) == 1 else f"at each of {len(audit.times)} times"
    if audit.quantity != "observables":
        return f"{audit.quantity} error within {tolerance} {when}"
    share = " of its norm" if audit.relative_to == "norm" else ""
    which = "the observable" if len(audit.observables) == 1 else f"each of {len(audit.observables)} observables"
    return f"error within {tolerance}{share} on {which} {when}"


def headline(audit: Audit) -> str:
    """Say in one sentence how the candidates fare."""
    total, asked = len(audit.rows), tolerance_words(audit)
    if total == 1:
        fares = {"meets": "the candidate keeps the", "misses": "the candidate does not keep the"}
        return f"{fares.get(audit.verdict, 'it is undecided whether the candidate keeps the')} {asked}"
    tally = {name: sum(row.verdict == name for row in audit.rows) for name in ("meets", "misses", "undecided")}
    rest = ", ".join(f"{number} {name}" for name, number in tally.items() if name != "meets" and number)
    keep = "keeps" if tally["meets"] == 1 else "keep"
    return f"{tally['meets']} of {total} candidates {keep} the {asked}" + (f" ({rest})" if rest else "")


def recommendation(audit: Audit) -> str:
    """Say which candidate to run and why, or why none."""
    return f"{'No recommendation' if audit.recommended is None else 'Recommended'}: {audit.reason}"


def worst(row: Row) -> PointError | None:
    """Find the point with the largest upper end of its error."""
    return max(row.points, key=lambda point: point.error[1], default=None)


def worst_words(row: Row, audit: Audit) -> str:
    """Name the observable and time of the largest error."""
    point = worst(row)
    if point is None:
        return ""
    if audit.quantity != "observables":
        return f"t = {plain(point.time)}"
    return f"{point.name}, t = {plain(point.time)}"


def certificate_line(audit: Audit) -> str:
    """Describe the reference and its certificate in one sentence."""
    certificate = audit.reference.certificate
    bound = max(certificate.error_bound.values())
    kind = "proven" if certificate.proven else "estimated, not proven"
    low, high = certificate.spectral_interval
    return (
        f"Reference ({certificate.method}): state error ≤ {upper(bound)} at every time, {kind} "
        f"(truncation {upper(max(certificate.truncation.values()))}, "
        f"rounding {upper(max(certificate.rounding.values()))}); "
        f"{count(certificate.applications)} operator applications, spectrum within {outward(low, high)}."
    )


def error_words(row: Row, audit: Audit) -> str:
    """Write a row's error interval."""
    return interval(*row.error, audit.tolerance)


def bound_words(row: Row) -> str:
    """Write a row's proven bound, or a dash."""
    if row.bound is None or not math.isfinite(row.bound):
        return "–"
    return upper(row.bound)


def cost_words(value: int | None) -> str:
    """Write a cost, or a dash where it is not known."""
    return "–" if value is None else count(value)


def asked_words(row: Row) -> str:
    """Write what was asked of the steps: a number, ``least``, or that the circuit is as given."""
    candidate = row.candidate
    return candidate.steps_words if candidate.steps_words == "as given" else str(candidate.steps)


def steps_words(row: Row) -> str:
    """Write the steps; a searched step count that failed is the largest tried, a circuit as given has none."""
    if row.candidate.steps_words == "as given":
        return "–"
    if row.candidate.steps == "least" and row.verdict != "meets":
        return f"to {count(row.steps)}"
    return count(row.steps)


def operator_lines(operator: Operator, limit: int | None = None) -> list[str]:
    """Write an operator one term a line; beyond `limit` terms, a last line counts the rest."""
    lines = terms_of(operator)
    if limit is None or len(lines) <= limit:
        return lines
    return [*lines[:limit], f"# and {count(len(lines) - limit)} more terms"]


def terms_of(operator: Operator) -> list[str]:
    """Write every term of an operator as text that reads back."""
    return one_a_line(str(operator))


def value_words(value: float) -> str:
    """Write an expectation value, or a dash where there is none."""
    return "–" if math.isnan(value) else f"{value:+.6f}"
