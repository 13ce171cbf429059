"""OpenQASM files: the unitary, the rotations, routing, the file itself."""

from __future__ import annotations

import os
import re
import subprocess
import sys

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
import qasm_gates
import trueturn as tt
from strategies import circuits, framed, gate_options, pair_circuits
from trueturn.errors import ArgumentError, RotationError

UNIT = 2.0**-53


def dense(circuit):
    matrix = np.exp(1j * (circuit.phase + circuit.frame.phase)) * np.eye(2**circuit.qubits, dtype=complex)
    for one in (circuit, circuit.frame):
        for x, z, angle in zip(one.x_masks, one.z_masks, one.angles, strict=True):
            matrix = oracle.rotation(int(x), int(z), angle, circuit.qubits) @ matrix
    index = np.arange(2**circuit.qubits)
    moved = sum((index >> qubit & 1) << target for qubit, target in enumerate(circuit.relabelling))
    done = np.empty_like(matrix)
    done[moved] = matrix
    return done


def tolerance(circuit, gates):
    """Each gate, and each rotation of the oracle, errs by at most 8 u in any entry of a 2-norm column; a phase φ, summed in
    another order, by u times the sum of its parts."""
    parts = abs(circuit.phase) + float(np.abs(circuit.angles).sum())
    return UNIT * (8 * (gates + circuit.count + circuit.frame.count) + 4 * parts + 8)


def assert_same(text, circuit, phase_kept):
    made, wanted = qasm_gates.unitary(text), dense(circuit)
    if not phase_kept:
        overlap = np.vdot(made, wanted)
        made = made * overlap / abs(overlap)
    allowed = tolerance(circuit, len(qasm_gates.statements(text)[3]))
    assert np.abs(made - wanted).max() <= allowed


@given(st.one_of(circuits(max_qubits=5), pair_circuits()), gate_options)
def test_the_unitary_is_that_of_the_circuit_phase_included(circuit, device):
    assert_same(circuit.qasm(3, **device), circuit, phase_kept=True)


@given(st.one_of(circuits(max_qubits=4), pair_circuits()), gate_options)
def test_version_2_gives_the_unitary_up_to_its_phase(circuit, device):
    assert_same(circuit.qasm(2, **device), circuit, phase_kept=False)


@given(framed(st.one_of(circuits(max_qubits=4, max_count=5), pair_circuits())), gate_options)
def test_a_frame_is_written_as_clifford_gates_and_swaps(circuit, device):
    text = circuit.qasm(3, **device)
    assert_same(text, circuit, phase_kept=True)
    assert_same(circuit.qasm(2, **device), circuit, phase_kept=False)
    assert sum(angle is not None for _, angle, _ in qasm_gates.statements(text)[3]) <= circuit.count
    assert circuit.cost(**device).rotations <= circuit.count


def test_eight_qubits_with_long_strings_agree_too():
    generator = np.random.default_rng(8)
    masks = generator.integers(0, 256, size=(2, 20))
    circuit = tt.Rotations(masks[0].tolist(), masks[1].tolist(), generator.normal(size=20), 8, 0.7)
    for ladder in ("staircase", "balanced", "hub"):
        assert_same(circuit.qasm(ladder=ladder), circuit, phase_kept=True)
        assert_same(circuit.qasm(ladder=ladder, connectivity="line", routing="bridges"), circuit, phase_kept=True)


@given(st.one_of(circuits(max_qubits=3), pair_circuits(max_qubits=3)), gate_options)
def test_rotations_read_back_in_order_with_their_very_angles(circuit, device):
    found, clifford = qasm_gates.rotations(circuit.qasm(**device))
    listed = zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True)
    assert found == [(int(x), int(z), angle) for x, z, angle in listed if x or z]
    assert np.abs(clifford - np.eye(2**circuit.qubits)).max() <= 100 * UNIT * (10 + text_gates(circuit, device))


def text_gates(circuit, device):
    return len(qasm_gates.statements(circuit.qasm(**device))[3])


