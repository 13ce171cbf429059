"""One candidate's totals over step counts and gate qualities, and where two candidates change places."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby, pairwise, product

from trueturn.audit.candidate import Candidate
from trueturn.device.algorithmic import ErrorLaw
from trueturn.device.counts import Counts
from trueturn.device.least import least_at
from trueturn.device.result import Crossover
from trueturn.device.shares import gate_share, largest_gate_error
from trueturn.partition import Partition

__all__ = ["Weighed", "crossovers"]

# Rates between which formulas are compared: beyond, gates are perfect for all practical purposes, or useless.
_RATES = (1e-12, 0.5)
_RATES_PER_DECADE = 4


@dataclass
class Weighed:
    """One candidate with its error law and its gate counts.

    `synthesis` and `shots` are the shares that no step count changes. All but the shots are capped together at `width`,
    since no two expectations differ by more; where the cap is reached, the result is no better than a guess.
    """

    candidate: Candidate
    partition: Partition
    law: ErrorLaw
    counts: Counts
    width: float
    synthesis: float
    shots: float
    most: int

    def noise(self, steps: int, rate: float) -> float:
        return self.width * gate_share(self.counts(steps).gates, rate)

    def total(self, steps: int, rate: float, algorithmic: float | None = None) -> float:
        """Return the sum of all shares; `algorithmic` stands in for the law where something is known at `steps`."""
        error = self.law(steps) if algorithmic is None else algorithmic
        return min(self.width, error + self.noise(steps, rate) + self.synthesis) + self.shots

    def best_steps(self, rate: float) -> int:
        """Return where the total is least; 1 where it never gets below the cap."""
        return least_at(
            lambda r: self.total(r, rate),
            lambda r: min(self.width, self.noise(r, rate) + self.synthesis) + self.shots,
            self.most,
        )

    def fewest_steps(self, rate: float, best: int, tolerance: float) -> int | None:
        """Return the smallest count up to `best` whose total is within the tolerance; totals fall up to there."""
        if self.total(best, rate) > tolerance:
            return None
        low, high = 0, best
        while high - low > 1:
            middle = (low + high) // 2
            low, high = (low, middle) if self.total(middle, rate) <= tolerance else (middle, high)
        return high

    def allowed_error(self, tolerance: float) -> float | None:
        """Return the largest rate at which some step count stays within the tolerance."""
        slack = tolerance - self.synthesis - self.shots

        def rate(left: float, steps: int) -> float:
            return largest_gate_error(self.counts(steps).gates, left / self.width) if left > 0.0 else 0.0

        steps = least_at(lambda r: -rate(slack - self.law(r), r), lambda r: -rate(slack, r), self.most)
        found = rate(slack - self.law(steps), steps)
        return found if found > 0.0 else None


def crossovers(weighed: Sequence[Weighed]) -> tuple[Crossover, ...]:
    """Compare every candidate of one order with every candidate of the next order that there is."""

    def order(one: Weighed) -> int:
        return one.candidate.formula.order

    groups = [list(group) for _, group in groupby(sorted(weighed, key=order), key=order)]
    return tuple(_crossover(*pair) for one, other in pairwise(groups) for pair in product(one, other))


def _crossover(lower: Weighed, higher: Weighed) -> Crossover:
    """Walk from bad gates to good ones until the higher order wins, then halve the step on a logarithmic scale."""

    def lead(rate: float) -> float:
        """Return by how much the higher order is better; 0 where neither is better than a guess."""
        ours, theirs = (one.total(one.best_steps(rate), rate) for one in (higher, lower))
        return theirs - ours if abs(theirs - ours) > 1e-9 * lower.width else 0.0

    first, last = (math.log10(rate) for rate in _RATES)
    number = round((last - first) * _RATES_PER_DECADE)
    rates = [10.0 ** (last - k * (last - first) / number) for k in range(number + 1)]
    names = lower.candidate.label, higher.candidate.label
    worse = None
    for rate in rates:
        ahead = lead(rate)
        if ahead > 0.0 and worse is not None:
            good, bad = math.log(rate), math.log(worse)
            while bad - good > 1e-3:
                middle = 0.5 * (good + bad)
                good, bad = (middle, bad) if lead(math.exp(middle)) > 0.0 else (good, middle)
            return Crossover(*names, math.exp(good), None)
        if ahead > 0.0:
            return Crossover(*names, None, names[1])
        if ahead < 0.0:
            worse = rate
    return Crossover(*names, None, names[0] if worse is not None else None)
