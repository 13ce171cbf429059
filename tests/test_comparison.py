"""Comparison: equal budgets, a front that brute force confirms, a readable table, a picture, refusals."""

from __future__ import annotations

import math
import xml.etree.ElementTree

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import circuits
import oracle
import trueturn as tt
from trueturn import errors
from trueturn.comparison import Comparison, Point, compare
from trueturn.comparison.result import efficient

CHAIN = tt.model.heisenberg(tt.lattice.chain(4), 0.6, z=0.2) + 0.4
START = tt.State.product("0+1-")
WATCHED = {"m": tt.Operator("Z_2", qubits=4), "bond": tt.Operator("X_1 X_2 + 0.5 Z_3", qubits=4)}
TIME = 1.3
JUMP = tt.Formula.composition([1 / (2 - 2 ** (1 / 3)), 1 - 2 / (2 - 2 ** (1 / 3)), 1 / (2 - 2 ** (1 / 3))], name="jump")
FORMULAS = ("lie", "strang", JUMP, "suzuki-4")
NAMES = ("lie", "strang", "jump", "suzuki-4")
BUDGETS = (120, 400, 401, 1300)
PRICES = {"two_qubit_gates": lambda circuit: circuit.two_qubit_gates(), "rotations": lambda circuit: circuit.count}


@pytest.fixture(scope="module")
def compared():
    return compare(CHAIN, START, TIME, FORMULAS, "axis", BUDGETS, WATCHED)


def named(name):
    return JUMP if name == "jump" else tt.formula(name)


def brute_force(budgets, quantity, cost, rule="axis"):
    """(name, budget) -> steps, cost and error, from dense matrices and by trying every step count."""
    partition = tt.Partition.of(CHAIN, rule)
    exact = oracle.evolution(CHAIN, TIME) @ START.amplitudes
    found = {}
    for name in NAMES:
        for budget in budgets:
            steps, price = 0, 0
            while True:
                next_price = PRICES[cost](named(name).rotations(partition, TIME, steps + 1))
                if next_price > budget:
                    break
                steps, price = steps + 1, next_price
            if steps:
                ours = circuits.plain(named(name), partition, TIME, steps) @ START.amplitudes
                if quantity == "state":
                    error = np.linalg.norm(ours - exact)
                else:
                    matrices = [oracle.dense(observable) for observable in WATCHED.values()]
                    error = max(abs(np.vdot(ours, m @ ours) - np.vdot(exact, m @ exact)) for m in matrices)
                found[name, budget] = steps, price, float(error)
    return found


@pytest.mark.parametrize(
    ("quantity", "cost"), [("observables", "two_qubit_gates"), ("state", "two_qubit_gates"), ("state", "rotations")]
)
def test_points_budgets_and_front_are_those_of_brute_force(quantity, cost):
    found = compare(CHAIN, START, TIME, FORMULAS, "axis", BUDGETS, WATCHED, quantity, cost=cost)
    expected = brute_force(BUDGETS, quantity, cost)
    by_budget = {(point.formula, budget): point for point in found.points for budget in point.budgets}
    assert by_budget.keys() == expected.keys()
    for key, (steps, price, error) in expected.items():
        point = by_budget[key]
        assert (point.steps, point.cost) == (steps, price)
        assert price <= key[1]
        # Dense matrices of dimension 16 over some 200 products round at about 1e-13.
        assert point.error[0] - 1e-12 <= error <= point.error[1] + 1e-12
        assert point.error[1] - point.error[0] < 1e-9
    measured = {(key[0], steps): (price, error) for key, (steps, price, error) in expected.items()}
    front = {
        key
        for key, (price, error) in measured.items()
        if not any(p <= price and e <= error and (p, e) != (price, error) for p, e in measured.values())
    }
    assert {(point.formula, point.steps) for point in found.front} == front
    assert all(point.certain for point in found.front)  # errors of 1e-4 and more against intervals below 1e-9
    assert [point.cost for point in found.front] == sorted(point.cost for point in found.front)


