"""The plan as a table for the terminal, and as text for `repr`.

One line a row. Costs that a plan is not ranked by are left out from the last on until the table fits; the files hold all.
"""

from __future__ import annotations

from textwrap import wrap
from typing import TYPE_CHECKING

from rich.console import Group, RenderableType
from rich.text import Text

from trueturn.audit.figures import count
from trueturn.audit.report import words as shared
from trueturn.audit.report.tables import MARKS, STYLES, aligned, column_widths, plain_text, total_width
from trueturn.planning import words
from trueturn.planning.costs import short_words

if TYPE_CHECKING:
    from trueturn.planning.result import Plan, PlanRow

__all__ = ["plain_table", "terminal_table"]

MOST_REMARKS = 6


def plain_table(plan: Plan, width: int = 100) -> str:
    """Write the plan as plain text of at most `width` columns."""
    return plain_text(terminal_table(plan, width), width)


def terminal_table(plan: Plan, width: int) -> RenderableType:
    """Lay out the plan for a terminal of `width` columns: verdict, ranked rows, recommendation, what it rests on."""
    top = Text.assemble((f"{MARKS[plan.verdict]} {plan.verdict.upper()}", STYLES[plan.verdict]), "  ")
    top.append(words.headline(plan) + ".")
    parts: list[RenderableType] = [Text(plan.title, style="bold")] if plan.title else []
    parts += [top, Text(), *row_lines(plan, width), Text()]
    parts += [Text(words.interruption(plan), style="bold yellow")] if plan.interrupted else []
    parts += [Text(shared.recommendation(plan), style="bold"), *(Text(line) for line in words.grounds(plan))]
    parts += [Text(shared.certificate_line(plan)), Text(shared.HARDWARE, style="dim")]
    return Group(*parts)


def row_lines(plan: Plan, width: int) -> list[Text]:
    """Lay out the rows that have runs of their own, then what there is to say about rows."""
    rows = [row for row in plan.rows if not row.same_as]
    names = [*plan.cost, *(name for name in rows[0].costs if name not in plan.cost)]
    full = True
    heads, cells = laid_out(rows, plan, names, full)
    while total_width(heads, cells) > width and (full or len(names) > 1):
        if len(names) > 1:
            names.pop()
        else:
            full = False
        heads, cells = laid_out(rows, plan, names, full)
    widths = column_widths(heads, cells)
    counts = (1, *range(3, 4 + len(names)))
    lines = [aligned(heads, widths, ["dim"] * len(heads), counts)]
    lines.append(Text("─" * min(width, total_width(heads, cells)), style="dim"))
    for row, line in zip(rows, cells, strict=True):
        chosen = "bold" if row is plan.recommended else ""
        lines.append(aligned(line, widths, [chosen] * (len(line) - 1) + [STYLES[row.verdict]], counts))
        lines += [Text(f"  {remark}", style="dim") for remark in wrap(row.note, width - 2)]
    return [*lines, *(Text(line, style="dim") for remark in remarks(plan) for line in wrap(remark, width))]


def laid_out(rows: list[PlanRow], plan: Plan, names: list[str], full: bool) -> tuple[list[str], list[list[str]]]:
    """Write the headings and cells; where not in full, the verdict is its mark alone."""
    heads = [
        "",
        "steps",
        "error",
        *(short_words(name) for name in names),
        "proven steps",
        "verdict" if full else "",
    ]
    cells = [
        [
            row.label + (" *" if row.efficient else ""),
            shared.steps_words(row),
            words.error_words(row, plan),
            *(words.figure(name, row.costs[name]) for name in names),
            words.bound_words(row),
            f"{MARKS[row.verdict]} {row.verdict}" if full else MARKS[row.verdict],
        ]
        for row in rows
    ]
    return heads, cells


def remarks(plan: Plan) -> list[str]:
    """Say what the marks mean, which rows are repeated, and what was left out."""
    found = [f"* {words.efficient_words(plan)}"] if any(row.efficient for row in plan.rows) else []
    same = [f"{row.label} = {row.same_as}" for row in plan.rows if row.same_as]
    if same:
        found.append(f"Same parts in the same order: {listed(same)}.")
    left_out = words.left_out(plan)
    found += left_out[:MOST_REMARKS]
    if len(left_out) > MOST_REMARKS:
        found.append(f"Left out for other reasons: see plan.json, which has all {count(len(plan.left_out))}.")
    return found


def listed(texts: list[str]) -> str:
    """Write the first few texts and count the rest."""
    rest = len(texts) - MOST_REMARKS
    return "; ".join(texts[:MOST_REMARKS]) + (f"; and {count(rest)} more" if rest > 0 else "")
