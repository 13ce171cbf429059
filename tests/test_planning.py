"""Plans: least step counts against brute force, ranking, fronts, the budget of synthesis, proven counts, refusals."""

from __future__ import annotations

import dataclasses
import itertools

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import oracle
import strategies
import trueturn as tt
from trueturn.audit.measure import Bench
from trueturn.planning import costs, ranking, words
from trueturn.reference.certificate import norm_bound

CHAIN = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7, z=0.2)
START = tt.State.product("0+1-")
WATCHED = {"m": tt.Operator("Z_2", qubits=4), "bond": tt.Operator("X_1 X_2 + 0.5 Z_3", qubits=4)}
FORMULAS = ["lie", "strang", "suzuki-4"]


def dense_step(formula, partition, time):
    """The matrix of one step, from exponentials of dense parts."""
    step = np.eye(1 << partition.qubits, dtype=complex)
    for stage in formula.stages:
        for part in partition.parts if stage.direction == "forward" else partition.parts[::-1]:
            step = oracle.evolution(part, stage.weight * time) @ step
    return np.exp(-1j * partition.identity * time) * step


def dense_error(formula, partition, operator, start, time, steps, observables=None):
    """State error, or the largest error of observables, from dense matrices alone."""
    ours = np.linalg.matrix_power(dense_step(formula, partition, time / steps), steps) @ start
    truth = oracle.evolution(operator, time) @ start
    if observables is None:
        return float(np.linalg.norm(ours - truth))
    matrices = [oracle.dense(observable) for observable in observables.values()]
    return max(abs(np.vdot(ours, m @ ours).real - np.vdot(truth, m @ truth).real) for m in matrices)


def brute_least(error, tolerance, most):
    """The smallest r that meets together with every count from r to 2r, by running all of them."""
    meets = [False, *(error(steps) <= tolerance for steps in range(1, 2 * most + 1))]
    return next((r for r in range(1, most + 1) if all(meets[r : 2 * r + 1])), None)


@pytest.mark.parametrize("quantity", ["state", "observables"])
def test_least_steps_are_those_of_brute_force_over_dense_matrices(quantity):
    found = tt.plan(
        CHAIN, START, 1.0, FORMULAS, ["bond", "axis"], 2e-2, quantity, WATCHED, orderings=["given", "reversed"]
    )
    assert len(found.rows) == 12 and found.verdict == "meets"
    watched = WATCHED if quantity == "observables" else None
    for row in found.rows:
        partition = row.candidate.partition(CHAIN)

        def error(steps, formula=row.candidate.formula, partition=partition):
            return dense_error(formula, partition, CHAIN, START.amplitudes, 1.0, steps, watched)

        # The intervals are some 1e-10 wide; an error that near to the tolerance would make the comparison meaningless.
        assert abs(error(row.steps) - 2e-2) > 1e-8
        assert row.steps == brute_least(error, 2e-2, row.steps + 2), row.label
        assert row.verified and row.verdict == "meets"


def test_least_steps_for_every_start_at_once_need_none():
    found = tt.plan(CHAIN, None, 1.0, FORMULAS, "axis", 2e-2, "operator")
    exact = oracle.evolution(CHAIN, 1.0)
    for row in found.rows:
        formula, partition = row.candidate.formula, row.candidate.partition(CHAIN)

        def error(steps, formula=formula, partition=partition):
            step = dense_step(formula, partition, 1.0 / steps)
            return np.linalg.norm(np.linalg.matrix_power(step, steps) - exact, 2)

        assert row.steps == brute_least(error, 2e-2, row.steps + 2), row.label
        # The state error of any start is no larger, and the bound is on this very distance.
        assert row.bound_steps >= row.steps
        assert dense_error(formula, partition, CHAIN, START.amplitudes, 1.0, row.steps) <= 2e-2


