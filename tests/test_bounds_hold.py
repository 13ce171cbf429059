"""No exact error exceeds its bound, whatever the Hamiltonian and the formula; and how near the bounds come."""

from __future__ import annotations

import statistics

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import circuits
import oracle
import strategies
import trueturn as tt
from trueturn.accuracy import norms
from trueturn.accuracy.commutators import second_order_sums
from trueturn.accuracy.remainder import expansions, layers
from trueturn.formulas.merging import merged_runs
from trueturn.formulas.processed import PROCESSED
from trueturn.formulas.structure import NEAR_INTEGRABLE

FORMULAS = [*map(tt.formula, tt.formulas()), *PROCESSED]
# Products of up to some thousand small matrices, each off by about 1e-15, and their powers of up to four.
DENSE_ROUNDING = 1e-11


def errors(formula, partition, time, steps):
    """Spectral norm, and Frobenius norm over the root of the dimension."""
    difference = circuits.product(formula, partition, time, steps) - oracle.evolution(partition.operator(), time)
    return np.linalg.norm(difference, 2), np.linalg.norm(difference) / np.sqrt(len(difference))


def check(formula, partition, time, steps, ratios):
    for inputs, error in zip(("worst", "random"), errors(formula, partition, time, steps), strict=True):
        first = tt.bound(formula, partition, time, steps, inputs=inputs)
        # All that apply, except for long formulas, whose sums over all tuples take longest.
        for found in first.alternatives if formula.order <= 4 else (first,):
            assert error <= found.value + DENSE_ROUNDING, found
            if error > 1e3 * DENSE_ROUNDING:
                ratios.setdefault((inputs, found.theorem.split(" (cut")[0]), []).append(error / found.value)


def sizes(formula):
    """(qubits, terms) that keep a case within a fraction of a second."""
    return (6, 7) if formula.order <= 4 else (3, 4) if formula.order <= 6 else (2, 3)


@st.composite
def cases(draw):
    formula = draw(st.sampled_from(FORMULAS))
    qubits, most = sizes(formula)
    operator = draw(strategies.operators(max_qubits=qubits, min_terms=2, max_terms=most, distinct=True))
    rule = draw(st.sampled_from(["single", "commuting", "magnitude", "axis"]))
    return formula, tt.Partition.of(operator, rule), draw(st.floats(0.01, 1.5)), draw(st.integers(1, 4))


@settings(max_examples=40)
@given(case=cases())
def test_no_exact_error_exceeds_its_bound(case):
    check(*case, {})


@pytest.mark.heavy
def test_five_hundred_errors_stay_below_their_bounds_which_come_near():
    ratios = {}

    @settings(max_examples=500, derandomize=True)
    @given(case=cases())
    def run(case):
        check(*case, ratios)

    run()
    for (inputs, theorem), found in sorted(ratios.items()):
        print(f"{inputs:<7} {theorem:<75} {len(found):>4} cases, error/bound {statistics.median(found):.3f} median, "
              f"{max(found):.5f} largest")  # fmt: skip
    # Not vacuous: each kind of commutator bound is nearly reached by some case.
    for inputs in ("worst", "random"):
        for theorem in ("Proposition 9 (first order)", "order 4, merged nested commutators with remainder"):
            assert max(ratios[inputs, theorem]) > 0.5


@pytest.mark.parametrize("formula", FORMULAS, ids=lambda one: one.name)
def test_every_formula_has_a_bound_above_its_error_on_p3(formula):
    # Steps of 1/2 and 1/16. Two parts halve the exponentials of the long formulas.
    parts = circuits.P3 if formula.order < 8 else tt.Partition(circuits.P3_PARTS[:2])
    for steps in (2, 16):
        error, mean = errors(formula, parts, 1.0, steps)
        found = tt.bound(formula, parts, 1.0, steps)
        assert error <= found.value + DENSE_ROUNDING
        assert mean <= tt.bound(formula, parts, 1.0, steps, inputs="random").value + DENSE_ROUNDING
        if error > 1e-9 and formula.order <= 6:
            assert found.value < 400 * error


def test_a_formula_of_special_structure_is_bounded_where_it_is_allowed():
    formula = tt.formula("laskar-robutel-2")
    assert formula.requires == NEAR_INTEGRABLE
    parts = tt.Partition([tt.Operator("1.0 Z_0 Z_1 + 0.5 Z_1"), tt.Operator("0.05 X_0 + 0.03 X_1")])
    error, _ = errors(formula, parts, 1.0, 2)
    assert error <= tt.bound(formula, parts, 1.0, 2).value <= 20 * error


@pytest.mark.parametrize("name", ["lie", "strang", "ruth-3", "suzuki-4", "blanes-moan-4"])
def test_one_short_step_comes_within_a_tenth_of_its_bound(name):
    # What is left of the bound is the next power of the step. Dense matrices lose 1e-15 of errors of 1e-12 and more.
    error, mean = errors(tt.formula(name), circuits.P3, 0.01, 1)
    for inputs, value in (("worst", error), ("random", mean)):
        assert 0.9 * tt.bound(name, circuits.P3, 0.01, 1, method="tightest", inputs=inputs).value < value


def expanded(formula, partition, rule=norms.thorough):
    step = layers(merged_runs(formula.exact_stages(), len(partition.parts)), partition.parts)
    return step, expansions(step, partition.operator().without_identity(), formula.order, rule, rule)


def test_on_two_parts_the_expansion_of_strang_is_proposition_10():
    # Childs, Su, Tran, Wiebe, Zhu, Phys. Rev. X 11, 011020 (2021), number from memory; see docs/error-bounds.md.
    two = tt.Partition(circuits.P3_PARTS[:2])
    _, found = expanded(tt.formula("strang"), two)
    outer, inner = second_order_sums(two.parts, norms.thorough)
    # Dense norms are padded by less than 1e-10 of their size.
    assert found[1].remainder / 3 == pytest.approx(outer.value / 12 + inner.value / 24, rel=1e-10)


