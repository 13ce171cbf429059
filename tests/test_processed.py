"""Processed formulas: effective order by algebra and by slope, cost, gain, refusals."""

from __future__ import annotations

import math
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
import pytest

import oracle
import trueturn as tt
from circuits import P3, distance, matrix, plain
from test_order import FOUR_PARTS, THREE_PARTS, measured_order, window
from trueturn import errors
from trueturn.formulas import Formula, Stage
from trueturn.formulas import order as algebra
from trueturn.formulas.conditions import Conditions
from trueturn.formulas.processed import _HALF_KERNEL, _PROCESSOR, PROCESSED, Processed

FOUR = PROCESSED[0]


def whole(processed):
    return [
        *[(stage.weight, stage.direction) for stage in processed.pre],
        *[(stage.weight, stage.direction) for stage in processed.kernel.stages],
        *[(stage.weight, stage.direction) for stage in processed.post],
    ]


@pytest.mark.parametrize("parts", [THREE_PARTS, FOUR_PARTS], ids=["three", "four"])
@pytest.mark.parametrize("processed", PROCESSED, ids=lambda p: p.name)
def test_the_effective_order_is_the_slope_of_the_error_and_above_the_kernels(processed, parts):
    kernel = [(stage.weight, stage.direction) for stage in processed.kernel.stages]
    for floats, order in ((whole(processed), processed.order), (kernel, processed.kernel.order)):
        stages = [(Fraction(weight), direction) for weight, direction in floats]
        assert abs(measured_order(stages, parts, window(stages, parts, order)) - order) < 0.15
    assert processed.order > algebra.measured_order(processed.kernel.exact_stages())[0]


@pytest.mark.parametrize("processed", PROCESSED, ids=lambda p: p.name)
def test_the_effective_order_is_exact_and_not_just_reached(processed):
    assert algebra.measured_order(processed.exact_stages())[0] == processed.order


def test_printed_digits_meet_every_order_condition():
    # 34 decimals are printed: half a unit in each of 18 stages moves a condition by less than 18 · 2^4 / 2 units.
    post = [Decimal(text) for text in _PROCESSOR]
    half = [Decimal(text) for text in _HALF_KERNEL]
    with localcontext() as context:
        context.prec = 60
        weights = [*(-weight for weight in reversed(post)), *half, *reversed(half), *post]
        missed = Conditions(range(1, 5), 1).exact(weights, [1, -1] * 9)
        assert max(map(abs, missed)) < Decimal("1.5e-32")
        assert abs(sum(post)) < Decimal("4e-34")
        assert max(map(abs, Conditions([5], 1).exact(weights, [1, -1] * 9))) > Decimal("1e-4")  # and no more


@pytest.mark.parametrize("steps", [1, 2, 5])
def test_a_run_is_pre_step_kernels_and_post_step(steps):
    partition = tt.Partition([*P3.parts[:2], P3.parts[2] + 0.4])
    made = matrix(FOUR.rotations(partition, 0.9, steps))
    step = 0.9 / steps
    ends = []
    for stages in (FOUR.pre, FOUR.post):
        one = np.eye(8)
        for stage in stages:
            for part in P3.parts if stage.direction == "forward" else P3.parts[::-1]:
                one = oracle.evolution(part, stage.weight * step) @ one
        ends.append(one)
    # some 200 products of 8 x 8 matrices, 8 u each
    floor = 200 * 8 * 2.0**-53
    assert distance(made, ends[1] @ plain(FOUR.kernel, partition, 0.9, steps) @ ends[0]) < floor
    assert distance(ends[1] @ ends[0], np.eye(8)) < floor  # the ends undo each other


def test_errors_of_whole_runs_fall_with_the_effective_order():
    exact = oracle.evolution(P3.operator(), 1.0)
    found = [distance(matrix(FOUR.rotations(P3, 1.0, steps)), exact) for steps in (32, 64)]
    assert abs(math.log2(found[0] / found[1]) - 4) < 0.15  # corrections of relative order 1/32
    bare = [distance(matrix(FOUR.kernel.rotations(P3, 1.0, steps)), exact) for steps in (32, 64)]
    assert abs(math.log2(bare[0] / bare[1]) - 2) < 0.15