@st.composite
def devices(draw, qubits):
    """A connected graph of up to two spare qubits, with a layout."""
    count = qubits + draw(st.integers(0, 2))
    edges = [(draw(st.integers(0, k - 1)), k) for k in range(1, count)]
    pairs = st.tuples(st.integers(0, count - 1), st.integers(0, count - 1)).filter(lambda pair: pair[0] != pair[1])
    edges += draw(st.lists(pairs, max_size=3))
    order = draw(st.permutations(range(count)))
    return {
        "connectivity": edges,
        "layout": order[:qubits],
        "routing": draw(st.sampled_from(["bridges", "swaps", "fewest"])),
    }


@given(st.data())
def test_routed_circuits_use_joined_qubits_only_and_do_the_same(data):
    plain = st.one_of(circuits(max_qubits=4, max_count=6), pair_circuits())
    circuit = data.draw(st.one_of(plain, framed(plain)))
    device = data.draw(devices(circuit.qubits)) | data.draw(gate_options)
    text = circuit.qasm(**device)
    cost = circuit.cost(**device)
    _, physical, _, gates = qasm_gates.statements(text)
    joined = {frozenset(edge) for edge in device["connectivity"]}
    assert all(frozenset(places) in joined for _, _, places in gates if len(places) == 2)
    assert qasm_gates.counts(text) == (cost.two_qubit_gates, cost.swaps, cost.one_qubit_gates)
    assert cost.start_layout == tuple(device["layout"])
    stated = dict(re.findall(r"// trueturn: (\w+) = \[(.*)\]", text))
    assert stated["start_layout"] == ", ".join(map(str, cost.start_layout))
    assert stated["end_layout"] == ", ".join(map(str, cost.end_layout))
    made, wanted = qasm_gates.unitary(text), dense(circuit)
    for filling in (0, 1):  # what the spare qubits hold
        start = embedding(cost.start_layout, physical, filling)
        end = embedding(cost.end_layout, physical, filling)
        assert np.abs(made @ start - end @ wanted).max() <= tolerance(circuit, len(gates))


def embedding(layout, physical, filling):
    """Columns: the physical basis state for each logical one, spare qubits holding `filling`."""
    spare = sum(filling << place for place in range(physical) if place not in layout)
    columns = np.zeros((2**physical, 2 ** len(layout)))
    for index in range(2 ** len(layout)):
        columns[spare | sum((index >> qubit & 1) << place for qubit, place in enumerate(layout)), index] = 1
    return columns


@settings(max_examples=15)
@given(st.one_of(circuits(max_count=6), pair_circuits()), gate_options)
def test_both_versions_parse_with_the_reference_parser(circuit, device):
    from openqasm3 import parser

    text = circuit.qasm(3, connectivity="ring", **device)
    names = {type(statement).__name__ for statement in parser.parse(text).statements}
    assert names <= {
        "Include",
        "QubitDeclaration",
        "QuantumGate",
        "QuantumGateDefinition",
        "QuantumPhase",
        "ForInLoop",
    }
    parser.parse(circuit.qasm(2, connectivity="ring", **device))


def test_repeats_are_loops_in_version_3_whatever_their_number():
    step = tt.Rotations([0b011, 0b110], [0, 0b110], [0.1, 0.2], 3)
    text = (step + step.times(7)).times(10**12).qasm()
    assert "for uint[64] step0 in [1:1000000000000] {" in text
    assert "  for int step1 in [1:7] {" in text
    assert len(text) < 3000
    with pytest.raises(ArgumentError, match=r"version: a text of more than .* use version 3"):
        step.times(10**12).qasm(2)


def test_a_version_2_file_that_cannot_fit_the_disk_is_refused_at_once(tmp_path):
    step = tt.Rotations([0b011, 0b110], [0, 0b110], [0.1, 0.2], 3)
    with pytest.raises(ArgumentError, match=r"path: cannot be written .*needs at least"):
        step.times(10**15).write_qasm(tmp_path / "a.qasm", version=2)
    assert not list(tmp_path.iterdir())


