"""Candidates that no formula made: circuits as given, and implementations of the user's own."""

from __future__ import annotations

import json

import numpy as np
import pytest
import scipy.linalg

import oracle
import trueturn as tt
from trueturn.audit.report import plain_table
from trueturn.audit.report.page import page

CHAIN = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7, z=0.2)
START = tt.State.product("0+1-")
WATCHED = {"m": tt.Operator("Z_2", qubits=4), "shifted": tt.Operator("X_1 + 3.0", qubits=4)}
MATRIX = oracle.dense(CHAIN)


def strang(time, steps):
    return tt.formula("strang").rotations(tt.Partition.of(CHAIN, "commuting"), time, steps)


def exactly(state, time, steps):
    return scipy.linalg.expm(-1j * time * MATRIX) @ state


def euler(state, time, steps):
    """Invented and wrong: explicit Euler steps, which are not unitary."""
    for _ in range(steps):
        state = state - 1j * time / steps * (MATRIX @ state)
    return state


def audited(candidate, times=1.0, tolerance=1e-3, **more):
    return tt.audit(CHAIN, START, times, [candidate], tolerance, observables=WATCHED, **more)


@pytest.mark.parametrize("quantity", ["observables", "state"])
def test_a_given_circuit_is_judged_as_the_formula_that_made_it(quantity):
    ours = tt.Candidate.from_rotations("from a file", strang(1.0, 9))
    made = tt.Candidate("strang", "commuting", 9)
    given, formula = tt.audit(CHAIN, START, 1.0, [ours, made], 1e-3, quantity, WATCHED).rows
    for point, other in zip(given.points, formula.points, strict=True):
        # The same circuit: only the bound on how its angles were formed differs, and a formula's interval is the wider.
        assert other.error[0] <= point.error[0] <= point.error[1] <= other.error[1]
    assert (given.rotations, given.two_qubit_gates, given.depth) == (
        formula.rotations,
        formula.two_qubit_gates,
        formula.depth,
    )
    assert given.label == "from a file" and given.bound is None


def test_circuits_for_several_times_each_start_anew():
    times = [0.4, 1.0]
    ours = tt.Candidate.from_rotations("mine", {time: strang(time, 8) for time in reversed(times)})
    (row,) = audited(ours, times).rows
    (same,) = audited(tt.Candidate("strang", "commuting", 8), times, readout="separate").rows
    assert [p.value for p in row.points] == [p.value for p in same.points]
    assert row.two_qubit_gates == same.two_qubit_gates


def test_one_circuit_for_several_times_is_refused_before_the_reference():
    with pytest.raises(tt.errors.AuditError, match=r"'mine' reaches one time \(0\.4, 1 asked\); ask for one"):
        audited(tt.Candidate.from_rotations("mine", strang(1.0, 2)), [0.4, 1.0])
    with pytest.raises(tt.errors.AuditError, match=r"'mine' has no circuit for time 0\.4 \(only for 1\); give one"):
        audited(tt.Candidate.from_rotations("mine", {1.0: strang(1.0, 2)}), [0.4, 1.0])
    with pytest.raises(tt.errors.AuditError, match=r"'mine' acts on 1 qubits, the Hamiltonian on 4"):
        audited(tt.Candidate.from_rotations("mine", tt.Rotations([1], [0], [0.1], qubits=1)))


@pytest.mark.parametrize("readout", ["along", "separate"])
@pytest.mark.parametrize("quantity", ["observables", "state"])
def test_an_exact_implementation_meets_and_its_interval_reaches_zero_error(quantity, readout):
    exact = tt.Candidate.from_callable("dense", exactly, steps=2)
    (row,) = tt.audit(CHAIN, START, [0.5, 1.0], [exact], 1e-9, quantity, WATCHED, readout).rows
    assert row.verdict == "meets"
    # scipy's exponential of a 16 x 16 matrix is good to some 1e-14; the reference is certified to 1e-11.
    assert row.error[0] < 1e-13 and row.error[1] < 1e-9
    assert row.rotations is row.two_qubit_gates is row.depth is None


def test_a_function_that_returns_a_unitary_is_the_one_that_returns_its_state():
    by_state = tt.Candidate.from_callable("state", exactly)
    by_matrix = tt.Candidate.from_callable("matrix", lambda _, t, n: scipy.linalg.expm(-1j * t * MATRIX))
    first, second = tt.audit(CHAIN, START, 1.0, [by_state, by_matrix], 1e-3, observables=WATCHED).rows
    assert [p.value for p in first.points] == pytest.approx([p.value for p in second.points], abs=1e-13)


def test_an_implementation_that_is_not_unitary_has_its_true_error_in_the_interval_and_a_note():
    (row,) = audited(tt.Candidate.from_callable("euler", euler, steps=50)).rows
    ours, truth = euler(START.amplitudes, 1.0, 50), exactly(START.amplitudes, 1.0, 1)
    for point in row.points:
        matrix = oracle.dense(WATCHED[point.name])
        error = abs(np.vdot(ours, matrix @ ours).real - np.vdot(truth, matrix @ truth).real)
        # Dense products of dimension 16 round at about 1e-14.
        assert point.error[0] - 1e-13 <= error <= point.error[1] + 1e-13
    assert row.verdict == "misses" and "not unitary: the norm is off by" in row.note


