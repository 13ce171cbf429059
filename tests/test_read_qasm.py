"""OpenQASM read as rotations: published cases, every library gate, drawn programs against a second reader."""

from __future__ import annotations

import json
from pathlib import Path

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trueturn as tt
from circuits import matrix
from qasm_oracle import BUILT_IN, QELIB1, STDGATES, applied, controlled, principal_power, unitary
from qasm_programs import programs
from trueturn.errors import MemoryRefusedError, QasmError

CASES = Path(__file__).parent / "published" / "qasm_cases"
VALID = json.loads((CASES / "valid.json").read_text(encoding="utf-8"))["valid"]
MALFORMED = json.loads((CASES / "malformed.json").read_text(encoding="utf-8"))["malformed"]
WAYS = ("auto", "clifford", "diagonal", "rotations")
V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'
V2 = 'OPENQASM 2.0;\ninclude "qelib1.inc";\n'
U = 2.0**-53


def slack(*circuits, gates=0):
    """Frobenius distance that rounding explains on at most 4 qubits.

    Each rotation of either side is off by 5 u and u |θ| in the 2-norm (`Rotations.rounding_bound`), each gate of the dense
    product by at most 16 u a column entry over 16 entries; angles are formed in a few operations (k = 8).
    """
    size = max(2**circuit.qubits for circuit in circuits)
    return np.sqrt(size) * (2 * sum(circuit.rounding_bound(8) for circuit in circuits) + (gates + 4) * 16 * size * U)


def difference(ours, theirs, exact=True):
    if not exact:
        turned = np.vdot(ours, theirs)
        ours = ours * turned / abs(turned)
    return np.linalg.norm(ours - theirs)


@pytest.mark.parametrize("case", VALID, ids=lambda case: case["file"])
def test_published_circuits_have_their_unitaries(case):
    expected = np.array(case["unitary"]) @ [1, 1j]
    exact = case["global_phase"] == "exact"
    for way in WAYS:
        circuit = tt.read_qasm(CASES / case["file"], quarter_turns=way)
        assert difference(matrix(circuit), expected, exact) <= slack(circuit, gates=24)
    if case["file"] != "v16_openqasm2.qasm":  # whose power the reference parser reads by version 3
        text = (CASES / case["file"]).read_text(encoding="utf-8")
        assert difference(unitary(text), expected, exact) <= slack(circuit, gates=24)


@pytest.mark.parametrize("case", MALFORMED, ids=lambda case: case["file"])
def test_malformed_circuits_are_refused_with_their_line(case):
    path = CASES / case["file"]
    if case["kind"] == "size" and "45" in case["message_must_mention"]:
        # 45 qubits are no fault of a circuit: 128 fit. Their state is what does not fit, and it is refused unallocated.
        assert tt.read_qasm(path).qubits == 45
        with pytest.raises(MemoryRefusedError):
            tt.State.computational(0, 45)
        return
    with pytest.raises(QasmError) as caught:
        tt.read_qasm(path)
    assert (caught.value.line, caught.value.path) == (case["line"], str(path))
    message = str(caught.value)
    assert message.startswith(f"{path}: line {case['line']}, column {caught.value.column}: ")
    said = message[len(str(path)) :]
    assert all(words in said for words in case["message_must_mention"]), said


def gate_cases():
    for version, head, library in ((3, V3, STDGATES), (2, V2, QELIB1)):
        for name, definition in (library | BUILT_IN[version]).items():
            if name != "gphase":
                yield pytest.param(version, head, name, definition, id=f"{version}-{name}")


def call_text(version, head, name, definition, angles, modifiers=""):
    parameters = definition.__code__.co_argcount
    own = definition(*angles[:parameters])
    count = (len(own).bit_length() - 1) + modifiers.count("ctrl")
    values = "(" + ",".join(map(repr, angles[:parameters])) + ")" if parameters else ""
    register = f"qubit[{count}] q;" if version == 3 else f"qreg q[{count}];"
    operands = ",".join(f"q[{k}]" for k in range(count))
    return own, f"{head}{register}\n{modifiers}{name}{values} {operands};"


