"""Gates of a file, counted as they stand there: by hand, against the writer's own count, and in gates of the file."""

from __future__ import annotations

import time

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trueturn as tt
from trueturn.errors import ArgumentError

V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'
V2 = 'OPENQASM 2.0;\ninclude "qelib1.inc";\n'
FIELDS = (
    "two_qubit_gates",
    "swaps",
    "larger_gates",
    "one_qubit_gates",
    "rotations",
    "clifford_rotations",
    "t_rotations",
    "two_qubit_depth",
    "depth",
)
# Two-qubit gates, swaps, larger and one-qubit gates; rotations, Clifford and T-like ones; depth in two-qubit gates, depth.
BY_HAND = {
    "": (0, 0, 0, 0, 0, 0, 0, 0, 0),
    "h q[0]; cx q[0], q[1]; rz(0.3) q[1]; cx q[0], q[1]; h q[0];": (2, 0, 0, 3, 1, 0, 0, 2, 5),
    "cx q[0], q[1]; cx q[2], q[3]; cx q[1], q[2];": (3, 0, 0, 0, 0, 0, 0, 2, 2),
    "swap q[0], q[1]; cx q[1], q[2];": (4, 1, 0, 0, 0, 0, 0, 4, 4),
    "t q[0]; tdg q[1]; rz(pi/2) q[2]; rz(-pi/4) q[2]; p(0.1) q[3]; s q[3];": (0, 0, 0, 6, 5, 1, 3, 0, 2),
    "U(0.1, 0.2, 0.3) q[0]; u3(0.1, 0, pi/2) q[1]; u2(0, pi) q[1];": (0, 0, 0, 3, 6, 2, 0, 0, 2),
    "crz(0.3) q[0], q[1]; cp(0.3) q[1], q[2]; ch q[2], q[3];": (3, 0, 0, 0, 7, 0, 2, 3, 3),
    "ccx q[0], q[1], q[2]; cswap q[1], q[2], q[3]; id q[0];": (0, 0, 2, 1, 14, 0, 14, 2, 2),
    "gphase(0.3); barrier q; h q;": (0, 0, 0, 4, 0, 0, 0, 0, 1),
    "h q[0]; h q[0]; barrier q[0], q[1]; h q[1]; cx q[2], q[3];": (1, 0, 0, 3, 0, 0, 0, 1, 3),
    "cx q[0], q[1]; barrier q; cx q[2], q[3];": (2, 0, 0, 0, 0, 0, 0, 2, 2),
    "ctrl @ x q[0], q[1]; ctrl @ rz(0.2) q[0], q[1]; negctrl @ ctrl @ z q[0], q[1], q[2];": (
        2,
        0,
        1,
        0,
        2 + 7,
        0,
        7,
        3,
        3,
    ),
    "ctrl @ gphase(0.2) q[0]; inv @ cx q[0], q[1]; pow(2) @ s q[0]; pow(0.5) @ x q[1];": (1, 0, 0, 3, 1, 0, 0, 1, 3),
    "for int k in [1:1000] { cx q[0], q[1]; rz(0.1) q[1]; }": (1000, 0, 0, 1000, 1000, 0, 0, 1000, 2000),
    "for int k in [1:3] { rz(pi*k/4) q[0]; }": (0, 0, 0, 3, 3, 1, 2, 0, 3),
    "if (1 < 2) { cx q[0], q[1]; } else { h q; }": (1, 0, 0, 0, 0, 0, 0, 1, 1),
    "for int k in [1:1000000000000] { for int m in [1:7] { cx q[0], q[1]; } cx q[1], q[2]; }": (
        (8 * 10**12, 0, 0, 0, 0, 0, 0, 8 * 10**12, 8 * 10**12)
    ),
    "gate g(t) a, b { cx a, b; rz(t) b; cx a, b; } g(0.2) q[0], q[1]; inv @ g(0.2) q[1], q[2];": (
        4,
        0,
        0,
        2,
        2,
        0,
        0,
        4,
        6,
    ),
    "gate g a, b { for int i in [1:5] { cx a, b; } if (true) { h a; } } g q[0], q[1]; g q[2], q[3];": (
        (10, 0, 0, 2, 0, 0, 0, 5, 6)
    ),
    "gate g(t) a, b { cx a, b; rz(t) b; cx a, b; } ctrl @ g(0.2) q[0], q[1], q[2]; pow(3) @ g(0.2) q[0], q[1];": (
        (7, 0, 2, 3, 2 + 3, 0, 0, 9, 12)
    ),
    "gate g a, b { h a; cx a, b; } pow(-2) @ g q[0], q[1];": (2, 0, 0, 2, 0, 0, 0, 2, 4),
    "gate g a, b { cx a, b; barrier a, b; h b; } negctrl @ g q[3], q[1], q[0];": (1, 0, 1, 0, 7 + 6, 0, 13, 2, 2),
    "gate rzz(t) a, b { cx a, b; rz(t) b; cx a, b; } rzz(0.2) q[0], q[1]; rzz(pi/2) q[0], q[1];": (
        (2, 0, 0, 0, 2, 1, 0, 2, 2)
    ),
    "gate rzz(t) a, b { cx a, b; rz(t) b; cx a, b; } ctrl @ rzz(0.2) q[0], q[1], q[2]; inv @ rzz(1) q[0], q[1];": (
        (1, 0, 1, 0, 3, 0, 0, 2, 2)
    ),
}


def counted(text, **reading):
    counts = tt.read_circuit(text, **reading).gate_counts
    return tuple(getattr(counts, name) for name in FIELDS)


