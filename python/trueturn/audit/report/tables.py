"""The audit as a table for the terminal, and as text for `repr`.

One layout serves both. A candidate takes one line where the width allows it; what does not fit (depth and
rotations, and where the error is largest) moves to a second line, so that eighty columns are enough.
"""

from __future__ import annotations

from collections.abc import Sequence
from io import StringIO
from textwrap import wrap
from typing import TYPE_CHECKING

from rich.console import Console, Group, RenderableType
from rich.text import Text

from trueturn.audit.report import words

if TYPE_CHECKING:
    from trueturn.audit.result import Audit

__all__ = [
    "GAP",
    "MARKS",
    "STYLES",
    "aligned",
    "column_widths",
    "plain_table",
    "plain_text",
    "terminal_table",
    "total_width",
]

MARKS = {"meets": "✓", "misses": "✗", "undecided": "?"}
STYLES = {"meets": "bold green", "misses": "bold red", "undecided": "bold yellow"}
COUNTS = (1, 4, 5, 6)
GAP = 2
AT = "largest error at"


def plain_table(audit: Audit, width: int = 100) -> str:
    """Write the audit as plain text.

    Parameters
    ----------
    audit : Audit
    width : int
        Columns to fill at most.

    Returns
    -------
    str
    """
    return plain_text(terminal_table(audit, width), width)


def plain_text(laid_out: RenderableType, width: int) -> str:
    """Write what was laid out for a terminal as plain text."""
    page = StringIO()
    console = Console(file=page, width=width, color_system=None, force_terminal=False, legacy_windows=False)
    console.print(laid_out)
    return "\n".join(line.rstrip() for line in page.getvalue().splitlines())


def terminal_table(audit: Audit, width: int) -> RenderableType:
    """Lay out the audit for a terminal of `width` columns: verdict, candidates, recommendation, certificate.

    Parameters
    ----------
    audit : Audit
    width : int

    Returns
    -------
    rich renderable
    """
    top = Text.assemble((f"{MARKS[audit.verdict]} {audit.verdict.upper()}", STYLES[audit.verdict]), "  ")
    top.append(words.headline(audit) + ".")
    parts: list[RenderableType] = [Text(audit.title, style="bold")] if audit.title else []
    parts += [top, Text(), *candidate_lines(audit, width)]
    parts += [
        Text(),
        Text(words.recommendation(audit), style="bold"),
        Text(words.certificate_line(audit)),
        Text(words.HARDWARE, style="dim"),
    ]
    return Group(*parts)


def candidate_lines(audit: Audit, width: int) -> list[Text]:
    """Lay out the candidates: a line of figures each, and a second line for what the width does not hold."""
    heads = ["", "steps", "error", "proven ≤", "2-qubit gates", "depth", "rotations", "verdict"]
    cells = [
        [
            row.label,
            words.steps_words(row),
            words.error_words(row, audit),
            words.bound_words(row),
            words.cost_words(row.two_qubit_gates),
            words.cost_words(row.depth),
            words.cost_words(row.rotations),
            f"{MARKS[row.verdict]} {row.verdict}",
        ]
        for row in audit.rows
    ]
    second: list[list[str]] = [[] for _ in cells]
    if total_width(heads, cells) > width:
        second = [[f"depth {line[5]}, rotations {line[6]}"] for line in cells]
        heads, cells = drop(heads), [drop(line) for line in cells]
    places = [words.worst_words(row, audit) for row in audit.rows]
    same = len(set(places)) == 1
    beside = 0 if same else GAP + len(max([AT, *places], key=len))
    if total_width(heads, cells) + beside > width:
        beside = 0
        for remarks, place in zip(second, places, strict=True):
            remarks += [f"largest error at {place}"] if place else []

    widths = column_widths(heads, cells)
    lines = [aligned(heads, widths, ["dim"] * len(heads))]
    if beside:
        lines[0].append(" " * GAP + AT, style="dim")
    lines.append(Text("─" * min(width, total_width(heads, cells) + beside), style="dim"))
    for row, line, place, remarks in zip(audit.rows, cells, places, second, strict=True):
        chosen = "bold" if row is audit.recommended else ""
        lines.append(aligned(line, widths, [chosen] * (len(line) - 1) + [STYLES[row.verdict]]))
        if beside:
            lines[-1].append(" " * GAP + place, style="dim")
        remarks += [row.note] if row.note else []
        lines += [Text(f"  {line}", style="dim") for line in wrap("; ".join(remarks), width - 2)]
    if same and places[0]:
        every = "every candidate" if len(places) > 1 else "the candidate"
        lines.append(Text(f"Largest error of {every}: {places[0]}.", style="dim"))
    return lines


def drop(line: list[str]) -> list[str]:
    """Leave out depth and rotations."""
    return line[:5] + line[7:]


def column_widths(heads: list[str], cells: list[list[str]]) -> list[int]:
    """Give the width of each column."""
    return [max(map(len, column)) for column in zip(heads, *cells, strict=True)]


def total_width(heads: list[str], cells: list[list[str]]) -> int:
    """Give the width of all columns with the gaps between them."""
    widths = column_widths(heads, cells)
    return sum(widths) + GAP * (len(widths) - 1)


def aligned(line: list[str], widths: list[int], styles: list[str], counts: Sequence[int] = COUNTS) -> Text:
    """Set the cells of a line in their columns: counts to the right, the rest to the left."""
    text = Text()
    for index, (cell, width, style) in enumerate(zip(line, widths, styles, strict=True)):
        right = index in counts and index != len(line) - 1
        text.append(cell.rjust(width) if right else cell.ljust(width), style=style)
        if index < len(line) - 1:
            text.append(" " * GAP)
    return text
