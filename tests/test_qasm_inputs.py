"""Around the circuit: layouts, named parts, includes, notes; and texts that are broken or meant to do harm."""

from __future__ import annotations

import contextlib
from pathlib import Path

import numpy as np
import openqasm3
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trueturn as tt
from circuits import matrix
from qasm_oracle import unitary
from qasm_programs import programs
from trueturn.errors import ArgumentError, QasmError

CASES = Path(__file__).parent / "published" / "qasm_cases"
V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'


def refused(text, **options):
    with pytest.raises(QasmError) as caught:
        tt.read_qasm(text, **options)
    return caught.value


# --- layouts ---


def routed(rng, logical, qubits, gates):
    """A drawn circuit on `logical` qubits, and the same routed over a line of `qubits`: text with layouts."""
    start = [int(place) for place in rng.permutation(qubits)[:logical]]
    places = list(start)
    plain, moved = [], []
    for _ in range(gates):
        a, b = (int(q) for q in rng.permutation(logical)[:2])
        angle = float(rng.normal())
        plain.append(f"cx q[{a}], q[{b}]; rz({angle!r}) q[{b}]; cx q[{a}], q[{b}]; rx({angle / 3!r}) q[{a}];")
        while abs(places[a] - places[b]) > 1:
            here = places[a]
            there = here + (1 if places[b] > here else -1)
            moved.append(f"swap q[{here}], q[{there}];" if rng.random() < 0.5 else swap_by_cx(here, there))
            places = [there if p == here else here if p == there else p for p in places]
        x, y = places[a], places[b]
        moved.append(f"cx q[{x}], q[{y}]; rz({angle!r}) q[{y}]; cx q[{x}], q[{y}]; rx({angle / 3!r}) q[{x}];")
    marks = f"// trueturn: start_layout = {start}\n// trueturn: end_layout = {places}\n"
    return (
        f"{V3}qubit[{logical}] q;" + "".join(plain),
        V3 + marks + f"qubit[{qubits}] q;" + "".join(moved),
        start,
        places,
    )


def swap_by_cx(a, b):
    return f"cx q[{a}], q[{b}]; cx q[{b}], q[{a}]; cx q[{a}], q[{b}];"


@given(st.integers(0, 2**32 - 1), st.integers(2, 4), st.integers(0, 3))
def test_a_routed_circuit_is_the_same_in_logical_qubits(seed, logical, extra):
    plain, text, start, end = routed(np.random.default_rng(seed), logical, logical + extra, 6)
    expected = tt.read_qasm(plain)
    assert tt.read_qasm(text) == expected
    bare = text.replace("// trueturn", "// other")
    assert tt.read_qasm(bare, start_layout=start, end_layout=end) == expected
    circuit = tt.read_circuit(text)
    assert (circuit.start_layout, circuit.end_layout) == (tuple(start), tuple(end))


def test_without_an_end_layout_the_moved_qubits_are_told():
    text = f"{V3}qubit[3] q; rx(0.2) q[0]; swap q[0], q[1]; rz(0.3) q[1];"
    circuit = tt.read_qasm(text)
    assert circuit.relabelling == (1, 0, 2)
    assert circuit.angle_totals() == tt.Operator("0.1 X_0 + 0.15 Z_0", qubits=3)
    assert np.allclose(matrix(circuit), unitary(text), atol=1e-14)
    # Started at (2, 0, 1), logical qubit 1 is at 0: it turns, and logical 1 and 2 end in each other's place.
    logical = tt.read_qasm(text, start_layout=[2, 0, 1])
    assert logical.angle_totals() == tt.Operator("0.1 X_1 + 0.15 Z_1", qubits=3)
    assert logical.relabelling == (0, 2, 1)


