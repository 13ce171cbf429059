"""Measures least step counts over a range of sizes, times or tolerances."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass

from trueturn import _threads
from trueturn._observables import named_operators
from trueturn.accuracy import operator_error
from trueturn.audit.candidate import Candidate
from trueturn.audit.measure import Bench, judge
from trueturn.audit.result import Trial
from trueturn.audit.search import least_steps
from trueturn.audit.truth import Progress, positive_times, reference_for
from trueturn.errors import ArgumentError, AuditError
from trueturn.formulas import Formula
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.randomised.checks import finite
from trueturn.scaling.power_law import FEWEST_POINTS, fit_steps
from trueturn.scaling.result import Point, Scaling
from trueturn.state import State, require_same_qubits

__all__ = ["Case", "step_scaling"]

Measure = Callable[[Candidate, Partition, int], Trial]
QUANTITIES = ("observables", "state", "operator")

# A search starts a little below what the law of the smaller sizes says: mostly the first run misses and the next is right.
_BELOW = 0.95


@dataclass(frozen=True)
class Case:
    """What is to be reached at one size.

    Parameters
    ----------
    operator : Operator
        The Hamiltonian; ħ = 1.
    time : float
        Positive.
    tolerance : float
        On the error, absolute.
    state : State, optional
        Start; needed to measure errors of observables or of the state, not to extrapolate.
    observables : mapping of str to Operator, optional

    Raises
    ------
    ArgumentError, OperatorError, StateShapeError
        Something is of the wrong kind or on other qubits, or time or tolerance is not a positive number.
    """

    operator: Operator
    time: float
    tolerance: float
    state: State | None = None
    observables: Mapping[str, Operator] | None = None

    def __post_init__(self) -> None:
        if not isinstance(self.operator, Operator):
            raise _refused("operator", "is not an Operator", self.operator, "give the Hamiltonian")
        for argument, value in (("time", self.time), ("tolerance", self.tolerance)):
            finite(argument, value, "give one above zero")
            if value <= 0.0:
                raise _refused(argument, "is not above zero", value, "give a positive number")
        if self.state is not None:
            require_same_qubits(self.state, self.operator, "operator")
        for name, observable in named_operators(self.observables).items():
            if observable.qubits != self.operator.qubits:
                raise _refused(
                    f"observables[{name!r}]",
                    f"is not on the {self.operator.qubits} qubits of the Hamiltonian",
                    observable.qubits,
                    "give qubits= where it is made",
                )


def _refused(argument: str, what: str, value: object, remedy: str) -> ArgumentError:
    return ArgumentError(f"{argument}: {what} ({value!r}); {remedy}", argument=argument, value=value)


def step_scaling(
    case: Callable[[float], Case],
    sizes: Iterable[float],
    formulas: Sequence[str | Formula | Processed],
    rule: str = "commuting",
    quantity: str | None = None,
    *,
    variable: str = "qubits",
    most_steps: int = 1_000_000,
    threads: int | None = None,
    progress: Progress | None = None,
) -> Scaling:
    """Measure the least step count of each formula at each size, and fit steps = a · size^b.

    Parameters
    ----------
    case : callable
        Makes the `Case` of a size. What varies is up to it: qubits, the time, the tolerance (then b is negative).
    sizes : iterable of float
        At least three different ones; given to `case` as they are, in ascending order.
    formulas : sequence of str, Formula or Processed
    rule : str
        How each Hamiltonian is split into parts.
    quantity : "observables", "state" or "operator", optional
        Largest |<O>_S - <O>|, ‖ψ_S - ψ‖, or ‖S - exp(-iHt)‖ as by `operator_error`. Default: observables where a case has
        some, else the state.
    variable : str
        Name of what varies, for tables and pictures.
    most_steps : int
        Where a search gives up.
    threads : int, optional
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Scaling
        Counts with the law of each formula; `Scaling.extrapolate` carries them on to other sizes.

    Raises
    ------
    ArgumentError
        Too few sizes, no formulas, an unknown quantity, or `case` gives no Case.
    AuditError
        A case without the state or the observables that the quantity needs, or a search that found no step count.
    ToleranceError, MemoryRefusedError, StateShapeError
        As for an audit.

    Notes
    -----
    The least step count r is that of an audit: r and every tested count in [r, 2r] meet the tolerance. One reference for
    each size serves all formulas, and after three sizes a search starts from the law of the smaller ones.

    Examples
    --------
    >>> import trueturn as tt
    >>> def case(n):
    ...     chain = tt.model.ising(tt.lattice.chain(n), zz=-1.0, x=-0.7)
    ...     return tt.Case(chain, time=1.0, tolerance=1e-3, state=tt.State.product("0" * n))
    >>> found = tt.step_scaling(case, [3, 4, 5, 6], ["strang"])
    >>> found.counts["strang"]
    (21, 24, 26, 28)
    >>> found.laws["strang"].predict(50).extrapolated
    True
    """
    ordered = _sizes(sizes)
    if isinstance(formulas, (str, Formula, Processed)):
        formulas = [formulas]
    if not isinstance(formulas, Iterable):
        raise _refused("formulas", "is no list of formulas", formulas, 'give one such as ["lie", "strang"]')
    candidates = [Candidate(entry, rule) for entry in formulas]  # type: ignore[arg-type]
    names = [candidate.formula.name for candidate in candidates]
    if not names or len(set(names)) < len(names):
        what = "two of one name" if names else "none"
        raise ArgumentError(
            f"formulas: {what} ({', '.join(names)}); give each formula once", argument="formulas", value=formulas
        )
    if quantity not in (None, *QUANTITIES):
        raise ArgumentError(
            f"quantity: unknown ({quantity!r}); give one of {', '.join(map(repr, QUANTITIES))}",
            argument="quantity",
            value=quantity,
        )
    workers = _threads.resolve(threads)
    points: list[Point] = []
    total = len(ordered) * len(candidates)
    for size in ordered:
        found = checked_case(case, size)
        measure = _measure(found, size, quantity, workers)
        for candidate in candidates:
            if progress is not None:
                progress(f"{variable} {size:g}: {candidate.formula.name}", len(points), total)
            known = [point for point in points if point.formula == candidate.formula.name]
            points.append(_least(measure, candidate, found, size, known, most_steps))
    if progress is not None:
        progress("done", total, total)
    return Scaling(
        points=tuple(points),
        laws={
            name: fit_steps(ordered, [point.steps for point in points if point.formula == name], variable)
            for name in names
        },
        candidates=tuple(candidates),
        case=case,
        variable=variable,
        quantity=quantity,
    )


def checked_case(case: Callable[[float], Case], size: float) -> Case:
    """Make the case of a size and look at it."""
    if not callable(case):
        raise _refused("case", "is no function of the size", case, "give one that returns a trueturn.Case")
    found = case(size)
    if not isinstance(found, Case):
        raise ArgumentError(
            f"case: gives no Case at {size:g} ({type(found).__name__}); return trueturn.Case(operator, time, tolerance, …)",
            argument="case",
            value=found,
        )
    return found


def _sizes(sizes: Iterable[float]) -> list[float]:
    try:
        ordered = sorted(sizes)
        enough = len(set(ordered)) >= FEWEST_POINTS and all(size > 0.0 for size in ordered)
    except TypeError:
        enough = False
    if not enough:
        raise ArgumentError(
            f"sizes: too few for a fit, or not numbers above zero ({sizes!r}); give at least {FEWEST_POINTS} different ones",
            argument="sizes",
            value=sizes,
        )
    return ordered


def _measure(case: Case, size: float, quantity: str | None, threads: int) -> Measure:
    """Return what runs a candidate with some steps and gives the trial."""
    times = positive_times(case.time)
    watched = named_operators(case.observables) if quantity in (None, "observables") else {}
    asked = quantity or ("observables" if watched else "state")
    if asked == "operator":

        def distance(candidate: Candidate, partition: Partition, steps: int) -> Trial:
            circuit = candidate.formula.rotations(partition, times[0], steps)
            low, high = operator_error(
                circuit, case.operator, times[0], angle_roundings=Formula.ANGLE_ROUNDINGS, threads=threads
            )
            return Trial(steps, (low, high), judge((low, high), case.tolerance), circuit.two_qubit_gates())

        return distance
    missing = "state" if case.state is None else "observables" if asked == "observables" and not watched else ""
    if case.state is None or missing:
        raise AuditError(
            f"case: has no {missing} to measure with (at {size:g}); give {missing}=", reason=f"no {missing}", limit=None
        )
    keep = "all" if asked == "state" else "last"
    truth = reference_for(
        case.operator, case.state, times, case.tolerance, None, watched, keep=keep, threads=threads, progress=None
    )
    bench = Bench(case.state, times, truth, case.tolerance, asked, watched, None, "along", threads)
    return lambda candidate, partition, steps: bench.measure(candidate, partition, steps).trial


def _least(
    measure: Measure, candidate: Candidate, case: Case, size: float, known: Sequence[Point], most_steps: int
) -> Point:
    partition = candidate.partition(case.operator)
    first = 1
    if len({point.size for point in known}) >= FEWEST_POINTS:
        law = fit_steps([point.size for point in known], [point.steps for point in known])
        first = max(1, min(most_steps, int(_BELOW * law(size))))
    found = least_steps(
        lambda steps: measure(candidate, partition, steps),
        case.tolerance,
        candidate.formula.order,
        most_steps=most_steps,
        first=first,
    )
    if not found.found:
        raise AuditError(
            f"most_steps: too few for {candidate.label} at {size:g} ({most_steps}, tried {found.steps}); give more, a "
            "larger tolerance or smaller sizes",
            reason="no step count found",
            limit=most_steps,
        )
    chosen = next(trial for trial in found.trials if trial.steps == found.steps)
    assert chosen.two_qubit_gates is not None  # candidates are formulas, whose gates are known
    return Point(
        candidate.formula.name,
        size,
        found.steps,
        chosen.error,
        chosen.two_qubit_gates,
        len(found.trials),
        found.accidental,
    )
