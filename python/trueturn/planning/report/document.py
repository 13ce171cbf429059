"""The plan as plain data: plan.json and plan.csv."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from trueturn.audit.report import document
from trueturn.audit.report.document import limits, number
from trueturn.planning import words

if TYPE_CHECKING:
    from trueturn.planning.result import FrontPoint, Plan, PlanRow

__all__ = ["csv_text", "to_dict"]

COLUMNS = (
    "rank",
    "label",
    "formula",
    "rule",
    "ordering",
    "same_as",
    "steps",
    "verified",
    "error_low",
    "error_high",
    "tolerance",
    "synthesis_error",
    "verdict",
    "recommended",
    "efficient",
    "two_qubit_gates",
    "depth",
    "rotations",
    "t_count",
    "wall_time",
    "bound_steps",
    "overpays",
    "noise",
    "bound_steps_source",
    "bound",
    "bound_source",
    "fitted_order",
    "accidental_steps",
    "worst_figure",
    "worst_time",
    "note",
)


def to_dict(plan: Plan) -> dict[str, Any]:
    """Give everything that the report shows as plain numbers, texts, lists and mappings.

    Returns
    -------
    dict
        Ready for `json.dumps`; what an audit has keeps its place, and what only a plan has stands under its own keys.
    """
    return document.to_dict(plan) | {
        "kind": "trueturn plan",
        "headline": words.headline(plan),
        "cost": list(plan.cost),
        "compared": list(plan.compared),
        "synthesis_error": plan.synthesis_error,
        "allowed": plan.allowed,
        "rows": [row_data(rank, row) for rank, row in enumerate(plan.rows, start=1)],
        "front": [point_data(point) for point in plan.front],
        "evolutions": plan.evolutions,
        "interrupted": plan.interrupted,
        "unsearched": list(plan.unsearched),
        "left_out": dict(plan.left_out),
    }


def row_data(rank: int, row: PlanRow) -> dict[str, Any]:
    """Give the record of one row."""
    return document.row_data(row) | {
        "rank": rank,
        "rule": row.rule,
        "ordering": row.ordering,
        "same_as": row.same_as,
        "costs": {name: number(value) for name, value in row.costs.items()},
        "verified": row.verified,
        "fitted_order": number(row.fitted_order),
        "bound_steps": row.bound_steps,
        "bound_steps_source": row.bound_steps_source,
        "overpays": number(row.overpays),
        "noise": number(row.noise),
        "room": row.room,
        "efficient": row.efficient,
    }


def point_data(point: FrontPoint) -> dict[str, Any]:
    """Give one point of the front; `row` is the place in `rows`, from 0."""
    return {
        "row": point.row,
        "label": point.label,
        "steps": point.steps,
        "cost": number(point.cost),
        "error": limits(point.error),
        "certain": point.certain,
    }


def csv_text(plan: Plan) -> str:
    """Write one line a row, with a heading; costs of the user's own have columns at the end."""
    own = tuple(name for name in plan.rows[0].costs if name not in COLUMNS)
    records = []
    for rank, row in enumerate(plan.rows, start=1):
        found = document.record(plan, row) | row_data(rank, row)
        found |= {name: found["costs"].get(name) for name in ("t_count", "wall_time", *own)}
        found["synthesis_error"] = plan.synthesis_error
        found |= {name: "yes" if found[name] else "no" for name in ("verified", "efficient")}
        records.append(found)
    return document.written(records, (*COLUMNS, *own))