def test_a_misspelt_layout_comment_is_refused_and_another_noted():
    for name in ("start_layuot", "Start_Layout", "start-layout", "end layout", "startlayout"):
        error = refused(f"{V3}// trueturn: {name} = [1, 0]\nqubit[2] q; x q[0];")
        assert f"unknown ({name}); did you mean {'end' if name.startswith('end') else 'start'}_layout?" in str(error)
        assert error.line == 3
    circuit = tt.read_circuit(f"{V3}// trueturn: by hand\nqubit[2] q; x q[0];")
    assert circuit.start_layout is None
    assert [str(note) for note in circuit.notes] == [
        "line 3: a comment that says nothing known is left out (trueturn: by hand)"
    ]


def test_a_circuit_is_put_on_the_qubits_asked_for():
    text = f"{V3}qubit[3] q; h q[0]; rz(0.2) q[0]; h q[0]; s q[1]; swap q[0], q[1];"
    own = tt.read_qasm(text)
    wide = tt.read_qasm(text, qubits=5)
    assert (own.qubits, wide.qubits, tt.read_qasm(text, qubits=2).qubits) == (3, 5, 2)
    assert wide.angle_totals() == tt.Operator("0.1 X_0", qubits=5)
    assert wide.relabelling == (*own.relabelling, 3, 4) and wide.frame.count == own.frame.count > 0
    assert tt.read_qasm(f"{V3}qubit q; x q;", qubits=2) + tt.Rotations([3], [0], [0.1], 2)
    with pytest.raises(ArgumentError, match="qubits: 1 asked, and the circuit on 3 qubits uses others too"):
        tt.read_qasm(text, qubits=1)
    for qubits in (0, 129, 2.0, True, "3"):
        with pytest.raises(ArgumentError, match="qubits: not a whole number from 1 to 128"):
            tt.read_qasm(text, qubits=qubits)


def test_layouts_that_do_not_fit_are_refused():
    text = f"{V3}qubit[3] q; x q[2];"
    for layout in ([0, 0, 1], [], ["a"], [-1, 0], 5):
        with pytest.raises(ArgumentError, match="start_layout: no list of different qubits"):
            tt.read_qasm(text, start_layout=layout)
    with pytest.raises(ArgumentError, match="end_layout: names qubit 7 of a circuit on 3 qubits"):
        tt.read_qasm(text, end_layout=[7, 0, 1])
    with pytest.raises(ArgumentError, match="end_layout: lists 2 qubits where start_layout lists 3"):
        tt.read_qasm(text, start_layout=[0, 1, 2], end_layout=[0, 1])
    with pytest.raises(ArgumentError, match="start_layout: lists 2 qubits, and gates act on others too"):
        tt.read_qasm(text, start_layout=[0, 1])
    error = refused(f"{V3}// trueturn: start_layout = [0, 0]\nqubit[2] q;")
    assert (error.line, "no list of different qubits" in str(error)) == (3, True)
    assert "said twice" in str(refused(f"{V3}// trueturn: end_layout = [0]\n// trueturn: end_layout = [0]\nqubit q;"))


# --- parts ---

PARTS = f"""{V3}qubit[2] q;
h q[0];
x q[1];
cx q[0], q[1]; rz(0.7) q[1]; cx q[0], q[1];
for int k in [1:3] {{ rx(0.1) q; }}
h q[0];
ry(-pi/2) q[1];
"""


def test_only_the_evolution_is_judged():
    for prepare, basis in (((0, 2), (6, 8)), ("0:2", "6:8"), ("lines 4-5", "lines 8-9")):
        circuit = tt.read_circuit(PARTS, prepare=prepare, basis=basis)
        assert circuit.gates == 8
        assert circuit.evolution.angle_totals().near(tt.Operator("0.35 Z_0 Z_1 + 0.15 X_0 + 0.15 X_1", qubits=2), 1e-15)
        assert not circuit.evolution.frame.count
        whole = matrix(circuit.basis) @ matrix(circuit.evolution) @ matrix(circuit.preparation)
        assert np.linalg.norm(whole - unitary(PARTS)) < 1e-14
        assert tt.read_qasm(PARTS, prepare=prepare, basis=basis) == circuit.evolution


