"""What a budget is asked with: clean values, or an error that names the argument."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from numbers import Integral, Real

from trueturn.audit.candidate import Candidate
from trueturn.errors import ArgumentError, OperatorError
from trueturn.formulas import Formula
from trueturn.formulas.arguments import checked_time
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.state import State, require_same_qubits

__all__ = [
    "between",
    "check_counts",
    "checked_candidates",
    "checked_laws",
    "checked_problem",
    "checked_rate",
    "checked_variance",
    "positive",
]


def checked_candidates(candidates: object) -> list[Candidate]:
    """Give candidates; a formula alone is taken with the rule "commuting"."""
    if isinstance(candidates, (str, Formula, Processed, Candidate)):
        candidates = [candidates]
    if not isinstance(candidates, Sequence) or not candidates:
        raise ArgumentError(
            f"candidates: no list of formulas ({candidates!r}); give at least one",
            argument="candidates",
            value=candidates,
        )
    return [entry if isinstance(entry, Candidate) else Candidate(entry) for entry in candidates]


def checked_problem(
    operator: object, time: object, observable: object, tolerance: object, state: State | None
) -> float:
    """Give the time, after a look at the rest."""
    moment = checked_time(time)
    positive("tolerance", tolerance, "0.01")
    if not isinstance(operator, Operator):
        raise ArgumentError(
            f"operator: no Operator ({type(operator).__name__}); give the Hamiltonian",
            argument="operator",
            value=operator,
        )
    if not isinstance(observable, Operator) or observable.qubits != operator.qubits:
        what = f"on {observable.qubits} qubits" if isinstance(observable, Operator) else type(observable).__name__
        raise OperatorError(
            f"observable: no Operator on the {operator.qubits} qubits of the Hamiltonian ({what}); give one that is",
            argument="observable",
        )
    if not observable.support():
        raise OperatorError("observable: acts on no qubit; give one that is more than a number", argument="observable")
    if state is not None:
        require_same_qubits(state, operator, "operator")
        if moment <= 0.0:
            raise ArgumentError(
                f"time: not above zero ({time!r}); give one to measure at, or leave the state out",
                argument="time",
                value=time,
            )
    return moment


def checked_laws(algorithmic: object) -> Mapping[str, Callable[[int], float]]:
    """Give functions of the step count by candidate."""
    if algorithmic is None:
        return {}
    remedy = 'give functions of the step count by candidate, such as {"strang": lambda r: 0.2 / r**2}'
    if not isinstance(algorithmic, Mapping):
        raise ArgumentError(
            f"algorithmic: is no mapping ({algorithmic!r}); {remedy}", argument="algorithmic", value=algorithmic
        )
    for name, law in algorithmic.items():
        if not callable(law):
            raise ArgumentError(
                f"algorithmic[{name!r}]: is no function ({law!r}); {remedy}", argument="algorithmic", value=law
            )
    return algorithmic


def checked_rate(value: object) -> float:
    """Give a probability below 1."""
    if is_real(value) and 0.0 <= float(value) < 1.0:  # type: ignore[arg-type]
        return float(value)  # type: ignore[arg-type]
    raise ArgumentError(
        f"two_qubit_error: no possible rate ({value!r}); give a probability from 0 to below 1, such as 0.003",
        argument="two_qubit_error",
        value=value,
    )


def check_counts(shots: object, most_steps: object) -> None:
    """Refuse shots and step counts that are no positive whole numbers."""
    for argument, value, example in (("shots", shots, "10000"), ("most_steps", most_steps, "1000000")):
        if argument == "shots" and value is None:
            continue
        if isinstance(value, bool) or not isinstance(value, Integral) or value < 1:
            raise ArgumentError(
                f"{argument}: not a positive whole number ({value!r}); give 1 or more, such as {example}",
                argument=argument,
                value=value,
            )


def checked_variance(value: object) -> float | None:
    """Give a variance, or None for None."""
    if value is None or (is_real(value) and 0.0 <= float(value) < math.inf):  # type: ignore[arg-type]
        return None if value is None else float(value)  # type: ignore[arg-type]
    raise ArgumentError(
        f"variance: not a number from 0 ({value!r}); give that of one shot", argument="variance", value=value
    )


def between(argument: str, value: object, remedy: str) -> float:
    """Give a number between 0 and 1."""
    if is_real(value) and 0.0 < float(value) < 1.0:  # type: ignore[arg-type]
        return float(value)  # type: ignore[arg-type]
    raise ArgumentError(f"{argument}: not between 0 and 1 ({value!r}); give {remedy}", argument=argument, value=value)


def positive(argument: str, value: object, example: str) -> float:
    """Give a finite number above 0."""
    if is_real(value) and 0.0 < float(value) < math.inf:  # type: ignore[arg-type]
        return float(value)  # type: ignore[arg-type]
    raise ArgumentError(
        f"{argument}: not a positive finite number ({value!r}); give one, such as {example}",
        argument=argument,
        value=value,
    )


def is_real(value: object) -> bool:
    """Whether this is a real number that a float can hold, and no truth value."""
    if not isinstance(value, Real) or isinstance(value, bool):
        return False
    try:
        float(value)
    except OverflowError:
        return False
    return True
