"""`trueturn bound`: proven steps for the candidates of a job, without a state."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

import trueturn as tt
from trueturn import cli
from trueturn.accuracy.job_bounds import job_bounds
from trueturn.audit.job import read_job
from trueturn.errors import JobError

CHAIN = """
[system]
model = "ising"
lattice = "chain"
sites = {sites}
zz = -1.0
x = 0.7
[target]
{target}
tolerance = {tolerance}
[[candidate]]
formula = "strang"
steps = 40
[[candidate]]
formula = "suzuki-4"
"""
STATE = 'quantity = "state"\ntimes = [0.5, 1.0]'


def written(tmp_path: Path, target: str = STATE, tolerance: float = 0.01, sites: int = 4, more: str = "") -> Path:
    path = tmp_path / "chain.toml"
    path.write_text(CHAIN.format(target=target, tolerance=tolerance, sites=sites) + more, encoding="utf-8")
    return path


def test_the_table_names_bound_steps_theorem_and_norms(tmp_path, capsys, monkeypatch) -> None:
    monkeypatch.setenv("COLUMNS", "100")
    assert cli.run(["bound", str(written(tmp_path))]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    for words in (
        "4 qubits, 7 terms",
        "steps proven",
        "on average",
        "Proposition 10",
        "norms: dense",
        "taken",
        "source: derived in docs",
    ):
        assert words in out
    assert max(map(len, out.splitlines())) <= 100


def test_proven_steps_are_least_and_fit_the_grid_of_the_times(tmp_path) -> None:
    task = read_job(written(tmp_path), start_required=False)
    for row, candidate in zip(job_bounds(task), task.candidates, strict=True):
        partition = candidate.partition(task.operator)
        least = tt.steps_by_bound(candidate.formula, partition, 1.0, 0.01, method="tightest")
        # Times 0.5 and 1 are both met by even counts only.
        assert row.proven_steps == least + least % 2
        assert row.random_steps is not None and row.random_steps <= row.proven_steps
        assert row.error == tt.bound(candidate.formula, partition, 1.0, row.steps, method="tightest").value


def test_observables_multiply_by_twice_their_norm(tmp_path) -> None:
    path = written(tmp_path, target="time = 1.0", more='[target.observables]\nfield = "0.5 X_0 + 0.5 X_1"\n')
    row = job_bounds(read_job(path, start_required=False))[0]
    # The norm is 1, padded outward by less than 1e-9.
    assert row.bound is not None and row.error == pytest.approx(2.0 * row.bound.value, rel=1e-8)
    assert row.random_steps is None


def test_json_is_one_object_with_every_bound(tmp_path, capsys) -> None:
    assert cli.run(["bound", str(written(tmp_path)), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["kind"] == "trueturn bounds" and document["qubits"] == 4
    strang, suzuki = document["rows"]
    assert strang["steps"] == 40 and strang["meets"] and suzuki["steps"] == suzuki["proven_steps"]
    assert strang["operator_bound"] in strang["alternatives"] and len(strang["alternatives"]) == 5
    assert strang["operator_bound"]["kind"] == "proven"


def test_what_is_not_proven_is_undecided_and_what_cannot_be_is_said(tmp_path, capsys) -> None:
    assert cli.run(["bound", str(written(tmp_path, tolerance=1e-16))]) == 4
    assert "no step count is proven to reach it" in capsys.readouterr().out


def test_other_commands_still_ask_for_a_start(tmp_path) -> None:
    with pytest.raises(JobError, match="start: missing"):
        read_job(written(tmp_path))


def test_a_hundred_qubits_need_no_state(tmp_path) -> None:
    rows = job_bounds(read_job(written(tmp_path, sites=100), start_required=False))
    assert all(row.proven_steps is not None for row in rows)
    assert rows[1].proven_steps < rows[0].proven_steps


@pytest.mark.parametrize(
    ("old", "new", "message"), [('"suzuki-4"', '"suzuky-4"', "did you mean suzuki-4"), ("x = 0.7", "", "x")]
)
def test_bad_input_is_status_2(tmp_path, capsys, old, new, message) -> None:
    path = written(tmp_path)
    path.write_text(path.read_text().replace(old, new))
    assert cli.run(["bound", str(path)]) == 2
    assert message in capsys.readouterr().err


def test_the_refused_tolerance_is_the_one_of_the_job(tmp_path) -> None:
    # The observable doubles the distance; the note names the tolerance that was asked for, not half of it.
    target = 'times = [1.0]\nobservables = { edge = "Z_0" }'
    rows = job_bounds(read_job(written(tmp_path, target, tolerance=1e-16), start_required=False))
    suzuki = next(row for row in rows if row.label.startswith("suzuki-4"))
    assert suzuki.proven_steps is None
    assert "reach it (1e-16)" in suzuki.note and "rounded to doubles" in suzuki.note


def test_plans_extrapolations_and_the_command_prove_the_same_count(tmp_path) -> None:
    task = read_job(written(tmp_path, 'quantity = "state"\ntimes = [1.0]'), start_required=False)
    proven = {row.label: row.proven_steps for row in job_bounds(task)}
    formulas = [candidate.formula for candidate in task.formula_candidates]
    start = tt.State.product("0+1-")
    planned = tt.plan(task.operator, start, 1.0, formulas, "commuting", 0.01, "state")
    assert {row.label: row.bound_steps for row in planned.rows} == proven
    assert all(row.overpays == proven[row.label] / row.steps for row in planned.rows)
    scaling = tt.step_scaling(
        lambda n: tt.Case(task.operator, 1.0, 0.01 * n, start), [1, 2, 4], formulas, quantity="state"
    )
    assert {f"{entry.formula}, commuting": entry.proven for entry in scaling.extrapolate(1)} == proven
    # Else the test could not tell: the published theorem alone proves less.
    strang = task.formula_candidates[0]
    published = tt.steps_by_bound("strang", strang.partition(task.operator), 1.0, 0.01)
    assert published > proven["strang, commuting"]
