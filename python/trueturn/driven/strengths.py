"""Strengths f(t): numbers that depend on time, each with the times at which it is defined.

Closed forms are small frozen classes; `Call` wraps any callable, `Samples` interpolates a table.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from numbers import Real
from typing import Any, Protocol, runtime_checkable

import numpy as np
import numpy.typing as npt

from trueturn.driven import checks

__all__ = ["Call", "Constant", "Ramp", "Samples", "Sinusoid", "Strength"]

Domain = tuple[float, float]
EVERYWHERE: Domain = (-math.inf, math.inf)


@runtime_checkable
class Strength(Protocol):
    """What a strength offers; any class with these three serves."""

    @property
    def domain(self) -> Domain:
        """(low, high): the closed interval of times at which it is defined."""

    @property
    def kinks(self) -> tuple[float, ...]:
        """Times at which it is not smooth, ascending; references put step ends there."""

    def __call__(self, time: float) -> float:
        """Return the strength at one time."""


class _Smooth:
    """Defined and smooth at every time."""

    domain: Domain = EVERYWHERE
    kinks: tuple[float, ...] = ()


@dataclass(frozen=True)
class Constant(_Smooth):
    """f(t) = value.

    Parameters
    ----------
    value : float

    Raises
    ------
    ArgumentError
        Not a finite real number.

    Examples
    --------
    >>> Constant(0.5)(7.0)
    0.5
    """

    value: float

    def __post_init__(self) -> None:
        _settle(self, "value")

    def __call__(self, time: float) -> float:
        """Return the value."""
        return self.value


@dataclass(frozen=True)
class Ramp(_Smooth):
    """f(t) = start + rate t.

    Parameters
    ----------
    start : float
        Value at time 0.
    rate : float
        Change per unit of time.

    Raises
    ------
    ArgumentError
        Not finite real numbers.

    Examples
    --------
    >>> Ramp(1.0, rate=-0.25)(2.0)
    0.5
    """

    start: float
    rate: float

    def __post_init__(self) -> None:
        _settle(self, "start", "rate")

    def __call__(self, time: float) -> float:
        """Return start + rate time."""
        return self.start + self.rate * time


@dataclass(frozen=True)
class Sinusoid(_Smooth):
    """f(t) = offset + amplitude cos(frequency t + phase).

    Parameters
    ----------
    amplitude : float
    frequency : float
        Angular, in radians per unit of time.
    phase : float, optional
        In radians; -π/2 makes it a sine.
    offset : float, optional

    Raises
    ------
    ArgumentError
        Not finite real numbers.

    Examples
    --------
    >>> Sinusoid(2.0, frequency=3.0, offset=1.0)(0.0)
    3.0
    """

    amplitude: float
    frequency: float
    phase: float = 0.0
    offset: float = 0.0

    def __post_init__(self) -> None:
        _settle(self, "amplitude", "frequency", "phase", "offset")

    def __call__(self, time: float) -> float:
        """Return offset + amplitude cos(frequency time + phase)."""
        return self.offset + self.amplitude * math.cos(self.frequency * time + self.phase)


@dataclass(frozen=True)
class Call:
    """A strength given by a callable.

    Parameters
    ----------
    function : callable
        Takes a float, returns a finite real number; the same number for the same time. What it raises passes through.
    domain : (float, float), optional
        Times at which it is defined; by default all. Formulas with negative weights look outside of the evolution's
        own interval.
    kinks : iterable of float, optional
        Times at which it jumps or bends.

    Raises
    ------
    ArgumentError
        Not a callable, a domain that is no interval, kinks that are not finite; on calling, a result that is no finite
        real number.

    Examples
    --------
    >>> Call(lambda t: t * t, domain=(0.0, 2.0))(1.5)
    2.25
    """

    function: Callable[[float], Any]
    domain: Domain = EVERYWHERE
    kinks: tuple[float, ...] = ()

    def __post_init__(self) -> None:
        if not callable(self.function):
            checks.refuse("function", "is not callable", self.function, "give a function of time")
        object.__setattr__(self, "domain", checks.interval(self.domain))
        object.__setattr__(self, "kinks", tuple(sorted(checks.numbers("kinks", self.kinks))))

    def __call__(self, time: float) -> float:
        """Return the function's value, checked."""
        return value_of(self.function, time)


