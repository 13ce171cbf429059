"""Measures every formula at the step counts that fill the budgets."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace
from operator import index

from trueturn import _memory, _threads
from trueturn._observables import named_operators
from trueturn.audit.candidate import Candidate
from trueturn.audit.measure import Bench
from trueturn.comparison.result import Comparison, Point, efficient, unit_words
from trueturn.errors import ArgumentError, AuditError, FormulaError, PartitionError, ToleranceError
from trueturn.formulas import Formula
from trueturn.formulas import formulas as known_formulas
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference import Reference, reference
from trueturn.rotations import Rotations
from trueturn.state import State, require_same_qubits

__all__ = ["compare"]

Progress = Callable[[str, float, float], object]
COSTS: Mapping[str, Callable[[Rotations], int]] = {
    "two_qubit_gates": lambda circuit: circuit.two_qubit_gates(),
    "rotations": lambda circuit: circuit.count,
}
QUANTITIES = ("observables", "state")
# The budgets where none are given: this many steps of the cheapest formula.
DEFAULT_STEPS = (4, 8, 16, 32, 64, 128, 256)
MOST_STEPS = 10_000_000


def compare(
    operator: Operator,
    state: State,
    time: float,
    formulas: Iterable[str | Formula | Processed] | None = None,
    rule: str | Partition = "commuting",
    budgets: Iterable[int] | None = None,
    observables: Mapping[str, Operator] | None = None,
    quantity: str | None = None,
    *,
    cost: str = "two_qubit_gates",
    reference_tolerance: float | None = None,
    threads: int | None = None,
    progress: Progress | None = None,
) -> Comparison:
    """Compare formulas at equal cost.

    Parameters
    ----------
    operator : Operator
        The Hamiltonian; ħ = 1.
    state : State
        Start; not written.
    time : float
        Positive, in inverse units of the coefficients.
    formulas : iterable of str, Formula or Processed, optional
        Default: all that are registered; those that cannot be run on these parts are then left out with the reason.
    rule : str or Partition
        How the Hamiltonian is split into parts, the same for all.
    budgets : iterable of int, optional
        For each the largest step count whose circuit costs no more is run. Default: the cost of 4, 8, …, 256 steps of the
        cheapest formula.
    observables : mapping of str to Operator, optional
    quantity : "observables" or "state", optional
        Largest |<O>_S - <O>| over `observables`, or ‖ψ_S - ψ‖ with the global phase kept. Default: observables where
        some are given.
    cost : "two_qubit_gates" or "rotations"
        What budgets count: 2(w-1) for each rotation of weight w, or rotations after merging.
    reference_tolerance : float, optional
        Error bound asked of the reference state. Default 1e-11, or what double precision can certify.
    threads : int, optional
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Comparison

    Raises
    ------
    ArgumentError
        Time, budgets, quantity, cost or rule are out of range; a budget below the cost of one step of every formula, or
        a named formula of which no step fits the largest budget (the message says the least); the parts are one, or
        their cost does not grow with the steps, so that there is nothing to compare at equal cost.
    AuditError
        No formulas, two of one name, or no observables where their errors are asked for.
    FormulaError
        A name is not registered, or a named formula cannot be run on these parts.
    PartitionError
        Unknown rule, or own parts that do not sum to the Hamiltonian.
    StateShapeError
        The state is on another number of qubits than the operator or an observable.
    ToleranceError
        `reference_tolerance` cannot be certified in double precision.
    MemoryRefusedError
        Six state vectors do not fit.

    Notes
    -----
    Errors are intervals, as in an audit: measured ∓ (reference bound + rounding). Two-qubit gates are
    counted rotation by rotation: nothing is saved by recognising patterns, for any formula. Run time: the steps of all
    points; a budget costs about as much time with one formula as with another.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.comparison import compare
    >>> chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7)
    >>> found = compare(chain, tt.State.product("0000"), 1.0, ["lie", "strang", "suzuki-4"], budgets=[60, 600])
    >>> [found.at_budget(budget)[0].formula for budget in found.budgets]
    ['strang', 'suzuki-4']
    """
    watched = named_operators(observables)
    asked = quantity if quantity is not None else "observables" if watched else "state"
    moment = _check(operator, state, time, watched, asked, cost)
    workers = _threads.resolve(threads)
    partition = Candidate("strang", rule, 1).partition(operator)  # type: ignore[arg-type]
    chosen, left_out = _candidates(partition, formulas, rule, moment)
    price = COSTS[cost]

    def priced(candidate: Candidate, steps: int) -> int:
        return price(candidate.formula.rotations(partition, moment, steps))

    least = {candidate.formula.name: priced(candidate, 1) for candidate in chosen}
    limits = _budgets(budgets, chosen, least, priced, cost, len(partition.parts), named=formulas is not None)
    _memory.require(6 * (16 << state.qubits), "compare", 6)
    counts = {
        candidate.formula.name: _step_counts(candidate, limits, least[candidate.formula.name], priced)
        for candidate in chosen
    }
    truth = _reference(operator, state, moment, reference_tolerance, watched, asked, workers, progress)
    bench = Bench(state, [moment], truth, math.inf, asked, watched, None, "along", workers)
    total = sum(len(found) for found in counts.values())
    points: list[Point] = []
    for candidate in chosen:
        for steps, filled in counts[candidate.formula.name].items():
            if progress is not None:
                progress(f"{candidate.label}: {steps} steps", len(points), total)
            measured = bench.measure(candidate, partition, steps)
            assert measured.circuit is not None
            points.append(
                Point(candidate.formula.name, steps, price(measured.circuit), measured.trial.error, tuple(filled))
            )
    if progress is not None:
        progress("done", total, total)
    marks = efficient([(point.cost, point.error) for point in points])
    return Comparison(
        points=tuple(
            replace(point, on_front=on_front, certain=certain)
            for point, (on_front, certain) in zip(points, marks, strict=True)
        ),
        formulas=tuple(name for name, found in counts.items() if found),
        budgets=tuple(limits),
        cost=cost,
        rule=rule if isinstance(rule, str) else "own parts",
        time=moment,
        quantity=asked,
        least=least,
        left_out=left_out,
        reference=truth,
    )


def _candidates(
    partition: Partition, formulas: Iterable[str | Formula | Processed] | None, rule: str | Partition, time: float
) -> tuple[list[Candidate], dict[str, str]]:
    if isinstance(formulas, (str, Formula, Processed)):
        formulas = [formulas]
    given = known_formulas() if formulas is None else list(formulas)
    chosen: list[Candidate] = []
    left_out: dict[str, str] = {}
    for entry in given:
        try:
            candidate = Candidate(entry, rule, 1)  # type: ignore[arg-type]
            candidate.formula.rotations(partition, time, 1)
        except (FormulaError, PartitionError) as refusal:
            if formulas is not None:
                raise
            left_out[str(entry)] = str(refusal)
            continue
        if any(candidate.formula.name == other.formula.name for other in chosen):
            raise AuditError(
                f"formulas: two of one name ({candidate.formula.name!r}); give each its own",
                reason="two formulas of one name",
                limit=None,
            )
        chosen.append(candidate)
    if not chosen:
        raise AuditError(
            f"formulas: none to compare ({formulas!r}); see trueturn.formulas()", reason="no formulas", limit=None
        )
    return chosen, left_out


def _budgets(
    budgets: Iterable[int] | None,
    chosen: Sequence[Candidate],
    least: Mapping[str, int],
    priced: Callable[[Candidate, int], int],
    cost: str,
    parts: int,
    *,
    named: bool,
) -> list[int]:
    """Return the budgets, ascending and distinct, or refuse those that cannot be filled."""
    cheapest = min(chosen, key=lambda candidate: least[candidate.formula.name])
    floor = least[cheapest.formula.name]
    unit = unit_words(cost)
    if parts == 1:
        raise ArgumentError(
            "rule: makes one part (all terms commute), of which every formula is exact in one step; "
            "there is nothing to compare",
            argument="rule",
            value=parts,
        )
    if priced(cheapest, 3) == floor:
        raise ArgumentError(
            f"cost: {unit} do not grow with the steps ({floor} for any number of them); use cost='rotations'",
            argument="cost",
            value=cost,
        )
    if budgets is None:
        return [priced(cheapest, steps) for steps in DEFAULT_STEPS]
    try:
        asked = list(budgets)
        if not asked or any(isinstance(budget, bool) for budget in asked):
            raise TypeError
        given = [index(budget) for budget in asked]
    except TypeError:
        raise ArgumentError(
            f"budgets: not whole numbers ({budgets!r}); give a list of at least one limit on {unit}",
            argument="budgets",
            value=budgets,
        ) from None
    limits = sorted(set(given))
    if limits[0] < floor:
        raise ArgumentError(
            f"budgets: too small for one step of any formula ({limits[0]} {unit}); "
            f"give {floor} or more, what one step of {cheapest.formula.name} costs",
            argument="budgets",
            value=limits[0],
        )
    for candidate in chosen:
        name = candidate.formula.name
        if named and least[name] > limits[-1]:
            raise ArgumentError(
                f"budgets: the largest is too small for one step of {name} ({limits[-1]} {unit}); "
                f"give one of {least[name]} or more, or leave {name} out",
                argument="budgets",
                value=limits[-1],
            )
    return limits


def _step_counts(
    candidate: Candidate,
    budgets: Sequence[int],
    least: int,
    priced: Callable[[Candidate, int], int],
) -> dict[int, list[int]]:
    """Return the largest step count within each budget, with the budgets that it fills."""
    found: dict[int, list[int]] = {}
    for budget in budgets:
        if least > budget:
            continue
        # Steps merge at their seams in the same way, so the cost never falls as they grow: a bracket, then halving.
        fits, above = 1, 2
        while above <= MOST_STEPS and priced(candidate, above) <= budget:
            fits, above = above, 2 * above
        while above - fits > 1:
            middle = (fits + above) // 2
            if priced(candidate, middle) <= budget:
                fits = middle
            else:
                above = middle
        found.setdefault(fits, []).append(budget)
    return found


def _reference(
    operator: Operator,
    state: State,
    time: float,
    asked: float | None,
    observables: Mapping[str, Operator],
    quantity: str,
    threads: int,
    progress: Progress | None,
) -> Reference:
    def certified(limit: float) -> Reference:
        return reference(operator, state, time, limit, observables, keep="last", progress=progress, threads=threads)

    if asked is not None:
        return certified(asked)
    try:
        return certified(1e-11)
    except ToleranceError as refusal:
        return certified(refusal.achievable)


def _check(
    operator: Operator, state: State, time: object, observables: Mapping[str, Operator], quantity: str, cost: str
) -> float:
    for argument, value, choices in (("quantity", quantity, QUANTITIES), ("cost", cost, tuple(COSTS))):
        if value not in choices:
            raise ArgumentError(
                f"{argument}: unknown ({value!r}); give one of {', '.join(map(repr, choices))}",
                argument=argument,
                value=value,
            )
    if quantity == "observables" and not observables:
        raise AuditError(
            "observables: empty (quantity='observables'); name at least one, or ask for quantity='state'",
            reason="no observables",
            limit=None,
        )
    try:
        if isinstance(time, (bool, str)):
            raise TypeError
        moment = float(time)  # type: ignore[arg-type]
    except (TypeError, ValueError):
        moment = math.nan
    if not 0.0 < moment < math.inf:
        raise ArgumentError(
            f"time: not a positive finite number ({time!r}); give one time above 0", argument="time", value=time
        )
    require_same_qubits(state, operator, "operator")
    for name, observable in observables.items():
        require_same_qubits(state, observable, f"observables[{name!r}]")
    return moment