def test_the_least_steps_of_an_implementation_are_those_of_the_formula_it_implements():
    def mine(state, time, steps):
        held = tt.State.from_array(state)
        held.apply(strang(time, steps))
        return state

    ours = tt.Candidate.from_callable("mine", mine, steps="least")
    (row,) = audited(ours).rows
    (same,) = audited(tt.Candidate("strang", "commuting")).rows
    assert row.steps == same.steps and row.verdict == same.verdict == "meets"


def test_what_an_implementation_does_to_its_argument_does_not_reach_the_audit():
    def vandal(state, time, steps):
        state[:] = np.nan
        return scipy.linalg.expm(-1j * time * MATRIX)

    assert audited(tt.Candidate.from_callable("vandal", vandal)).verdict == "meets"


@pytest.mark.parametrize(
    ("returned", "message"),
    [
        (None, r"'mine' returned no array \(NoneType\) for time 1 in 3 steps; return 2\*\*n amplitudes"),
        (np.ones(8), r"returned an array of the wrong shape \(8,\)"),
        (np.array(["a"] * 16), "returned an array of <U1"),
        (np.full(16, np.nan), "returned amplitudes that are not finite"),
    ],
    ids=["none", "shape", "text", "nan"],
)
def test_what_is_no_state_is_refused_by_the_name_of_the_candidate(returned, message):
    with pytest.raises(tt.errors.AuditError, match=message):
        audited(tt.Candidate.from_callable("mine", lambda state, time, steps: returned, steps=3))


def test_an_error_of_the_users_own_passes_through():
    def broken(state, time, steps):
        raise ZeroDivisionError("mine")

    with pytest.raises(ZeroDivisionError, match="mine"):
        audited(tt.Candidate.from_callable("broken", broken))


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: tt.Candidate.from_callable("", exactly), r"name: no text \(''\); give a name"),
        (lambda: tt.Candidate.from_callable("a", 3), r"apply: cannot be called \(3\); give a function"),
        (
            lambda: tt.Candidate.from_callable("a", lambda state, time: state),
            r"apply: does not take \(state, time, steps\) \(\(state, time\): too many positional arguments\)",
        ),
        (lambda: tt.Candidate.from_callable("a", exactly, steps=0), r"steps: not a positive whole number \(0\)"),
        (lambda: tt.Candidate.from_callable("a", exactly, order=0), r"order: not a positive whole number \(0\)"),
        (lambda: tt.Candidate.from_rotations("a", "qasm"), r"circuit: no circuit \('qasm'\); give Rotations"),
        (lambda: tt.Candidate.from_rotations("a", {}), r"circuit: no circuit \(\{\}\)"),
        (lambda: tt.Candidate.from_rotations("a", {"1": strang(1.0, 1)}), r"circuit: no circuit at a time \('1'"),
        (lambda: tt.Candidate.from_rotations(None, strang(1.0, 1)), r"name: no text \(None\)"),
    ],
)
def test_bad_arguments_are_refused_by_name(call, message):
    with pytest.raises(tt.errors.ArgumentError, match=message):
        call()


def test_an_unknown_cost_is_shown_as_unknown_and_never_called_cheapest(tmp_path):
    mine = tt.Candidate.from_callable("mine, in C", exactly)
    given = tt.Candidate.from_rotations("lab", strang(1.0, 40))
    found = tt.audit(CHAIN, START, 1.0, [mine, given], 1e-3, observables=WATCHED)
    assert found.recommended is found.rows[1]
    alone = audited(mine)
    assert alone.recommended is alone.rows[0] and "its cost is not known" in alone.reason
    assert any("mine, in C computed is judged as it came back" in sentence for sentence in alone.assumptions)
    record, other = json.loads((found.write(tmp_path / "a") / "audit.json").read_text())["rows"]
    assert record["two_qubit_gates"] is None and record["formula"] == "mine, in C" and record["rule"] == ""
    assert other["steps_asked"] == "as given" and other["two_qubit_gates"] > 0
    line = next(line for line in plain_table(found).splitlines() if line.startswith("mine, in C"))
    assert line.count("–") >= 3
    assert "mine, in C" in page(alone)


def test_given_circuits_are_judged_for_every_start_too_and_functions_are_refused():
    parts = tt.Partition.of(CHAIN, "commuting")
    formula = tt.Candidate("strang", parts, steps=4)
    given = tt.Candidate.from_rotations(
        "as given", {time: formula.formula.rotations(parts, time, steps) for time, steps in ((0.5, 2), (1.0, 4))}
    )
    first, second = tt.audit(CHAIN, None, [0.5, 1.0], [formula, given], 0.1, "operator").rows
    # The same circuits but for rounding, which both intervals hold.
    assert first.error[0] <= second.error[1] and second.error[0] <= first.error[1]
    # Nothing merges across the readout of the formula's circuit; the given one is not read on the way.
    assert (
        second.bound is None and second.two_qubit_gates == given.circuit[1.0].two_qubit_gates() < first.two_qubit_gates
    )
    mine = tt.Candidate.from_callable("mine", lambda state, time, steps: state)
    with pytest.raises(tt.errors.AuditError, match="the operator error needs a circuit, and 'mine' is a function"):
        tt.audit(CHAIN, None, 1.0, [mine], 0.1, "operator")
