"""Random Pauli frames leave a circuit's unitary unchanged, phase included."""

from __future__ import annotations

import pickle

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import circuits
import strategies
import trueturn as tt
from trueturn import randomised

U = 2.0**-53


def rounding(*found):
    """Dense products: at most 2^n + 5 roundings for each entry and rotation, below 30 u each for n ≤ 4; cosines of
    π/2 as a float are off by 6e-17, which counts as a rounding too; phases up to 50 are off by 50 u."""
    return U * (100 + 30 * sum(circuit.count for circuit in found))


@given(
    circuit=strategies.circuits(max_qubits=4),
    repeat=st.integers(1, 4),
    tail=st.booleans(),
    every=st.none() | st.integers(1, 5),
    seed=st.integers(0, 10**6),
    index=st.integers(0, 50),
)
def test_frames_leave_the_unitary_unchanged_with_its_phase(circuit, repeat, tail, every, seed, index):
    whole = circuit.times(repeat) + circuit.inverse() if tail else circuit.times(repeat)
    framed = randomised.framed(whole, seed, every=every).sample(index)
    expected = circuits.matrix(whole)
    assert circuits.distance(circuits.matrix(framed), expected) <= 2**2 * rounding(whole, framed)


def test_nested_blocks_keep_their_unitary_and_travel():
    one = tt.Rotations([1, 2, 3], [0, 1, 3], [0.3, -0.2, 0.5], 2, phase=0.4)
    nested = (one.times(3) + one.inverse()).times(4) + one
    ensemble = randomised.framed(nested, seed=6)
    copy = pickle.loads(pickle.dumps(ensemble))
    assert copy.circuit == nested and copy == ensemble
    for sample in ensemble.samples(5):
        # Some 200 rotations on two qubits.
        assert circuits.distance(circuits.matrix(sample), circuits.matrix(nested)) <= rounding(nested, sample)
    assert copy.samples(5) == ensemble.samples(5)


def test_angles_keep_their_size_and_signs_are_even_handed():
    circuit = tt.formula("strang").rotations(circuits.P3, 1.0, 40)
    sizes = np.abs(circuit.angles)
    flipped = 0
    samples = 25
    for sample in randomised.framed(circuit, seed=1).samples(samples):
        kept = sample.angles[np.abs(sample.angles) != np.pi / 2]
        assert np.array_equal(np.abs(kept), sizes)
        flipped += np.count_nonzero(kept != circuit.angles)
    # A string other than the identity anticommutes with half of the 4^n frames. Angles of one step share a frame, so
    # there are 40 independent steps in a sample, each a fraction within [0, 1]: Hoeffding for a chance of 1e-9.
    width = np.sqrt(np.log(2e9) / (2 * samples * 40))
    assert abs(flipped / (samples * circuit.count) - 0.5) <= width


def test_frames_cost_no_two_qubit_gates_and_one_turn_a_qubit_at_most():
    circuit = tt.formula("lie").rotations(circuits.P3, 1.0, 10)
    for sample in randomised.framed(circuit, seed=2).samples(5):
        assert sample.two_qubit_gates() == circuit.two_qubit_gates()
        assert circuit.count < sample.count <= circuit.count + 11 * 3


def test_shorter_segments_mean_more_frames():
    circuit = tt.formula("lie").rotations(circuits.P3, 1.0, 10)
    steps = randomised.framed(circuit, seed=2).sample(0).count
    single = randomised.framed(circuit, seed=2, every=1).sample(0).count
    assert single > steps


def test_an_empty_circuit_stays_empty():
    empty = tt.Rotations([], [], [], 3, phase=0.25)
    assert randomised.framed(empty, seed=0).sample(0) == empty


def test_frames_approximate_nothing_and_have_no_bound():
    ensemble = randomised.framed(tt.Rotations([1], [0], [0.1], 1), seed=0)
    assert ensemble.channel_bound() is None and ensemble.operator is None and ensemble.time is None


@pytest.mark.parametrize(
    ("arguments", "kind", "message"),
    [
        ({"seed": 0.5}, tt.errors.ArgumentError, r"seed: is not a whole number from 0 \(0.5\)"),
        ({"every": 0}, tt.errors.ArgumentError, r"every: is not a whole number from 1 \(0\)"),
        ({"rotations": "rz"}, tt.errors.RotationError, "rotations: is no circuit"),
        (
            {"rotations": tt.Rotations([1], [0], [0.1], 1).times(2**40)},
            tt.errors.ArgumentError,
            "rotations: makes too many rotations",
        ),
    ],
)
def test_frames_refuse(arguments, kind, message):
    with pytest.raises(kind, match=message):
        randomised.framed(**({"rotations": tt.Rotations([1], [0], [0.1], 1), "seed": 0} | arguments))