ANGLES = [0.3, -1.1, 2.7, 0.9]


@pytest.mark.parametrize(("version", "head", "name", "definition"), list(gate_cases()))
def test_every_library_gate_is_its_definition(version, head, name, definition):
    own, text = call_text(version, head, name, definition, ANGLES)
    circuit = tt.read_qasm(text)
    assert difference(matrix(circuit), own, exact=version == 3) <= slack(circuit, gates=8)


@pytest.mark.parametrize(("version", "head", "name", "definition"), [c for c in gate_cases() if c.values[0] == 3])
def test_every_gate_takes_every_modifier(version, head, name, definition):
    own, _ = call_text(version, head, name, definition, ANGLES)
    expected = {
        "inv @ ": own.conj().T,
        "ctrl @ ": controlled(own),
        "negctrl @ ": controlled(own, on=0),
        "ctrl @ negctrl @ ": controlled(controlled(own, on=0)),
        "pow(3) @ ": np.linalg.matrix_power(own, 3),
        "pow(-2) @ ": np.linalg.matrix_power(own.conj().T, 2),
        "inv @ ctrl @ ": controlled(own.conj().T),
    }
    expected |= {
        "pow(0.3) @ ": principal_power(own, 0.3),
        "ctrl @ pow(-0.5) @ ": controlled(principal_power(own, -0.5)),
    }
    for modifiers, result in expected.items():
        _, text = call_text(version, head, name, definition, ANGLES, modifiers)
        circuit = tt.read_qasm(text)
        # A power triples errors; the Schur form of the oracle adds some u for each of at most 32 rows.
        assert difference(matrix(circuit), result) <= 4 * slack(circuit, gates=64), modifiers


ROOTS = {
    "ctrl @ U(0.3, -1.1, 2.7) q[2], q[0];": 2,
    "negctrl @ ctrl @ h q[1], q[2], q[0];": 3,
    "ctrl @ inv @ cu(0.3, -1.1, 2.7, 0.9) q[2], q[0], q[1];": 3,
    # Diagonal on q[0] and q[2], with phases of its own; X, Y and Z on q[1].
    "g(0.4) q[0], q[1], q[2];": 3,
    # The eigenvalue -1 on one value of the control only, on which no axis is determined.
    "ctrl @ m q[0], q[1];": 2,
}


@pytest.mark.parametrize("exponent", ["0.5", "-0.3", "1.7", "-1.5"])
@pytest.mark.parametrize("call", ROOTS)
def test_roots_of_gates_that_are_diagonal_on_all_qubits_but_one_are_principal(call, exponent):
    head = f"""{V3}gate g(t) a, b, c {{ crx(t) a, b; cp(2 * t) c, a; cy c, b; rz(t) b; gphase(t); cz a, c; ch a, b; }}
gate m a {{ rz(pi) a; ry(pi) a; rx(pi) a; x a; y a; z a; ry(0.1) a; rx(0) a; ry(-0.1) a; }}
qubit[3] q;
"""
    plain = unitary(f"{head}{call}")
    circuit = tt.read_qasm(f"{head}pow({exponent}) @ {call}")
    # Sums over at most 8 sectors of angles below 2 * 1.7 π, each off by some u, and a Schur form of 8 rows.
    assert difference(matrix(circuit), principal_power(plain, float(exponent))) <= 8 * slack(circuit, gates=64)
    assert tt.read_circuit(f"{head}pow({exponent}) @ {call}").gate_counts.rotations >= 1


def test_a_root_that_is_no_product_of_known_rotations_is_refused_with_the_reason():
    text = f"{V3}gate g a, b {{ h a; cx a, b; ry(0.3) b; cx b, a; }} qubit[2] q; pow(0.5) @ g q[0], q[1];"
    with pytest.raises(
        QasmError, match="of a gate on 2 qubits whose rotations neither commute nor are diagonal on all"
    ):
        tt.read_qasm(text)
    text = f"{V3}gate g a, b, c {{ ch a, c; cswap a, b, c; }} qubit[3] q; pow(0.5) @ g q[0], q[1], q[2];"
    with pytest.raises(QasmError, match="write the root as a gate of its own"):
        tt.read_qasm(text)


