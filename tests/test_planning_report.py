"""What a plan looks like outside: the table, the folder, the command, the section of the job file, an interrupt."""

from __future__ import annotations

import csv
import io
import json
import os
import re
import signal
import subprocess
import sys
from xml.etree import ElementTree

import pytest

import trueturn as tt
from trueturn import cli
from trueturn.audit.job import read_job, template
from trueturn.errors import JobError
from trueturn.planning.report import FILES, plain_table

JOB = """
[system]
model = "ising"
lattice = "chain"
sites = 4
zz = -1.0
x = 0.7
[start]
pattern = "0"
[target]
times = [0.5, 1.0]
tolerance = 0.01
[target.observables]
edge = "Z_0"
bulk = "Z_1 Z_2"
[plan]
formulas = ["lie", "strang", "suzuki-4"]
rules = ["bond", "axis"]
orderings = ["given", "improved"]
cost = ["two_qubit_gates", "t_count"]
synthesis_error = 0.002
"""


@pytest.fixture(scope="module")
def found():
    chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7, z=0.2)
    return tt.plan(
        chain,
        tt.State.product("0+1-"),
        [0.5, 1.0],
        ["lie", "strang", "suzuki-4"],
        ["bond", "commuting", "axis"],
        1e-2,
        observables={"<edge> & co": tt.Operator("Z_0", qubits=4)},
        orderings=["given", "improved"],
        cost=["two_qubit_gates", "t_count", lambda circuit: circuit.count / 2],
        title="A <small> plan",
    )


@pytest.fixture
def job(tmp_path):
    path = tmp_path / "small.toml"
    path.write_text(JOB, encoding="utf-8")
    return path


@pytest.mark.parametrize("width", [80, 100, 160])
def test_the_table_keeps_to_its_width_and_shows_every_row(found, width):
    text = plain_table(found, width)
    assert max(map(len, text.splitlines())) <= width
    for row in found.rows:
        assert f"\n{row.label}" in text or f"{row.label} = {row.same_as}" in text.replace("\n", " ")
    assert "✓ MEETS" in text and "Recommended: " in text and "Left out: suzuki-4, bond improved" in text
    assert re.search(r"Proven for every start: (lie|strang), \w+ with", text) and "set aside for the synthesis" in text


def test_the_wide_table_shows_all_costs(found):
    head = next(line for line in plain_table(found, 200).splitlines() if "steps" in line and "error" in line)
    assert re.split(r"\s{2,}", head.strip()) == [
        "steps",
        "error",
        "2-qubit gates",
        "T gates",
        "own cost",
        "depth",
        "rotations",
        "seconds",
        "proven steps",
        "verdict",
    ]


def test_the_folder_holds_the_same_facts_three_times(found, tmp_path):
    folder = found.write(tmp_path / "plan")
    assert sorted(path.name for path in folder.iterdir()) == sorted(FILES)
    document = json.loads((folder / "plan.json").read_text())
    lines = list(csv.DictReader(io.StringIO((folder / "plan.csv").read_text())))
    assert document["kind"] == "trueturn plan" and len(document["rows"]) == len(lines) == len(found.rows)
    for rank, (row, record, line) in enumerate(zip(found.rows, document["rows"], lines, strict=True), start=1):
        assert record["rank"] == int(line["rank"]) == rank
        assert record["label"] == line["label"] == row.label and record["rule"] == line["rule"] == row.rule
        assert record["steps"] == int(line["steps"]) == row.steps
        assert tuple(record["error"]) == row.error == (float(line["error_low"]), float(line["error_high"]))
        assert record["costs"] == dict(row.costs) and float(line["own cost"]) == row.costs["own cost"]
        assert record["bound_steps"] == row.bound_steps and line["efficient"] == ("yes" if row.efficient else "no")
        assert line["same_as"] == row.same_as
    assert [point["steps"] for point in document["front"]] == [point.steps for point in found.front]
    assert document["allowed"] == found.allowed == 1e-2 - 1e-3 and document["left_out"] == dict(found.left_out)
    assert found.write(folder) == folder  # a plan folder is replaced


