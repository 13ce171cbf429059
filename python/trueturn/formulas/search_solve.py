"""Solving order conditions: from random starts in doubles, then to any number of digits in decimals.

Unknowns are the first half of a palindromic list. Where there are more unknowns than conditions, the solutions
form a surface; along it an objective is made least. The free unknowns are then rounded to `FREE_DIGITS`
decimals, which costs nothing at a minimum and makes the outcome independent of the last bits of the optimiser,
and the others are solved for by a chord iteration: the residual in decimals, the derivatives in doubles.
"""

from __future__ import annotations

import random
from collections.abc import Callable
from decimal import Decimal, localcontext
from functools import cached_property

import numpy as np
import numpy.typing as npt
import scipy.linalg
import scipy.optimize

from trueturn.formulas.conditions import Conditions
from trueturn.formulas.search_leading import error_root

__all__ = ["DIGITS", "FREE_DIGITS", "Problem"]

Array = npt.NDArray[np.float64]
Objective = Callable[[Array], tuple[float, Array]]

DIGITS = 40
"""Decimals to which the conditions are solved."""

FREE_DIGITS = 6
"""Decimals to which free unknowns are rounded."""

LONGEST_STEP = 0.7

LARGEST_WEIGHT = 3.0
"""Solutions with a larger weight have a hopeless error and are not kept."""


