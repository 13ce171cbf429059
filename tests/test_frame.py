"""Frames: the Clifford and the relabelling that follow the rotations of a circuit, phases included."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trueturn as tt
from circuits import matrix, relabelling_matrix
from strategies import circuits, pauli_strings
from trueturn.errors import RotationError

U = 2.0**-53


@st.composite
def cliffords(draw, qubits, max_count=14):
    """Rotations by multiples of π/4."""
    listed = draw(st.lists(st.tuples(pauli_strings(qubits), st.integers(-9, 9)), max_size=max_count))
    angles = [turns * (math.pi / 4) for _, turns in listed]
    phase = draw(st.integers(-8, 8)) * (math.pi / 4)
    return tt.Rotations([x for (x, _), _ in listed], [z for (_, z), _ in listed], angles, qubits, phase)


@st.composite
def framed(draw, qubits, max_count=4):
    """Circuits with a Clifford and a relabelling at their end."""
    plain = draw(circuits(qubits=qubits, max_count=max_count))
    return plain.with_frame(draw(cliffords(qubits)), draw(st.permutations(range(qubits))))


def slack(*made):
    """5 u a rotation and u |θ|, on either side, in the Frobenius norm of at most 16 columns, products included."""
    rotations = sum(circuit.rounding_bound(1) for circuit in made)
    return 8 * 4 * (rotations + 64 * U)


@given(st.integers(1, 4).flatmap(lambda n: st.tuples(cliffords(n), st.permutations(range(n)))))
@settings(max_examples=200)
def test_a_clifford_is_kept_with_its_phase(drawn):
    clifford, moves = drawn
    made = tt.Rotations([], [], [], clifford.qubits).with_frame(clifford, moves)
    expected = relabelling_matrix(moves) @ matrix(clifford)
    assert np.linalg.norm(matrix(made) - expected) <= slack(clifford, made)
    # At most four turns a qubit and one Pauli string.
    assert made.frame.count <= 4 * clifford.qubits + 1


@given(st.integers(1, 3).flatmap(lambda n: st.tuples(framed(n), framed(n))))
def test_one_after_the_other_multiplies(pair):
    first, second = pair
    assert np.linalg.norm(matrix(first + second) - matrix(second) @ matrix(first)) <= slack(first, second)


@given(st.integers(1, 3).flatmap(framed))
def test_the_inverse_undoes(circuit):
    assert np.linalg.norm(matrix(circuit.inverse()) @ matrix(circuit) - np.eye(2**circuit.qubits)) <= slack(circuit)


@given(st.integers(1, 3).flatmap(framed), st.integers(0, 30))
def test_repeats_are_powers(circuit, repeat):
    expected = np.linalg.matrix_power(matrix(circuit), repeat)
    assert np.linalg.norm(matrix(circuit.times(repeat)) - expected) <= (repeat + 1) * slack(circuit)


@given(st.integers(1, 5).flatmap(framed), st.integers(0, 2**32 - 1))
def test_a_state_is_evolved_by_frame_and_relabelling(circuit, seed):
    state = tt.State.random(circuit.qubits, seed)
    expected = matrix(circuit) @ state.amplitudes
    state.apply(circuit)
    assert np.linalg.norm(state.amplitudes - expected) <= slack(circuit)


def test_relabelling_alone_moves_amplitudes_whole():
    moves = [3, 0, 1, 17, *range(4, 17), 2]
    state = tt.State.random(18, 5)
    before = state.amplitudes.copy()
    state.apply(tt.Rotations([], [], [], 18).with_frame(relabelling=moves))
    index = np.arange(1 << 18)
    target = sum((index >> qubit & 1) << to for qubit, to in enumerate(moves))
    assert (state.amplitudes[target] == before).all()
    assert state.last_run.passes == 4  # a cycle over five qubits


def test_three_cx_are_a_relabelling():
    quarter = math.pi / 4
    cx = lambda c, t: ([0, 1 << t, 1 << t], [1 << c, 0, 1 << c], [quarter, quarter, -quarter])  # noqa: E731
    columns = [cx(0, 1), cx(1, 0), cx(0, 1)]
    x, z, angles = ([value for column in columns for value in column[k]] for k in range(3))
    swap = tt.Rotations(x, z, angles, 2, 3 * quarter)
    made = tt.Rotations([], [], [], 2).with_frame(swap)
    assert made.relabelling == (1, 0)
    assert made.frame == tt.Rotations([], [], [], 2)


def test_a_frame_that_does_nothing_is_dropped_and_its_phase_kept():
    half_turns = tt.Rotations([1, 1], [0, 0], [math.pi / 2, math.pi / 2], 2)
    made = tt.Rotations([], [], [], 2).with_frame(half_turns)
    assert made == tt.Rotations([], [], [], 2, math.pi)


def test_a_million_repeats_of_a_framed_step_take_its_period():
    step = tt.Rotations([1], [0], [0.1], 3).with_frame(relabelling=[1, 2, 0])
    many = step.times(3_000_001)
    assert many.count == 3_000_001
    assert [block.repeat for block in many.blocks] == [1_000_000, 1]
    assert many.relabelling == (1, 2, 0)


def test_repeats_that_never_come_back_are_refused():
    # A cycle over 2, 3, 5, 7, 11, 13, 17, 19 and 23 qubits has the period 223092870.
    moves, start, string = [], 0, 0
    for length in (2, 3, 5, 7, 11, 13, 17, 19, 23):
        moves += [start + (k + 1) % length for k in range(length)]
        string |= 1 << start
        start += length
    step = tt.Rotations([string], [0], [0.1], start).with_frame(relabelling=moves)
    with pytest.raises(RotationError, match=r"k: .* come back to none"):
        step.times(10**8)


def test_frames_that_are_none_are_refused():
    circuit = tt.Rotations([1], [0], [0.1], 2)
    with pytest.raises(RotationError, match=r"clifford: no multiple of π/4 \(0.1\)"):
        circuit.with_frame(circuit)
    with pytest.raises(RotationError, match="clifford: no Rotations without a frame on 2 qubits"):
        circuit.with_frame(tt.Rotations([], [], [], 3))
    with pytest.raises(RotationError, match=r"relabelling: no permutation of 2 qubits \(\[0, 0\]\)"):
        circuit.with_frame(relabelling=[0, 0])
