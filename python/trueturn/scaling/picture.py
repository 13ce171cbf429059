"""The picture of a scaling: counts, laws and bands on logarithmic axes."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from trueturn.audit.report.canvas import GRID, INK, MARKERS, MUTED, SERIES, logarithmic, written

if TYPE_CHECKING:
    from trueturn.scaling.result import Scaling

__all__ = ["drawn"]


def drawn(scaling: Scaling, path: Path, beyond: Sequence[float]) -> Path:
    """Draw a scaling into a file; see `Scaling.plot`."""
    return written(path, (7.6, 4.9), lambda figure: _paint(scaling, figure, beyond))


def _paint(scaling: Scaling, figure: Any, beyond: Sequence[float]) -> None:
    axes = figure.add_subplot()
    axes.set_xscale("log")
    axes.set_yscale("log")
    first, last = scaling.sizes[0], scaling.sizes[-1]
    low, high = min([first, *beyond]), max([last, *beyond])
    proven = {size: scaling.extrapolate(size) for size in beyond}
    for place, (name, law) in enumerate(scaling.laws.items()):
        colour, marker = SERIES[place % len(SERIES)], MARKERS[place % len(MARKERS)]
        points = scaling.of(name)
        axes.plot(
            [point.size for point in points],
            [point.steps for point in points],
            linestyle="none",
            marker=marker,
            color=colour,
            label=f"{name}: exponent {law.exponent:.2f}",
            zorder=3,
        )
        grid = np.geomspace(low, high, 120)
        said = [law.predict(size) for size in grid.tolist()]
        axes.fill_between(
            grid,
            [one.interval[0] for one in said],
            [one.interval[1] for one in said],
            color=colour,
            alpha=0.12,
            linewidth=0,
        )
        for inside in (True, False):
            shown = np.array([one.value if one.extrapolated is not inside else np.nan for one in said])
            axes.plot(grid, shown, color=colour, linewidth=1.4, linestyle="-" if inside else (0, (4, 3)))
        for size, entries in proven.items():
            count = next(entry.proven for entry in entries if entry.formula == name)
            if count is not None:
                axes.plot(
                    [size], [count], linestyle="none", marker="_", markersize=16, markeredgewidth=2.2, color=colour
                )
    if any(entry.proven is not None for entries in proven.values() for entry in entries):
        axes.plot(
            [], [], linestyle="none", marker="_", markersize=12, markeredgewidth=2.0, color=INK, label="proven to do"
        )
    axes.set_xlabel(scaling.variable)
    axes.set_ylabel("steps")
    axes.set_title("bands: 95 % for one more count; dashed: extrapolated, not proven", color=MUTED)
    axes.grid(color=GRID, linewidth=0.6)
    logarithmic(axes.xaxis, whole=True)
    logarithmic(axes.yaxis)
    figure.legend(loc="outside right upper", fontsize=9.5, handletextpad=0.5)
