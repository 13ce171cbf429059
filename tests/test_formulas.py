"""Formulas: facts of common practice, making them, refusals."""

from __future__ import annotations

import math
from decimal import Decimal

import pytest

import oracle
import trueturn as tt
from circuits import P3, P3_PARTS, distance, matrix
from trueturn import errors
from trueturn.formulas.order import measured_order

UNIT = 2.0**-53
# Common practice: facts that any product formula must show


def test_common_practice_commuting_terms_make_one_first_order_step_exact():
    h = tt.Operator("0.7 X_0 X_1 - 0.4 Y_0 Y_1 + 0.9 Z_0 Z_1 + 0.2 Z_2")
    circuit = tt.formula("lie").rotations(tt.Partition.of(h, "single"), 3.0, 1)
    # four rotations of 8 x 8 products, and expm of norm 6.6
    assert distance(matrix(circuit), oracle.evolution(h, 3.0)) <= 4 * 64 * UNIT * 6.6


def test_common_practice_first_order_error_falls_as_one_over_the_steps():
    exact = oracle.evolution(P3.operator(), 1.0)
    failing = [distance(matrix(tt.formula("lie").rotations(P3, 1.0, n)), exact) for n in (256, 512)]
    assert abs(failing[0] / failing[1] - 2) < 0.02  # the next term is smaller by about 1/n times a few


def test_common_practice_first_order_error_grows_as_the_square_of_time():
    found = []
    for time in (0.01, 0.02):
        circuit = tt.formula("lie").rotations(P3, time, 4)
        found.append(distance(matrix(circuit), oracle.evolution(P3.operator(), time)))
    assert abs(found[1] / found[0] - 4) < 0.08  # the next term is smaller by about t times a few


# Making formulas


def test_symmetry_is_read_off_the_stages():
    assert [tt.formula(name).symmetric for name in ("lie", "strang", "suzuki-4")] == [False, True, True]
    assert not tt.Formula.composition([0.25, 0.75], name="lopsided").symmetric


def test_order_is_measured_where_none_is_claimed():
    assert tt.Formula.composition([0.25, 0.75], name="lopsided").order == 2
    assert tt.Formula.splitting([1.0], [1.0], name="lie again").stages == tt.formula("lie").stages


@pytest.mark.parametrize(("name", "claimed"), [("strang", 1), ("blanes-moan-4", 1), ("suzuki-6", 5), ("suzuki-10", 8)])
def test_a_claim_below_the_true_order_is_refused(name, claimed):
    # the leading error is read at the order: below the true one it would be 0
    formula = tt.formula(name)
    message = (
        rf"order: is below the true one \({claimed} claimed, {formula.order} measured\); give order={formula.order}"
    )
    with pytest.raises(errors.FormulaError, match=message):
        tt.Formula("modest", claimed, formula.stages, "test")
    assert tt.Formula("true", formula.order, formula.stages, "test").order == formula.order


def test_special_sets_keep_the_order_that_is_measured_on_general_parts():
    for name in ("blanes-moan-nystrom-6", "laskar-robutel-2"):
        formula = tt.formula(name)
        assert formula.order == measured_order(formula.exact_stages())[0] < formula.special_order
        assert formula.error_coefficient > 0


def test_splitting_keeps_the_direction_of_stages_when_a_weight_is_zero():
    formula = tt.Formula.splitting(["0", "1"], ["1"], name="b first")
    assert [(stage.weight, stage.direction) for stage in formula.stages] == [(1.0, "reverse")]


def test_a_scheme_that_leans_on_structure_is_refused_its_order():
    # SABA2 of J. Laskar and P. Robutel, "High order symplectic integrators for perturbed Hamiltonian
    # systems", Celest. Mech. Dyn. Astron. 80, 39 (2001), from memory: the error in A alone is of order 4,
    # which helps where B is a small perturbation; in general the order is 2.
    outer = (1 - 1 / math.sqrt(3)) / 2
    scheme = ([outer, 1 / math.sqrt(3), outer], [0.5, 0.5])
    with pytest.raises(errors.FormulaError, match=r"order: is not reached \(4 claimed, 2 measured"):
        tt.Formula.splitting(*scheme, name="saba2", order=4)
    assert tt.Formula.splitting(*scheme, name="saba2").symmetric


@pytest.mark.parametrize("place", range(5))
@pytest.mark.parametrize("shift", [1e-3, -1e-3, 1e-9])
def test_a_claim_is_refused_when_a_weight_is_moved(place, shift):
    weights = [2 * stage.weight for stage in tt.formula("suzuki-4").stages[::2]]
    weights[place] += shift
    weights[(place + 1) % 5] -= shift
    with pytest.raises(errors.FormulaError, match=r"order: is not reached \(4 claimed, [23] measured"):
        tt.Formula.composition(weights, name="moved", order=4)


STRANG = tt.formula("strang")


