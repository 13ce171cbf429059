"""The three pictures of a report: error against steps, error against gates, and the figures over time."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

from trueturn.audit.figures import plain
from trueturn.audit.report.canvas import GRID, INK, MARKERS, MUTED, PAPER, SERIES, draw, logarithmic

if TYPE_CHECKING:
    from trueturn.audit.result import Audit, Row, Trial

__all__ = ["MOST_OBSERVABLES", "gates_picture", "shown_observables", "steps_picture", "time_picture"]

MOST_OBSERVABLES = 6


def steps_picture(audit: Audit) -> str:
    """Draw the error of every step count that was run, with its interval and the tolerance."""
    return trials_picture(audit, "steps", "steps", _steps_of)


def gates_picture(audit: Audit) -> str:
    """Draw the same errors against what they cost in two-qubit gates."""
    return trials_picture(audit, "gates", "two-qubit gates", lambda _, trial: trial.two_qubit_gates)


def _steps_of(row: Row, trial: Trial) -> int | None:
    """A circuit as given has no steps."""
    return None if row.candidate.steps_words == "as given" else trial.steps


def trials_picture(audit: Audit, name: str, label: str, place: Callable[[Row, Trial], int | None]) -> str:
    """Draw error against a whole number, both logarithmic; full markers are the rows of the table."""

    def paint(figure: Any) -> None:
        axes = figure.add_subplot()
        axes.set_xscale("log")
        axes.set_yscale("log")
        shown = [count for row in audit.rows for trial in row.trials if (count := place(row, trial) or 0) > 0]
        if not shown:
            axes.text(0.5, 0.5, f"no candidate has any {label}", transform=axes.transAxes, ha="center")
            axes.set_axis_off()
            return
        room = 1.35 if min(shown) < max(shown) else 3.0
        axes.set_xlim(min(shown) / room, max(shown) * room)
        floor = floor_of(audit)
        for index, row in enumerate(audit.rows):
            placed = [(count, trial) for trial in row.trials if (count := place(row, trial) or 0) > 0]
            if not placed:
                continue
            at = [position for position, _ in placed]
            trials = [trial for _, trial in placed]
            middles, arms = bars([trial.error for trial in trials], floor)
            colour, marker = SERIES[index % len(SERIES)], MARKERS[index % len(MARKERS)]
            axes.plot(at, middles, color=colour, linewidth=1.0, alpha=0.55)
            axes.errorbar(at, middles, yerr=arms, fmt="none", ecolor=colour, elinewidth=1.4, capsize=2.5, capthick=1.0)
            full = [trial.steps == row.steps for trial in trials]
            for tested, face, size in ((False, PAPER, 5.0), (True, colour, 8.0)):
                chosen = [(x, y) for x, y, mark in zip(at, middles, full, strict=True) if mark is tested]
                axes.plot(
                    [x for x, _ in chosen],
                    [y for _, y in chosen],
                    linestyle="none",
                    marker=marker,
                    markersize=size,
                    markerfacecolor=face,
                    markeredgecolor=colour,
                    label=legend(row.label) if tested else None,
                    zorder=3,
                )
        axes.axhline(audit.tolerance, color=INK, linewidth=1.0, linestyle=(0, (5, 3)))
        axes.annotate(
            f"tolerance {plain(audit.tolerance)}",
            (1.0, audit.tolerance),
            xycoords=("axes fraction", "data"),
            xytext=(0, 3),
            textcoords="offset points",
            ha="right",
            fontsize=9.5,
        )
        axes.set_xlabel(label)
        axes.set_ylabel(f"error in the {audit.quantity}")
        axes.margins(y=0.1)
        axes.grid(color=GRID, linewidth=0.6)
        logarithmic(axes.xaxis, whole=True)
        logarithmic(axes.yaxis)
        figure.legend(loc="outside upper left", ncols=2, fontsize=9.5, handletextpad=0.3, columnspacing=1.2)

    text = f"Error against {label} for {len(audit.rows)} candidates, with the tolerance {plain(audit.tolerance)}"
    return draw(f"picture-{name}", (5.2, 4.1), text, paint)


def time_picture(audit: Audit) -> str:
    """Draw each observable of each candidate against the reference over time, and how far they are apart."""
    if audit.quantity != "observables":
        return draw(
            "picture-time",
            (10.6, 3.6),
            f"{audit.quantity.capitalize()} error of each candidate over time",
            lambda figure: states(audit, figure),
        )
    names = shown_observables(audit)
    columns = min(3, len(names))
    lines = -(-len(names) // columns)

    def paint(figure: Any) -> None:
        grid = figure.add_gridspec(2 * lines, columns, height_ratios=[3, 2] * lines)
        for index, name in enumerate(names):
            line, column = divmod(index, columns)
            upper = figure.add_subplot(grid[2 * line, column])
            lower = figure.add_subplot(grid[2 * line + 1, column], sharex=upper)
            values(audit, name, upper)
            differences(audit, name, lower)
            upper.tick_params(labelbottom=False)
            if column == 0:
                upper.set_ylabel("value")
                lower.set_ylabel("less reference")
            if index >= len(names) - columns:
                lower.set_xlabel("time")
        handles, labels = figure.axes[0].get_legend_handles_labels()
        figure.legend(handles, labels, loc="outside upper left", ncols=5, fontsize=9.5, handletextpad=0.4)

    text = "Observables over time: each candidate and the reference with its certified band"
    return draw("picture-time", (10.6, 0.5 + 3.9 * lines), text, paint)


def shown_observables(audit: Audit) -> list[str]:
    """Choose the observables to draw, in the given order: of many, those with the largest errors."""
    largest = dict.fromkeys(audit.observables, 0.0)
    for row in audit.rows:
        for point in row.points:
            largest[point.name] = max(largest.get(point.name, 0.0), point.error[1])
    kept = sorted(audit.observables, key=lambda name: -largest[name])[:MOST_OBSERVABLES]
    return [name for name in audit.observables if name in kept]


def values(audit: Audit, name: str, axes: Any) -> None:
    """Draw the values of one observable: the reference as a line with its band, candidates as markers."""
    times = [float(time) for time in audit.reference.times]
    exact = [float(value) for value in audit.reference.expectations[name]]
    widths = [float(width) for width in audit.reference.expectation_bounds[name]]
    axes.fill_between(
        times,
        [value - width for value, width in zip(exact, widths, strict=True)],
        [value + width for value, width in zip(exact, widths, strict=True)],
        color=MUTED,
        alpha=0.35,
        linewidth=0,
    )
    axes.plot(times, exact, color=INK, linewidth=1.1, marker="_", markersize=13, label="reference")
    for index, row in enumerate(audit.rows):
        points = [point for point in row.points if point.name == name]
        axes.plot(
            [point.time for point in points],
            [point.value for point in points],
            **candidate_style(index),
            label=legend(f"{row.label}, {row.steps} steps"),
        )
    axes.set_title(name)
    axes.margins(x=0.06, y=0.14)
    axes.grid(color=GRID, linewidth=0.6)


def differences(audit: Audit, name: str, axes: Any) -> None:
    """Draw candidate less reference with the error interval as a bar, and the tolerance as two lines."""
    allowed = allowance(audit, name)
    unit = allowed / audit.tolerance
    axes.axhspan(-allowed, allowed, color=GRID, alpha=0.55, linewidth=0)
    axes.axhline(0.0, color=INK, linewidth=0.8)
    spread = 1.5 * allowed
    for index, row in enumerate(audit.rows):
        points = [point for point in row.points if point.name == name]
        apart = [point.value - point.reference for point in points]
        arms = [unit * width for width in half_widths(row, name)]
        spread = max([spread, *(1.7 * abs(value) for value in apart if math.isfinite(value))])
        style = candidate_style(index)
        axes.errorbar(
            [point.time for point in points],
            apart,
            yerr=arms,
            ecolor=style["markeredgecolor"],
            elinewidth=1.2,
            **style,
        )
    axes.set_yscale("symlog", linthresh=allowed)
    axes.set_ylim(-spread, spread)
    ticks = [-allowed, 0.0, allowed]
    if spread > 8 * allowed:
        ticks = [-10 * allowed, *ticks, 10 * allowed]
    axes.set_yticks(ticks, [f"{tick:+.2g}".replace("-", "−") if tick else "0" for tick in ticks])
    axes.minorticks_off()
    axes.grid(axis="x", color=GRID, linewidth=0.6)


def states(audit: Audit, figure: Any) -> None:
    """Draw the state or operator error of each candidate over time, with the tolerance."""
    axes = figure.add_subplot()
    axes.set_yscale("log")
    floor = floor_of(audit)
    for index, row in enumerate(audit.rows):
        middles, arms = bars([point.error for point in row.points], floor)
        style = candidate_style(index) | {
            "linestyle": "-",
            "linewidth": 0.8,
            "color": SERIES[index % len(SERIES)],
        }
        label = legend(f"{row.label}, {row.steps} steps")
        axes.errorbar([point.time for point in row.points], middles, yerr=arms, label=label, **style)
    axes.axhline(audit.tolerance, color=INK, linewidth=1.0, linestyle=(0, (5, 3)))
    axes.set_xlabel("time")
    axes.set_ylabel(f"{audit.quantity} error")
    axes.grid(color=GRID, linewidth=0.6)
    logarithmic(axes.yaxis)
    figure.legend(loc="outside upper left", ncols=4, fontsize=9.5)


def candidate_style(index: int) -> dict[str, Any]:
    """Give the look of a candidate's markers."""
    colour = SERIES[index % len(SERIES)]
    marker = MARKERS[index % len(MARKERS)]
    return {
        "linestyle": "none",
        "marker": marker,
        "markersize": 6.0,
        "markerfacecolor": "none",
        "markeredgecolor": colour,
        "markeredgewidth": 1.4,
    }