@settings(max_examples=20)
@given(
    operator=strategies.operators(max_qubits=3, max_terms=5, min_terms=2),
    formula=st.sampled_from(FORMULAS),
    rule=st.sampled_from(["single", "commuting"]),
    seed=st.integers(0, 100),
)
def test_least_steps_of_random_hamiltonians_are_those_of_brute_force(operator, formula, rule, seed):
    assume(len(operator.without_identity()) and 0.1 < operator.one_norm() < 6.0)
    start = tt.State.random(operator.qubits, seed)
    found = tt.plan(operator, start, 0.6, formula, rule, 3e-2, "state")
    (row,) = found.rows
    partition = row.candidate.partition(operator)
    errors = [
        dense_error(row.candidate.formula, partition, operator, start.amplitudes, 0.6, steps)
        for steps in range(1, 2 * row.steps + 1)
    ]
    assume(min(abs(error - 3e-2) for error in errors) > 1e-8)
    meets = [error <= 3e-2 for error in errors]
    # What the definition promises holds exactly; where every count was as the tested ones, it is brute force's answer.
    assert meets[row.steps - 1] and (row.steps == 1 or not meets[row.steps - 2])
    assert all(meets[count - 1] for count in row.accidental)
    if all(meets[row.steps - 1 :]):
        assert row.steps == next(r for r in range(1, row.steps + 1) if all(meets[r - 1 : 2 * r]))


def test_each_circuit_is_run_once_and_fewer_are_run_than_by_brute_force(monkeypatch):
    seen = []
    measure = Bench.measure

    def counted(self, candidate, partition, steps):
        seen.append((candidate.formula.name, partition, steps))
        return measure(self, candidate, partition, steps)

    monkeypatch.setattr(Bench, "measure", counted)
    found = tt.plan(
        CHAIN, START, 1.0, ["strang", "lie"], ["single", "axis", tt.Partition.of(CHAIN, "axis"), "bond"], 1e-2, "state"
    )
    assert len(seen) == len(set(seen)) == found.evolutions
    assert len(found.rows) == 8
    assert {row.label: row.same_as for row in found.rows if row.same_as} == {
        "strang, own parts": "strang, axis",
        "lie, own parts": "lie, axis",
    }
    for row in found.rows:
        twins = [
            other
            for other in found.rows
            if other.candidate.formula.name == row.candidate.formula.name
            and other.candidate.partition(CHAIN) == row.candidate.partition(CHAIN)
        ]
        assert sum(not other.same_as for other in twins) == 1
        assert len({other.steps for other in twins}) == 1
    own = [row for row in found.rows if not row.same_as]
    assert found.evolutions == sum(len(row.trials) for row in own)
    # Brute force runs every count from 1 to 2r.
    assert found.evolutions < sum(2 * row.steps for row in own) / 4


def test_rows_are_ranked_by_the_cost_that_was_asked_for():
    for cost in ("two_qubit_gates", "depth", "rotations", "t_count", lambda circuit: -circuit.count):
        found = tt.plan(CHAIN, START, 1.0, FORMULAS, ["single", "axis"], 1e-3, "state", cost=cost)
        name = found.cost[0]
        assert all(row.verdict == "meets" for row in found.rows)
        assert [row.costs[name] for row in found.rows] == sorted(row.costs[name] for row in found.rows)
        assert found.recommended is found.rows[0]
        for row in found.rows:
            circuit = row.candidate.formula.rotations(row.candidate.partition(CHAIN), 1.0, row.steps)
            assert row.costs["two_qubit_gates"] == circuit.two_qubit_gates() == row.two_qubit_gates
            assert row.costs["depth"] == circuit.depth() == row.depth
            assert row.costs["rotations"] == circuit.count == row.rotations
    assert name == "own cost"


def test_rows_that_do_not_meet_come_last_and_nothing_is_recommended_without_one_that_does():
    found = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-4, "state", most_steps=100)
    assert [row.verdict for row in found.rows] == ["meets", "meets", "misses"]
    assert found.rows[-1].candidate.formula.name == "lie" and "no step count up to 100" in found.rows[-1].note
    assert not found.rows[-1].verified and not found.rows[-1].efficient
    none = tt.plan(CHAIN, START, 1.0, "lie", "axis", 1e-6, "state", most_steps=100)
    assert none.recommended is None and none.verdict == "misses" and "No way is shown to meet" in none.reason


