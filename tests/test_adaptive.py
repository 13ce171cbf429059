"""Adaptive steps: tolerance per unit of time, conserved time, history, and what they save."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trueturn as tt
from circuits import P3
from driven_problems import PT, evolution, pt
from trueturn import errors
from trueturn.adaptive import adaptive, higher_formula
from trueturn.adaptive.run import HONESTY, LEAST_FACTOR, MOST_FACTOR, SAFETY
from trueturn.driven import Call, Driven

UNIT = 2.0**-53
START = tt.State.random(3, seed=9)
STRANG = tt.formula("strang")


def gap(state, amplitudes):
    return float(np.linalg.norm(state.amplitudes - amplitudes))


# The tolerance


@pytest.mark.parametrize("tolerance", [1e-2, 1e-3, 1e-4])
@pytest.mark.parametrize("name", ["strang", "suzuki-4"])
def test_the_error_per_time_is_met_within_the_stated_factor(name, tolerance):
    certified = tt.reference(P3.operator(), START, [1.7], 1e-11)
    run = adaptive(tt.formula(name), P3, START, 1.7, tolerance)
    off = gap(run.state, certified.states[0].amplitudes) - certified.certificate.error_bound[1.7]
    assert run.estimate <= tolerance * 1.7
    assert off <= HONESTY * run.estimate
    # not idle either: the steps' errors mostly add up, and steps are not far too short
    assert off >= 0.05 * run.estimate >= 0.05 * 0.1 * tolerance * 1.7


@settings(max_examples=15)
@given(
    st.integers(0, 1000),
    st.floats(0.2, 3.0),
    st.sampled_from([1e-2, 1e-3]),
    st.sampled_from(["bond", "axis", "single"]),
)
def test_the_factor_holds_for_any_start_and_time(seed, time, tolerance, rule):
    chain = tt.model.heisenberg(tt.lattice.chain(4), 0.7, z=0.3)
    start = tt.State.random(4, seed)
    run = adaptive(STRANG, tt.Partition.of(chain, rule), start, time, tolerance)
    certified = tt.reference(chain, start, [time], 1e-10)
    off = gap(run.state, certified.states[0].amplitudes) - certified.certificate.error_bound[time]
    assert off <= HONESTY * run.estimate <= HONESTY * tolerance * time


@pytest.mark.parametrize("time", [1.1, -0.9])
def test_driven_runs_meet_their_tolerance_too(time):
    run = adaptive(STRANG, PT, START, time, 1e-3, start=0.4)
    exact = evolution(pt, 0.4, 0.4 + time, pieces=4) @ START.amplitudes
    assert gap(run.state, exact) <= HONESTY * run.estimate + 100 * UNIT
    assert run.estimate <= 1e-3 * abs(time)


def test_a_tighter_tolerance_takes_steps_as_the_order_says():
    # common practice: at order p, steps go with the tolerance per time to the power 1/p
    for name, order in [("strang", 2), ("suzuki-4", 4)]:
        counts = [len(adaptive(tt.formula(name), P3, START, 6.0, tol).steps) for tol in (1e-4, 1e-4 / 4**order)]
        assert counts[1] / counts[0] == pytest.approx(4, rel=0.15)


def test_an_observable_can_judge_the_steps():
    watched = tt.Operator("Z_1", qubits=3)
    run = adaptive(STRANG, P3, START, 1.0, 1e-3, observable=watched)
    exact = tt.reference(P3.operator(), START, [1.0], 1e-11, {"z": watched})
    # a heuristic: what is checked is that it works here, and that it lets steps be longer than the state does
    assert abs(run.state.expectation(watched) - exact.expectations["z"][0]) <= 10 * run.estimate
    assert run.estimate <= 1e-3
    assert len(run.steps) < len(adaptive(STRANG, P3, START, 1.0, 1e-4).steps)


# What steps look like


@given(st.floats(1e-3, 5.0), st.booleans())
@settings(max_examples=25)
def test_total_time_is_kept_exactly(length, backwards):
    time = -length if backwards else length
    run = adaptive(STRANG, P3, START, time, 0.3)
    total = 0.0
    for step in run.steps.tolist():
        assert step * time > 0
        total += step
    assert total == time


def test_history_tells_what_happened():
    run = adaptive(STRANG, P3, START, 2.0, 1e-3, first_step=2.0)
    accepted = [step for step in run.history if step.accepted]
    assert [step.length for step in accepted] == run.steps.tolist()
    assert run.refused == len(run.history) - len(run.steps) >= 1  # one step of 2.0 is far too long
    assert run.estimate == math.fsum(step.estimate for step in accepted)
    now = 0.0
    for step in run.history:
        assert step.start == now
        assert step.accepted == (step.estimate <= 1e-3 * step.length)
        now += step.length if step.accepted else 0.0
    for early, late in zip(run.history[:-3], run.history[1:-2], strict=True):  # the last two share what is left
        ratio = min(MOST_FACTOR, max(LEAST_FACTOR, SAFETY * (1e-3 * early.length / early.estimate) ** 0.5))
        assert late.length == pytest.approx(early.length * ratio, rel=1e-9)


def test_the_circuit_is_the_run_merged_across_steps():
    for system, formula in [(P3, STRANG), (PT, STRANG), (P3, tt.formula("suzuki-4")), (PT, tt.formula("lie"))]:
        run = adaptive(formula, system, START, 1.0, 1e-2)
        again = START.copy()
        again.apply(run.rotations)
        count = len(run.steps)
        # each rotation rounds at 5 u in the state (`rounding_bound`), angles by a few u more, in both
        assert gap(run.state, again.amplitudes) <= 20 * UNIT * 3 * count * len(formula.stages) * 3
        if formula is STRANG:  # 3 parts of 2, 3 and 2 strings; r steps make the first part r + 1 times
            assert run.rotations.count == 2 * (count + 1) + count * (2 * 3 + 2)
    assert run.formulas[0] is formula and run.applied > run.rotations.count


def test_steps_follow_a_pulse_and_beat_equal_steps_at_equal_cost():
    # a pulse of width 0.15 in a quiet evolution of length 8
    pulse = Call(lambda t: 0.01 + 6.0 * math.exp(-(((t - 5.0) / 0.15) ** 2)))
    driven = Driven([(pulse, tt.Operator("X_0 + X_1")), (0.5, tt.Operator("Z_0 Z_1")), (0.3, tt.Operator("Y_0 + Y_1"))])
    start = tt.State.product("00")
    run = adaptive(STRANG, driven, start, 8.0, 1e-3)
    exact = evolution(lambda t: driven.at(t).dense(), 0.0, 8.0, pieces=80) @ start.amplitudes
    off = gap(run.state, exact)
    assert off <= HONESTY * run.estimate
    equal = start.copy()
    circuit = driven.rotations(STRANG, "terms", 8.0, len(run.steps))
    assert circuit.count == run.rotations.count
    equal.apply(circuit)
    assert 2 * off < gap(equal, exact)
    before, during = run.steps[:3].max(), run.steps[np.abs(np.cumsum(run.steps) - 5.0) < 0.1].max()
    assert during < 0.5 * before


def test_steps_grow_threefold_where_nothing_is_wrong():
    run = adaptive(STRANG, tt.Partition([tt.Operator("X_0")]), tt.State.product("0"), 50.0, 1e-6)
    # one part: no error but rounding, so steps grow threefold each and are few
    assert len(run.steps) <= 2 + math.ceil(math.log(50.0 / 0.5, MOST_FACTOR)) + 1
    assert run.state.expectation(tt.Operator("Z_0")) == pytest.approx(math.cos(100.0), abs=1e-12)


def test_a_short_pulse_is_stepped_over_unless_steps_are_kept_short():
    # quiet but for a pulse of area 50 · 0.01 √π = 0.886, the angle θ of its rotation; <Z> is cos 2θ
    pulse = Call(lambda t: 50.0 * math.exp(-(((t - 2.2) / 0.01) ** 2)))
    driven = Driven([(pulse, tt.Operator("X_0")), (1e-3, tt.Operator("Z_0"))])
    turned = math.cos(2 * 50.0 * 0.01 * math.sqrt(math.pi))
    left = []
    for longest in (None, 0.004):
        run = adaptive(STRANG, driven, tt.State.product("0"), 4.0, 1e-3, longest_step=longest)
        left.append(run.state.expectation(tt.Operator("Z_0")))
        assert longest is None or run.steps.max() <= longest
    assert left[0] > 0.99  # the warning of the docstring is real
    assert left[1] == pytest.approx(turned, abs=2 * HONESTY * 4e-3 + 0.01)  # and 0.01 for the field along Z


def test_no_time_is_no_step():
    run = adaptive(STRANG, P3, START, 0.0, 1e-3)
    assert len(run.steps) == 0 and run.history == () and run.rotations.count == 0 and run.estimate == 0.0
    assert run.state.amplitudes.tolist() == START.amplitudes.tolist()
    assert adaptive(STRANG, PT, START, 0.0, 1e-3).rotations.count == 0


def test_the_start_is_not_written_and_single_precision_stays():
    single = tt.State.from_array(START.amplitudes.astype(np.complex64))
    before = single.amplitudes.copy()
    run = adaptive(STRANG, P3, single, 1.0, 1e-2)
    assert run.state.dtype == np.complex64 and np.array_equal(single.amplitudes, before)


def test_progress_is_reported():
    seen = []
    run = adaptive(STRANG, P3, START, 1.0, 1e-2, progress=lambda *report: seen.append(report))
    assert len(seen) == len(run.steps) and seen[-1] == (1.0, 1.0)


# The judge


@pytest.mark.parametrize(("name", "order"), [("lie", 2), ("strang", 4), ("suzuki-4", 6)])
def test_a_formula_is_raised_to_a_higher_order(name, order):
    raised = higher_formula(tt.formula(name))
    assert raised.order == order and raised.symmetric
    if name == "strang":
        for ours, known in zip(raised.stages, tt.formula("suzuki-4").stages, strict=True):
            assert ours.weight == pytest.approx(known.weight, rel=8 * UNIT) and ours.direction == known.direction


def test_a_lopsided_formula_of_even_order_is_raised_by_one():
    lopsided = tt.Formula.composition([0.25, 0.75], name="lopsided")
    assert not lopsided.symmetric and lopsided.order == 2
    assert higher_formula(lopsided).order == 3


def test_a_pair_may_be_given():
    pair = (STRANG, tt.formula("suzuki-6"))
    run = adaptive(pair, P3, START, 1.0, 1e-3)
    assert run.formulas == pair
    assert len(run.steps) == pytest.approx(len(adaptive(STRANG, P3, START, 1.0, 1e-3).steps), abs=2)


# Refusals


@pytest.mark.parametrize(
    ("arguments", "kind", "message"),
    [
        ({"formulas": "strang"}, errors.ArgumentError, "formulas: is neither a Formula nor a pair"),
        ({"formulas": (STRANG, STRANG)}, errors.FormulaError, "formulas: the second is not of higher order"),
        ({"formulas": tt.formula("suzuki-8")}, errors.FormulaError, "formulas: none of higher order"),
        ({"system": P3.operator()}, errors.ArgumentError, "system: is neither Partition nor Driven"),
        ({"state": tt.State.product("0")}, errors.StateShapeError, "system: acts on 3 qubits"),
        ({"observable": tt.Operator("Z_0")}, errors.StateShapeError, "observable: acts on 1 qubits"),
        ({"time": math.inf}, errors.ArgumentError, "time: is not a finite"),
        ({"start": "0"}, errors.ArgumentError, "start: is not a finite"),
        ({"tolerance": 0.0}, errors.ToleranceError, "tolerance: not a positive number"),
        ({"tolerance": True}, errors.ToleranceError, "tolerance: not a positive number"),
        ({"tolerance": 1e-16}, errors.ToleranceError, "tolerance 1e-16 is met by no step|is not met by"),
        ({"first_step": 0.0}, errors.ArgumentError, "first_step: is not positive"),
        ({"first_step": math.nan}, errors.ArgumentError, "first_step: is not a finite"),
        ({"longest_step": -1.0}, errors.ArgumentError, "longest_step: is not positive"),
        ({"most_steps": 0}, errors.ArgumentError, "most_steps: is not a whole number"),
        ({"most_steps": 3}, errors.ToleranceError, "most_steps: tolerance 0.001 is not met by 3 steps"),
        ({"system": PT, "rule": "pairs"}, errors.PartitionError, "rule: is unknown"),
    ],
)
def test_bad_requests_are_refused(arguments, kind, message):
    given = {"formulas": STRANG, "system": P3, "state": START, "time": 1.0, "tolerance": 1e-3}
    with pytest.raises(kind, match=message):
        adaptive(**{**given, **arguments})


def test_a_drive_that_ends_is_refused_where_it_ends():
    driven = Driven([(Call(math.cos, domain=(0.0, 1.0)), tt.Operator("X_0")), (1.0, tt.Operator("Z_0"))])
    with pytest.raises(errors.ArgumentError, match="time: needs the drive at"):
        adaptive(STRANG, driven, tt.State.product("0"), 2.0, 1e-2)
