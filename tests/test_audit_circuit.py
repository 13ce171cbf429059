"""A circuit from a file against a job: the verdict is that of the same formula as a candidate."""

from __future__ import annotations

import json

import pytest

import trueturn as tt
from trueturn import cli
from trueturn.errors import ArgumentError, AuditError

JOB = """
[system]
terms = "1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1"
[start]
pattern = "0"
[target]
times = [0.5, 1.0]
tolerance = {tolerance}
[target.observables]
edge = "Z_0"
"""
HEAD = 'OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit[2] q;\nbit[2] c;\n'
PAIR = tt.Operator("1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1", qubits=2)
Z0 = {"edge": tt.Operator("Z_0", qubits=2)}


def strang_text(steps, sign=1):
    """Half of the fields, the bond, half of the fields: invented by hand, not written by trueturn."""
    tau = 1.0 / steps
    field = f"rx({sign * tau / 2!r}) q;"
    bond = f"cx q[0], q[1]; rz({2 * tau!r}) q[1]; cx q[0], q[1];"
    return f"{HEAD}for int k in [1:{steps}] {{ {field} {bond} {field} }}\nc = measure q;\n"


@pytest.fixture
def files(tmp_path):
    (tmp_path / "job.toml").write_text(JOB.format(tolerance=0.01))
    (tmp_path / "strict.toml").write_text(JOB.format(tolerance=1e-9))
    (tmp_path / "good.qasm").write_text(strang_text(20))
    (tmp_path / "bad.qasm").write_text(strang_text(20, sign=2))
    return tmp_path


def test_the_circuit_errs_as_the_formula_that_it_is(files):
    circuit = tt.read_qasm(files / "good.qasm")
    parts = tt.Partition([tt.Operator("0.5 X_0 + 0.5 X_1", qubits=2), tt.Operator("1.0 Z_0 Z_1", qubits=2)])
    candidates = [tt.Candidate.from_rotations("good.qasm", circuit), tt.Candidate("strang", parts, steps=20)]
    start = tt.State.computational(0, 2)
    found = tt.audit(PAIR, start, 1.0, candidates, 0.01, observables=Z0)
    read, formula = found.rows
    assert (read.label, read.steps, read.verdict) == ("good.qasm", 1, "meets")
    # Both intervals hold the same true error.
    assert read.error[0] <= formula.error[1] and formula.error[0] <= read.error[1]
    assert read.bound is None and "no formula" in read.bound_source
    assert found.to_dict()["rows"][0]["steps_asked"] == "as given"


def test_the_command_judges_circuits_and_tells_what_was_left_out(files, capsys):
    assert cli.run(["audit", str(files / "good.qasm"), "--job", str(files / "job.toml"), "--json"]) == 0
    out, err = capsys.readouterr()
    document = json.loads(out)
    assert [row["label"] for row in document["rows"]] == ["good.qasm"]
    assert document["target"]["times"] == [1.0]
    assert "good.qasm: line 6: measurements at the end are left out" in err
    assert "only the last time of the job is judged, 1" in err
    assert cli.run(["audit", str(files / "bad.qasm"), "--job", str(files / "job.toml")]) == 1
    assert cli.run(["audit", str(files / "good.qasm"), "--job", str(files / "strict.toml")]) == 1
    both = [str(files / name) for name in ("bad.qasm", "good.qasm")]
    assert cli.run(["audit", *both, "--job", str(files / "job.toml"), "--into", str(files / "report")]) == 0
    assert (files / "report" / "report.html").is_file()


@pytest.mark.parametrize("quantity", ["", 'quantity = "operator"', 'quantity = "state"'])
def test_gates_of_a_file_are_those_that_stand_in_it(files, capsys, quantity):
    path = files / "job.toml"
    path.write_text(JOB.format(tolerance=f"0.01\n{quantity}"))
    if quantity:
        path.write_text(path.read_text().split("[target.observables]")[0])
    command = ["audit", str(files / "good.qasm"), "--job", str(path)]
    assert cli.run([*command, "--json"]) in (0, 1, 4)
    document = json.loads(capsys.readouterr().out)
    (row,) = document["rows"]
    # Each of 20 steps: rx on both qubits, cx, rz, cx, rx on both.
    assert (row["two_qubit_gates"], row["depth"], row["rotations"]) == (40, 40, 100)
    assert row["file_gates"] == {
        "two_qubit_gates": 40,
        "swaps": 0,
        "larger_gates": 0,
        "one_qubit_gates": 100,
        "rotations": 100,
        "clifford_rotations": 0,
        "t_rotations": 0,
        "two_qubit_depth": 40,
        "depth": 100,
    }
    assert row["note"] == "the file has 100 one-qubit gates, 100 rotations (0 Clifford, 0 of T's kind)"
    assert [trial["two_qubit_gates"] for trial in row["trials"]] == [40]
    assert any("Gates of circuits from files are those of the files" in one for one in document["assumptions"])
    cli.run([*command, "--into", str(files / "report")])
    out = capsys.readouterr().out
    assert "40" in next(line for line in out.splitlines() if line.startswith("good.qasm  "))
    assert "the file has 100 one-qubit gates" in (files / "report" / "report.html").read_text()


