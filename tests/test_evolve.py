"""The engine rotates as the dense oracle and an index-by-index twin do, whatever passes it plans."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
from strategies import circuits, states
from trueturn.rotations import Rotations
from trueturn.state import State

UNIT_ROUNDOFF = 2.0**-53


def tolerance(circuit):
    """Both sides round 5 u a rotation at most (see `Rotations.rounding_bound`); the oracle's phase costs as
    much."""
    return 2 * circuit.rounding_bound() + 10 * UNIT_ROUNDOFF


def assert_follows_twin(circuit, seed=0, threads=1):
    state = State.random(circuit.qubits, seed)
    expected = oracle.rotated(circuit, state.amplitudes)
    state.apply(circuit, threads=threads)
    assert np.linalg.norm(state.amplitudes - expected) <= tolerance(circuit)
    return state


@given(st.data())
def test_circuits_follow_the_dense_oracle(data):
    circuit = data.draw(circuits(max_qubits=6, max_count=20))
    start = data.draw(states(circuit.qubits))
    expected = start
    for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
        expected = oracle.rotation(x, z, angle, circuit.qubits) @ expected
    state = State.from_array(start.copy())
    state.apply(circuit)
    # A dense product sums 2^n entries, all but two of them zeros: no more than 4 u a rotation.
    gap = np.linalg.norm(state.amplitudes - np.exp(1j * circuit.phase) * expected)
    assert gap <= tolerance(circuit)


@given(st.data())
def test_the_twin_follows_the_dense_oracle(data):
    circuit = data.draw(circuits(max_qubits=5, max_count=6))
    start = data.draw(states(circuit.qubits))
    expected = start
    for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
        expected = oracle.rotation(x, z, angle, circuit.qubits) @ expected
    found = oracle.rotated(circuit, start)
    assert np.linalg.norm(found - np.exp(1j * circuit.phase) * expected) <= tolerance(circuit)


def test_signs_and_bits_of_single_rotations_are_as_written():
    """exp(-i θ X)|0>, exp(-i θ Y)|0> and exp(-i θ Z)|1>, read off their definitions; bit q is qubit q."""
    for x, z, expected in ((4, 0, [0.6, -0.8j]), (4, 4, [0.6, 0.8]), (0, 4, [0.6 - 0.8j, 0])):
        state = State.computational(0, 3)
        state.apply(Rotations([x], [z], [np.arccos(0.6)], 3))
        assert np.abs(state.amplitudes[[0, 4]] - expected).max() < 8 * UNIT_ROUNDOFF
        assert not state.amplitudes[[1, 2, 3, 5, 6, 7]].any()


LARGE = (11, 13, 15, 17)


def listed(qubits, pairs, seed=1):
    angles = np.random.default_rng(seed).uniform(-3, 3, len(pairs))
    return Rotations([x for x, _ in pairs], [z for _, z in pairs], angles, qubits, phase=0.3)


@pytest.mark.parametrize("qubits", LARGE)
@pytest.mark.parametrize(
    "kinds", ["low", "high", "crossing", "low high", "low crossing", "high crossing", "low high crossing"]
)
def test_phase_passes_follow_the_twin(qubits, kinds):
    """Diagonal strings on the low ten bits, above them, on both, and all mixtures in one pass."""
    generator = np.random.default_rng(qubits)
    pairs = []
    for _ in range(24):
        low = int(generator.integers(1, 1 << 10))
        high = int(generator.integers(1, 1 << (qubits - 10))) << 10
        kind = generator.choice(kinds.split())
        pairs.append((0, {"low": low, "high": high, "crossing": low | high}[kind]))
    circuit = listed(qubits, pairs)
    state = assert_follows_twin(circuit)
    # One pass for all, one for the global phase.
    assert state.last_run.passes == 2


@pytest.mark.parametrize("qubits", LARGE)
def test_several_high_parts_share_one_low_mask(qubits):
    highs = range(1, 1 << (qubits - 10))
    assert_follows_twin(listed(qubits, [(0, 0b1011 | high << 10) for high in highs][:20]))


@pytest.mark.parametrize("qubits", LARGE)
def test_random_lists_follow_the_twin(qubits):
    generator = np.random.default_rng(qubits)
    for seed, diagonal in enumerate((0.0, 0.3, 0.8)):
        pairs = [
            (
                0 if generator.random() < diagonal else int(generator.integers(1 << qubits)),
                int(generator.integers(1 << qubits)),
            )
            for _ in range(30)
        ]
        assert_follows_twin(listed(qubits, pairs), seed)


@pytest.mark.parametrize("qubits", [15, 17])
def test_contiguous_and_gathered_fused_passes_follow_the_twin(qubits):
    generator = np.random.default_rng(qubits)
    everywhere = 1 << qubits
    low = [(int(generator.integers(1, 1 << 12)), int(generator.integers(everywhere))) for _ in range(20)]
    state = assert_follows_twin(listed(qubits, low))
    assert state.last_run.passes < 1 + len(low)
    bonds = [(3 << k, zz << k) for k in range(qubits - 1) for zz in (0, 3)]
    state = assert_follows_twin(listed(qubits, bonds))
    assert state.last_run.passes < 1 + len(bonds) // 4
    # Masks that share their highest bit, so that cosets have no unit vectors for a basis.
    spread = [(1 << (qubits - 1) | 1 << int(k), int(generator.integers(everywhere))) for k in range(qubits - 1)]
    assert_follows_twin(listed(qubits, spread))


@pytest.mark.parametrize("qubits", LARGE)
def test_strings_of_full_weight_follow_the_twin(qubits):
    full = (1 << qubits) - 1
    assert_follows_twin(listed(qubits, [(full, 0), (full, full), (0, full), (full, 1), (1, full), (full ^ 1, 2)]))


@pytest.mark.parametrize("qubits", LARGE)
def test_single_rotations_on_every_bit_follow_the_twin(qubits):
    for bit in range(qubits):
        for x, z in ((1, 0), (1, 1), (0, 1)):
            assert_follows_twin(listed(qubits, [(x << bit, z << bit)]), bit)


def test_longer_lists_than_a_pass_may_skip_follow_the_twin():
    """Over 192 rotations that do not commute with the first one's followers."""
    generator = np.random.default_rng(3)
    pairs = [(int(generator.integers(1 << 15)), int(generator.integers(1 << 15))) for _ in range(260)]
    assert_follows_twin(listed(15, pairs))


