"""plan.html: one page that holds everything it shows, in the form of an audit's report."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING

from trueturn.audit.figures import count, interval, plain
from trueturn.audit.report import words as shared
from trueturn.audit.report.page import (
    class_of,
    closing,
    complete,
    framed,
    listing,
    section,
    small,
    system_words,
    verdict,
)
from trueturn.planning import words
from trueturn.planning.costs import cost_words, short_words
from trueturn.planning.report.pictures import MOST_NAMED, costs_picture, front_picture

if TYPE_CHECKING:
    from trueturn.planning.result import Plan, PlanRow

__all__ = ["page"]


def page(plan: Plan) -> str:
    """Write the report of a plan as a complete HTML document."""
    return complete(
        plan.title or "Plan",
        f"The least steps that meet the tolerance, ranked by {cost_words(plan.cost[0])}: {system_words(plan)}.",
        [
            verdict(plan, words.headline(plan)),
            *([f"<p><strong>{escape(words.interruption(plan))}</strong></p>"] if plan.interrupted else []),
            section("Ways, ranked", table(plan)),
            section("Error and cost", pictures(plan)),
            section("The front", front(plan)),
            *closing(plan),
        ],
    )


def table(plan: Plan) -> str:
    """Write one way a row; those that share the runs of another are named below."""
    costs = [*plan.cost, *(name for name in plan.rows[0].costs if name not in plan.cost)]
    heads = [("", "n"), ("formula and rule", ""), ("steps", "n"), ("error", ""), ("verdict", "")]
    heads += [(short_words(name), "n") for name in costs]
    head = "".join(f'<th scope="col"{class_of(kind)}>{escape(text)}</th>' for text, kind in heads)
    ranks = [(rank, row) for rank, row in enumerate(plan.rows, start=1) if not row.same_as]
    rows = "\n".join(row_cells(rank, row, plan, costs) for rank, row in ranks)
    sources = list(dict.fromkeys(row.bound_steps_source for row in plan.rows))
    notes = [f"Efficient: {words.efficient_words(plan)}", *words.grounds(plan)]
    notes.append(
        "Proven: the least step count for which a theorem's bound meets the tolerance, and how many times the measured "
        f"one it is ({'; '.join(sources)}). r^-p: how the error falls from the least step count r to 2r."
    )
    same = [f"{row.label} = {row.same_as}" for row in plan.rows if row.same_as]
    notes += [f"Same parts in the same order: {'; '.join(same)}."] if same else []
    notes += words.left_out(plan)
    return framed(head, rows) + "\n" + "\n".join(f'<p class="small">{escape(note)}</p>' for note in notes)


def row_cells(rank: int, row: PlanRow, plan: Plan, costs: list[str]) -> str:
    """Write the cells of one row."""
    formula = row.candidate.name
    rule = row.label.removeprefix(f"{formula}, ")
    places = {shared.worst_words(other, plan) for other in plan.rows}
    place = shared.worst_words(row, plan) if len(places) > 1 else ""
    fall = "" if row.fitted_order is None else f"∝ r^-{row.fitted_order:.2f}"
    proven = f"proven: {words.bound_words(row)}" if row.bound_steps is not None else ""
    cells = [
        f'<td class="n">{rank}</td>',
        f'<td class="e">{escape(formula)}{small(rule)}</td>',
        f'<td class="n">{escape(shared.steps_words(row))}{small(proven, "" if row.verified else "not verified")}</td>',
        f'<td class="e">{escape(words.error_words(row, plan))}{small(place, fall)}</td>',
        f'<td class="v {escape(row.verdict)}">{escape(row.verdict)}{small("efficient" if row.efficient else "")}</td>',
        *(f'<td class="n">{escape(words.figure(name, row.costs[name]))}</td>' for name in costs),
    ]
    line = f"<tr{class_of('chosen' if row is plan.recommended else '')}>{''.join(cells)}</tr>"
    return line + (f'\n<tr><td></td><td colspan="{len(cells) - 1}">{small(row.note)}</td></tr>' if row.note else "")


def pictures(plan: Plan) -> str:
    """Draw error against cost, and cost against cost."""
    figures = "\n".join(f"<figure>{picture(plan)}</figure>" for picture in (front_picture, costs_picture))
    return (
        f'<div class="pair">\n{figures}\n</div>\n<p class="small">Left: every circuit that was run; full markers are the '
        "least step counts. Right: the rows that meet the tolerance; full markers are efficient. "
        f"The {MOST_NAMED} best ranked have colours of their own; rows with the runs of another are drawn once.</p>"
    )


def front(plan: Plan) -> str:
    """List the step counts that nothing beats in error and cost."""
    lines = [
        f"{cost_words(plan.cost[0])} {words.figure(plan.cost[0], point.cost)}: error {interval(*point.error)} by "
        f"{point.label} with {count(point.steps)} step{'' if point.steps == 1 else 's'}"
        + ("" if point.certain else " (not certain: intervals overlap)")
        for point in plan.front
    ]
    return (
        f'<p class="small">Every circuit that was run and has a smaller error than all that cost as much or less; '
        f"the tolerance for a circuit is {plain(float(f'{plan.allowed:.6g}'))}.</p>\n{listing(lines)}"
    )