@pytest.mark.parametrize("text", BY_HAND)
@pytest.mark.parametrize("way", ["auto", "rotations"])
def test_counts_are_those_by_hand(text, way):
    assert counted(f"{V3}qubit[4] q; {text}", quarter_turns=way) == BY_HAND[text]


def test_a_gate_that_ends_with_a_depth_of_its_own_runs_backwards_when_undone():
    # cx first blocks qubit 1 for long; undone, it comes last.
    body = "gate g a, b, c { cx a, b; h b; h b; cx b, c; }"
    assert counted(f"{V3}{body} qubit[3] q; h q[2]; h q[2]; h q[2]; g q[0], q[1], q[2];")[-1] == 4
    assert counted(f"{V3}{body} qubit[3] q; h q[2]; h q[2]; h q[2]; inv @ g q[0], q[1], q[2];")[-1] == 7
    assert counted(f"{V3}{body} qubit[3] q; h q[2]; h q[2]; h q[2]; pow(-1) @ g q[0], q[1], q[2];")[-1] == 7


def test_version_2_defines_swap_which_is_one_swap():
    text = f"{V2}gate swap a, b {{ cx a, b; cx b, a; cx a, b; }}\nqreg q[3]; swap q[0], q[1]; cx q[1], q[2];"
    assert counted(text)[:2] == (4, 1)
    assert counted(text, native_gates=["rzz"])[:2] == (4, 0)


def test_only_the_evolution_is_counted():
    text = f"{V3}qubit[2] q; h q; cx q[0], q[1]; rz(0.3) q[1]; cx q[0], q[1]; h q[0]; h q[1];"
    for prepare, basis, one_qubit in ((None, None, 5), ((0, 1), None, 3), ((0, 1), (4, 6), 1), (None, (4, 6), 3)):
        circuit = tt.read_circuit(text, prepare=prepare, basis=basis)
        assert (circuit.gate_counts.two_qubit_gates, circuit.gate_counts.one_qubit_gates) == (2, one_qubit)
        assert circuit.evolution.gate_counts == circuit.gate_counts
        assert circuit.preparation.gate_counts is None


def test_counts_go_with_the_circuit_that_was_read_and_with_no_other():
    circuit = tt.read_qasm(f"{V3}qubit[3] q; swap q[0], q[1]; rx(0.2) q[0];", qubits=5, start_layout=[1, 0, 2])
    assert circuit.gate_counts.swaps == 1
    assert (circuit + circuit).gate_counts is None and circuit.inverse().gate_counts is None
    assert tt.Rotations([1], [0], [0.1], 1).gate_counts is None


def test_names_of_native_gates_are_checked():
    for given_names in ("rzz", ["r zz"], [3]):
        with pytest.raises(ArgumentError, match="native_gates: no names of gates"):
            tt.read_qasm(f"{V3}qubit q;", native_gates=given_names)
    with pytest.raises(ArgumentError, match=r"native_gate: unknown option \(\['a'\]\); did you mean 'native_gates'"):
        tt.read_qasm(f"{V3}qubit q;", native_gate=["a"])


DEVICES = [
    {},
    {"native": "zz"},
    {"native": "cz", "ladder": "hub"},
    {"ladder": "balanced", "join_pairs": False},
    {"connectivity": "line", "routing": "swaps"},
    {"connectivity": "ring", "routing": "bridges", "native": "zz"},
]


@given(st.integers(0, 2**32 - 1), st.sampled_from(DEVICES), st.sampled_from([2, 3]))
@settings(max_examples=60)
def test_counts_of_written_files_are_those_of_the_writer(seed, device, version):
    rng = np.random.default_rng(seed)
    qubits = int(rng.integers(3, 6))
    step = [
        tt.Rotations(
            rng.integers(0, 2**qubits, 6).tolist(),
            rng.integers(1, 2**qubits, 6).tolist(),
            rng.choice([0.3, -1.7, 0.0, np.pi / 4, np.pi / 8, -3 * np.pi / 8, 0.1], 6),
            qubits,
        )
        for _ in range(2)
    ]
    circuit = step[0] + step[1].times(int(rng.integers(1, 5))) + step[0]
    cost = circuit.cost(**device)
    counts = tt.read_circuit(circuit.qasm(version, **device)).gate_counts
    same = [name for name in FIELDS if name != "larger_gates"]
    assert {name: getattr(counts, name) for name in same} == {name: getattr(cost, name) for name in same}
    assert counts.larger_gates == 0


def test_the_depth_of_many_repeats_is_exact():
    body = "".join(f"cx q[{k}], q[{k + 1}];" for k in range(99))
    text = f"{V3}qubit[100] q; for int s in [1:1000000000] {{ {body * 40} }}"
    before = time.process_time()
    counts = tt.read_circuit(text).gate_counts
    assert time.process_time() - before < 3.0
    assert counts.two_qubit_gates == 99 * 40 * 10**9
    # Run s of N starts two layers after the one before, and its 99 gates follow each other: 2 (N - 1) + 99.
    assert counts.depth == counts.two_qubit_depth == 2 * (40 * 10**9 - 1) + 99


def test_reading_counts_in_linear_time():
    line = "cx q[{0}], q[{1}]; rz(0.1) q[{1}];"
    text = f"{V3}qubit[9] q;" + "".join(line.format(k % 8, k % 8 + 1) for k in range(20_000))
    counts = tt.read_circuit(text).gate_counts
    assert (counts.two_qubit_gates, counts.one_qubit_gates, counts.rotations) == (20_000,) * 3
