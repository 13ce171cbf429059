"""A comparison as text."""

from __future__ import annotations

import math
from textwrap import wrap
from typing import TYPE_CHECKING

from trueturn.audit.figures import count, plain, upper
from trueturn.comparison.result import unit_words

if TYPE_CHECKING:
    from trueturn.comparison.result import Comparison, Point

__all__ = ["quantity_words", "rule_words", "shortened", "written"]

WIDTH = 80
LONGEST_NAME = 24
MOST_ACCURACIES = 14
GAP = 2


def written(comparison: Comparison) -> str:
    """Write errors by formula and budget, then the winners by accuracy; see `Comparison.table`."""
    unit = unit_words(comparison.cost)
    title = f"{quantity_words(comparison)} at time {plain(comparison.time)}, {rule_words(comparison)}, by {unit}"
    lines = [*wrap(title, WIDTH), "", *_grid(comparison), ""]
    notes = ["Errors are upper ends of the error intervals, rounded up; ≤ where the interval reaches 0."]
    notes.append("* efficient: all that cost as much or less have larger errors.")
    if len(comparison.least) * len(comparison.budgets) > sum(len(point.budgets) for point in comparison.points):
        notes.append("- one step costs more than the budget.")
    for note in notes:
        lines += wrap(note, WIDTH)
    lines += ["", *_winners(comparison, unit)]
    for name, reason in comparison.left_out.items():
        lines += wrap(f"Left out: {name}. {reason}", WIDTH, subsequent_indent="  ")
    certificate = comparison.reference.certificate
    kind = "proven" if certificate.proven else "partly estimated"
    lines += wrap(f"Reference: {certificate.method}, state error ≤ {upper(certificate.largest)}, {kind}.", WIDTH)
    return "\n".join(lines)


def quantity_words(comparison: Comparison) -> str:
    """Name what the errors are of."""
    return "State error" if comparison.quantity == "state" else "Largest observable error"


def rule_words(comparison: Comparison) -> str:
    """Say how the Hamiltonian was split."""
    return comparison.rule if comparison.rule == "own parts" else f"{comparison.rule} parts"


def shortened(name: str) -> str:
    """Cut a long name."""
    return name if len(name) <= LONGEST_NAME else name[: LONGEST_NAME - 1] + "…"


def _grid(comparison: Comparison) -> list[str]:
    """Lay out a line for each formula and a column for each budget, in as many blocks as the width asks for."""
    names = list(comparison.least)
    heads = [f"{count(budget)}" for budget in comparison.budgets]
    cells = {(point.formula, budget): _figure(point) for point in comparison.points for budget in point.budgets}
    columns = [[cells.get((name, budget), "- ") for name in names] for budget in comparison.budgets]
    widths = [max(map(len, [head + " ", *column])) for head, column in zip(heads, columns, strict=True)]
    left = max(len(shortened(name)) for name in names)
    lines: list[str] = []
    first = 0
    while first < len(heads):
        last, used = first, left
        while last < len(heads) and (last == first or used + GAP + widths[last] <= WIDTH):
            used += GAP + widths[last]
            last += 1
        shown = range(first, last)
        lines += [""] if lines else []
        lines.append(" " * left + "".join(" " * GAP + (heads[c] + " ").rjust(widths[c]) for c in shown).rstrip())
        for number, name in enumerate(names):
            row = "".join(" " * GAP + columns[c][number].rjust(widths[c]) for c in shown)
            lines.append((shortened(name).ljust(left) + row).rstrip())
        first = last
    return lines


def _figure(point: Point) -> str:
    mark = "*" if point.on_front else " "
    return ("≤" if point.error[0] <= 0.0 else "") + upper(point.error[1]) + mark


def _winners(comparison: Comparison, unit: str) -> list[str]:
    """Name the cheapest points for each power of ten that is reached."""
    ends = [point.error[1] for point in comparison.front]
    first = math.floor(math.log10(max(ends))) if max(ends) > 0.0 else 0
    lines = []
    for power in range(first, first - MOST_ACCURACIES, -1):
        found = comparison.at_accuracy(float(f"1e{power}"))
        if not found:
            break
        best = found[0]
        line = f"1e{power}".rjust(6) + f"  {shortened(best.formula)}, {_steps(best.steps)}, {count(best.cost)} {unit}"
        if len(found) > 1:
            line += f"; next {shortened(found[1].formula)}, {count(found[1].cost)}"
        lines += wrap(line, WIDTH, subsequent_indent=" " * 8)
    return ["Cheapest that was measured for each accuracy:", *lines, ""] if lines else []


def _steps(steps: int) -> str:
    return f"{count(steps)} step{'s' if steps > 1 else ''}"