def test_a_file_with_a_native_gate_is_compared_by_its_own_gates(files):
    steps = "rx(0.025) q; rzz(0.1) q[0], q[1]; rx(0.025) q;"
    define = "gate rzz(t) a, b { cx a, b; rz(t) b; cx a, b; }\n"
    text = f"{HEAD}{define}for int k in [1:20] {{ {steps} }}\n"
    candidates = [
        tt.Candidate.from_rotations("native", tt.read_qasm(text)),
        tt.Candidate.from_rotations("by cx", tt.read_qasm(text, native_gates=[])),
        tt.Candidate.from_rotations("as rotations", tt.read_qasm(text).times(1)),
    ]
    found = tt.audit(PAIR, tt.State.computational(0, 2), 1.0, candidates, 0.1, observables=Z0)
    assert [row.two_qubit_gates for row in found.rows] == [20, 40, 40]
    assert [row.depth for row in found.rows] == [20, 40, 40]
    assert found.recommended is found.rows[0]
    assert found.rows[0].gate_counts.rotations == 100 and found.rows[2].gate_counts is None


def test_gates_on_more_than_two_qubits_leave_two_qubit_gates_unknown(files, capsys):
    (files / "large.qasm").write_text(
        strang_text(20).replace("qubit[2] q;", "qubit[2] q; qubit r; ctrl(2) @ x q[0], q[1], r;")
    )
    (files / "job.toml").write_text(JOB.format(tolerance=0.01).replace("0.5 X_1", "0.5 X_1 + 0.0001 X_2"))
    assert cli.run(["audit", str(files / "large.qasm"), "--job", str(files / "job.toml"), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    (row,) = document["rows"]
    assert row["two_qubit_gates"] is None and row["depth"] is None and row["file_gates"]["larger_gates"] == 1
    assert "1 gate on more than two qubits, so two-qubit gates are not known" in row["note"]
    assert "its gates are not known, so nothing is called cheapest" in document["reason"]


def test_a_file_on_fewer_qubits_is_judged_on_those_of_the_job(files, capsys):
    (files / "job.toml").write_text(
        JOB.format(tolerance=0.01).replace("1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1", "0.5 X_0 + 0.1 X_2")
    )
    (files / "one.qasm").write_text('OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit q;\nrx(1.0) q;\n')
    assert cli.run(["audit", str(files / "one.qasm"), "--job", str(files / "job.toml")]) == 0


def test_a_circuit_without_a_job_is_told_to_take_one(files, capsys):
    (files / "circuit.txt").write_text(strang_text(20))
    for name in ("good.qasm", "circuit.txt"):
        assert cli.run(["audit", str(files / name)]) == 2
        assert "circuits need a job: trueturn audit CIRCUIT.qasm --job JOB.toml" in capsys.readouterr().err


def test_preparation_is_named_on_the_command_line(files, capsys):
    text = strang_text(20).replace("for int", "x q[0];\nx q[0];\nfor int")
    (files / "prepared.qasm").write_text(text.replace("c = measure", "h q;\nc = measure"))
    arguments = ["audit", str(files / "prepared.qasm"), "--job", str(files / "job.toml")]
    assert cli.run([*arguments, "--prepare", "0:2", "--basis", "lines 8"]) == 0
    assert cli.run([*arguments, "--prepare", "one"]) == 2
    assert "prepare: no range of gates ('one')" in capsys.readouterr().err


def test_what_cannot_be_judged_is_refused(files, capsys):
    circuit = tt.Rotations([1], [0], [0.25], 3)
    candidate = tt.Candidate.from_rotations("wide", circuit)
    three = tt.Operator("X_0", qubits=3)
    start = tt.State.computational(0, 2)
    with pytest.raises(AuditError, match="candidates: the circuit 'wide' acts on 3 qubits, the Hamiltonian on 2"):
        tt.audit(PAIR, start, 1.0, [candidate], 0.01, observables=Z0)
    with pytest.raises(AuditError, match="candidates: the circuit 'wide' reaches one time"):
        tt.audit(three, tt.State.computational(0, 3), [0.5, 1.0], [candidate], 0.01, quantity="state")
    with pytest.raises(ArgumentError, match="circuit: no circuit"):
        tt.Candidate.from_rotations("a name", "good.qasm")
    with pytest.raises(ArgumentError, match="formula: neither a name"):
        tt.Candidate(candidate)
    assert cli.run(["audit", "--job", str(files / "job.toml")]) == 2
    assert cli.run(["audit", str(files / "good.qasm"), str(files / "bad.qasm")]) == 2
    (files / "broken.qasm").write_text(strang_text(2).replace("rz(", "rzz("))
    assert cli.run(["audit", str(files / "broken.qasm"), "--job", str(files / "job.toml")]) == 2
    assert "line 5, column" in capsys.readouterr().err
