"""The search of all ways: each formula on each partition once, until it ends, is interrupted, or is given up."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, fields, replace
from typing import NamedTuple

from trueturn.accuracy.proven_steps import proven_steps
from trueturn.audit.figures import upper
from trueturn.audit.result import Row
from trueturn.audit.runs import Chosen, Runs, error_per_distance
from trueturn.formulas import Formula
from trueturn.formulas.processed import Processed
from trueturn.partition import Partition
from trueturn.planning.costs import Prices
from trueturn.planning.noise import Noise
from trueturn.planning.result import PlanRow
from trueturn.planning.ways import Way

__all__ = ["Sought"]

UNBOUNDED = "interrupted before it was computed"


class Dominated(Exception):
    """A way that cannot cost less than another; ends its search."""


class Found(NamedTuple):
    """A way that was searched: its runs and the step count chosen.

    `same_as` is the label of the way that it shares its runs with, or empty.
    """

    way: Way
    runs: Runs
    chosen: Chosen
    same_as: str = ""


@dataclass
class Sought:
    """The ways that were searched, in their order. Ways with the same formula and parts share their runs."""

    prices: Prices
    noise: Noise | None
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
            self.found.append(known._replace(way=way, same_as=known.way.label))
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
        self._first[key] = Found(way, runs, chosen)
        self.found.append(self._first[key])

    def _require_hope(self, runs: Runs) -> None:
        """Stop a search whose answer costs more than that of another way: costs grow with steps, and these miss."""
        missing = max((steps for steps, run in runs.measured.items() if run.trial.verdict != "meets"), default=0)
        if not missing:
            return
        least = self.prices.of(runs.circuit(missing), math.inf)
        for other in self._first.values():
            answer = other.runs.measured[other.chosen.steps]
            if answer.trial.verdict != "meets":
                continue
            costs = self.prices.of(other.runs.circuit(other.chosen.steps), math.inf)
            if all(costs[name] < least[name] for name in self.prices.compared):
                raise Dominated(f"given up: {missing} steps miss and cost more than {other.way.label}, which meets")

    def rows(self, bounds: bool, tell: Callable[[str, int], None]) -> list[PlanRow]:
        """Return the rows, priced, in the order of the search; none is marked as efficient yet.

        `bounds` asks for proven bounds. After an interrupt, which means that the user is in a hurry, and from one while they
        are computed, those that are missing are left out.
        """
        why = "not asked for" if not bounds else UNBOUNDED if self.interrupted else ""
        rows: list[PlanRow] = []
        for number, (way, runs, chosen, same_as) in enumerate(self.found):
            row = runs.row(chosen, 0.0)
            proven: tuple[int | None, str] = None, why
            if same_as:
                twin = next(other for other in rows if other.label == same_as)
                row = replace(row, bound=twin.bound, bound_source=twin.bound_source)
                proven = twin.bound_steps, twin.bound_steps_source
            elif not why:
                try:
                    tell(way.label, number)
                    row, proven = runs.row(chosen, 1.0, "tightest"), _proven(way, runs)
                except KeyboardInterrupt:
                    self.interrupted = True
                    why = UNBOUNDED
                    proven = None, why
            rows.append(
                self._row(replace(row, candidate=way.candidate, label=way.label), way, runs, chosen, same_as, proven)
            )
        return rows

    def _row(
        self, row: Row, way: Way, runs: Runs, chosen: Chosen, same_as: str, proven: tuple[int | None, str]
    ) -> PlanRow:
        costs = {steps: self.prices.of(runs.circuit(steps), runs.seconds[steps]) for steps in sorted(runs.measured)}
        steps, source = proven
        noise = None if self.noise is None else self.noise.of(runs.circuit(chosen.steps))
        room = row.verdict == "meets" and row.error[1] + (noise or 0.0) <= runs.bench.tolerance
        notes = [row.note] if row.note else []
        if noise is not None and row.verdict == "meets" and not room:
            notes.append(f"failing gates may add {upper(noise)}, for which the error leaves no room")
        facts = {entry.name: getattr(row, entry.name) for entry in fields(Row)} | {"note": "; ".join(notes)}
        return PlanRow(
            **facts,
            rule=way.rule,
            ordering=way.ordering,
            same_as=same_as,
            costs=costs[chosen.steps],
            trial_costs=tuple(found[self.prices.names[0]] for found in costs.values()),
            verified=chosen.verified,
            fitted_order=_fitted_order(runs, chosen.steps),
            bound_steps=steps,
            bound_steps_source=source,
            overpays=steps / chosen.steps if steps is not None and chosen.verified else None,
            noise=noise,
            room=room,
            efficient=False,
        )


def _proven(way: Way, runs: Runs) -> tuple[int | None, str]:
    """Return the step count that theorems prove for a way, on the grid of the times, and its source."""
    bench = runs.bench
    return proven_steps(
        way.candidate.formula,
        way.partition,
        bench.times[-1],
        bench.tolerance,
        error_per_distance(bench),
        bench.step_unit(),
    )


def _fitted_order(runs: Runs, steps: int) -> float | None:
    """Return how fast the error falls from a step count to the largest that was run, or None where rounding hides it."""
    last = max(runs.measured)
    first, final = (runs.measured[count].trial.error for count in (steps, last))
    if last <= steps or first[0] <= 0.0 or final[0] <= 0.0:
        return None
    return math.log(first[1] / final[1]) / math.log(last / steps)