def test_swaps_while_preparing_move_the_labels_of_the_evolution():
    text = f"{V3}qubit[2] q; swap q[0], q[1]; rx(0.2) q[0]; swap q[1], q[0]; h q[0];"
    circuit = tt.read_circuit(text, prepare=(0, 1), basis=(2, 4), end_layout=[0, 1])
    assert circuit.evolution == tt.Rotations([0b10], [0], [0.1], 2)
    assert circuit.preparation.relabelling == (0, 1)
    whole = matrix(circuit.basis) @ matrix(circuit.evolution) @ matrix(circuit.preparation)
    assert np.linalg.norm(whole - unitary(text)) < 1e-14


def test_parts_that_are_out_of_order_are_refused():
    assert "prepare: names gates after others" in str(refused(PARTS, prepare=(1, 2)))
    assert "basis: ends before the last gate" in str(refused(PARTS, basis=(5, 6)))
    assert "name the same gate" in str(refused(PARTS, prepare=(0, 2), basis=(1, 8)))
    with pytest.raises(ArgumentError, match=r"basis: ends after the last gate \(99\); the circuit has 8 gates"):
        tt.read_qasm(PARTS, basis=(7, 99))
    for given_range in ((2, 1), (0,), "first", "lines 5-2", (0.0, 1), -1):
        with pytest.raises(ArgumentError, match="prepare: no range of gates"):
            tt.read_qasm(PARTS, prepare=given_range)


# --- notes and options ---


def test_what_is_left_out_is_noted_with_its_line():
    text = f"{V3}qubit[2] q;\nbit[2] c;\n@label here\nh q;\ndelay[20ns] q;\nc = measure q;\n#pragma simulate\n"
    lines = {note.line: note.text for note in tt.read_circuit(text).notes}
    assert sorted(lines) == [5, 7, 8]
    assert "annotations" in lines[5] and "delays" in lines[7] and "measurements" in lines[8]


def test_options_out_of_range_are_refused():
    with pytest.raises(ArgumentError, match=r"quarter_turns: unknown \('clif'\); give one of auto, clifford"):
        tt.read_qasm(f"{V3}qubit q;", quarter_turns="clif")
    with pytest.raises(ArgumentError, match=r"expansion_limit: no number of gates \(0\)"):
        tt.read_qasm(f"{V3}qubit q;", expansion_limit=0)
    with pytest.raises(ArgumentError, match="path_or_text: neither a path nor a text"):
        tt.read_qasm(5)
    assert "cannot be read (no_such.qasm: No such file" in str(refused("no_such.qasm"))
    text = f"{V3}qubit q; for int k in [0:9999] {{ rz(0.1*k) q; }}"
    assert tt.read_qasm(text).count == 10_000
    assert "raise expansion_limit" in str(refused(text, expansion_limit=100))


# --- includes ---


def test_files_are_included_from_the_folder_of_the_circuit_only(tmp_path):
    folder = tmp_path / "circuits"
    (folder / "parts").mkdir(parents=True)
    (tmp_path / "outside.inc").write_text("gate zz(t) a, b { cx a, b; rz(t) b; cx a, b; }\n")
    (folder / "parts" / "mine.inc").write_text("gate zz(t) a, b { cx a, b; rz(t) b; cx a, b; }\n")
    (folder / "broken.inc").write_text("\n\ngate zz(t) a, b { cx a; }\n")
    (folder / "link.inc").symlink_to(tmp_path / "outside.inc")
    circuit = folder / "circuit.qasm"

    def read(name):
        circuit.write_text(f'{V3}include "{name}";\nqubit[2] q; zz(0.4) q[0], q[1];\n')
        return tt.read_qasm(circuit)

    assert read("parts/mine.inc") == tt.Rotations([0], [3], [0.2], 2)
    for name in ("../outside.inc", str(tmp_path / "outside.inc"), "link.inc", "parts/../../outside.inc"):
        with pytest.raises(QasmError, match="lies outside of the circuit's folder") as caught:
            read(name)
        assert caught.value.line == 3
    with pytest.raises(QasmError, match=r"cannot be included \(none.inc\); it cannot be read"):
        read("none.inc")
    with pytest.raises(QasmError, match=r"broken\.inc: line 3, column 19: cx takes 2 qubits") as caught:
        read("broken.inc")
    assert (caught.value.path, caught.value.line) == ("broken.inc", 3)
    assert "a circuit given as text includes the standard libraries only" in str(
        refused('include "mine.inc";\nqubit q;')
    )


