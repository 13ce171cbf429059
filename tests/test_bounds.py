"""Proven bounds: published values, and never below the exact error."""

from __future__ import annotations

import numpy as np
import pytest

import circuits
import oracle
import trueturn as tt
from trueturn.accuracy import analytic, norms
from trueturn.accuracy.commutators import first_order_sum, nested_commutator_sum


def terms(operator):
    return zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True)


LIE, STRANG = tt.formula("lie"), tt.formula("strang")
SINGLE = tt.Partition(
    [tt.Operator.from_masks([x], [z], [c], 3) for part in circuits.P3_PARTS for x, z, c in terms(part)]
)
# Norms on three qubits are dense ones, padded outward to 2^-38 of Σ|c|, which is a few times the norm.
PADDING = 1e-10


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
        assert tt.steps_by_bound(formula, circuits.P3, 1.0, values["eps"]) == from_bound
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


def test_the_order_of_parts_enters_the_published_sums_as_published(published):
    first, second = check(published, "prop9_p3"), check(published, "prop10_p3")
    back = tt.Partition(circuits.P3_PARTS[::-1])
    assert tt.bound("lie", back, 1.0, 1).value == pytest.approx(
        first["commutator_sum_reversed_fragments"] / 2, rel=PADDING
    )
    reverse = second["A_reversed_fragments"] / 12 + second["B_reversed_fragments"] / 24
    assert tt.bound("strang", back, 1.0, 1).value == pytest.approx(reverse, rel=PADDING)


def test_sums_over_single_terms_are_the_published_ones(published):
    values = check(published, "p3_term_level")
    assert tt.bound("lie", SINGLE, 1.0, 1).value == pytest.approx(values["commutator_sum"] / 2, rel=PADDING)
    expected = values["A"] / 12 + values["B"] / 24
    assert tt.bound("strang", SINGLE, 1.0, 1).value == pytest.approx(expected, rel=PADDING)


def test_nested_sums_over_all_tuples_are_the_published_ones(published):
    # Definition of alpha in arXiv 1912.08854; the numbers were computed by another program.
    values = check(published, "alpha_comm_p3")
    for parts, name in ((circuits.P3.parts, "fragments"), (SINGLE.parts, "terms")):
        for order in (1, 2, 4):
            found = nested_commutator_sum(parts, order, norms.thorough).value
            assert found == pytest.approx(values[f"{name}_p{order}"], rel=PADDING)
    pairs = check(published, "p3_term_level")["pairwise_triangle"]
    assert nested_commutator_sum(SINGLE.parts, 1, norms.quick).value == pytest.approx(2 * pairs, rel=PADDING)


def test_step_counts_without_commutators_are_the_published_ones(published):
    # Childs, Maslov, Nam, Ross, Su, PNAS 115, 9456 (2018), supplement, formulas from memory; t = 10, eps = 1e-3.
    values = check(published, "no_commutator_counts_40_1_10")
    for level, expected in enumerate(values["minimised"]):
        strength = analytic.counted_parts(level, 40, 1.0)
        low, high = 0, 2**40
        while high - low > 1:
            middle = (low + high) // 2
            low, high = (
                (low, middle) if analytic.counted_bound(level, strength, 10.0, middle) <= 1e-3 else (middle, high)
            )
        assert abs(high - expected) <= values["abs_tol"]


def test_random_input_bounds_on_p3_are_the_published_ones(published):
    # Zhao, Zhou, Shaw, Li, Childs, Phys. Rev. Lett. 129, 270502 (2022); constants from memory.
    values = check(published, "random_input_p3")
    for formula, rms, limit in zip((LIE, STRANG), values["rms"], values["rms_bound"], strict=True):
        found = tt.bound(formula, circuits.P3, 1.0, values["r"], inputs="random")
        assert found.value == pytest.approx(limit, rel=PADDING) and found.inputs == "random"
        difference = circuits.product(formula, circuits.P3, 1.0, values["r"]) - oracle.evolution(
            circuits.P3.operator(), 1
        )
        assert np.linalg.norm(difference) / np.sqrt(8) == pytest.approx(rms, rel=values["tol"])


def test_first_order_on_two_parts_is_bounded_by_second_order_and_boundary_terms(published):
    values = check(published, "layden_p3")
    parts = [circuits.P3_PARTS[0], circuits.P3_PARTS[1] + circuits.P3_PARTS[2]]
    total = first_order_sum(parts, norms.thorough).value
    for steps, expected in zip(values["r"], values["commutator_bound"], strict=True):
        assert total * 2.0**2 / (2 * steps) == pytest.approx(expected, rel=PADDING)
    two = tt.Partition(circuits.P3_PARTS[:2])
    found = {one.theorem.split(" as ")[0]: one for one in tt.bound("lie", two, 8.0, 2000).alternatives}
    boundary = found["first order"]
    assert "Layden" in boundary.source
    # Long times are where it wins: linear in t at a fixed step, against t² / r.
    assert exact_error(LIE, two, 8.0, 2000) <= boundary.value < found["Proposition 9 (first order)"].value