def test_a_loop_in_a_gate_that_does_the_same_each_time_stays_a_block():
    text = "gate g(t) a, b { for int s in [1:1000000] { rx(t) a; cx a, b; rz(2 * t) b; cx a, b; } }"
    circuit = tt.read_qasm(f"{V3}{text} qubit[2] q; g(0.1) q[0], q[1]; inv @ g(0.1) q[1], q[0];")
    assert [block.repeat for block in circuit.blocks] == [1_000_000] * 2
    assert circuit.angle_totals().near(tt.Operator("5e4 X_0 - 5e4 X_1", qubits=2), 1e-9)


def test_gates_of_no_library_are_refused():
    for name in ("rzz", "rxx", "sxdg", "iswap"):
        with pytest.raises(QasmError, match=rf"no gate of this name \({name}\); it is not in stdgates.inc"):
            tt.read_qasm(f"{V3}qubit[2] q; {name} q[0], q[1];")
    with pytest.raises(QasmError, match=r"no gate of this name \(swap\); it is not in qelib1.inc"):
        tt.read_qasm(f"{V2}qreg q[2]; swap q[0], q[1];")


@given(programs())
@settings(max_examples=60)
def test_drawn_programs_agree_with_the_second_reader(text):
    expected = unitary(text)
    for way in WAYS:
        circuit = tt.read_qasm(text, quarter_turns=way)
        assert difference(matrix(circuit), expected) <= slack(circuit, gates=2000), way


@pytest.mark.heavy
@given(programs(max_size=25))
@settings(max_examples=120)
def test_longer_programs_agree_with_the_second_reader(text):
    circuit = tt.read_qasm(text)
    assert difference(matrix(circuit), unitary(text)) <= slack(circuit, gates=5000)


def test_ladders_read_back_as_one_string():
    # exp(-i 0.2 X0 Y1 Z2), published_qasm v03, and a tree of cx instead of a chain
    chain = tt.read_qasm(CASES / "v03_xyz_rotation.qasm")
    assert chain.angle_totals() == tt.Operator("0.2 X_0 Y_1 Z_2", qubits=3)
    assert chain.count == 1
    tree = tt.read_qasm(
        f"{V3}qubit[4] q; cx q[0], q[1]; cx q[2], q[3]; cx q[1], q[3]; rz(-0.6) q[3];"
        "cx q[1], q[3]; cx q[2], q[3]; cx q[0], q[1];"
    )
    assert tree == tt.Rotations([0], [0b1111], [-0.3], 4)


@pytest.mark.parametrize("hadamard", ["h", "u2(0, pi)", "rz(pi/2) q[{0}]; sx q[{0}]; rz(pi/2)", "ry(pi/2) q[{0}]; x"])
def test_a_change_of_basis_is_recognised_however_it_is_spelled(hadamard):
    spell = lambda qubit: f"{hadamard} q[{{0}}];".format(qubit)  # noqa: E731
    change = "".join(spell(qubit) for qubit in range(3))
    ladder = "cx q[0], q[1]; rz({0}) q[1]; cx q[0], q[1]; cx q[1], q[2]; rz({1}) q[2]; cx q[1], q[2];"
    text = f"{V3}qubit[3] q;" + "".join(change + ladder.format(0.1 * k, 0.2 * k) + change for k in (1, 2, 3, 4))
    circuit = tt.read_qasm(text)
    assert {(x, z) for x, z in zip(circuit.x_masks, circuit.z_masks, strict=True)} == {(0b011, 0), (0b110, 0)}
    assert not circuit.frame.count


