"""What `trueturn formulas` and the README say about formulas is what the data say."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

import trueturn as tt
from trueturn import cli, errors
from trueturn.audit.job import read_job
from trueturn.formulas.comparison import best_for, span
from trueturn.formulas.listing import document
from trueturn.formulas.table import BEGIN, END, markdown, replaced

README = Path(__file__).parent.parent / "README.md"
JOB = """
[system]
terms = "Z_0 Z_1 + 0.5 X_0 + 0.5 X_1"
[start]
product = "00"
[target]
time = 1.0
tolerance = 0.1
[target.observables]
edge = "Z_0"
[[candidate]]
formula = "strang"
[[candidate]]
formula = "suzuki-4"
rule = "single"
"""


@pytest.fixture
def job(tmp_path):
    path = tmp_path / "job.toml"
    path.write_text(JOB)
    return path


def test_the_readme_holds_the_table_of_the_data():
    text = README.read_text(encoding="utf-8")
    assert replaced(text) == text, "run: python -m trueturn.formulas.table README.md"


def test_the_table_has_a_row_for_each_formula():
    rows = markdown().splitlines()[2:]
    assert [row.split("`")[1] for row in rows] == list(tt.formulas(special=True))
    for row in rows:
        # eight bars hold seven cells; any other bar would begin a cell of its own unless escaped
        assert len(re.findall(r"(?<!\\)\|", row)) == 8, row


def test_the_table_replaces_what_stands_between_the_markers():
    assert replaced(f"a\n{BEGIN}\nold\n{END}\nb") == f"a\n{BEGIN}\n{markdown()}\n{END}\nb"
    with pytest.raises(errors.ArgumentError, match=r"^text: lacks the markers of the table; add the lines"):
        replaced("no markers")


@pytest.mark.parametrize("with_job", [False, True])
@pytest.mark.parametrize("width", [80, 120])
def test_the_list_fits_the_terminal_and_names_everything(width, with_job, job, capsys, monkeypatch):
    monkeypatch.setenv("COLUMNS", str(width))
    assert cli.run(["formulas", *([str(job)] if with_job else [])]) == 0
    out = capsys.readouterr().out
    assert max(map(len, out.splitlines())) <= width
    for name in tt.formulas(special=True):
        row = next(line for line in out.splitlines() if line.split()[:1] == [name])
        formula = tt.formula(name)
        assert row.split()[1:4] == [str(formula.order), str(len(formula.stages)), "yes" if formula.symmetric else "no"]
    for name, won in best_for([tt.formula(name) for name in tt.formulas()]).items():
        assert any(line.startswith(f"{name} ") and line.endswith(f"★ {span(won)}") for line in out.splitlines())
    plain = " ".join(out.split())
    for name in tt.formulas(special=True):
        assert tt.formula(name).source in plain
    assert "blanes-moan-nystrom-6 requires two parts A, B with [A, [A, [A, B]]] = 0; order 6 there." in plain


def test_the_list_as_json_carries_the_figures(capsys):
    assert cli.run(["formulas", "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert [entry["name"] for entry in document["formulas"]] == list(tt.formulas(special=True))
    for entry in document["formulas"]:
        formula = tt.formula(entry["name"])
        assert entry["leading_error"] == formula.leading_error
        assert entry["error_coefficient"] == formula.error_coefficient
        assert (entry["requires"], entry["special_order"]) == (formula.requires, formula.special_order)
        assert entry["rotations_per_step"] == {}


@pytest.mark.parametrize("width", [80, 120])
def test_with_a_job_the_list_counts_rotations_per_step_for_each_rule(width, job, capsys, monkeypatch):
    monkeypatch.setenv("COLUMNS", str(width))
    assert cli.run(["formulas", str(job)]) == 0
    out = capsys.readouterr().out
    assert max(map(len, out.splitlines())) <= width
    lines = out.splitlines()[2:]
    count = len(tt.formulas(special=True))
    rows = {lines[2 * k].split()[0]: lines[2 * k + 1].split(": ")[1] for k in range(count)}
    assert tuple(rows) == tt.formulas(special=True)
    # commuting: two parts, of one string and of two; single: three parts of one string each
    assert rows["lie"] == "commuting 3, single 3"
    assert rows["strang"] == "commuting 3, single 4"  # common practice: r (2m - 2) + 1 exponentials of m parts
    assert rows["suzuki-4"] == "commuting 15, single 20"
    assert rows["laskar-robutel-2"] == "commuting –, single –"


def test_with_a_job_json_counts_rotations_by_rule(job, capsys):
    assert cli.run(["formulas", str(job), "--json"]) == 0
    counts = {entry["name"]: entry["rotations_per_step"] for entry in json.loads(capsys.readouterr().out)["formulas"]}
    assert counts["strang"] == {"commuting": 3, "single": 4}
    assert counts["blanes-moan-nystrom-6"] == {"commuting": None, "single": None}


def test_a_job_takes_a_formula_made_on_demand_and_refuses_a_special_one_early(job):
    job.write_text(JOB.replace('"suzuki-4"', '"suzuki-10"'))
    assert read_job(job).candidates[1].formula.order == 10
    job.write_text(JOB.replace('"suzuki-4"', '"laskar-robutel-2"'))
    with pytest.raises(errors.JobError, match=r"candidate\[2\].rule: lacks what laskar-robutel-2 requires"):
        read_job(job)


def test_a_missing_job_is_refused(tmp_path, capsys):
    assert cli.run(["formulas", str(tmp_path / "absent.toml")]) == 2
    assert "no such file" in capsys.readouterr().err


def test_processed_formulas_are_listed_with_what_they_cost_once():
    (processed,) = document([tt.formula("strang")], {})["processed"]
    assert processed["name"] == "processed-4" and processed["order"] == 4
    assert (processed["stages"], processed["stages_once"]) == (6, 12)