def test_processing_beats_the_triple_jump_with_kernels_of_the_same_length():
    # Both take six stages a step; the processor adds its stages once. At 40 steps that is 5 % more stages, which the
    # triple jump is given as steps of its own (42).
    jump = Formula.composition(
        ["1.351207191959657634", "-1.702414383919315268", "1.351207191959657634"], name="triple jump", order=4
    )
    assert FOUR.stage_count(40) == 252 == 42 * len(jump.stages)
    exact = oracle.evolution(P3.operator(), 1.0)
    theirs = distance(matrix(jump.rotations(P3, 1.0, 42)), exact)
    ours = distance(matrix(FOUR.rotations(P3, 1.0, 40)), exact)
    assert theirs / ours > 5


def test_cost_is_that_of_the_circuit():
    # kernel: 6 stages on 3 parts of 2, 3, 2 terms merge at 6 seams a step; ends: 6 stages each merge at 5 seams
    stages, terms = 6, 7
    kernel = 40 * stages * terms - 40 * 3 * 2 - (40 * 3 - 1) * 2
    ends = 2 * (stages * terms - 5 * 2)
    assert FOUR.rotations(P3, 1.0, 40).count == kernel + ends
    assert FOUR.rotations(P3, 1.0, 10**6).count > 10**7  # repeats are not written out


def test_a_first_order_step_is_not_lifted_to_order_two_on_general_parts():
    for stages in ((Stage(0.5, "forward"), Stage(-0.5, "reverse")), (Stage(0.5, "forward"), Stage(-0.5, "forward"))):
        with pytest.raises(errors.FormulaError, match=r"order: is not reached \(2 claimed, 1 measured"):
            Processed(tt.formula("lie"), stages, "lifted", 2, "test")


def test_a_moved_digit_is_refused():
    moved = [*FOUR.post]
    moved[0], moved[1] = (Stage(moved[k].weight + shift, moved[k].direction) for k, shift in ((0, 1e-6), (1, -1e-6)))
    with pytest.raises(errors.FormulaError, match=r"order: is not reached \(4 claimed"):
        Processed(FOUR.kernel, tuple(moved), "moved", 4, "test")


def test_a_partition_of_the_identity_alone_is_a_phase():
    circuit = FOUR.rotations(tt.Partition([tt.Operator("2.0", qubits=1)]), 0.5, 3)
    assert (circuit.count, circuit.phase) == (0, -1.0)


STRANG = tt.formula("strang")


@pytest.mark.parametrize(
    ("arguments", "error", "piece"),
    [
        (("strang", FOUR.post, "n", 2, "s"), errors.ArgumentError, "kernel: is not a Formula ('strang')"),
        ((STRANG, (), "n", 2, "s"), errors.FormulaError, "processor: is empty"),
        ((STRANG, FOUR.post, " ", 2, "s"), errors.FormulaError, "name: is not a name"),
        ((STRANG, ((0.1, "forward"),), "n", 2, "s"), errors.FormulaError, "processor: entry 0 is no stage"),
        ((STRANG, (Stage(0.1, "forward"),), "n", 2, "s"), errors.FormulaError, "do not sum to 0 (0.1)"),
        ((STRANG, (Stage(math.nan, "forward"),), "n", 2, "s"), errors.FormulaError, "not a finite number"),
        ((STRANG, FOUR.post, "n", 0, "s"), errors.FormulaError, "order: is not an integer from 1 to 12 (0)"),
        ((STRANG, FOUR.post, "n", 4, "s"), errors.FormulaError, "order: is not reached (4 claimed, 2 measured"),
    ],
)
def test_wrong_processed_formulas_are_refused(arguments, error, piece):
    with pytest.raises(error) as caught:
        Processed(*arguments)
    assert piece in str(caught.value)
