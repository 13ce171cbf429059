"""Circuits: their algebra, their limits, and what evolution by them keeps."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from strategies import circuits, commuting_operators, operators, states
from trueturn import Operator
from trueturn.errors import RotationError
from trueturn.rotations import Rotations
from trueturn.state import State

UNIT_ROUNDOFF = 2.0**-53


def evolved(circuit, vector):
    state = State.from_array(vector.copy())
    state.apply(circuit)
    return state.amplitudes


def listing(circuit):
    return list(zip(circuit.x_masks, circuit.z_masks, circuit.angles.tolist(), strict=True))


# What evolution keeps


@given(st.data())
def test_norm_is_kept(data):
    circuit = data.draw(circuits())
    vector = data.draw(states(circuit.qubits))
    # The start is off by 4 u, both norms sum up to 32 squares.
    assert abs(np.linalg.norm(evolved(circuit, vector)) - 1) <= circuit.rounding_bound() + 72 * UNIT_ROUNDOFF


@given(st.data())
def test_the_inverse_undoes(data):
    circuit = data.draw(circuits())
    vector = data.draw(states(circuit.qubits))
    both = circuit + circuit.inverse()
    gap = np.linalg.norm(evolved(both, vector) - vector)
    assert gap <= circuit.rounding_bound() + circuit.inverse().rounding_bound()
    assert both.phase == 0
    assert circuit.inverse().inverse() == circuit


@given(commuting_operators(max_qubits=5), st.randoms(use_true_random=False), st.data())
def test_commuting_terms_reorder_freely(operator, random, data):
    vector = data.draw(states(operator.qubits))
    rows = list(zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True))
    shuffled = random.sample(rows, len(rows))
    found = [
        Rotations([x for x, _, _ in part], [z for _, z, _ in part], [c for _, _, c in part], operator.qubits)
        for part in (rows, shuffled)
    ]
    gap = np.linalg.norm(evolved(found[0], vector) - evolved(found[1], vector))
    assert gap <= 2 * found[0].rounding_bound()


@given(st.data())
def test_evolution_is_linear(data):
    circuit = data.draw(circuits())
    left, right = data.draw(states(circuit.qubits)), data.draw(states(circuit.qubits))
    sum_first = evolved(circuit, 0.6 * left + 0.8j * right)
    sum_last = 0.6 * evolved(circuit, left) + 0.8j * evolved(circuit, right)
    # Vectors of length up to 1.4 on either side, and the sums themselves.
    assert np.linalg.norm(sum_first - sum_last) <= 2.8 * circuit.rounding_bound() + 16 * UNIT_ROUNDOFF


@given(st.data())
def test_renaming_qubits_permutes_bits(data):
    circuit = data.draw(circuits())
    n = circuit.qubits
    names = data.draw(st.permutations(range(n)))

    def renamed(mask):
        return sum((int(mask) >> q & 1) << names[q] for q in range(n))

    vector = data.draw(states(n))
    places = np.array([renamed(index) for index in range(2**n)])
    moved = np.empty_like(vector)
    moved[places] = vector
    other = Rotations(map(renamed, circuit.x_masks), map(renamed, circuit.z_masks), circuit.angles, n, circuit.phase)
    gap = np.linalg.norm(evolved(other, moved)[places] - evolved(circuit, vector))
    assert gap <= 2 * circuit.rounding_bound()


@given(st.data())
def test_rotating_a_state_is_applying_one_rotation(data):
    operator = data.draw(operators(min_terms=1).filter(lambda op: len(op.without_identity())))
    vector, angle = data.draw(states(operator.qubits)), data.draw(st.floats(-50, 50))
    bare = operator.without_identity()
    x, z = int(bare.x_masks[0]), int(bare.z_masks[0])
    letters = [("IXZY"[(x >> q & 1) + 2 * (z >> q & 1)], q) for q in range(operator.qubits)]
    state = State.from_array(vector.copy())
    state.rotate(" ".join(f"{letter}_{q}" for letter, q in letters if letter != "I"), angle)
    assert np.array_equal(state.amplitudes, evolved(Rotations([x], [z], [angle], operator.qubits), vector))


def test_rotating_by_the_empty_string_turns_the_phase():
    state = State.product("0+")
    before = state.amplitudes.copy()
    state.rotate("", 0.4)
    assert np.abs(state.amplitudes - np.exp(-0.4j) * before).max() < 4 * UNIT_ROUNDOFF


# Algebra


@given(circuits(), st.integers(0, 5))
def test_repeats_equal_writing_out(circuit, k):
    many = circuit.times(k)
    assert many.count == k * circuit.count
    assert listing(many) == k * listing(circuit)
    assert many.phase == k * circuit.phase
    assert many.qubits == circuit.qubits


@given(st.data())
def test_sums_run_one_circuit_after_the_other(data):
    first = data.draw(circuits())
    second = data.draw(circuits(qubits=first.qubits))
    both = first + second
    assert listing(both) == listing(first) + listing(second)
    assert both.phase == first.phase + second.phase
    assert both.count == len(both) == first.count + second.count


@given(circuits())
def test_the_inverse_reverses_order_and_signs(circuit):
    back = circuit.times(2).inverse()
    assert listing(back) == [(x, z, -angle) for x, z, angle in reversed(listing(circuit.times(2)))]
    assert back.phase == -2 * circuit.phase


def test_repeats_are_never_written_out():
    step = Rotations([1, 2], [0, 3], [0.25, -0.5], 2)
    many = (step.times(10**6) + step).times(10**6)
    assert many.count == 2 * (10**6 + 1) * 10**6
    assert many.inverse().count == many.count
    assert [(block.rotations.count, block.repeat) for block in step.times(10**12).blocks] == [(2, 10**12)]
    totals = many.angle_totals()
    # Quarters times whole numbers below 2^53: exact.
    assert totals == Operator.from_masks([1, 2], [0, 3], [0.25 * 1000001e6, -0.5 * 1000001e6], 2)
    assert step.times(2**62).count == 2**63
    with pytest.raises(
        RotationError, match=r"^k: the circuit runs more rotations than 64 bits count; use fewer repeats"
    ):
        step.times(2**63).times(2**63)
    with pytest.raises(RotationError, match="64 bits"):
        step.times(2**62) + step.times(2**62)


def test_writing_out_stops_at_ten_million():
    step = Rotations([1], [0], [0.1], 1)
    assert len(step.times(10**6).angles) == 10**6
    for name in ("angles", "x_masks", "z_masks"):
        with pytest.raises(RotationError, match=r"^rotations: too many to write out \(10000001\); use .blocks"):
            getattr(step.times(10**7 + 1), name)


@given(circuits())
def test_angle_totals_add_the_angles_of_each_string(circuit):
    totals = circuit.times(3).angle_totals()
    expected: dict[tuple[int, int], float] = {}
    for x, z, angle in listing(circuit):
        expected[x, z] = expected.get((x, z), 0.0) + 3 * angle
    found = dict(zip(zip(totals.x_masks, totals.z_masks, strict=True), totals.coefficients, strict=True))
    for key, value in expected.items():
        # Up to 12 sums of numbers below 150 each.
        assert abs(found.get(key, 0.0) - value) <= 24 * UNIT_ROUNDOFF * 12 * 150


@given(circuits())
def test_equality_means_equal_lists(circuit):
    same = Rotations(circuit.x_masks, circuit.z_masks, circuit.angles, circuit.qubits, circuit.phase)
    assert same == circuit
    assert hash(same) == hash(circuit)
    assert Rotations([1], [0], [0.1], 1) != Rotations([1], [0], [0.2], 1)
    assert circuit != "circuit"


def test_angles_are_kept_as_given():
    angles = [1e300, -0.0, 5e-324, 1e-17, 400.0]
    assert Rotations([1] * 5, [0] * 5, angles, 1).angles.tolist() == angles


def test_masks_hold_128_qubits():
    circuit = Rotations([1 << 127], [(1 << 128) - 1], [0.1], 128)
    assert circuit.x_masks[0] == 1 << 127
    assert circuit.z_masks[0] == (1 << 128) - 1


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (
            lambda: Rotations([1], [0], [math.nan], 1),
            r"^angles: not finite \(angle 0 is NaN\); give finite radians",
        ),
        (lambda: Rotations([1, 1], [0, 0], [0.1, -math.inf], 1), r"^angles: not finite \(angle 1 is -inf\)"),
        (lambda: Rotations([1], [0], [0.1], 1, phase=math.inf), r"^phase: not finite \(inf\)"),
        (lambda: Rotations([1], [0], [0.1], 1, phase="x"), r"^phase: not a number \('x'\)"),
        (lambda: Rotations([1], [0], [0.1j], 1), r"^angles: not real numbers"),
        (lambda: Rotations([1], [0], np.array([0.1j]), 1), r"^angles: not real numbers"),
        (lambda: Rotations([1], [0], ["much"], 1), r"^angles: not real numbers"),
        (lambda: Rotations([1], [0], [[0.1]], 1), r"^angles: not a list of real numbers \(shape \(1, 1\)\)"),
        (
            lambda: Rotations([1, 2], [0], [0.1], 2),
            r"^angles: lengths differ \(2 x masks, 1 z masks, 1 angles\)",
        ),
        (
            lambda: Rotations([4], [0], [0.1], 2),
            r"^x, z: rotation 0 acts on qubit 2, outside of the 2 qubits",
        ),
        (lambda: Rotations([0], [4], [0.1], 2), r"^x, z: rotation 0 acts on qubit 2"),
        (lambda: Rotations([-1], [0], [0.1], 2), r"^x: a mask is negative"),
        (lambda: Rotations([0.5], [0], [0.1], 2), r"^x: not a sequence of whole numbers"),
        (lambda: Rotations([0], [1 << 128], [0.1], 128), r"^z: a mask is negative or longer than 128 bits"),
        (lambda: Rotations([], [], [], 129), r"^qubits: not a number of qubits \(129\)"),
        (lambda: Rotations([], [], [], -1), r"^qubits: "),
        (lambda: Rotations([], [], [], True), r"^qubits: "),
        (lambda: Rotations([], [], [], np.array([1, 2])), r"^qubits: "),
        (lambda: Rotations([1], [0], [0.1], 1).times(-1), r"^k: not a repeat count \(-1\)"),
        (lambda: Rotations([1], [0], [0.1], 1).times(1.0), r"^k: not a repeat count \(1.0\)"),
        (lambda: Rotations([1], [0], [0.1], 1).times(2**64), r"^k: not a repeat count"),
        (lambda: Rotations([1], [0], [0.1], 1).times(np.array([1, 2])), r"^k: not a repeat count"),
        (lambda: Rotations([1], [0], [0.1], 1, phase=1e308).times(10), r"^phase: grows out of range"),
        (lambda: Rotations([1], [0], [0.1], 1) + Rotations([1], [0], [0.1], 2), r"^other: acts on 2 qubits"),
    ],
)
def test_lists_that_make_no_circuit_are_refused_by_name(make, words):
    with pytest.raises(RotationError, match=words):
        make()
