"""In which order the strings of a Hamiltonian were meant to run: what partition rules say, beside the circuit.

Only the order of pairs that anticommute matters. A rule fits when it agrees with the circuit on every such pair of
strings that are known to stand right; it then says where the others belong.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from trueturn.diagnosis.unfolding import Ints
from trueturn.errors import PartitionError
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.partition_rules import RULES, Groups, subset

__all__ = ["Fit", "RuleOrders", "partition_in_order"]

CHEAP = ("commuting", "bond", "axis", "single", "magnitude", "lexicographic")
OTHERS = ("commuting-largest-first", "commuting-smallest-last", "commuting-saturation", "gate-saving")
MANY = 1500
"""Hamiltonians of more terms are only compared with the cheap rules."""


@dataclass(frozen=True)
class Fit:
    """An order of all terms that agrees with what is known.

    Attributes
    ----------
    rule : str
    given : bool
        Whether the parts stand as the rule puts them, and not in an order found in the circuit.
    order : tuple of int
        Numbers of terms.
    place : int
        Place of the rule in the list of rules.
    """

    rule: str
    given: bool
    order: tuple[int, ...]
    place: int


class RuleOrders:
    """Orders of the terms of an operator without identity."""

    def __init__(self, terms: Operator, neighbours: Sequence[Ints]) -> None:
        self._terms = terms
        self._neighbours = neighbours
        self._groups: dict[str, Groups | None] = {}
        first = [np.full(others.size, term) for term, others in enumerate(neighbours)]
        one = np.concatenate(first) if first else np.zeros(0, dtype=np.intp)
        two = np.concatenate(list(neighbours)) if first else np.zeros(0, dtype=np.intp)
        self._pairs = one[one < two], two[one < two]

    @property
    def rules(self) -> tuple[str, ...]:
        """Names of the rules compared with."""
        return CHEAP + (OTHERS if len(self._terms) <= MANY else ())

    def fits(self, ranks: Ints) -> Iterator[Fit]:
        """List the rules that agree with known ranks (-1: unknown), those with parts as given first."""
        one, two = self._pairs
        known = (ranks[one] >= 0) & (ranks[two] >= 0)
        one, two = one[known], two[known]
        earlier = ranks[one] < ranks[two]
        for given in (True, False):
            for place, rule in enumerate(self.rules):
                groups = self._of(rule)
                if groups is None:
                    continue
                order = tuple(
                    term for group in (groups if given else _sorted(groups, ranks, self._neighbours)) for term in group
                )
                places = np.empty(len(order), dtype=np.intp)
                places[list(order)] = np.arange(len(order))
                if np.array_equal(places[one] < places[two], earlier):
                    yield Fit(rule, given, order, place)

    def all_given(self) -> Iterator[Fit]:
        """List the rules as they are."""
        yield from self.fits(np.full(len(self._terms), -1))

    def same(self, one: Sequence[int], two: Sequence[int]) -> bool:
        """Whether two orders agree on every pair that anticommutes."""
        places = np.empty((2, len(self._terms)), dtype=np.intp)
        places[0, list(one)] = places[1, list(two)] = np.arange(len(self._terms))
        first, second = self._pairs
        return bool(np.array_equal(places[0, first] < places[0, second], places[1, first] < places[1, second]))

    def _of(self, rule: str) -> Groups | None:
        if rule not in self._groups:
            try:
                self._groups[rule] = RULES[rule](self._terms)
            except PartitionError:  # a rule that does not take these strings
                self._groups[rule] = None
        return self._groups[rule]


def _sorted(groups: Groups, ranks: Ints, neighbours: Sequence[Ints]) -> Groups:
    """Put parts in the order of the mean rank of their known terms, and the others where most places are the same.

    Moving a part past one that it commutes with changes nothing. A part that was anywhere in a random order was most
    likely in the longest stretch between parts that it does not commute with.
    """
    keys: list[tuple[float, int]] = []
    unknown = []
    for place, group in enumerate(groups):
        known = [float(ranks[term]) for term in group if ranks[term] >= 0]
        if known:
            keys.append((sum(known) / len(known), place))
        else:
            unknown.append(group)
    placed = [groups[place] for _, place in sorted(keys)]
    for group in unknown:
        barred = {int(other) for term in group for other in neighbours[term]}
        walls = [place for place, other in enumerate(placed) if barred.intersection(other)]
        stretches = pairwise([-1, *walls, len(placed)])
        start, _ = max(stretches, key=lambda ends: ends[1] - ends[0])
        placed.insert(start + 1, group)
    return placed


def partition_in_order(operator: Operator, order: Sequence[int], neighbours: Sequence[Ints]) -> Partition:
    """Make a partition whose parts are the longest runs of an order in which all terms commute."""
    terms = operator.without_identity()
    runs: list[list[int]] = []
    barred: set[int] = set()
    for term in order:
        if not runs or term in barred:
            runs.append([])
            barred = set()
        runs[-1].append(term)
        barred.update(neighbours[term].tolist())
    parts = [subset(terms, run) for run in runs]
    if operator.identity_coefficient:
        parts.append(Operator.from_masks([0], [0], [operator.identity_coefficient], operator.qubits))
    return Partition(parts or [Operator.from_masks([], [], [], operator.qubits)])