def test_a_step_count_that_fills_two_budgets_is_one_point(compared):
    double = [point for point in compared.points if {400, 401} <= set(point.budgets)]
    assert double
    assert len({(point.formula, point.steps) for point in compared.points}) == len(compared.points)


def test_ranks_at_a_budget_and_at_an_accuracy(compared):
    ranked = compared.at_budget(1300)
    assert {point.formula for point in ranked} == set(NAMES)
    assert [point.error[1] for point in ranked] == sorted(point.error[1] for point in ranked)
    assert ranked[0].formula == "suzuki-4" and compared.at_budget(120)[0].formula == "strang"
    accuracy = ranked[1].error[1]
    cheapest = compared.at_accuracy(accuracy)
    assert all(point.error[1] <= accuracy for point in cheapest)
    for point in cheapest:
        same = [other for other in compared.points if other.formula == point.formula and other.error[1] <= accuracy]
        assert point.cost == min(other.cost for other in same)
    ranks = [(point.cost, point.error[1]) for point in cheapest]
    assert ranks == sorted(ranks)
    assert cheapest[0].on_front and compared.at_accuracy(1e-300) == ()


@pytest.mark.parametrize("steps", [1, 2, 4, 5, 8])
def test_a_budget_that_fits_exactly_is_filled(steps):
    budget = tt.formula("strang").rotations(tt.Partition.of(CHAIN, "axis"), 1.0, steps).two_qubit_gates()
    (point,) = compare(CHAIN, START, 1.0, ["strang"], "axis", [budget]).points
    assert (point.steps, point.cost) == (steps, budget)
    if steps > 1:
        (point,) = compare(CHAIN, START, 1.0, ["strang"], "axis", [budget - 1]).points
        assert point.steps == steps - 1 and point.cost < budget


def test_an_accuracy_counts_as_reached_only_when_the_whole_interval_is_below(compared):
    points = (Point("a", 1, 10, (1e-9, 3e-9), (10,)), Point("a", 2, 20, (0.0, 1e-9), (20,)))
    found = Comparison(points, ("a",), (10, 20), "rotations", "axis", 1.0, "state", {"a": 1}, {}, compared.reference)
    assert found.at_accuracy(2e-9) == points[1:] and found.at_accuracy(3e-9) == points[:1]


ends = st.floats(0.0, 1.0)
intervals = st.tuples(ends, ends).map(lambda pair: (min(pair), max(pair)))


@given(points=st.lists(st.tuples(st.integers(1, 4), intervals), min_size=1, max_size=6), seed=st.integers(0, 2**32 - 1))
def test_the_front_is_never_empty_and_certain_points_stay_on_it(points, seed):
    marks = efficient(points)
    assert any(on_front for on_front, _ in marks)
    for (cost, (_, high)), (on_front, _) in zip(points, marks, strict=True):
        rivals = [(c, h) for c, (_, h) in points if c <= cost and h <= high and (c, h) != (cost, high)]
        assert on_front == (not rivals)
    generator = np.random.default_rng(seed)
    for _ in range(5):
        truth = [low + (high - low) * generator.choice([0.0, 1.0, generator.random()]) for _, (low, high) in points]
        for place, (_, certain) in enumerate(marks):
            beaten = any(
                points[q][0] <= points[place][0]
                and truth[q] <= truth[place]
                and (points[q][0], truth[q]) != (points[place][0], truth[place])
                for q in range(len(points))
            )
            assert not (certain and beaten)


def test_overlapping_intervals_are_not_called_certain():
    marks = efficient([(10, (1e-3, 3e-3)), (20, (2e-3, 2.5e-3)), (30, (0.0, 1e-4)), (40, (0.0, 1e-4))])
    assert marks == [(True, True), (True, False), (True, True), (False, False)]


def test_defaults_compare_all_registered_formulas_at_the_state():
    small = tt.model.ising(tt.lattice.chain(3), zz=-1.0, x=-0.7)
    found = compare(small, tt.State.product("000"), 0.5)
    assert found.quantity == "state" and len(found.budgets) == 7
    assert set(found.formulas) | set(found.left_out) <= set(tt.formulas())
    assert {"lie", "strang", "suzuki-4"} <= set(found.formulas)
    strang = next(point for point in found.points if point.formula == "strang" and found.budgets[0] in point.budgets)
    assert strang.steps in (3, 4)