def test_commuting_parts_have_bound_zero():
    parts = tt.Partition([tt.Operator("Z_0 Z_1"), tt.Operator("Z_0", qubits=2)])
    assert tt.bound(LIE, parts, 3.0, 1).value == 0.0
    assert tt.bound(STRANG, parts, 3.0, 1).value == 0.0
    # Weights of a longer formula add up to 1 within rounding only.
    assert tt.bound("suzuki-4", parts, 3.0, 1).value < 1e-13
    nothing = tt.Partition([tt.Operator("2.0", qubits=2)])
    assert tt.bound("suzuki-4", nothing, 3.0, 1).value == 0.0


def test_alternatives_hold_the_answer_and_tightest_is_the_smallest():
    for name in ("lie", "strang", "suzuki-4"):
        found = tt.bound(name, circuits.P3, 1.0, 20)
        values = [one.value for one in found.alternatives]
        assert found in found.alternatives and values == sorted(values) and len(values) >= 4
        assert tt.bound(name, circuits.P3, 1.0, 20, method="tightest").value == values[0]
        loose = tt.bound(name, circuits.P3, 1.0, 20, method="analytic")
        assert loose.value > found.value and loose.method == "analytic" and loose in found.alternatives
        at_random = tt.bound(name, circuits.P3, 1.0, 20, inputs="random")
        assert at_random.value < found.value
        assert {one.inputs for one in at_random.alternatives} == {"random"}


def test_what_costs_too_much_is_left_out_by_name():
    field = tt.model.heisenberg(tt.lattice.chain(12), 1.0, z=0.5)
    found = tt.bound("strang", tt.Partition.of(field, "single"), 1.0, 10)
    assert found.left_out == ("sum over all tuples of parts: 45^3 of them, too many",)
    assert not any("all tuples" in one.theorem for one in found.alternatives)


@pytest.mark.parametrize("name", ["lie", "strang", "suzuki-4"])
def test_bounds_with_less_effort_hold_and_say_what_is_left_out(name):
    exact = exact_error(tt.formula(name), circuits.P3, 0.5, 4)
    values = []
    for effort, method in ((1.0, "commutator"), (1e-3, "commutator"), (1e-9, "analytic")):
        found = tt.bound(name, circuits.P3, 0.5, 4, effort=effort)
        values.append(found.value)
        assert found.method == method
        assert any("too many strings" in one for one in found.left_out) == (
            method == "analytic" or found.value > values[0]
        )
        at_random = tt.bound(name, circuits.P3, 0.5, 4, effort=effort, inputs="random")
        assert at_random.value <= found.value and at_random.inputs == "random"
    assert exact < values[0] <= values[1] < values[2]


def test_an_operator_of_many_strings_is_bounded_within_its_share_of_the_work():
    random = np.random.default_rng(1)
    masks = random.integers(0, 2**14, (2, 1000)).tolist()
    crowd = tt.Partition.of(tt.Operator.from_masks(*masks, random.normal(size=1000), 14), "commuting")
    found = tt.bound("strang", crowd, 0.01, 10, effort=1 / 16)
    assert "the theorem for strang: its brackets have too many strings" in found.left_out
    less = tt.bound("suzuki-4", crowd, 0.01, 10, effort=1 / 16)
    assert less.method == "analytic" and "merged nested commutators: too many strings" in less.left_out
    for effort in (0.0, -1.0, float("nan"), True, "much"):
        with pytest.raises(tt.errors.ArgumentError, match="effort: is not a positive number"):
            tt.bound("strang", crowd, 0.01, 10, effort=effort)


@pytest.mark.parametrize("name", ["lie", "strang", "blanes-moan-4", "suzuki-6"])
@pytest.mark.parametrize("method", ["commutator", "tightest"])
def test_least_steps_meet_the_tolerance_and_one_less_does_not(name, method):
    least = tt.steps_by_bound(name, circuits.P3, 2.0, 1e-4, method=method)
    assert tt.bound(name, circuits.P3, 2.0, least, method=method).value <= 1e-4
    assert tt.bound(name, circuits.P3, 2.0, least - 1, method=method).value > 1e-4
    assert tt.steps_by_bound(name, circuits.P3, 0.0, 1e-4) == 1


