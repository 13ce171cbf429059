"""How circuits are carried out, and room for states."""

from __future__ import annotations

import os
import resource

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
import trueturn as tt
from trueturn import _allocation


def _circuit(qubits, seed, count):
    """Strings of all kinds, with neighbours that share an x mask."""
    generator = np.random.default_rng(seed)
    x = [int(m) for m in generator.integers(0, 1 << qubits, count)]
    x = [mask if k % 3 else x[k - 1] for k, mask in enumerate(x)]
    z = [int(m) for m in generator.integers(0, 1 << qubits, count)]
    return tt.Rotations(x, z, generator.uniform(-3.0, 3.0, count), qubits)


@given(st.integers(2, 18), st.integers(0, 2**32 - 1), st.integers(1, 40), st.sampled_from(["complex128", "complex64"]))
def test_every_rotation_is_in_one_pass(qubits, seed, count, dtype):
    circuit = _circuit(qubits, seed, count)
    plan = circuit.plan(dtype)
    # Distinct strings never merge, so that all are still there.
    strings = {*zip(circuit.x_masks, circuit.z_masks, strict=True)}
    assert len(strings) <= plan.rotations <= count
    assert 1 <= plan.passes <= count
    assert plan == circuit.plan(dtype)
    assert plan.seconds > 0.0


@given(st.integers(1, 7), st.integers(0, 2**32 - 1), st.integers(1, 30))
def test_a_plan_has_the_effect_of_the_list(qubits, seed, count):
    circuit = _circuit(qubits, seed, count)
    state = tt.State.random(qubits, 1)
    expected = state.amplitudes.copy()
    for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
        expected = np.cos(angle) * expected - 1j * np.sin(angle) * oracle.string_times(int(x), int(z), expected)
    state.apply(circuit)
    # The oracle rounds less than 5 u a rotation.
    allowed = circuit.rounding_bound() + 5 * 2.0**-53 * count
    assert np.linalg.norm(state.amplitudes - expected) <= allowed


def test_repeats_are_planned_once_and_counted():
    step = _circuit(16, 5, 12)
    plan = step.times(10**9 + 2).plan()
    assert [times for times, _ in plan.blocks] == [(10**9 + 2) // 4, 1]
    assert plan.rotations >= 10**9
    assert "×" in str(plan) and "16 qubits" in str(plan)


def test_a_bond_and_a_diagonal_run_are_one_operation_each():
    ring = tt.model.heisenberg(tt.lattice.ring(12), 1.0, z=0.3)
    circuit = tt.formula("lie").rotations(tt.Partition.of(ring, "bond"), 0.1, 1)
    ((_, (only,)),) = circuit.plan().blocks
    # 12 bonds, the fields, and at most one factor of everything.
    assert only.rotations == 48 and 13 <= only.operations <= 14 and only.in_place


def test_more_qubits_than_a_state_can_have_are_refused():
    with pytest.raises(tt.errors.ArgumentError, match="at most 62"):
        tt.Rotations([1], [0], [0.1], 100).plan()


@pytest.mark.parametrize("qubits", [3, 9, 14, 17])
def test_observables_together_are_what_they_are_alone(qubits):
    state = tt.State.random(qubits, 7)
    last = qubits - 1
    texts = ["1.0", f"X_0 X_{last}", f"0.5 Y_1 - 2 Z_0 Z_{last}", f"X_0 Y_{last} - Y_0 X_{last} + 0.1"]
    operators = [tt.Operator(text, qubits=qubits) for text in texts]
    together = state.expectations(operators)
    alone = [state.expectation(operator) for operator in operators]
    # Both sum 2^n products of size 1 in all, in other orders: at most 200 additions deep each.
    np.testing.assert_allclose(together, alone, rtol=0, atol=400 * 3.0 * 2.0**-53)
    assert state.expectations([]).shape == (0,)


def test_observables_on_other_qubits_are_refused():
    with pytest.raises(tt.errors.StateShapeError):
        tt.State.product("000").expectations([tt.Operator("Z_0", qubits=2)])


@pytest.mark.parametrize("count", [1, 2, 64, 1 << 18, 1 << 19])
@pytest.mark.parametrize("dtype", ["complex128", "complex64"])
def test_room_starts_at_a_cache_line_and_large_room_at_a_large_page(count, dtype):
    array = _allocation.amplitudes(count, dtype)
    assert array.shape == (count,) and array.dtype == dtype and not array.any()
    boundary = 1 << 21 if array.nbytes >= 1 << 22 else 64
    assert array.ctypes.data % boundary == 0
    assert array.flags.writeable and array.flags.c_contiguous


@pytest.mark.skipif(not hasattr(os, "fork"), reason="no fork on this system")
def test_a_forked_child_has_states_of_its_own():
    state = tt.State.computational(0, 18)
    child = os.fork()
    if child == 0:
        state.amplitudes[0] = 0.5
        os._exit(0)
    os.waitpid(child, 0)
    assert state.amplitudes[0] == 1.0


@pytest.mark.parametrize("dtype", ["float64", None, "abacus"])
def test_plans_are_for_complex_amplitudes(dtype):
    with pytest.raises(tt.errors.ArgumentError, match="complex128 or complex64"):
        tt.Rotations([1], [0], [0.1], 3).plan(dtype)


def test_many_observables_take_little_memory():
    """Operators are taken in batches: 2000 strings at once once took a quarter of a gigabyte."""
    generator = np.random.default_rng(3)
    masks = [[int(m) for m in generator.integers(0, 1 << 18, 400)] for _ in range(2)]
    operators = [tt.Operator.from_masks([x], [z], [1.0], 18) for x, z in zip(*masks, strict=True)]
    state = tt.State.random(18, 1)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    values = state.expectations(operators)
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before < 64 * 1024
    assert values.shape == (400,) and abs(values).max() < 1.0
