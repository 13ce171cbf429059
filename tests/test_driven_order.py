"""Every registered formula keeps its order on a driven problem of three parts that do not commute."""

from __future__ import annotations

import math
from itertools import pairwise

import pytest

import trueturn as tt
from driven_problems import PT, distance, evolution, multiplied, plain, pt, triple_jump

START = 0.2  # where no strength or slope of PT is zero
RATIO = math.sqrt(0.5)
UNIT = 2.0**-53


def one_step_error(formula, step):
    circuit = PT.rotations(formula, "terms", step, 1, start=START)
    return distance(multiplied(circuit), evolution(pt, START, START + step))


def floor(formula):
    """Rounding of the product, 8 u for each of N rotations, of either sign: 8 √N u; and of the collocation, 20 u."""
    return (8 * math.sqrt(PT.rotations(formula, "terms", 0.1, 1).count) + 20) * UNIT


def window(error, order, noise):
    """Three steps, the least with an error of about 30 times the noise: slopes are then off by less than 0.1."""
    coarse = 0.4
    least = coarse * (30 * noise / error(coarse)) ** (1 / (order + 1))
    return [least / RATIO**2, least / RATIO, least]


def slopes(error, steps):
    errors = [error(step) for step in steps]
    return [math.log(late / early) / math.log(RATIO) for early, late in pairwise(errors)]


def measured_order(error, order, noise):
    """The slope of the error of one step against the step, less one; NaN where slopes have not settled."""
    early, late = slopes(error, window(error, order, noise))
    return late - 1 if abs(late - early) < 0.15 else math.nan


@pytest.mark.parametrize("name", tt.formulas())
def test_the_order_is_kept_when_strengths_are_driven(name):
    # N. Wiebe, D. W. Berry, P. Høyer, B. C. Sanders, "Higher order decompositions of ordered operator exponentials",
    # J. Phys. A 43, 065203 (2010), arXiv 0812.0562, for Suzuki formulas; from memory.
    formula = tt.formula(name)
    found = measured_order(lambda step: one_step_error(formula, step), formula.order, floor(formula))
    assert abs(found - formula.order) < 0.15


def test_every_registered_formula_has_a_driven_order_test():
    marks = test_the_order_is_kept_when_strengths_are_driven.pytestmark
    (names,) = [mark.args[1] for mark in marks if mark.name == "parametrize"]
    assert set(names) == set(tt.formulas())


def test_an_order_is_lost_when_strengths_freeze_before_the_clock_advances():
    # so the order test can fail: with the strengths of the stage's beginning the midpoint rule is gone
    strang = tt.formula("strang")

    def error(step):
        return distance(plain(strang, step, 1, START, early=True), evolution(pt, START, START + step))

    assert abs(measured_order(error, 1, floor(strang)) - 1) < 0.15


def test_common_practice_symmetric_formulas_have_even_order():
    # E. Hairer, C. Lubich, G. Wanner, Geometric Numerical Integration (2006), theorem II.3.2; from memory. Weights
    # without an order condition: symmetry alone makes it 2, and 4 where the third is met.
    for formula, order in [
        (tt.Formula.composition([0.3, 0.4, 0.3], name="palindrome"), 2),
        (triple_jump(), 4),
    ]:
        assert formula.symmetric
        found = measured_order(lambda step, f=formula: one_step_error(f, step), order, floor(formula))
        assert abs(found - order) < 0.15


@pytest.mark.parametrize("name", [name for name in tt.formulas() if tt.formula(name).symmetric])
def test_symmetric_formulas_undo_themselves_backwards_in_time(name):
    formula = tt.formula(name)
    there = PT.rotations(formula, "terms", 0.6, 2, start=START)
    back = PT.rotations(formula, "terms", -0.6, 2, start=START + 0.6)
    # clock readings differ by 4 u, strengths by 12 u of theirs; each rotation 8 u as above
    noise = 2 * (8 + 16) * there.count * UNIT
    assert distance(multiplied(back) @ multiplied(there), evolution(pt, START, START)) <= noise
