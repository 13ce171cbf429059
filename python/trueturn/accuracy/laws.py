"""Every proven bound that applies to a formula and a partition, as a law of time and steps.

What a law costs is paid once, when it is made; after that it is a formula in t and r. Laws are remembered for the last
few questions, so that a search over step counts costs nothing more.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

from trueturn.accuracy import analytic, norms
from trueturn.accuracy.commutators import MOST_TUPLES, first_order_sum, nested_commutator_sum, second_order_sums
from trueturn.accuracy.norms import Norm, NormRule
from trueturn.accuracy.remainder import Expansion, expansions, layers
from trueturn.formulas import Formula
from trueturn.formulas.merging import merged_runs
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
    """

    method: str
    theorem: str
    source: str
    route: str
    error: Callable[[float, int], float]
    detail: Callable[[float, int], str] = lambda time, steps: ""


def weights_of(one: Formula | Processed) -> tuple[tuple[float, str], ...]:
    """List weight and direction of every stage; those of a processed formula with both its ends."""
    stages = one.stages if isinstance(one, Formula) else (*one.pre, *one.kernel.stages, *one.post)
    return tuple((stage.weight, stage.direction) for stage in stages)


@lru_cache(maxsize=64)
def laws(one: Formula | Processed, partition: Partition, random: bool, method: str) -> tuple[Law, ...]:
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
    """
    weights = weights_of(one)
    published = weights in LIE or weights == STRANG
    if method == ANALYTIC:
        return _analytic(one, partition)
    if method == COMMUTATOR:
        return (_published(weights, partition, random),) if published else _expanded(one, partition, random)
    found = _expanded(one, partition, random) if published else ()
    found += _all_tuples(one, partition, random)
    if weights in LIE and len(partition.parts) == 2 and not random:
        found += (_boundary(partition),)
    return found


def left_out(one: Formula | Processed, partition: Partition) -> tuple[str, ...]:
    """Name the bounds that apply and were not computed, and why."""
    notes = []
    tuples = len(partition.parts) ** (one.order + 1)
    if tuples > MOST_TUPLES:
        notes.append(f"sum over all tuples of parts: {len(partition.parts)}^{one.order + 1} of them, too many")
    return tuple(notes)


def _published(weights: tuple[tuple[float, str], ...], partition: Partition, random: bool) -> Law:
    parts = partition.parts
    source = f"{CHILDS}; for random inputs {ZHAO}" if random else CHILDS
    if weights in LIE:
        total = first_order_sum(parts, _rule(len(parts), partition, random))
        return Law(
            COMMUTATOR,
            "Proposition 9 (first order)",
            source,
            total.route,
            lambda time, steps: 0.5 * _product(total.value, time, steps, 1),
        )
    outer, inner = second_order_sums(parts, _rule(2 * len(parts), partition, random))
    size = (outer.value / 12.0 + inner.value / 24.0) * (1.0 + 1e-12)
    return Law(
        COMMUTATOR,
        "Proposition 10 (second order)",
        source,
        norms.joined_routes(norm.route for norm in (outer, inner) if norm.value > 0.0),
        lambda time, steps: _product(size, time, steps, 2),
    )


def _expanded(one: Formula | Processed, partition: Partition, random: bool) -> tuple[Law, ...]:
    """The expansion of `trueturn.accuracy.remainder`, in both directions where they differ, cut where it is least."""
    runs = merged_runs(one.exact_stages(), len(partition.parts))
    step = layers(runs, partition.parts)
    hamiltonian = partition.operator().without_identity()
    leading: NormRule = norms.frobenius if random else norms.thorough
    remainder: NormRule = norms.frobenius if random else norms.quick
    ways = [step] if step == step[::-1] else [step, step[::-1]]
    found = [each for way in ways for each in expansions(way, hamiltonian, one.order, leading, remainder)]

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
        ),
    )


def _all_tuples(one: Formula | Processed, partition: Partition, random: bool) -> tuple[Law, ...]:
    parts, order = partition.parts, one.order
    tuples = len(parts) ** (order + 1)
    if tuples > MOST_TUPLES:
        return ()
    total = nested_commutator_sum(parts, order, _rule(tuples, partition, random))
    weights = weights_of(one)
    # The theorem is for weights up to 1 in size; larger ones scale the time.
    reach = len(weights) * max(1.0, *(abs(weight) for weight, _ in weights))
    size = 2.0 * total.value / (order + 1) * reach ** (order + 1) * (1.0 + 1e-12)
    return (
        Law(
            COMMUTATOR,
            f"Theorem 6 (order {order}), sum over all tuples of parts, 2 (Υt)^(p+1)/(p+1)",
            CHILDS,
            total.route,
            lambda time, steps: _product(size, time, steps, order),
        ),
    )


def _boundary(partition: Partition) -> Law:
    """First order on two parts: second order between two boundary terms, with either part outside."""
    found = []
    for parts in (partition.parts, partition.parts[::-1]):
        outer, inner = second_order_sums(parts, _rule(4, partition, False))
        ends = norms.thorough(parts[0])
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
    found = [
        Law(
            ANALYTIC,
            "tails of power series, no commutators",
            DERIVED,
            route,
            lambda time, steps: analytic.power_series_bound(weights, strength * abs(time), one.order, steps),
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
                lambda time, steps: analytic.counted_bound(level, each, time, steps),
            )
        )
    return tuple(found)


def _rule(count: int, partition: Partition, random: bool) -> NormRule:
    return norms.frobenius if random else norms.affordable(count, partition.qubits)


def _product(size: float, time: float, steps: int, order: int) -> float:
    """size · t^(p+1)/r^p, factor by factor, so that a huge time gives infinity rather than an overflow."""
    value = size * abs(time)
    for _ in range(order):
        value *= abs(time) / steps
    return value if not math.isnan(value) else 0.0
