"""The picture of a comparison: error against cost, and the efficient points."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

from trueturn.audit.figures import plain
from trueturn.audit.report.canvas import GRID, INK, MARKERS, MUTED, PAPER, SERIES, logarithmic, written
from trueturn.audit.report.pictures import bars, legend
from trueturn.comparison.result import unit_words
from trueturn.comparison.table import quantity_words, rule_words, shortened

if TYPE_CHECKING:
    from trueturn.comparison.result import Comparison

__all__ = ["drawn"]

GREY = "#b4bbc4"


def drawn(comparison: Comparison, path: Path) -> Path:
    """Draw a comparison into a file; see `Comparison.plot`."""
    return written(path, (7.6, 4.9), lambda figure: _paint(comparison, figure))


def _paint(comparison: Comparison, figure: Any) -> None:
    axes = figure.add_subplot()
    axes.set_xscale("log")
    axes.set_yscale("log")
    lows = [point.error[0] for point in comparison.points if point.error[0] > 0.0]
    highs = [point.error[1] for point in comparison.points if point.error[1] > 0.0]
    floor = min([*lows, *highs], default=1e-16) / 3.0
    winners = {point.formula for point in comparison.front}
    named = [name for name in comparison.formulas if name in winners or len(comparison.formulas) <= len(SERIES)]
    others = [name for name in comparison.formulas if name not in named]
    for number, name in enumerate(named):
        colour = SERIES[number % len(SERIES)]
        marker = MARKERS[(number + number // len(SERIES)) % len(MARKERS)]  # no pair of both twice
        _series(comparison, axes, name, floor, colour, marker, legend(shortened(name)))
    rest = f"{len(others)} other{'s' if len(others) > 1 else ''}, never efficient"
    for number, name in enumerate(others):
        _series(comparison, axes, name, floor, GREY, ".", rest if number == 0 else None)
    front = comparison.front
    axes.step(
        [point.cost for point in front],
        [max(point.error[1], floor) for point in front],
        where="post",
        color=INK,
        linewidth=0.9,
        linestyle=(0, (5, 3)),
        label="best so far",
        zorder=1.5,
    )
    costs = [point.cost for point in comparison.points]
    room = 1.2 if min(costs) < max(costs) else 3.0
    axes.set_xlim(min(costs) / room, max(costs) * room)
    axes.margins(y=0.08)
    axes.set_xlabel(unit_words(comparison.cost))
    axes.set_ylabel(quantity_words(comparison).lower())
    axes.set_title(f"time {plain(comparison.time)}, {rule_words(comparison)}; filled: efficient", color=MUTED)
    axes.grid(color=GRID, linewidth=0.6)
    logarithmic(axes.xaxis, whole=True)
    logarithmic(axes.yaxis)
    figure.legend(loc="outside right upper", fontsize=9.5, handletextpad=0.5)


def _series(
    comparison: Comparison, axes: Any, name: str, floor: float, colour: str, marker: str, label: str | None
) -> None:
    """Draw one formula: a thin line, bars for the intervals, filled markers for efficient points."""
    points = [point for point in comparison.points if point.formula == name]
    at = [point.cost for point in points]
    middles, arms = bars([point.error for point in points], floor)
    axes.plot(at, middles, color=colour, linewidth=1.0, alpha=0.6)
    axes.errorbar(at, middles, yerr=arms, fmt="none", ecolor=colour, elinewidth=1.3, capsize=2.0, capthick=1.0)
    for filled in (False, True):
        shown = [(x, y) for x, y, point in zip(at, middles, points, strict=True) if point.on_front is filled]
        axes.plot(
            [x for x, _ in shown],
            [y for _, y in shown],
            linestyle="none",
            marker=marker,
            markersize=6.5 if filled else 5.0,
            markerfacecolor=colour if filled else PAPER,
            markeredgecolor=colour,
            zorder=3,
        )
    axes.plot([], [], color=colour, linewidth=1.0, marker=marker, markersize=5.5, label=label)