def test_rotations_by_quarter_turns_stay_what_the_circuit_is_made_of():
    # A kicked chain at the self-dual point: all angles are multiples of pi/4, and nothing is a change of basis.
    step = (
        "".join(f"cx q[{k}], q[{k + 1}]; rz(pi/2) q[{k + 1}]; cx q[{k}], q[{k + 1}];" for k in range(3)) + "rx(pi/2) q;"
    )
    circuit = tt.read_circuit(f"{V3}qubit[4] q;" + 5 * step)
    assert circuit.quarter_turns == "rotations"
    assert circuit.evolution.count == 35
    assert circuit.evolution.angle_totals().one_norm() == pytest.approx(35 * np.pi / 4, rel=1e-14)
    assert "taken as rotations" in str(circuit.notes[-1])
    # A written exp(-i pi/4 Z0 Z1), with Y changed by rx(pi/2): only the diagonal one is a rotation.
    written = f"{V3}qubit[2] q; rx(pi/2) q; cx q[0], q[1]; rz(pi/2) q[1]; cx q[0], q[1]; rx(-pi/2) q;"
    assert tt.read_qasm(written) == tt.Rotations([3], [3], [np.pi / 4], 2)
    assert tt.read_qasm(written, quarter_turns="clifford").count == 0


def test_zero_angles_are_kept_where_a_gate_has_one_angle():
    assert tt.read_qasm(f"{V3}qubit q; rz(0) q;") == tt.Rotations([0], [1], [0.0], 1)
    assert tt.read_qasm(f"{V3}qubit q; u3(0.2, 0, 0) q;") == tt.Rotations([1], [1], [0.1], 1)


def test_steps_in_a_loop_stay_one_block():
    text = f"{V3}qubit[2] q; for int s in [1:1000000] {{ rx(0.1) q; cx q[0], q[1]; rz(0.2) q[1]; cx q[0], q[1]; }} h q;"
    circuit = tt.read_qasm(text)
    assert [block.repeat for block in circuit.blocks] == [1_000_000]
    assert circuit.count == 3_000_000
    # A body that ends in a Clifford: strings come back after its order, here 2 for h.
    text = f"{V3}qubit q; for int s in [1:1001] {{ rx(0.1) q; h q; }}"
    circuit = tt.read_qasm(text)
    assert [(block.repeat, block.rotations.count) for block in circuit.blocks] == [(500, 2), (1, 1)]
    assert difference(matrix(circuit), np.linalg.matrix_power(unitary(text.replace("1001", "1")), 1001)) <= slack(
        circuit, gates=2000
    )


@pytest.mark.parametrize("exponent", [10**6 + 1, 10**15 + 7, 2**53 - 1, -(2**53) + 1])
@pytest.mark.parametrize(
    ("gate", "period"), [("t", 8), ("s", 4), ("x", 2), ("h", 2), ("sx", 4), ("ctrl @ t", 8), ("rz(pi/8)", 32)]
)
@pytest.mark.parametrize("way", WAYS)
def test_a_huge_power_of_a_gate_that_comes_back_is_exact(gate, period, exponent, way):
    qubits = "q[0], q[1]" if "ctrl" in gate else "q[0]"
    huge, small = (
        tt.read_qasm(f"{V3}qubit[2] q; pow({power}) @ {gate} {qubits};", quarter_turns=way)
        for power in (exponent, exponent % period)
    )
    # Angles of at most 2^12 π/16 on both sides, of which the sixteenths are exact.
    assert difference(matrix(huge), matrix(small)) <= slack(huge, small)


