"""The order of every registered formula, measured by the slope of its error against the step.

Nothing here uses the code under test except the list of stages: states of three qubits are evolved at 40
digits, one rotation after the other without merging, and compared with the Taylor series of the evolution.
From order 8 on the weights are those of the source with all their digits, since errors of floats would hide
the slope; that the floats are these digits rounded is a matter of `test_formula_data`.
"""

from __future__ import annotations

import math
from fractions import Fraction
from itertools import pairwise

import mpmath
import numpy as np
import pytest

import trueturn as tt
from trueturn.formulas import formula_entry

# Three and four parts, no two of which commute; a part's terms do. Coefficients are arbitrary.
THREE_PARTS = (
    [(0.9153, "XXI"), (0.4127, "IXX")],
    [(0.7714, "ZII"), (-0.6433, "IZI"), (0.3891, "IIZ")],
    [(0.3262, "YIY"), (0.7365, "IYI")],
)
FOUR_PARTS = (
    [(0.5713, "XII"), (-0.4417, "IXX")],
    [(0.8122, "ZZI"), (0.2934, "IZZ")],
    [(0.6401, "YIY")],
    [(-0.3725, "ZXI"), (0.5236, "IIZ")],
)
RATIO = math.sqrt(0.5)
NOISE = 2e-13
"""Weights are floats, so each order condition misses by about 1e-16 whatever the digits used here. Errors
above this floor are changed by less than 0.1 %, their slopes by less than 0.01."""
FINE_NOISE = 2e-17
"""The same floor for the digits of the source, 20 or more of them from order 8 on."""
HIGH = 8
GENERAL_ORDERS = {name: formula_entry(name).order for name in tt.formulas(special=True)}
NAMES = [
    pytest.param(name, marks=pytest.mark.heavy) if order >= HIGH or name == "suzuki-6" else name
    for name, order in GENERAL_ORDERS.items()
]


def string_action(letters):
    """Rows and factors of a string on a state vector: (P v)[k] = factor[k] v[row[k]]."""
    flip = sum(1 << qubit for qubit, letter in enumerate(letters) if letter in "XY")
    rows, factors = [], []
    for k in range(2 ** len(letters)):
        factor = mpmath.mpc(1)
        for qubit, letter in enumerate(letters):
            bit = k >> qubit & 1
            factor *= {"I": 1, "X": 1, "Y": mpmath.mpc(0, 1 if bit else -1), "Z": 1 - 2 * bit}[letter]
        rows.append(k ^ flip)
        factors.append(factor)
    return np.array(rows), np.array(factors, dtype=object)


def prepared(parts):
    return [[(mpmath.mpf(c), *string_action(letters)) for c, letters in part] for part in parts]


def one_step_error(stages, parts, step):
    """Distance between one step and the exact evolution, from a fixed random state."""
    with mpmath.workdps(40):
        parts = prepared(parts)
        draw = np.random.default_rng(5)
        start = np.array([mpmath.mpc(*pair) for pair in draw.normal(size=(8, 2))], dtype=object)
        start /= mpmath.sqrt(sum(abs(v) ** 2 for v in start))
        difference = evolved(stages, parts, step, start) - exact(parts, step, start)
        return float(mpmath.sqrt(sum(abs(v) ** 2 for v in difference)))


def evolved(stages, parts, step, state):
    turns = {}
    for weight, direction in stages:
        for number in range(len(parts)) if direction == "forward" else reversed(range(len(parts))):
            if (weight, number) not in turns:
                scale = mpmath.mpf(weight.numerator) / weight.denominator * step
                turns[weight, number] = [turn(scale, *term) for term in parts[number]]
            for cosine, rows, slopes in turns[weight, number]:
                state = cosine * state + slopes * state[rows]
    return state


def turn(duration, coefficient, rows, factors):
    """exp(-i θ P) v = cos θ v - i sin θ P v."""
    angle = duration * coefficient
    return mpmath.cos(angle), rows, mpmath.mpc(0, -mpmath.sin(angle)) * factors


def exact(parts, step, state):
    """Sum the Taylor series until its terms fall below 40 digits."""
    total = term = state
    for k in range(1, 200):
        applied = sum(c * factors * term[rows] for part in parts for c, rows, factors in part)
        term = mpmath.mpc(0, -step) / k * applied
        total = total + term
        if max(abs(v) for v in term) < mpmath.mpf(10) ** -38:
            return total
    raise AssertionError("the Taylor series did not converge")


def window(stages, parts, order):
    """Three steps as small as the floor allows: the error at the least is about three times the floor."""
    coarse = 0.5
    least = coarse * (3 * noise(order) / one_step_error(stages, parts, coarse)) ** (1 / (order + 1))
    return [least / RATIO**2, least / RATIO, least]


def measured_order(stages, parts, steps, least_error=NOISE):
    """The slope between the two smallest steps, less one; NaN where slopes have not settled."""
    errors = [one_step_error(stages, parts, step) for step in steps]
    assert errors[-1] > least_error
    slopes = [math.log(late / early) / math.log(RATIO) for early, late in pairwise(errors)]
    return slopes[1] - 1 if abs(slopes[1] - slopes[0]) < 0.15 else math.nan


def noise(order):
    return FINE_NOISE if order >= HIGH else NOISE


def listed(name):
    if GENERAL_ORDERS[name] >= HIGH:
        return formula_entry(name).exact_stages()
    return [(Fraction(stage.weight), stage.direction) for stage in tt.formula(name).stages]


@pytest.mark.parametrize("parts", [THREE_PARTS, FOUR_PARTS], ids=["three", "four"])
@pytest.mark.parametrize("name", NAMES)
def test_the_claimed_order_is_the_slope_of_the_error(name, parts):
    stages, order = listed(name), GENERAL_ORDERS[name]
    steps = window(stages, parts, order)
    assert abs(measured_order(stages, parts, steps, noise(order)) - order) < 0.15


@pytest.mark.parametrize("name", NAMES)
def test_a_weight_moved_by_a_thousandth_is_noticed(name):
    stages, order = listed(name), GENERAL_ORDERS[name]
    steps = window(stages, THREE_PARTS, order)
    middle = len(stages) // 2
    changes = [{middle: Fraction(1, 1000)}]
    if middle:  # with the sum kept, which is harder to see
        changes.append({middle: Fraction(1, 1000), middle - 1: Fraction(-1, 1000)})
    for change in changes:
        moved = [(weight + change.get(place, 0), direction) for place, (weight, direction) in enumerate(stages)]
        found = measured_order(moved, THREE_PARTS, steps, noise(order))
        assert math.isfinite(found) and abs(found - order) >= 0.15


@pytest.mark.parametrize(
    "test", [test_the_claimed_order_is_the_slope_of_the_error, test_a_weight_moved_by_a_thousandth_is_noticed]
)
def test_every_registered_formula_has_an_order_test(test):
    covered = [mark.args[1] for mark in test.pytestmark if mark.name == "parametrize" and mark.args[0] == "name"]
    names = [{name if isinstance(name, str) else name.values[0] for name in listed} for listed in covered]
    assert names == [set(tt.formulas(special=True))]


def test_the_parts_do_not_commute_with_each_other():
    for parts in (THREE_PARTS, FOUR_PARTS):
        operators = [
            tt.Operator.gather(
                [(c, " ".join(f"{v}_{q}" for q, v in enumerate(text) if v != "I")) for c, text in part],
                qubits=3,
            )
            for part in parts
        ]
        assert tt.Partition(operators).parts == tuple(operators)
        for number, left in enumerate(operators):
            for right in operators[:number]:
                assert not left.bracket_vanishes(right)
