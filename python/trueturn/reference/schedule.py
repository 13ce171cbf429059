"""Cuts an evolution into Chebyshev expansions so that a tolerance is met with the fewest applications of H.

One expansion of length s has x = λ s and costs a little more than x applications. Its rounding error grows faster than x,
so long times are cut into segments, each with its own few terms of overhead. The growth is known: an error e_j made in
term j of the recurrence T_{k+1} = 2 H' T_k - T_{k-1} enters term k as U_{k-j}(H') e_j, and the Chebyshev polynomials of the
second kind satisfy |U_m(y)| ≤ m + 1 on [-1, 1] but also |U_m(y)| ≤ 1/√(1-y²). So a spectral interval that is widened by a
few percent turns quadratic growth into linear growth, for a few percent more terms; the widening is chosen here too.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from trueturn import _native
from trueturn.errors import ToleranceError
from trueturn.operator import Operator
from trueturn.reference.bessel import bessel_values, least_degree, truncation
from trueturn.reference.certificate import UNIT
from trueturn.reference.conserved import NO_FIELD, Field

__all__ = ["Expansion", "Schedule", "schedule"]

_WIDENINGS = (0.0, 0.01, 0.04, 0.12)
# Of the tolerance, what truncation may take.
_SHARES = (0.9, 0.5, 0.05)
# λ times the length of the longest expansion: beyond it the overhead that longer ones save is below 2 %.
_LONGEST = 2000.0
# Start states may be off unit length by as much (complex64 ones; the bounds are linear in the norm).
NORM_SLACK = 1.001


@dataclass(frozen=True)
class Expansion:
    """One expansion from a state at `start` to states at `targets` (ascending; the last is where the next one starts)."""

    start: float
    targets: tuple[float, ...]
    degree: int
    truncation: tuple[float, ...]
    rounding: tuple[float, ...]

    def coefficients(self, half_width: float) -> list[list[float]]:
        """Return (2 - δ_k0) J_k(λ (target - start)) for k = 0 … degree, one list a target."""
        lists = []
        for target in self.targets:
            values = bessel_values(half_width * (target - self.start))
            cut = np.pad(values[: self.degree + 1], (0, max(0, self.degree + 1 - len(values))))
            lists.append([float(cut[0]), *(2.0 * cut[1:]).tolist()])
        return lists


@dataclass(frozen=True)
class Schedule:
    """Expansions in order, on the interval of the given centre and half-width, of an operator without the given field."""

    expansions: tuple[Expansion, ...]
    centre: float
    half_width: float
    field: Field = NO_FIELD

    @property
    def applications(self) -> int:
        """Applications of H in all."""
        return sum(expansion.degree for expansion in self.expansions)

    def bounds(self) -> dict[float, tuple[float, float]]:
        """Return (truncation, rounding) bounds by target time; errors of earlier expansions are carried on."""
        found = {}
        cut = rounded = 0.0
        for expansion in self.expansions:
            growth = 1.0 + cut + rounded
            for target, own_cut, own_rounded in zip(
                expansion.targets, expansion.truncation, expansion.rounding, strict=True
            ):
                found[target] = (cut + growth * own_cut, rounded + growth * own_rounded)
            cut, rounded = found[expansion.targets[-1]]
        return found


def schedule(
    operator: Operator,
    interval: tuple[float, float],
    times: Sequence[float],
    tolerance: float,
    group: int,
    field: Field = NO_FIELD,
) -> Schedule:
    """Plan expansions to all times (ascending, positive) within a tolerance, with at most `group` targets each.

    Operator and interval are those without `field`, whose own evolution is added after each expansion.

    Raises
    ------
    ToleranceError
        No plan meets the tolerance in double precision; `achievable` is the best bound that was found.
    """
    reach = _least_rounding(operator, interval, times[-1])
    if reach > tolerance:
        raise _refusal(tolerance, _far_bound(operator, interval, times[-1], reach, field))
    drafts: list[_Draft] = []
    for draft in _drafts(operator, interval, times, tolerance, group, field):
        # The first ones neither widen nor cut more than they must, by falling shares of truncation: none takes fewer terms.
        if len(drafts) < len(_SHARES) and draft.total <= tolerance:
            exact = draft.schedule(exact=True)
            if _total(exact) <= tolerance:
                return exact
        drafts.append(draft)
    drafts.sort(key=lambda draft: draft.total)
    fitting = sorted((draft for draft in drafts if draft.total <= tolerance), key=lambda draft: draft.applications)
    # A draft rounds lengths; the exact plan may miss the tolerance by a hair, and then the next draft is due.
    for draft in fitting:
        exact = draft.schedule(exact=True)
        if _total(exact) <= tolerance:
            return exact
    raise _refusal(tolerance, _total(drafts[0].schedule(exact=True)))


def _refusal(tolerance: float, bound: float) -> ToleranceError:
    achievable = _rounded_up(bound) if bound < 1.0 else math.inf
    remedy = f"ask for {achievable:g} or more, or a shorter time" if bound < 1.0 else "ask for a shorter time"
    return ToleranceError(
        f"tolerance: below what double precision can certify for this evolution ({tolerance:g}); {remedy}",
        tolerance=tolerance,
        achievable=achievable,
    )


def _least_rounding(operator: Operator, interval: tuple[float, float], time: float) -> float:
    """Return what any plan's rounding bound exceeds, so that hopeless requests are refused without planning.

    Each recurrence counts at least `local` Σ k |a_k|, and x sin θ = |d/dθ exp(-ix cos θ)| ≤ Σ k |a_k| for all θ. A part of
    `local` does not shrink as the interval is widened, so that the product with x is least where it is not.
    """
    centre, half = _centred(interval)
    return _local_error(operator, centre, half) * half * time


def _far_bound(operator: Operator, interval: tuple[float, float], time: float, reach: float, field: Field) -> float:
    """Return the bound of a plan of equal expansions to a time that is out of reach, from one of them."""
    centre, half = _centred(interval)
    totals = []
    for widening in _WIDENINGS:
        wide = half * (1.0 + widening)
        local = _local_error(operator, centre, wide)
        for parts in _segment_counts(wide * time):
            cuts = ((0.0, (time / parts,)),)
            one = _Draft(cuts, centre, wide, 0.05 * reach / parts, local, _growth(widening), field).evaluated()
            totals.append(math.expm1(min(parts * one.total, 700.0)))
    return min(totals)


def _total(plan: Schedule) -> float:
    return max((cut + rounded for cut, rounded in plan.bounds().values()), default=0.0)


def _rounded_up(value: float) -> float:
    """Round up to two digits, with room for the truncation that a larger tolerance allows itself: then it is accepted."""
    step = 10.0 ** (math.floor(math.log10(value)) - 1)
    return math.ceil(1.08 * value / step) * step


@dataclass(frozen=True)
class _Draft:
    """One way to cut the evolution, with its cost and bound to three digits."""

    cuts: tuple[tuple[float, tuple[float, ...]], ...]
    centre: float
    half: float
    allowed: float
    local: float
    growth: float
    field: Field
    applications: int = 0
    total: float = math.inf

    def schedule(self, exact: bool) -> Schedule:
        expansions = tuple(self._expansion(start, targets, exact) for start, targets in self.cuts)
        return Schedule(expansions, self.centre, self.half, self.field)

    def evaluated(self) -> _Draft:
        plan = self.schedule(exact=False)
        return replace(self, applications=plan.applications, total=_total(plan))

    def _expansion(self, start: float, targets: tuple[float, ...], exact: bool) -> Expansion:
        lengths = [self.half * (target - start) for target in targets]
        if not exact:
            # Equal up to rounding is equal enough here, and saves computing the Bessel functions anew.
            lengths = [_nearly(length) for length in lengths]
        degree = max(least_degree(x, self.allowed) for x in lengths)
        cut = tuple(NORM_SLACK * truncation(x, degree) for x in lengths)
        turns = [self.centre * (target - start) for target in targets]
        if not exact:
            turns = [_nearly(turn) for turn in turns]
        rounding = tuple(
            _rounding(x, degree, turn, self.local, self.growth) + self.field.rounding(target - start)
            for x, turn, target in zip(lengths, turns, targets, strict=True)
        )
        return Expansion(start, targets, degree, cut, rounding)


def _nearly(value: float) -> float:
    """Return a number of three digits, times 1.005: at least the given one."""
    return float(f"{value:.3g}") * 1.005


def _drafts(
    operator: Operator,
    interval: tuple[float, float],
    times: Sequence[float],
    tolerance: float,
    group: int,
    field: Field,
) -> Iterator[_Draft]:
    centre, half = _centred(interval)
    for widening in _WIDENINGS:
        wide = half * (1.0 + widening)
        local = _local_error(operator, centre, wide)
        for segments in _segment_counts(wide * times[-1]):
            cuts = tuple(_cuts(times, times[-1] / segments, group))
            for share in _SHARES:
                allowed = share * tolerance / len(cuts)
                yield _Draft(cuts, centre, wide, allowed, local, _growth(widening), field).evaluated()


def _growth(widening: float) -> float:
    """Bound |U_m| on an interval that was widened by so much."""
    return math.inf if widening == 0.0 else 1.0 / math.sqrt(1.0 - (1.0 + widening) ** -2)


def _centred(interval: tuple[float, float]) -> tuple[float, float]:
    """Return centre and half-width of an interval that holds the given one."""
    low, high = interval
    half = 0.5 * high - 0.5 * low
    centre = low + half
    # Any centre and half-width will do as long as the interval stays inside: pad for their own rounding.
    half = half * (1.0 + 4.0 * UNIT) + 4.0 * UNIT * abs(centre)
    # A wider interval is as true, and 2 / half must not overflow.
    half = max(half, 1e-307)
    return centre, half


def _segment_counts(x: float) -> list[int]:
    """Numbers of segments worth trying: segments with x below about 4 cost more than they save.

    Of very many, the shortest are left out: planning would take longer than it saves.
    """
    least = max(1, math.ceil(x / _LONGEST))
    most = max(least, min(max(4000, 32 * least), math.ceil(x / 4.0)))
    counts = [least]
    while counts[-1] < most:
        counts.append(min(most, max(counts[-1] + 1, round(counts[-1] * 1.6))))
    return counts


def _cuts(times: Sequence[float], longest: float, group: int) -> list[tuple[float, tuple[float, ...]]]:
    """Cut the way to the last time into expansions no longer than `longest` with at most `group` targets."""
    cuts: list[tuple[float, tuple[float, ...]]] = []
    start, waiting = 0.0, list(times)
    reach = longest * (1.0 + 1e-9)
    while waiting:
        inside = [time for time in waiting[:group] if time - start <= reach]
        if not inside:
            parts = math.ceil((waiting[0] - start) / reach)
            inside = [start + (waiting[0] - start) / parts]
        cuts.append((start, tuple(inside)))
        start = inside[-1]
        waiting = [time for time in waiting if time > start]
    return cuts


def _local_error(operator: Operator, centre: float, half: float) -> float:
    """Bound the error that one step of the recurrence adds: image, scale, shift and subtraction."""
    scale = 2.0 / half
    counted = _native.application_rounding(operator._terms, scale, -scale * centre)
    return 1.05 * UNIT * (counted + scale * operator.one_norm() + 2.0 * abs(scale * centre) + 2.0)


@lru_cache(maxsize=4096)
def _rounding(x: float, degree: int, turn: float, local: float, growth: float) -> float:
    """Bound what arithmetic adds to one sum: recurrence, coefficients, additions, final phase.

    The argument x is a rounded product of a rounded difference: off by 2 u x, it moves the sum by as much at most.
    """
    values = np.abs(bessel_values(x)[: degree + 1])
    values[1:] *= 2.0
    # Σ_{m < k} min(m + 1, growth) for k = 0 … degree.
    steps = np.concatenate(([0.0], np.cumsum(np.minimum(np.arange(1, len(values)), growth))))
    recurrence = local * float(values @ steps)
    before = np.cumsum(values)
    after = before[-1] - before
    partial = float(np.minimum(before, 1.0 + after).sum())
    return 1.01 * (recurrence + UNIT * (2.0 * float(before[-1]) + partial + 5.0 + 3.0 * abs(turn) + 2.0 * x))