@pytest.mark.parametrize("qubits", [16, 17])
def test_threads_do_not_change_a_bit(qubits):
    generator = np.random.default_rng(qubits)
    pairs = [
        (
            int(generator.integers(4)) << int(generator.integers(qubits - 2)),
            int(generator.integers(1 << qubits)),
        )
        for _ in range(60)
    ]
    found = []
    for threads in (1, 2, 3):
        state = State.random(qubits, 3)
        state.apply(listed(qubits, pairs), threads=threads)
        assert state.last_run.workers == threads
        found.append(state.amplitudes.tobytes())
    assert found[0] == found[1] == found[2]


def test_nested_repeats_run_as_often_as_they_say():
    step = Rotations([1, 2], [2, 0], [0.3, -0.2], 2, phase=0.01)
    nested = (step.times(3) + Rotations([0], [3], [0.7], 2)).times(4)
    assert_follows_twin(nested)
    assert nested.count == 4 * 7


@given(st.data())
def test_single_precision_stays_close_to_double_precision(data):
    circuit = data.draw(circuits(max_qubits=6, max_count=20))
    single = State.from_array(data.draw(states(circuit.qubits)).astype(np.complex64))
    double = State.from_array(single.amplitudes.astype(np.complex128))
    single.apply(circuit)
    double.apply(circuit)
    gap = np.linalg.norm(single.amplitudes - double.amplitudes)
    assert gap <= circuit.rounding_bound(unit=2.0**-24) + circuit.rounding_bound()
