"""The answer of `trueturn formulas`: a table for people, plain data for programs."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from trueturn.formulas.base import Formula
from trueturn.formulas.comparison import best_for, rotations_per_step, span, three_digits
from trueturn.formulas.processed import PROCESSED
from trueturn.partition import Partition

if TYPE_CHECKING:
    from rich.console import RenderableType

__all__ = ["document", "page"]

GENERAL = (
    "leading error: L, with error ≈ (L / N)^order in unit time and N exponentials of parts, measured on three fixed "
    "general parts of norm 1. ★ on the efficiency front: reaches the errors named with the fewest exponentials, in "
    "whole steps run on those parts; equal costs share. stages: runs over all parts in a step. Any even order of "
    "Suzuki's family up to 12 has a name (suzuki-10)."
)
PER_STEP = (
    "rotations a step: those that each further step adds to a long circuit for this job, by rule; – where the formula "
    "is refused."
)


def document(known: Sequence[Formula], partitions: Mapping[str, Partition]) -> dict[str, Any]:
    """Give formulas as plain data; `partitions` maps the rules of a job to what they make of its Hamiltonian."""
    best = best_for(known)
    return {
        "kind": "trueturn formulas",
        "formulas": [
            {
                "name": one.name,
                "order": one.order,
                "stages": len(one.stages),
                "symmetric": one.symmetric,
                "requires": one.requires,
                "special_order": one.special_order,
                "error_coefficient": one.error_coefficient,
                "leading_error": one.leading_error,
                "best_for": list(best.get(one.name, ())),
                "source": one.source,
                "rotations_per_step": {rule: rotations_per_step(one, parts) for rule, parts in partitions.items()},
            }
            for one in known
        ],
        "processed": [
            {
                "name": one.name,
                "order": one.order,
                "stages": len(one.kernel.stages),
                "stages_once": len(one.pre) + len(one.post),
                "source": one.source,
                "rotations_per_step": {
                    rule: rotations_per_step(one.kernel, parts) for rule, parts in partitions.items()
                },
            }
            for one in PROCESSED
        ],
    }


def page(known: Sequence[Formula], partitions: Mapping[str, Partition]) -> RenderableType:
    """Lay formulas out: a line each, with a job a second one, what they mean, then requirements and sources."""
    from rich.console import Group
    from rich.padding import Padding
    from rich.text import Text

    rows = _rows(known)
    lines: list[RenderableType] = [Text(row, style="dim") for row in rows[:2]]
    for one, row in zip(known, rows[2:], strict=True):
        lines.append(Text(row))
        if partitions:
            counts = {rule: rotations_per_step(one, parts) for rule, parts in partitions.items()}
            told = (f"{rule} {'–' if count is None else count}" for rule, count in counts.items())
            lines.append(Padding(Text(f"rotations a step: {', '.join(told)}", style="dim"), (0, 0, 0, 4)))
    lines += [Text(), Text(GENERAL + (f" {PER_STEP}" if partitions else ""))]
    for one in known:
        if one.requires:
            lines.append(Text(f"{one.name} requires {one.requires}; order {one.special_order} there."))
    lines += [Text(), Text("Processed: a step of a lower order between a pre- and a post-step", style="bold")]
    for pair in PROCESSED:
        once = len(pair.pre) + len(pair.post)
        line = f"{pair.name}: order {pair.order}, {len(pair.kernel.stages)} stages a step and {once} once"
        for rule, parts in partitions.items():
            line += f"; {rule}: {rotations_per_step(pair.kernel, parts)} rotations a step"
        lines += [Text(line), Padding(Text(pair.source, style="dim"), (0, 0, 0, 4))]
    lines += [Text(), Text("Sources", style="bold")]
    for source, names in _by_source(known).items():
        lines += [Text(", ".join(names)), Padding(Text(source, style="dim"), (0, 0, 0, 4))]
    return Group(*lines)


def _rows(known: Sequence[Formula]) -> list[str]:
    """Write the columns that all formulas have, under two lines of headings; names to the left, the rest right."""
    best = best_for(known)
    cells = [("", "", "", "", "leading", ""), ("name", "order", "stages", "symmetric", "error", "best for errors")]
    for one in known:
        symmetric = "yes" if one.symmetric else "no"
        won = f"★ {span(best[one.name])}" if one.name in best else ""
        figures = (str(one.order), str(len(one.stages)), symmetric, three_digits(one.leading_error))
        cells.append((one.name, *figures, won))
    widths = [max(map(len, column)) for column in zip(*cells, strict=True)]
    return [
        "  ".join([row[0].ljust(widths[0]), *map(str.rjust, row[1:-1], widths[1:-1]), row[-1]]).rstrip()
        for row in cells
    ]


def _by_source(known: Sequence[Formula]) -> dict[str, list[str]]:
    grouped: dict[str, list[str]] = {}
    for one in known:
        grouped.setdefault(one.source, []).append(one.name)
    return grouped
