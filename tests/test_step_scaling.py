"""Step counts over sizes: the audit's own least counts, known exponents, proven counts beside extrapolations."""

from __future__ import annotations

import math
import xml.etree.ElementTree

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
import trueturn as tt
from trueturn.audit.measure import judge
from trueturn.audit.result import Trial
from trueturn.audit.search import least_steps
from trueturn.errors import ArgumentError, AuditError

CHAIN = tt.Operator("Z_0 Z_1 + X_0")


def chain_case(size):
    n = int(size)
    chain = tt.model.heisenberg(tt.lattice.chain(n), 0.8, z=0.3)
    observables = {"m": tt.Operator("Z_1", qubits=n), "bond": tt.Operator("X_0 X_1", qubits=n)}
    return tt.Case(chain, 0.8, 1e-3, tt.State.product("01+-01+-"[:n]) if n < 9 else None, observables)


def turning_case(time=1.0, tolerance=1e-4):
    """One qubit, X + Z: no size to it, so that time and tolerance alone vary."""
    return tt.Case(tt.Operator("X_0 + Z_0"), time, tolerance, tt.State.product([(0.4, 1.1)]))


def test_counts_are_the_least_ones_of_an_audit():
    found = tt.step_scaling(chain_case, [6, 3, 5, 4], ["lie", "strang"], "axis")
    assert found.sizes == (3, 4, 5, 6)
    for size in found.sizes:
        case = chain_case(size)
        candidates = [tt.Candidate(name, "axis") for name in ("lie", "strang")]
        rows = tt.audit(case.operator, case.state, 0.8, candidates, 1e-3, observables=case.observables).rows
        for row in rows:
            (point,) = [one for one in found.of(row.candidate.formula.name) if one.size == size]
            assert (point.steps, point.error, point.two_qubit_gates) == (row.steps, row.error, row.two_qubit_gates)
    assert found.counts["lie"] == tuple(point.steps for point in found.of("lie"))


@pytest.mark.parametrize(("name", "order"), [("lie", 1), ("strang", 2), ("suzuki-4", 4)])
def test_counts_fall_with_the_tolerance_by_the_order(name, order):
    # error ~ r^-p, hence r ~ ε^(-1/p). Counts of 40 and more are rounded by 2.5 % at most, over ln(1e4) or more.
    sizes = [1e-3, 1e-4, 1e-5, 1e-6] if order == 1 else [1e-6, 1e-7, 1e-8, 1e-9]
    found = tt.step_scaling(lambda e: turning_case(tolerance=e), sizes, [name], "single", variable="tolerance")
    law = found.laws[name]
    assert law.exponent == pytest.approx(-1.0 / order, abs=0.02)
    assert "tolerance^-" in repr(law)


def test_counts_for_a_tolerance_grow_with_time_as_they_must():
    # The error of r steps to time t in a fixed number of turns ~ t (t/r)^2 for Strang, hence r ~ t^(3/2) for times at
    # which the errors of single turns add up; here times are whole turns, 2π/(2√2) apart, where the angle alone is off.
    turn = math.pi / math.sqrt(2.0)
    found = tt.step_scaling(lambda t: turning_case(time=t), [turn * k for k in (1, 2, 4, 8)], ["strang"], "single")
    assert found.laws["strang"].exponent == pytest.approx(1.5, abs=0.02)


def test_operator_errors_of_one_turning_qubit_are_those_of_2x2_matrices():
    def case(tolerance):
        return tt.Case(tt.Operator("X_0 + Z_0"), 1.0, tolerance)

    found = tt.step_scaling(case, [1e-2, 1e-3, 1e-4, 1e-5], ["strang"], "single", "operator", variable="tolerance")
    exact = oracle.evolution(tt.Operator("X_0 + Z_0"), 1.0)
    for point in found.points:
        for steps, meets in ((point.steps, True), (point.steps - 1, False)):
            tau = 1.0 / steps
            half = oracle.rotation(1, 0, tau / 2, 1)
            whole = np.linalg.matrix_power(half @ oracle.rotation(0, 1, tau, 1) @ half, steps)
            assert bool(np.linalg.norm(whole - exact, 2) <= point.size) is meets
    assert all(entry.proven >= found.points[0].steps for entry in found.extrapolate(1e-5))


