"""Saved gates: the count is what a plain gate-level simulator cancels, and the order is the best there is."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import circuits
import oracle
import strategies
import trueturn as tt
from trueturn import errors
from trueturn.ladders import LADDERS, saved_gates

H = np.array([[1, 1], [1, -1]]) / np.sqrt(2)
TO_Z = {"X": H, "Y": H @ np.diag([1, -1j])}  # V P V† = Z

UNDO = {"cx": "cx", "to_X": "from_X", "from_X": "to_X", "to_Y": "from_Y", "from_Y": "to_Y"}


def letter(x, z, qubit):
    return "IXZY"[(x >> qubit & 1) + 2 * (z >> qubit & 1)]


def gates_of(circuit, order):
    """Gates (name, qubits, angle): to the Z basis, down the ladder, z rotation, and back."""
    gates = []
    for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
        qubits = [q for q in range(circuit.qubits) if letter(x, z, q) != "I"]
        if order == "z-first":
            qubits = [q for name in "ZXY" for q in qubits if letter(x, z, q) == name]
        if not qubits:
            continue
        down = [("to_" + letter(x, z, q), (q,), 0.0) for q in qubits if letter(x, z, q) != "Z"]
        down += [("cx", pair, 0.0) for pair in itertools.pairwise(qubits)]
        up = [(name.replace("to_", "from_"), on, 0.0) for name, on, _ in reversed(down)]
        gates += [*down, ("rz", (qubits[-1],), angle), *up]
    return gates


def cancelled(gates):
    """Take away neighbours that undo each other until none is left; gates on other qubits do not separate."""
    gates = list(gates)
    found = True
    while found:
        found = False
        for first in range(len(gates)):
            name, on, _ = gates[first]
            second = next((k for k in range(first + 1, len(gates)) if set(gates[k][1]) & set(on)), None)
            if second is not None and gates[second][:2] == (UNDO.get(name), on):
                del gates[second], gates[first]
                found = True
                break
    return gates


def matrix(gates, qubits):
    total = np.eye(2**qubits, dtype=complex)
    for name, on, angle in gates:
        if name == "cx":
            control, target = on
            zero = (np.eye(2**qubits) + oracle.pauli(f"Z_{control}", qubits)) / 2
            once = zero + (np.eye(2**qubits) - zero) @ oracle.pauli(f"X_{target}", qubits)
        elif name == "rz":
            once = oracle.rotation(0, 1 << on[0], angle, qubits)
        else:
            small = TO_Z[name[-1]] if name.startswith("to_") else TO_Z[name[-1]].conj().T
            once = np.kron(np.kron(np.eye(2 ** (qubits - on[0] - 1)), small), np.eye(2 ** on[0]))
        total = once @ total
    return total


def two_qubit(gates):
    return sum(name == "cx" for name, _, _ in gates)


@given(circuit=strategies.circuits(max_qubits=4, max_count=4), order=st.sampled_from(LADDERS))
@settings(max_examples=30)
def test_the_ladder_convention_carries_out_the_rotations_before_and_after_cancelling(circuit, order):
    gates = gates_of(circuit, order)
    assert two_qubit(gates) == circuit.two_qubit_gates()
    phase = circuit.phase - sum(angle for x, z, angle in columns(circuit) if not x | z)  # ladders leave out identities
    for listed in (gates, cancelled(gates)):
        found = np.exp(1j * phase) * matrix(listed, circuit.qubits)
        # At most 4 · 23 products of 16x16 unitaries, each off by less than 16 · 2^-53, and five angles of up to
        # 50 rad, each off by 50 · 2^-53: below 1e-12 in all.
        assert np.max(np.abs(found - circuits.matrix(circuit))) < 1e-12


def columns(circuit):
    return list(zip(circuit.x_masks.tolist(), circuit.z_masks.tolist(), circuit.angles.tolist(), strict=True))


@given(pair=st.lists(strategies.pauli_strings(5), min_size=2, max_size=2), order=st.sampled_from(LADDERS))
def test_two_rotations_save_exactly_what_the_simulator_cancels(pair, order):
    circuit = tt.Rotations([x for x, _ in pair], [z for _, z in pair], [0.3, 0.7], 5)
    gates = gates_of(circuit, order)
    assert saved_gates(circuit, order) == two_qubit(gates) - two_qubit(cancelled(gates))


@given(circuit=strategies.circuits(max_qubits=4, max_count=8), order=st.sampled_from(LADDERS))
def test_lists_never_claim_more_than_the_simulator_cancels(circuit, order):
    gates = gates_of(circuit, order)
    gone = two_qubit(gates) - two_qubit(cancelled(gates))
    assert saved_gates(circuit, order) <= gone
    full = [(x | z) == 2**circuit.qubits - 1 for x, z, _ in columns(circuit)]
    if all(full):  # nothing can cancel through a string on all qubits
        assert saved_gates(circuit, order) == gone


def test_known_savings():
    def circuit(text):
        h = tt.Operator(text)
        return tt.Rotations(h.x_masks, h.z_masks, h.coefficients, h.qubits)

    assert saved_gates(circuit("Z_0 Z_1 Z_2 + Z_0 Z_1 Z_3")) == 2
    assert saved_gates(circuit("X_0 Z_1 Z_2 X_3 + Y_0 Z_1 Z_2 Y_3")) == 0
    assert saved_gates(circuit("X_0 Z_1 Z_2 X_3 + Y_0 Z_1 Z_2 Y_3"), "z-first") == 2
    assert saved_gates(circuit("X_0 X_1 X_2 X_3 + X_0 X_1 X_2 Y_3")) == 4
    assert saved_gates(circuit("X_0 + Y_0 + Z_0 Z_1")) == 0
    assert saved_gates(tt.Rotations([], [], [], 3)) == 0


@given(circuit=strategies.circuits(max_qubits=3, max_count=4), order=st.sampled_from(LADDERS), k=st.integers(0, 4))
def test_repeats_count_as_if_written_out(circuit, order, k):
    repeated = circuit.times(k) + circuit + circuit.times(2).times(k)
    written = tt.Rotations(repeated.x_masks, repeated.z_masks, repeated.angles, circuit.qubits)
    assert saved_gates(repeated, order) == saved_gates(written, order)


def test_a_million_steps_are_counted_without_writing_them_out():
    h = tt.model.heisenberg(tt.lattice.chain(4), 1.0)
    partition = tt.Partition.of(h, "commuting").gate_saving()
    few, more, many = (saved_gates(tt.formula("lie").rotations(partition, 1.0, steps)) for steps in (2, 3, 10**8))
    assert many == few + (more - few) * (10**8 - 2)


@given(
    strings=st.lists(strategies.pauli_strings(4).filter(any), min_size=1, max_size=6, unique=True),
    order=st.sampled_from(LADDERS),
)
@settings(max_examples=25)
def test_no_order_of_single_strings_saves_more(strings, order):
    def saved(listed):
        return saved_gates(tt.Rotations([x for x, _ in listed], [z for _, z in listed], [1.0] * len(listed), 4), order)

    terms = tt.Operator.from_masks([x for x, _ in strings], [z for _, z in strings], [1.0] * len(strings), 4)
    made = tt.Partition.of(terms, "single").gate_saving(order)
    ordered = [(p.x_masks[0], p.z_masks[0]) for p in made.parts]
    assert saved(ordered) == max(map(saved, itertools.permutations(strings)))
    assert made.operator() == terms


@given(h=strategies.commuting_operators(max_qubits=4, max_terms=6), order=st.sampled_from(LADDERS))
@settings(max_examples=25)
def test_no_order_inside_a_part_saves_more(h, order):
    h = h.without_identity()
    if len(h) == 0:
        return
    part = tt.Partition([h]).gate_saving(order).parts[0]

    def saved(numbers):
        return saved_gates(
            tt.Rotations(h.x_masks[numbers], h.z_masks[numbers], h.coefficients[numbers], h.qubits), order
        )

    best = max(saved(list(numbers)) for numbers in itertools.permutations(range(len(h))))
    assert saved_gates(tt.Rotations(part.x_masks, part.z_masks, part.coefficients, h.qubits), order) == best


def test_the_next_part_and_its_first_string_share_most_with_the_last_string():
    texts = ["X_0 X_1 X_2", "Y_0 + Z_2", "Z_0 Z_1 + X_0 X_1 Z_2"]
    made = tt.Partition([tt.Operator(text, qubits=3) for text in texts]).gate_saving()
    assert [str(part) for part in made.parts] == [
        "1.0 X_0 X_1 X_2",
        "1.0 X_0 X_1 Z_2 + 1.0 Z_0 Z_1",
        "1.0 Y_0 + 1.0 Z_2",
    ]
    assert saved_gates(tt.formula("lie").rotations(made, 1.0, 1)) == 2


def many_body(qubits):
    """All products of three Z and all of three X."""
    masks = [1 << a | 1 << b | 1 << c for a, b, c in itertools.combinations(range(qubits), 3)]
    masks = masks[::2] + masks[1::2]
    none = [0] * len(masks)
    return tt.Operator.from_masks(masks + none, none + masks, np.linspace(0.1, 1.0, 2 * len(masks)), qubits) + 1.5


@pytest.mark.parametrize(
    ("h", "ladder"),
    [
        (many_body(6), "ascending"),
        (many_body(6), "z-first"),
        (tt.model.hubbard(tt.lattice.square(3, 3), hopping=1.0, repulsion=4.0, potential=0.5), "z-first"),
    ],
)
def test_gate_saving_saves_and_keeps_the_sum(h, ladder):
    given = tt.Partition.of(h, "commuting")
    made = given.gate_saving(ladder)
    assert made.operator() == h and made.identity == given.identity != 0
    assert made.parts[0] == given.parts[0]  # equal as an operator: the order of terms does not count
    before, after = (saved_gates(tt.formula("lie").rotations(p, 1.0, 1), ladder) for p in (given, made))
    assert after > before
    assert made.rule == f"commuting gate-saving({ladder})"
    if ladder == "ascending":
        by_rule = tt.Partition.of(h, "gate-saving")
        assert [str(part) for part in by_rule.parts] == [str(part) for part in made.parts]


@pytest.mark.parametrize(
    ("make", "kind", "pieces"),
    [
        (lambda: saved_gates(5), errors.RotationError, ["circuit:", "(5)", "formula.rotations"]),
        (
            lambda: saved_gates(tt.Rotations([], [], [], 1), "z-frist"),
            errors.ArgumentError,
            ["ladder:", "('z-frist')", "did you mean 'z-first'?"],
        ),
        (
            lambda: tt.Partition([tt.Operator("X_0")]).gate_saving(3),
            errors.ArgumentError,
            ["ladder:", "(3)", "choose one of 'ascending'"],
        ),
    ],
)
def test_bad_input_is_refused_with_argument_value_and_remedy(make, kind, pieces):
    with pytest.raises(kind) as caught:
        make()
    for piece in pieces:
        assert piece in str(caught.value)