def test_identity_strings_join_the_global_phase():
    circuit = tt.Rotations([0, 1], [0, 0], [0.25, 0.5], 1).times(3)
    text = circuit.qasm()
    assert "gphase(-0.75);" in text
    assert "phase = -0.75 radians; OpenQASM 2 leaves the global phase open" in circuit.qasm(2)
    assert circuit.cost().rotations == 3


def test_angles_keep_every_digit_and_a_point():
    angles = [0.1, 1 / 3, 1e-9, 5e-324, 1e300, -2.5e16]
    circuit = tt.Rotations([0] * 6, [1] * 6, angles, 1)
    for version in (2, 3):
        assert [angle for _, angle, _ in qasm_gates.statements(circuit.qasm(version))[3]] == [2 * a for a in angles]
    with pytest.raises(RotationError, match=r"angles: too large to write as gates \(1e308\)"):
        tt.Rotations([1], [0], [1e308], 1).qasm()


def test_comments_head_the_file_line_by_line():
    text = tt.Rotations([1], [0], [0.5], 1).qasm(comment="strang, 40 steps\nOPENQASM 4.0;\u2028h q[0];")
    assert "// strang, 40 steps\n// OPENQASM 4.0;\n// h q[0];\n" in text
    qasm_gates.statements(text)


def test_no_qubits_and_no_rotations_write_too():
    assert qasm_gates.statements(tt.Rotations([], [], [], 0, 0.5).qasm())[1:] == (0, 0.5, [])
    assert qasm_gates.statements(tt.Rotations([], [], [], 3).qasm(2))[1:] == (3, 0.0, [])


def test_the_file_holds_the_text(tmp_path):
    circuit = tt.Rotations([0b11], [0], [0.5], 2).times(4)
    path = tmp_path / "out.qasm"
    path.write_text("old", encoding="utf-8")
    cost = circuit.write_qasm(path, comment="ours", ladder="hub")
    assert path.read_text(encoding="utf-8") == circuit.qasm(comment="ours", ladder="hub")
    assert cost == circuit.cost(ladder="hub")
    assert [entry.name for entry in tmp_path.iterdir()] == ["out.qasm"]


@pytest.mark.skipif(sys.platform == "win32", reason="limits of file sizes are set by resource")
def test_an_old_file_survives_a_disk_that_fills(tmp_path):
    path = tmp_path / "out.qasm"
    path.write_text("old", encoding="utf-8")
    script = (
        "import resource, sys, trueturn as tt\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (300_000, 300_000))\n"
        "circuit = tt.Rotations([3] * 60_000, [0] * 60_000, [0.1] * 60_000, 2)\n"
        "try:\n"
        "    circuit.write_qasm(sys.argv[1])\n"
        "except tt.errors.ArgumentError as error:\n"
        "    print(error)\n"
    )
    environment = os.environ | {"PYTHONPATH": os.pathsep.join(sys.path)}
    done = subprocess.run(
        [sys.executable, "-c", script, str(path)], capture_output=True, text=True, env=environment, check=True
    )
    assert re.match(r"path: cannot be written \(.*out.qasm: File too large\); choose another place", done.stdout)
    assert path.read_text(encoding="utf-8") == "old"
    assert [entry.name for entry in tmp_path.iterdir()] == ["out.qasm"]


