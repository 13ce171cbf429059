"""The audit as plain data: audit.json and audit.csv."""

from __future__ import annotations

import csv
import hashlib
import io
import json
import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from trueturn._build import build_info
from trueturn.audit.report import words
from trueturn.reference.folder import certificate_data

if TYPE_CHECKING:
    from trueturn.audit.result import Audit, PointError, Row, Trial
    from trueturn.operator import Operator

__all__ = ["COLUMNS", "SCHEMA", "build_facts", "csv_text", "json_text", "record", "row_data", "to_dict", "written"]

SCHEMA = 1
TERMS_IN_FULL = 20_000
COLUMNS = (
    "label",
    "formula",
    "rule",
    "steps_asked",
    "steps",
    "error_low",
    "error_high",
    "tolerance",
    "verdict",
    "recommended",
    "bound",
    "bound_source",
    "two_qubit_gates",
    "depth",
    "rotations",
    "rounding",
    "worst_figure",
    "worst_time",
    "accidental_steps",
    "note",
)


def to_dict(audit: Audit) -> dict[str, Any]:
    """Give everything that the report shows as plain numbers, texts, lists and mappings.

    Parameters
    ----------
    audit : Audit

    Returns
    -------
    dict
        Ready for `json.dumps`; a number that does not exist (the value of a state) is None.
    """
    return {
        "kind": "trueturn audit",
        "schema": SCHEMA,
        "title": audit.title,
        "verdict": audit.verdict,
        "headline": words.headline(audit),
        "recommended": None if audit.recommended is None else position(audit, audit.recommended),
        "recommendation": words.recommendation(audit),
        "reason": audit.reason,
        "target": {
            "quantity": audit.quantity,
            "tolerance": audit.tolerance,
            "relative_to": audit.relative_to,
            "times": list(audit.times),
            "readout": audit.readout,
            "energy_unit": audit.energy_unit,
            "observables": {name: operator_data(operator) for name, operator in audit.observables.items()},
        },
        "system": operator_data(audit.operator),
        "start": audit.start,
        "rows": [row_data(row) for row in audit.rows],
        "reference": reference_data(audit),
        "assumptions": list(audit.assumptions),
        "proven": list(audit.proven),
        "measured": list(audit.measured),
        "cautions": list(audit.cautions),
        "note": words.HARDWARE,
        "seconds": {stage: float(value) for stage, value in audit.seconds.items()},
        "build": build_facts(),
    }


def position(audit: Audit, row: Row) -> int:
    """Find a row by identity: two candidates may have equal figures."""
    return next(index for index, other in enumerate(audit.rows) if other is row)


def row_data(row: Row) -> dict[str, Any]:
    """Give one candidate's record."""
    return {
        "label": row.label,
        "formula": row.candidate.name,
        "rule": row.candidate.rule_words,
        "steps_asked": "as given" if row.candidate.steps_words == "as given" else row.candidate.steps,
        "steps": row.steps,
        "error": limits(row.error),
        "bound": number(row.bound),
        "bound_source": row.bound_source,
        "two_qubit_gates": row.two_qubit_gates,
        "depth": row.depth,
        "rotations": row.rotations,
        "file_gates": None if row.gate_counts is None else asdict(row.gate_counts),
        "verdict": row.verdict,
        "rounding": number(row.rounding),
        "accidental": list(row.accidental),
        "note": row.note,
        "points": [point_data(point) for point in row.points],
        "trials": [trial_data(trial) for trial in row.trials],
    }


def point_data(point: PointError) -> dict[str, Any]:
    """Give one figure at one time."""
    return {
        "time": point.time,
        "name": point.name,
        "value": number(point.value),
        "reference": number(point.reference),
        "error": limits(point.error),
    }


def trial_data(trial: Trial) -> dict[str, Any]:
    """Give one step count that was run."""
    return {
        "steps": trial.steps,
        "error": limits(trial.error),
        "verdict": trial.verdict,
        "two_qubit_gates": trial.two_qubit_gates,
    }


def reference_data(audit: Audit) -> dict[str, Any]:
    """Give the reference: expectations and certificate."""
    reference = audit.reference
    return {
        "times": [float(time) for time in reference.times],
        "expectations": {name: numbers(values) for name, values in reference.expectations.items()},
        "expectation_bounds": {name: numbers(values) for name, values in reference.expectation_bounds.items()},
        "summary": words.certificate_line(audit),
        **certificate_data(reference.certificate, reference.times),
    }


def operator_data(operator: Operator) -> dict[str, Any]:
    """Give an operator as text, with a count and a digest of all of it; the text of a huge one is cut."""
    lines = words.operator_lines(operator)
    digest = hashlib.sha256("\n".join(lines).encode()).hexdigest()
    return {
        "qubits": operator.qubits,
        "terms": len(lines),
        "complete": len(lines) <= TERMS_IN_FULL,
        "text": lines[:TERMS_IN_FULL],
        "sha256": digest,
    }


def number(value: float | None) -> float | None:
    """Give a number that JSON can hold, or None."""
    return value if value is not None and math.isfinite(value) else None


def numbers(values: Iterable[float]) -> list[float | None]:
    """Give a series of numbers."""
    return [number(float(value)) for value in values]


def limits(error: tuple[float, float]) -> list[float | None]:
    """Give both ends of an interval."""
    return [number(error[0]), number(error[1])]


def build_facts() -> dict[str, str]:
    """Give versions and the machine as texts, from `trueturn.build_info`."""
    return {str(key): str(value) for key, value in build_info().items()}


def json_text(document: Mapping[str, Any]) -> str:
    """Write a document as JSON that any reader accepts."""
    return json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def csv_text(audit: Audit) -> str:
    """Write one line a candidate, with a heading."""
    return written([record(audit, row) for row in audit.rows], COLUMNS)


def record(audit: Audit, row: Row) -> dict[str, Any]:
    """Give one candidate's line of the table."""
    worst = words.worst(row)
    found = row_data(row)
    low, high = found["error"]
    return found | {
        "error_low": low,
        "error_high": high,
        "tolerance": audit.tolerance,
        "recommended": "yes" if row is audit.recommended else "no",
        "worst_figure": worst.name if worst else "",
        "worst_time": worst.time if worst else "",
        "accidental_steps": " ".join(map(str, row.accidental)),
    }


def written(records: Iterable[Mapping[str, Any]], columns: Sequence[str]) -> str:
    """Write records as lines of a CSV table with a heading; what does not exist stays empty."""
    page = io.StringIO()
    writer = csv.DictWriter(page, columns, lineterminator="\n")
    writer.writeheader()
    for line in records:
        writer.writerow({key: "" if line[key] is None else line[key] for key in columns})
    return page.getvalue()