def test_a_power_without_digits_left_is_refused():
    for statement, shown in (
        ("pow(9007199254740991) @ rz(0.3) q;", "pow(9007199254740991)"),
        ("gate g a { h a; gphase(0.3); } pow(1e12) @ g q;", "pow(1000000000000)"),
        ("pow(1e9 + 0.5) @ rz(3.0) q;", "pow(1000000000.5)"),
        ("pow(1e9 + 0.5) @ h q;", "pow(1000000000.5)"),
    ):
        with pytest.raises(QasmError) as caught:
            tt.read_qasm(f"{V3}qubit q; {statement}")
        assert f"{shown}: the angle leaves no digits modulo 2π; reduce the exponent" in str(caught.value)
    with pytest.raises(QasmError, match=r"pow: no exponent up to 2\*\*53 \(1e16\)"):
        tt.read_qasm(f"{V3}qubit q; pow(1e16) @ x q;")
    # 10^6 repeats of an angle that is no multiple keep nine digits.
    (block,) = tt.read_qasm(f"{V3}qubit q; pow(1000000) @ rz(0.3) q;").blocks
    assert block.rotations.angles[0] == pytest.approx(150000.0, rel=4 * U)


@pytest.mark.parametrize(
    "text",
    [
        "for int i in [1:4000000000000000000] { for int j in [1:9] { rz(0.1) q; } }",
        "for int i in [1:9000000000000000000] { rz(0.1) q; } " * 3,
    ],
)
def test_repeats_beyond_64_bits_are_refused(text):
    with pytest.raises(QasmError, match=r"line 3, column \d+: .*the circuit runs more rotations than 64 bits count"):
        tt.read_qasm(f"{V3}qubit q; {text}")


def test_a_repeat_that_never_comes_back_is_refused_with_the_reason():
    swaps = ""
    start = 0
    for length in (2, 3, 5, 7, 11, 13, 17, 19, 23):
        swaps += "".join(f"swap q[{k}], q[{k + 1}];" for k in range(start, start + length - 1))
        start += length
    ladder = "".join(f"cx q[{k}], q[{k + 1}];" for k in range(99))
    text = f"{V3}qubit[100] q; for int s in [1:100000000] {{ {ladder} rz(0.1) q[99]; {swaps} }}"
    with pytest.raises(QasmError, match=r"a loop of 100000000 repeats: .* come back to none"):
        tt.read_qasm(text)


def test_exact_phases_add_up_over_many_gates():
    # 10^5 gates p(0.7) have the phase 0.35 each: a plain sum would be off by about 1e-9.
    text = f"{V3}qubit q;" + "p(0.7) q;" * 100_000
    turned = np.exp(1j * tt.read_qasm(text).phase)
    exact = complex(mpmath.expjpi(mpmath.mpf(0.35) * 100_000 / mpmath.pi))
    assert abs(turned - exact) < 1e-10  # the products 0.5 * 0.7 are exact, π has 53 bits, so 1e5 terms leave 1e5 u
    assert tt.read_qasm(f"{V3}qubit q; gphase(-100.25); gphase(3.5);").phase == -96.75


@given(st.integers(0, 3), st.integers(0, 2**16))
def test_sparse_and_dense_cliffords_keep_their_phase(extra, seed):
    rng = np.random.default_rng(seed)
    names = [
        "h q[{0}];",
        "s q[{0}];",
        "cx q[{0}], q[{1}];",
        "cz q[{1}], q[{0}];",
        "sx q[{0}];",
        "swap q[{0}], q[{1}];",
        "y q[{1}];",
    ]
    gates = [names[rng.integers(len(names))].format(*rng.permutation(3)[:2]) for _ in range(20 + extra)]
    text = f"{V3}qubit[3] q;" + "".join(gates)
    circuit = tt.read_qasm(text)
    assert circuit.count == 0
    assert difference(matrix(circuit), unitary(text)) <= slack(circuit, gates=64)


def test_qubits_of_the_machine_are_read():
    circuit = tt.read_qasm(f"{V3}cx $2, $0; rz(0.5) $0; cx $2, $0; measure $0;")
    assert circuit == tt.Rotations([0], [0b101], [0.25], 3)
    with pytest.raises(QasmError, match="use one kind"):
        tt.read_qasm(f"{V3}qubit q; x $0;")


def test_applied_puts_the_first_argument_lowest():
    assert (applied(controlled(np.eye(2)[::-1]), [1, 0], 2) == np.eye(4)[[0, 1, 3, 2]]).all()
