"""The answer of `trueturn formulas`: a table for people, plain data for programs."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from trueturn.formulas.base import Formula
from trueturn.formulas.comparison import best_for, rotations_per_step, span, three_digits
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
    "rotations each further step adds to a long circuit for this job, by rule; – where the formula is refused. "
    "Sources: trueturn formulas."
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
    }


def page(known: Sequence[Formula], partitions: Mapping[str, Partition]) -> RenderableType:
    """Lay formulas out: a table, what its columns mean, then special requirements and sources."""
    from rich.console import Group
    from rich.padding import Padding
    from rich.table import Table
    from rich.text import Text

    best = best_for(known)
    table = Table(box=None, padding=(0, 2, 0, 0), header_style="dim")
    table.add_column("name", no_wrap=True)
    headings = ("order", "stages", *(() if partitions else ("symmetric",)), "leading error", *partitions)
    for heading in headings:
        table.add_column(Text(heading), justify="right", no_wrap=heading not in ("leading error",))
    if not partitions:
        table.add_column("best for errors", no_wrap=True)
    for one in known:
        cells = [one.name, str(one.order), str(len(one.stages))]
        if not partitions:
            cells.append("yes" if one.symmetric else "no")
        cells.append(three_digits(one.leading_error))
        for parts in partitions.values():
            count = rotations_per_step(one, parts)
            cells.append("–" if count is None else str(count))
        if not partitions:
            cells.append(f"★ {span(best[one.name])}" if one.name in best else "")
        table.add_row(*map(Text, cells))
    below: list[RenderableType] = [Text(), Text(PER_STEP if partitions else GENERAL)]
    for one in known:
        if one.requires:
            below.append(Text(f"{one.name} requires {one.requires}; order {one.special_order} there."))
    if not partitions:
        below += [Text(), Text("Sources", style="bold")]
        for source, names in _by_source(known).items():
            below += [Text(", ".join(names)), Padding(Text(source, style="dim"), (0, 0, 0, 4))]
    return Group(table, *below)


def _by_source(known: Sequence[Formula]) -> dict[str, list[str]]:
    grouped: dict[str, list[str]] = {}
    for one in known:
        grouped.setdefault(one.source, []).append(one.name)
    return grouped