def test_proven_counts_stand_beside_and_are_never_too_few():
    found = tt.step_scaling(chain_case, [3, 4, 5, 6, 7], ["lie", "strang"], "axis")
    for entry in found.extrapolate(7):
        assert not entry.forecast.extrapolated
        assert entry.proven is not None and entry.proven >= found.of(entry.formula)[-1].steps
    far = {entry.formula: entry for entry in found.extrapolate(16)}  # no state is given there
    assert all(entry.forecast.extrapolated and entry.forecast.reach == 16 / 7 for entry in far.values())
    assert far["lie"].proven is not None and far["strang"].proven is not None
    assert far["strang"].steps == math.ceil(found.laws["strang"](16))
    text = " ".join(found.table(16).split())
    assert "not proven" in text and "extrapolated 2.29 times" in text and "merged nested commutators" in text


def test_the_proven_count_is_the_least_that_the_bound_allows():
    found = tt.step_scaling(chain_case, [3, 4, 5], ["strang"], "axis")
    (entry,) = found.extrapolate(12)
    case = chain_case(12)
    parts = tt.Partition.of(case.operator, "axis")
    # Both observables are single strings: |⟨O⟩_S - ⟨O⟩| ≤ 2 ‖S - U‖, up to the padding of their norms.
    allowed = 1e-3 / 2.0
    assert tt.bound(tt.formula("strang"), parts, 0.8, entry.proven, method="tightest").value <= allowed * (1 + 1e-12)
    assert tt.bound(tt.formula("strang"), parts, 0.8, entry.proven - 1, method="tightest").value > allowed * (1 - 1e-12)


@given(st.integers(1, 4), st.floats(0.5, 1e5), st.integers(1, 5000), st.floats(0.0, 0.9), st.integers(0, 7))
def test_a_guess_never_changes_the_least_count(order, scale, first, wobble, phase):
    def error(steps):
        # A power law with a wobble that can make small counts pass by accident.
        return scale * steps**-order * (1.0 + wobble * math.cos(phase * steps))

    def run(steps):
        value = error(steps)
        return Trial(steps, (value, value), judge((value, value), 1.0), steps)

    found = least_steps(run, 1.0, order, most_steps=10**6, first=first)
    assert found.found
    tried = {trial.steps: trial.verdict for trial in found.trials}
    assert tried[found.steps] == "meets"
    assert all(verdict == "meets" for steps, verdict in tried.items() if found.steps <= steps <= 2 * found.steps)
    if wobble == 0.0:
        assert found.steps == next(r for r in range(found.steps - 1 or 1, found.steps + 1) if error(r) <= 1.0)
    if found.steps > 1:
        assert tried[found.steps - 1] == "misses" or found.steps - 1 in found.accidental


def test_a_good_guess_saves_runs():
    def run(steps):
        return Trial(steps, (3e8 / steps**2,) * 2, judge((3e8 / steps**2,) * 2, 1.0), steps)

    cold, warm = (least_steps(run, 1.0, 2, first=first) for first in (1, 16_800))
    high = least_steps(run, 1.0, 2, first=30_000)
    assert cold.steps == warm.steps == high.steps == 17_321
    assert len(warm.trials) < len(cold.trials) and len(high.trials) < len(cold.trials)


def test_the_picture_is_drawn_and_the_same_twice(tmp_path):
    found = tt.step_scaling(chain_case, [3, 4, 5], ["lie", "strang"], "axis")
    one, two = found.plot(tmp_path / "one.svg", 12), found.plot(tmp_path / "two.svg", 12)
    assert one.read_bytes() == two.read_bytes()
    text = "".join(xml.etree.ElementTree.parse(one).getroot().itertext())
    assert "strang" in text and "not proven" in text
    with pytest.raises(ArgumentError, match="no ending of a picture"):
        found.plot(tmp_path / "three.gif")


