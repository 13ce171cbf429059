"""The candidates of a job file, and the formulas that it names."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from trueturn.audit.candidate import Candidate
from trueturn.audit.job_table import Table, nearest
from trueturn.errors import FormulaError, JobError
from trueturn.formulas import Formula, formula, formulas, read_formulas
from trueturn.formulas.structure import require_structure
from trueturn.operator import Operator
from trueturn.partition_rules import RULES

if TYPE_CHECKING:
    from trueturn.planning.job import PlanTask

__all__ = ["read_candidates", "read_planned"]

EXAMPLE_CANDIDATE = '[[candidate]] with formula = "strang", rule = "commuting", steps = "least"'


def read_candidates(file: Table, operator: Operator, folder: Path, required: bool) -> tuple[Candidate, ...]:
    """Read every `[[candidate]]`, and try its rule on the operator."""
    entries = file.values.get("candidate", [])
    if not isinstance(entries, list) or not all(isinstance(entry, dict) for entry in entries):
        raise file.error("candidate", "not a list of sections", f"write {EXAMPLE_CANDIDATE}")
    if not entries and required:
        raise file.error("candidate", "missing", f"add {EXAMPLE_CANDIDATE}")
    candidates = []
    for index, entry in enumerate(entries, start=1):
        section = Table(entry, f"candidate[{index}]", file.path)
        section.only(("formula", "formula_file", "rule", "steps"))
        name = section.text("formula", 'formula = "strang"')
        chosen = find_formula(section, "formula", name, folder)
        rule = section.choice("rule", tuple(RULES), default="commuting")
        candidate = Candidate(chosen, rule=rule, steps=read_steps(section))
        with section.blame("rule"):
            require_structure(chosen, candidate.partition(operator))
        candidates.append(candidate)
    return tuple(candidates)


def read_planned(
    file: Table, operator: Operator, tolerance: float, folder: Path, candidates: Sequence[Candidate]
) -> PlanTask | None:
    """Read `[plan]`, or make a plan of the candidates, if there are any."""
    from trueturn.planning.job import plan_of_candidates, read_plan

    if "plan" in file:
        return read_plan(file.table("plan"), operator, tolerance, folder, find_formula)
    return plan_of_candidates(candidates) if candidates else None


def find_formula(section: Table, key: str, name: str, folder: Path) -> Formula:
    """Find the formula that a key names: in the file of `formula_file`, where there is one, else by its name.

    An unknown one is refused with the nearest that is known.
    """
    if "formula_file" in section:
        return own_formula(section, key, name, folder)
    try:
        return formula(name)
    except FormulaError as error:
        raise section.error(key, "unknown", nearest(name, formulas(special=True)), name) from error


def own_formula(section: Table, key: str, name: str, folder: Path) -> Formula:
    """Find a formula in the file that `formula_file` names; what is wrong in there is told with its own key."""
    file = section.text("formula_file", 'formula_file = "mine.toml"')
    try:
        found = {one.name: one for one in read_formulas(folder / file)}
    except JobError as error:
        full = section.full("formula_file")
        raise JobError(f"{full}: {file}: {error}", path=section.path, key=full) from error
    if name not in found:
        raise section.error(key, f"not in {file}", nearest(name, tuple(found)), name)
    return found[name]


def read_steps(section: Table) -> int | str:
    """Read `steps`: a positive whole number or ``"least"``."""
    value = section.values.get("steps", "least")
    if value == "least":
        return "least"
    if isinstance(value, str):
        raise section.error("steps", "neither a number nor least", 'write steps = 20 or steps = "least"', value)
    return section.whole("steps", 'steps = 20 or steps = "least"')
