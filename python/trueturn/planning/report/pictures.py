"""The two pictures of a plan: error against cost of all that was run, and two costs of the rows that meet."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from trueturn.audit.figures import plain
from trueturn.audit.report.canvas import GRID, INK, MARKERS, MUTED, PAPER, SERIES, draw, logarithmic
from trueturn.audit.report.pictures import bars, floor_of, legend
from trueturn.planning.costs import cost_words

if TYPE_CHECKING:
    from trueturn.planning.result import Plan, PlanRow

__all__ = ["MOST_NAMED", "costs_picture", "front_picture", "named_rows"]

MOST_NAMED = 8
REST = "#b4bbc4"


def named_rows(plan: Plan) -> list[PlanRow]:
    """Choose the rows that have a colour of their own: the best ranked of those with runs of their own."""
    return [row for row in plan.rows if not row.same_as][:MOST_NAMED]


def looks(plan: Plan) -> list[tuple[PlanRow, str, str, str | None]]:
    """Give each row with runs of its own its colour, marker and legend; the rows beyond the named ones share one."""
    named = named_rows(plan)
    found: list[tuple[PlanRow, str, str, str | None]] = []
    others = [row for row in plan.rows if not row.same_as and not any(row is other for other in named)]
    for number, row in enumerate(named):
        found.append((row, SERIES[number % len(SERIES)], MARKERS[number % len(MARKERS)], legend(row.label)))
    for number, row in enumerate(others):
        found.append((row, REST, ".", f"{len(others)} other{'s' if len(others) > 1 else ''}" if number == 0 else None))
    return found


def front_picture(plan: Plan) -> str:
    """Draw the error of every circuit that was run against its cost, and the front."""
    cost = plan.cost[0]

    def paint(figure: Any) -> None:
        axes = figure.add_subplot()
        axes.set_xscale("log")
        axes.set_yscale("log")
        floor = floor_of(plan)
        for row, colour, marker, label in looks(plan):
            # Counts of zero have no place on a logarithmic axis.
            shown = [(at, trial) for at, trial in zip(row.trial_costs, row.trials, strict=True) if at > 0]
            if not shown:
                continue
            middles, arms = bars([trial.error for _, trial in shown], floor)
            at = [place for place, _ in shown]
            axes.plot(at, middles, color=colour, linewidth=1.0, alpha=0.55)
            axes.errorbar(at, middles, yerr=arms, fmt="none", ecolor=colour, elinewidth=1.2, capsize=2.0)
            for answer in (False, True):
                chosen = [
                    (x, y) for (x, trial), y in zip(shown, middles, strict=True) if (trial.steps == row.steps) is answer
                ]
                axes.plot(
                    [x for x, _ in chosen],
                    [y for _, y in chosen],
                    linestyle="none",
                    marker=marker,
                    markersize=7.5 if answer else 4.5,
                    markerfacecolor=colour if answer else PAPER,
                    markeredgecolor=colour,
                    label=label if answer else None,
                    zorder=3,
                )
        steps = [(point.cost, max(point.error[1], floor)) for point in plan.front if point.cost > 0]
        axes.step(
            [x for x, _ in steps],
            [y for _, y in steps],
            where="post",
            color=INK,
            linewidth=0.9,
            linestyle=(0, (2, 2)),
            label="front",
            zorder=1.5,
        )
        tolerance_line(plan, axes)
        axes.set_xlabel(cost_words(cost))
        axes.set_ylabel({"observables": "error in the observables"}.get(plan.quantity, f"{plan.quantity} error"))
        finish(axes, figure)

    text = f"Error against {cost_words(cost)} for everything that was run, with the front and the tolerance"
    return draw("picture-front", (5.2, 4.6), text, paint)


def costs_picture(plan: Plan) -> str:
    """Draw two costs of the rows that meet the tolerance; full markers are the efficient ones."""
    across, up = plan.compared[0], next((name for name in plan.compared[1:]), plan.compared[0])

    def paint(figure: Any) -> None:
        axes = figure.add_subplot()
        meeting = [entry for entry in looks(plan) if entry[0].verdict == "meets"]
        shown = [entry for entry in meeting if entry[0].costs[across] > 0 and entry[0].costs[up] > 0]
        if not shown:
            axes.text(0.5, 0.5, "nothing to compare", transform=axes.transAxes, ha="center")
            axes.set_axis_off()
            return
        axes.set_xscale("log")
        axes.set_yscale("log")
        for row, colour, marker, label in shown:
            axes.plot(
                [row.costs[across]],
                [row.costs[up]],
                linestyle="none",
                marker=marker,
                markersize=8.0,
                markerfacecolor=colour if row.efficient else PAPER,
                markeredgecolor=colour,
                label=label,
            )
        axes.set_xlabel(cost_words(across))
        axes.set_ylabel(cost_words(up))
        for axis, name in ((axes.set_xlim, across), (axes.set_ylim, up)):
            values = [row.costs[name] for row, *_ in shown]
            axis(min(values) / 1.4, max(values) * 1.4)
        finish(axes, figure)

    text = f"{cost_words(up)} against {cost_words(across)} for the rows that meet the tolerance"
    return draw("picture-costs", (5.2, 4.6), text, paint)


def tolerance_line(plan: Plan, axes: Any) -> None:
    """Draw the error that a circuit may have."""
    axes.axhline(plan.allowed, color=MUTED, linewidth=1.0, linestyle=(0, (5, 3)))
    axes.annotate(
        f"allowed {plain(float(f'{plan.allowed:.6g}'))}",
        (1.0, plan.allowed),
        xycoords=("axes fraction", "data"),
        xytext=(0, 3),
        textcoords="offset points",
        ha="right",
        fontsize=9.5,
    )


def finish(axes: Any, figure: Any) -> None:
    """Set what both pictures share."""
    axes.margins(0.08)
    axes.grid(color=GRID, linewidth=0.6)
    logarithmic(axes.xaxis, whole=True)
    logarithmic(axes.yaxis, whole=True)
    figure.legend(loc="outside upper left", ncols=2, fontsize=9.5, handletextpad=0.3, columnspacing=1.2)