def test_a_registered_formula_that_cannot_run_is_left_out_with_the_reason(monkeypatch):
    monkeypatch.setattr("trueturn.comparison.run.known_formulas", lambda: ("strang", "gone"))
    found = compare(CHAIN, START, 1.0, budgets=[60])
    assert found.formulas == ("strang",) and found.left_out["gone"].startswith("name: is no known formula ('gone')")
    assert "Left out: gone. name: is no known" in found.table()


def test_own_parts_serve_as_a_rule_and_must_sum_to_the_operator():
    parts = tt.Partition.of(CHAIN, "axis")
    own, named_rule = (compare(CHAIN, START, 1.0, ["strang"], rule, [120]) for rule in (parts, "axis"))
    assert own.points == named_rule.points and own.rule == "own parts" and "own parts, by" in own.table()
    with pytest.raises(errors.PartitionError):
        compare(CHAIN + tt.Operator("X_0", qubits=4), START, 1.0, ["strang"], parts, [120])


def test_the_table_fits_eighty_columns_and_tells_all(compared):
    text = compared.table()
    assert repr(compared) == text
    assert max(map(len, text.splitlines())) <= 80
    assert "two-qubit gates" in text and "1,300".replace(",", "\u00a0") in text
    for name in NAMES:
        assert sum(line.startswith(name) for line in text.splitlines()) == 1
    best = compared.at_budget(1300)[0]
    line = next(line for line in text.splitlines() if line.startswith("suzuki-4"))
    figure = line.split()[-1]
    assert figure.endswith("*") and float(figure[:-1]) >= best.error[1]
    assert float(figure[:-1]) <= 1.1 * best.error[1]


def test_the_table_folds_many_budgets_and_long_names():
    assert "- one step" not in compare(CHAIN, START, 1.0, ["lie"], budgets=[60]).table()
    long = tt.Formula("a name that is much longer than a column can be", 2, tt.formula("strang").stages, "test")
    found = compare(CHAIN, START, 1.0, ["suzuki-4", long], budgets=[60 * k for k in range(1, 15)])
    text = found.table()
    assert max(map(len, text.splitlines())) <= 80
    assert text.count("a name that is much lon…") >= 2
    assert "- one step costs more than the budget." in text


@pytest.mark.parametrize("count", [2, 12])
def test_the_picture_is_whole_and_repeatable(compared, tmp_path, count):
    found = compared
    if count > 8:  # more formulas than colours
        twins = [tt.Formula(f"twin {number}", 2, tt.formula("strang").stages, "test") for number in range(count)]
        found = compare(CHAIN, START, TIME, ["lie", *twins, "suzuki-4"], "axis", BUDGETS, WATCHED)
    path = found.plot(tmp_path / "found.svg")
    text = path.read_text(encoding="utf-8")
    root = xml.etree.ElementTree.fromstring(text)
    assert root.tag.endswith("svg") and "two-qubit gates" in text and "var(--" not in text
    for name in {point.formula for point in found.front}:
        assert f">{name}<" in text
    assert found.plot(str(tmp_path / "again.svg")).read_text(encoding="utf-8") == text
    assert found.plot(tmp_path / "found.png").read_bytes().startswith(b"\x89PNG")
    with pytest.raises(errors.ArgumentError, match=r"path: no ending of a picture \('found.txt'\); use .svg"):
        found.plot(tmp_path / "found.txt")


def test_an_error_of_zero_can_be_tabled_and_drawn(compared, tmp_path):
    points = (Point("a", 1, 10, (0.0, 0.0), (10,), True, True), Point("b", 1, 10, (0.0, 1e-9), (10,)))
    found = Comparison(
        points, ("a", "b"), (10,), "rotations", "axis", 1.0, "state", {"a": 1, "b": 1}, {}, compared.reference
    )
    assert "≤0*" in found.table() and "≤1.0e-9" in found.table()
    assert found.plot(tmp_path / "zero.svg").exists()