def test_progress_is_told():
    told = []
    tt.step_scaling(chain_case, [3, 4, 5], ["strang"], progress=lambda stage, done, total: told.append((done, total)))
    assert told[0] == (0, 3) and told[-1] == (3, 3)


@pytest.mark.parametrize(
    ("arguments", "options", "error", "message"),
    [
        ((chain_case, [3, 4], ["lie"]), {}, ArgumentError, r"sizes: too few for a fit.*give at least 3"),
        ((chain_case, [3, 3, 4], ["lie"]), {}, ArgumentError, r"sizes: too few"),
        ((chain_case, [0, 3, 4], ["lie"]), {}, ArgumentError, r"sizes: .*not numbers above zero"),
        ((chain_case, ["a", 3, 4], ["lie"]), {}, ArgumentError, r"sizes: .*not numbers above zero"),
        ((chain_case, 5, ["lie"]), {}, ArgumentError, r"sizes: "),
        ((chain_case, [3, 4, 5], []), {}, ArgumentError, r"formulas: none"),
        ((3, [3, 4, 5], ["lie"]), {}, ArgumentError, r"case: is no function of the size \(3\)"),
        ((chain_case, [3, 4, 5], 7), {}, ArgumentError, r"formulas: is no list of formulas \(7\)"),
        ((chain_case, [3, 4, 5], ["lie", "lie"]), {}, ArgumentError, r"formulas: two of one name"),
        ((lambda n: None, [3, 4, 5], ["lie"]), {}, ArgumentError, r"case: gives no Case at 3 \(NoneType\)"),
        ((chain_case, [9, 10, 11], ["lie"]), {}, AuditError, r"case: has no state to measure with \(at 9\)"),
        ((chain_case, [3, 4, 5], ["lie"]), {"quantity": "states"}, ArgumentError, r"quantity: unknown \('states'\)"),
        (
            (lambda n: tt.Case(CHAIN, 1.0, 0.1, tt.State.product("00")), [3, 4, 5], ["lie"]),
            {"quantity": "observables"},
            AuditError,
            r"case: has no observables to measure with \(at 3\)",
        ),
        ((chain_case, [3, 4, 5], ["lie"]), {"most_steps": 3}, AuditError, r"most_steps: too few for lie.* at 3 \(3,"),
    ],
)
def test_what_cannot_be_measured_is_refused(arguments, options, error, message):
    with pytest.raises(error, match=message):
        tt.step_scaling(*arguments, **options)


@pytest.mark.parametrize(
    ("arguments", "error", "message"),
    [
        (("X_0", 1.0, 0.1), ArgumentError, r"operator: is not an Operator \('X_0'\)"),
        ((CHAIN, 0.0, 0.1), ArgumentError, r"time: is not above zero \(0.0\)"),
        ((CHAIN, "1", 0.1), ArgumentError, r"time: is not a finite number \('1'\)"),
        ((CHAIN, 1.0, -0.1), ArgumentError, r"tolerance: is not above zero \(-0.1\)"),
        ((CHAIN, 1.0, 10**400), ArgumentError, r"tolerance: is not a finite number"),
        ((CHAIN, 1.0, 0.1, tt.State.product("000")), tt.errors.StateShapeError, r"operator: acts on 2 qubits"),
        ((CHAIN, 1.0, 0.1, "00"), ArgumentError, r"state: "),
        ((CHAIN, 1.0, 0.1, None, CHAIN), ArgumentError, r"observables: is no mapping"),
        ((CHAIN, 1.0, 0.1, None, {"m": tt.Operator("Z_2")}), ArgumentError, r"observables\['m'\]: is not on the 2 qub"),
    ],
)
def test_a_case_is_looked_at_when_it_is_made(arguments, error, message):
    with pytest.raises(error, match=message):
        tt.Case(*arguments)


def test_an_unknown_formula_is_refused_by_name():
    found = tt.step_scaling(chain_case, [3, 4, 5], ["strang"])
    with pytest.raises(ArgumentError, match=r"formula: was not measured \('lie'\)"):
        found.of("lie")
