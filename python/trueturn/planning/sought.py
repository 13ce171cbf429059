"""The search of all ways: each formula on each partition once, until it ends, is interrupted, or is given up."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, fields, replace
from typing import NamedTuple

from trueturn.audit.result import Row
from trueturn.audit.runs import Chosen, Runs
from trueturn.formulas import Formula
from trueturn.formulas.processed import Processed
from trueturn.partition import Partition
from trueturn.planning.costs import Prices
from trueturn.planning.proven import fitted_order, proven_steps
from trueturn.planning.result import PlanRow
from trueturn.planning.ways import Way

__all__ = ["Sought"]

UNBOUNDED = "interrupted before it was computed"


class Dominated(Exception):
    """A way that cannot cost less than another; ends its search."""


class Found(NamedTuple):
    """A way that was searched: its runs, the step count chosen, the row of an audit, and the proven step count.

    `same_as` is the label of the way that it shares its runs with, or empty.
    """

    way: Way
    runs: Runs
    chosen: Chosen
    row: Row
    proven: tuple[int | None, str]
    same_as: str = ""


@dataclass
class Sought:
    """The ways that were searched, in their order. Ways with the same formula and parts share their runs."""

    prices: Prices
    most_steps: int
    thorough: bool
    found: list[Found] = field(default_factory=list)
    interrupted: bool = False
    _first: dict[tuple[Formula | Processed, Partition], Found] = field(default_factory=dict)

    @property
    def evolutions(self) -> int:
        """How many circuits were run."""
        return sum(len(entry.runs.measured) for entry in self._first.values())

    def search(self, way: Way, runs: Runs, tell: Callable[[int], None]) -> None:
        """Search one way; an interrupt is noted and leaves the best that was found, if any."""
        key = (way.candidate.formula, way.partition)
        known = self._first.get(key)
        if known is not None:
            row = replace(known.row, candidate=way.candidate)
            self.found.append(known._replace(way=way, row=row, same_as=known.way.label))
            return

        def about_to_run(steps: int) -> None:
            if not self.thorough:
                self._require_hope(runs)
            tell(steps)

        chosen: Chosen | None
        try:
            chosen = runs.search(self.most_steps, about_to_run)
        except Dominated as found:
            chosen = runs.best_so_far(str(found))
        except KeyboardInterrupt:
            self.interrupted = True
            chosen = runs.best_so_far("interrupted before the search ended")
        if chosen is None:
            return
        try:
            row, proven = runs.row(chosen), proven_steps(runs)
        except KeyboardInterrupt:
            self.interrupted = True
            row, proven = runs.row(chosen, bounded=False), (None, UNBOUNDED)
        self._first[key] = Found(way, runs, chosen, row, proven)
        self.found.append(self._first[key])

    def _require_hope(self, runs: Runs) -> None:
        """Stop a search whose answer costs more than that of another way: costs grow with steps, and these miss."""
        missing = max((steps for steps, run in runs.measured.items() if run.trial.verdict != "meets"), default=0)
        if not missing:
            return
        least = self.prices.of(runs.measured[missing].circuit, math.inf)
        for other in self._first.values():
            if other.row.verdict != "meets":
                continue
            costs = self.prices.of(other.runs.measured[other.row.steps].circuit, math.inf)
            if all(costs[name] < least[name] for name in self.prices.compared):
                raise Dominated(f"given up: {missing} steps miss and cost more than {other.way.label}, which meets")

    def rows(self) -> list[PlanRow]:
        """Return the rows, priced, in the order of the search; none is marked as efficient yet."""
        rows = []
        for way, runs, chosen, row, (proven, source), same_as in self.found:
            costs = {
                steps: self.prices.of(runs.measured[steps].circuit, runs.seconds[steps])
                for steps in sorted(runs.measured)
            }
            facts = {entry.name: getattr(row, entry.name) for entry in fields(Row)} | {"label": way.label}
            rows.append(
                PlanRow(
                    **facts,
                    rule=way.rule,
                    ordering=way.ordering,
                    same_as=same_as,
                    costs=costs[chosen.steps],
                    trial_costs=tuple(found[self.prices.names[0]] for found in costs.values()),
                    verified=chosen.verified,
                    fitted_order=fitted_order(runs, chosen.steps),
                    bound_steps=proven,
                    bound_steps_source=source,
                    overpays=proven / chosen.steps if proven is not None and chosen.verified else None,
                    efficient=False,
                )
            )
        return rows
