"""Step counts over sizes, their laws, and what these say at other sizes."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from textwrap import wrap
from typing import TYPE_CHECKING

from trueturn.audit.figures import count, interval, nearest, outward
from trueturn.errors import ArgumentError

if TYPE_CHECKING:
    from trueturn.audit.candidate import Candidate
    from trueturn.scaling.power_law import Forecast, PowerLaw
    from trueturn.scaling.run import Case

__all__ = ["Extrapolated", "Point", "Scaling"]

Interval = tuple[float, float]
WIDTH = 96


@dataclass(frozen=True)
class Point:
    """The least step count of one formula at one size.

    Attributes
    ----------
    formula : str
    size : float
    steps : int
    error : (float, float)
        Interval that holds the true error at `steps`.
    two_qubit_gates : int
        Of the circuit, 2(w-1) for a rotation of weight w.
    runs : int
        Step counts that were run.
    accidental : tuple of int
        Smaller counts that met the tolerance although a larger tested one did not.
    """

    formula: str
    size: float
    steps: int
    error: Interval
    two_qubit_gates: int
    runs: int
    accidental: tuple[int, ...] = ()


@dataclass(frozen=True)
class Extrapolated:
    """What a law says at a size, next to what a theorem proves there.

    Attributes
    ----------
    formula : str
    forecast : Forecast
        Fitted, not proven; `forecast.extrapolated` tells whether the size is outside of the measured ones.
    steps : int
        The predicted count, rounded up.
    proven : int or None
        Least step count whose proven bound meets the tolerance; None where no theorem at hand covers the formula.
    proven_source : str
        The theorem, or why there is none.
    """

    formula: str
    forecast: Forecast
    steps: int
    proven: int | None
    proven_source: str


@dataclass(frozen=True, repr=False)
class Scaling:
    """Least step counts over sizes with the laws fitted to them; made by `step_scaling`.

    Attributes
    ----------
    points : tuple of Point
        By size, then formula.
    laws : mapping of str to PowerLaw
        By formula.
    candidates : tuple of Candidate
    case : callable
        Makes the `Case` of a size.
    variable : str
    quantity : str or None
        As asked: ``"observables"``, ``"state"``, ``"operator"``, or None for the first where a case has observables, else
        the second.
    """

    points: tuple[Point, ...]
    laws: Mapping[str, PowerLaw]
    candidates: tuple[Candidate, ...]
    case: Callable[[float], Case]
    variable: str
    quantity: str | None

    @property
    def sizes(self) -> tuple[float, ...]:
        """The sizes that were measured, ascending."""
        return tuple(sorted({point.size for point in self.points}))

    @property
    def counts(self) -> dict[str, tuple[int, ...]]:
        """Step counts by formula, in the order of the sizes."""
        return {name: tuple(point.steps for point in self.points if point.formula == name) for name in self.laws}

    def extrapolate(self, size: float, level: float = 0.95) -> tuple[Extrapolated, ...]:
        """Say how many steps the laws expect at a size, next to how many are proven to be enough.

        Parameters
        ----------
        size : float
            The `Case` is made for it; its state is not used, so that the size may be beyond memory.
        level : float
            Of the bands.

        Returns
        -------
        tuple of Extrapolated
            One for each formula.

        Raises
        ------
        ArgumentError
            `size` is not positive or `level` not between 0 and 1.
        """
        from trueturn.accuracy.proven_steps import proven_steps
        from trueturn.reference.certificate import norm_bound
        from trueturn.scaling.run import checked_case

        forecasts = {name: law.predict(size, level) for name, law in self.laws.items()}
        case = checked_case(self.case, size)
        watched = (case.observables or {}).values() if self.quantity in (None, "observables") else ()
        per_distance = max((2.0 * norm_bound(one) for one in watched), default=1.0)
        found = []
        for candidate in self.candidates:
            said = forecasts[candidate.formula.name]
            proven, source = proven_steps(
                candidate.formula, candidate.partition(case.operator), case.time, case.tolerance, per_distance
            )
            found.append(Extrapolated(candidate.formula.name, said, math.ceil(said.value), proven, source))
        return tuple(found)

    def table(self, *beyond: float) -> str:
        """Write counts and laws, and for each further size what the laws expect and theorems prove."""
        names = list(self.laws)
        heads = [self.variable, *names]
        lines = [[f"{size:g}", *(self._shown(name, size) for name in names)] for size in self.sizes]
        widths = [max(map(len, column)) for column in zip(heads, *lines, strict=True)]
        text = [
            "  ".join(cell.rjust(width) for cell, width in zip(line, widths, strict=True)) for line in [heads, *lines]
        ]
        text.append("")
        for name, law in self.laws.items():
            text += wrap(f"{name}: {law!r}", WIDTH, subsequent_indent="  ")
            text += [line for caution in law.cautions() for line in wrap(f"  {caution}", WIDTH, subsequent_indent="  ")]
        for size in beyond:
            for entry in self.extrapolate(size):
                text += wrap(
                    f"{entry.formula} at {self.variable} {size:g}: {_words(entry)}", WIDTH, subsequent_indent="  "
                )
        return "\n".join(text)

    def plot(self, path: str | Path, *beyond: float) -> Path:
        """Draw counts, laws and bands up to the largest size `beyond`, dashed where extrapolated, and write the picture.

        Parameters
        ----------
        path : str or Path
            Ends in ``.svg``, ``.png`` or ``.pdf``.
        beyond : float
            Sizes to extrapolate to; proven counts are drawn there as bars.

        Raises
        ------
        ArgumentError
            Another ending.
        """
        from trueturn.scaling.picture import drawn

        return drawn(self, Path(path), beyond)

    def of(self, formula: str) -> tuple[Point, ...]:
        """Return the points of one formula.

        Raises
        ------
        ArgumentError
            It was not measured.
        """
        if formula not in self.laws:
            raise ArgumentError(
                f"formula: was not measured ({formula!r}); give one of {', '.join(self.laws)}",
                argument="formula",
                value=formula,
            )
        return tuple(point for point in self.points if point.formula == formula)

    def _shown(self, name: str, size: float) -> str:
        return ", ".join(count(point.steps) for point in self.of(name) if point.size == size)

    def __repr__(self) -> str:
        return self.table()


def _words(entry: Extrapolated) -> str:
    said = entry.forecast
    kind = f"extrapolated {said.reach:.3g} times beyond the measured sizes" if said.extrapolated else "interpolated"
    fitted = (
        f"{nearest(said.value)} steps, {outward(*said.interval, 3)} at {100 * said.level:g} % ({kind}, not proven); "
    )
    if entry.proven is None:
        return f"{fitted}no proven count: {entry.proven_source}"
    ratio = entry.proven / said.value
    return f"{fitted}proven to be enough: {count(entry.proven)}, {interval(ratio, ratio)} times as many ({entry.proven_source})"
