"""The leading error: what it claims about one step and about equal cost, and the comparison built on it."""

from __future__ import annotations

import math

import numpy as np
import pytest
import scipy.linalg

import trueturn as tt
from trueturn import errors
from trueturn.formulas.comparison import ERRORS, best_for, rotations_per_step
from trueturn.formulas.leading import error_coefficient, exponentials_per_step, sample_parts


def step_error(formula, step, parts):
    """Distance of one step from the exact evolution by matrix exponentials of the parts."""
    product = np.eye(len(parts[0]))
    for stage in formula.stages:
        for part in parts if stage.direction == "forward" else parts[::-1]:
            product = scipy.linalg.expm(-1j * stage.weight * step * part) @ product
    return np.linalg.norm(product - scipy.linalg.expm(-1j * step * sum(parts)), 2)


@pytest.mark.parametrize(
    ("name", "step"),
    [
        ("lie", 1e-4),
        ("strang", 1e-3),
        ("ruth-3", 3e-3),
        ("omelyan-2", 1e-3),
        ("suzuki-4", 0.03),
        ("blanes-moan-4", 0.03),
        ("mclachlan-4", 0.03),
        ("yoshida-6", 0.06),
        ("triple-jump-6", 0.03),
        ("yoshida-8", 0.12),
    ],
)
def test_the_error_of_a_small_step_is_the_leading_one(name, step):
    formula = tt.formula(name)
    found = step_error(formula, step, sample_parts()) / step ** (formula.order + 1)
    # the next term is smaller by about the step times a weight of size 3 at most; rounding is about 1e-15
    slack = 0.06 + 3e-14 / (formula.error_coefficient * step ** (formula.order + 1))
    assert slack < 0.3
    assert abs(found / formula.error_coefficient - 1) < slack


def test_repeating_a_formula_changes_nothing_at_equal_cost():
    strang = tt.formula("strang")
    twice = tt.Formula.composition(["0.5", "0.5"], name="strang twice")
    assert twice.error_coefficient == pytest.approx(strang.error_coefficient / 4, rel=1e-12)
    assert exponentials_per_step(twice.exact_stages()) == 2 * exponentials_per_step(strang.exact_stages()) == 8
    assert twice.leading_error == pytest.approx(strang.leading_error, rel=1e-12)


def test_exponentials_per_step_are_those_of_a_long_circuit_of_three_parts():
    three = tt.Partition([tt.Operator(text) for text in ("X_0", "Y_0", "Z_0")])
    for name in tt.formulas():
        formula = tt.formula(name)
        assert exponentials_per_step(formula.exact_stages()) == rotations_per_step(formula, three)


def test_pairing_strang_steps_does_not_change_the_coefficient():
    strang = tt.formula("strang").exact_stages()
    with_zero = [*strang, (0 * strang[0][0], False), (0 * strang[0][0], False)]  # no longer a list of pairs
    assert error_coefficient(with_zero, 2) == pytest.approx(error_coefficient(strang, 2), rel=1e-12)


def test_the_ranking_of_one_order_does_not_hang_on_the_draw():
    """Errors of actual steps on other draws, at equal cost, put the order-4 formulas in the same order."""
    names = ["blanes-moan-4", "omelyan-4-s4", "suzuki-4", "triple-jump-4"]
    assert sorted(names, key=lambda name: tt.formula(name).leading_error) == names
    for seed in (1, 2, 3):
        parts = sample_parts(seed)
        costs = [exponentials_per_step(tt.formula(name).exact_stages()) for name in names]
        # one step for each, as long as its cost, so that all spend the same per unit of time
        found = [
            step_error(tt.formula(name), 0.01 * cost, parts) / cost for name, cost in zip(names, costs, strict=True)
        ]
        assert found == sorted(found)


def test_exponentials_follow_from_the_error_by_the_order():
    formula = tt.formula("blanes-moan-4")
    assert formula.exponentials_for(1e-4) == pytest.approx(10 * formula.leading_error, rel=1e-12)
    assert formula.exponentials_for(1.0) == pytest.approx(formula.leading_error, rel=1e-12)


@pytest.mark.parametrize("error", [0, -1.0, math.inf, math.nan, "1e-3", True, None])
def test_a_bad_error_is_refused(error):
    with pytest.raises(errors.ArgumentError, match=r"^error: is not a finite number above zero \(.*\); give one"):
        tt.formula("strang").exponentials_for(error)


def test_the_front_holds_the_cheapest_formula_for_each_error_and_no_other():
    known = [tt.formula(name) for name in tt.formulas(special=True)]
    front = best_for(known)
    assert sorted(error for won in front.values() for error in won) == sorted(ERRORS)
    for name, won in front.items():
        for error in won:
            mine = tt.formula(name).exponentials_for(error)
            assert all(mine <= other.exponentials_for(error) for other in known if not other.requires)
    assert not any(tt.formula(name).requires for name in front)
    assert best_for([]) == {}
