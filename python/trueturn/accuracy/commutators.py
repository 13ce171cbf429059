"""Sums of norms of nested brackets: the constants of the published commutator bounds."""

from __future__ import annotations

import math
from collections.abc import Sequence

from trueturn.accuracy.norms import Norm, NormRule, joined_routes
from trueturn.operator import Operator

__all__ = ["MOST_TUPLES", "TooManyStrings", "first_order_sum", "nested_commutator_sum", "second_order_sums"]

MOST_TUPLES = 5_000
"""Tuples of parts above which the sum over all of them is not attempted unasked: a second."""

_PAD = 1.0 + 1e-12  # sums and products of doubles; brackets of two or three parts lose less


def _rests(parts: Sequence[Operator]) -> list[tuple[Operator, Operator]]:
    """Return (A_k, A_{k+1} + … + A_m) for all parts but the last."""
    pairs = []
    rest: Operator | None = None
    for part in reversed(parts):
        if rest is not None:
            pairs.append((part, rest))
        rest = part if rest is None else rest + part
    return pairs[::-1]


def _total(norms: Sequence[Norm]) -> Norm:
    return Norm(math.fsum(norm.value for norm in norms) * _PAD, joined_routes(n.route for n in norms if n.value > 0.0))


class TooManyStrings(Exception):
    """The brackets have more strings than allowed."""


class _Allowance:
    """The strings that are left to spend."""

    def __init__(self, strings: float) -> None:
        self.strings = strings

    def spent_on(self, bracket: Operator) -> Operator:
        self.strings -= len(bracket)
        if self.strings < 0:
            raise TooManyStrings
        return bracket


def first_order_sum(parts: Sequence[Operator], rule: NormRule, most_strings: float = math.inf) -> Norm:
    """Return Σ_k ‖[G_k, A_k]‖ with G_k = A_{k+1} + … + A_m.

    Raises
    ------
    TooManyStrings
        As soon as the brackets have more than `most_strings` together.
    """
    found, allowance = [], _Allowance(most_strings)
    for part, rest in _rests(parts):
        found.append(rule(allowance.spent_on(rest.bracket(part))))
    return _total(found)


def second_order_sums(parts: Sequence[Operator], rule: NormRule, most_strings: float = math.inf) -> tuple[Norm, Norm]:
    """Return Σ_k ‖[G_k, [G_k, A_k]]‖ and Σ_k ‖[A_k, [A_k, G_k]]‖ with G_k = A_{k+1} + … + A_m.

    Raises
    ------
    TooManyStrings
        As soon as the brackets have more than `most_strings` together.
    """
    outer, inner, allowance = [], [], _Allowance(most_strings)
    for part, rest in _rests(parts):
        once = allowance.spent_on(rest.bracket(part))
        outer.append(rule(allowance.spent_on(rest.bracket(once))))
        inner.append(rule(allowance.spent_on(part.bracket(once))))
    return _total(outer), _total(inner)


def nested_commutator_sum(parts: Sequence[Operator], depth: int, rule: NormRule) -> Norm:
    """Return Σ ‖[A_{g_{depth+1}}, […, [A_{g_2}, A_{g_1}]]]‖ over all ordered tuples of parts.

    Parameters
    ----------
    parts : sequence of Operator
    depth : int
        Number of brackets, the order of the formula.
    rule : callable
        The norm.

    Returns
    -------
    Norm

    Notes
    -----
    The innermost pair is taken once and counted twice, and a bracket that vanishes is not followed, so at most
    m^(depth+1)/2 brackets are computed.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.accuracy.norms import thorough
    >>> parts = [tt.Operator("X_0"), tt.Operator("Z_0")]
    >>> round(nested_commutator_sum(parts, 2, thorough).value, 9)
    16.0
    """
    norms: list[Norm] = []

    def descend(nested: Operator, brackets: int) -> None:
        if len(nested) == 0:
            return
        if brackets == depth:
            norm = rule(nested)
            norms.append(Norm(2.0 * norm.value, norm.route))
            return
        for part in parts:
            descend(part.bracket(nested), brackets + 1)

    for number, part in enumerate(parts):
        for other in parts[:number]:
            descend(part.bracket(other), 1)
    return _total(norms)
