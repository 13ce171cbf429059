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
from trueturn.diagnosis.clocks import Clocks, scaled_deviation
from trueturn.diagnosis.ordering import Settled, clashes, order_moments, settle
from trueturn.diagnosis.orders import Fit, RuleOrders, partition_in_order
from trueturn.diagnosis.readings import Reading
from trueturn.diagnosis.totals import Group
from trueturn.diagnosis.unfolding import Ints, Mask, Reals, Unfolded
from trueturn.formulas import formula
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["Hamiltonian", "Plan", "Structure"]

UNUSUAL = 0.3
"""What an order costs that no rule gives as it stands, in shares of the angle of a damaged string."""
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
    unexplained : float
        Shares of their angles that damaged strings turn elsewhere than they should.
    judged : tuple of int
        Sound strings that it was recognised by.
    place : int
        Place of the rule in the list of rules; the usual ones stand first.
    """

    model: Model
    steps: int
    order: tuple[int, ...]
    rule: str
    given: bool
    unexplained: float
    judged: tuple[int, ...]
    place: int

    def circuit(self, hamiltonian: Hamiltonian, time: float, steps: int | None = None) -> Rotations:
        """Build the circuit that was meant."""
        partition = partition_in_order(hamiltonian.operator, self.order, hamiltonian.neighbours)
        return formula(self.model.method.name).rotations(partition, time, self.steps if steps is None else steps)


class Structure:
    """A circuit under one reading, beside the Hamiltonian.

    Attributes
    ----------
    word : Word
        The circuit, long repeats shortened.
    terms : ndarray of int, shape (strings,)
        Number of the Hamiltonian's term that each string of the circuit is; -1 for extra ones.
    sound, damaged : lists of int
        Strings of the circuit whose totals are right, and those that are terms of the Hamiltonian with wrong totals.
    missing : list of int
        Terms that the circuit does not have.
    """

    def __init__(self, unfolded: Unfolded, hamiltonian: Hamiltonian, reading: Reading) -> None:
        self._unfolded = unfolded
        self.word = unfolded.word
        self.hamiltonian = hamiltonian
        self.reading = reading
        masks = [reading.mask(mask) for mask in unfolded.masks]
        self.masks = masks
        self._clocks: dict[tuple[int, ...], Clocks] = {}
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
        return None if self.neighbours is None else settle(self.word, self.neighbours)

    @cached_property
    def moments(self) -> Reals:
        """Second moments of the pairs of strings that anticommute, brought from the shortened to the full length."""
        if self.settled is None or self.neighbours is None:
            return np.zeros(0)
        return order_moments(self.settled, self.neighbours) / self._stretch()

    @cached_property
    def plans(self) -> list[Plan]:
        """Plans that agree with all sound strings, the best first: those that leave one number for each damaged string."""
        if self.neighbours is None or not self.sound:
            return []
        found = list(self._plans_of(self.sound, []))
        if not found and self.damaged:
            found = list(self._plans_of(self.sound, self.damaged))
        symmetric = bool(self.moments.size) and float(self.moments.max()) < STILL

        def doubt(plan: Plan) -> tuple[bool, bool, float]:
            asymmetric = symmetric and not plan.model.method.symmetric
            several = not all(self.one_number(plan, string) for string in self.damaged)
            return asymmetric, several, round(plan.unexplained + (0.0 if plan.given else UNUSUAL), 6)

        return sorted(found, key=doubt)

    def _plans_of(self, judged: Sequence[int], others: Sequence[int]) -> Iterator[Plan]:
        assert self.neighbours is not None
        kept = np.zeros(len(self.masks), dtype=bool)
        strings = [*judged, *others]
        kept[strings] = True
        settled = settle(self.word, self.neighbours, kept)
        strings = [string for string in strings if settled.places[string].size]
        judged = [string for string in judged if settled.places[string].size]
        if not judged:
            return
        for order in dict.fromkeys(self._orders(settled, strings, bool(others))):
            for model in recognised(settled, self.neighbours, judged, order):
                steps = model.steps * self._stretch()
                if abs(steps - round(steps)) > 1e-6 * steps:
                    continue
                for fit in self._full_orders(model, judged):
                    unexplained = self._unexplained(model, fit.order, judged)
                    yield Plan(
                        model, round(steps), fit.order, fit.rule, fit.given, unexplained, tuple(judged), fit.place
                    )

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
                fits.append(Fit("", False, tuple(known), 0))
            if self.damaged:
                fits += self._inserted(model, judged)
        return fits

    def _inserted(self, model: Model, judged: Sequence[int]) -> list[Fit]:
        """Put each damaged string among the sound ones where it explains most of its rotations."""
        word = self.word
        first = {string: int(np.argmax(word.strings == string)) for string in self.damaged}
        sound = set(judged)
        clocks = self.clocks(judged)
        order = [string for string in model.order if string in sound]
        ranks = {string: rank for rank, string in enumerate(order)}
        places: list[tuple[float, int, int]] = [(float(rank), 0, string) for string, rank in ranks.items()]
        for string in self.damaged:
            marks = [-0.5, *(ranks[clock] + 0.5 for clock in clocks.of(string))]
            costs = []
            for mark in sorted(marks):
                earlier = {clock: ranks[clock] < mark for clock in clocks.of(string)}
                costs.append((round(clocks.unlike(model, string, earlier), 6), mark))
            places.append((min(costs)[1], first[string], string))
        terms = tuple(int(self.terms[string]) for _, _, string in sorted(places))
        return [Fit("", False, terms, 0)] if len(terms) == len(self.hamiltonian.masks) else []

    def _unexplained(self, model: Model, order: tuple[int, ...], judged: Sequence[int]) -> float:
        """Add up which shares of their angles damaged strings turn elsewhere than the plan has them."""
        found = 0.0
        for string in self.damaged:
            found += self.clocks(judged).unlike(model, string, self._earlier(order, judged, string))
        return round(found, 6)

    def uneven(self, group: Group) -> bool:
        """Whether strings off by a factor are so by different ones in different places."""
        if not self.plans:
            return False
        numbers = {mask: string for string, mask in enumerate(self.masks)}
        return any(self.deviations(self.plans[0], numbers[mask]) > 0 for mask in group.found)

    def deviations(self, plan: Plan, string: int) -> int:
        """Count where a damaged string turns by another share of its total than the plan has."""
        earlier = self._earlier(plan.order, plan.judged, string)
        return scaled_deviation(*self.clocks(plan.judged).angles(plan.model, string, earlier))

    def one_number(self, plan: Plan, string: int) -> bool:
        """Whether one number explains where and by how much a damaged string is off from a plan.

        A string that has the rotations of another one besides, which is missing, is off by shares of stages.
        """
        earlier = self._earlier(plan.order, plan.judged, string)
        clocks = self.clocks(plan.judged)
        return clocks.one_number(plan.model, string, earlier) or (
            self.masks[string] in self._taking_over and clocks.surplus_in_shares(plan.model, string, earlier)
        )

    @cached_property
    def _taking_over(self) -> set[Mask]:
        """Strings that stand where others are missing."""
        slips = [group for group in self.reading.groups if group.kind in ("letters", "place")]
        return {mask for group in slips for mask in group.found}

    def clocks(self, judged: Sequence[int]) -> Clocks:
        """Give sound strings as clocks."""
        key = tuple(judged)
        if key not in self._clocks:
            assert self.neighbours is not None
            coefficients = {
                string: self.hamiltonian.coefficients[int(term)] for string, term in enumerate(self.terms) if term >= 0
            }
            self._clocks[key] = Clocks(self.word, self.neighbours, coefficients, judged)
        return self._clocks[key]

    def _earlier(self, order: tuple[int, ...], judged: Sequence[int], string: int) -> dict[int, bool]:
        """Say which clocks of a string stand before it in an order of terms."""
        ranks = {term: rank for rank, term in enumerate(order)}
        own = ranks[int(self.terms[string])]
        return {clock: ranks[int(self.terms[clock])] < own for clock in self.clocks(judged).of(string)}

    def _stretch(self) -> float:
        """Full length over that of the shortened word, by the sound string that turns most."""
        strings: npt.NDArray[np.intp] = np.array(self.sound or self.damaged, dtype=np.intp)
        if not strings.size:
            return 1.0
        totals = self._unfolded.totals[strings]
        short = totals - self._unfolded.left_out[strings]
        most = int(np.argmax(np.abs(short)))
        return float(totals[most] / short[most]) if short[most] else 1.0
