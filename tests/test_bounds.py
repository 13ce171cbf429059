"""Proven bounds: published values, and never below the exact error."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import circuits
import oracle
import strategies
import trueturn as tt

LIE, STRANG = tt.formula("lie"), tt.formula("strang")
# Spectral intervals of brackets on up to eight qubits are dense ones, padded by about 1e-9 of their size.
PADDING = 1e-6


def exact_error(formula, partition, time, steps):
    rotations = formula.rotations(partition, time, steps)
    return circuits.distance(circuits.matrix(rotations), oracle.evolution(partition.operator(), time))


def check(published, name):
    return next(entry for entry in published("bounds.toml")["check"] if entry["id"] == name)


def test_first_order_bound_on_p3_is_the_published_one(published):
    # Childs, Su, Tran, Wiebe, Zhu, Phys. Rev. X 11, 011020 (2021), Proposition 9 (number from memory); values computed
    # for problem P3 in tests/published/bounds.toml.
    values = check(published, "prop9_p3")
    found = tt.bound(LIE, circuits.P3, 1.0, 1)
    assert found.value == pytest.approx(values["bound_t1"], rel=PADDING)
    assert "Proposition 9" in found.theorem and found.kind == "proven"
    assert exact_error(LIE, circuits.P3, 1.0, 1) == pytest.approx(values["error_t1"], rel=1e-10)
    assert exact_error(LIE, circuits.P3, 0.1, 1) == pytest.approx(values["error_t01"], rel=1e-10)


def test_second_order_bound_on_p3_is_the_published_one(published):
    # The same paper, Proposition 10 (number from memory).
    values = check(published, "prop10_p3")
    found = tt.bound(STRANG, circuits.P3, 1.0, 1)
    assert found.value == pytest.approx(values["bound_t1"], rel=PADDING)
    assert exact_error(STRANG, circuits.P3, 1.0, 1) == pytest.approx(values["error_t1"], rel=1e-10)


def test_step_counts_on_p3_from_bound_and_truth(published):
    values = check(published, "p3_step_counts")
    for formula, order in ((LIE, 1), (STRANG, 2)):
        from_bound, from_truth = values[f"r_bound_order{order}"], values[f"r_true_order{order}"]
        assert tt.bound(formula, circuits.P3, 1.0, from_bound).value <= values["eps"]
        assert tt.bound(formula, circuits.P3, 1.0, from_bound - 1).value > values["eps"]
        assert exact_error(formula, circuits.P3, 1.0, from_truth) <= values["eps"]
        assert exact_error(formula, circuits.P3, 1.0, from_truth - 1) > values["eps"]


def test_one_qubit_splitting_in_closed_form(published):
    # F1 = X, F2 = Z: the bounds are t² and t³/2, the error is 2 sin(θ/2) with cos θ = Re tr(S† U) / 2.
    values = check(published, "one_qubit_xz")
    parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    for time, key in ((0.5, "05"), (0.1, "01"), (0.01, "001")):
        assert tt.bound(LIE, parts, time, 1).value == pytest.approx(time**2, rel=PADDING)
        assert tt.bound(STRANG, parts, time, 1).value == pytest.approx(time**3 / 2, rel=PADDING)
        # Absolute: both matrices round at about 1e-15.
        assert exact_error(LIE, parts, time, 1) == pytest.approx(values[f"error_S1_t{key}"], rel=1e-8, abs=1e-14)
    for time, key in ((0.5, "05"), (0.1, "01")):
        assert exact_error(STRANG, parts, time, 1) == pytest.approx(values[f"error_S2_t{key}"], rel=1e-8)


def test_the_two_constants_of_the_second_order_bound_are_not_exchanged(published):
    values = check(published, "prop10_constants_not_swapped")
    parts = tt.Partition([0.05 * tt.Operator("X_0"), tt.Operator("Z_0")])
    found = tt.bound(STRANG, parts, 0.1, 1).value
    assert found == pytest.approx(values["bound"], rel=PADDING)
    assert values["swapped_not_a_bound"] < exact_error(STRANG, parts, 0.1, 1) <= found


@given(
    operator=strategies.operators(max_qubits=4, max_terms=8, min_terms=2),
    rule=st.sampled_from(["single", "commuting", "magnitude", "axis"]),
    time=st.floats(0.01, 1.5),
    steps=st.integers(1, 4),
)
def test_no_exact_error_exceeds_its_bound(operator, rule, time, steps):
    if len(operator.without_identity()) == 0:
        return
    partition = tt.Partition.of(operator, rule)
    for formula in (LIE, STRANG):
        limit = tt.bound(formula, partition, time, steps).value
        # The dense matrices on both sides round at some 1e-13 for norms up to 50.
        assert exact_error(formula, partition, time, steps) <= limit + 1e-12


def test_commuting_parts_have_bound_zero():
    parts = tt.Partition([tt.Operator("Z_0 Z_1"), tt.Operator("Z_0", qubits=2)])
    assert tt.bound(LIE, parts, 3.0, 1).value == 0.0
    assert tt.bound(STRANG, parts, 3.0, 1).value == 0.0


def test_a_formula_without_a_theorem_is_refused_with_those_that_have_one():
    with pytest.raises(tt.errors.FormulaError, match=r"no proven bound at hand for 'suzuki-4'.*lie, strang") as refusal:
        tt.bound(tt.formula("suzuki-4"), circuits.P3, 1.0, 1)
    assert refusal.value.choices == ("lie", "strang")


@pytest.mark.parametrize("time", [np.nan, np.inf])
def test_times_that_are_not_finite_are_refused(time):
    with pytest.raises(tt.errors.ArgumentError, match="time: not finite"):
        tt.bound(LIE, circuits.P3, time, 1)


@pytest.mark.parametrize("steps", [0, -3, 1.5, True])
def test_step_counts_that_are_not_whole_and_positive_are_refused(steps):
    with pytest.raises(tt.errors.ArgumentError, match="steps: not a positive whole number"):
        tt.bound(LIE, circuits.P3, 1.0, steps)
