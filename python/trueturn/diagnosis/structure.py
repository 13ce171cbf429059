"""The structure behind a damaged circuit: formula, steps and order of all strings, from the strings that are sound.

Strings whose totals are right show which formula was meant and in which order they run. Strings that are wrong or
missing are then put where a partition rule that agrees with the sound ones has them, or where the circuit has them;
whichever explains more of the rotations that are there.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import numpy.typing as npt

from trueturn.diagnosis.character import Model, first_order, last_order, recognised
from trueturn.diagnosis.methods import stage_places
from trueturn.diagnosis.ordering import Settled, clashes, gaps, order_moments, settle
from trueturn.diagnosis.orders import Fit, RuleOrders, partition_in_order
from trueturn.diagnosis.readings import Reading
from trueturn.diagnosis.unfolding import Ints, Mask, Reals, Unfolded
from trueturn.formulas import formula
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["Hamiltonian", "Plan", "Structure"]

GAP_SLACK = 1e-6
COMPARED = 8
"""Anticommuting strings that a damaged one is compared with."""
MOST_STRINGS = 20_000
MOST_PAIRS = 20_000_000
STILL = 1e-9
"""Second moments below this have vanished."""


class Hamiltonian:
    """An operator without its identity, with what is needed to speak of orders of its terms."""

    def __init__(self, operator: Operator) -> None:
        self.operator = operator
        self.terms = operator.without_identity()
        self.masks: list[Mask] = list(zip(self.terms.x_masks.tolist(), self.terms.z_masks.tolist(), strict=True))
        self.numbers = {mask: number for number, mask in enumerate(self.masks)}
        self.coefficients: list[float] = self.terms.coefficients.tolist()

    @cached_property
    def neighbours(self) -> list[Ints]:
        """Numbers of the terms that anticommute with each."""
        return clashes(self.masks, self.terms.qubits)

    @cached_property
    def rules(self) -> RuleOrders:
        """Orders that partition rules give."""
        return RuleOrders(self.terms, self.neighbours)


@dataclass(frozen=True)
class Plan:
    """A formula, full step count and order of all terms, with how much of the circuit it leaves unexplained.

    Attributes
    ----------
    model : Model
        As recognised in the shortened word.
    steps : int
        Of the whole circuit.
    order : tuple of int
        Numbers of terms.
    rule : str
        Rule that the order comes from; empty where it comes from the circuit.
    given : bool
        Whether that rule's parts stand in its own order.
    unexplained : int
        Places where damaged strings turn by another angle than they should.
    settled : Settled
    judged : tuple of int
        What it was recognised by.
    """

    model: Model
    steps: int
    order: tuple[int, ...]
    rule: str
    given: bool
    unexplained: int
    settled: Settled
    judged: tuple[int, ...]

    def circuit(self, hamiltonian: Hamiltonian, time: float, steps: int | None = None) -> Rotations:
        """Build the circuit that was meant."""
        partition = partition_in_order(hamiltonian.operator, self.order, hamiltonian.neighbours)
        return formula(self.model.method.name).rotations(partition, time, self.steps if steps is None else steps)


class Structure:
    """A circuit under one reading, beside the Hamiltonian.

    Attributes
    ----------
    terms : ndarray of int, shape (strings,)
        Number of the Hamiltonian's term that each string of the circuit is; -1 for extra ones.
    sound, damaged : lists of int
        Strings of the circuit whose totals are right, and those that are terms of the Hamiltonian with wrong totals.
    missing : list of int
        Terms that the circuit does not have.
    """

    def __init__(self, unfolded: Unfolded, hamiltonian: Hamiltonian, reading: Reading) -> None:
        self._unfolded = unfolded
        self.hamiltonian = hamiltonian
        self.reading = reading
        masks = [reading.mask(mask) for mask in unfolded.masks]
        self.masks = masks
        self.terms = np.array([hamiltonian.numbers.get(mask, -1) for mask in masks], dtype=np.intp)
        wrong = {mask for group in reading.groups for mask in (*group.found, *group.wanted)}
        present = np.bincount(unfolded.word.strings, minlength=len(masks)) > 0
        self.sound = [s for s, mask in enumerate(masks) if self.terms[s] >= 0 and mask not in wrong and present[s]]
        self.damaged = [s for s, mask in enumerate(masks) if self.terms[s] >= 0 and mask in wrong and present[s]]
        held = {int(term) for term in self.terms[self.terms >= 0]}
        self.missing = [term for term in range(len(hamiltonian.masks)) if term not in held]

    @cached_property
    def neighbours(self) -> list[Ints] | None:
        """Strings of the circuit that anticommute with each; None where there are too many to look at."""
        if len(self.masks) > MOST_STRINGS:
            return None
        found = clashes(self.masks, self.hamiltonian.terms.qubits)
        return found if sum(others.size for others in found) <= MOST_PAIRS else None

    @cached_property
    def settled(self) -> Settled | None:
        """The whole circuit, merged."""
        return None if self.neighbours is None else settle(self._unfolded.word, self.neighbours)

    @cached_property
    def moments(self) -> Reals:
        """Second moments of the pairs of strings that anticommute, brought from the shortened to the full length."""
        if self.settled is None or self.neighbours is None:
            return np.zeros(0)
        return order_moments(self.settled, self.neighbours) / self._stretch()

    @cached_property
    def plans(self) -> list[Plan]:
        """Plans that agree with all sound strings, the best first."""
        if self.neighbours is None or not self.sound:
            return []
        found = list(self._plans_of(self.sound, []))
        if not found and self.damaged:
            found = list(self._plans_of(self.sound, self.damaged))
        symmetric = bool(self.moments.size) and float(self.moments.max()) < STILL
        return sorted(found, key=lambda plan: (symmetric and not plan.model.method.symmetric, plan.unexplained))

    def _plans_of(self, judged: Sequence[int], others: Sequence[int]) -> Iterator[Plan]:
        assert self.neighbours is not None
        kept = np.zeros(len(self.masks), dtype=bool)
        strings = [*judged, *others]
        kept[strings] = True
        settled = settle(self._unfolded.word, self.neighbours, kept)
        strings = [string for string in strings if settled.places[string].size]
        judged = [string for string in judged if settled.places[string].size]
        if not judged:
            return
        for order in self._orders(settled, strings, bool(others)):
            for model in recognised(settled, self.neighbours, judged, order):
                steps = model.steps * self._stretch()
                if abs(steps - round(steps)) > 1e-6 * steps:
                    continue
                for fit in self._full_orders(model, judged):
                    unexplained = self._unexplained(model, fit.order, settled, judged)
                    yield Plan(model, round(steps), fit.order, fit.rule, fit.given, unexplained, settled, tuple(judged))

    def _orders(self, settled: Settled, strings: list[int], doubtful: bool) -> Iterator[tuple[int, ...]]:
        """Orders to compare with: that of the first rotations, and where those are doubtful further ones."""
        first = first_order(settled, strings)
        yield first
        if not doubtful:
            return
        yield first[::-1]
        yield last_order(settled, strings, True)
        yield last_order(settled, strings, False)
        of_term = {int(self.terms[string]): string for string in strings}
        for fit in self.hamiltonian.rules.all_given():
            yield tuple(of_term[term] for term in fit.order if term in of_term)

    def _full_orders(self, model: Model, judged: Sequence[int]) -> list[Fit]:
        """Orders of all terms that agree with the sound strings."""
        size = len(self.hamiltonian.masks)
        ranks = np.full(size, -1)
        sound = set(judged)
        for rank, string in enumerate(model.order):
            if string in sound or not self.damaged:
                ranks[self.terms[string]] = rank
        fits = list(self.hamiltonian.rules.fits(ranks))
        if not self.missing:
            known = [int(self.terms[string]) for string in model.order]
            if len(known) == size:
                fits.append(Fit("", False, tuple(known)))
            else:
                first = {int(self.terms[s]): int(np.argmax(self._unfolded.word.strings == s)) for s in self.damaged}
                fits += self._inserted(model, first)
        return fits

    def _inserted(self, model: Model, first: dict[int, int]) -> list[Fit]:
        """Put damaged strings among the sound ones where the circuit has them first."""
        places = {}
        for string in model.order:
            places[int(self.terms[string])] = int(np.argmax(self._unfolded.word.strings == string))
        places.update(first)
        order = tuple(sorted(places, key=places.__getitem__))
        return [Fit("", False, order)] if len(order) == len(self.hamiltonian.masks) else []

    def _unexplained(self, model: Model, order: tuple[int, ...], settled: Settled, judged: Sequence[int]) -> int:
        """Count the gaps between sound strings in which damaged ones turn by other angles than the plan has."""
        found = 0
        for string in self.damaged:
            given, ideal = self._gap_angles(model, order, settled, judged, string)
            if given is None or ideal is None:
                return MOST_PAIRS
            found += least_deviation(given, ideal)
        return found

    def deviations(self, plan: Plan, string: int) -> int:
        """Count the gaps in which a damaged string turns by another share of its total than the plan has."""
        given, ideal = self._gap_angles(plan.model, plan.order, plan.settled, plan.judged, string)
        return 0 if given is None or ideal is None else scaled_deviation(given, ideal)

    def _gap_angles(
        self, model: Model, order: tuple[int, ...], settled: Settled, judged: Sequence[int], string: int
    ) -> tuple[Reals, Reals] | tuple[None, None]:
        """Give the angles of a damaged string between sound ones, and those it should have there.

        None where the sound strings would not have merged as they have in this order.
        """
        assert self.neighbours is not None
        method, steps, size = model.method, model.steps, len(order)
        ranks = np.empty(size, dtype=np.intp)
        ranks[list(order)] = np.arange(size)
        word = self._unfolded.word
        mine = np.flatnonzero(word.strings == string)
        term = int(self.terms[string])
        stages = np.arange(steps * method.weights.size)
        shares = np.tile(method.weights, steps) / steps
        own = stage_places(method, steps, stages, int(ranks[term]), size)
        sound, kept = set(judged), set(model.order)
        given, ideal = [np.zeros(0)], [np.zeros(0)]
        angle = self.hamiltonian.coefficients[term] * self._length(judged[0], settled)
        for other in [int(one) for one in self.neighbours[string] if int(one) in sound][:COMPARED]:
            stages_of, _ = method.pattern(steps, *self._sides(other, kept, ranks))
            if stages_of.size != settled.places[other].size:
                return None, None
            theirs = stage_places(method, steps, stages_of, int(ranks[self.terms[other]]), size)
            given.append(gaps(mine, word.angles[mine], settled.places[other]))
            ideal.append(gaps(own, shares * angle, theirs))
        return np.concatenate(given), np.concatenate(ideal)

    def _sides(self, string: int, kept: set[int], ranks: Ints) -> tuple[bool, bool]:
        assert self.neighbours is not None
        own = ranks[self.terms[string]]
        known = np.array([ranks[self.terms[one]] for one in self.neighbours[string] if int(one) in kept])
        return bool(np.any(known < own)), bool(np.any(known > own))

    def _length(self, string: int, settled: Settled) -> float:
        """Time that the shortened word takes, by a sound string."""
        return float(settled.angles[string].sum()) / self.hamiltonian.coefficients[int(self.terms[string])]

    def _stretch(self) -> float:
        """Full length over that of the shortened word, by the sound string that turns most."""
        strings: npt.NDArray[np.intp] = np.array(self.sound or self.damaged, dtype=np.intp)
        if not strings.size:
            return 1.0
        totals = self._unfolded.totals[strings]
        short = totals - self._unfolded.left_out[strings]
        most = int(np.argmax(np.abs(short)))
        return float(totals[most] / short[most]) if short[most] else 1.0


def least_deviation(given: Reals, ideal: Reals) -> int:
    """Count the entries that differ, as they are or once scaled to the same sum (which costs one)."""
    if not given.size:
        return 0
    slack = GAP_SLACK * max(float(np.max(np.abs(ideal))), 5e-324)
    plain = int(np.count_nonzero(np.abs(given - ideal) > slack))
    return min(plain, 1 + scaled_deviation(given, ideal))


def scaled_deviation(given: Reals, ideal: Reals) -> int:
    """Count the entries that differ once both have the same sum."""
    total = float(ideal.sum())
    if not total or not given.size:
        return 0
    scaled = ideal * (float(given.sum()) / total)
    slack = GAP_SLACK * max(float(np.max(np.abs(scaled))), float(np.max(np.abs(given))), 5e-324)
    return int(np.count_nonzero(np.abs(given - scaled) > slack))
