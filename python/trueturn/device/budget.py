"""Spends a tolerance on algorithm, gates, synthesis and shots, and finds the step count that makes the total least.

With an error c r^-p of the formula and g = W × (failures per step) of the gates, and few failures in all, the total
c r^-p + g r is least at r = (p c / g)^(1/(p+1)), where it is (1 + 1/p) (p c)^(1/(p+1)) g^(p/(p+1)); so a better gate is
worth more to a higher order, and two formulas of different order change places at one gate quality. Here the same is done
with the counted gates of the cone and the saturating share 1 - (1-p)^G, over whole step counts.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from trueturn.audit.candidate import Candidate
from trueturn.audit.truth import Progress
from trueturn.device.algorithmic import ErrorLaw, Measurements, given_law, proven_law
from trueturn.device.checks import (
    between,
    check_counts,
    checked_candidates,
    checked_laws,
    checked_problem,
    checked_rate,
    checked_variance,
    positive,
)
from trueturn.device.counting import checked_counting
from trueturn.device.counts import Counts
from trueturn.device.result import Budget, Spending
from trueturn.device.shares import fitting_shots, shot_scale, t_gates
from trueturn.device.weighing import Weighed, crossovers
from trueturn.device.words import FAILURES, statement
from trueturn.errors import ArgumentError, FormulaError
from trueturn.export.hardware import Hardware
from trueturn.formulas import Formula
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["device_budget"]

_MOST_MEASURED = 1 << 20


def device_budget(
    operator: Operator,
    time: float,
    candidates: Sequence[Candidate | Formula | Processed | str],
    observable: Operator,
    tolerance: float,
    *,
    two_qubit_error: float,
    shots: int | None = None,
    variance: float | None = None,
    synthesis_error: float | None = None,
    confidence: float = 0.95,
    state: State | None = None,
    algorithmic: Mapping[str, Callable[[int], float]] | None = None,
    gates: Callable[[Rotations], int] | None = None,
    device: Mapping[str, Any] | Hardware | None = None,
    most_steps: int = 1_000_000,
    threads: int | None = None,
    progress: Progress | None = None,
) -> Budget:
    """Find the step count that makes the error of an expectation on a real device least.

    Parameters
    ----------
    operator : Operator
        The Hamiltonian; ħ = 1. Any size that the Pauli algebra holds, unless `state` is given.
    time : float
    candidates : sequence of Candidate, Formula or str
        A formula alone is taken with the parts of rule ``"commuting"``. Step counts of candidates are not used.
    observable : Operator
    tolerance : float
        On the error of its expectation; absolute.
    two_qubit_error : float
        Probability that a two-qubit gate fails, from 0 to below 1.
    shots : int, optional
        Without it the statistical share is left out of the total; `needed_shots` is told anyway.
    variance : float, optional
        Of one shot, where the observable is measured as a whole. By default strings are measured one by one.
    synthesis_error : float, optional
        Operator-norm error allowed for all rotations together, shared equally; without it rotations are native.
    confidence : float
        With which the statistical share holds.
    state : State, optional
        Start. With it, algorithmic errors are measured against a certified reference, and a power law is fitted to them;
        without it they are proven bounds.
    algorithmic : mapping of str to callable, optional
        Errors by step count for candidates by label (``"strang, commuting"``) or by formula name, such as a `PowerLaw`
        fitted to smaller systems; they replace what would be measured or proven.
    gates : callable, optional
        Counts the two-qubit gates of Rotations; default `Rotations.two_qubit_gates`. It must be additive over blocks.
    device : mapping or Hardware, optional
        Options of `Rotations.cost`: gates are then counted as a plan counts them, at most those of the circuit as it is written
        for the device, and where nothing is routed at most 2(w-1) for a rotation of the cone. Its error rates are not used.
    most_steps : int
    threads : int, optional
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Budget

    Raises
    ------
    ArgumentError
        A rate, a number of shots, a tolerance, a confidence or a candidate that is impossible; `algorithmic` is no mapping
        to functions or names no candidate; `gates` is no function, gives no count, or stands beside `device`.
    OperatorError
        The observable is no Operator on the qubits of the Hamiltonian, or acts on none.
    FormulaError
        No candidate has an algorithmic error: none is covered by a bound and no state is given.
    StateShapeError, ToleranceError, MemoryRefusedError
        As for an audit, where a state is given.

    Notes
    -----
    The total is algorithmic + gates + synthesis + shots, each an upper bound as told in `trueturn.device.shares`. The
    gates' share is proven under its model; an algorithmic error is proven, measured or fitted as each row says.
    Counting takes no state vector and no time per step.

    Examples
    --------
    >>> import trueturn as tt
    >>> chain = tt.model.ising(tt.lattice.chain(50), zz=-1.0, x=-0.7)
    >>> magnetisation = tt.Operator("Z_25", qubits=50)
    >>> found = device_budget(chain, 0.5, ["lie", "strang"], magnetisation, 0.05, two_qubit_error=1e-5,
    ...     algorithmic={"lie": lambda r: 0.3 / r, "strang": lambda r: 0.2 / r**2})
    >>> found.best.label, found.best.steps, found.verdict
    ('strang, commuting', 7, 'meets')
    """
    chosen = checked_candidates(candidates)
    moment = checked_problem(operator, time, observable, tolerance, state)
    rate = checked_rate(two_qubit_error)
    sure = between("confidence", confidence, "a probability, such as 0.95")
    check_counts(shots, most_steps)
    allowed = None if synthesis_error is None else positive("synthesis_error", synthesis_error, "1e-3")
    given = checked_laws(algorithmic)
    how = checked_counting(gates, device)
    bare = observable.without_identity()
    low, high = bare.spectral_interval()
    width = high - low
    scale = shot_scale(bare.one_norm(), checked_variance(variance), sure)
    synthesis, shot = width * (allowed or 0.0), (0.0 if shots is None else scale / math.sqrt(shots))
    measurements = None
    if state is not None:
        measurements = Measurements(operator, state, moment, observable, tolerance, threads, progress)
    weighed: list[Weighed] = []
    left_out: dict[str, str] = {}
    used: set[str] = set()
    for place, candidate in enumerate(chosen):
        if progress is not None:
            progress(candidate.label, place, len(chosen))
        partition = candidate.partition(operator)
        try:
            law = _law(candidate, partition, moment, width, given, used, measurements, most_steps)
        except FormulaError as refusal:
            left_out[candidate.label] = str(refusal)
            continue
        counts = Counts(candidate, partition, moment, observable, how)
        weighed.append(Weighed(candidate, partition, law, counts, width, synthesis, shot, most_steps))
    unused = [name for name in given if name not in used]
    if unused:
        known = ", ".join(f"{candidate.label!r}" for candidate in chosen)
        raise ArgumentError(
            f"algorithmic: names no candidate ({unused[0]!r}); give labels out of {known}",
            argument="algorithmic",
            value=unused[0],
        )
    if not weighed:
        raise FormulaError(
            f"candidates: no algorithmic error for any of them ({'; '.join(left_out.values())})",
            name=chosen[0].label,
            choices=(),
        )
    spent = [_spending(one, rate, float(tolerance), scale, allowed, moment, measurements) for one in weighed]
    # With perfect gates every total can be made as small as any: then the fewest gates that meet come first.
    rows = tuple(
        sorted(spent, key=lambda row: (row.verdict != "meets", row.gates_in_cone) if rate == 0.0 else (row.total, 0))
    )
    meets = any(row.verdict == "meets" for row in rows)
    return Budget(
        rows=rows,
        verdict="meets" if meets else "misses",
        statement=statement(rows, float(tolerance), width, rate),
        crossovers=crossovers(weighed),
        left_out=left_out,
        tolerance=float(tolerance),
        time=moment,
        observable=str(observable),
        width=width,
        two_qubit_error=rate,
        shot_count=shots,
        synthesis_error=allowed,
        confidence=sure,
        assumptions=(FAILURES, how.words),
    )


def _law(
    candidate: Candidate,
    partition: Partition,
    time: float,
    width: float,
    given: Mapping[str, Callable[[int], float]],
    used: set[str],
    measurements: Measurements | None,
    most_steps: int,
) -> ErrorLaw:
    for name in (candidate.label, candidate.formula.name):
        if name in given:
            used.add(name)
            return given_law(name, given[name], width)
    if measurements is not None:
        return measurements.law(candidate, partition, width, min(most_steps, _MOST_MEASURED))
    return proven_law(candidate, partition, time, width)


def _spending(
    one: Weighed,
    rate: float,
    tolerance: float,
    scale: float,
    synthesis_error: float | None,
    time: float,
    measurements: Measurements | None,
) -> Spending:
    steps = one.best_steps(rate)
    fewest = one.fewest_steps(rate, steps, tolerance)
    if rate == 0.0 and fewest is not None:
        steps = fewest  # with perfect gates more steps only cost
    algorithmic, kind, measured = one.law(steps), one.law.kind, None
    if kind == "fitted" and measurements is not None and steps <= _MOST_MEASURED:
        measured = measurements.error(one.candidate, one.partition, steps)
        # The larger of both: an error that happens to vanish at one step count is no accuracy.
        if measured[1] >= algorithmic:
            algorithmic, kind = measured[1], "measured"
    inside = one.counts(steps)
    total = one.total(steps, rate, algorithmic)
    circuit = one.candidate.formula.rotations(one.partition, time, steps)
    return Spending(
        candidate=one.candidate,
        label=one.candidate.label,
        steps=steps,
        fewest_steps=fewest,
        algorithmic=algorithmic,
        algorithmic_kind=kind,
        law=one.law.words(steps),
        measured=measured,
        gates=one.noise(steps, rate),
        synthesis=one.synthesis,
        shots=one.shots,
        total=total,
        two_qubit_gates=one.counts.how.whole(circuit),
        gates_in_cone=inside.gates,
        t_count=None if synthesis_error is None else t_gates(inside.general, inside.tees, synthesis_error),
        needed_shots=fitting_shots(scale, tolerance - (total - one.shots)),
        allowed_error=one.allowed_error(tolerance),
        verdict="meets" if total <= tolerance else "misses",
    )
