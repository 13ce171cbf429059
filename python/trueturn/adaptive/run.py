"""Step lengths chosen along the way, so that the error for each unit of time stays below a tolerance."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from trueturn import _memory
from trueturn.adaptive.circuits import Circuits, Ruler, circuits_of
from trueturn.adaptive.pair import pair_of
from trueturn.driven import Driven, checks
from trueturn.errors import ToleranceError
from trueturn.formulas import Formula
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.rotations import Rotations
from trueturn.state import State, require_normalised, require_same_qubits

__all__ = ["AdaptiveRun", "AdaptiveStep", "adaptive"]

SAFETY = 0.9
"""Aim at this share of the step that would just meet the tolerance."""

LEAST_FACTOR, MOST_FACTOR = 0.2, 3.0
"""A step is at least and at most this multiple of the one tried before it."""

HONESTY = 1.5
"""Factor within which `AdaptiveRun.estimate` bounds the state error where steps are short enough; tested, not proven."""

SMALLEST_SHARE = 2.0**-40
"""Steps below this share of the total time are given up."""

Progress = Callable[[float, float], object]


class AdaptiveStep(NamedTuple):
    """One step that was tried.

    Attributes
    ----------
    start, length : float
        Where it begins, counted from the start of the run, and how long it is.
    estimate : float
        Distance between the results of the two formulas.
    accepted : bool
    """

    start: float
    length: float
    estimate: float
    accepted: bool


@dataclass(frozen=True, repr=False)
class AdaptiveRun:
    """An evolution with steps of chosen lengths.

    Attributes
    ----------
    state : State
        At the end, evolved by the formula of lower order.
    steps : ndarray, shape (m,), float64
        Lengths of the accepted steps in order; their sum in floating point is exactly the time asked for.
    history : tuple of AdaptiveStep
        All steps that were tried, the refused ones too.
    estimate : float
        Sum of the estimates of the accepted steps; at most tolerance times \\|time\\|.
    rotations : Rotations
        Circuit of the accepted steps by the formula of lower order, merged across steps.
    applied : int
        Rotations applied to find it: trials by both formulas, refused ones too.
    formulas : (Formula, Formula)
        Lower and higher.
    """

    state: State
    steps: npt.NDArray[np.float64]
    history: tuple[AdaptiveStep, ...]
    estimate: float
    rotations: Rotations
    applied: int
    formulas: tuple[Formula, Formula]

    @property
    def refused(self) -> int:
        """Number of steps that were tried and refused."""
        return sum(not step.accepted for step in self.history)

    def __repr__(self) -> str:
        lengths = np.abs(self.steps)
        return (
            f"<AdaptiveRun: {lengths.size} steps of {lengths.min():.3g} to {lengths.max():.3g}, {self.refused} refused; "
            f"error ~ {self.estimate:.2g} (estimated)>"
        )


def adaptive(
    formulas: Formula | tuple[Formula, Formula],
    system: Partition | Driven,
    state: State,
    time: float,
    tolerance: float,
    *,
    observable: Operator | None = None,
    rule: str | Partition = "terms",
    start: float = 0.0,
    first_step: float | None = None,
    longest_step: float | None = None,
    most_steps: int = 10_000,
    progress: Progress | None = None,
    threads: int | None = None,
) -> AdaptiveRun:
    """Evolve a state by steps as long as a tolerance per unit of time allows.

    Parameters
    ----------
    formulas : Formula or (Formula, Formula)
        The one whose steps are wanted and another of higher order that judges it. One alone is judged by
        `higher_formula` of it.
    system : Partition or Driven
    state : State
        At the start; not written. Its norm must be 1 within 1e-6 (1e-3 for complex64).
    time : float
        Total time; negative to run backwards. Kept exactly: the last step fits.
    tolerance : float
        Largest estimated error for each unit of time.
    observable : Operator, optional
        Judge steps by its expectation instead of the state.
    rule : str or Partition, optional
        How a driven Hamiltonian is partitioned; see `Driven.rotations`. Not for a Partition.
    start : float, optional
        Time at the start, which matters to a driven Hamiltonian only.
    first_step : float, optional
        Length to try first, positive; by default one in which Σ\\|c\\| turns by 1/2, at most the whole time.
    longest_step : float, optional
        No step is longer; a drive with short pulses needs it, lest a long step reads the clock on both sides of one.
    most_steps : int, optional
        Steps to try, refused ones included.
    progress : callable, optional
        Called with (elapsed, total) after each accepted step; what it raises passes through.
    threads : int, optional
        As for `State.apply`.

    Returns
    -------
    AdaptiveRun

    Raises
    ------
    ArgumentError
        A number or the norm out of range, a system or state of another kind, a drive that is not defined where it is sampled.
    FormulaError
        No formula of higher order, or a pair whose second is not of higher order.
    StateShapeError
        System or observable act on other qubits than the state.
    PartitionError
        As for `Driven.rotations`.
    ToleranceError
        Not a positive number, or not met by `most_steps` steps or by steps of 2**-40 of the time.
    MemoryRefusedError
        Three state vectors beside the start do not fit.

    Notes
    -----
    A step of length h from ψ is made by both formulas. With order p of the lower one, δ = ‖S_low ψ - S_high ψ‖ estimates
    its error C h^(p+1), and the step is accepted where δ ≤ tolerance h. Accepted or not, the length tried next is
    h · 0.9 (tolerance h / δ)^(1/p), within 0.2 and 3 times h. So the sum of the estimates is at most tolerance · time.
    Errors of earlier steps are carried on by unitary steps, neither growing nor shrinking, so the state error is at
    most the sum of the steps' own errors, and these are off from δ by the error of the higher formula. Where that is
    at most half of δ, the state error is at most 1.5 times `estimate`. This is an estimate, not a proven bound. With
    `observable`, δ is the difference of the two expectations: what the errors of a step do to the observable in later
    steps is not seen.

    All lengths are whole multiples of the last binary digit of `time`, so that they add up without rounding.

    Embedded pairs of product formulas for this purpose are due to [1]_.

    References
    ----------
    .. [1] T. N. Ikeda, H. Kono, K. Fujii, "Measuring Trotter error and its application to precision-guaranteed
       Hamiltonian simulations", arXiv 2307.05406 (2024). Idea from memory; constants here are our own.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.adaptive import adaptive
    >>> chain = tt.Partition.of(tt.model.ising(tt.lattice.chain(4), zz=1.0, x=0.7), "axis")
    >>> run = adaptive(tt.formula("strang"), chain, tt.State.product("0000"), time=2.0, tolerance=1e-3)
    >>> float(sum(run.steps)), run.estimate <= 2e-3
    (2.0, True)
    """
    low, high = pair_of(formulas)
    total = checks.number("time", time)
    begin = checks.number("start", start)
    circuits = circuits_of(system, rule, begin)
    _check_state(circuits, state, observable)
    rate = _rate(tolerance)
    limit = checks.whole("most_steps", most_steps, 1)
    _memory.require(3 * state.amplitudes.nbytes, "adaptive", lambda n: 3 * state.dtype.itemsize << n)
    now, trial, judge = state.copy(), state.copy(), state.copy()
    ruler = Ruler(total)
    longest = math.inf if longest_step is None else _length("longest_step", longest_step)
    wanted = min(longest, _first_step(first_step, circuits, ruler))
    history: list[AdaptiveStep] = []
    lengths: list[float] = []
    applied = 0
    while ruler.left:
        if len(history) == limit:
            raise _not_met(rate, f"is not met by {limit} steps", history, "most_steps")
        length = ruler.cut(wanted)
        elapsed = ruler.elapsed
        for vector, method in ((trial, low), (judge, high)):
            np.copyto(vector.amplitudes, now.amplitudes)
            circuit = circuits.step(method, elapsed, length)
            applied += circuit.count
            vector.apply(circuit, threads=threads)
        if observable is None:
            estimate = trial.distance(judge, threads=threads)
        else:
            estimate = abs(
                trial.expectation(observable, threads=threads) - judge.expectation(observable, threads=threads)
            )
        accepted = estimate <= rate * abs(length)
        history.append(AdaptiveStep(elapsed, length, estimate, accepted))
        ratio = (rate * abs(length) / estimate) ** (1.0 / low.order) if estimate else math.inf
        wanted = min(longest, abs(length) * min(MOST_FACTOR, max(LEAST_FACTOR, SAFETY * ratio)))
        if accepted:
            now, trial = trial, now
            lengths.append(length)
            ruler.advance(length)
            if progress is not None:
                progress(ruler.elapsed, total)
        elif wanted < SMALLEST_SHARE * abs(total):
            raise _not_met(rate, "is met by no step above 2**-40 of the time", history, "tolerance")
    return AdaptiveRun(
        state=now,
        steps=np.array(lengths),
        history=tuple(history),
        estimate=math.fsum(step.estimate for step in history if step.accepted),
        rotations=circuits.whole(low, lengths, total),
        applied=applied,
        formulas=(low, high),
    )


def _check_state(circuits: Circuits, state: State, observable: Operator | None) -> None:
    require_same_qubits(state, Operator("0", qubits=circuits.qubits), "system")
    if observable is not None:
        require_same_qubits(state, observable, "observable")
    require_normalised(state)


def _rate(tolerance: object) -> float:
    if isinstance(tolerance, bool) or not isinstance(tolerance, (int, float)) or not 0.0 < tolerance < math.inf:
        raise ToleranceError(
            f"tolerance: not a positive number ({tolerance!r}); give an error per unit of time, such as 1e-3",
            tolerance=tolerance,
            achievable=1e-3,
        )
    return float(tolerance)


def _first_step(given: object, circuits: Circuits, ruler: Ruler) -> float:
    whole = ruler.whole * ruler.unit
    if given is None:
        size = circuits.size()
        return min(whole, 0.5 / size) if size else whole
    return min(_length("first_step", given), whole)


def _length(argument: str, given: object) -> float:
    length = checks.number(argument, given)
    if length <= 0.0:
        checks.refuse(argument, "is not positive", given, "give a length")
    return length


def _not_met(rate: float, what: str, history: Sequence[AdaptiveStep], knob: str) -> ToleranceError:
    achievable = max(step.estimate / abs(step.length) for step in history)
    remedy = "raise it or tolerance" if knob == "most_steps" else "raise it"
    return ToleranceError(
        f"{knob}: tolerance {rate:g} {what}; {remedy}", tolerance=rate, achievable=max(achievable, rate)
    )