def test_the_page_is_well_formed_and_holds_nothing_from_elsewhere(found, tmp_path):
    text = (found.write(tmp_path / "plan") / "plan.html").read_text(encoding="utf-8")
    body = text[text.index("<body>") : text.index("</body>") + 7]
    tree = ElementTree.fromstring(re.sub(r"&(?!amp;|lt;|gt;|quot;|#)", "&amp;", body))
    assert len(tree.findall(".//{http://www.w3.org/2000/svg}svg")) == 2
    assert "A &lt;small&gt; plan" in text and "&lt;edge&gt; &amp; co" in text
    assert not re.search(r'(src|href)="(?!#)', text) and "<script" not in text
    identifiers = re.findall(r'\bid="([^"]+)"', text)
    assert len(identifiers) == len(set(identifiers))
    for row in found.rows:
        assert row.label.split(", ")[0] in text
    assert "chosen" in text and "efficient" in text


def test_a_folder_of_something_else_is_refused(found, tmp_path):
    (tmp_path / "audit.json").write_text("{}")
    with pytest.raises(tt.errors.ArgumentError, match=r"^folder: exists and is not a plan folder"):
        found.write(tmp_path)


def test_the_command_prints_a_table_and_writes_a_folder(job, tmp_path, capsys):
    assert cli.run(["plan", str(job), "--into", str(tmp_path / "out")]) == 0
    out, err = capsys.readouterr()
    assert "✓ MEETS" in out and out.endswith(f"Report: {tmp_path / 'out' / 'plan.html'}\n") and err == ""
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == sorted(FILES)


