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
from trueturn.diagnosis.ordering import Settled, clashes, order_moments, settle
from trueturn.diagnosis.orders import Fit, RuleOrders, partition_in_order
from trueturn.diagnosis.readings import Reading
from trueturn.diagnosis.totals import Group
from trueturn.diagnosis.unfolding import Ints, Mask, Reals, Unfolded
from trueturn.formulas import formula
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["Hamiltonian", "Plan", "Structure"]

SLACK = 1e-6
COMPARED = 12
"""Anticommuting strings that a damaged one is compared with."""
SCALING = 0.1
"""What it costs to suppose that a damaged string is off by one factor everywhere, in shares of its angle."""
PLACES = 0.05
"""What it costs that every place differs, in the same measure."""
UNUSUAL = 0.3
"""What an order costs that no rule gives as it stands, in the same measure."""
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
        self._known: dict[tuple[object, ...], float] = {}
        self._clock_angles: dict[int, Reals] = {}
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

        def doubt(plan: Plan) -> tuple[bool, float]:
            asymmetric = symmetric and not plan.model.method.symmetric
            return asymmetric, round(plan.unexplained + (0.0 if plan.given else UNUSUAL), 6)

        return sorted(found, key=doubt)

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
        word = self._unfolded.word
        first = {string: int(np.argmax(word.strings == string)) for string in self.damaged}
        sound = set(judged)
        order = [string for string in model.order if string in sound]
        ranks = {string: rank for rank, string in enumerate(order)}
        places: list[tuple[float, int, int]] = [(float(rank), 0, string) for string, rank in ranks.items()]
        for string in self.damaged:
            marks = [-0.5, *(ranks[clock] + 0.5 for clock in self._clocks(string, sound))]
            costs = []
            for mark in sorted(marks):
                earlier = {clock: ranks[clock] < mark for clock in self._clocks(string, sound)}
                costs.append((round(self._unlike(model, judged, string, earlier), 6), mark))
            places.append((min(costs)[1], first[string], string))
        terms = tuple(int(self.terms[string]) for _, _, string in sorted(places))
        return [Fit("", False, terms, 0)] if len(terms) == len(self.hamiltonian.masks) else []

    def _clocks(self, string: int, sound: set[int]) -> list[int]:
        """Sound strings that anticommute with one, at most `COMPARED` of them."""
        assert self.neighbours is not None
        return [int(other) for other in self.neighbours[string] if int(other) in sound][:COMPARED]

    def _unexplained(self, model: Model, order: tuple[int, ...], judged: Sequence[int]) -> float:
        """Add up which shares of their angles damaged strings turn elsewhere than the plan has them."""
        found = 0.0
        for string in self.damaged:
            found += self._unlike(model, judged, string, self._earlier(order, judged, string))
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
        given, ideal = self._clocked(plan.model, plan.judged, string, earlier)
        return scaled_deviation(given, ideal)

    def _earlier(self, order: tuple[int, ...], judged: Sequence[int], string: int) -> dict[int, bool]:
        """Say which clocks of a string stand before it in an order of terms."""
        ranks = {term: rank for rank, term in enumerate(order)}
        own = ranks[int(self.terms[string])]
        return {clock: ranks[int(self.terms[clock])] < own for clock in self._clocks(string, set(judged))}

    def _unlike(self, model: Model, judged: Sequence[int], string: int, earlier: dict[int, bool]) -> float:
        """Give the share of its angle that a damaged string turns elsewhere; kept, since plans ask for the same."""
        key = (model.method.name, model.steps, string, tuple(judged), tuple(earlier.items()))
        if key not in self._known:
            given, ideal = self._clocked(model, judged, string, earlier)
            found = unlike(given, ideal)
            if found and abs(float(given.sum()) - 2.0 * float(ideal.sum())) <= SLACK * abs(float(ideal.sum())):
                found = min(found, self._unlike_two(model, judged, string, earlier))
            self._known[key] = found
        return self._known[key]

    def _unlike_two(self, model: Model, judged: Sequence[int], string: int, earlier: dict[int, bool]) -> float:
        """The same for a string that runs twice in a step, the second time anywhere."""
        ranks = {clock: model.order.index(clock) for clock in earlier}
        clocks = sorted(earlier, key=ranks.__getitem__)
        seconds = [{clock: clocks.index(clock) < mark for clock in earlier} for mark in range(len(clocks) + 1)]
        given, ideal, *others = self._clocked(model, judged, string, earlier, *seconds)
        rest = min(float(np.abs(given - ideal - other).sum()) for other in others)
        return SCALING + rest / max(float(np.abs(ideal).sum()), 5e-324)

    def _clocked(self, model: Model, judged: Sequence[int], string: int, *earlier: dict[int, bool]) -> list[Reals]:
        """Give the angles of a damaged string by the time on the clocks of sound ones, and those it should have.

        A clock is a sound string that anticommutes with it: its time is the share of its total that it has turned.
        Merging moves no rotation past such a string, so that it does not matter how either was merged.

        Parameters
        ----------
        earlier : dict of int to bool
            For each place that the string may have: which clocks stand before it.

        Returns
        -------
        list of ndarray, all of one shape
            What the circuit has, then what each place asks for.
        """
        method, steps = model.method, model.steps
        word = self._unfolded.word
        mine = np.flatnonzero(word.strings == string)
        shares = np.tile(method.weights, steps) / steps
        forward = np.tile(method.forward, steps)
        angle = self.hamiltonian.coefficients[int(self.terms[string])] * self._length(judged)
        fine = 64.0 * shares.size
        begun = np.cumsum(shares) - shares
        columns: list[list[Reals]] = [[np.zeros(0)] for _ in range(1 + len(earlier))]
        weights = [word.angles[mine], *[shares * angle] * len(earlier)]
        for clock in earlier[0]:
            turned = self._turned(clock)
            times = [turned[mine] / turned[-1]]
            times += [begun + np.where(forward == place[clock], shares, 0.0) for place in earlier]
            _, bins = np.unique(np.floor(np.concatenate(times) * fine + 0.37), return_inverse=True)
            size = int(bins.max()) + 1
            own = np.split(bins, np.cumsum([time.size for time in times])[:-1])
            for column, bin_numbers, weight in zip(columns, own, weights, strict=True):
                column.append(np.bincount(bin_numbers, weights=weight, minlength=size).astype(np.float64))
        return [np.concatenate(column) for column in columns]

    def _turned(self, clock: int) -> Reals:
        """Give the angle that a string has turned by at each place of the word."""
        if clock not in self._clock_angles:
            if len(self._clock_angles) >= COMPARED:
                self._clock_angles.clear()
            word = self._unfolded.word
            self._clock_angles[clock] = np.cumsum(np.where(word.strings == clock, word.angles, 0.0))
        return self._clock_angles[clock]

    def _length(self, judged: Sequence[int]) -> float:
        """Time that the shortened word takes, by the sound string that turns most."""
        word = self._unfolded.word
        short = np.bincount(word.strings, weights=word.angles, minlength=len(self.masks))[list(judged)]
        most = int(np.argmax(np.abs(short)))
        return float(short[most]) / self.hamiltonian.coefficients[int(self.terms[judged[most]])]

    def _stretch(self) -> float:
        """Full length over that of the shortened word, by the sound string that turns most."""
        strings: npt.NDArray[np.intp] = np.array(self.sound or self.damaged, dtype=np.intp)
        if not strings.size:
            return 1.0
        totals = self._unfolded.totals[strings]
        short = totals - self._unfolded.left_out[strings]
        most = int(np.argmax(np.abs(short)))
        return float(totals[most] / short[most]) if short[most] else 1.0


def unlike(given: Reals, ideal: Reals) -> float:
    """Give the share of angles that differ, as they are or, at a price, once scaled to the same sum.

    Places that differ count a little besides, so that one large mistake beats many small ones.
    """
    whole = float(np.abs(ideal).sum())
    if not whole:
        return 0.0
    off = np.abs(given - ideal)
    plain = float(off.sum()) / whole + PLACES * float(np.mean(off > SLACK * float(np.max(np.abs(ideal)))))
    total = float(ideal.sum())
    if not total:
        return plain
    scaled = ideal * (float(given.sum()) / total)
    size = max(float(np.abs(scaled).sum()), 5e-324)
    return min(plain, SCALING + float(np.abs(given - scaled).sum()) / size)


def scaled_deviation(given: Reals, ideal: Reals) -> int:
    """Count the entries that differ once both have the same sum."""
    total = float(ideal.sum())
    if not total or not given.size:
        return 0
    scaled = ideal * (float(given.sum()) / total)
    slack = SLACK * max(float(np.max(np.abs(scaled))), float(np.max(np.abs(given))), 5e-324)
    return int(np.count_nonzero(np.abs(given - scaled) > slack))
