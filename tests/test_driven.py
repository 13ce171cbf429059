"""Driven Hamiltonians: strengths, the clock rule in circuits, published values, refusals."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
import trueturn as tt
from circuits import P3, P3_PARTS
from driven_problems import PT, distance, evolution, multiplied, plain, pt, triple_jump
from strategies import operators
from trueturn import errors
from trueturn.driven import Call, Constant, Driven, Ramp, Samples, Sinusoid
from trueturn.driven.circuits import Clock
from trueturn.formulas import Stage

UNIT = 2.0**-53
X, Z = tt.Operator("X_0"), tt.Operator("Z_0")


# Published values


def scheme(published, name):
    entry = {entry["id"]: entry for entry in published("formulas.toml")["formula"]}[name]
    if entry["kind"] == "gamma" or "gamma" in entry:
        return tt.Formula.composition(entry["gamma"], name=name)
    return tt.Formula.splitting(entry["a"], entry["b"], name=name)


@pytest.mark.parametrize(
    "name",
    ["strang", "suzuki_o4", "mclachlan_s5_o4", "blanes_moan_s6_o4", "kahan_li_o6_s9a", "blanes_moan_s10_o6"],
)
def test_errors_on_problem_pt_are_the_recorded_ones(name, published):
    # Method: arXiv 0812.0562; values computed for tests/published (README, "Time-dependent variant PT").
    table = {check["id"]: check for check in published("bounds.toml")["check"]}["time_dependent_pt"]
    exact = evolution(pt, 0.0, 1.0, pieces=4)
    place = table["formula"].index(name)
    for steps in (4, 8, 16):
        circuit = PT.rotations(scheme(published, name), "terms", 1.0, steps)
        expected = table[f"error_r{steps}"][place]
        # 7 digits are recorded; 8 √N u for the product as in test_driven_order, 100 u for the oracle
        floor = (8 * math.sqrt(circuit.count) + 100) * UNIT
        assert abs(distance(multiplied(circuit), exact) - expected) <= 1e-6 * expected + floor


def test_the_list_of_recorded_formulas_is_complete(published):
    table = {check["id"]: check for check in published("bounds.toml")["check"]}["time_dependent_pt"]
    covered = test_errors_on_problem_pt_are_the_recorded_ones.pytestmark[0].args[1]
    assert covered == table["formula"]


# The clock


def test_common_practice_strang_is_the_midpoint_rule():
    h = Driven([(Sinusoid(0.7, 1.3, phase=0.2), Z)])
    circuit = h.rotations(tt.formula("strang"), "terms", time=0.5, steps=1, start=0.3)
    # one cosine and two products: some 8 u
    assert circuit.angles.tolist() == pytest.approx([0.5 * 0.7 * math.cos(1.3 * 0.55 + 0.2)], rel=8 * UNIT)


def test_a_first_order_step_freezes_strengths_at_its_end():
    circuit = Driven([(Ramp(0.0, 1.0), Z)]).rotations(tt.formula("lie"), "terms", time=2.0, steps=1)
    assert circuit.angles.tolist() == [4.0]


@pytest.mark.parametrize("steps", [1, 3])
@pytest.mark.parametrize("name", [*tt.formulas(), "beyond", "triple jump"])
def test_circuits_are_the_stages_with_strengths_frozen_by_the_clock(name, steps):
    made = {"beyond": tt.Formula.composition([3, -2], name="beyond"), "triple jump": triple_jump()}
    formula = made.get(name) or tt.formula(name)
    circuit = PT.rotations(formula, "terms", 0.7, steps, start=0.2)
    expected = plain(formula, 0.7, steps, start=0.2)
    # each exponential of the oracle costs about 30 u and each rotation 8 u, of either sign
    assert distance(multiplied(circuit), expected) <= (60 * math.sqrt(circuit.count) + 100) * UNIT


def test_runs_merge_across_stages_and_steps():
    # McLachlan 1995 counting of tests/published README: r m (L - 1) + 1 parts for r steps of m stages, L parts
    for name, stages in [("strang", 2), ("suzuki-4", 10)]:
        single = Driven([(Sinusoid(1.0, 2.0), tt.Operator(f"{letter}_0")) for letter in "XYZ"])
        assert single.rotations(tt.formula(name), "terms", time=1.0, steps=7).count == 7 * stages * 2 + 1


def test_one_part_is_one_run_whatever_the_steps():
    h = Driven([(Ramp(0.0, 1.0), Z)])
    circuit = h.rotations(tt.formula("strang"), "terms", time=2.0, steps=64)
    assert circuit.count == 1
    # the midpoint rule is exact for a ramp: ∫ t dt = 2; 64 sums of readings that are exact binary fractions
    assert circuit.angles.tolist() == [2.0]


def test_cancelling_stages_let_their_neighbours_meet():
    stages = [Stage(0.5, "forward"), Stage(-0.5, "reverse"), Stage(1.0, "forward")]
    assert [part for part, _ in Clock(tt.Formula("there and back", 1, stages, "test"), 3).runs] == [0, 1, 2]


@given(operators(max_qubits=3, max_terms=6, min_terms=1), st.integers(1, 4), st.floats(-2, 2))
def test_constant_strengths_give_the_circuit_of_the_static_formula(operator, steps, time):
    formula = tt.formula("suzuki-4")
    partition = tt.Partition.of(operator, "commuting")
    identity = tt.Operator("1", qubits=operator.qubits) * operator.identity_coefficient
    driven = Driven([*((1.0, part) for part in partition.parts), (1.0, identity)])
    assert driven.rotations(formula, "terms", time, steps) == formula.rotations(partition, time, steps)


def test_a_callable_that_is_constant_gives_the_same_as_a_constant():
    called = Driven([(lambda t: 1.0, part) for part in P3_PARTS]).rotations(
        tt.formula("suzuki-4"), "terms", time=1.0, steps=5
    )
    static = tt.formula("suzuki-4").rotations(P3, 1.0, 5)
    assert len(static.blocks) > 1 and called.count == static.count
    # static angles are rounded twice; driven ones in weight, step, coefficient, products and sums: 8 roundings
    assert np.abs(called.angles - static.angles).max() <= 10 * UNIT * np.abs(static.angles).max()


def test_constants_keep_their_steps_as_repeated_blocks():
    circuit = Driven([(0.5, X), (Constant(2), Z)]).rotations(tt.formula("strang"), "terms", time=1.0, steps=10**9)
    assert circuit.count == 2 * 10**9 + 1
    half, whole = tt.Operator("0.5 X_0"), tt.Operator("2.0 Z_0")
    assert circuit == tt.formula("strang").rotations(tt.Partition([half, whole]), 1.0, 10**9)


def test_identity_terms_become_the_phase_by_the_same_quadrature():
    h = Driven([(Ramp(1.0, 2.0), tt.Operator("Z_0 + 3")), (0.5, tt.Operator("X_0 - 1"))])
    circuit = h.rotations(tt.formula("strang"), "terms", time=2.0, steps=4, start=1.0)
    # midpoints integrate a ramp exactly: 3 (2 + (9 - 1)) - 0.5 · 2 = 29; eight terms, each rounded four times
    assert circuit.phase == pytest.approx(-29.0, rel=32 * UNIT)


# Where the drive must be defined


def test_negative_weights_sample_outside_and_need_a_drive_there():
    formula = tt.Formula.composition([3, -2], name="beyond")  # reads at 1.5 and 2 steps
    assert [float(reading) for reading in Clock(formula, 2).readings] == [1.5, 2.0]

    def cosine(domain):
        return Driven([(Call(math.cos, domain=domain), X), (1.0, Z)])

    with pytest.raises(errors.ArgumentError, match=r"time: needs the drive at 0\.375 to 1\.25, .* from 0\.0 to 1\.0"):
        cosine((0.0, 1.0)).rotations(formula, "terms", time=1.0, steps=4)
    assert cosine((0.375, 1.25)).rotations(formula, "terms", time=1.0, steps=4).count
    with pytest.raises(errors.ArgumentError, match="time: needs the drive"):
        cosine((0.375, 1.2499)).rotations(formula, "terms", time=1.0, steps=4)
    # forward runs only: inside, and edges that rounding alone oversteps are taken as the edges
    assert cosine((0.0, 1.0)).rotations(tt.formula("lie"), "terms", time=1.0, steps=10).count == 20
    assert cosine((0.1, 1.0)).rotations(tt.formula("lie"), "terms", time=0.9, steps=7, start=0.1).count == 14


def test_time_runs_backwards():
    circuit = PT.rotations(tt.formula("suzuki-4"), "terms", time=-1.0, steps=16, start=1.0)
    exact = evolution(pt, 0.0, 1.0, pieces=4).conj().T
    # the recorded error of 16 steps forwards, 7.46e-7, which a symmetric formula has backwards too
    assert abs(distance(multiplied(circuit), exact) - 7.457609e-07) <= 1e-6 * 7.5e-07 + 300 * UNIT


# Parts


def test_strings_of_a_part_commute_at_unequal_times_or_are_refused():
    mixed = Driven([(math.cos, tt.Operator("X_0 + Z_0"))])
    with pytest.raises(errors.PartitionError, match=r"rule: X_0 and Z_0 of term 0 do not commute.*'commuting'"):
        mixed.rotations(tt.formula("strang"), "terms", 1.0, 1)
    # a single driven term commutes with itself at unequal times, but it is no product of rotations
    with pytest.raises(errors.PartitionError, match="do not commute"):
        mixed.rotations(tt.formula("strang"), tt.Partition([tt.Operator("X_0 + Z_0")]), 1.0, 1)
    assert mixed.rotations(tt.formula("strang"), "commuting", 1.0, 2).count == 5


def test_rules_agree_where_they_make_the_same_parts():
    h = Driven([(math.cos, tt.Operator("X_0 + 2 X_1 + Z_0 Z_1")), (1.5, tt.Operator("Z_0 + X_0"))])
    given = tt.Partition([tt.Operator("X_0 + X_1"), tt.Operator("Z_0 + Z_0 Z_1")])
    ours = h.rotations(tt.formula("strang"), given, 1.0, 3)
    rule = h.rotations(tt.formula("strang"), "axis", 1.0, 3)
    assert ours.angle_totals().near(rule.angle_totals(), 64 * UNIT)
    # strings of a part may stand in another order, but the product is the same; 8 u for each rotation
    assert distance(multiplied(ours), multiplied(rule)) <= 2 * 8 * ours.count * UNIT


@pytest.mark.parametrize(
    ("rule", "pieces"),
    [
        ("pairs", ["rule:", "('pairs')", "'terms'", "'axis'"]),
        (3, ["rule:", "(3)"]),
        (tt.Partition([X]), ["rule:", "Z_0 stands in no part", ".strings()"]),
        (tt.Partition([X, Z, tt.Operator("Y_0")]), ["rule:", "Y_0 is no string of the Hamiltonian"]),
        (tt.Partition([X, Z, X]), ["rule:", "X_0 stands in two parts"]),
        (tt.Partition([tt.Operator("X_0", qubits=2)]), ["rule:", "2 qubits", "has 1"]),
    ],
)
def test_bad_rules_are_refused(rule, pieces):
    with pytest.raises(errors.PartitionError) as caught:
        Driven([(1.0, X), (math.cos, Z)]).rotations(tt.formula("lie"), rule, 1.0, 1)
    for piece in pieces:
        assert piece in str(caught.value)


# The Hamiltonian


def test_freezing_adds_up_the_terms():
    h = Driven([(Ramp(1.0, -0.5), tt.Operator("Z_0 Z_1 + 2")), (Sinusoid(1.0, 2.0), X), (lambda t: t * t, X)])
    assert h.qubits == 2 and len(h) == 3 and h.domain == (-math.inf, math.inf)
    assert h.at(2.0) == math.fsum([math.cos(4.0), 4.0]) * tt.Operator("X_0", qubits=2)
    assert h.at(0.0) == tt.Operator("Z_0 Z_1 + 2 + X_0")
    assert h.strings() == tt.Operator("Z_0 Z_1 + 2 + 2 X_0")  # Σ |c|
    assert distance(oracle.dense(PT.at(0.3)), pt(0.3)) <= 40 * UNIT  # eleven terms below 2, a few roundings each


def test_the_domain_is_where_all_strengths_are_defined():
    h = Driven([(Samples([0, 1, 3], [1, 2, 3]), X), (Call(math.sqrt, domain=(0.5, 9)), Z)])
    assert h.domain == (0.5, 3.0) and h.kinks == (1.0,)
    with pytest.raises(errors.ArgumentError, match=r"time: needs the drive at 0\.25"):
        h.at(0.25)
    with pytest.raises(errors.ArgumentError, match=r"terms: are never all defined"):
        Driven([(Samples([0, 1], [1, 2]), X), (Call(math.sqrt, domain=(2, 9)), Z)])


@pytest.mark.parametrize("terms", [[], [X], [(1.0, "X_0")], "X_0", 3, [(1.0, X, Z)]])
def test_what_is_no_list_of_pairs_is_refused(terms):
    with pytest.raises(errors.OperatorError, match=r"^terms.*give pairs \(strength, Operator\)"):
        Driven(terms)


@pytest.mark.parametrize(
    ("arguments", "argument"),
    [
        ({"formula": "strang"}, "formula"),
        ({"time": math.nan}, "time"),
        ({"time": "1"}, "time"),
        ({"start": math.inf}, "start"),
        ({"steps": 0}, "steps"),
        ({"steps": 1.5}, "steps"),
        ({"steps": 10**7}, "steps"),
        ({"time": 1e10, "steps": 1}, "time"),
    ],
)
def test_bad_circuits_are_refused(arguments, argument):
    h = Driven([(Ramp(0.0, 1e290), X), (1.0, Z)])
    with pytest.raises(errors.ArgumentError) as caught:
        h.rotations(**{"formula": tt.formula("strang"), "rule": "terms", "time": 1.0, "steps": 1, **arguments})
    assert caught.value.argument == argument


def test_rotations_above_the_limit_are_refused_before_any_is_made():
    h = Driven([(math.cos, X), (1.0, Z)])
    with pytest.raises(errors.ArgumentError, match=r"steps: make 20000001 rotations.*4999999 steps or fewer"):
        h.rotations(tt.formula("strang"), "terms", time=1.0, steps=10**7)


def test_a_hamiltonian_of_identity_alone_is_a_phase():
    h = Driven([(Ramp(0.0, 2.0), tt.Operator("3"))])
    circuit = h.rotations(tt.formula("strang"), "terms", time=1.0, steps=4)
    assert circuit.count == 0 and circuit.phase == -3.0  # exact: binary fractions all along


def test_strengths_that_are_zero_cost_nothing():
    h = Driven([(Samples([0, 1, 2], [0, 0, 1], "hold"), X), (1.0, Z)])
    circuit = h.rotations(tt.formula("strang"), "terms", time=2.0, steps=2)
    # parts X, Z; the strength of X is 0 at 0.5 and at 1.5: nothing but Z is left
    assert circuit.z_masks.tolist() == [1, 1] and circuit.angles.tolist() == [1.0, 1.0]