@dataclass(frozen=True, eq=False)
class Samples:
    """A strength interpolated between values on a grid.

    Parameters
    ----------
    times : sequence of float, length m ≥ 2
        Ascending, distinct.
    values : sequence of float, length m
    interpolation : {"linear", "cubic", "hold"}
        - ``linear``: straight lines; bends at each inner grid time.
        - ``cubic``: the spline that is twice continuously differentiable, with not-a-knot ends; its third derivative
          jumps at each inner grid time. At least 4 samples.
        - ``hold``: the value of the last grid time reached, as a piecewise constant pulse; jumps.

    Attributes
    ----------
    domain : (float, float)
        First and last grid time; there is no extrapolation.
    kinks : tuple of float
        The inner grid times.

    Raises
    ------
    ArgumentError
        Lengths that differ or are too short, times that do not ascend, numbers that are not finite, an unknown
        interpolation; on calling, a time outside of the domain.

    Notes
    -----
    A product formula keeps its order only between kinks: choose steps whose ends fall on the grid times.

    References
    ----------
    .. [1] C. de Boor, A Practical Guide to Splines, Springer (1978), chapter IV, not-a-knot; from memory.

    Examples
    --------
    >>> pulse = Samples([0.0, 1.0, 3.0], [0.0, 2.0, 0.0])
    >>> pulse(0.5), pulse(2.0), pulse.domain
    (1.0, 1.0, (0.0, 3.0))
    """

    times: npt.NDArray[np.float64]
    values: npt.NDArray[np.float64]
    interpolation: str = "linear"
    _spline: Any = field(default=None, init=False, repr=False)

    def __post_init__(self) -> None:
        times = np.array(checks.numbers("times", self.times))
        values = np.array(checks.numbers("values", self.values))
        least = 4 if self.interpolation == "cubic" else 2
        if self.interpolation not in ("linear", "cubic", "hold"):
            checks.refuse("interpolation", "is unknown", self.interpolation, "choose 'linear', 'cubic' or 'hold'")
        if len(times) < least:
            checks.refuse("times", "are too few", len(times), f"give at least {least} for {self.interpolation}")
        if len(values) != len(times):
            checks.refuse("values", "do not match the times", (len(values), len(times)), "give one for each time")
        if not np.all(np.diff(times) > 0):
            checks.refuse("times", "do not ascend", self.times, "sort them, each once")
        times.flags.writeable = values.flags.writeable = False
        object.__setattr__(self, "times", times)
        object.__setattr__(self, "values", values)
        if self.interpolation == "cubic":
            from scipy.interpolate import CubicSpline  # slow to import, so only where it is needed

            object.__setattr__(self, "_spline", CubicSpline(times, values))

    @property
    def domain(self) -> Domain:
        """First and last grid time."""
        return float(self.times[0]), float(self.times[-1])

    @property
    def kinks(self) -> tuple[float, ...]:
        """The inner grid times."""
        return tuple(self.times[1:-1].tolist())

    def __call__(self, time: float) -> float:
        """Return the interpolated value."""
        low, high = self.domain
        if not low <= time <= high:
            checks.refuse("time", f"is outside of the samples, [{low!r}, {high!r}]", time, "sample a longer interval")
        if self._spline is not None:
            return float(self._spline(time))
        if self.interpolation == "linear":
            return float(np.interp(time, self.times, self.values))
        return float(self.values[int(np.searchsorted(self.times, time, side="right")) - 1])


def as_strength(value: object, name: str) -> Strength:
    """Take a number, a strength or a callable for a strength."""
    if isinstance(value, (Constant, Ramp, Sinusoid, Call, Samples)):
        return value
    if isinstance(value, Real) and not isinstance(value, bool):
        return Constant(checks.number(name, value))
    if isinstance(value, Strength) and not isinstance(value, type):
        checks.interval(value.domain)
        return value
    if callable(value):
        return Call(value)
    checks.refuse(name, "is no strength", value, "give a number, a function of time, or a class of trueturn.driven")


def value_of(function: Callable[[float], Any], time: float) -> float:
    """Call a strength and refuse a result that is no finite real number."""
    found = function(time)
    if isinstance(found, np.ndarray) and found.ndim == 0:
        found = found.item()
    if not isinstance(found, Real) or isinstance(found, bool):
        shape = f" of shape {found.shape}" if isinstance(found, np.ndarray) else ""
        checks.refuse(
            "strength", f"gave no real number{shape} at time {time!r}", found, "return one float for one time"
        )
    number = float(found)
    if not math.isfinite(number):
        checks.refuse("strength", f"is not finite at time {time!r}", found, "state its domain, or correct it there")
    return number


def _settle(owner: object, *names: str) -> None:
    for name in names:
        object.__setattr__(owner, name, checks.number(name, getattr(owner, name)))
