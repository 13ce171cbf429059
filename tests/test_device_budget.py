"""Budgets: closed forms, dense matrices, the rate and the shots that are just enough, and plain words where nothing is."""

from __future__ import annotations

import json
import math
import re

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import circuits
import oracle
import trueturn as tt
from trueturn.device.algorithmic import ErrorLaw, Measurements
from trueturn.device.counting import visible_gates
from trueturn.device.counts import Written
from trueturn.device.shares import gate_share
from trueturn.errors import ArgumentError, FormulaError, OperatorError, StateShapeError
from trueturn.export.hardware import Hardware

# Two qubits, so that every gate is in the cone: a Lie step has two rotations of weight 2 and costs 4 gates.
PAIR = tt.Operator("0.3 X_0 X_1 + 0.4 Z_0 Z_1 + 0.2 X_0")
WATCHED = tt.Operator("Z_0", qubits=2)
CHAIN = tt.model.heisenberg(tt.lattice.chain(5), 0.5, z=0.2)
MIDDLE = tt.Operator("Z_2", qubits=5)
START = tt.State.product("01+-0")


def lie_budget(prefactor, order, rate, **options):
    """A budget whose algorithmic error is prefactor / r^order exactly."""
    law = {"lie": lambda steps: prefactor * float(steps) ** -order}
    return tt.device_budget(PAIR, 1.0, ["lie"], WATCHED, 1e-2, two_qubit_error=rate, algorithmic=law, **options)


@settings(max_examples=40)
@given(st.floats(1e-2, 1e2), st.integers(1, 6), st.floats(1e-10, 1e-6))
def test_the_best_step_count_is_the_closed_form(prefactor, order, rate):
    # C r^-p + g r is least at (p C / g)^(1/(p+1)), bounds.md item 16; idea: G. C. Knee, W. J. Munro, Phys. Rev. A 91,
    # 052327 (2015). g = W p_2 gates/step with W = 2. The share bends by G p_2 / 2 of itself and the error is capped at 2.
    found = lie_budget(prefactor, order, rate).best
    per_step = found.gates_in_cone / found.steps
    assert per_step == 4.0
    slope = found.gates / gate_share(found.gates_in_cone, rate) * rate * per_step
    exact = (order * prefactor / slope) ** (1.0 / (order + 1))
    value = prefactor * exact**-order + slope * exact
    assume(exact > 1.0 and value < 0.1)  # else the cap and the first whole count have their say

    def straight(steps):
        return prefactor * steps**-order + slope * steps

    # 1 - (1-p)^G <= G p from above; from below, as the share is at most 0.1/2, G p < 0.0514 and the share > 0.974 G p.
    assert 0.974 * value <= found.total <= min(straight(math.floor(exact)), straight(math.ceil(exact))) * (1 + 1e-9)


@given(st.floats(1e-2, 10.0), st.integers(1, 4), st.floats(1e-5, 1e-2))
def test_no_other_step_count_has_a_smaller_total(prefactor, order, rate):
    found = lie_budget(prefactor, order, rate, most_steps=2000).best
    gates = {
        r: found.candidate.formula.rotations(tt.Partition.of(PAIR, "commuting"), 1.0, r).two_qubit_gates()
        for r in (1, 2)
    }
    each = gates[2] - gates[1]
    totals = [
        min(2.0, prefactor * r**-order + 2.0 * gate_share(gates[1] + (r - 1) * each, rate)) for r in range(1, 2001)
    ]
    # The width is that of Z_0, 2 up to the padding of a proven interval.
    assert found.total == pytest.approx(min(totals), rel=1e-9)


