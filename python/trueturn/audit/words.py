"""The sentences of an audit: recommendation, notes, assumptions, cautions."""

from __future__ import annotations

import math
from collections.abc import Sequence

from trueturn.audit.base_candidate import BaseCandidate
from trueturn.audit.figures import plain, upper
from trueturn.audit.given_circuit import GivenCircuit
from trueturn.audit.implementation import Implementation
from trueturn.audit.operator_measure import CONFIDENCE
from trueturn.audit.result import Row
from trueturn.audit.search import Search
from trueturn.reference import Reference
from trueturn.state import State

__all__ = ["CAUTIONS", "assumptions", "cautions", "measured", "proven", "recommendation", "search_note", "start"]

CAUTIONS = (
    "The verdict is about the ideal circuit. It does not validate hardware: gate errors, drifts, crosstalk and readout "
    "errors need a validation of their own.",
    "It holds for this start state, these times and these observables. Another start or another observable can have a "
    "larger error at the same step count.",
    "Errors need not fall evenly with the step count: step counts between and beyond the tested ones were not run.",
    "Gate counts of formulas take 2(w-1) two-qubit gates for a rotation on w qubits with all qubits connected, before any "
    "compilation or routing.",
)
_FOR_EVERY_START = (
    "It holds for every start state at these times; a given start usually errs by less and would need fewer steps."
)


def cautions(quantity: str) -> tuple[str, ...]:
    """Return what to mind."""
    if quantity != "operator":
        return CAUTIONS
    return (CAUTIONS[0], _FOR_EVERY_START, *CAUTIONS[2:])


def start(given: str, state: State, quantity: str) -> str:
    """Return the start state in words."""
    if quantity == "operator":
        return "every state"
    return given or f"a given state vector of {state.qubits} qubits"


def assumptions(
    state: State, readout: str, relative_to: str | None, quantity: str, candidates: Sequence[BaseCandidate]
) -> tuple[str, ...]:
    """Return what was taken as given."""
    single = state.dtype.itemsize == 8 and quantity != "operator"
    how = (
        "One circuit of equal steps to the last time, read on the way at each time."
        if readout == "along"
        else "A circuit of its own for each time, each with the stated number of steps."
    )
    scale = "Errors are divided by a proven bound on each observable's norm." if relative_to else "Errors are absolute."
    own = ", ".join(candidate.name for candidate in candidates if isinstance(candidate, Implementation))
    exactly = "The Hamiltonian is exactly as given; the start is any unit vector"
    if quantity != "operator":
        exactly = "The Hamiltonian and the start state are exactly as given"
    taken: tuple[str, ...] = (
        f"{exactly}; ħ = 1.",
        how,
        scale,
        f"Candidates ran in {'single' if single else 'double'} precision on a noiseless state vector.",
    )
    if any(isinstance(candidate, GivenCircuit) and candidate.from_file for candidate in candidates):
        taken = (
            *taken,
            "Gates of circuits from files are those of the files, a swap being three; rotations are what they come to.",
        )
    if not own:
        return taken
    return (*taken, f"What {own} computed is judged as it came back, its own rounding included; its cost is not known.")


def proven(reference: Reference) -> tuple[str, ...]:
    """Return what is proven."""
    certificate = reference.certificate
    found = [
        f"Reference ({certificate.method}): within {upper(certificate.largest)} of the exact state at every time, "
        f"{'every part proven' if certificate.proven else 'partly estimated (see the notes)'}.",
        "Rounding of each candidate's run: bounded rotation by rotation and added to both ends of the error interval.",
        "The column of bounds, where a theorem covers the formula: holds for every start state. Each takes a limited "
        "amount of work; trueturn bound spends more and is often tighter.",
    ]
    return (*found, *certificate.notes)


def measured(quantity: str, reference_proven: bool) -> tuple[str, ...]:
    """Return what was only measured."""
    least = (
        "The least step counts: the smallest that met the tolerance together with every tested count up to its double."
    )
    if quantity == "operator":
        if reference_proven:
            how = (
                "The error intervals: the lower end is proven, by a vector on which candidate and exact evolution differ "
                f"so much; each upper end holds with a probability of at least {CONFIDENCE:g} over a random start of power "
                "iteration."
            )
        else:
            how = "The error intervals: whole matrices of candidate and exact evolution, with rounding estimated."
        return how, least
    what = "state distance" if quantity == "state" else "observables"
    return (
        f"The error intervals: the {what} of candidate and reference were both computed and compared; the interval holds "
        "the true error of this circuit on this start state"
        + ("." if reference_proven else ", as far as the estimated part of the reference's bound does."),
        least,
    )


def recommendation(rows: Sequence[Row], tolerance: float) -> tuple[Row | None, str]:
    """Return the row to use and why, in one sentence."""
    fitting = sorted((row for row in rows if row.verdict == "meets"), key=_cost)
    if not fitting:
        closest = min(rows, key=lambda row: row.error[1])
        return None, (
            f"No candidate is shown to meet {plain(tolerance)}; the closest is {_run_of(closest)}, "
            f"whose error is at most {upper(closest.error[1])}."
        )
    best = fitting[0]
    if best.two_qubit_gates is None:
        unknown = "cost is" if best.rotations is None else "gates are"
        return (
            best,
            f"{_run_of(best)} meets {plain(tolerance)}; its {unknown} not known, so nothing is called cheapest.",
        )
    reason = f"{_run_of(best)} meets {plain(tolerance)} with {_gates(best)}"
    if len(fitting) == 1:
        others = "it is the only candidate" if len(rows) == 1 else "no other candidate meets it"
        return best, f"{reason}; {others}."
    return best, f"{reason}, the fewest here; next is {fitting[1].label} with {_gates(fitting[1])}."


def _cost(row: Row) -> tuple[float, float]:
    """Order by two-qubit gates, then rotations; what is not known comes last."""
    if row.two_qubit_gates is None or row.rotations is None:
        return math.inf, math.inf
    return row.two_qubit_gates, row.rotations


def _run_of(row: Row) -> str:
    return row.label if row.candidate.steps_words == "as given" else f"{row.label} with {_steps(row.steps)}"


def _gates(row: Row) -> str:
    if row.two_qubit_gates is None:
        return "unknown cost"
    if row.two_qubit_gates:
        return f"{row.two_qubit_gates} two-qubit gate{'' if row.two_qubit_gates == 1 else 's'}"
    return f"no two-qubit gates and {row.rotations} rotation{'' if row.rotations == 1 else 's'}"


def _steps(count: int) -> str:
    return f"{count} step{'' if count == 1 else 's'}"


def search_note(search: Search, tolerance: float, most_steps: int) -> str:
    """Return what the reader must know about a search, or nothing."""
    parts = []
    if not search.found:
        last = search.trials[-1]
        if last.error[1] - last.error[0] > 2.0 * tolerance:
            parts.append(
                f"rounding alone leaves the error undecided at {last.steps} steps; more steps only add to it, "
                "use a larger tolerance or double precision"
            )
        else:
            parts.append(f"no step count up to {min(most_steps, last.steps)} meets the tolerance")
    if search.found and search.cut_off:
        parts.append(f"step counts above {most_steps} were not tried, so the look at its double is not complete")
    if search.accidental:
        counts = ", ".join(map(str, search.accidental))
        parts.append(f"met by accident at {counts}: a larger tested step count misses")
    return "; ".join(parts)
