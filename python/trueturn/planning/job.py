"""The `[plan]` section of a job file: what is searched, and what counts."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from trueturn.audit.candidate import Candidate
from trueturn.audit.job_table import Table, nearest
from trueturn.formulas import Formula
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.partition_rules import RULES
from trueturn.planning.costs import COSTS
from trueturn.planning.ways import ORDERINGS

__all__ = ["PlanTask", "plan_of_candidates", "read_plan"]

KEYS = ("formulas", "formula_file", "rules", "orderings", "cost", "synthesis_error", "thorough", "bounds")


@dataclass(frozen=True)
class PlanTask:
    """What a job asks of a plan; `formulas` is None for all that are registered and fit."""

    formulas: tuple[Formula | Processed, ...] | None
    rules: tuple[str | Partition, ...]
    orderings: tuple[str, ...] = ("given",)
    cost: tuple[str, ...] = ("two_qubit_gates",)
    synthesis_error: float | None = None
    thorough: bool = True
    bounds: bool = True


def read_plan(
    section: Table,
    operator: Operator,
    tolerance: float,
    folder: Path,
    find: Callable[[Table, str, str, Path], Formula],
) -> PlanTask:
    """Read `[plan]`, and try its rules on the operator; `find` gives the formula of a key by its name."""
    section.only(KEYS)
    formulas = None
    if "formulas" in section:
        names = words(section, "formulas", 'formulas = ["strang", "suzuki-4"]')
        formulas = tuple(find(section, "formulas", name, folder) for name in names)
    elif "formula_file" in section:
        raise section.error("formulas", "missing", "name the formulas of formula_file that are to be searched")
    rules = (
        words(section, "rules", 'rules = ["commuting", "axis"]', tuple(RULES)) if "rules" in section else ["commuting"]
    )
    for rule in rules:
        with section.blame("rules"):
            Partition.of(operator, rule)
    orderings = (
        words(section, "orderings", 'orderings = ["given", "reversed"]', ORDERINGS) if "orderings" in section else []
    )
    cost = words(section, "cost", 'cost = "two_qubit_gates", or a list', tuple(COSTS)) if "cost" in section else []
    share = section.positive("synthesis_error", "synthesis_error = 1e-4") if "synthesis_error" in section else None
    if share is not None and share >= tolerance:
        raise section.error("synthesis_error", "takes the whole tolerance", "give a part of target.tolerance", share)
    return PlanTask(
        formulas,
        tuple(rules),
        tuple(orderings) or PlanTask.orderings,
        tuple(cost) or PlanTask.cost,
        share,
        section.flag("thorough", True),
        section.flag("bounds", True),
    )


def plan_of_candidates(candidates: Sequence[Candidate]) -> PlanTask:
    """Give the plan of a job without `[plan]`: every formula of its candidates by every rule of them."""
    formulas = {candidate.formula.name: candidate.formula for candidate in candidates}
    return PlanTask(tuple(formulas.values()), tuple(dict.fromkeys(candidate.rule for candidate in candidates)))


def words(section: Table, key: str, example: str, choices: Sequence[str] | None = None) -> list[str]:
    """Give a list of words, or a single one as a list; no word twice, and each among the choices."""
    value = section.values[key]
    entries = value if isinstance(value, list) else [value]
    if not entries:
        raise section.error(key, "empty", f"write {example}")
    for index, entry in enumerate(entries):
        if not isinstance(entry, str):
            raise section.error(key, f"entry {index} is not a text", f"write {example}", entry)
        if choices is not None and entry not in choices:
            raise section.error(key, "unknown", nearest(entry, choices), entry)
    return list(dict.fromkeys(entries))
