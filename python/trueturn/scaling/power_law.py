"""A power law through measured points: least squares in logarithms, with bands and checks that can fail.

With x = ln(size) and y = ln(value) the model is y = ln a + b x + noise, the noise independent and normal with one
deviation. Then with m points, S = Σ (x - x̄)², and s² = Σ residual² / (m - 2), the quantities

    (b̂ - b) √S / s,    (ŷ(x₀) - y(x₀)) / (s √(1/m + (x₀ - x̄)²/S))

follow Student's distribution of m - 2 degrees of freedom; for one more measurement at x₀, 1 is added under the root.
Step counts are not noisy but rounded up, and a law may bend: so the bands are fitted, never proven, s is not let below
what rounding alone causes, and `PowerLaw.bends` and `PowerLaw.held_out` test the model itself.

References
----------
N. R. Draper, H. Smith, Applied Regression Analysis, 3rd edition (Wiley 1998), chapters 1 and 3; from memory.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np

from trueturn.audit.figures import nearest, outward
from trueturn.errors import ArgumentError
from trueturn.scaling import _fit_arguments as checked
from trueturn.scaling._fit_arguments import FEWEST_POINTS, Floats

__all__ = ["FEWEST_POINTS", "Forecast", "HeldOut", "PowerLaw", "fit_steps"]

Interval = tuple[float, float]


@dataclass(frozen=True)
class Forecast:
    """What a law says at one size.

    Attributes
    ----------
    size : float
    value : float
        On the fitted curve.
    band : (float, float)
        Confidence band of the curve itself.
    interval : (float, float)
        Where one more measurement is expected; wider than the band.
    level : float
    extrapolated : bool
        The size lies outside of the measured ones.
    reach : float
        How far outside, as a ratio of sizes: 1 within the measured ones, 4 at four times the largest (or a quarter of
        the smallest).
    """

    size: float
    value: float
    band: Interval
    interval: Interval
    level: float
    extrapolated: bool
    reach: float

    def __repr__(self) -> str:
        kind = f"extrapolated {self.reach:.3g} times beyond" if self.extrapolated else "within the measured sizes"
        return f"{nearest(self.value)} at {self.size:.6g}, {100 * self.level:g} % {outward(*self.interval, 3)} ({kind})"


@dataclass(frozen=True)
class HeldOut:
    """The largest size as predicted from all others, and what was measured there.

    Attributes
    ----------
    forecast : Forecast
    measured : float
    inside : bool
        The measured value lies within ``forecast.interval``.
    """

    forecast: Forecast
    measured: float
    inside: bool


@dataclass(frozen=True, repr=False)
class PowerLaw:
    """value = prefactor · size^exponent, fitted to measured points; make it by `PowerLaw.fit` or `fit_steps`.

    Attributes
    ----------
    sizes, values : tuple of float
        The points, by ascending size.
    prefactor, exponent : float
    spread : float
        Deviation s of ln(value) about the curve, at least what rounding the values up alone causes.
    unit : float
        Values are multiples of this, rounded up; 0 where they are not rounded.
    variable, what : str
        Names of size and value, for tables and pictures.

    Examples
    --------
    >>> law = PowerLaw.fit([1, 2, 4, 8], [3.1, 5.9, 12.2, 23.8])
    >>> round(law.exponent, 2), round(law.prefactor, 1)
    (0.99, 3.1)
    >>> low, high = law.interval(0.95)
    >>> low < 1.0 < high
    True
    """

    sizes: tuple[float, ...]
    values: tuple[float, ...]
    prefactor: float
    exponent: float
    spread: float
    unit: float = 0.0
    variable: str = "size"
    what: str = "value"
    _centre: float = field(default=0.0, compare=False)
    _width: float = field(default=0.0, compare=False)

    @classmethod
    def fit(
        cls,
        sizes: Iterable[float],
        values: Iterable[float],
        *,
        unit: float = 0.0,
        variable: str = "size",
        what: str = "value",
    ) -> PowerLaw:
        """Fit the law by least squares in logarithms.

        Parameters
        ----------
        sizes, values : iterable of float, length m
            Positive; at least three points at three different sizes.
        unit : float
            Values are multiples of this, rounded up; 0 where they are not rounded.
        variable, what : str
            Names of size and value.

        Returns
        -------
        PowerLaw

        Raises
        ------
        ArgumentError
            Lengths differ, something is not a positive finite number, or there are fewer than three different sizes.

        Notes
        -----
        A value v rounded up from one spread evenly over (v - unit, v] has a deviation of unit/√12, in ln(v) unit/(v√12) to
        first order; `spread` is at least the root mean square of that.
        """
        x, y = checked.points(sizes, values)
        step = checked.number("unit", unit)
        if step < 0.0:
            raise ArgumentError(f"unit: negative ({unit!r}); give 0 or the rounding unit", argument="unit", value=unit)
        order = np.argsort(x, kind="stable")
        x, y = x[order], y[order]
        u, v = np.log(x), np.log(y)
        centre = float(np.mean(u))
        width = float(np.sum((u - centre) ** 2))
        exponent = float(np.sum((u - centre) * (v - np.mean(v))) / width)
        residuals = v - np.mean(v) - exponent * (u - centre)
        spread = math.sqrt(float(np.sum(residuals**2)) / (len(x) - 2))
        return cls(
            sizes=tuple(x.tolist()),
            values=tuple(y.tolist()),
            prefactor=math.exp(float(np.mean(v)) - exponent * centre),
            exponent=exponent,
            spread=max(spread, _rounding(y, step)),
            unit=step,
            variable=variable,
            what=what,
            _centre=centre,
            _width=width,
        )

    def __call__(self, size: float) -> float:
        """Return the value on the curve.

        Raises
        ------
        ArgumentError
            `size` is not positive, or the value at it is too large for a float.
        """
        at = checked.positive("size", size)
        try:
            value = float(self.prefactor * at**self.exponent)
        except OverflowError:
            value = math.inf
        if value == math.inf:
            raise ArgumentError(
                f"size: the law is too large for a float there ({size!r}); give one nearer to the measured sizes",
                argument="size",
                value=size,
            )
        return value

    @property
    def residuals(self) -> tuple[float, ...]:
        """ln(measured / fitted) at each point."""
        return tuple(
            math.log(value / (self.prefactor * size**self.exponent))
            for size, value in zip(self.sizes, self.values, strict=True)
        )

    def interval(self, level: float = 0.95) -> Interval:
        """Return the confidence interval of the exponent, by Student's distribution.

        Raises
        ------
        ArgumentError
            `level` is not between 0 and 1.
        """
        half = self._student(level) * self.spread / math.sqrt(self._width)
        return self.exponent - half, self.exponent + half

    def prefactor_interval(self, level: float = 0.95) -> Interval:
        """Return the confidence interval of the prefactor."""
        half = self._student(level) * self.spread * math.sqrt(1.0 / len(self.sizes) + self._centre**2 / self._width)
        return self.prefactor * math.exp(-half), self.prefactor * math.exp(half)

    def predict(self, size: float, level: float = 0.95) -> Forecast:
        """Return the law's value at a size, with its bands, and whether that is an extrapolation.

        Raises
        ------
        ArgumentError
            `size` is not positive or so large that the law overflows, or `level` not between 0 and 1.

        Examples
        --------
        >>> law = fit_steps([4, 5, 6, 7, 8], [40, 61, 89, 122, 159])
        >>> law.predict(100).extrapolated, law.predict(6).extrapolated
        (True, False)
        """
        at = checked.positive("size", size)
        value = self(at)
        quantile = self._student(level)
        variance = 1.0 / len(self.sizes) + (math.log(at) - self._centre) ** 2 / self._width
        band, whole = (quantile * self.spread * math.sqrt(v) for v in (variance, 1.0 + variance))
        reach = max(1.0, at / self.sizes[-1], self.sizes[0] / at)
        return Forecast(
            at,
            value,
            (value * math.exp(-band), value * _growth(band)),
            (value * math.exp(-whole), value * _growth(whole)),
            float(level),
            reach > 1.0,
            reach,
        )

    def bends(self, level: float = 0.95) -> bool | None:
        """Tell whether the points contradict a straight line in logarithms; None with fewer than four points.

        A quadratic term is added, and it is tested by Student's distribution of m - 3 degrees of freedom whether it
        differs from 0. A law that bends must not be extrapolated far.
        """
        m = len(self.sizes)
        quantile = self._student(level, lost=3) if m > FEWEST_POINTS else 0.0
        if m <= FEWEST_POINTS:
            return None
        u, v = np.log(self.sizes) - self._centre, np.log(self.values)
        columns = np.stack([np.ones(m), u, u**2], axis=1)
        q, r = np.linalg.qr(columns)
        found = np.linalg.solve(r, q.T @ v)
        spread = max(_rounding(np.exp(v), self.unit), math.sqrt(float(np.sum((v - columns @ found) ** 2)) / (m - 3)))
        # The variance of the last coefficient is s²/R_33². Rounding leaves about 1e-15 of ln(value).
        noise = max(spread, 1e-14 * (1.0 + float(np.max(np.abs(v)))))
        return bool(abs(found[2]) > quantile * noise / abs(r[2, 2]))

    def held_out(self, level: float = 0.95) -> HeldOut | None:
        """Predict the largest size from all others and compare; None with fewer than three others."""
        kept = [place for place, size in enumerate(self.sizes) if size < self.sizes[-1]]
        if len({self.sizes[place] for place in kept}) < FEWEST_POINTS:
            return None
        shorter = PowerLaw.fit([self.sizes[k] for k in kept], [self.values[k] for k in kept], unit=self.unit)
        said = shorter.predict(self.sizes[-1], level)
        measured = self.values[-1]
        # Points that lie on the law exactly leave an interval as narrow as rounding.
        inside = said.interval[0] * (1.0 - 1e-12) <= measured <= said.interval[1] * (1.0 + 1e-12)
        return HeldOut(said, measured, inside)

    def bootstrap_interval(self, level: float = 0.95, draws: int = 2000, seed: int = 0) -> Interval:
        """Return an interval of the exponent from resampled residuals, which need not be normal.

        Residuals are scaled by √(m/(m - 2)), drawn with replacement, and the law fitted again; the interval is between
        the quantiles of the exponents. With few points it is usually too narrow; compare it with `interval`.

        Raises
        ------
        ArgumentError
            `level` is not between 0 and 1, or `draws` is below 100.
        """
        tail = (1.0 - checked.level(level)) / 2.0
        if isinstance(draws, bool) or not isinstance(draws, int) or draws < 100:
            raise ArgumentError(
                f"draws: too few to tell quantiles ({draws!r}); give 100 or more", argument="draws", value=draws
            )
        m = len(self.sizes)
        u = np.log(self.sizes) - self._centre
        residuals = np.array(self.residuals) * math.sqrt(m / (m - 2))
        drawn = np.random.default_rng(seed).choice(residuals, (draws, m))
        slopes = self.exponent + drawn @ u / self._width
        low, high = np.quantile(slopes, [tail, 1.0 - tail])
        return float(low), float(high)

    def cautions(self, level: float = 0.95) -> tuple[str, ...]:
        """Say in sentences what speaks against the law; empty where nothing does."""
        found = []
        if self.bends(level):
            found.append(
                f"The points bend in logarithms (quadratic term differs from 0 at {100 * level:g} %): not one power law."
            )
        held = self.held_out(level)
        if held is not None and not held.inside:
            found.append(
                f"Without it, {self.variable} {held.forecast.size:.6g} would have been predicted as "
                f"{outward(*held.forecast.interval, 3)}, but {nearest(held.measured, 4)} was measured."
            )
        if len(self.sizes) == FEWEST_POINTS:
            found.append("Three points leave one degree of freedom: the bands are wide and nothing tests the law.")
        return tuple(found)

    def _student(self, level: float, lost: int = 2) -> float:
        from scipy.special import stdtrit

        return float(stdtrit(len(self.sizes) - lost, 0.5 + checked.level(level) / 2.0))

    def __repr__(self) -> str:
        low, high = self.interval()
        return (
            f"{self.what} = {nearest(self.prefactor, 4)} · {self.variable}^{nearest(self.exponent, 4)} "
            f"(exponent {outward(low, high, 4)} at 95 %, fitted to {len(self.sizes)} points, "
            f"{self.variable} {self.sizes[0]:.6g} to {self.sizes[-1]:.6g})"
        )


def fit_steps(sizes: Iterable[float], steps: Iterable[int], variable: str = "size") -> PowerLaw:
    """Fit steps = a · size^b to measured least step counts.

    Parameters
    ----------
    sizes : iterable of float, length m
        What varies: qubits, times, or tolerances (then the exponent is negative). At least three different ones.
    steps : iterable of int, length m
        1 or more. Counts are rounded up from a smooth law, and the bands never get narrower than that causes.
    variable : str, optional
        Name of what varies.

    Returns
    -------
    PowerLaw

    Raises
    ------
    ArgumentError
        Too few points, or something that is no positive number or no step count.

    Examples
    --------
    >>> fit_steps([4, 6, 8, 10], [32, 72, 128, 200], "qubits")
    steps = 2.000 · qubits^2.000 (exponent [1.967, 2.033] at 95 %, fitted to 4 points, qubits 4 to 10)
    """
    counts = checked.listed("steps", steps)
    for count in counts:
        if not float(count).is_integer() or count < 1:
            raise ArgumentError(
                f"steps: not a step count ({count!r}); give whole numbers, 1 or more", argument="steps", value=count
            )
    return PowerLaw.fit(sizes, counts, unit=1.0, variable=variable, what="steps")


def _rounding(values: Floats, unit: float) -> float:
    """Return the deviation of ln(value) that rounding up to a multiple of `unit` causes, see `PowerLaw.fit`."""
    return unit * math.sqrt(float(np.mean(1.0 / (12.0 * values**2))))


def _growth(logarithm: float) -> float:
    return math.exp(logarithm) if logarithm < 700.0 else math.inf
