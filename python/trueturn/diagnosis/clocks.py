"""Where one string of a circuit turns, by the time on the clocks of others: compared with where a formula has it.

A clock is a sound string that anticommutes with the one looked at: its time is the share of its total that it has
turned. Merging moves no rotation past such a string, so that it does not matter how either was merged.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import numpy as np

from trueturn.diagnosis.character import Model
from trueturn.diagnosis.unfolding import Ints, Reals, Word

__all__ = ["Clocks", "scaled_deviation"]

SLACK = 1e-6
COMPARED = 12
"""Anticommuting strings that one is compared with."""
SCALING = 0.1
"""What it costs to suppose that a damaged string is off by one factor everywhere, in shares of its angle."""
PLACES = 0.05
"""What it costs that every place differs, in the same measure."""

Earlier = Mapping[int, bool]
"""Which clocks stand before a string in an order."""


class Clocks:
    """The sound strings of a word as clocks.

    Parameters
    ----------
    word : Word
    neighbours : sequence of arrays
        From `trueturn.diagnosis.ordering.clashes`.
    coefficients : mapping of int to float
        Coefficient in the Hamiltonian of each string of the circuit that is one of its terms.
    judged : sequence of int
        Sound strings.
    """

    def __init__(
        self, word: Word, neighbours: Sequence[Ints], coefficients: Mapping[int, float], judged: Sequence[int]
    ) -> None:
        self._word = word
        self._neighbours = neighbours
        self._coefficients = coefficients
        self._sound = frozenset(judged)
        self._turned_by: dict[int, Reals] = {}
        self._known: dict[tuple[object, ...], float] = {}
        self._explained: dict[tuple[object, ...], bool] = {}
        short = np.bincount(word.strings, weights=word.angles, minlength=len(neighbours))
        most = max(judged, key=lambda string: abs(float(short[string])))
        self._time = float(short[most]) / coefficients[most]
        """Time that the word takes, by the sound string that turns most."""

    def of(self, string: int) -> list[int]:
        """List the clocks of a string, at most `COMPARED`."""
        return [int(other) for other in self._neighbours[string] if int(other) in self._sound][:COMPARED]

    def unlike(self, model: Model, string: int, earlier: Earlier) -> float:
        """Give the share of its angle that a string turns elsewhere; kept, since plans ask for the same."""
        key = (model.method.name, model.steps, string, tuple(earlier.items()))
        if key not in self._known:
            given, ideal = self.angles(model, string, earlier)
            found = _unlike(given, ideal)
            if found and abs(float(given.sum()) - 2.0 * float(ideal.sum())) <= SLACK * abs(float(ideal.sum())):
                found = min(found, SCALING + self.unlike_two(model, string, earlier))
            self._known[key] = found
        return self._known[key]

    def unlike_two(self, model: Model, string: int, earlier: Earlier) -> float:
        """The same for a string that runs twice in a step, the second time anywhere and by what is left of its total."""
        ranks = {clock: model.order.index(clock) for clock in earlier}
        clocks = sorted(earlier, key=ranks.__getitem__)
        seconds = [{clock: clocks.index(clock) < mark for clock in earlier} for mark in range(len(clocks) + 1)]
        given, ideal, *others = self.angles(model, string, earlier, *seconds)
        total = float(ideal.sum())
        share = float(given.sum()) / total - 1.0 if total else 0.0
        rest = min(float(np.abs(given - ideal - share * other).sum()) for other in others)
        return rest / max(float(np.abs(ideal).sum()), 5e-324)

    def one_number(self, model: Model, string: int, earlier: Earlier) -> bool:
        """Whether one number explains where and by how much a string is off.

        Either, on every clock, all angles that are off are so by one factor, and none stands where there should be
        nothing; or the string runs a second time in every step.
        """
        key = (model.method.name, model.steps, string, tuple(earlier.items()))
        if key not in self._explained:
            alike = all(_one_factor(given, ideal) for given, ideal in self._by_clock(model, string, earlier))
            self._explained[key] = alike or self.unlike_two(model, string, earlier) <= SLACK
        return self._explained[key]

    def surplus_in_shares(self, model: Model, string: int, earlier: Earlier) -> bool:
        """Whether what a string turns too much comes in the shares of stages, up to three that merged."""
        weights = np.tile(model.method.weights, model.steps) / model.steps
        sums = np.cumsum(np.concatenate([[0.0], weights]))
        shares = np.concatenate([[0.0], *(sums[merged:] - sums[:-merged] for merged in (1, 2, 3))])
        given, ideal = self.angles(model, string, earlier)
        surplus = given - ideal
        total = float(np.bincount(self._word.strings, weights=self._word.angles)[string])
        whole = total - self._coefficients[string] * self._time
        off = np.min(np.abs(surplus[:, None] - whole * shares[None, :]), axis=1)
        return bool(np.all(off <= SLACK * abs(whole)))

    def cut(self, model: Model, string: int) -> bool:
        """Whether a string turns while one of its clocks is at no end of a stage, and so cuts a rotation in two."""
        stops = np.concatenate([[0.0], np.cumsum(np.tile(model.method.weights, model.steps) / model.steps)])
        slack = SLACK * float(np.max(np.abs(model.method.weights))) / model.steps
        mine = np.flatnonzero(self._word.strings == string)
        ascending = np.sort(stops)
        for clock in self.of(string):
            turned = self._turned(clock)
            times = turned[mine] / turned[-1]
            above = ascending[np.minimum(np.searchsorted(ascending, times), ascending.size - 1)]
            below = ascending[np.maximum(np.searchsorted(ascending, times) - 1, 0)]
            if np.any(np.minimum(np.abs(times - above), np.abs(times - below)) > slack):
                return True
        return False

    def angles(self, model: Model, string: int, *earlier: Earlier) -> list[Reals]:
        """Give the angles of a string by the time on its clocks, and those it should have.

        Parameters
        ----------
        earlier : mapping of int to bool
            For each place that the string may have: which clocks stand before it.

        Returns
        -------
        list of ndarray, all of one shape
            What the circuit has, then what each place asks for.
        """
        columns = list(zip(*self._by_clock(model, string, *earlier), strict=True))
        return [np.concatenate(column) for column in columns] or [np.zeros(0)] * (1 + len(earlier))

    def _by_clock(self, model: Model, string: int, *earlier: Earlier) -> Iterator[list[Reals]]:
        """Yield the same clock by clock."""
        word = self._word
        mine = np.flatnonzero(word.strings == string)
        shares = np.tile(model.method.weights, model.steps) / model.steps
        forward = np.tile(model.method.forward, model.steps)
        fine = 64.0 * shares.size
        begun = np.cumsum(shares) - shares
        weights = [word.angles[mine], *[shares * self._coefficients[string] * self._time] * len(earlier)]
        for clock in earlier[0]:
            turned = self._turned(clock)
            times = [turned[mine] / turned[-1]]
            times += [begun + np.where(forward == place[clock], shares, 0.0) for place in earlier]
            _, bins = np.unique(np.floor(np.concatenate(times) * fine + 0.37), return_inverse=True)
            size = int(bins.max()) + 1
            own = np.split(bins, np.cumsum([time.size for time in times])[:-1])
            yield [
                np.bincount(bin_numbers, weights=weight, minlength=size).astype(np.float64)
                for bin_numbers, weight in zip(own, weights, strict=True)
            ]

    def _turned(self, clock: int) -> Reals:
        """Give the angle that a string has turned by at each place of the word."""
        if clock not in self._turned_by:
            if len(self._turned_by) >= COMPARED:
                self._turned_by.clear()
            word = self._word
            self._turned_by[clock] = np.cumsum(np.where(word.strings == clock, word.angles, 0.0))
        return self._turned_by[clock]


def _unlike(given: Reals, ideal: Reals) -> float:
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


def _one_factor(given: Reals, ideal: Reals) -> bool:
    """Whether the angles that are off are so by one factor."""
    slack = SLACK * float(np.max(np.abs(ideal)))
    off = np.abs(given - ideal) > slack
    if np.any(np.abs(ideal[off]) <= slack):
        return False
    factors = given[off] / ideal[off]
    return not factors.size or float(np.ptp(factors)) <= SLACK * max(1.0, float(np.max(np.abs(factors))))


def scaled_deviation(given: Reals, ideal: Reals) -> int:
    """Count the entries that differ once both have the same sum."""
    total = float(ideal.sum())
    if not total or not given.size:
        return 0
    scaled = ideal * (float(given.sum()) / total)
    slack = SLACK * max(float(np.max(np.abs(scaled))), float(np.max(np.abs(given))), 5e-324)
    return int(np.count_nonzero(np.abs(given - scaled) > slack))
