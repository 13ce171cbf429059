"""Every proven bound that applies to a formula and a partition, as a law of time and steps.

What a law costs is paid once, when it is made; after that it is a formula in t and r. Laws are remembered for the last
few questions, so that a search over step counts costs nothing more.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from contextlib import suppress
from dataclasses import dataclass, replace
from functools import lru_cache, partial

from trueturn.accuracy import analytic, norms
from trueturn.accuracy.commutators import (
    MOST_TUPLES,
    TooManyStrings,
    first_order_sum,
    nested_commutator_sum,
    second_order_sums,
)
from trueturn.accuracy.norms import NormRule
from trueturn.accuracy.remainder import MOST_STRINGS, Expansion, expansions, layers
from trueturn.formulas import Formula
from trueturn.formulas.merging import merged_runs
from trueturn.formulas.order import WEIGHT_SLACK
from trueturn.formulas.processed import Processed
from trueturn.partition import Partition

__all__ = ["ANALYTIC", "COMMUTATOR", "WIDE", "Law", "laws", "left_out"]

COMMUTATOR, WIDE, ANALYTIC = "commutator", "wide", "analytic"

CHILDS = "A. M. Childs, Y. Su, M. C. Tran, N. Wiebe, S. Zhu, Theory of Trotter error, Phys. Rev. X 11, 011020 (2021)"
ZHAO = (
    "Q. Zhao, Y. Zhou, A. F. Shaw, T. Li, A. M. Childs, Hamiltonian simulation with random inputs, "
    "Phys. Rev. Lett. 129, 270502 (2022)"
)
LAYDEN = "D. Layden, First-order Trotter error from a second-order perspective, Phys. Rev. Lett. 128, 210501 (2022)"
MASLOV = (
    "A. M. Childs, D. Maslov, Y. Nam, N. J. Ross, Y. Su, Toward the first quantum simulation with quantum speedup, "
    "Proc. Natl. Acad. Sci. 115, 9456 (2018)"
)
DERIVED = "derived in docs/error-bounds.md"

LIE = (((1.0, "forward"),), ((1.0, "reverse"),))
STRANG = ((0.5, "forward"), (0.5, "reverse"))


@dataclass(frozen=True)
class Law:
    """One bound as a function of time and steps.

    Attributes
    ----------
    method : str
        ``"commutator"`` or ``"analytic"``.
    theorem, source : str
    route : str
        How the norms in it were obtained.
    error : callable
        (time, steps) -> float; falls as steps grow.
    detail : callable, optional
        (time, steps) -> str, added to the theorem.
    left_out : str
        What would be tighter and costs too much; empty where there is nothing.
    """

    method: str
    theorem: str
    source: str
    route: str
    error: Callable[[float, int], float]
    detail: Callable[[float, int], str] = lambda time, steps: ""
    left_out: str = ""


def weights_of(one: Formula | Processed) -> tuple[tuple[float, str], ...]:
    """List weight and direction of every stage; those of a processed formula with both its ends."""
    stages = one.stages if isinstance(one, Formula) else (*one.pre, *one.kernel.stages, *one.post)
    return tuple((stage.weight, stage.direction) for stage in stages)


@lru_cache(maxsize=64)
def laws(
    one: Formula | Processed, partition: Partition, random: bool, method: str, effort: float = 1.0
) -> tuple[Law, ...]:
    """Make the laws of one method.

    Parameters
    ----------
    one : Formula or Processed
    partition : Partition
    random : bool
        Whether for the mean over random inputs instead of the worst input.
    method : str
        ``"commutator"``: the published theorem for lie and strang, the expansion for all others. ``"wide"``: those
        commutator bounds that the former leaves out. ``"analytic"``.
    effort : float
        Share of the usual work.
    """
    weights = weights_of(one)
    published = weights in LIE or weights == STRANG
    if method == ANALYTIC:
        return _analytic(one, partition)
    if method == COMMUTATOR:
        return _best_known(one, partition, random, effort)
    found = _expanded(one, partition, random, effort) if published else ()
    found += _all_tuples(one, partition, random, effort)
    if weights in LIE and len(partition.parts) == 2 and not random:
        with suppress(TooManyStrings):
            found += (_boundary(partition, effort),)
    return found


def _best_known(one: Formula | Processed, partition: Partition, random: bool, effort: float) -> tuple[Law, ...]:
    """The published theorem where there is one and its brackets are within reach, else the expansion."""
    weights = weights_of(one)
    if weights not in LIE and weights != STRANG:
        return _expanded(one, partition, random, effort)
    try:
        return (_published(weights, partition, random, effort),)
    except TooManyStrings:
        note = f"the theorem for {one.name}: its brackets have too many strings"
        return tuple(replace(law, left_out=note) for law in _expanded(one, partition, random, effort))


def left_out(one: Formula | Processed, partition: Partition, effort: float = 1.0) -> tuple[str, ...]:
    """Name the bounds that apply and were not computed with this share of the usual work, and why."""
    notes = []
    tuples = len(partition.parts) ** (one.order + 1)
    if tuples > MOST_TUPLES * effort:
        notes.append(f"sum over all tuples of parts: {len(partition.parts)}^{one.order + 1} of them, too many")
    notes += [law.left_out for law in laws(one, partition, False, COMMUTATOR, effort) if law.left_out]
    return tuple(dict.fromkeys(notes))


def _weight_error(one: Formula | Processed, partition: Partition) -> float:
    """Bound, for each unit of time, what moving the weights to those of exactly the claimed order changes.

    That they are within `WEIGHT_SLACK` of the largest of such weights is what the measurement of the order checks. Those of
    lie and strang are exact.
    """
    weights = weights_of(one)
    if weights in LIE or weights == STRANG:
        return 0.0
    largest = max(abs(weight) for weight, _ in weights)
    return len(weights) * largest * WEIGHT_SLACK * math.fsum(part.one_norm() for part in partition.parts)


def _published(weights: tuple[tuple[float, str], ...], partition: Partition, random: bool, effort: float) -> Law:
    parts = partition.parts
    source = f"{CHILDS}; for random inputs {ZHAO}" if random else CHILDS
    if weights in LIE:
        total = first_order_sum(parts, _rule(len(parts), partition, random, effort), MOST_STRINGS * effort)
        return Law(
            COMMUTATOR,
            "Proposition 9 (first order)",
            source,
            total.route,
            lambda time, steps: 0.5 * _product(total.value, time, steps, 1),
        )
    outer, inner = second_order_sums(parts, _rule(2 * len(parts), partition, random, effort), MOST_STRINGS * effort)
    size = (outer.value / 12.0 + inner.value / 24.0) * (1.0 + 1e-12)
    return Law(
        COMMUTATOR,
        "Proposition 10 (second order)",
        source,
        norms.joined_routes(norm.route for norm in (outer, inner) if norm.value > 0.0),
        lambda time, steps: _product(size, time, steps, 2),
    )


def _expanded(one: Formula | Processed, partition: Partition, random: bool, effort: float) -> tuple[Law, ...]:
    """The expansion of `trueturn.accuracy.remainder`, in both directions where they differ, cut where it is least."""
    runs = merged_runs(one.exact_stages(), len(partition.parts))
    step = layers(runs, partition.parts)
    hamiltonian = partition.operator().without_identity()
    leading: NormRule = norms.frobenius if random else partial(norms.thorough, effort=effort)
    remainder: NormRule = norms.frobenius if random else norms.quick
    ways = [step] if step == step[::-1] else [step, step[::-1]]
    found = [each for way in ways for each in expansions(way, hamiltonian, one.order, leading, remainder, effort)]
    if not found:
        # A bound for every input bounds their mean too.
        note = "merged nested commutators: too many strings"
        return tuple(replace(law, left_out=note) for law in _analytic(one, partition))

    def best(time: float, steps: int) -> Expansion:
        return min(found, key=lambda each: each.error(time, steps))

    reached = max(each.degree for each in found)
    source = f"{DERIVED}; method of {CHILDS}" + (f"; for random inputs {ZHAO}" if random else "")
    return (
        Law(
            COMMUTATOR,
            f"order {one.order}, merged nested commutators with remainder",
            source,
            max(found, key=lambda each: each.degree).route,
            lambda time, steps: best(time, steps).error(time, steps),
            lambda time, steps: f" (cut at degree {best(time, steps).degree} of {reached})",
            f"brackets beyond degree {reached}: too many strings" if reached <= one.order else "",
        ),
    )


def _all_tuples(one: Formula | Processed, partition: Partition, random: bool, effort: float) -> tuple[Law, ...]:
    parts, order = partition.parts, one.order
    tuples = len(parts) ** (order + 1)
    if tuples > MOST_TUPLES * effort:
        return ()
    total = nested_commutator_sum(parts, order, _rule(tuples, partition, random, effort))
    weights = weights_of(one)
    # The theorem is for weights up to 1 in size; larger ones scale the time.
    reach = len(weights) * max(1.0, *(abs(weight) for weight, _ in weights))
    size = 2.0 * total.value / (order + 1) * reach ** (order + 1) * (1.0 + 1e-12)
    moved = _weight_error(one, partition)
    return (
        Law(
            COMMUTATOR,
            f"Theorem 6 (order {order}), sum over all tuples of parts, 2 (Υt)^(p+1)/(p+1)",
            CHILDS,
            total.route,
            lambda time, steps: _product(size, time, steps, order) + moved * abs(time),
        ),
    )


def _boundary(partition: Partition, effort: float) -> Law:
    """First order on two parts: second order between two boundary terms, with either part outside."""
    found = []
    for parts in (partition.parts, partition.parts[::-1]):
        outer, inner = second_order_sums(parts, _rule(4, partition, False, effort), MOST_STRINGS * effort)
        ends = norms.thorough(parts[0], effort)
        found.append((outer.value / 12.0 + inner.value / 24.0, ends.value, (outer.route, inner.route, ends.route)))

    def error(time: float, steps: int) -> float:
        return min(_product(size, time, steps, 2) + ends * abs(time) / steps for size, ends, _ in found) * (1.0 + 1e-12)

    return Law(
        COMMUTATOR,
        "first order as second order between boundary terms, + (t/r)‖A‖",
        f"{LAYDEN}; Proposition 10 of {CHILDS}",
        norms.joined_routes(route for *_, routes in found for route in routes if route),
        error,
    )


def _analytic(one: Formula | Processed, partition: Partition) -> tuple[Law, ...]:
    sizes = [norms.quick(part) for part in partition.parts]
    route = norms.joined_routes(norm.route for norm in sizes)
    strength = math.fsum(norm.value for norm in sizes) * (1.0 + 1e-12)
    weights = math.fsum(abs(weight) for weight, _ in weights_of(one))
    moved = _weight_error(one, partition)
    found = [
        Law(
            ANALYTIC,
            "tails of power series, no commutators",
            DERIVED,
            route,
            lambda time, steps: (
                analytic.power_series_bound(weights, strength * abs(time), one.order, steps) + moved * abs(time)
            ),
        )
    ]
    level = analytic.suzuki_level(one)
    if level is not None:
        each = analytic.counted_parts(level, len(sizes), max((norm.value for norm in sizes), default=0.0))
        found.append(
            Law(
                ANALYTIC,
                "count and largest norm of the parts, no commutators",
                MASLOV,
                route,
                lambda time, steps: analytic.counted_bound(level, each, time, steps) + moved * abs(time),
            )
        )
    return tuple(found)


def _rule(count: int, partition: Partition, random: bool, effort: float) -> NormRule:
    return norms.frobenius if random else norms.affordable(count, partition.qubits, effort)


def _product(size: float, time: float, steps: int, order: int) -> float:
    """size · t^(p+1)/r^p, factor by factor, so that a huge time gives infinity rather than an overflow."""
    value = size * abs(time)
    for _ in range(order):
        value *= abs(time) / steps
    return value if not math.isnan(value) else 0.0
