"""Finds the least number of steps that meets a tolerance, with few and mostly small runs."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from trueturn.audit.result import Trial

__all__ = ["Search", "least_steps"]

# Past the answer r the search looks at r + 1, about √2 r and 2 r, in units of the readout grid.
_PROBES = (math.sqrt(2.0), 2.0)
_FASTEST_GROWTH = 8.0
_FARTHEST_JUMP = 512.0
# Within this of a whole number, the slope through the last two failures shows the order at which the error falls here: the
# claimed one, or a higher one for a state or an observable that does not see the leading error.
_WHOLE = 0.05


@dataclass(frozen=True)
class Search:
    """What a search found.

    `steps` is the answer or, where none was found, the largest count that was tried (`found` is then False).
    `accidental` lists smaller counts that met the tolerance although a larger tested one did not. `cut_off` says that
    the look at [r, 2r] went past `most_steps` and was not made in full.
    """

    steps: int
    found: bool
    trials: tuple[Trial, ...]
    accidental: tuple[int, ...]
    cut_off: bool = False


def least_steps(
    run: Callable[[int], Trial],
    tolerance: float,
    order: int,
    *,
    unit: int = 1,
    most_steps: int = 1_000_000,
    first: int = 1,
) -> Search:
    """Find the smallest r such that r and every tested r' in [r, 2r] meet the tolerance.

    The error is taken to fall as steps^-order, which tells where to look next; the answer never rests on it: r meets,
    r - unit was run and does not, and r + unit, about √2 r and 2 r were run and meet.

    Parameters
    ----------
    run : callable
        Gives the trial at a step count; called at most once for each.
    tolerance : float
    order : int
        Order of the formula.
    unit : int
        Step counts are multiples of it.
    most_steps : int
        Largest step count that is tried.
    first : int
        Where the search starts: a guess, from a smaller problem for instance. A good one saves runs, none changes what
        `least` means.

    Notes
    -----
    Runs cost in proportion to their steps. Counts grow towards the predicted answer by at most 8 times a run until the
    fitted order is a whole number not below the claimed one, then straight to it (by at most 512 times); near the answer
    the two nearest trials are interpolated. A typical search costs 7 to 9 times one run at the answer, most of
    it for the look at [r, 2r] that the definition asks for.
    """
    return _Searcher(run, tolerance, order, unit, max(1, most_steps // unit), max(1, first // unit)).search()


class _Searcher:
    def __init__(
        self, run: Callable[[int], Trial], tolerance: float, order: int, unit: int, most: int, first: int
    ) -> None:
        self.run, self.tolerance, self.order, self.unit, self.most = run, tolerance, order, unit, most
        self.first = first
        self.cut_off = False
        self.trials: dict[int, Trial] = {}

    def meets(self, count: int) -> bool:
        """Run `count` units of steps, unless done before."""
        if count not in self.trials:
            self.trials[count] = self.run(count * self.unit)
        return self.trials[count].verdict == "meets"

    def search(self) -> Search:
        failing = 0
        while True:
            passing = self._grow(failing)
            if passing is None:
                return self._result(max(self.trials), found=False)
            answer = self._narrow(failing, passing)
            failing = self._first_failure_after(answer)
            if failing == 0:
                return self._result(answer, found=True)

    def _result(self, count: int, *, found: bool) -> Search:
        passed = sorted(c for c, trial in self.trials.items() if trial.verdict == "meets")
        accidental = tuple(c * self.unit for c in passed if not found or c < count)
        trials = tuple(self.trials[c] for c in sorted(self.trials))
        return Search(count * self.unit, found, trials, accidental, self.cut_off)

    def _grow(self, failing: int) -> int | None:
        """Return a count above `failing` that meets the tolerance, and leave all failures on the way as trials."""
        count = self.first if failing == 0 else self._predicted(failing)
        while True:
            count = min(count, self.most)
            if count <= failing:
                return None
            if self.meets(count):
                return count
            if count == self.most or self._hopeless(count):
                return None
            count = self._predicted(count)

    def _hopeless(self, count: int) -> bool:
        """Whether rounding and the reference alone exceed the tolerance; more steps only add rounding."""
        low, high = self.trials[count].error
        return high - low > 2.0 * self.tolerance and low < self.tolerance

    def _predicted(self, count: int) -> int:
        error = max(self.trials[count].error[1], self.tolerance)
        order, fastest = self._fitted(count)
        factor: float = min(fastest, (error / self.tolerance) ** (1.0 / order))
        return max(count + 1, math.ceil(count * factor))

    def _fitted(self, count: int) -> tuple[float, float]:
        """Return the order to extrapolate with from a failing count, and how far at most."""
        before = max((c for c in self.trials if c < count), default=0)
        if before and self.trials[count].error[0] > 0.0:
            drop = self.trials[before].error[1] / self.trials[count].error[1]
            slope = math.log(drop) / math.log(count / before)
            order = round(slope)
            if order >= self.order and abs(slope / order - 1.0) < _WHOLE:
                return order, _FARTHEST_JUMP
        return self.order, _FASTEST_GROWTH

    def _narrow(self, failing: int, passing: int) -> int:
        """Return the end of the interval (failing, passing] where a failing count is followed by a passing one."""
        failing = max((c for c in self.trials if failing <= c < passing and not self.meets(c)), default=failing)
        streak, side = 0, True
        while passing - failing > 1:
            # The interpolation is usually right to one step. Repeated results on one side push past it, by 1, 2, 4, …, so
            # that the bracket closes from both ends.
            push = 1 << (streak - 2) if streak > 1 else 0
            guess = self._interpolated(failing, passing) + (-push if side else push)
            guess = min(max(guess, failing + 1), passing - 1)
            meets = self.meets(guess)
            failing, passing = (failing, guess) if meets else (guess, passing)
            streak = streak + 1 if meets == side else 1
            side = meets
        return passing

    def _interpolated(self, failing: int, passing: int) -> int:
        """Return the count strictly between at which a power law through both trials reaches the tolerance."""
        middle = (failing + passing) // 2
        if failing == 0:  # no count failed yet: the order tells how far down the answer is
            share = self.trials[passing].error[1] / self.tolerance
            return min(max(int(passing * share ** (1.0 / self.order)), 1), passing - 1)
        above = self.trials[failing].error[1] / self.tolerance
        below = self.trials[passing].error[1] / self.tolerance
        if not (above > 1.0 and 0.0 < below <= 1.0):
            return middle
        share = math.log(above) / (math.log(above) - math.log(below))
        guess = round(failing * float((passing / failing) ** share))
        return min(max(guess, failing + 1), passing - 1)

    def _first_failure_after(self, answer: int) -> int:
        """Run the probes in [answer, 2 answer]; return the largest count there that fails, or 0."""
        probes = {answer + 1, *(round(answer * probe) for probe in _PROBES)}
        for count in sorted(probes):
            if count > self.most:
                self.cut_off = True
            elif not self.meets(count):
                break
        return max((c for c in self.trials if answer < c <= 2 * answer and not self.meets(c)), default=0)