def test_the_crossover_is_where_the_closed_forms_meet():
    # Least totals (1 + 1/p) (p C)^(1/(p+1)) g^(p/(p+1)): 2 √(C_1 g_1) and (3/2) (2 C_2)^(1/3) g_2^(2/3), g = 2 k p_2 with
    # k gates a step. They meet at p_2^(1/6) = 2 √(2 C_1 k_1) / ((3/2) (2 C_2)^(1/3) (2 k_2)^(2/3)).
    c_1, c_2 = 0.05, 1000.0
    laws = {"lie": lambda r: c_1 / r, "strang": lambda r: c_2 / r**2}
    found = tt.device_budget(PAIR, 1.0, ["strang", "lie"], WATCHED, 1e-2, two_qubit_error=1e-6, algorithmic=laws)
    parts = tt.Partition.of(PAIR, "commuting")
    k_1, k_2 = (
        (
            tt.formula(name).rotations(parts, 1.0, 1002).two_qubit_gates()
            - tt.formula(name).rotations(parts, 1.0, 1001).two_qubit_gates()
        )
        for name in ("lie", "strang")
    )
    exact = (2 * math.sqrt(2 * c_1 * k_1) / (1.5 * (2 * c_2) ** (1 / 3) * (2 * k_2) ** (2 / 3))) ** 6
    (crossover,) = found.crossovers
    assert (crossover.lower, crossover.higher) == ("lie, commuting", "strang, commuting")
    assert 1e-11 < exact < 1e-10
    # Counts are some 20 000 here. The gates of Strang's last half step, 4 beyond k_2 r, are 5e-5 of its gates and a third
    # less of its total; the sixth power makes 2e-4 of that, the search stops within 1e-3, and all else is less.
    assert crossover.two_qubit_error == pytest.approx(exact, rel=2e-3)
    assert "below" in str(crossover)


def test_a_formula_that_always_wins_is_named():
    laws = {"lie": lambda r: 2.0 / r, "strang": lambda r: 1e-9 / r**2}
    (better,) = tt.device_budget(
        PAIR, 1.0, ["lie", "strang"], WATCHED, 1e-2, two_qubit_error=1e-6, algorithmic=laws
    ).crossovers
    assert better.two_qubit_error is None and better.winner == "strang, commuting" and "every" in str(better)
    laws = {"lie": lambda r: 1e-9 / r, "strang": lambda r: 2.0 / r**2}
    (worse,) = tt.device_budget(
        PAIR, 1.0, ["lie", "strang"], WATCHED, 1e-2, two_qubit_error=1e-6, algorithmic=laws
    ).crossovers
    assert worse.winner == "lie, commuting"


def test_the_allowed_error_is_just_enough():
    options = {"shots": 10**6, "synthesis_error": 1e-4}
    found = lie_budget(0.5, 2, 1e-2, **options)
    assert found.verdict == "misses" and "No step count meets 0.01" in found.statement
    allowed = found.best.allowed_error
    assert allowed is not None and f"{allowed:.2e}"[:4] in found.statement
    assert lie_budget(0.5, 2, allowed * (1 - 1e-9), **options).verdict == "meets"
    assert lie_budget(0.5, 2, allowed * 1.001, **options).verdict == "misses"


def test_the_needed_shots_are_just_enough():
    shots = lie_budget(0.5, 2, 1e-6).best.needed_shots
    assert shots is not None and shots > 1
    assert lie_budget(0.5, 2, 1e-6, shots=shots).verdict == "meets"
    few = lie_budget(0.5, 2, 1e-6, shots=shots - 1)
    assert few.verdict == "misses" and few.best.needed_shots == shots
    hopeless = lie_budget(0.5, 2, 1e-6, shots=10)
    assert "shots alone" in hopeless.statement and f"{shots:,}".replace(",", "\u00a0") in hopeless.statement


def test_the_fewest_steps_are_just_enough():
    found = lie_budget(0.5, 2, 1e-6)
    fewest = found.best.fewest_steps
    assert fewest is not None and fewest < found.best.steps
    gates = found.best.gates_in_cone / found.best.steps
    totals = [0.5 / r**2 + 2 * gate_share(round(gates * r), 1e-6) for r in (fewest - 1, fewest)]
    assert totals[1] <= 1e-2 < totals[0] and f"{fewest} steps suffice" in found.statement


def test_perfect_gates_ask_for_the_fewest_steps_that_meet():
    found = lie_budget(0.5, 2, 0.0)
    assert found.best.gates == 0.0 and found.best.steps == math.ceil(math.sqrt(50)) == found.best.fewest_steps
    assert "fewest gates" in found.statement
    never = lie_budget(0.5, 1, 0.0, most_steps=10)
    assert never.verdict == "misses" and "Not even perfect gates" in never.statement


def test_synthesis_is_shared_over_the_rotations_of_the_cone():
    found = lie_budget(0.5, 2, 1e-6, synthesis_error=1e-3).best
    circuit = found.candidate.formula.rotations(tt.Partition.of(PAIR, "commuting"), 1.0, found.steps)
    assert found.synthesis == pytest.approx(2e-3, rel=1e-9)
    # 3 log2(R/ε) each: Ross and Selinger (2016), abstract. No angle here is a multiple of π/8.
    assert found.t_count == circuit.count * math.ceil(3 * math.log2(circuit.count / 1e-3))
    assert lie_budget(0.5, 2, 1e-6).best.t_count is None
    assert "synthesis alone" in lie_budget(0.5, 2, 1e-6, synthesis_error=0.5).statement


