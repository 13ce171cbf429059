"""`trueturn cost` and `trueturn export`, and the keys of [device] that they read."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

import qasm_gates
import trueturn as tt
from trueturn import cli
from trueturn.audit.job import parse_job
from trueturn.errors import JobError
from trueturn.export.hardware import Hardware

JOB = """
[system]
model = "heisenberg"
lattice = "ring"
sites = 4
coupling = 1.0
[start]
pattern = "01"
[target]
times = [0.5, 1.0]
tolerance = 0.01
{readout}
[target.observables]
edge = "Z_0"
[[candidate]]
formula = "lie"
steps = 4
[[candidate]]
formula = "strang"
rule = "bond"
steps = {steps}
[[candidate]]
formula = "strang"
rule = "axis"
steps = 2
[device]
{device}
[run]
title = "Ring (invented)"
"""


def text(steps="2", readout="", device="two_qubit_error = 1e-3"):
    return JOB.format(steps=steps, readout=readout, device=device)


@pytest.fixture
def write(tmp_path):
    def write(**changes):
        path = tmp_path / "job.toml"
        path.write_text(text(**changes), encoding="utf-8")
        return path

    return write


def strang(times, steps):
    ring = tt.model.heisenberg(tt.lattice.ring(4), coupling=1.0)
    return tt.formula("strang").rotations(tt.Partition.of(ring, "bond"), times, steps)


def test_costs_are_printed_for_each_candidate(write, capsys):
    assert cli.run(["cost", str(write())]) == 0
    out = capsys.readouterr().out
    assert [line.split("  ")[0] for line in out.splitlines()[1:4]] == ["lie, commuting", "strang, bond", "strang, axis"]
    assert "independently" in out


def test_costs_as_json_are_those_of_the_circuits(write, capsys):
    assert cli.run(["cost", str(write()), "--json", "--steps", "6"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert (document["kind"], document["schema"], document["title"]) == ("trueturn cost", 1, "Ring (invented)")
    row = document["rows"][1]
    expected = (strang(0.5, 3) + strang(0.5, 3)).cost(two_qubit_error=1e-3)
    assert row["name"] == "strang, bond"
    assert row["two_qubit_gates"] == expected.two_qubit_gates
    assert row["success"] == expected.success
    assert len(document["assumptions"]) == 2


@pytest.mark.parametrize("name", ["strang, bond", "2"])
def test_a_candidate_is_exported_as_the_audit_runs_it(write, tmp_path, capsys, name):
    into = tmp_path / "out.qasm"
    assert cli.run(["export", str(write()), "--candidate", name, "--into", str(into)]) == 0
    written = into.read_text(encoding="utf-8")
    circuit = strang(0.5, 1) + strang(0.5, 1)
    assert written.splitlines()[3:5] == [
        "// Ring (invented)",
        f"// Formula strang, bond; 2 steps to time 1.0; source: {tt.formula('strang').source}",
    ]
    assert qasm_gates.statements(written) == qasm_gates.statements(circuit.qasm())
    assert f"{circuit.cost().two_qubit_gates} two-qubit gates" in capsys.readouterr().out


def test_readouts_apart_export_the_circuit_of_the_last_time(write, tmp_path, capsys):
    into = tmp_path / "out.qasm"
    job = write(readout='readout = "separate"')
    arguments = ["export", str(job), "--candidate", "2", "--into", str(into), "--qasm", "2", "--steps", "5", "--json"]
    assert cli.run(arguments) == 0
    assert qasm_gates.statements(into.read_text(encoding="utf-8")) == qasm_gates.statements(strang(1.0, 5).qasm(2))
    document = json.loads(capsys.readouterr().out)
    assert document["kind"] == "trueturn export"
    assert document["two_qubit_gates"] == strang(1.0, 5).cost().two_qubit_gates


def test_the_device_of_the_job_is_routed_for(write, tmp_path, capsys):
    into = tmp_path / "out.qasm"
    job = write(device='connectivity = [[0, 1], [1, 2], [2, 3], [3, 4]]\nnative = "cz"\nlayout = [1, 2, 3, 4]')
    assert cli.run(["export", str(job), "--candidate", "lie", "--into", str(into)]) == 0
    gates = qasm_gates.statements(into.read_text(encoding="utf-8"))[3]
    assert {name for name, _, places in gates if len(places) == 2} <= {"cz", "swap"}
    assert all(abs(places[0] - places[1]) == 1 for _, _, places in gates if len(places) == 2)


def test_every_key_of_the_device_reaches_the_hardware():
    device = """
    ladder = "hub"
    order = "z-first"
    native = "zz"
    routing = "bridges"
    join_pairs = false
    connectivity = "grid"
    rows = 2
    columns = 3
    layout = [5, 4, 3, 2]
    two_qubit_error = 0.01
    one_qubit_error = 0.001
    readout_error = 0.02
    synthesis_error = 1e-5
    """
    job = parse_job(text(device=device), None, True)
    assert job.device.hardware == Hardware(
        ladder="hub",
        order="z-first",
        native="zz",
        routing="bridges",
        join_pairs=False,
        connectivity=tt.lattice.square(2, 3),
        layout=[5, 4, 3, 2],
        two_qubit_error=0.01,
        one_qubit_error=0.001,
        readout_error=0.02,
        synthesis_error=1e-5,
    )
    assert job.device.two_qubit_error == 0.01


@pytest.mark.parametrize(
    ("device", "message"),
    [
        ('ladder = "hubb"', r"device.ladder: unknown \('hubb'\); did you mean 'hub'\?"),
        ("native = 3", r"device.native: unknown \(3\)"),
        ("conectivity = 3", r"device.conectivity: unknown key; did you mean connectivity\?"),
        ("connectivity = [[0, 1], [2, 3]]", r"device.connectivity: disconnected"),
        ("connectivity = [[0, 1]]", r"device.connectivity: has 2 qubits, the circuit 4"),
        ('connectivity = "grid"\nrows = 1\ncolumns = 2', r"device.connectivity: has 2 qubits, the circuit 4"),
        ('connectivity = "grid"\nrows = 2', r"device.rows: goes with a grid"),
        ('connectivity = "line"\nrows = 2\ncolumns = 2', r"device.rows: goes with a grid"),
        ("layout = [0, 1]", r"device.layout: has 2 entries for 4 qubits"),
        ('layout = "serach"', r"device.layout: unknown \('serach'\); did you mean 'search'"),
        ("one_qubit_error = 2", r"device.one_qubit_error: no probability below 1"),
        ('readout_error = "x"', r"device.readout_error: not a number but a text"),
    ],
)
def test_bad_keys_are_named(device, message):
    with pytest.raises(JobError, match=message):
        parse_job(text(device=device), None, True)


def test_candidates_without_a_step_count_are_told_and_the_others_counted(write, capsys):
    path = write(steps='"least"')
    assert cli.run(["cost", str(path)]) == 0
    lines = capsys.readouterr().out.splitlines()[1:4]
    assert [line.split("  ")[0] for line in lines] == ["lie, commuting", "strang, bond", "strang, axis"]
    assert (
        lines[1].endswith("  steps not known (least): give --steps N, or --search to find them")
        and "known" not in lines[0] + lines[2]
    )
    assert cli.run(["cost", str(path), "--json"]) == 0
    rows = json.loads(capsys.readouterr().out)["rows"]
    assert rows[1] == {
        "name": "strang, bond",
        "note": "steps not known (least): give --steps N, or --search to find them",
    }
    assert rows[0]["two_qubit_gates"] > 0
    path.write_text(path.read_text().replace("steps = 4", 'steps = "least"').replace("steps = 2", 'steps = "least"'))
    assert cli.run(["cost", str(path)]) == 2
    message = (
        "candidate[1].steps: not known before an audit (least); give --steps N, or --search to find them as an audit"
    )
    assert message in capsys.readouterr().err
    assert cli.run(["cost", str(path), "--steps", "4"]) == 0


def test_the_job_of_init_is_counted(tmp_path, capsys):
    assert cli.run(["init", str(tmp_path / "job.toml")]) == 0
    assert cli.run(["cost", str(tmp_path / "job.toml")]) == 0
    out = capsys.readouterr().out
    assert "two-qubit gates" in out and "steps not known (least): give --steps N, or --search to find them" in out


@pytest.mark.parametrize(
    ("arguments", "changes", "message"),
    [
        (["cost", "--steps", "3"], {}, "steps: 3 steps to time 1 do not meet every requested time"),
        (
            ["export", "--candidate", "lye, commuting"],
            {},
            "--candidate: unknown (lye, commuting); did you mean 'lie, commu",
        ),
        (
            ["export", "--candidate", "strang"],
            {},
            "--candidate: several have this formula (strang); give one of: 1 (lie",
        ),
        (["export"], {}, "--candidate: missing; give one of: 1 (lie, commuting); 2 (strang, bond); 3"),
        (["export", "--candidate", "9"], {}, "--candidate: unknown (9)"),
    ],
)
def test_what_cannot_be_written_is_refused(write, tmp_path, capsys, arguments, changes, message):
    into = ["--into", str(tmp_path / "out.qasm")] if arguments[0] == "export" else []
    assert cli.run([arguments[0], str(write(**changes)), *arguments[1:], *into]) == 2
    assert message in capsys.readouterr().err
    assert [entry.name for entry in tmp_path.iterdir()] == ["job.toml"]


def test_the_page_shows_what_its_example_prints(tmp_path, monkeypatch, capsys):
    page = (Path(__file__).parent.parent / "docs" / "circuits-out.md").read_text(encoding="utf-8")
    code, printed = re.search(r"```python\n(.*?)```\n```\n(.*?)```", page, re.DOTALL).groups()
    monkeypatch.chdir(tmp_path)
    exec(compile(code, "circuits-out.md", "exec"), {})
    assert capsys.readouterr().out == printed