def plan_row(number, given_costs, verdict="meets", trials=()):
    """A row for ranking alone."""
    from trueturn.audit.result import Trial

    return tt.PlanRow(
        candidate=tt.Candidate("lie"),
        label=str(number),
        steps=1,
        error=(0.0, 1.0),
        bound=None,
        bound_source="",
        rotations=0,
        two_qubit_gates=0,
        depth=0,
        verdict=verdict,
        rounding=0.0,
        points=(),
        trials=tuple(Trial(place, (low, high), "misses", 0) for place, (_, low, high) in enumerate(trials)),
        rule="",
        ordering="",
        same_as="",
        costs={"two_qubit_gates": given_costs[0], "rotations": given_costs[1]},
        trial_costs=tuple(price for price, _, _ in trials),
        verified=True,
        fitted_order=None,
        bound_steps=None,
        bound_steps_source="",
        overpays=None,
        noise=None,
        room=verdict == "meets",
        efficient=False,
    )


@given(
    st.lists(st.tuples(st.integers(0, 4), st.integers(0, 4), st.sampled_from(["meets", "meets", "misses"])), max_size=8)
)
def test_a_row_is_efficient_unless_another_is_no_worse_in_all_costs_and_better_in_one(entries):
    rows = [plan_row(number, entry[:2], entry[2]) for number, entry in enumerate(entries)]
    for row in ranking.marked(rows, ("two_qubit_gates", "rotations")):
        mine = tuple(row.costs.values())
        better = [
            other
            for other in rows
            if other.verdict == "meets"
            and tuple(other.costs.values()) != mine
            and all(a <= b for a, b in zip(other.costs.values(), mine, strict=True))
        ]
        assert row.efficient is (row.verdict == "meets" and not better)


trial_lists = st.lists(st.tuples(st.integers(0, 5), st.floats(0.1, 1.0), st.floats(0.0, 0.2)), min_size=1, max_size=5)


@given(st.lists(trial_lists, min_size=1, max_size=3))
def test_a_step_count_is_on_the_front_unless_another_is_no_worse_in_error_and_cost_and_better_in_one(lists):
    rows = [
        plan_row(number, (1, 1), trials=[(price, low, low + width) for price, low, width in trials])
        for number, trials in enumerate(lists)
    ]
    found = ranking.front(rows)
    points = {(price, low + width) for trials in lists for price, low, width in trials}
    expected = {
        (price, high)
        for price, high in points
        if not any(p <= price and h <= high and (p, h) != (price, high) for p, h in points)
    }
    assert {(point.cost, point.error[1]) for point in found} == expected
    assert [point.cost for point in found] == sorted(point.cost for point in found)


def test_the_front_holds_the_runs_of_all_rows():
    found = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-3, "state")
    for point in found.front:
        row = found.rows[point.row]
        assert point.label == row.label
        place = [trial.steps for trial in row.trials].index(point.steps)
        assert (row.trials[place].error, row.trial_costs[place]) == (point.error, point.cost)
    assert {found.rows[point.row].candidate.formula.name for point in found.front} == {"strang", "suzuki-4"}


