"""When a diagnosis says that it cannot tell, and when it is not certain."""

from __future__ import annotations

import numpy as np
import pytest

import circuit_variants as variants
import trueturn as tt
from circuit_mistakes import a_right_circuit, changed, columns, distance, one_mistake, strang, up_to_phase
from trueturn import randomised

CHAIN = tt.model.ising(tt.lattice.chain(6), zz=-1.0, x=np.linspace(0.5, 0.9, 6))


@pytest.mark.parametrize("draws", [10, 100, 1000])
def test_one_random_sample_is_not_judged(draws):
    sample = randomised.qdrift(CHAIN, 1.0, draws, seed=2).sample(0)
    found = tt.diagnose(sample, CHAIN, 1.0)
    assert found.matches is None and "random sample" in found.reason and "audit" in found.reason


def test_totals_equal_modulo_pi_are_not_judged():
    operator = tt.Operator("1.1 X_0 + 0.7 X_1") + np.pi * tt.Operator("Z_0 Z_1")
    circuit = strang(operator, steps=5)
    doubled = changed(circuit, lambda x, z, angle: (x, z, angle * (2 if z else 1)))
    found = tt.diagnose(doubled, operator, 1.0)
    assert found.matches is None and "modulo π" in found.reason


def test_angles_reduced_modulo_pi_by_a_compiler_match():
    reduced = changed(strang(CHAIN), lambda x, z, angle: (x, z, angle % np.pi))
    assert up_to_phase(reduced, strang(CHAIN)) < 1e-11
    assert tt.diagnose(reduced, CHAIN, 1.0).matches is True


def test_a_change_of_basis_that_is_no_clifford_is_not_judged():
    turn = tt.Rotations([0b11], [0b01], [0.3], 6)  # Y_0 X_1, which is no term
    found = tt.diagnose(turn + strang(CHAIN) + turn.inverse(), CHAIN, 1.0)
    assert found.matches is None and "Y_0 X_1" in found.reason


def test_blocks_resynthesised_beyond_recognition_are_not_judged():
    draw = np.random.default_rng(1)
    masks = draw.integers(1, 2**6, (60, 2))
    circuit = tt.Rotations(masks[:, 0].tolist(), masks[:, 1].tolist(), draw.normal(size=60), 6)
    found = tt.diagnose(circuit, CHAIN, 1.0)
    assert found.matches is None and "recognition" in found.reason and found.fixed is None


@pytest.mark.parametrize("seed", range(8))
def test_fused_one_qubit_gates_are_never_accused(seed):
    right = a_right_circuit(np.random.default_rng([11, seed]))
    fused = variants.fused(right.circuit())
    assert up_to_phase(fused, right.circuit()) < 1e-9
    assert tt.diagnose(fused, right.operator, right.time).matches is not False


def test_one_string_off_in_a_formula_that_is_not_known_is_not_judged():
    own = tt.Formula.composition([0.3, 0.4, 0.3], name="ours")
    circuit = own.rotations(tt.Partition.of(CHAIN, "commuting"), 1.0, 2)
    stronger = changed(circuit, lambda x, z, angle: (x, z, 1.3 * angle if (x, z) == (0, 3) else angle))
    found = tt.diagnose(stronger, CHAIN, 1.0)
    assert found.matches is None and "known formula" in found.reason and "resynthesised" in found.reason


def test_one_string_off_among_too_many_to_compare_is_not_judged(monkeypatch):
    stronger = changed(strang(CHAIN), lambda x, z, angle: (x, z, 1.3 * angle if (x, z) == (0, 3) else angle))
    assert one_mistake(stronger, CHAIN, 1.0).kind == "term strength"
    monkeypatch.setattr("trueturn.diagnosis.structure.MOST_STRINGS", 5)
    found = tt.diagnose(stronger, CHAIN, 1.0)
    assert found.matches is None and "too many strings" in found.reason


def test_half_turns_that_multiply_to_the_identity_are_not_judged():
    """Z_0, Z_1 and Z_0 Z_1 turned by π/2 more: the unitary is the same, and all three totals are off."""
    operator = tt.Operator("0.7 Z_0 Z_1 + 0.5 Z_0 + 0.6 Z_1 + 0.6 X_0 + 0.5 X_1")
    circuit = tt.formula("lie").rotations(tt.Partition.of(operator, "axis"), 1.0, 1)
    turned = changed(circuit, lambda x, z, angle: (x, z, angle if x else angle + np.pi / 2))
    assert up_to_phase(turned, circuit) < 1e-13  # five rotations at 4u each
    found = tt.diagnose(turned, operator, 1.0)
    assert found.matches is None and "modulo π/2" in found.reason
    # Two of them alone multiply to Z_0 Z_1, which is not nothing.
    other = changed(circuit, lambda x, z, angle: (x, z, angle + np.pi / 2 if z in (1, 2) else angle))
    assert "modulo" not in tt.diagnose(other, operator, 1.0).reason


def test_a_finding_that_another_formula_fits_as_well_is_not_certain():
    """Strang in two steps with both half-steps at the ends lost is Strang in one step with half the strength."""
    circuit = strang(CHAIN, steps=2)
    ends = [*range(5), *range(circuit.count - 5, circuit.count)]  # the five bonds
    lost = tt.Rotations(*(np.delete(column, ends) for column in columns(circuit)), 6)
    mistake = one_mistake(lost, CHAIN, 1.0)
    assert not mistake.certain
    assert any(distance(other, circuit) < 1e-11 for _, other in mistake.alternatives) or (
        distance(mistake.fixed, circuit) < 1e-11
    )