@pytest.mark.parametrize(
    ("make", "pieces"),
    [
        (
            lambda: tt.formula("suzuki_4"),
            ["name:", "('suzuki_4')", "did you mean 'suzuki-4'?", "choose one of lie"],
        ),
        (lambda: tt.formula("zzz"), ["name:", "('zzz')", "choose one of lie, strang"]),
        (lambda: tt.formula(4), ["name:", "(4)", "choose one of lie"]),
        (lambda: tt.formula("suzuki-5"), ["name:", "('suzuki-5')", "even order from 4 to 12"]),
        (lambda: tt.formula("suzuki-2"), ["name:", "('suzuki-2')", "even order from 4 to 12"]),
        (lambda: tt.formula("suzuki-14"), ["name:", "('suzuki-14')", "even order from 4 to 12"]),
        (lambda: tt.Formula("n", 1, STRANG.stages, "s", "good luck"), ["requires:", "('good luck')", "leave it empty"]),
        (lambda: tt.Formula.composition([], name="n"), ["weights:", "is empty ([])", "decimal digits"]),
        (lambda: tt.Formula.composition(1.0, name="n"), ["weights:", "(1.0)", "finite numbers"]),
        (lambda: tt.Formula.composition("1", name="n"), ["weights:", "('1')", "finite numbers"]),
        (
            lambda: tt.Formula.composition([math.nan, 1], name="n"),
            ["weights: entry 0", "(nan)", "finite numbers"],
        ),
        (
            lambda: tt.Formula.composition([1, math.inf], name="n"),
            ["weights: entry 1", "(inf)", "finite numbers"],
        ),
        (lambda: tt.Formula.composition([1, "x"], name="n"), ["weights: entry 1", "('x')", "finite numbers"]),
        (lambda: tt.Formula.composition([True], name="n"), ["weights: entry 0", "(True)", "finite numbers"]),
        (lambda: tt.Formula.composition([1j], name="n"), ["weights: entry 0", "(1j)", "finite numbers"]),
        (lambda: tt.Formula.composition([0.5, 0.6], name="n"), ["weights:", "(1.1)", "divide by the sum"]),
        (lambda: tt.Formula.composition([1], name=""), ["name:", "('')", "not empty"]),
        (lambda: tt.Formula.composition([1], name="n", order=4), ["4 claimed, 2 measured", "give order=2"]),
        (lambda: tt.Formula("n", 1, 3, "s"), ["stages: is no sequence of stages", "(3)", "give a tuple of Stage"]),
        (lambda: tt.Formula("n", 1, "ab", "s"), ["stages: is no sequence of stages", "('ab')", "give a tuple"]),
        (
            lambda: tt.Formula.composition(["1e400", "-1e400", "1"], name="n"),
            ["weights: entry 0 is above 1e100 in size"],
        ),
        (
            lambda: tt.Formula.composition(["1e3000000"], name="n"),
            ["weights: entry 0 is not a finite", "('1e3000000')"],
        ),
        (lambda: tt.Formula.composition(["1E-3000000"], name="n"), ["weights: entry 0 is not a finite"]),
        (lambda: tt.Formula.composition([Decimal("1e3000000")], name="n"), ["weights: entry 0 is not a finite"]),
        (lambda: tt.Formula.composition([10**5000], name="n"), ["entry 0 is above 1e100", "thousands of digits"]),
        (lambda: tt.Formula.composition([1], name="n", order=0), ["order:", "(0)", "1 to 12"]),
        (lambda: tt.Formula.composition([1], name="n", order=14), ["order:", "(14)", "1 to 12"]),
        (lambda: tt.Formula.composition([1], name="n", order=2.0), ["order:", "(2.0)", "1 to 12"]),
        (lambda: tt.Formula.splitting([1], [1, 0], name="n"), ["a, b:", "(1, 2)", "give as many"]),
        (lambda: tt.Formula.splitting([1], [0.9], name="n"), ["b:", "(0.9)", "divide by the sum"]),
        (lambda: tt.Formula("n", 1, (), "s"), ["stages:", "(())", "at least one"]),
        (
            lambda: tt.Formula("n", 1, ((1.0, "forward"),), "s"),
            ["entry 0", "(1.0, 'forward')", "Stage(weight"],
        ),
    ],
)
def test_bad_formulas_are_refused_with_argument_value_and_remedy(make, pieces):
    with pytest.raises(errors.FormulaError) as caught:
        make()
    for piece in pieces:
        assert piece in str(caught.value)


def test_an_unknown_formula_carries_name_and_choices():
    with pytest.raises(errors.FormulaError) as caught:
        tt.formula("suzuki")
    assert caught.value.name == "suzuki"
    assert caught.value.choices == tt.formulas(special=True)


@pytest.mark.parametrize(
    ("time", "steps", "partition", "argument", "pieces"),
    [
        (1.0, 1, P3_PARTS, "partition", ["partition:", "Partition.of(operator, rule)"]),
        (math.inf, 1, P3, "time", ["time:", "(inf)", "real number"]),
        (math.nan, 1, P3, "time", ["time:", "(nan)", "real number"]),
        ("1", 1, P3, "time", ["time:", "('1')", "real number"]),
        (True, 1, P3, "time", ["time:", "(True)", "real number"]),
        (10**400, 1, P3, "time", ["time:", "real number"]),
        (1.0, 0, P3, "steps", ["steps:", "(0)", "1 to 2**53"]),
        (1.0, 2.0, P3, "steps", ["steps:", "(2.0)", "1 to 2**53"]),
        (1.0, True, P3, "steps", ["steps:", "(True)", "1 to 2**53"]),
        (1.0, 2**60, P3, "steps", ["steps:", "1 to 2**53"]),
        (
            1e300,
            1,
            tt.Partition([1e200 * tt.Operator("X_0")]),
            "time",
            ["time:", "too large", "shorter time"],
        ),
        (1e300, 1, tt.Partition([1e200 * tt.Operator("1")]), "time", ["time:", "too large", "shorter time"]),
    ],
)
def test_bad_circuits_are_refused_with_argument_value_and_remedy(time, steps, partition, argument, pieces):
    with pytest.raises(errors.ArgumentError) as caught:
        STRANG.rotations(partition, time, steps)
    assert caught.value.argument == argument
    for piece in pieces:
        assert piece in str(caught.value)