class Problem:
    """Symmetric lists of Strang pairs (`paired`) or of single stages, of one order and length."""

    def __init__(self, order: int, stages: int, paired: bool) -> None:
        self.order, self.stages, self.paired = order, stages, paired
        stride = 2 if paired else 1
        self.length = stages if paired else 2 * stages
        self.unknowns = (self.length + 1) // 2
        self.signs = [1] * stages if paired else [1, -1] * stages
        self._stride = stride
        self.conditions = Conditions(range(1, order + 1, 2), stride)
        self._fold = np.zeros((self.length, self.unknowns))
        for place in range(self.length):
            self._fold[place, min(place, self.length - 1 - place)] = 1.0

    @cached_property
    def _leading(self) -> tuple[Conditions, Array]:
        return Conditions([self.order + 1], self._stride), error_root(self.order + 1, self._stride)

    def residual(self, half: Array) -> tuple[Array, Array]:
        """Return what the conditions miss, and the derivatives, for the first half of the list."""
        missed, slopes = self.conditions.values(self._fold @ half, self.signs)
        return missed, slopes @ self._fold

    def leading_error(self, half: Array) -> tuple[float, Array]:
        """Return the square of the leading error of `stages` steps in the time of one, and its derivatives.

        Scaled by stages**order: lists of different length are compared at equal cost.
        """
        conditions, root = self._leading
        at_words, slopes = conditions.values(self._fold @ half, self.signs)
        vector = root @ at_words * float(self.stages) ** self.order
        return float(vector @ vector), 2 * (vector @ root @ slopes @ self._fold) * float(self.stages) ** self.order

    def weight_squares(self, half: Array) -> tuple[float, Array]:
        """Return Σ w² and its derivatives."""
        weights = self._fold @ half
        return float(weights @ weights), 2 * weights @ self._fold

    def solve(self, half: Array) -> Array | None:
        """Find a solution near a start; None where there is none or it is hopeless.

        Newton steps of least length, cut to `LONGEST_STEP`. A method that only ever goes downhill is of no use
        here: it ends where all weights are alike and the conditions are small but not met.
        """
        for _ in range(50):
            missed, slopes = self.residual(half)
            if np.abs(missed).max() < 1e-9:
                return self.settle(half)
            step = np.linalg.lstsq(slopes, missed, rcond=1e-10)[0]
            half = half - step * min(1.0, LONGEST_STEP / float(np.abs(step).max()))
            if np.abs(half).max() > 2 * LARGEST_WEIGHT:
                return None
        return None

    def settle(self, half: Array) -> Array | None:
        """Move onto the surface of solutions by Gauss-Newton steps of least length."""
        for _ in range(12):
            missed, slopes = self.residual(half)
            if np.abs(missed).max() < 4e-15:
                break
            if not np.all(np.isfinite(slopes)):
                return None
            half = half - np.linalg.lstsq(slopes, missed, rcond=1e-10)[0]
            if not np.all(np.abs(half) <= LARGEST_WEIGHT):
                return None
        return half if np.abs(self.residual(half)[0]).max() < 1e-13 else None

    def descend(self, half: Array, objective: Objective) -> Array | None:
        """Make an objective with derivatives least along the surface of solutions."""
        found = scipy.optimize.minimize(
            objective,
            half,
            jac=True,
            method="SLSQP",
            constraints={"type": "eq", "fun": lambda x: self.residual(x)[0], "jac": lambda x: self.residual(x)[1]},
            options={"maxiter": 100, "ftol": 1e-15},
        )
        return self.settle(np.asarray(found.x, dtype=np.float64)) if np.all(np.isfinite(found.x)) else None

    def roam(self, half: Array, measure: Callable[[Array], float], evaluations: int) -> Array:
        """Make a measure without derivatives least along the surface of solutions; returns the best seen."""
        free, _ = self.division(half)
        best = (measure(half), half)

        def along(shift: Array) -> float:
            nonlocal best
            now = self.with_free(half, free, half[free] + shift)
            if now is None:
                return 1e3 * best[0] + 1.0
            value = measure(now)
            if value < best[0]:
                best = (value, now)
            return value

        simplex = np.vstack([np.zeros(len(free)), 0.02 * np.eye(len(free))])
        options = {"maxfev": evaluations, "xatol": 1e-7, "fatol": 0.0, "initial_simplex": simplex}
        scipy.optimize.minimize(along, np.zeros(len(free)), method="Nelder-Mead", options=options)
        return best[1]

    def division(self, half: Array) -> tuple[list[int], list[int]]:
        """Divide the unknowns into free ones and those that the conditions then fix."""
        slopes = self.residual(half)[1]
        _, triangle, pivots = scipy.linalg.qr(slopes, pivoting=True, mode="economic")
        sizes = np.abs(np.diag(triangle))
        rank = int(np.sum(sizes > 1e-9 * sizes[0]))
        return sorted(int(k) for k in pivots[rank:]), sorted(int(k) for k in pivots[:rank])

    def with_free(self, half: Array, free: list[int], values: Array) -> Array | None:
        """Set the free unknowns and solve for the others by Newton's method."""
        now = half.copy()
        now[free] = values
        fixed = [k for k in range(self.unknowns) if k not in free]
        for _ in range(12):
            missed, slopes = self.residual(now)
            if not np.all(np.isfinite(missed)):
                return None
            if np.abs(missed).max() < 4e-15:
                break
            now[fixed] -= np.linalg.lstsq(slopes[:, fixed], missed, rcond=1e-10)[0]
            if not np.all(np.abs(now) <= LARGEST_WEIGHT):
                return None
        return now if np.abs(self.residual(now)[0]).max() < 1e-13 else None

    def refine(self, half: Array) -> tuple[tuple[Decimal, ...], Decimal] | None:
        """Round the free unknowns and solve for the others to `DIGITS` decimals.

        Returns
        -------
        weights : tuple of Decimal
            The whole list.
        residual : Decimal
            The largest miss of any condition by these decimals.
        """
        free, fixed = self.division(half)
        settled = self.with_free(half, free, np.round(half[free], FREE_DIGITS))
        if settled is None:
            return None
        inverse = np.linalg.pinv(self.residual(settled)[1][:, fixed], rcond=1e-9)
        with localcontext() as context:
            context.prec = DIGITS + 20
            now = [Decimal(float(value)) for value in settled]
            for place in free:
                now[place] = round(now[place], FREE_DIGITS)
            for _ in range(12):
                missed = self.conditions.exact(self._whole(now), self.signs)
                if max(map(abs, missed)) < Decimal(10) ** -(DIGITS + 10):
                    break
                for row, place in enumerate(fixed):
                    step = sum((Decimal(float(c)) * m for c, m in zip(inverse[row], missed, strict=True)), Decimal(0))
                    now[place] -= step
            printed = [round(value, DIGITS) for value in now]
            residual = max(map(abs, self.conditions.exact(self._whole(printed), self.signs)))
        return tuple(self._whole(printed)), residual

    def starts(self, seed: int, count: int) -> list[Array]:
        """Draw starts: weights uniform in an interval of random width, moved to the right sum.

        Every other start moves the middle weight alone, which is how formulas of few stages look.
        """
        draw = random.Random(seed)
        share = np.sum(self._fold, axis=0)
        drawn = []
        for number in range(count):
            spread = draw.uniform(0.2, 2.0)
            half = np.array([draw.uniform(-spread, spread) for _ in range(self.unknowns)])
            missing = 1 - float(share @ half)
            if number % 2:
                half[-1] += missing / share[-1]
            else:
                half += missing / self.length
            drawn.append(half)
        return drawn

    def _whole(self, half: list[Decimal]) -> list[Decimal]:
        return [half[min(place, self.length - 1 - place)] for place in range(self.length)]