def refused(**changes):
    arguments = {"operator": CHAIN, "state": START, "time": 1.0, "formulas": ["strang", "suzuki-4"]} | changes
    return compare(**arguments)


@pytest.mark.parametrize(
    ("changes", "kind", "message"),
    [
        ({"budgets": [3, 900]}, errors.ArgumentError, r"too small for one step of any formula \(3 two-qubit.* strang"),
        ({"budgets": [40]}, errors.ArgumentError, "largest is too small for one step of suzuki-4 .*or leave suzuki-4"),
        ({"budgets": []}, errors.ArgumentError, r"budgets: not whole numbers \(\[\]\)"),
        ({"budgets": [100.5]}, errors.ArgumentError, "budgets: not whole numbers"),
        ({"budgets": [True]}, errors.ArgumentError, "budgets: not whole numbers"),
        ({"budgets": 100}, errors.ArgumentError, r"budgets: not whole numbers \(100\)"),
        ({"budgets": [-5]}, errors.ArgumentError, "budgets: too small"),
        ({"time": 0.0}, errors.ArgumentError, r"time: not a positive finite number \(0.0\)"),
        ({"time": [1.0, 2.0]}, errors.ArgumentError, "time: not a positive finite number"),
        ({"time": math.inf}, errors.ArgumentError, "time: not a positive finite number"),
        ({"formulas": []}, errors.AuditError, r"formulas: none to compare \(\[\]\)"),
        ({"formulas": ["lie", "lie"]}, errors.AuditError, r"formulas: two of one name \('lie'\)"),
        ({"formulas": ["none"]}, errors.FormulaError, "name: is no known formula"),
        ({"formulas": [3]}, errors.ArgumentError, "formula: neither a name nor a Formula"),
        ({"rule": "none"}, errors.PartitionError, "rule"),
        ({"quantity": "operator"}, errors.ArgumentError, r"quantity: unknown \('operator'\)"),
        ({"quantity": "observables"}, errors.AuditError, "observables: empty"),
        ({"observables": {"m": tt.Operator("Z_0")}}, errors.StateShapeError, r"observables\['m'\]"),
        ({"cost": "depth"}, errors.ArgumentError, r"cost: unknown \('depth'\); give one of 'two_qubit_gates', 'rotat"),
        ({"operator": tt.Operator("Z_0", qubits=4)}, errors.ArgumentError, "rule: makes one part"),
        ({"operator": tt.Operator("Z_0 + X_0", qubits=4)}, errors.ArgumentError, "two-qubit gates do not grow with"),
        ({"operator": tt.Operator("Z_0 + X_0")}, errors.StateShapeError, "operator: acts on 1 qubits"),
        ({"reference_tolerance": 1e-17}, errors.ToleranceError, "tolerance"),
    ],
)
def test_bad_input_is_refused_with_what_to_do(changes, kind, message):
    with pytest.raises(kind, match=message):
        refused(**changes)


def test_the_least_budget_that_is_named_is_accepted():
    with pytest.raises(errors.ArgumentError, match="give one of") as caught:
        refused(budgets=[40])
    least = int(str(caught.value).split("give one of ")[1].split()[0])
    found = refused(budgets=[40, least])
    assert found.least["suzuki-4"] == least
    assert [point.steps for point in found.points if point.formula == "suzuki-4"] == [1]
    with pytest.raises(errors.ArgumentError, match=rf"\({least - 1} two-qubit gates\)"):
        refused(budgets=[40, least - 1])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda found: found.at_budget(7), r"budget: was not compared \(7\); give one of 120, 400, 401, 1300"),
        (lambda found: found.at_accuracy(0), r"accuracy: not a positive number \(0\)"),
        (lambda found: found.at_accuracy("x"), r"accuracy: not a positive number \('x'\)"),
    ],
)
def test_questions_that_have_no_answer_are_refused(compared, call, message):
    with pytest.raises(errors.ArgumentError, match=message):
        call(compared)


def test_progress_is_told():
    told = []
    compare(
        CHAIN, START, 1.0, ["strang"], budgets=[60, 120], progress=lambda stage, done, total: told.append((done, total))
    )
    assert told[-1] == (2, 2) and (0, 2) in told
