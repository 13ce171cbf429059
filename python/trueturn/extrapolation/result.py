"""What an extrapolation found."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from trueturn.audit.figures import interval, nearest, plain, upper
from trueturn.errors import ArgumentError

if TYPE_CHECKING:
    from trueturn.formulas import Formula
    from trueturn.reference import Reference

__all__ = ["Extrapolation"]

Values = Mapping[str, npt.NDArray[np.float64]]


@dataclass(frozen=True, repr=False)
class Extrapolation:
    """Observables extrapolated from a few step counts; made by `extrapolate`.

    With m step counts, T times, and for each observable's name:

    Attributes
    ----------
    formula : Formula
    rule : str
        How the Hamiltonian was split; ``"own parts"`` for a given partition.
    steps : tuple of int, length m
        Steps of each circuit to each time.
    order : int
        Of the combination: p + 2 (m - 1) for a formula of order p.
    weights : tuple of Fraction, length m
        Exact, in the order of `steps`; they sum to 1.
    norm1 : Fraction
        Σ |a_j|.
    times : tuple of float, length T
        As asked.
    base_values, base_bounds : mapping of str to ndarray, shape (m, T), float64
        What each circuit gives, and how far rounding can have moved it: proven.
    values : mapping of str to ndarray, shape (T,), float64
        Σ a_j times the values of the circuits; summed exactly and rounded once.
    rounding : mapping of str to ndarray, shape (T,), float64
        Σ |a_j| times the bounds of the circuits, and that last rounding: proven.
    truncation : mapping of str to ndarray, shape (T,), float64
        How far the values are from those without the smallest step count: estimated, not proven. It is the error of a
        combination of an order less by 2, so usually too large.
    error : mapping of str to ndarray, shape (T,), float64
        `truncation` plus `rounding`: estimated, not proven.
    measured_error : mapping of str to ndarray, shape (T, 2), float64, or None
        Intervals (low, high) that hold the true error, from a certified reference. None where none was asked for.
    tolerance : float or None
    verdict : "meets", "misses", "undecided" or None
        On the largest measured error.
    two_qubit_gates : tuple of int, length m
        Of each circuit to the last time.
    reference : Reference or None
    """

    formula: Formula
    rule: str
    steps: tuple[int, ...]
    order: int
    weights: tuple[Fraction, ...]
    norm1: Fraction
    times: tuple[float, ...]
    base_values: Values
    base_bounds: Values
    values: Values
    rounding: Values
    truncation: Values
    error: Values
    measured_error: Values | None
    tolerance: float | None
    verdict: str | None
    two_qubit_gates: tuple[int, ...]
    reference: Reference | None

    @property
    def shot_factor(self) -> Fraction:
        """(Σ |a_j|)²: by this the shots grow, against one circuit read with the same standard error.

        It holds for the best split, in proportion to |a_j| (`shot_shares`), of shots of equal variance.
        """
        return self.norm1**2

    @property
    def shot_shares(self) -> tuple[Fraction, ...]:
        """|a_j| / Σ |a_j|: the share of all shots that each circuit gets in the best split."""
        return tuple(abs(weight) / self.norm1 for weight in self.weights)

    def carried(self, noise: float | Sequence[float]) -> float:
        """Return how far the values move at most when the circuits' values are off by `noise`.

        Parameters
        ----------
        noise : float or sequence of float, length m
            Largest error of each circuit's value, or one for all: device noise, a bias of the reading.

        Returns
        -------
        float
            Σ |a_j| noise_j.

        Raises
        ------
        ArgumentError
            A negative or infinite number, or as many as there are no circuits.
        """
        many = isinstance(noise, (Sequence, np.ndarray)) and not isinstance(noise, str)
        each: list[float] = list(noise) if many else [noise] * len(self.steps)  # type: ignore[arg-type, list-item]
        for level in each:
            _require("noise", level, noise, least=0.0)
        if len(each) != len(self.steps):
            raise ArgumentError(
                f"noise: does not fit the circuits ({len(each)} numbers for {len(self.steps)} step counts); "
                "give one number, or one for each",
                argument="noise",
                value=noise,
            )
        return float(sum(abs(weight) * Fraction(level) for weight, level in zip(self.weights, each, strict=True)))

    def standard_error(self, deviation: float, shots: int) -> float:
        """Return the standard error of a value when `shots` shots in all are split in the best way.

        Parameters
        ----------
        deviation : float
            Standard deviation of one shot, taken as the same for all circuits; at most ‖O‖.
        shots : int
            Of all circuits together; fractions of shots are not rounded.

        Returns
        -------
        float
            Σ |a_j| deviation / √shots.

        Raises
        ------
        ArgumentError
            `deviation` is negative or infinite, or `shots` below 1.
        """
        _require("deviation", deviation, deviation, least=0.0)
        _require("shots", shots, shots, least=1.0)
        return float(self.norm1) * deviation / math.sqrt(shots)

    def __repr__(self) -> str:
        lines = [
            f"{self.formula.name}, {self.rule}, at {', '.join(map(str, self.steps))} steps: order {self.order}",
            f"weights {', '.join(map(str, self.weights))}; 1-norm {nearest(float(self.norm1))}, "
            f"shots × {nearest(float(self.shot_factor))}",
        ]
        width = max(len(name) for name in self.values)
        for name, found in self.values.items():
            for place, time in enumerate(self.times):
                line = f"{name:{width}}  t = {plain(time)}  {found[place]:+.10g}"
                line += f"  error ~ {upper(float(self.error[name][place]))} (estimated)"
                if self.measured_error is not None:
                    low, high = map(float, self.measured_error[name][place])
                    line += f", {interval(low, high, self.tolerance)} (measured)"
                lines.append(line)
        if self.verdict is not None and self.tolerance is not None:
            lines.append(f"tolerance {plain(self.tolerance)}: {self.verdict}")
        return "\n".join(lines)


def _require(argument: str, number: object, shown: object, *, least: float) -> None:
    real = isinstance(number, (int, float, np.integer, np.floating)) and not isinstance(number, bool)
    if not real or not least <= float(number) < math.inf:  # type: ignore[arg-type]
        raise ArgumentError(
            f"{argument}: out of range ({shown!r}); give a finite number, {least:g} or more",
            argument=argument,
            value=shown,
        )
