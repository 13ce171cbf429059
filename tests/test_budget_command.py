"""`trueturn budget`: the section [device] of a job, the answer as text and as JSON, exit statuses."""

from __future__ import annotations

import json

import pytest

import trueturn as tt
from trueturn import cli
from trueturn.audit.job import built_in_job, read_job, template
from trueturn.device.job import job_budgets
from trueturn.errors import JobError

SMALL = """
[system]
model = "ising"
lattice = "chain"
sites = 5
zz = -1.0
x = 0.7
[start]
pattern = "0"
[target]
times = [0.5, 1.0]
tolerance = 0.05
{relative}
[target.observables]
edge = "Z_0"
bulk = "2.0 Z_1 Z_2"
[[candidate]]
formula = "strang"
steps = 10
[[candidate]]
formula = "strang"
steps = "least"
[[candidate]]
formula = "lie"
{device}
"""
ISING = tt.model.ising(tt.lattice.chain(5), zz=-1.0, x=0.7)
DEVICE = "[device]\ntwo_qubit_error = {rate}\nshots = {shots}"


@pytest.fixture
def job(tmp_path):
    def write(device, relative=""):
        path = tmp_path / "small.toml"
        path.write_text(SMALL.format(device=device, relative=relative), encoding="utf-8")
        return path

    return write


def test_the_answer_is_text_and_the_status_the_verdict(job, capsys):
    good, bad = DEVICE.format(rate=1e-6, shots=100_000), DEVICE.format(rate=0.01, shots=100_000)
    assert cli.run(["budget", str(job(good))]) == 0
    text = capsys.readouterr().out
    assert "edge\nBudget for" in text and "bulk\nBudget for" in text and "strang, commuting" in text
    assert max(map(len, text.splitlines())) <= 80
    assert cli.run(["budget", str(job(bad))]) == 1
    assert "No step count meets 0.05" in capsys.readouterr().out


def test_json_is_one_object_and_nothing_else(job, capsys):
    assert cli.run(["budget", str(job(DEVICE.format(rate=1e-6, shots=100_000))), "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert list(found["budgets"]) == ["edge", "bulk"]
    rows = found["budgets"]["bulk"]["rows"]
    assert sorted(row["label"] for row in rows) == ["lie, commuting", "strang, commuting"]  # each formula once
    assert found["budgets"]["edge"]["time"] == 1.0


def test_proven_errors_need_no_state(job, capsys, monkeypatch):
    from trueturn.audit.job_system import Start

    monkeypatch.setattr(Start, "state", lambda self: pytest.fail("a state was made"))
    path = job(DEVICE.format(rate=1e-7, shots=1_000_000))
    assert cli.run(["budget", str(path), "--errors", "proven", "--json"]) in (0, 1)
    rows = json.loads(capsys.readouterr().out)["budgets"]["edge"]["rows"]
    assert {row["algorithmic_kind"] for row in rows} == {"proven"}


def test_proven_errors_need_no_start_section(job, capsys):
    path = job(DEVICE.format(rate=1e-7, shots=1_000_000))
    path.write_text(path.read_text(encoding="utf-8").replace('[start]\npattern = "0"\n', ""), encoding="utf-8")
    assert cli.run(["budget", str(path), "--errors", "proven"]) in (0, 1)
    assert "by proven bound" in capsys.readouterr().out
    assert cli.run(["budget", str(path)]) == 2
    assert "start" in capsys.readouterr().err


def test_the_gates_are_those_of_the_device_in_the_job(job):
    text = DEVICE.format(rate=1e-6, shots=100_000)
    rows = {}
    for more in ('native = "cx"', 'native = "zz"', 'connectivity = "ring"'):
        found = job_budgets(read_job(job(f"{text}\n{more}")), "proven")["edge"]
        circuit = found.best.candidate.formula.rotations(found.best.candidate.partition(ISING), 1.0, found.best.steps)
        device = dict([more.replace('"', "").split(" = ")])
        assert found.best.two_qubit_gates == circuit.cost(**device).two_qubit_gates
        rows[more] = found
        assert "written for the device" in found.assumptions[1]
    assert "native zz" in rows['native = "zz"'].assumptions[1]


def test_a_relative_tolerance_is_taken_of_the_norm(job):
    path = job(DEVICE.format(rate=1e-6, shots=100_000), 'relative_to = "norm"')
    found = job_budgets(read_job(path))
    assert found["edge"].tolerance == pytest.approx(0.05) and found["bulk"].tolerance == pytest.approx(0.1)


def test_a_whole_section_is_read(job):
    device = read_job(job("[device]\ntwo_qubit_error = 0\nsynthesis_error = 1e-3\nconfidence = 0.9")).device
    assert device is not None
    assert (device.two_qubit_error, device.shots, device.synthesis_error, device.confidence) == (0.0, None, 1e-3, 0.9)
    assert read_job(job("")).device is None and built_in_job().device is None


def test_the_pattern_of_init_shows_every_key():
    text = template().replace("# [device]", "[device]")
    for key in ("two_qubit_error", "shots", "synthesis_error", "confidence"):
        assert f"# {key} = " in text


@pytest.mark.parametrize(
    ("device", "message"),
    [
        ("", r"device: missing; add a section \[device\]"),
        ("[device]\nshots = 10", r"device.two_qubit_error: missing"),
        ("[device]\ntwo_qubit_error = -0.1", r"device.two_qubit_error: no possible rate \(-0.1\)"),
        ("[device]\ntwo_qubit_error = 1", r"device.two_qubit_error: no possible rate"),
        ('[device]\ntwo_qubit_error = "a"', r"device.two_qubit_error: not a number but a text"),
        ("[device]\ntwo_qubit_error = 0.1\nshots = 0", r"device.shots: below 1 \(0\)"),
        ("[device]\ntwo_qubit_error = 0.1\nsynthesis_error = 0", r"device.synthesis_error: not above zero"),
        ("[device]\ntwo_qubit_error = 0.1\nconfidence = 1.5", r"device.confidence: not between 0 and 1"),
        ("[device]\ntwo_qbit_error = 0.1", r"device.two_qbit_error: unknown key; did you mean two_qubit_error\?"),
        ("device = 3", r"device: "),
    ],
)
def test_a_wrong_device_is_named_by_its_key(job, device, message):
    path = job(device)
    if device == "device = 3":
        path.write_text("device = 3\n" + SMALL.format(device="", relative=""), encoding="utf-8")
    with pytest.raises(JobError, match=message):
        job_budgets(read_job(path))


def test_a_job_about_states_has_nothing_to_weigh(job, tmp_path, capsys):
    text = SMALL.format(device=DEVICE.format(rate=1e-3, shots=10), relative='quantity = "state"')
    path = tmp_path / "state.toml"
    path.write_text(text.replace('[target.observables]\nedge = "Z_0"\nbulk = "2.0 Z_1 Z_2"\n', ""), encoding="utf-8")
    assert cli.run(["budget", str(path)]) == 2
    assert "target.observables: missing" in capsys.readouterr().err
