"""Diagnosis of circuits that come from OpenQASM files: written, spoilt, read back, with the Clifford that they end in."""

from __future__ import annotations

import json

import numpy as np
import pytest

import trueturn as tt
from circuit_mistakes import distance, unitary
from trueturn import cli

RING = tt.model.ising(tt.lattice.ring(6), zz=-1.0, x=np.linspace(0.5, 0.9, 6))
STRANG = tt.formula("strang").rotations(tt.Partition.of(RING, "commuting"), 1.0, 4)
HEAD = 'OPENQASM 3.0; include "stdgates.inc"; qubit[6] q; '
# No start: a diagnosis needs no state.
JOB = """
[system]
model = "ising"
lattice = "ring"
sites = 6
zz = -1.0
x = [0.5, 0.58, 0.66, 0.74, 0.82, 0.9]
[target]
time = 1.0
tolerance = 0.01
quantity = "state"
"""


@pytest.fixture
def job(tmp_path):
    path = tmp_path / "job.toml"
    path.write_text(JOB, encoding="utf-8")
    return path


@pytest.mark.parametrize("options", [{}, {"version": 2}, {"connectivity": "line"}, {"native": "zz"}], ids=str)
def test_written_circuits_match_when_they_are_read_back(job, options, capsys):
    path = job.parent / "good.qasm"
    STRANG.write_qasm(path, **options)
    assert cli.run(["diagnose", str(path), "--job", str(job)]) == 0
    assert "✓ MATCHES" in capsys.readouterr().out


def test_a_spoilt_file_is_accused_of_its_mistake(job, capsys):
    text = STRANG.qasm(3)
    path = job.parent / "bad.qasm"
    lines = text.splitlines()
    # The first turn of the body: its sign is lost.
    place = next(number for number, line in enumerate(lines) if line.strip().startswith("rz("))
    lines[place] = (
        lines[place].replace("rz(-", "rz(") if "rz(-" in lines[place] else lines[place].replace("rz(", "rz(-")
    )
    path.write_text("\n".join(lines), encoding="utf-8")
    assert cli.run(["diagnose", str(path), "--job", str(job), "--json"]) == 1
    document = json.loads(capsys.readouterr().out)
    assert document["matches"] is False and any(finding["mistake"] for finding in document["findings"])


@pytest.mark.parametrize(
    ("gates", "changes"),
    [("h q[2];", "Z_2, X_2"), ("cx q[2], q[3];", "X_2, Z_3"), ("s q[1]; cz q[1], q[4];", "X_1, X_4")],
)
def test_a_clifford_left_at_the_end_is_found_and_taken_out(gates, changes):
    circuit = STRANG + tt.read_qasm(HEAD + gates)
    assert circuit.frame.count > 0
    found = tt.diagnose(circuit, RING, 1.0)
    (mistake,) = found.mistakes
    assert found.matches is False and f"the Clifford gates changes {changes}" in mistake.evidence[0]
    # Matrices of 64 x 64, some hundred products: below 1e-12.
    assert distance(mistake.fixed, STRANG) < 1e-12


def test_moved_qubits_at_the_end_are_named_and_no_mistake():
    swapped = STRANG + tt.read_qasm(HEAD + "swap q[2], q[3];")
    assert swapped.frame.count == 0 and swapped.relabelling == (0, 1, 3, 2, 4, 5)
    found = tt.diagnose(swapped, RING, 1.0)
    assert found.matches is True and not found.mistakes
    assert any("2 on 3, 3 on 2" in line for finding in found.findings for line in finding.evidence)
    both = tt.diagnose(swapped + tt.read_qasm(HEAD + "h q[0];"), RING, 1.0)
    assert both.matches is False
    undone = swapped + tt.read_qasm(HEAD + "cx q[2], q[3]; cx q[3], q[2]; cx q[2], q[3];")
    assert undone.frame.count == 0 and undone.relabelling == tuple(range(6))
    assert tt.diagnose(undone, RING, 1.0).matches is True
    assert np.linalg.norm(unitary(undone) - unitary(STRANG), 2) < 1e-12
