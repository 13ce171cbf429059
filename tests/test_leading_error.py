"""The leading error: what it claims about one step and about equal cost, and the comparison built on it."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
import scipy.linalg

import trueturn as tt
from trueturn import errors
from trueturn.formulas.comparison import ERRORS, best_for, fewest_exponentials, rotations_per_step
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


def plain_costs(formula, most):
    """(exponentials, distance) for 1, 2, 3, … whole steps, by a plain loop with nothing merged but for the count."""
    parts = sample_parts()
    exact = scipy.linalg.expm(-1j * sum(parts))
    order = {"forward": range(len(parts)), "reverse": range(len(parts))[::-1]}
    visits = [number for stage in formula.stages for number in order[stage.direction]]
    steps = 1
    while True:
        whole = visits * steps
        cost = 1 + sum(left != right for left, right in itertools.pairwise(whole))
        if cost > most:
            return
        made = {}
        one = np.eye(len(exact))
        for stage in formula.stages:
            for number in order[stage.direction]:
                key = stage.weight, number
                if key not in made:
                    made[key] = scipy.linalg.expm(-1j * stage.weight / steps * parts[number])
                one = made[key] @ one
        total = np.eye(len(exact))
        for _ in range(steps):
            total = one @ total
        yield cost, np.linalg.norm(total - exact, 2)
        steps += 1


def test_the_front_holds_the_formulas_of_fewest_exponentials_by_whole_steps_that_are_run():
    known = [tt.formula(name) for name in tt.formulas(special=True)]
    front = best_for(known)
    general = [one for one in known if not one.requires]
    most = 512
    runs = {one.name: list(plain_costs(one, most)) for one in general}
    for at, error in enumerate(ERRORS):
        needed = {name: min((c for c, d in pairs if d <= error), default=math.inf) for name, pairs in runs.items()}
        least = min(needed.values())
        assert least <= most
        assert {name for name, won in front.items() if error in won} == {n for n, c in needed.items() if c == least}
        for one in general:
            assert fewest_exponentials(one, most)[at] == needed[one.name]
        # Some 1500 products of 16 x 16 unitaries round like sqrt(1500) * 16 u = 7e-14 at most; nothing is that near.
        assert all(abs(d - error) > 1e-13 for pairs in runs.values() for c, d in pairs if c <= least)
    assert not any(tt.formula(name).requires for name in front)


def test_half_a_step_wins_nothing_and_equal_costs_share():
    known = [tt.formula(name) for name in ("kahan-li-8", "kahan-li-8b", "blanes-moan-6")]
    assert known[2].exponentials_for(1e-5) < known[0].exponentials_for(1e-5)  # two steps are 81, the law says 53
    assert [fewest_exponentials(one, 100)[4] for one in known] == [69, 69, 81]
    front = best_for(known)
    assert 1e-5 in front["kahan-li-8"] and 1e-5 in front["kahan-li-8b"] and 1e-5 not in front["blanes-moan-6"]


def test_an_error_out_of_reach_has_no_winner():
    assert best_for([tt.formula("lie")]) == {"lie": (0.1, 0.01, 0.001)}  # 3 exponentials a step, error 0.66 / steps
    assert best_for([]) == {}