@pytest.mark.parametrize("quantity", ["state", "observables"])
def test_a_circuit_within_the_synthesis_error_still_meets_the_whole_tolerance(quantity):
    found = tt.plan(CHAIN, START, 1.0, "strang", "axis", 1e-2, quantity, WATCHED, synthesis_error=4e-3)
    (row,) = found.rows
    assert found.allowed == pytest.approx(6e-3) and row.error[1] <= 6e-3
    circuit = row.candidate.formula.rotations(row.candidate.partition(CHAIN), 1.0, row.steps)
    # All rotations share the distance that a synthesis error stands for: itself, or itself over twice the largest norm, for
    # which a proven bound from above stands in: at least the true norm.
    norm = max(abs(np.linalg.eigvalsh(oracle.dense(WATCHED["bond"]))))
    bound = max(norm_bound(observable) for observable in WATCHED.values())
    assert bound >= norm * (1 - 1e-12)
    share = 4e-3 if quantity == "state" else 4e-3 / (2.0 * bound)
    assert row.costs["t_count"] == circuit.cost(synthesis_error=share).t_count
    # Every angle off by its share, the worst of signs tried at random: ‖exp(-iδP) - 1‖ = 2 |sin(δ/2)| ≤ δ.
    truth = oracle.evolution(CHAIN, 1.0) @ START.amplitudes
    generator = np.random.default_rng(5)
    for _ in range(5):
        off = generator.choice([-1.0, 1.0], size=circuit.count) * share / circuit.count
        state = START.copy()
        state.apply(tt.Rotations(circuit.x_masks, circuit.z_masks, circuit.angles + off, 4, circuit.phase))
        ours = state.amplitudes
        if quantity == "state":
            error = np.linalg.norm(ours - truth)
        else:
            matrices = [oracle.dense(observable) for observable in WATCHED.values()]
            error = max(abs(np.vdot(ours, m @ ours) - np.vdot(truth, m @ truth)) for m in matrices)
        assert error <= 1e-2


def test_t_gates_reserve_a_tenth_of_the_tolerance_where_nothing_is_said():
    assert tt.plan(CHAIN, START, 1.0, "strang", "axis", 1e-2, "state", cost="t_count").synthesis_error == 1e-3
    plain = tt.plan(CHAIN, START, 1.0, "strang", "axis", 1e-2, "state")
    assert plain.synthesis_error is None and "t_count" not in plain.rows[0].costs and plain.allowed == 1e-2


def test_the_proven_count_is_the_least_whose_bound_meets_the_tolerance():
    found = tt.plan(CHAIN, START, [0.5, 1.0], ["lie", "strang"], "axis", 1e-2, "observables", WATCHED)
    norm = max(abs(np.linalg.eigvalsh(oracle.dense(WATCHED["bond"]))))
    for row in found.rows:
        partition = row.candidate.partition(CHAIN)
        values = [
            tt.bound(row.candidate.formula, partition, 1.0, count, method="tightest").value
            for count in (row.bound_steps, row.bound_steps - 2)
        ]
        # A proven upper bound on the norm stands for it: here 1.5 exactly, since both terms can be 1 and 0.5 at once.
        assert 2 * norm * values[0] <= 1e-2 * (1 + 1e-9) and 2 * norm * values[1] > 1e-2
        assert row.bound_steps % 2 == 0  # both times fall on the grid
        assert row.overpays == row.bound_steps / row.steps > 1.0
        exact = dense_error(row.candidate.formula, partition, CHAIN, START.amplitudes, 1.0, row.bound_steps, WATCHED)
        assert exact <= 1e-2


def test_proven_counts_cover_every_formula_and_can_be_left_out():
    found = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-2, "state")
    for row in found.rows:
        partition = row.candidate.partition(CHAIN)
        assert row.bound_steps == tt.steps_by_bound(row.candidate.formula, partition, 1.0, 1e-2, method="tightest")
        assert row.bound is not None and row.bound >= row.error[0]
    without = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-2, "state", bounds=False)
    assert all(row.bound is None and row.bound_steps is None and row.overpays is None for row in without.rows)
    assert [row.steps for row in without.rows] == [row.steps for row in found.rows]


def test_an_interrupt_while_bounds_are_computed_keeps_all_rows():
    def progress(stage, done, total):
        if "proven bound" in stage and done == 1:
            raise KeyboardInterrupt

    found = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-2, "state", progress=progress)
    assert found.interrupted and len(found.rows) == 3 and not found.unsearched
    assert all(row.verified for row in found.rows)
    bounded = [row.bound_steps is not None for row in found.rows if row.candidate.formula.name == "lie"]
    assert bounded == [True] and sum(row.bound_steps is None for row in found.rows) == 2