def legend(text: str) -> str:
    """Keep matplotlib from leaving out a legend entry that starts with an underscore."""
    return f" {text}" if text.startswith("_") else text


def allowance(audit: Audit, name: str) -> float:
    """Give the tolerance in units of one observable."""
    if audit.relative_to != "norm":
        return audit.tolerance
    from trueturn.reference.certificate import norm_bound

    return audit.tolerance * norm_bound(audit.observables[name])


def half_widths(row: Row, name: str) -> list[float]:
    """Give half the width of each error interval of one observable over time."""
    return [(point.error[1] - point.error[0]) / 2 for point in row.points if point.name == name]


def floor_of(audit: Audit) -> float:
    """Give the lowest error worth drawing: an interval that reaches 0 ends there on a logarithmic axis."""
    found = [trial.error for row in audit.rows for trial in row.trials]
    found += [row.error for row in audit.rows]
    ends = [low for low, _ in found if low > 0] or [high for _, high in found if high > 0] or [audit.tolerance]
    return min([*ends, audit.tolerance]) / 3


def bars(errors: Sequence[tuple[float, float]], floor: float) -> tuple[list[float], list[list[float]]]:
    """Turn intervals into middles and arms for a logarithmic axis."""
    lows = [max(low, floor) for low, _ in errors]
    highs = [max(high, low) for low, (_, high) in zip(lows, errors, strict=True)]
    middles = [math.sqrt(low * high) for low, high in zip(lows, highs, strict=True)]
    down = [middle - low for middle, low in zip(middles, lows, strict=True)]
    up = [high - middle for middle, high in zip(middles, highs, strict=True)]
    return middles, [down, up]
