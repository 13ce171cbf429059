"""Audits of the operator error: every start at once, by matrices or by power iteration."""

from __future__ import annotations

import importlib
import json

import numpy as np
import pytest

import circuits
import oracle
import trueturn as tt
from trueturn import cli, errors
from trueturn.audit import operator_measure
from trueturn.audit.job import read_job

CHAIN = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7, z=0.3)
CANDIDATES = [tt.Candidate("lie", "axis", 8), tt.Candidate("strang", "axis", 8)]


def exact(formula, time, steps):
    partition = tt.Partition.of(CHAIN, "axis")
    return np.linalg.norm(
        circuits.plain(tt.formula(formula), partition, time, steps) - oracle.evolution(CHAIN, time), 2
    )


@pytest.mark.parametrize("readout", ["along", "separate"])
@pytest.mark.parametrize("route", ["dense", "confidence"])
def test_every_interval_holds_the_norm_of_dense_matrices(monkeypatch, readout, route):
    if route == "confidence":
        monkeypatch.setattr(operator_measure, "DENSE_QUBITS", 3)
        monkeypatch.setattr(importlib.import_module("trueturn.audit.run"), "DENSE_QUBITS", 3)
    found = tt.audit(CHAIN, None, [0.5, 1.0], CANDIDATES, 1e-2, "operator", readout=readout)
    for row in found.rows:
        name = row.candidate.formula.name
        for point in row.points:
            steps = round(8 * point.time) if readout == "along" else 8
            truth = exact(name, point.time, steps)
            # the oracle rounds like some hundred products of 16 x 16 matrices
            assert point.error[0] - 1e-12 <= truth <= point.error[1] + 1e-12
            assert point.name == "operator" and np.isnan(point.value)
            if route == "dense":
                assert point.error[1] - point.error[0] < 1e-10
        assert row.error == (max(p.error[0] for p in row.points), max(p.error[1] for p in row.points))
        assert row.bound >= row.error[0]
    sentence = "whole matrices" if route == "dense" else "with a probability of at least 0.999"
    assert sentence in found.measured[0]
    assert found.reference.certificate.method == ("dense" if route == "dense" else "chebyshev")


def test_least_steps_are_those_of_a_plain_loop():
    found = tt.audit(CHAIN, None, 1.0, [tt.Candidate("strang", "axis")], 1e-3, "operator")
    least = next(steps for steps in range(1, 200) if exact("strang", 1.0, steps) <= 1e-3)
    assert found.rows[0].steps == least and found.verdict == "meets"
    assert "operator error within 0.001" in repr(found)
    assert found.start == "every state" and any("every start state" in text for text in found.cautions)


def test_every_start_errs_by_no_more():
    found = tt.audit(CHAIN, None, 1.0, CANDIDATES, 1e-2, "operator")
    for seed in range(5):
        one = tt.audit(CHAIN, tt.State.random(4, seed), 1.0, CANDIDATES, 1e-2, "state")
        for all_starts, row in zip(found.rows, one.rows, strict=True):
            assert row.error[0] <= all_starts.error[1]


def test_a_given_start_does_not_matter():
    found = [tt.audit(CHAIN, s, 1.0, CANDIDATES, 1e-2, "operator") for s in (None, tt.State.product("01+-"))]
    assert found[0].rows[0].error == found[1].rows[0].error
    assert found[1].start == "every state"


def test_a_plan_searches_the_operator_error():
    found = tt.plan(CHAIN, None, 1.0, ["lie", "strang"], "axis", 1e-2, "operator")
    strang = next(row for row in found.rows if row.label.startswith("strang"))
    assert strang.steps == next(steps for steps in range(1, 100) if exact("strang", 1.0, steps) <= 1e-2)


def test_the_report_of_an_operator_audit_is_written(tmp_path):
    folder = tt.audit(CHAIN, None, [0.5, 1.0], CANDIDATES, 1e-2, "operator").write(tmp_path / "out")
    page = (folder / "report.html").read_text(encoding="utf-8")
    assert "operator error within 0.01" in page and "Operator error at the requested times" in page
    data = json.loads((folder / "audit.json").read_text(encoding="utf-8"))
    assert data["target"]["quantity"] == "operator" and data["start"] == "every state"
    assert data["rows"][0]["points"][0]["name"] == "operator" and data["rows"][0]["points"][0]["value"] is None


JOB = """
[system]
terms = "-1.0 Z_0 Z_1 - 0.7 X_0 - 0.7 X_1"
{start}
[target]
time = 1.0
tolerance = 1e-2
quantity = "operator"
{more}
[[candidate]]
formula = "strang"
steps = "least"
"""


def test_a_job_for_every_start_needs_no_start(tmp_path, capsys):
    path = tmp_path / "job.toml"
    path.write_text(JOB.format(start="", more=""), encoding="utf-8")
    assert cli.run(["audit", str(path), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["target"]["quantity"] == "operator"
    assert read_job(path).start is None
    assert cli.run(["reference", str(path)]) == 2
    assert "start: missing; a state is evolved here" in capsys.readouterr().err


def test_a_job_may_have_a_start_and_its_mistakes_are_told(tmp_path):
    path = tmp_path / "job.toml"
    path.write_text(JOB.format(start='[start]\nproduct = "00"', more=""), encoding="utf-8")
    assert read_job(path).start is not None
    path.write_text(JOB.format(start="", more='relative_to = "norm"'), encoding="utf-8")
    with pytest.raises(errors.JobError, match=r"^target\.relative_to: has no meaning for circuits, whose norm is 1"):
        read_job(path)
    path.write_text(
        JOB.format(start="", more="").replace('quantity = "operator"', 'quantity = "state"'), encoding="utf-8"
    )
    with pytest.raises(errors.JobError, match=r'^start: missing; add a section \[start\], or quantity = "operator"'):
        read_job(path)


BAD = {
    "no state": (
        {"quantity": "state"},
        errors.ArgumentError,
        r"^state: missing \(None\) where quantity='state'; give a start, or quantity='operator'",
    ),
    "relative": (
        {"quantity": "operator", "relative_to": "norm"},
        errors.AuditError,
        r"^relative_to: an operator error has no norm to divide by \(quantity='operator'\)",
    ),
    "state qubits": (
        {"quantity": "operator", "state": tt.State.product("0")},
        errors.StateShapeError,
        "^operator: acts on 4 qubits, the state on 1",
    ),
    "operator": ({"quantity": "operator", "operator": "X_0"}, errors.OperatorError, "^operator: is not an Operator"),
    "tolerance": (
        {"quantity": "operator", "tolerance": 1e-15},
        errors.ToleranceError,
        "^tolerance: cannot be judged in double precision",
    ),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_refused_by_name(case):
    changes, kind, message = BAD[case]
    arguments = {"operator": CHAIN, "state": None, "times": 1.0, "candidates": CANDIDATES, "tolerance": 1e-2} | changes
    with pytest.raises(kind, match=message):
        tt.audit(**arguments)


@pytest.mark.heavy
def test_a_ring_of_twelve_is_audited_by_power_iteration():
    ring = tt.model.heisenberg(tt.lattice.ring(12), 1.0, z=list(np.linspace(-0.8, 0.9, 12)))
    found = tt.audit(ring, None, 1.0, [tt.Candidate("strang", "bond", 40)], 1e-2, "operator")
    low, high = found.rows[0].error
    assert 0 < low < high < 1.4 * low  # (4095 / 0.001)^(1/48) = 1.37
    assert low <= found.rows[0].bound