# --- messages ---

UNSUPPORTED = {
    "if": "bit c; if (c == 1) { x q; }",
    "while": "while (true) { x q; }",
    "reset": "reset q;",
    "input": "input float t;",
    "float": "float t = 0.5;",
    "def": "def f(qubit a) { x a; }",
    "defcal": "defcal x q { }",
    "opaque": "opaque g a;",
    "switch": "switch (1) { case 1 { } }",
    "an assignment": "t = 5;",
}


@pytest.mark.parametrize("word", UNSUPPORTED)
def test_valid_language_that_is_no_known_unitary_is_called_unsupported(word):
    error = refused(f"{V3}qubit q;\n{UNSUPPORTED[word]}")
    assert error.line == 4
    assert "unsupported here" in str(error) and word in str(error)


MESSAGES = {
    "qubit[2] q; h q[0:0:1];": "a range with the step 0",
    "qubit[2] q; measure q -> q;": "no register of bits of this name (q)",
    "qubit[2] q; bit c; c = measure q;": "measure of 2 qubits into 1 bits",
    "qubit q; bit c; for int i in [0:1] { c = measure q; }": "measure inside a loop or a branch",
    "qubit q; gate g(a, a) b { x b; }": "two parameters of one name (a)",
    "qubit q; gate g a { x b; }": "gate g has no qubit of this name (b)",
    "qubit q; gate g a { rz(t) a; }": "no constant of this name (t)",
    "qubit q; gate x a { h a; }": "a gate of this name exists already (x)",
    "qubit q; const int k = 0.5;": "no whole number",
    "qubit q; ctrl(0) @ x q;": "no number of controls from 1 to 128",
    "qubit q; rz(true) q;": "rz takes a number (true)",
    "qubit q; rz(cosh(1)) q;": "no function of this name",
    "qubit q; rz(sin(1, 2)) q;": "sin takes another number of values (2 given)",
    "qubit q; rz(arccos(2)) q;": "arccos has no real value there",
    "qubit q; rz(log(0)) q;": "log has no real value there",
    "qubit q; const int k = 2.5;": "no whole number (2.5); declare it as const float",
    "qubit q; pow(true) @ x q;": "pow: no exponent up to 2**53 (true)",
    "qubit q; ctrl(2.5) @ x q, q;": "no number of controls from 1 to 128 (2.5)",
    "qubit q; qubit[2.5] r;": "no whole number (2.5)",
    "qubit q; gate g a { for int i in [0:m] { h a; } } g q;": "no constant of this name (m)",
    "qubit q; gate g(t) a { for int i in [0:t] { h a; } } g(2) q;": "in gate g, line 3: no whole number (2.0)",
    "qubit q; gate g a { for int i in [0:2] { g a; } } g q;": "gate g calls itself (g)",
    "qubit q; gate g a { for int i in [0:2] { h b; } } g q;": "gate g has no qubit of this name (b)",
    "qubit q; gate g a { if (true) { reset a; } } g q;": "unsupported here (reset)",
    "qubit q; gate g a { if (c[0]) { x a; } } g q;": "an entry of a register is no value known before the circuit runs (c",
    "qubit q; gate g(t) a { if (t) { x a; } } g(0.5) q;": "in gate g, line 3: if takes true or false (0.5)",
    "qubit q; bit c; if (c) { x q; }": "a branch on measured bits is valid OpenQASM but unsupported here (if, c)",
    "qubit q; bit[2] c; if (!c[0] && true) x q; else h q;": "a branch on measured bits is valid OpenQASM but unsupported",
    "qubit q; if (d == 1) x q;": "no constant of this name (d)",
    "qubit q; if (true) { qubit p; }": "declared inside a block (qubit); move it out",
    "qubit q; if (false) gate g a { x a; }": "declared inside a block (gate); move it out",
    "qubit q; if (true) { measure q; }": "measure inside a loop or a branch",
    "qubit q; if (true)": "expected the body of the branch",
    "qubit q; if (true) x q; else }": "expected the body after else",
    "qubit q; if true x q;": "expected '(' after if",
    "qubit q; rz(c[0]) q;": "an entry of a register is no value known before the circuit runs (c",
    "qubit q; rz(0.0**-1) q;": "a power of zero below 0",
    "qubit q; for float t in [0:1] { x q; }": "a loop over something else than whole numbers",
    "qubit[3] q; pow(0.5) @ cswap q[0], q[1], q[2]; g q;": "no gate of this name (g)",
    "qubit q; gate g a { pow(2) @ h; }": "expected a qubit or a register",
    "qubit q; h p;": "no register of this name (p)",
    "qubit q; h(0.1) q;": "h takes 0 angles (1 given)",
    "gphase(0.1);": "no qubits are declared",
    "qubit q; let a = q[0:-1:1];": "no entry of the register (q[1])",
    "qubit[2] q; gate g(t) a { rz(1/t) a; } g(0) q[0];": "in gate g, line 3: a division by zero",
    "qubit[2] q; h q[1:0];": "an operand of no qubits",
    "qubit[2] def;": "a word of the language cannot be a name (def)",
    "qubit q; gate g a { barrier b; x a; }": "gate g has no qubit of this name (b)",
    "qubit q; for int i in [0:2]": "expected the body of the loop",
    "qubit q; ctrl @x q;": "expected '@' after a modifier",
    "qubit q; @ x q;": "expected a statement",
    "qubit q; @remark": "expected a statement after an annotation",
    "qubit q; §": "a character that the language does not have",
}


