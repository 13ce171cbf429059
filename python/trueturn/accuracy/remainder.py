"""The error of one step as a power series with a proven remainder, from nested brackets merged before norms are taken.

Let a step be exp(-iτB_J) … exp(-iτB_1), where each layer B_i is a sum of weighted parts that commute, and put
X_i = -i[B_i, ·]. Then dS/ds = -iF(s)S(s) with F(s) = D_J(s), where

    D_0 = 0,    D_i(s) = B_i + exp(sX_i) D_{i-1}(s),

and ‖S(τ) - exp(-iτH)‖ ≤ ∫_0^τ ‖F(s) - H‖ ds. Cut each power series after s^(q-1). What one exponential adds to the
remainder is, up to conjugation, which changes no unitarily invariant norm,

    s^q ∫_0^1 exp((1-y)sX_i) X_i C_i(y) dy,    C_i(y) = the coefficient of s^(q-1) in exp(ysX_i) D_{i-1}(s),

where C_i is a polynomial in y whose Bernstein coefficients C_i0 … C_i,q-1 each have weight 1/q. Hence, with K_d the
coefficient of s^d in F(s) - H,

    ‖S(τ) - exp(-iτH)‖ ≤ Σ_{d<q} ‖K_d‖ τ^(d+1)/(d+1) + τ^(q+1)/(q (q+1)) Σ_i Σ_k ‖[B_i, C_ik]‖.

This holds for every q ≥ 1 and any list of layers. Where the formula has order p, the K_d with d < p vanish but for rounding
of the weights; they are computed, not assumed. q = p is the bound of Childs et al. with sums merged; q = p + 1 has the leading
error itself, K_p, in front. For Strang on two parts q = 2 gives their Proposition 10. See docs/error-bounds.md.

Coefficients are doubles. Beside each operator goes a bound on the sum of the errors of its coefficients, which is added
to every norm.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from trueturn import _memory
from trueturn._native import Terms
from trueturn.accuracy.norms import Norm, NormRule, joined_routes
from trueturn.operator import Operator

__all__ = ["MOST_STRINGS", "Expansion", "expansions", "layers"]

MOST_STRINGS = 12_000_000
"""Strings in all brackets together, up to some ten seconds; degrees that would need more are given up."""

CALL = 40
"""Strings that could be worked through in the time of one call."""

UNIT = 2.0**-53


@dataclass(frozen=True)
class Expansion:
    """The bound Σ_{d<q} leading[d] τ^(d+1)/(d+1) + remainder τ^(q+1)/(q+1) on the error of one step.

    Attributes
    ----------
    leading : tuple of float
        Bounds on ‖K_d‖ for d = 0 … q - 1.
    remainder : float
    route : str
        How the norms were obtained.
    """

    leading: tuple[float, ...]
    remainder: float
    route: str

    @property
    def degree(self) -> int:
        """The q of the cut."""
        return len(self.leading)

    def error(self, time: float, steps: int) -> float:
        """Bound the error of `steps` equal steps of time/steps each; infinite where it overflows."""
        tau = abs(time) / steps
        total = 0.0
        for power, size in enumerate((*self.leading, self.remainder), start=1):
            if size > 0.0:
                # Logarithms, so that neither a huge nor a tiny factor is lost on the way.
                scale = math.log(size) + (power - 1) * math.log(tau) if tau > 0.0 else -math.inf
                total += abs(time) / power * (math.exp(scale) if scale < 700.0 else math.inf)
        return total * (1.0 + 1e-12)


@dataclass(frozen=True)
class _Known:
    """An operator, a bound on the summed errors of its coefficients, and on the weight of strings in either."""

    terms: Terms
    slack: float
    weight: int


class _Layer:
    """One layer B, and how much a bracket with it can enlarge Σ|c|."""

    def __init__(self, operator: Operator, memory: int) -> None:
        self.terms = operator._terms
        self.memory = memory
        sizes = operator.coefficients
        self.total = operator.one_norm()
        self.count = len(operator)
        self.reach = 0
        at_qubit: dict[int, tuple[float, int]] = {}
        for x, z, size in zip(operator.x_masks, operator.z_masks, abs(sizes).tolist(), strict=True):
            support = int(x) | int(z)
            self.reach = max(self.reach, support.bit_count())
            while support:
                qubit = support & -support
                strength, number = at_qubit.get(qubit, (0.0, 0))
                at_qubit[qubit] = (strength + size, number + 1)
                support ^= qubit
        self.local = max((strength for strength, _ in at_qubit.values()), default=0.0)
        self.crowd = max((number for _, number in at_qubit.values()), default=0)

    @property
    def known(self) -> _Known:
        """The layer itself; its weights were rounded, multiplied and added up."""
        return _Known(self.terms, 4 * UNIT * self.total, self.reach)

    def bracket(self, other: _Known, factor: float = 1.0) -> _Known:
        """Return `factor` times i[other, B], which is X applied to `other` for a factor of 1.

        A string meets terms of B of strength min(Σ|b|, weight · local strength) at most, and Σ|c| grows at most twice as
        much. A coefficient adds up at most `count` products; those of B and of the factor add eight roundings at most.
        """
        growth = 2.0 * abs(factor) * min(self.total, other.weight * self.local)
        weight = min(128, other.weight + self.reach - 1)
        count = min(self.count, weight * self.crowd)
        size = _size(other.terms) + other.slack
        slack = growth * (other.slack + (count + 8) * UNIT * size) * (1.0 + 1e-9)
        return _Known(other.terms.bracket(self.terms, self.memory).scaled(factor), slack, weight)


def _size(terms: Terms) -> float:
    return float(abs(terms.coefficients()).sum()) * (1.0 + 1e-9)


def _combined(pieces: Sequence[tuple[float, _Known]]) -> _Known:
    """Add up multiples; a coefficient takes one rounding for the factor, one for the product, one for each sum."""
    factor, first = pieces[0]
    total = first.terms if factor == 1.0 else first.terms.scaled(factor)
    slack = abs(factor) * (first.slack + 2 * UNIT * _size(first.terms))
    for factor, piece in pieces[1:]:
        total = total.plus(piece.terms if factor == 1.0 else piece.terms.scaled(factor))
        slack += abs(factor) * (piece.slack + (len(pieces) + 2) * UNIT * _size(piece.terms))
    return _Known(total, slack * (1.0 + 1e-9), max(piece.weight for _, piece in pieces))


def layers(runs: Sequence[tuple[int, Fraction]], parts: Sequence[Operator]) -> list[Operator]:
    """Turn runs of parts into layers, in time order: neighbours whose strings all commute act as one.

    Parameters
    ----------
    runs : sequence of (part number, weight)
        In the order in which they act.
    parts : sequence of Operator
        Each with commuting strings.

    Returns
    -------
    list of Operator
        Sums of weighted parts; the product of their exponentials, in this order, is the step.
    """
    known: dict[tuple[int, int], bool] = {}

    def commute(one: int, other: int) -> bool:
        pair = (min(one, other), max(one, other))
        if pair not in known:
            known[pair] = (parts[one] + parts[other])._terms.first_anticommuting_pair() is None
        return known[pair]

    found: list[list[tuple[int, Fraction]]] = []
    for number, weight in runs:
        if found and all(commute(number, member) for member, _ in found[-1]):
            found[-1].append((number, weight))
        else:
            found.append([(number, weight)])
    return [_sum([float(weight) * parts[number] for number, weight in members]) for members in found]


def _sum(operators: Sequence[Operator]) -> Operator:
    """Add up in pairs, so that many small operators do not copy the sum over and over."""
    while len(operators) > 1:
        operators = [
            operators[place] + operators[place + 1] if place + 1 < len(operators) else operators[place]
            for place in range(0, len(operators), 2)
        ]
    return operators[0]


def expansions(
    step: Sequence[Operator],
    hamiltonian: Operator,
    order: int,
    leading_norm: NormRule,
    remainder_norm: NormRule,
    effort: float = 1.0,
) -> tuple[Expansion, ...]:
    """Expand one step for q = 1 … order + 1, or fewer, even none, where more would take too many strings.

    Parameters
    ----------
    step : sequence of Operator
        The layers, in the order in which they act.
    hamiltonian : Operator
        Without identity term.
    order : int
        That of the formula. The K_d below it are rounding errors, whose norms are not worth much work.
    leading_norm, remainder_norm : callable
        The norm for K_order, and that for the rest.
    effort : float
        Share of `MOST_STRINGS` that may be worked through.

    Returns
    -------
    tuple of Expansion
        By q; empty where already q = 1 takes too many strings.

    Notes
    -----
    About J q² brackets for J layers. A degree is given up, with those above it, when the strings so far and those that the
    layers to come need at this rate exceed `MOST_STRINGS` times the effort.
    """
    memory = _memory.allowed_bytes()
    zero = _Known((hamiltonian - hamiltonian)._terms, 0.0, 0)
    series = [zero] * (order + 1)
    remainders: list[list[Norm]] = [[] for _ in series]
    spent = [0] * len(series)
    for place, operator in enumerate(step, start=1):
        layer = _Layer(operator, memory)
        powers = _powers(series, layer)
        for q in range(1, len(series) + 1):
            points = [layer.bracket(point) for point in _control_points(powers, q)]
            remainders[q - 1] += [_normed(point, remainder_norm) for point in points]
            diagonal = [powers[q - 1 - j][j] for j in range(q)]
            work = sum(CALL + len(known.terms) for known in points + diagonal)
            spent[q - 1] += work
            if sum(spent[:q]) + work * (len(step) - place) > MOST_STRINGS * effort:
                series = series[: q - 1]
                break
        if not series:
            return ()
        series = [_combined([(1.0, powers[d - j][j]) for j in range(d + 1)]) for d in range(len(series))]
        series[0] = _combined([(1.0, series[0]), (1.0, layer.known)])
    series[0] = _combined([(1.0, series[0]), (-1.0, _Layer(hamiltonian, memory).known)])
    leading = [_normed(known, leading_norm if d >= order else remainder_norm) for d, known in enumerate(series)]
    return tuple(_expansion(leading[:q], remainders[q - 1], order) for q in range(1, len(series) + 1))


def _expansion(leading: Sequence[Norm], remainder: Sequence[Norm], order: int) -> Expansion:
    routes = [norm.route for norm in (*leading[order:], *remainder) if norm.value > 0.0]
    return Expansion(
        tuple(norm.value for norm in leading),
        math.fsum(norm.value for norm in remainder) / len(leading) * (1.0 + 1e-12),
        joined_routes(routes),
    )


def _powers(series: Sequence[_Known], layer: _Layer) -> list[list[_Known]]:
    """X^j D_d / j! for d + j below the length of the series."""
    rows = []
    for d, known in enumerate(series):
        row = [known]
        for j in range(1, len(series) - d):
            row.append(layer.bracket(row[-1], 1.0 / j))
        rows.append(row)
    return rows


def _control_points(powers: Sequence[Sequence[_Known]], q: int) -> list[_Known]:
    """Bernstein coefficients of Σ_j y^j X^j D_{n-j}/j!, n = q - 1: Σ_{j≤k} C(k,j)/C(n,j) of the j-th."""
    n = q - 1
    return [
        _combined([(math.comb(k, j) / math.comb(n, j), powers[n - j][j]) for j in range(k + 1)]) for k in range(n + 1)
    ]


def _normed(known: _Known, rule: NormRule) -> Norm:
    norm = rule(Operator._of(known.terms))
    return Norm(norm.value + known.slack, norm.route)