def test_run_backwards_the_expansion_of_lie_is_proposition_9():
    step, _ = expanded(tt.formula("lie"), circuits.P3)
    back = expansions(step[::-1], circuits.P3.operator(), 1, norms.thorough, norms.thorough)
    assert back[0].remainder / 2 == pytest.approx(tt.bound("lie", circuits.P3, 1.0, 1).value, rel=1e-10)


def test_order_conditions_come_out_as_rounding_and_the_leading_term_does_not():
    for name in ("strang", "suzuki-4", "yoshida-6"):
        formula = tt.formula(name)
        _, found = expanded(formula, circuits.P3)
        leading = found[-1].leading
        assert len(leading) == formula.order + 1
        assert max(leading[:-1]) < 1e-8 < 1e-3 < leading[-1]


def test_a_formula_that_misses_an_order_condition_is_bounded_all_the_same():
    # Weights moved by 1e-3: the claimed order would be 4, the error that of order 2.
    good = tt.formula("triple-jump-4")
    outer = good.stages[0].weight * 2 + 1e-3
    spoilt = tt.Formula.composition([outer, 1 - 2 * outer, outer], name="spoilt")
    assert spoilt.order == 2
    step, _ = expanded(spoilt, circuits.P3)
    found = expansions(step, circuits.P3.operator(), 4, norms.thorough, norms.quick)
    error, _ = errors(spoilt, circuits.P3, 0.01, 1)
    assert found[-1].leading[2] > 1e-3
    assert all(error <= one.error(0.01, 1) for one in found)
    assert found[-1].error(0.01, 1) < 1.5 * error


@given(operator=strategies.operators(max_qubits=5, min_terms=1, max_terms=30))
def test_every_norm_rule_bounds_the_norm_and_frobenius_is_exact(operator):
    bare = operator.without_identity()
    matrix = oracle.dense(bare)
    exact = np.linalg.norm(matrix, 2)
    # Norms of 32 x 32 matrices and their sums of up to 30 terms of size 4.
    rounding = 1e-12
    assert exact <= norms.quick(bare).value + rounding
    assert exact <= norms.thorough(bare).value + rounding
    assert norms.thorough(bare).value <= norms.quick(bare).value * (1 + 1e-9) + rounding
    assert norms.quick(bare).value <= bare.one_norm() * (1 + 1e-12) + rounding
    assert norms.frobenius(bare).value == pytest.approx(np.linalg.norm(matrix) / np.sqrt(len(matrix)), abs=rounding)


def test_each_route_of_a_norm_is_named():
    def route(text, rule=norms.thorough):
        return rule(tt.Operator(text)).route

    apart = " + ".join(f"0.{q + 1} X_{q} + 0.5 Z_{q} Z_{q + 1} + 0.3 X_{q} Z_{q + 1}" for q in range(9))
    assert route("X_0 X_1 + Z_0") == "dense"
    assert route("X_0 + Z_0", norms.quick) == "anticommuting groups"
    assert route("X_0 + Z_1", norms.quick) == "triangle inequality"
    assert route("X_0 + Z_0", norms.frobenius) == "Frobenius norm"
    assert route(apart) == "clusters"
    ring = " + ".join(f"X_{q} X_{(q + 1) % 11}" for q in range(11))
    assert "commuting groups" in route(ring)  # an odd ring cannot satisfy every bond


def test_layers_are_the_step_and_join_what_commutes():
    chain = tt.model.heisenberg(tt.lattice.chain(4), 1.0, z=0.3)
    single = tt.Partition.of(chain, "single")
    formula = tt.formula("strang")
    step, _ = expanded(formula, single, norms.quick)
    runs = merged_runs(formula.exact_stages(), len(single.parts))
    assert len(step) < len(runs)
    product = np.eye(16, dtype=complex)
    for layer in step:
        product = oracle.evolution(layer, 0.3) @ product
    # Two dozen products of unitary 16 x 16 matrices.
    assert np.allclose(product, circuits.product(formula, single, 0.3, 1), atol=1e-13)


def test_degrees_that_cost_too_much_are_given_up_and_the_rest_still_bounds(monkeypatch):
    formula = tt.formula("suzuki-4")
    _, full = expanded(formula, circuits.P3)
    monkeypatch.setattr("trueturn.accuracy.remainder.MOST_STRINGS", 6000)
    _, cut = expanded(formula, circuits.P3)
    assert 1 <= len(cut) < len(full) == 5
    for some, whole in zip(cut, full, strict=False):
        assert some.remainder == whole.remainder


def test_large_chains_are_bounded_without_a_state_and_grow_in_proportion():
    values = {}
    for qubits in (16, 32):
        chain = tt.model.heisenberg(tt.lattice.chain(qubits), 1.0)
        found = tt.bound("suzuki-4", tt.Partition.of(chain, "bond"), 1.0, 50, inputs="worst")
        values[qubits] = found.value
        assert 0.0 < found.value < 1e-3
    # A sum of local terms: twice the length, twice the bound, but for the ends and the cutting into clusters.
    assert 1.8 < values[32] / values[16] < 2.6


@pytest.mark.heavy
def test_the_largest_register_is_bounded_at_order_four():
    chain = tt.model.heisenberg(tt.lattice.chain(128), 1.0, z=0.5)
    found = tt.bound("suzuki-4", tt.Partition.of(chain, "bond"), 1.0, 50)
    assert 0.0 < found.value < 1e-2 and "cut at degree 5 of 5" in found.theorem