@pytest.mark.parametrize("text", MESSAGES)
def test_each_message_says_what_is_wrong(text):
    error = refused(V3 + text)
    assert error.line == 3
    assert MESSAGES[text] in str(error)


@given(programs(max_size=4), st.data())
@settings(max_examples=150)
def test_mutated_texts_are_read_or_refused_and_never_more_freely_than_by_the_standard(text, data):
    for _ in range(data.draw(st.integers(1, 3))):
        at = data.draw(st.integers(0, len(text)))
        length = data.draw(st.integers(0, 6))
        piece = data.draw(st.text(alphabet="()[]{};:,@*/+-.=1e0qabc \n\"'πhx$", max_size=3))
        text = text[:at] + piece + text[at + length :]
    try:
        tt.read_qasm(text)
    except QasmError as error:
        assert error.line >= 1 and error.column >= 1
        return
    openqasm3.parse(text)


@given(st.text(max_size=60))
def test_any_text_is_read_or_refused(text):
    with contextlib.suppress(QasmError):
        tt.read_qasm(f"{text};")


def test_truncated_texts_are_refused_or_shorter():
    text = (CASES / "v08_gate_definitions.qasm").read_text(encoding="utf-8")
    for length in range(len(text)):
        try:
            tt.read_qasm(text[:length] + ("" if length > 20 else "\n"))
        except QasmError as error:
            assert error.line <= text.count("\n") + 1