def test_measured_errors_are_those_of_dense_matrices_and_the_total_covers_them():
    found = tt.device_budget(
        CHAIN, 1.1, ["lie", tt.Candidate("strang", "axis"), "suzuki-4"], MIDDLE, 0.05, two_qubit_error=3e-5, state=START
    )
    exact = oracle.evolution(CHAIN, 1.1) @ START.amplitudes
    matrix = oracle.dense(MIDDLE)
    for row in found.rows:
        parts = row.candidate.partition(CHAIN)
        ours = circuits.plain(row.candidate.formula, parts, 1.1, row.steps) @ START.amplitudes
        error = abs(np.vdot(ours, matrix @ ours) - np.vdot(exact, matrix @ exact))
        low, high = row.measured
        assert low - 1e-12 <= error <= high + 1e-12  # dense matrices of 32 rows
        assert row.algorithmic >= high and row.algorithmic_kind in ("measured", "fitted")
        assert row.total >= error + row.gates - 1e-12
        assert row.gates == pytest.approx(found.width * gate_share(row.gates_in_cone, 3e-5), rel=1e-12)
        assert row.gates_in_cone <= row.two_qubit_gates
    assert list(found.rows) == sorted(found.rows, key=lambda row: row.total)


def test_a_fitted_law_lies_above_the_points_that_it_was_fitted_to():
    measurements = Measurements(CHAIN, START, 1.1, MIDDLE, 0.05, None, None)
    candidate = tt.Candidate("strang", "axis")
    parts = candidate.partition(CHAIN)
    law = measurements.law(candidate, parts, 2.0, 10**6)
    first, last = map(int, re.search(r"from (\d+) to (\d+)", law.words(1)).groups())
    # The counts that are run: 1, then 1.5 times as many, and at least one more.
    counts = [1]
    while counts[-1] < last:
        counts.append(max(counts[-1] + 1, int(1.5 * counts[-1])))
    ratios = [law(count) / measurements.error(candidate, parts, count)[1] for count in counts if count >= first]
    assert len(ratios) >= 6 and min(ratios) == pytest.approx(1.0, abs=1e-9)


def test_a_measured_error_above_the_law_counts(monkeypatch):
    hopeful = ErrorLaw("fitted", lambda steps: "too good", 2.0, lambda steps: 1e-3 / steps)
    monkeypatch.setattr(Measurements, "law", lambda *arguments: hopeful)
    row = tt.device_budget(CHAIN, 1.1, ["lie"], MIDDLE, 0.05, two_qubit_error=3e-5, state=START).best
    assert row.algorithmic_kind == "measured" and row.algorithmic == row.measured[1] > hopeful(row.steps)


def test_without_a_state_bounds_are_taken_at_any_size():
    chain = tt.model.ising(tt.lattice.chain(100), zz=-1.0, x=-0.7)
    watched = tt.Operator("Z_50", qubits=100)
    found = tt.device_budget(chain, 0.5, ["lie", "strang"], watched, 0.1, two_qubit_error=1e-6)
    for row in found.rows:
        parts = tt.Partition.of(chain, "commuting")
        bound = tt.bound(row.candidate.formula, parts, 0.5, row.steps, method="tightest")
        proven = found.width * bound.value
        assert row.law == f"{bound.theorem}, {bound.source}"
        assert row.algorithmic_kind == "proven" and row.algorithmic == pytest.approx(min(found.width, proven))
    assert found.rows[0].gates_in_cone < found.rows[0].two_qubit_gates


def test_formulas_that_need_a_structure_are_left_out_by_name():
    special = next(name for name in tt.formulas(special=True) if tt.formula(name).requires)
    found = tt.device_budget(CHAIN, 0.5, ["strang", special], MIDDLE, 0.1, two_qubit_error=1e-6)
    assert list(found.left_out) == [f"{special}, commuting"] and "Left out" in found.table()
    with pytest.raises(FormulaError, match="candidates: no algorithmic error for any"):
        tt.device_budget(CHAIN, 0.5, [special], MIDDLE, 0.1, two_qubit_error=1e-6)