def test_the_command_prints_one_json_object(job, capsys):
    assert cli.run(["plan", str(job), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["kind"] == "trueturn plan" and document["cost"] == ["two_qubit_gates", "t_count"]
    assert document["synthesis_error"] == 0.002 and document["rows"][0]["verdict"] == "meets"


def test_the_status_is_the_verdict(job):
    job.write_text(JOB.replace('"lie", "strang", "suzuki-4"', '"lie"') + "[run]\nmost_steps = 4\n")
    assert cli.run(["plan", str(job)]) == 1


def test_a_refused_folder_is_refused_before_the_run(job, tmp_path, capsys):
    (tmp_path / "thesis.tex").write_text("precious")
    assert cli.run(["plan", str(job), "--into", str(tmp_path)]) == 2
    assert "exists and is not a plan folder" in capsys.readouterr().err


def test_without_a_section_the_candidates_are_planned(job):
    text = JOB[: JOB.index("[plan]")]
    job.write_text(
        text + '[[candidate]]\nformula = "strang"\nrule = "axis"\nsteps = 3\n[[candidate]]\nformula = "lie"\n'
    )
    found = read_job(job).plan()
    assert {row.label for row in found.rows} == {"strang, axis", "strang, commuting", "lie, axis", "lie, commuting"}


def test_all_formulas_are_planned_where_the_section_names_none(job):
    job.write_text(JOB[: JOB.index("[plan]")] + '[plan]\nrules = "axis"\n')
    task = read_job(job, candidates_required=False)
    assert task.planned.formulas is None and task.planned.rules == ("axis",)


def test_own_formulas_come_from_the_file_of_the_section(job):
    (job.parent / "mine.toml").write_text('[[formula]]\nname = "mine"\nweights = ["0.5", "0.5"]\n')
    job.write_text(JOB[: JOB.index("[plan]")] + '[plan]\nformula_file = "mine.toml"\nformulas = "mine"\n')
    task = read_job(job, candidates_required=False)
    assert [formula.name for formula in task.planned.formulas] == ["mine"]


@pytest.mark.parametrize(
    ("section", "message"),
    [
        ("formulas = []", r"^plan\.formulas: empty"),
        ('formulas = ["stang"]', r"^plan\.formulas: unknown \('stang'\); did you mean strang\?"),
        ("formulas = [3]", r"^plan\.formulas: entry 0 is not a text"),
        ('rules = ["axs"]', r"^plan\.rules: unknown \('axs'\); did you mean axis\?"),
        ('orderings = ["reverse"]', r"^plan\.orderings: unknown \('reverse'\); did you mean reversed\?"),
        ('cost = ["gates"]', r"^plan\.cost: unknown \('gates'\)"),
        ("synthesis_error = 0.01", r"^plan\.synthesis_error: takes the whole tolerance \(0\.01\)"),
        ("synthesis_error = -1", r"^plan\.synthesis_error: not above zero"),
        ('formulae = ["lie"]', r"^plan\.formulae: unknown key; did you mean formulas\?"),
        ('formula_file = "mine.toml"', r"^plan\.formulas: missing; name the formulas of formula_file"),
    ],
)
def test_a_wrong_section_is_refused_by_its_key(job, section, message):
    job.write_text(JOB[: JOB.index("[plan]")] + "[plan]\n" + section + "\n")
    with pytest.raises(JobError, match=message):
        read_job(job, candidates_required=False)


def test_a_job_with_nothing_to_plan_is_told_so(job):
    job.write_text(JOB[: JOB.index("[plan]")])
    with pytest.raises(JobError, match=r"^plan: missing; add a section \[plan\]"):
        read_job(job, candidates_required=False).plan()


def test_the_section_of_the_template_is_a_valid_one(job):
    commented = template()[template().index("# [plan]") :].partition("\n\n")[0]
    lines = [line.removeprefix("# ") for line in commented.splitlines() if "formula_file" not in line]
    job.write_text(JOB[: JOB.index("[plan]")] + "\n".join(lines) + "\n")
    assert read_job(job, candidates_required=False).planned.rules == ("commuting", "axis")


CHILD = """
import contextlib, sys
from trueturn import cli

@contextlib.contextmanager
def told():
    yield lambda stage, done, total: print(stage, file=sys.stderr, flush=True)

cli.progress_bar = told
sys.exit(cli.run(sys.argv[1:]))
"""


def test_ctrl_c_prints_the_best_so_far_and_exits_with_130(tmp_path):
    job = tmp_path / "job.toml"
    # Suzuki takes a moment; Lie, with some million steps, would take minutes.
    job.write_text(
        '[system]\nmodel = "heisenberg"\nlattice = "ring"\nsites = 10\ncoupling = 1.0\n'
        '[start]\npattern = "01"\n[target]\ntime = 2.0\ntolerance = 1e-6\nquantity = "state"\n'
        '[plan]\nformulas = ["suzuki-4", "lie", "strang"]\n[run]\nmost_steps = 100000000\n'
    )
    child = subprocess.Popen(
        [sys.executable, "-c", CHILD, "plan", str(job), "--json", "--into", str(tmp_path / "out")],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env=os.environ,
    )
    # The first long run of Lie is under way when it is announced; the interrupt ends it.
    while not re.match(r"lie, commuting: \d{5,} steps", line := child.stderr.readline()):
        assert line, "the plan ended before it could be interrupted"
    child.send_signal(signal.SIGINT)
    out, err = child.communicate(timeout=60)
    assert child.returncode == 130 and "Traceback" not in err and err.endswith("trueturn: interrupted\n")
    document = json.loads(out)
    assert document["interrupted"] is True and document["unsearched"] == ["strang, commuting"]
    rows = {row["formula"]: row for row in document["rows"]}
    assert rows["suzuki-4"]["verified"] is True and rows["suzuki-4"]["verdict"] == "meets"
    assert rows["lie"]["verified"] is False and "interrupted" in rows["lie"]["note"]
    assert document["rows"][0]["formula"] == "suzuki-4"
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == sorted(FILES)