def test_a_device_counts_gates_as_they_are_written_for_it():
    ring = tt.model.heisenberg(tt.lattice.ring(4), 1.0)
    plain = tt.plan(ring, tt.State.product("0101"), 1.0, FORMULAS, "bond", 1e-2, "state")
    device = {"native": "cz"}
    found = tt.plan(ring, tt.State.product("0101"), 1.0, FORMULAS, "bond", 1e-2, "state", device=device)
    assert {row.label: row.steps for row in found.rows} == {row.label: row.steps for row in plain.rows}
    for row in found.rows:
        circuit = row.candidate.formula.rotations(row.candidate.partition(ring), 1.0, row.steps)
        cost = circuit.cost(**device)
        assert row.costs["two_qubit_gates"] == cost.two_qubit_gates != circuit.two_qubit_gates()
        assert row.costs["depth"] == cost.two_qubit_depth and row.costs["rotations"] == cost.rotations
        assert row.two_qubit_gates == circuit.two_qubit_gates() and row.noise is None


def test_noise_is_what_failing_gates_of_the_cone_may_add():
    rate = 1e-5
    found = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-2, "observables", WATCHED, device={"two_qubit_error": rate})
    for row in found.rows:
        circuit = row.candidate.formula.rotations(row.candidate.partition(CHAIN), 1.0, row.steps)
        gates = circuit.cost().two_qubit_gates
        # No more than if every gate of the circuit were in the cone of the observable with the largest norm.
        most = 2.0 * max(norm_bound(one) for one in WATCHED.values()) * (1 - (1 - rate) ** gates)
        assert 0.0 < row.noise <= most * (1 + 1e-9)
        assert row.room is (row.error[1] + row.noise <= 1e-2) and row.room is ("failing gates" not in row.note)


def test_rows_without_room_for_noise_rank_behind_those_that_have_it_and_are_not_recommended():
    plain = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-2, "observables", WATCHED)
    seen = set()
    for rate in (1e-6, 3e-6, 1e-5, 3e-5, 1e-4):
        found = tt.plan(
            CHAIN, START, 1.0, FORMULAS, "axis", 1e-2, "observables", WATCHED, device={"two_qubit_error": rate}
        )
        rooms = [row.room for row in found.rows]
        assert rooms == sorted(rooms, reverse=True) and found.verdict == plain.verdict == "meets"
        assert found.recommended is (found.rows[0] if rooms[0] else None)
        assert rooms[0] or "has room for the noise" in found.reason
        seen |= set(rooms)
    assert seen == {True, False}


def test_a_row_without_room_is_not_called_one_that_misses():
    found = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-2, "observables", WATCHED, device={"two_qubit_error": 1e-6})
    first, *others = found.rows
    crowded = [first, *(dataclasses.replace(row, room=False) for row in others)]
    missing = [first, *(dataclasses.replace(row, room=False, verdict="misses") for row in others)]
    assert all(row.verdict == "meets" for row in crowded)
    assert words.reason(crowded, found.cost, 1e-2).endswith(
        "; no other way that meets it has room for the noise of the device."
    )
    assert words.reason(missing, found.cost, 1e-2).endswith("; no other way meets it.")


def test_every_ordering_is_tried_and_named():
    operator = tt.Operator("X_0 + 0.7 Y_0 Y_1 + 0.4 Z_0 + 0.2 X_1")
    start = tt.State.product("0+")
    found = tt.plan(operator, start, 0.5, "lie", "single", 1e-2, "state", orderings="every")
    assert len(found.rows) == 24
    assert {row.ordering for row in found.rows} == {
        f"order {' '.join(map(str, p))}" for p in itertools.permutations(range(4))
    }
    for row in found.rows:
        order = [int(digit) for digit in row.ordering.split()[1:]]
        expected = tt.Partition.of(operator, "single").reordered(order)
        assert row.candidate.partition(operator) == expected
    assert len({row.steps for row in found.rows}) > 1


def test_ways_that_cannot_be_run_are_left_out_with_the_reason():
    found = tt.plan(CHAIN, START, 1.0, ["strang", "suzuki-4"], "axis", 1e-2, "state", orderings=["given", "improved"])
    assert {row.label for row in found.rows} == {"strang, axis", "strang, axis improved", "suzuki-4, axis"}
    assert (
        list(found.left_out) == ["suzuki-4, axis improved"]
        and "lie, strang" in found.left_out["suzuki-4, axis improved"]
    )