def test_a_tolerance_below_the_rounding_of_the_weights_is_refused_with_what_can_be_had():
    with pytest.raises(tt.errors.ToleranceError, match="no step count is proven to reach it") as refusal:
        tt.steps_by_bound("suzuki-4", circuits.P3, 1.0, 1e-17)
    achievable = refusal.value.achievable
    assert 1e-17 < achievable < 1e-12
    tt.steps_by_bound("suzuki-4", circuits.P3, 1.0, 1.01 * achievable)


def test_a_refused_tolerance_says_which_limit_stands_in_the_way():
    for tolerance, time, words in (
        (1e-17, 1.0, "the weights of the formula are rounded to doubles, which leaves a bound of"),
        (1e-300, 1e200, r"the bound overflows for this time \(1e\+200\) with any"),
    ):
        with pytest.raises(tt.errors.ToleranceError, match=rf"reach it \({tolerance!r}\): {words}"):
            tt.steps_by_bound("suzuki-4", circuits.P3, time, tolerance)
    with pytest.raises(
        tt.errors.ToleranceError, match=r"with 2\*\*53 steps, the most that there are, the bound is still"
    ):
        tt.steps_by_bound("lie", circuits.P3, 1.0, 1e-20)


@pytest.mark.parametrize("name", ["qdrift", "permuted", "Random-Direction"])
def test_the_name_of_a_randomised_formula_is_sent_to_its_channel_bound(name):
    with pytest.raises(
        tt.errors.FormulaError, match=r"^formula: randomised.*trueturn\.randomised\.\w+\(…\)\.channel_bo"
    ):
        tt.bound(name, circuits.P3, 1.0, 1)


@pytest.mark.parametrize("effort", [0.0, -1, "1", True, np.nan, 10**400])
def test_an_effort_that_is_no_positive_number_is_refused(effort):
    with pytest.raises(tt.errors.ArgumentError, match="effort: is not a positive number"):
        tt.bound("lie", circuits.P3, 1.0, 1, effort=effort)


def test_a_huge_time_gives_infinity_instead_of_an_overflow():
    for name in ("lie", "strang", "suzuki-4"):
        for method in ("commutator", "tightest", "analytic"):
            assert tt.bound(name, circuits.P3, 1e200, 1, method=method).value > 2.0


@pytest.mark.parametrize(
    ("arguments", "options", "error", "message"),
    [
        (("lei", circuits.P3, 1.0, 1), {}, "FormulaError", r"did you mean 'lie'"),
        (
            (7, circuits.P3, 1.0, 1),
            {},
            "FormulaError",
            r"formula: bounds are not defined for this \(int\); give a name, a",
        ),
        (("laskar-robutel-2", circuits.P3, 1.0, 1), {}, "FormulaError", "partition: lacks what"),
        (("lie", "P3", 1.0, 1), {}, "ArgumentError", "partition: is not a Partition"),
        (("lie", circuits.P3, np.nan, 1), {}, "ArgumentError", "time: is not a finite number"),
        (("lie", circuits.P3, np.inf, 1), {}, "ArgumentError", "time: is not a finite number"),
        *(
            (("lie", circuits.P3, 1.0, steps), {}, "ArgumentError", "steps: is not an integer")
            for steps in (0, -3, 1.5, True)
        ),
        (
            ("lie", circuits.P3, 1.0, 1),
            {"method": "best"},
            "ArgumentError",
            r"method: unknown \('best'\); give one of 'comm",
        ),
        (
            ("lie", circuits.P3, 1.0, 1),
            {"inputs": 3},
            "ArgumentError",
            r"inputs: unknown \(3\); give one of 'worst', 'ran",
        ),
        (
            ("lie", circuits.P3, 1.0, 1),
            {"method": "analytic", "inputs": "random"},
            "ArgumentError",
            "method: no analytic bound is at hand for random inputs",
        ),
    ],
)
def test_bad_input_is_named_with_its_remedy(arguments, options, error, message):
    with pytest.raises(getattr(tt.errors, error), match=message):
        tt.bound(*arguments, **options)


def test_an_ensemble_is_sent_to_its_channel_bound():
    ensemble = tt.randomised.directed("lie", circuits.P3, time=1.0, steps=5, seed=1)
    with pytest.raises(
        tt.errors.FormulaError, match=r"not defined for this \(Directed\).*channel_bound\(\) bounds its aver"
    ):
        tt.bound(ensemble, circuits.P3, 1.0, 5)


@pytest.mark.parametrize("tolerance", [0.0, -1.0, np.nan, np.inf, 10**400, "tight", True])
def test_tolerances_that_are_not_positive_numbers_are_refused(tolerance):
    with pytest.raises(tt.errors.ToleranceError, match="tolerance: is not a positive number"):
        tt.steps_by_bound("lie", circuits.P3, 1.0, tolerance)
