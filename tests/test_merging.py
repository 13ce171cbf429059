"""Merging across stages and steps: it changes the cost and nothing else, and never writes steps out."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

import oracle
import trueturn as tt
from circuits import P3, distance, matrix, plain
from trueturn.formulas import Stage
from trueturn.formulas.merging import merged_runs, repeated
from trueturn.formulas.order import measured_order

UNIT = 2.0**-53


def test_counts_of_exponentials_are_the_published_ones(published):
    # Counting, without a source: m sweeps over L parts take m (L - 1) + 1 exponentials once neighbours merge.
    check = next(check for check in published("bounds.toml")["check"] if check["id"] == "exponential_counts")
    letters = "XYZ"
    for parts, one_step, ten_steps in zip(check["L"], check["one_step"], check["ten_steps"], strict=True):
        partition = tt.Partition([tt.Operator(f"{letters[k % 3]}_{k // 3 % 20}", qubits=20) for k in range(parts)])
        for order, count in zip((2, 4, 6, 8), one_step, strict=True):
            name = "strang" if order == 2 else f"suzuki-{order}"
            assert tt.formula(name).rotations(partition, 1.0, 1).count == count
        for order, count in zip((2, 4, 6), ten_steps, strict=True):
            name = "strang" if order == 2 else f"suzuki-{order}"
            assert tt.formula(name).rotations(partition, 1.0, 10).count == count


def test_strang_costs_what_the_closed_form_says():
    for parts in (1, 2, 3, 5):
        partition = tt.Partition([tt.Operator(text, qubits=3) for text in ("X_0", "Z_0", "Y_1", "X_1", "Z_2")[:parts]])
        for steps in (1, 2, 3, 1000):
            count = tt.formula("strang").rotations(partition, 1.0, steps).count
            assert count == (1 if parts == 1 else steps * (2 * parts - 2) + 1)


WEIGHTS = st.sampled_from([0.25, 0.5, -0.25, -0.5, 0.125, 1.0])
STAGES = st.lists(st.tuples(WEIGHTS, st.booleans()), min_size=1, max_size=6)


def expanded(blocks):
    return [run for block, repeat in blocks for run in block * repeat]


@given(stages=STAGES, parts=st.integers(1, 4), steps=st.integers(1, 5))
def test_merged_runs_are_the_fully_expanded_list_merged_as_a_whole(stages, parts, steps):
    exact = [(Fraction(weight), reverse) for weight, reverse in stages]
    written_out = []
    for weight, reverse in exact * steps:
        written_out += [(part, weight) for part in (reversed(range(parts)) if reverse else range(parts))]
    merged = []
    for part, weight in written_out:
        if merged and merged[-1][0] == part:
            merged[-1][1] += weight
            if merged[-1][1] == 0:
                merged.pop()
        else:
            merged.append([part, weight])
    blocks = repeated(merged_runs(exact, parts), steps)
    assert expanded(blocks) == [tuple(run) for run in merged]
    assert sum(repeat > 1 for _, repeat in blocks) <= 1


@given(stages=STAGES, steps=st.integers(1, 4), seed=st.integers(0, 5))
def test_merging_never_changes_what_the_circuit_does(stages, steps, seed):
    total = sum(weight for weight, _ in stages)
    closing = [(1.0 - total, False)] if total != 1.0 else []
    drawn = [*stages, *closing]
    order = measured_order([(Fraction(weight), back) for weight, back in drawn])[0]
    directed = tuple(Stage(weight, "reverse" if back else "forward") for weight, back in drawn)
    formula = tt.Formula("drawn", order, directed, "drawn")
    partition = (P3, SHARING)[seed % 2].shuffled(seed)
    circuit = formula.rotations(partition, 0.7, steps)
    # both sides: at most 7 stages · 4 steps · 8 rotations of 8 x 8 products and expm, 64 u each
    assert distance(matrix(circuit), plain(formula, partition, 0.7, steps)) <= 7 * 4 * 8 * 64 * UNIT


SHARING = tt.Partition(
    [
        tt.Operator("0.5 Z_0 + 0.25 X_1", qubits=3),
        tt.Operator("0.75 X_1 + Y_0 - 2.0", qubits=3),
        tt.Operator("-1.0 Y_0 + 0.3 Z_1 Z_2", qubits=3),
    ]
)


def test_equal_strings_merge_where_parts_meet():
    circuit = tt.formula("lie").rotations(SHARING, 1.0, 1)
    assert (circuit.x_masks.tolist(), circuit.z_masks.tolist()) == ([0, 2, 0], [1, 0, 6])
    assert circuit.angles.tolist() == [0.5, 1.0, 0.3]  # Y_0 cancels exactly, X_1 adds up


def test_a_formula_that_undoes_itself_in_part_cancels_across_stages_and_steps():
    stages = [(Fraction(1, 2), False), (Fraction(-1, 2), True), (Fraction(1), False)]
    assert merged_runs(stages, 3) == [(0, 1), (1, 1), (2, 1)]
    inside_out = [
        (0, Fraction(1, 3)),
        (1, Fraction(1)),
        (2, Fraction(1)),
        (1, Fraction(1)),
        (0, Fraction(-1, 3)),
    ]
    assert repeated(inside_out, 10**6) == [
        ([(0, Fraction(1, 3)), (1, Fraction(1))], 1),
        ([(2, Fraction(1)), (1, Fraction(2))], 10**6 - 1),
        ([(2, Fraction(1)), (1, Fraction(1)), (0, Fraction(-1, 3))], 1),
    ]


def test_a_million_steps_cost_the_memory_of_two():
    circuit = tt.formula("suzuki-4").rotations(P3, 1.0, 10**6)
    assert [block.repeat for block in circuit.blocks] == [1, 10**6 - 1, 1]
    # a step runs the first part (2 strings) 5 times, the second (3) 10 times, the third (2) 5 times
    assert circuit.count == 10**6 * (5 * 2 + 10 * 3 + 5 * 2) + 2


def test_one_part_takes_one_exponential_of_the_whole_time():
    partition = tt.Partition.of(tt.Operator("0.1 Z_0 + 0.3 Z_0 Z_1"), "commuting")
    for name in tt.formulas():
        circuit = tt.formula(name).rotations(partition, 1.7, 7)
        assert circuit.count == 2
        # weights sum to 1 within u Σ|w| ≤ 10 u, two more roundings
        assert np.allclose(circuit.angles, [0.17, 0.51], rtol=12 * UNIT, atol=0)


def test_angles_are_rounded_no_more_often_than_stated():
    assert tt.Formula.ANGLE_ROUNDINGS == tt.formula("lie").ANGLE_ROUNDINGS == 2
    time, steps = 1.7, 7
    for name in ("lie", "strang", "suzuki-4"):
        formula = tt.formula(name)
        runs = merged_runs(formula.exact_stages(), 3)
        exact = [
            weight * Fraction(time) / steps * Fraction(float(coefficient))
            for block, repeat in repeated(runs, steps)
            for part, weight in block * repeat
            for coefficient in P3.parts[part].coefficients
        ]
        for found, wanted in zip(formula.rotations(P3, time, steps).angles, exact, strict=True):
            assert abs(Fraction(float(found)) - wanted) <= (2 * Fraction(UNIT) + Fraction(UNIT) ** 2) * abs(wanted)


def test_the_identity_becomes_the_phase():
    partition = tt.Partition.of(tt.Operator("X_0 + Z_0 - 2.5"), "single")
    circuit = tt.formula("strang").rotations(partition, 0.5, 100)
    assert circuit.phase == 1.25
    exact = oracle.evolution(partition.operator(), 0.5)
    # Strang: C t³/r² with C below 1 for X and Z (published bound t³/2 of the one-qubit check)
    assert distance(matrix(circuit), exact) <= 0.5 * 0.5**3 / 100**2
    alone = tt.formula("lie").rotations(tt.Partition.of(tt.Operator("3.0", qubits=2), "axis"), 2.0, 5)
    assert (alone.count, alone.phase, alone.qubits) == (0, -6.0, 2)


def test_negative_time_runs_a_symmetric_formula_backwards():
    for name in tt.formulas():
        formula = tt.formula(name)
        if formula.symmetric and len(formula.stages) <= 50:
            there, back = (matrix(formula.rotations(P3, time, 3)) for time in (0.4, -0.4))
            assert distance(back @ there, np.eye(8)) <= 2 * 64 * 8 * formula.rotations(P3, 0.4, 3).count * UNIT


def test_zero_time_needs_no_rotation():
    circuit = tt.formula("strang").rotations(P3, 0.0, 5)
    assert (circuit.count, circuit.phase) == (0, 0.0)