def test_all_formulas_are_planned_where_none_are_named():
    operator = tt.Operator("X_0 + 0.7 Y_0 Y_1 + 0.4 Z_0 Z_1 + 0.2 X_1")
    found = tt.plan(operator, tt.State.product("0+"), 0.5, None, "axis", 1e-3, "state", bounds=False)
    assert {row.candidate.formula.name for row in found.rows} == set(tt.formulas())


def test_own_parts_and_own_formulas_are_ways_too():
    parts = tt.Partition.of(CHAIN, "axis").shuffled(3)
    own = tt.Formula.composition([0.5, 0.5], name="mine")
    found = tt.plan(CHAIN, START, 1.0, ["strang", own], [parts, "axis"], 1e-2, "state")
    assert {row.label for row in found.rows} == {
        "strang, own parts",
        "mine, own parts",
        "strang, axis",
        "mine, axis",
    }


@pytest.mark.parametrize("stop_after", [1, 3, 9, 12])
def test_an_interrupt_keeps_the_best_so_far(stop_after):
    calls = []

    def progress(stage, done, total):
        if "steps" in stage:
            calls.append(stage)
            if len(calls) > stop_after:
                raise KeyboardInterrupt

    found = tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-3, "state", progress=progress)
    assert found.interrupted and found.evolutions == stop_after
    whole = {row.label: row for row in tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-3, "state").rows}
    assert len(found.rows) + len(found.unsearched) == 3
    for row in found.rows:
        if row.verified:
            assert row.steps == whole[row.label].steps
        else:
            assert "interrupted" in row.note
            assert row.verdict != "meets" or row.steps >= whole[row.label].steps
    assert sum(not row.verified for row in found.rows) <= 1
    assert "Interrupted" in repr(found)


def test_a_way_that_is_sure_to_cost_more_is_given_up_where_thoroughness_is_not_asked_for():
    rules = ["axis", "bond"]
    whole = tt.plan(CHAIN, START, 1.0, FORMULAS, rules, 1e-4, "state")
    found = tt.plan(CHAIN, START, 1.0, FORMULAS, rules, 1e-4, "state", thorough=False)
    assert found.evolutions < whole.evolutions and found.rows[0].steps == whole.rows[0].steps
    answers = {row.label: row for row in whole.rows}
    given_up = [row for row in found.rows if "given up" in row.note]
    assert {row.candidate.formula.name for row in given_up} >= {"lie"}
    for row in found.rows:
        if row in given_up:
            assert not row.verified
            missing = max(trial.steps for trial in row.trials if trial.verdict != "meets")
            assert missing < answers[row.label].steps
            # All of its costs at a count that misses, and so at its answer, are above those of a row that meets.
            assert any(
                other.verdict == "meets"
                and all(other.costs[name] < answers[row.label].costs[name] for name in found.compared)
                for other in found.rows
            )
        else:
            assert row.steps == answers[row.label].steps
    # What is given up was not efficient.
    assert [row.label for row in found.rows if row.efficient] == [row.label for row in whole.rows if row.efficient]


def test_an_interrupt_before_anything_was_measured_passes_through():
    def progress(stage, done, total):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        tt.plan(CHAIN, START, 1.0, FORMULAS, "axis", 1e-3, "state", progress=progress)


def plan_with(**changes):
    arguments = {
        "operator": CHAIN,
        "state": START,
        "times": 1.0,
        "formulas": ["strang"],
        "rule": "axis",
        "tolerance": 1e-2,
        "quantity": "state",
    }
    return tt.plan(**(arguments | changes))