def test_a_law_fitted_to_smaller_systems_can_be_given():
    law = tt.PowerLaw.fit([1, 2, 4, 8], [0.4, 0.1, 0.026, 0.0063], variable="r", what="error")
    found = tt.device_budget(
        CHAIN, 0.5, ["strang"], MIDDLE, 0.1, two_qubit_error=1e-5, algorithmic={"strang, commuting": law}
    )
    assert found.best.algorithmic == pytest.approx(law(found.best.steps)) and found.best.algorithmic_kind == "given"


def test_gates_may_be_counted_otherwise():
    half = lie_budget(0.5, 2, 1e-5, gates=lambda circuit: circuit.two_qubit_gates() // 2)
    full = lie_budget(0.5, 2, 1e-5)
    assert half.best.total < full.best.total and half.best.steps > full.best.steps


def test_a_law_by_the_name_of_a_formula_serves_all_its_rules():
    laws = {"strang": lambda r: 0.2 / r**2}
    pair = [tt.Candidate("strang", rule) for rule in ("axis", "bond")]
    found = tt.device_budget(CHAIN, 0.5, pair, MIDDLE, 0.1, two_qubit_error=1e-5, algorithmic=laws)
    assert [row.algorithmic_kind for row in found.rows] == ["given", "given"]


@pytest.mark.parametrize(
    "device",
    [
        {},
        {"native": "zz"},
        {"join_pairs": False},
        {"connectivity": "ring"},
        {"connectivity": "line", "routing": "swaps"},
    ],
)
@pytest.mark.parametrize("name", ["lie", "strang", "suzuki-4", "ruth-3"])
def test_gates_written_for_a_device_are_those_of_the_file_at_every_step_count(name, device):
    ring = tt.model.heisenberg(tt.lattice.ring(5), 0.5, z=0.2)
    parts = tt.Partition.of(ring, "bond")

    def circuit(steps):
        return tt.formula(name).rotations(parts, 1.0, steps)

    written = Written(circuit, Hardware.of(device))
    for steps in (1, 2, 3, 4, 5, 6, 7, 30, 101):
        assert written(steps) == circuit(steps).cost(**device).two_qubit_gates


@pytest.mark.parametrize("device", [{"native": "zz"}, {"connectivity": "line"}])
def test_a_budget_counts_gates_of_a_device_as_a_plan_does_and_says_how(device):
    laws = {"strang": lambda r: 0.2 / r**2}
    ring = tt.model.heisenberg(tt.lattice.ring(5), 0.5, z=0.2)
    found = tt.device_budget(ring, 0.5, "strang", MIDDLE, 0.1, two_qubit_error=1e-5, algorithmic=laws, device=device)
    circuit = tt.formula("strang").rotations(tt.Partition.of(ring, "commuting"), 0.5, found.best.steps)
    assert found.best.gates_in_cone == visible_gates(circuit, MIDDLE, Hardware.of(device))
    assert found.best.two_qubit_gates == circuit.cost(**device).two_qubit_gates != circuit.two_qubit_gates()
    assert "written for the device" in found.assumptions[1] and next(iter(device.values())) in found.assumptions[1]


def test_variance_of_the_whole_observable_asks_for_fewer_shots():
    assert lie_budget(0.5, 2, 1e-6, variance=0.5).best.needed_shots < lie_budget(0.5, 2, 1e-6).best.needed_shots
    assert lie_budget(0.5, 2, 1e-6, variance=0.0).best.needed_shots == 1


@pytest.mark.parametrize("width", [80, 100, 140])
def test_the_text_fits_its_width_and_says_what_is_assumed(width):
    laws = {"lie": lambda r: 0.3 / r, "strang": lambda r: 0.2 / r**2}
    found = tt.device_budget(
        CHAIN,
        0.5,
        ["lie", "strang"],
        MIDDLE,
        0.05,
        two_qubit_error=1e-5,
        shots=10**6,
        synthesis_error=1e-4,
        algorithmic=laws,
    )
    text = found.table(width)
    assert max(map(len, text.splitlines())) <= width
    assert "fails independently" in text and "T gates" in text and found.statement[:30] in text
    assert repr(found) == found.table()


def test_a_useless_device_is_called_so():
    found = lie_budget(1e6, 1, 0.4)
    assert "none is better than a guess" in found.statement and found.best.total == pytest.approx(2.0)


ORDINARY = {"two_qubit_error": 1e-3, "algorithmic": {"lie": lambda r: 1.0 / r}}


@pytest.mark.parametrize(
    ("changes", "error", "message"),
    [
        (
            {"two_qubit_error": -1e-3},
            ArgumentError,
            r"two_qubit_error: no possible rate \(-0.001\); give a probability",
        ),
        ({"two_qubit_error": 1.0}, ArgumentError, r"two_qubit_error: no possible rate \(1.0\)"),
        ({"two_qubit_error": math.nan}, ArgumentError, r"two_qubit_error: no possible rate"),
        ({"two_qubit_error": "1e-3"}, ArgumentError, r"two_qubit_error: no possible rate"),
        ({"two_qubit_error": True}, ArgumentError, r"two_qubit_error: no possible rate"),
        ({"shots": 0}, ArgumentError, r"shots: not a positive whole number \(0\)"),
        ({"shots": 1e4}, ArgumentError, r"shots: not a positive whole number"),
        ({"most_steps": 0}, ArgumentError, r"most_steps: not a positive whole number"),
        ({"confidence": 1.0}, ArgumentError, r"confidence: not between 0 and 1"),
        ({"synthesis_error": 0.0}, ArgumentError, r"synthesis_error: not a positive finite number"),
        ({"variance": -1.0}, ArgumentError, r"variance: not a number from 0"),
        ({"algorithmic": {"lye": lambda r: 1.0}}, ArgumentError, r"algorithmic: names no candidate \('lye'\)"),
        ({"algorithmic": {"lie": lambda r: -1.0}}, ArgumentError, r"algorithmic\['lie'\]: gives no error"),
        ({"algorithmic": {"lie": lambda r: "a"}}, ArgumentError, r"algorithmic\['lie'\]: gives no error"),
        ({"algorithmic": 3}, ArgumentError, r"algorithmic: is no mapping \(3\)"),
        ({"algorithmic": {"lie": 3}}, ArgumentError, r"algorithmic\['lie'\]: is no function \(3\)"),
        ({"gates": 3}, ArgumentError, r"gates: is no function of Rotations \(3\)"),
        ({"gates": lambda circuit: "a"}, ArgumentError, r"gates: gives no count \('a'\)"),
        ({"gates": lambda circuit: 1, "device": {}}, ArgumentError, r"gates: given beside device"),
        ({"device": 5}, ArgumentError, r"device: neither a mapping nor a Hardware \(5\)"),
        ({"synthesis_error": 10**400}, ArgumentError, r"synthesis_error: not a positive finite number"),
        ({"state": tt.State.product("000")}, StateShapeError, r"qubits"),
    ],
)
def test_impossible_budgets_are_refused(changes, error, message):
    with pytest.raises(error, match=message):
        tt.device_budget(PAIR, 1.0, ["lie"], WATCHED, 1e-2, **(ORDINARY | changes))


@pytest.mark.parametrize(
    ("place", "value", "error", "message"),
    [
        (0, "X_0", ArgumentError, r"operator: no Operator"),
        (1, math.inf, ArgumentError, r"time: "),
        (2, [], ArgumentError, r"candidates: no list of formulas"),
        (2, ["lye"], FormulaError, r"lye"),
        (3, "Z_0", OperatorError, r"observable: no Operator on the 2 qubits"),
        (3, tt.Operator("Z_2"), OperatorError, r"observable: no Operator on the 2 qubits of the Hamiltonian \(on 3"),
        (3, tt.Operator("3.0", qubits=2), OperatorError, r"observable: acts on no qubit"),
        (4, 0.0, ArgumentError, r"tolerance: not a positive finite number"),
    ],
)
def test_impossible_questions_are_refused(place, value, error, message):
    arguments = [PAIR, 1.0, ["lie"], WATCHED, 1e-2]
    arguments[place] = value
    with pytest.raises(error, match=message):
        tt.device_budget(*arguments, **ORDINARY)


def test_a_negative_time_cannot_be_measured_at_but_can_be_bounded():
    assert tt.device_budget(PAIR, -1.0, ["lie"], WATCHED, 0.1, two_qubit_error=1e-6).verdict == "meets"
    with pytest.raises(ArgumentError, match="time: not above zero"):
        tt.device_budget(PAIR, -1.0, ["lie"], WATCHED, 0.1, two_qubit_error=1e-6, state=tt.State.product("00"))


def test_rows_are_plain_data():
    found = lie_budget(0.5, 2, 1e-5).to_dict()
    assert found["kind"] == "trueturn budget" and found["rows"][0]["verdict"] == found["verdict"]
    json.dumps(found, allow_nan=False)
