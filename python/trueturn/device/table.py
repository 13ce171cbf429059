"""A budget as text and as plain data."""

from __future__ import annotations

from dataclasses import asdict
from textwrap import wrap
from typing import TYPE_CHECKING, Any

from trueturn.audit.figures import count, interval, nearest, plain, upper
from trueturn.device.words import steps_words

if TYPE_CHECKING:
    from trueturn.device.result import Budget, Spending

__all__ = ["document", "written"]

GAP = "  "
KINDS = {"proven": "by proven bound", "measured": "as measured", "fitted": "by fitted law", "given": "as given"}


def written(budget: Budget, width: int) -> str:
    """Write the answer, the shares of each candidate, crossovers and assumptions; see `Budget.table`."""
    shown = budget.observable if len(budget.observable) <= 40 else budget.observable[:39] + "…"
    what = (
        f"Budget for {shown} at time {plain(budget.time)}, tolerance {plain(budget.tolerance)}: two-qubit error rate "
        f"{plain(budget.two_qubit_error)}, "
        + ("shots not counted" if budget.shot_count is None else f"{count(budget.shot_count)} shots")
        + (
            ", native rotations"
            if budget.synthesis_error is None
            else f", rotations synthesised to {plain(budget.synthesis_error)} together"
        )
    )
    lines = [*wrap(what, width), "", *wrap(budget.statement, width), "", *_grid(budget, width), ""]
    for row in budget.rows:
        lines += wrap(_remark(row), width, subsequent_indent="  ")
    lines += [line for crossover in budget.crossovers for line in wrap(str(crossover), width, subsequent_indent="  ")]
    for name, reason in budget.left_out.items():
        lines += wrap(f"Left out: {name}. {reason}", width, subsequent_indent="  ")
    lines.append("")
    for sentence in budget.assumptions:
        lines += wrap(sentence, width)
    return "\n".join(lines)


def document(budget: Budget) -> dict[str, Any]:
    """Give a budget as plain data; see `Budget.to_dict`."""
    rows = []
    for row in budget.rows:
        entry = {name: value for name, value in vars(row).items() if name != "candidate"}
        rows.append(entry | {"measured": None if row.measured is None else list(row.measured)})
    return {
        "kind": "trueturn budget",
        "schema": 1,
        "observable": budget.observable,
        "time": budget.time,
        "tolerance": budget.tolerance,
        "width": budget.width,
        "two_qubit_error": budget.two_qubit_error,
        "shots": budget.shot_count,
        "synthesis_error": budget.synthesis_error,
        "confidence": budget.confidence,
        "verdict": budget.verdict,
        "statement": budget.statement,
        "rows": rows,
        "crossovers": [asdict(crossover) for crossover in budget.crossovers],
        "left_out": dict(budget.left_out),
        "assumptions": list(budget.assumptions),
    }


def _grid(budget: Budget, width: int) -> list[str]:
    """Lay the shares out; counts of gates move to the remarks where the width does not hold them."""
    heads = ["", "steps", "algorithm", "gates", "synthesis", "shots", "total", "verdict", "in cone", "T gates"]
    cells = [_cells(row) for row in budget.rows]
    idle = {4, 9} if budget.synthesis_error is None else set()
    for unused in (idle, {*idle, 8, 9}):
        kept = [[line[place] for place in range(len(heads)) if place not in unused] for line in (heads, *cells)]
        widths = [max(map(len, column)) for column in zip(*kept, strict=True)]
        if sum(widths) + len(GAP) * (len(widths) - 1) <= width:
            break
    lines = []
    for first, *others in kept:
        padded = [cell.rjust(width) for cell, width in zip(others, widths[1:], strict=True)]
        lines.append(GAP.join([first.ljust(widths[0]), *padded]).rstrip())
    return lines


def _cells(row: Spending) -> list[str]:
    return [
        row.label,
        count(row.steps),
        upper(row.algorithmic),
        upper(row.gates),
        upper(row.synthesis),
        upper(row.shots) if row.shots else "-",
        upper(row.total, 3),
        row.verdict,
        count(row.gates_in_cone),
        "-" if row.t_count is None else count(row.t_count),
    ]


def _remark(row: Spending) -> str:
    kind = KINDS[row.algorithmic_kind]
    if row.measured is not None:
        kind += f", {interval(*row.measured)} at {steps_words(row.steps)}"
    law = "" if row.algorithmic_kind == "given" else f" ({row.law})"
    parts = [f"algorithm {kind}{law}"]
    parts.append(f"{count(row.gates_in_cone)} of {count(row.two_qubit_gates)} two-qubit gates in the cone")
    if row.t_count is not None:
        parts.append(f"{count(row.t_count)} T gates")
    if row.fewest_steps is not None and row.fewest_steps < row.steps:
        parts.append(f"{steps_words(row.fewest_steps)} suffice by the law")
    parts.append(
        "no number of shots is enough" if row.needed_shots is None else f"{count(row.needed_shots)} shots are enough"
    )
    parts.append(
        "not within the tolerance even with perfect gates"
        if row.allowed_error is None
        else f"within the tolerance up to a two-qubit error rate of {nearest(row.allowed_error)}"
    )
    return f"{row.label}: {'; '.join(parts)}."