@pytest.mark.parametrize(
    ("changes", "error", "message"),
    [
        ({"quantity": "observables"}, tt.errors.AuditError, r"^observables: empty"),
        ({"state": None}, tt.errors.ArgumentError, r"^state: missing \(None\) where quantity='state'"),
        ({"quantity": "speed"}, tt.errors.ArgumentError, r"^quantity: unknown \('speed'\); give one of"),
        ({"formulas": []}, tt.errors.AuditError, r"^formulas: empty; name at least one"),
        ({"formulas": "stang"}, tt.errors.FormulaError, r"strang"),
        ({"formulas": ["lie", "lie"]}, tt.errors.AuditError, r"^formulas: two of one name \('lie'\)"),
        ({"formulas": 3}, tt.errors.ArgumentError, r"^formula: neither a name"),
        ({"formulas": "laskar-robutel-2"}, tt.errors.FormulaError, r"^partition: lacks what laskar-robutel-2 requires"),
        ({"rule": "axs"}, tt.errors.PartitionError, r"axis"),
        ({"rule": 7}, tt.errors.PartitionError, r"^rule: neither a name nor a Partition \(7\)"),
        ({"rule": []}, tt.errors.AuditError, r"^rule: empty"),
        ({"orderings": "revresed"}, tt.errors.ArgumentError, r"^orderings: unknown .* did you mean 'reversed'\?"),
        ({"orderings": []}, tt.errors.ArgumentError, r"^orderings: empty"),
        ({"rule": "single", "orderings": "every"}, tt.errors.ArgumentError, r"^orderings: 'every' .* \(11 here\)"),
        ({"cost": "two_qubit_gate"}, tt.errors.ArgumentError, r"^cost: unknown .* did you mean 'two_qubit_gates'\?"),
        ({"cost": []}, tt.errors.ArgumentError, r"^cost: empty"),
        ({"cost": lambda circuit: "a"}, tt.errors.ArgumentError, r"^cost: gives no finite number \(own cost: 'a'\)"),
        ({"cost": lambda circuit: np.nan}, tt.errors.ArgumentError, r"^cost: gives no finite number"),
        ({"cost": lambda circuit: 10**400}, tt.errors.ArgumentError, r"^cost: gives no finite number"),
        ({"cost": 4}, tt.errors.ArgumentError, r"^cost: unknown \(4\)"),
        ({"tolerance": 0.0}, tt.errors.ToleranceError, r"^tolerance: not a positive number"),
        ({"tolerance": "x", "cost": "t_count"}, tt.errors.ToleranceError, r"^tolerance: not a positive number"),
        ({"tolerance": 1e-15}, tt.errors.ToleranceError, r"^tolerance: cannot be judged in double precision"),
        ({"synthesis_error": -1.0}, tt.errors.ArgumentError, r"^synthesis_error: not a positive number"),
        ({"synthesis_error": 0.02}, tt.errors.ToleranceError, r"^synthesis_error: takes the whole tolerance"),
        ({"device": {"conectivity": "line"}}, tt.errors.ArgumentError, r"^conectivity: unknown .* 'connectivity'"),
        ({"device": 5}, tt.errors.ArgumentError, r"^device: neither a mapping nor a Hardware \(5\)"),
        (
            {"quantity": "observables", "observables": WATCHED, "device": {"two_qubit_error": 0.1}},
            tt.errors.ToleranceError,
            r"^tolerance: lies within the device's noise \(0\.01\): already with 1 step of strang, axis",
        ),
        ({"times": 0.0}, tt.errors.ArgumentError, r"^times: not positive"),
        ({"most_steps": 0}, tt.errors.ArgumentError, r"^most_steps"),
    ],
)
def test_bad_input_is_refused_by_name(changes, error, message):
    with pytest.raises(error, match=message):
        plan_with(**changes)


def test_a_tolerance_below_the_rounding_of_single_precision_is_said_to_be_that():
    start = tt.State.product("0+1-", dtype=np.complex64)
    found = tt.plan(CHAIN, start, 1.0, ["strang", "suzuki-4"], "axis", 3e-7, "state")
    assert found.verdict == "undecided" and found.recommended is None
    assert "rounding alone" in found.reason and "double precision" in found.reason


def test_names_of_costs_are_those_of_the_documentation():
    assert set(costs.COSTS) == {"two_qubit_gates", "depth", "rotations", "t_count", "wall_time"}
