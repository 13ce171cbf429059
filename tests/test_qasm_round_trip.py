"""What is written reads back: strings, angles, order, repeats, phase, frame, and routed circuits in logical qubits."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trueturn as tt
from strategies import circuits, framed, gate_options, pair_circuits
from test_qasm_writing import dense, devices, tolerance

UNIT = 2.0**-53


def read(text):
    """Every rotation of our files is a rotation of the circuit, even by multiples of π/4."""
    return tt.read_qasm(text, quarter_turns="rotations")


def rotations(circuit):
    columns = zip(circuit.x_masks.tolist(), circuit.z_masks.tolist(), circuit.angles.tolist(), strict=True)
    return [(x, z, angle) for x, z, angle in columns if x or z]


def phase_off(one, other):
    """How far two phases are apart modulo 2π, and how far rounding of their sums can take them."""
    total = abs(one.phase) + abs(other.phase) + float(np.abs(one.angles).sum()) + 8.0
    apart = one.phase - identity_angles(one) - other.phase + identity_angles(other)
    return abs(np.exp(1j * apart) - 1.0), 8 * UNIT * total


def identity_angles(circuit):
    columns = zip(circuit.x_masks.tolist(), circuit.z_masks.tolist(), circuit.angles.tolist(), strict=True)
    return sum(angle for x, z, angle in columns if not x and not z)


@given(st.one_of(circuits(), pair_circuits()), gate_options)
def test_rotations_read_back_in_order_and_without_a_frame(circuit, device):
    back = read(circuit.qasm(**device))
    assert rotations(back) == rotations(circuit)
    assert back.frame.count == 0
    assert back.relabelling == tuple(range(circuit.qubits))
    off, allowed = phase_off(circuit, back)
    assert off <= allowed
    assert rotations(read(circuit.qasm(2, **device))) == rotations(circuit)


@given(st.data())
def test_routed_circuits_read_back_in_logical_qubits(data):
    plain = st.one_of(circuits(max_qubits=4, max_count=6), pair_circuits())
    circuit = data.draw(st.one_of(plain, framed(plain)))
    device = data.draw(devices(circuit.qubits)) | data.draw(gate_options)
    back = read(circuit.qasm(**device))
    assert back.qubits == circuit.qubits
    assert np.abs(dense(back) - dense(circuit)).max() <= 4 * tolerance(circuit, 40 * (circuit.count + 10))
    assert rotations(back) == rotations(circuit)


@given(framed(st.one_of(circuits(max_qubits=4, max_count=6), pair_circuits())), gate_options)
def test_a_frame_reads_back(circuit, device):
    back = read(circuit.qasm(**device))
    assert rotations(back) == rotations(circuit)
    assert back.relabelling == circuit.relabelling
    assert np.abs(dense(back) - dense(circuit)).max() <= 4 * tolerance(circuit, 40 * (circuit.count + 10))


@settings(max_examples=25)
@given(
    st.sampled_from(["lie", "strang", "suzuki-4"]), st.sampled_from(["bond", "axis", "commuting"]), st.integers(3, 40)
)
def test_steps_stay_loops_of_one_step(formula, rule, steps):
    ring = tt.model.heisenberg(tt.lattice.ring(5), coupling=1.0, z=0.3)
    circuit = tt.formula(formula).rotations(tt.Partition.of(ring, rule), 0.7, steps)
    for connectivity in (None, "line"):
        back = tt.read_qasm(circuit.qasm(connectivity=connectivity))
        assert rotations(back) == rotations(circuit)
        assert max(block.repeat for block in back.blocks) == max(block.repeat for block in circuit.blocks)


def test_a_million_steps_read_back_without_being_written_out():
    step = tt.Rotations([0b011, 0b110, 0b001], [0b010, 0b110, 0b001], [0.1, 0.2, 0.3], 3, 0.5)
    circuit = step.times(10**6)
    back = read(circuit.qasm())
    assert back.count == circuit.count
    assert rotations(back.blocks[0].rotations) == rotations(step)


@pytest.mark.parametrize("ladder", ["staircase", "balanced", "hub"])
def test_wide_strings_read_back(ladder):
    generator = np.random.default_rng(6)
    masks = [int.from_bytes(generator.bytes(15), "little") for _ in range(400)]
    circuit = tt.Rotations(masks[:200], masks[200:], generator.normal(size=200), 120)
    assert rotations(read(circuit.qasm(ladder=ladder))) == rotations(circuit)
    routed = circuit.qasm(ladder=ladder, connectivity="grid", routing="bridges")
    assert rotations(read(routed)) == rotations(circuit)
