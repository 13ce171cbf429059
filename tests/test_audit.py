"""Audits: intervals that hold the truth, verdicts, searches, readouts, recommendations, refusals."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
import strategies
import trueturn as tt

CHAIN = tt.model.ising(tt.lattice.chain(6), zz=-1.0, x=-0.7, z=0.2)
START = tt.State.product("0+1-01")
WATCHED = {"m": tt.Operator("Z_2", qubits=6), "bond": tt.Operator("X_1 X_2 + 0.5 Z_4", qubits=6)}


def exact_errors(row, times, operator, start, observables, readout):
    """Errors of a row from dense matrices alone: by time and name."""
    partition = row.candidate.partition(operator)
    found = {}
    for time in times:
        steps = row.steps if readout == "separate" else round(row.steps * time / times[-1])
        step = np.eye(start.size, dtype=complex)
        for stage in row.candidate.formula.stages:
            parts = partition.parts if stage.direction == "forward" else partition.parts[::-1]
            for part in parts:
                step = oracle.evolution(part, stage.weight * time / steps) @ step
        ours = np.exp(-1j * partition.identity * time) * np.linalg.matrix_power(step, steps) @ start
        truth = oracle.evolution(operator, time) @ start
        found[time, "state"] = float(np.linalg.norm(ours - truth))
        for name, observable in observables.items():
            matrix = oracle.dense(observable)
            found[time, name] = abs(np.vdot(ours, matrix @ ours).real - np.vdot(truth, matrix @ truth).real)
    return found


@pytest.mark.parametrize("readout", ["along", "separate"])
@pytest.mark.parametrize("quantity", ["observables", "state"])
def test_every_interval_holds_the_error_of_dense_matrices(quantity, readout):
    times = [0.4, 0.8, 1.2]
    candidates = [
        tt.Candidate(name, rule, 6)
        for name in ("lie", "strang", "suzuki-4")
        for rule in ("single", "commuting", "bond", "axis", "magnitude")
    ]
    found = tt.audit(CHAIN, START, times, candidates, 1e-3, quantity, WATCHED, readout)
    for row in found.rows:
        truth = exact_errors(row, times, CHAIN, START.amplitudes, WATCHED, readout)
        assert len(row.points) == len(times) * (2 if quantity == "observables" else 1)
        for point in row.points:
            low, high = point.error
            # Dense matrices of dimension 64 over some 20 products round at about 1e-13.
            assert low - 1e-12 <= truth[point.time, point.name] <= high + 1e-12
            assert high - low < 1e-8
        assert row.error == (max(p.error[0] for p in row.points), max(p.error[1] for p in row.points))


def test_a_large_identity_term_does_not_turn_rounding_into_error():
    """20000 steps change the norm by 6e-12: times a million, that was taken for an error of the circuit, as proven."""
    plain = {"m": tt.Operator("Z_2", qubits=6)}
    lifted = {"m": plain["m"] + 1e6}
    candidates = [tt.Candidate("strang", steps=20_000)]
    (expected,) = tt.audit(CHAIN, START, 1.0, candidates, 1e-3, observables=plain).rows
    (found,) = tt.audit(CHAIN, START, 1.0, candidates, 1e-3, observables=lifted).rows
    # The two intervals hold the same true error, so they overlap; a sum of a million is rounded at 1.2e-10 each time.
    assert found.error[0] <= expected.error[1] and expected.error[0] <= found.error[1]
    assert found.error[1] < 1e-6


@settings(max_examples=25)
@given(operator=strategies.operators(max_qubits=4, max_terms=7, min_terms=1), seed=st.integers(0, 1000))
def test_intervals_hold_on_random_hamiltonians(operator, seed):
    start = tt.State.random(operator.qubits, seed)
    watched = {"o": tt.Operator("X_0 - 0.4 Z_0", qubits=operator.qubits)}
    if len(operator.without_identity()) == 0:
        return
    found = tt.audit(operator, start, [0.7], [tt.Candidate("strang", "single", 3)], 1e-2, observables=watched)
    (row,) = found.rows
    truth = exact_errors(row, [0.7], operator, start.amplitudes, watched, "along")[0.7, "o"]
    assert row.error[0] - 1e-12 <= truth <= row.error[1] + 1e-12


def test_least_is_the_first_count_that_meets_together_with_all_tested_up_to_its_double():
    found = tt.audit(CHAIN, START, 2.0, [tt.Candidate("strang")], 1e-3, observables=WATCHED)
    (row,) = found.rows
    by_steps = {trial.steps: trial for trial in row.trials}
    assert by_steps[row.steps].verdict == "meets"
    assert by_steps[row.steps - 1].verdict == "misses"
    assert all(t.verdict == "meets" for t in row.trials if row.steps <= t.steps <= 2 * row.steps)
    assert row.steps + 1 in by_steps and 2 * row.steps in by_steps
    # Against a plain scan with given steps.
    scan = [tt.Candidate("strang", steps=steps) for steps in range(row.steps - 3, row.steps + 2)]
    verdicts = [r.verdict for r in tt.audit(CHAIN, START, 2.0, scan, 1e-3, observables=WATCHED).rows]
    assert verdicts[3:] == ["meets", "meets"] and verdicts[2] == "misses"


def test_searching_along_a_grid_tries_only_counts_that_meet_every_time():
    found = tt.audit(CHAIN, START, [0.5, 0.75, 1.75], [tt.Candidate("strang")], 1e-3, observables=WATCHED)
    (row,) = found.rows
    assert all(trial.steps % 7 == 0 for trial in row.trials)


def test_steps_off_the_grid_are_refused_with_counts_that_fit():
    with pytest.raises(tt.errors.AuditError, match="multiples of 4 do"):
        tt.audit(CHAIN, START, [0.5, 1.0, 2.0], [tt.Candidate("lie", steps=6)], 1e-3, observables=WATCHED)


def test_the_recommendation_has_the_fewest_two_qubit_gates_among_those_that_meet():
    found = tt.audit(
        CHAIN, START, 2.0, [tt.Candidate(name) for name in ("lie", "strang", "suzuki-4")], 1e-3, observables=WATCHED
    )
    meeting = [row for row in found.rows if row.verdict == "meets"]
    assert found.verdict == "meets" and found.recommended in meeting
    assert found.recommended.two_qubit_gates == min(row.two_qubit_gates for row in meeting)
    assert str(found.recommended.two_qubit_gates) in found.reason and found.recommended.label in found.reason


def test_without_a_candidate_that_meets_nothing_is_recommended():
    found = tt.audit(CHAIN, START, 2.0, [tt.Candidate("lie", steps=2)], 1e-6, observables=WATCHED)
    assert found.verdict == "misses" and found.recommended is None
    assert "No candidate" in found.reason and "lie, commuting" in found.reason


def test_a_reference_no_better_than_the_tolerance_leaves_the_verdict_undecided():
    probe = tt.audit(CHAIN, START, 1.0, [tt.Candidate("strang", steps=50)], 1e-3, "state")
    error = probe.rows[0].error[1]
    found = tt.audit(
        CHAIN, START, 1.0, [tt.Candidate("strang", steps=50)], error, "state", reference_tolerance=error / 2
    )
    assert found.verdict == found.rows[0].verdict == "undecided"
    low, high = found.rows[0].error
    assert low <= error < high


def test_single_precision_is_undecided_early_and_says_why():
    start = tt.State.product("0+1-01", dtype=np.complex64)
    found = tt.audit(CHAIN, start, 1.0, [tt.Candidate("suzuki-4")], 1e-6, "state")
    (row,) = found.rows
    assert row.verdict == "undecided" and "rounding" in row.note
    assert any("single precision" in text for text in found.assumptions)


def test_relative_errors_are_divided_by_a_proven_norm():
    doubled = {"m": 2.0 * WATCHED["m"]}
    candidates = [tt.Candidate("strang", steps=5)]
    plain = tt.audit(CHAIN, START, 1.0, candidates, 1e-3, observables=doubled)
    relative = tt.audit(CHAIN, START, 1.0, candidates, 1e-3, observables=doubled, relative_to="norm")
    # The norm of 2 Z is 2; its proven bound is padded by less than 1e-8.
    assert relative.rows[0].error[1] == pytest.approx(plain.rows[0].error[1] / 2.0, rel=1e-7)


def test_bounds_hold_for_observables_and_states():
    for quantity in ("observables", "state"):
        candidates = [tt.Candidate(name, steps=8) for name in ("lie", "strang", "suzuki-4")]
        found = tt.audit(CHAIN, START, [0.5, 1.0], candidates, 1e-3, quantity, WATCHED)
        lie, strang, suzuki = found.rows
        assert lie.error[1] <= lie.bound and strang.error[1] <= strang.bound and suzuki.error[1] <= suzuki.bound
        assert "derived" in suzuki.bound_source


def test_an_identity_term_of_an_observable_does_not_spoil_the_interval():
    shifted = {"m": WATCHED["m"] + 1e6}
    candidates = [tt.Candidate("strang", steps=5)]
    plain = tt.audit(CHAIN, START, 1.0, candidates, 1e-3, observables=WATCHED).rows[0].points[0]
    found = tt.audit(CHAIN, START, 1.0, candidates, 1e-3, observables=shifted, reference_tolerance=1e-6).rows[0]
    low, high = found.points[0].error
    assert low <= plain.error[1] and plain.error[0] <= high and high - low < 1e-5


def test_costs_are_those_of_the_circuit_that_ran():
    found = tt.audit(CHAIN, START, 1.0, [tt.Candidate("strang", "commuting", 10)], 1e-1, observables=WATCHED)
    circuit = tt.formula("strang").rotations(tt.Partition.of(CHAIN, "commuting"), 1.0, 10)
    row = found.rows[0]
    assert (row.rotations, row.two_qubit_gates) == (circuit.count, circuit.two_qubit_gates())
    weights = [int(x | z).bit_count() for x, z in zip(circuit.x_masks, circuit.z_masks, strict=True)]
    assert row.two_qubit_gates == sum(2 * (weight - 1) for weight in weights)
    assert row.depth == circuit.depth()


def test_no_ancilla_appears():
    # Common practice: product formulas act on the system's own qubits alone.
    for name in tt.formulas():
        assert tt.formula(name).rotations(tt.Partition.of(CHAIN, "bond"), 1.0, 2).qubits == CHAIN.qubits


def test_a_longer_time_at_equal_tolerance_needs_more_steps():
    # Common practice.
    for name in ("lie", "strang", "suzuki-4"):
        counts = [
            tt.audit(CHAIN, START, time, [tt.Candidate(name)], 1e-3, "state").rows[0].steps for time in (0.5, 1.0, 2.0)
        ]
        assert counts == sorted(counts) and len(set(counts)) == 3


def test_commuting_terms_make_one_first_order_step_exact():
    # Common practice: nothing is split off, whatever the order of the terms.
    diagonal = tt.Operator("0.7 Z_0 Z_1 - 0.3 Z_1 Z_2 + 0.9 Z_0 - 0.4 Z_3 Z_5", qubits=6)
    found = tt.audit(diagonal, START, 3.0, [tt.Candidate("lie", "single", 1)], 1e-9, "state")
    assert found.verdict == "meets" and found.rows[0].bound == 0.0


def test_the_start_state_is_left_alone():
    before = START.amplitudes.copy()
    tt.audit(CHAIN, START, 1.0, [tt.Candidate("lie", steps=3)], 1e-3, observables=WATCHED)
    assert np.array_equal(before, START.amplitudes)


def test_progress_names_what_is_running_and_its_exceptions_pass_through():
    seen = []
    tt.audit(
        CHAIN, START, 1.0, [tt.Candidate("lie", steps=3)], 1e-3, observables=WATCHED, progress=lambda *a: seen.append(a)
    )
    assert ("lie, commuting: 3 steps", 0, 1) in seen and seen[-1] == ("done", 1, 1)

    class Enough(Exception):
        pass

    def stop(*_):
        raise Enough

    with pytest.raises(Enough):
        tt.audit(CHAIN, START, 1.0, [tt.Candidate("lie", steps=3)], 1e-3, observables=WATCHED, progress=stop)


BAD = {
    "tolerance 0": ({"tolerance": 0.0}, tt.errors.ToleranceError, "tolerance: not a positive number"),
    "tolerance nan": ({"tolerance": np.nan}, tt.errors.ToleranceError, "tolerance: not a positive number"),
    "tolerance too small": ({"tolerance": 1e-15}, tt.errors.ToleranceError, "tolerance: cannot be judged in double"),
    "reference too fine": ({"reference_tolerance": 1e-17}, tt.errors.ToleranceError, "ask for .* or more"),
    "time nan": ({"times": [1.0, np.nan]}, tt.errors.ArgumentError, "times: not positive and finite"),
    "time infinite": ({"times": [np.inf]}, tt.errors.ArgumentError, "times: not positive and finite"),
    "time negative": ({"times": [-1.0]}, tt.errors.ArgumentError, "times: not positive and finite"),
    "no time": ({"times": []}, tt.errors.ArgumentError, "times: not positive and finite"),
    "no candidates": ({"candidates": []}, tt.errors.AuditError, "candidates: .*at least one"),
    "quantity": ({"quantity": "energy"}, tt.errors.ArgumentError, "quantity: unknown .*'observables', 'state'"),
    "readout": ({"readout": "late"}, tt.errors.ArgumentError, "readout: unknown .*'along', 'separate'"),
    "relative_to": ({"relative_to": "mean"}, tt.errors.ArgumentError, "relative_to: unknown"),
    "no observables": ({"observables": {}}, tt.errors.AuditError, "observables: empty .*name at least one"),
    "observable outside": (
        {"observables": {"m": tt.Operator("Z_9")}},
        tt.errors.StateShapeError,
        r"observables\['m'\]: acts on 10 qubits, the state on 6",
    ),
    "other qubits": ({"operator": tt.Operator("X_0 X_7")}, tt.errors.StateShapeError, "operator: acts on 8 qubits"),
    "empty operator": ({"operator": tt.Operator("0.0", qubits=6)}, tt.errors.OperatorError, "operator: has no terms"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_refused_by_class_and_remedy(case):
    changed, error, message = BAD[case]
    call = {
        "operator": CHAIN,
        "state": START,
        "times": [1.0],
        "candidates": [tt.Candidate("lie", "single", 3)],
        "tolerance": 1e-3,
        "observables": WATCHED,
    } | changed
    before = START.amplitudes.copy()
    with pytest.raises(error, match=message) as refusal:
        tt.audit(**call)
    assert isinstance(refusal.value, tt.errors.TrueturnError)
    assert np.array_equal(before, START.amplitudes)


def test_numbers_of_numpy_are_numbers():
    found = tt.audit(
        CHAIN,
        START,
        np.float64(1.0),
        [tt.Candidate("lie", steps=np.int64(3))],
        np.float32(1e-1),
        observables=WATCHED,
        threads=np.int64(1),
    )
    assert found.rows[0].steps == 3


def test_things_of_the_wrong_kind_are_refused_by_name():
    lie = [tt.Candidate("lie", steps=3)]
    for call, message in (
        (lambda: tt.audit("Z_0", START, 1.0, lie, 0.1, observables=WATCHED), "operator: "),
        (lambda: tt.audit(CHAIN, START.amplitudes, 1.0, lie, 0.1, observables=WATCHED), "state: "),
        (lambda: tt.audit(CHAIN, START, 1.0, lie, 0.1, observables={"m": "Z_0"}), "observables"),
        (lambda: tt.audit(CHAIN, START, 1.0, lie[0], 0.1, observables=WATCHED), "candidates: "),
        (lambda: tt.reference("Z_0", START, 1.0), "operator: "),
    ):
        with pytest.raises(tt.errors.TrueturnError, match=message):
            call()


@pytest.mark.parametrize("steps", [0, -1, 2.5, "many", True, None])
def test_impossible_step_counts_are_refused(steps):
    with pytest.raises(tt.errors.ArgumentError, match=r"steps: not a positive whole number .*least"):
        tt.Candidate("lie", steps=steps)


def test_what_can_be_certified_is_said_and_then_accepted():
    with pytest.raises(tt.errors.ToleranceError) as refusal:
        tt.reference(CHAIN, START, [5.0], 1e-17)
    achievable = refusal.value.achievable
    assert f"{achievable:g}" in str(refusal.value)
    assert tt.reference(CHAIN, START, [5.0], achievable).certificate.largest <= achievable
