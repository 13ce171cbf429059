"""A reference for driven Hamiltonians: small steps of a commutator-free integrator, halved until they agree."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from trueturn import _memory, _native, _threads
from trueturn._observables import named_operators
from trueturn.driven import checks
from trueturn.driven.hamiltonian import Driven
from trueturn.driven.stepper import Stepper
from trueturn.errors import ArgumentError, ToleranceError
from trueturn.operator import Operator
from trueturn.reference.certificate import expectation_rounding, expectation_shift, norm_bound
from trueturn.state import State, require_normalised, require_same_qubits

__all__ = ["DrivenReference", "driven_reference"]

Progress = Callable[[str, float, float], object]

ORDER = 4
SAFETY = 2.0
MOST_STEPS = 2**20
_PROBES = 33
_EXPANSION_SHARE = 0.05

_GAUSS = (0.5 - math.sqrt(3.0) / 6.0, 0.5 + math.sqrt(3.0) / 6.0)
_WEIGHTS = (0.25 + math.sqrt(3.0) / 6.0, 0.25 - math.sqrt(3.0) / 6.0)


@dataclass(frozen=True, repr=False)
class DrivenReference:
    """An evolution under a driven Hamiltonian with an estimated error.

    Attributes
    ----------
    times : tuple of float
        As asked, in the order asked.
    states : list of State
        One for each time.
    expectations : mapping of str to ndarray, shape (len(times),), float64
    expectation_errors : mapping of str to ndarray, shape (len(times),), float64
        ‖O‖ (2 δ + δ²) plus rounding, with the state's estimated error δ and O without its identity term.
    error : mapping of float to float
        By time: estimated 2-norm error of the state, `halving` plus `expansion`.
    halving : mapping of float to float
        By time: what the last halving of the steps says of those that are left; estimated.
    expansion : mapping of float to float
        By time: proven bound on what truncation and rounding of all exponentials add.
    steps : int
        Steps of the finest run.
    applications : int
        Times that a Hamiltonian was applied to a vector, all runs together.
    kind : str
        ``"estimated"``: the step error is no proven bound.
    """

    times: tuple[float, ...]
    states: list[State]
    expectations: Mapping[str, npt.NDArray[np.float64]]
    expectation_errors: Mapping[str, npt.NDArray[np.float64]]
    error: Mapping[float, float]
    halving: Mapping[float, float]
    expansion: Mapping[float, float]
    steps: int
    applications: int
    kind: str = "estimated"

    def __repr__(self) -> str:
        return (
            f"<DrivenReference at {len(self.times)} times: {self.steps} steps, error ~ {max(self.error.values()):.2g} "
            f"({self.kind})>"
        )


def driven_reference(
    driven: Driven,
    state: State,
    times: float | Iterable[float],
    tolerance: float = 1e-9,
    observables: Mapping[str, Operator] | None = None,
    *,
    start: float = 0.0,
    progress: Progress | None = None,
    threads: int | None = None,
) -> DrivenReference:
    """Evolve a state under a driven Hamiltonian to each time, with an estimated error.

    Parameters
    ----------
    driven : Driven
        On as many qubits as the state; ħ = 1.
    state : State
        At time `start`; not written. Its norm must be 1 within 1e-6 (1e-3 for complex64).
    times : float or iterable of float
        Finite, all at `start` or after it or all at it or before it, any order.
    tolerance : float
        Largest estimated 2-norm error at any time.
    observables : mapping of str to Operator
        Recorded at each time.
    start : float, optional
    progress : callable, optional
        Called with ("driven reference", done, total) for each run of halved steps; what it raises passes through.
    threads : int, optional
        As for `State.apply`.

    Returns
    -------
    DrivenReference

    Raises
    ------
    ArgumentError
        Times, start or norm out of range, or a drive that is not defined or no finite number where it is sampled.
    StateShapeError
        The Hamiltonian or an observable acts on other qubits than the state.
    ToleranceError
        Not a positive number, or not reached with 2**20 steps or in double precision.
    MemoryRefusedError
        Three vectors beside the start and two for each time do not fit.

    Notes
    -----
    One step from t of length h, with the Gauss points c = 1/2 ∓ √3/6 and a = 1/4 ± √3/6, is

        exp(-ih (a₂ H(t + c₁h) + a₁ H(t + c₂h))) exp(-ih (a₁ H(t + c₁h) + a₂ H(t + c₂h))),

    the right factor first: the commutator-free method of order 4 with two exponentials [1]_. It samples inside the
    evolution's interval only. Exponentials are Chebyshev expansions with proven bounds.

    Each interval between requested times and kinks of the drive is cut into equal steps; all are halved until the
    estimate is below the tolerance. With d the distance between the states of the last two runs, the finer one is off by
    d/15 where the asymptotic order holds. It counts as holding where the distance before, d', is 8 to 32 times d; the
    estimate is then 2 d/15, else the larger of d and d'/2, since unmarked jumps and bends make d small by chance. It can
    be fooled by a drive with features that all step lengths miss alike: state such times as `kinks`. At least three
    runs are made. Each step applies H(t) about 10 to 30 times.

    References
    ----------
    .. [1] S. Blanes, P. C. Moan, "Fourth- and sixth-order commutator-free Magnus integrators for linear and non-linear
       dynamical systems", Appl. Numer. Math. 56, 1519 (2006); A. Alvermann, H. Fehske, "High-order commutator-free
       exponential time-propagation of driven quantum systems", J. Comput. Phys. 230, 5930 (2011). From memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.driven import Driven, Ramp, driven_reference
    >>> sweep = Driven([(Ramp(-2.0, rate=1.0), tt.Operator("Z_0")), (0.5, tt.Operator("X_0"))])
    >>> found = driven_reference(sweep, tt.State.product("0"), 4.0, observables={"z": tt.Operator("Z_0")})
    >>> found.kind, found.error[4.0] < 1e-9
    ('estimated', True)
    """
    watched = named_operators(observables)
    asked, begin = _times(times), checks.number("start", start)
    _check(driven, state, tolerance, watched)
    if min(asked) < begin < max(asked):
        checks.refuse("times", f"lie on both sides of the start, {begin!r}", asked, "ask for one side at a time")
    ordered = sorted(set(asked), reverse=min(asked) < begin)
    driven.require_domain(min(begin, *asked), max(begin, *asked))
    size = 16 << state.qubits
    vectors = 3 + 2 * len(ordered)
    _memory.require(vectors * size, "driven reference", vectors)
    stepper = Stepper(driven, state.amplitudes, _threads.resolve(threads))
    run = _Halving(stepper, driven, state, begin, ordered, tolerance, progress)
    run.carry_out()
    states = {time: State.from_array(vector) for time, vector in zip(ordered, run.found, strict=True)}
    error = {time: run.halving[time] + run.expansion[time] for time in ordered}
    return DrivenReference(
        times=tuple(asked),
        states=[states[time] for time in asked],
        expectations={
            name: np.array([states[time].expectation(observable, threads=threads) for time in asked])
            for name, observable in watched.items()
        },
        expectation_errors={
            name: np.array([_expectation_error(observable, error[time], state.qubits) for time in asked])
            for name, observable in watched.items()
        },
        error=error,
        halving=run.halving,
        expansion=run.expansion,
        steps=run.steps,
        applications=stepper.applications,
    )


class _Halving:
    """Runs with ever shorter steps, and what their differences say."""

    def __init__(
        self,
        stepper: Stepper,
        driven: Driven,
        state: State,
        begin: float,
        times: Sequence[float],
        tolerance: float,
        progress: Progress | None,
    ) -> None:
        self.stepper, self.driven, self.start = stepper, driven, state.amplitudes
        self.times, self.tolerance, self.progress = times, tolerance, progress
        self.pieces = list(_pieces(begin, times, driven.kinks))
        self.coarsest = [self._least_steps(*piece) for piece in self.pieces]
        self.found: list[npt.NDArray[np.complex128]] = []
        self.halving: dict[float, float] = {}
        self.expansion: dict[float, float] = {}
        self.steps = 0

    def carry_out(self) -> None:
        """Halve until the estimate is below the tolerance."""
        halvings = 0
        distances: list[float] = []
        self.found = self._run(1, None)[0]
        while True:
            halvings += 1
            if sum(self.coarsest) << halvings > MOST_STEPS:
                self._give_up(f"takes more than {MOST_STEPS} steps")
            self.found, now = self._run(1 << halvings, self.found)
            before, distances = distances, now
            self.halving = {
                time: _estimate(before[place] if before else None, distance)
                for place, (time, distance) in enumerate(zip(self.times, distances, strict=True))
            }
            worst = max(self.halving[time] + self.expansion[time] for time in self.times)
            if halvings >= 2 and worst <= self.tolerance:
                return
            rounding = max(self.expansion.values())
            if rounding > 0.5 * self.tolerance:
                self._give_up(f"is met by rounding of {rounding:.1e}")

    def _give_up(self, why: str) -> None:
        achievable = (
            4.0 * max(self.halving[time] + self.expansion[time] for time in self.times) if self.halving else 1.0
        )
        raise ToleranceError(
            f"tolerance: {why} ({self.tolerance:g}); ask for {achievable:.2g} or more, or a shorter time",
            tolerance=self.tolerance,
            achievable=achievable,
        )

    def _run(
        self, factor: int, compare: Sequence[npt.NDArray[np.complex128]] | None
    ) -> tuple[list[npt.NDArray[np.complex128]], list[float]]:
        """Run with `factor` times the least steps; return the states at all times, and how far from `compare` they are."""
        counts = [factor * least for least in self.coarsest]
        self.steps = sum(counts)
        allowed = _EXPANSION_SHARE * self.tolerance / max(1, 2 * self.steps)
        self.stepper.restart(self.start)
        states: list[npt.NDArray[np.complex128]] = []
        distances: list[float] = []
        done = 0
        for (low, high, target), count in zip(self.pieces, counts, strict=True):
            length = (high - low) / count
            for step in range(count if high != low else 0):
                self._step(low + (high - low) * (step / count), length, allowed)
                done += 1
                if self.progress is not None:
                    self.progress("driven reference", done, self.steps)
            if target is not None:
                vector = self.stepper.vector
                self.expansion[target] = self.stepper.bound
                if compare is not None:
                    old = compare[len(states)]
                    distances.append(_native.distance(vector, old, 1.0, self.stepper.threads))
                states.append(vector.copy())
        return states, distances

    def _step(self, time: float, length: float, allowed: float) -> None:
        early, late = (self.driven.strengths(time + point * length) for point in _GAUSS)
        large, small = _WEIGHTS
        first = [large * a + small * b for a, b in zip(early, late, strict=True)]
        second = [small * a + large * b for a, b in zip(early, late, strict=True)]
        self.stepper.apply(first, length, allowed)
        self.stepper.apply(second, length, allowed)

    def _least_steps(self, low: float, high: float, _target: float | None) -> int:
        """Steps short enough that half the width of the spectrum turns by about 2 in each, from samples of it."""
        probes = np.linspace(low, high, _PROBES + 2)[1:-1].tolist()
        width = max(self.stepper.half_width(self.driven.strengths(time)) for time in probes)
        return max(2, math.ceil(abs(high - low) * width / 2.0))


def _estimate(before: float | None, distance: float) -> float:
    """Estimate the error of the finer of two runs from their distance, and from that of the two runs before."""
    if before is None:
        return distance
    if 2.0 ** (ORDER - 1) * distance <= before <= 2.0 ** (ORDER + 1) * distance:
        return SAFETY * distance / (2.0**ORDER - 1.0)
    return max(distance, 0.5 * before)


def _pieces(
    begin: float, times: Sequence[float], kinks: Iterable[float]
) -> Iterator[tuple[float, float, float | None]]:
    """Yield (from, to, requested time or None) along the way; kinks end pieces too."""
    forward = times[-1] >= begin
    marks = {kink for kink in kinks if min(begin, times[-1]) < kink < max(begin, times[-1])} | set(times)
    now = begin
    for mark in sorted(marks, reverse=not forward):
        yield now, mark, mark if mark in times else None
        now = mark


def _expectation_error(observable: Operator, distance: float, qubits: int) -> float:
    return expectation_shift(norm_bound(observable), distance) + expectation_rounding(observable, qubits)


def _times(times: float | Iterable[float]) -> list[float]:
    single = not isinstance(times, Iterable) or getattr(times, "ndim", None) == 0
    found = [checks.number("times", times)] if single else checks.numbers("times", times)
    if not found:
        checks.refuse("times", "is empty", times, "give at least one time")
    return found


def _check(driven: Driven, state: State, tolerance: float, observables: Mapping[str, Operator]) -> None:
    if not isinstance(driven, Driven):
        raise ArgumentError(
            f"driven: is no Driven ({driven!r}); make one with Driven(terms)", argument="driven", value=driven
        )
    require_same_qubits(state, driven.strings(), "driven")
    for name, observable in observables.items():
        require_same_qubits(state, observable, f"observables[{name!r}]")
    if isinstance(tolerance, bool) or not isinstance(tolerance, (int, float)) or not 0.0 < tolerance < math.inf:
        raise ToleranceError(
            f"tolerance: not a positive number ({tolerance!r}); 1e-9 can usually be reached",
            tolerance=tolerance,
            achievable=1e-9,
        )
    require_normalised(state)