def test_long_lists_stream_with_the_same_gates_as_short_ones():
    """Far more gates than are kept back for cancelling: the text is that of pieces, but for the seams."""
    generator = np.random.default_rng(3)
    count = 40_000
    places = generator.integers(0, 30, count).tolist()
    circuit = tt.Rotations([0] * count, [3 << place for place in places], generator.normal(size=count), 32)
    gates = qasm_gates.statements(circuit.qasm())[3]
    assert [angle for _, angle, _ in gates if angle is not None] == [2 * angle for angle in circuit.angles]
    assert circuit.cost(join_pairs=False).two_qubit_gates == sum(len(places) == 2 for _, _, places in gates)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"ladder": "stair"}, r"ladder: unknown \('stair'\); did you mean 'staircase'\? choose one of"),
        ({"order": "descending"}, r"order: unknown \('descending'\); did you mean 'ascending'\?"),
        ({"native": "iswap"}, r"native: unknown \('iswap'\);.* choose one of 'cx', 'cz', 'zz'"),
        ({"routing": 3}, r"routing: unknown \(3\); choose one of"),
        ({"join_pairs": "yes"}, r"join_pairs: not True or False \('yes'\)"),
        ({"conectivity": "line"}, r"conectivity: unknown option \('line'\); did you mean 'connectivity'\?"),
        ({"connectivity": "lime"}, r"connectivity: unknown \(lime\); did you mean 'line'\?"),
        ({"connectivity": 5}, r"connectivity: neither a word nor a lattice nor a list of pairs \(5\)"),
        ({"connectivity": [(0, 1), (2, 2)]}, r"connectivity: joins a qubit to itself \(\(2, 2\)\)"),
        ({"connectivity": [(0, 1, 2)]}, r"connectivity: not a pair of whole numbers \(\(0, 1, 2\)\)"),
        ({"connectivity": [(0, -1)]}, r"connectivity: qubit number out of range \(\(0, -1\)\)"),
        ({"connectivity": [(0, 1), (1, 2)]}, r"connectivity: has 3 qubits, the circuit 4 \(3\); join at least"),
        ({"connectivity": [(0, 1), (2, 3)]}, r"connectivity: disconnected \(no way from qubit 0 to qubit 2\)"),
        ({"connectivity": tt.lattice.chain(3)}, r"connectivity: has 3 qubits, the circuit 4"),
        ({"layout": [0, 1, 2]}, r"layout: has 3 entries for 4 qubits"),
        ({"layout": [0, 1, 2, 2]}, r"layout: entries repeat or are out of range"),
        ({"layout": 7}, r"layout: not a list of whole numbers \(7\)"),
        ({"layout": [0, 1, 2, 9], "connectivity": "line"}, r"layout: leaves the device of 4 qubits \(9\)"),
        ({"two_qubit_error": 1.0}, r"two_qubit_error: no probability below 1 \(1.0\)"),
        ({"readout_error": "much"}, r"readout_error: not a number \('much'\)"),
        ({"synthesis_error": 0.0}, r"synthesis_error: not above zero \(0.0\)"),
    ],
)
def test_bad_options_are_refused_with_a_remedy(options, message):
    circuit = tt.Rotations([0b1111], [0], [0.5], 4)
    for door in (circuit.cost, circuit.qasm):
        with pytest.raises(ArgumentError, match=message):
            door(**options)


def test_bad_places_and_versions_are_refused(tmp_path):
    circuit = tt.Rotations([1], [0], [0.5], 1)
    for version in (1, 4, "3", True, None):
        with pytest.raises(ArgumentError, match=r"version: neither 2 nor 3"):
            circuit.write_qasm(tmp_path / "a.qasm", version)
    with pytest.raises(ArgumentError, match=r"path: cannot be written \(.*: is a folder\)"):
        circuit.write_qasm(tmp_path)
    with pytest.raises(ArgumentError, match=r"path: cannot be written \(.*: its folder does not exist\)"):
        circuit.write_qasm(tmp_path / "no" / "a.qasm")


@pytest.mark.heavy
def test_a_million_rotations_are_written_in_seconds_at_any_size(tmp_path):
    generator = np.random.default_rng(4)
    count = 10**6
    strings = [sum(1 << int(qubit) for qubit in set(generator.integers(0, 128, 4).tolist())) for _ in range(500)]
    picks = generator.integers(0, 500, count)
    circuit = tt.Rotations([strings[k] for k in picks], [0] * count, generator.normal(size=count), 128)
    cost = circuit.write_qasm(tmp_path / "big.qasm", ladder="balanced")
    with (tmp_path / "big.qasm").open(encoding="utf-8") as file:
        assert sum(line.startswith("cx") for line in file) == cost.two_qubit_gates


def test_what_is_no_path_is_refused():
    with pytest.raises(ArgumentError, match=r"^path: no path \(None\); give the file to write"):
        tt.Rotations([1], [0], [0.1], 1).write_qasm(None)
