"""Extrapolation: exact weights, orders that are reached, what noise and shots cost, refusals."""

from __future__ import annotations

import itertools
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import circuits
import oracle
import trueturn as tt
from trueturn import errors
from trueturn.extrapolation import extrapolate, multiproduct_weights, well_conditioned_steps

UNIT = 2.0**-53
CHAIN = tt.model.ising(tt.lattice.chain(5), zz=-1.0, x=-0.7, z=0.2) + 0.3
START = tt.State.product("0+1-0")
WATCHED = {"m": tt.Operator("Z_2 + 0.5", qubits=5), "bond": tt.Operator("X_1 X_2 + 0.5 Z_4", qubits=5)}


def norm(weights):
    return sum(abs(weight) for weight in weights)


def published_case(published):
    (case,) = [check for check in published("bounds.toml")["check"] if check["id"] == "multiproduct_weights"]
    return case


def test_weights_and_norms_are_the_published_fractions(published):
    """S. A. Chin, Celest. Mech. Dyn. Astron. 106, 391 (2010), formula from memory; fractions computed."""
    case = published_case(published)
    for steps, weights, norm1 in zip(case["k"], case["a"], case["norm1"], strict=True):
        found = multiproduct_weights(steps)
        assert found == tuple(map(Fraction, weights))
        assert norm(found) == Fraction(norm1)


@pytest.mark.parametrize(("time", "key"), [(0.5, "error_t05"), (0.25, "error_t025")])
def test_combined_unitaries_have_the_published_errors_on_p3(published, time, key):
    """G. H. Low, V. Kliuchnikov, N. Wiebe, arXiv 1907.11679 (2019), method from memory; errors computed."""
    case = published_case(published)
    exact = oracle.evolution(circuits.P3.operator(), time)
    for steps, error in zip(case["k"], case[key], strict=True):
        total = sum(
            float(weight) * circuits.matrix(tt.formula("strang").rotations(circuits.P3, time, k))
            for k, weight in zip(steps, multiproduct_weights(steps), strict=True)
        )
        # 5e-15 rounding of one dense product, times the largest 1-norm, 13, is 7e-14 at worst; the file says 2e-14.
        assert abs(circuits.distance(total, exact) - error) <= case["tol"] * error + case["abs_tol"]


@given(
    steps=st.lists(st.integers(1, 60), min_size=1, max_size=7, unique=True),
    half=st.integers(1, 5),
    scale=st.integers(1, 9),
)
def test_weights_annul_the_even_powers_and_depend_on_ratios_only(steps, half, scale):
    order = 2 * half
    weights = multiproduct_weights(steps, order)
    assert sum(weights) == 1
    for term in range(len(steps) - 1):
        assert sum(a / Fraction(k) ** (order + 2 * term) for a, k in zip(weights, steps, strict=True)) == 0
    # The next power is not annulled: the order is not higher than stated.
    beyond = order + 2 * (len(steps) - 1)
    assert sum(a / Fraction(k) ** beyond for a, k in zip(weights, steps, strict=True)) != 0
    assert multiproduct_weights([scale * k for k in steps], order) == weights


@pytest.mark.parametrize("order", [2, 4, 6])
@pytest.mark.parametrize(("count", "cost"), [(1, 5), (2, 9), (3, 14), (4, 21)])
def test_well_conditioned_steps_are_the_best_of_all(count, cost, order):
    found = well_conditioned_steps(count, cost, order)
    every = [
        steps
        for steps in itertools.combinations(range(1, cost + 1), count)
        if sum(steps) <= cost  # ascending and distinct
    ]
    best = min(every, key=lambda steps: (norm(multiproduct_weights(steps, order)), sum(steps), steps))
    assert found == best


@pytest.mark.parametrize(("count", "cost", "below"), [(3, 9, "4/3"), (4, 20, "8/5"), (5, 40, "17/10"), (6, 60, "2")])
def test_spread_steps_keep_the_norm_small(count, cost, below):
    """Counts 1 … m have norms 47/15, 1957/315 and 5141/405 for m = 3, 4, 5: they grow without bound, spread counts
    hardly do."""
    steps = well_conditioned_steps(count, cost)
    assert sum(steps) <= cost
    assert norm(multiproduct_weights(steps)) <= Fraction(below)
    assert norm(multiproduct_weights(steps)) < norm(multiproduct_weights(range(1, count + 1))) / 2


def exact_value(observable, time):
    vector = oracle.evolution(CHAIN, time) @ START.amplitudes
    return np.vdot(vector, oracle.dense(observable) @ vector).real


@pytest.mark.parametrize(
    ("formula", "base", "least"),
    [
        ("strang", (1, 2), 12),
        ("strang", (1, 2, 3), 8),
        ("strang", (1, 2, 3, 4), 4),
        ("suzuki-4", (1, 2), 10),
        ("suzuki-4", (1, 2, 3), 4),
    ],
)
def test_error_falls_at_the_order_of_the_combination(formula, base, least):
    multiples = [least, 2 * least]
    found = [extrapolate(CHAIN, START, 1.5, formula, "commuting", [m * k for k in base], WATCHED) for m in multiples]
    order = found[0].order
    assert order == tt.formula(formula).order + 2 * (len(base) - 1)
    for name, observable in WATCHED.items():
        exact = exact_value(observable, 1.5)
        coarse, fine = (abs(result.values[name][0] - exact) for result in found)
        assert fine > 1e-12  # or it would be rounding whose slope is fitted
        # Orders differ by 2, so half of 1 tells them apart with room for the next term.
        assert abs(np.log2(coarse / fine) - order) < 0.5, (name, np.log2(coarse / fine))


@pytest.mark.parametrize("rule", ["commuting", "single"])
def test_every_interval_holds_the_true_error(rule):
    times = [0.9, 0.4]
    found = extrapolate(CHAIN, START, times, "strang", rule, (2, 4, 12), WATCHED, tolerance=1e-2)
    for name, observable in WATCHED.items():
        for place, time in enumerate(times):
            error = abs(found.values[name][place] - exact_value(observable, time))
            low, high = found.measured_error[name][place]
            # Dense matrices of dimension 32 round at about 1e-14.
            assert low - 1e-13 <= error <= high + 1e-13
            assert high - low < 1e-9
            assert error <= found.error[name][place]
    largest = max(found.measured_error[name][:, 1].max() for name in WATCHED)
    assert (found.verdict == "meets") == (largest <= 1e-2)
    assert extrapolate(CHAIN, START, times, steps=(1, 2), observables=WATCHED, tolerance=1e-5).verdict == "misses"


def test_values_are_the_combination_of_the_circuits_within_their_rounding():
    found = extrapolate(CHAIN, START, 0.7, "suzuki-4", "commuting", (3, 1), WATCHED)
    partition = tt.Partition.of(CHAIN, "commuting")
    for name, observable in WATCHED.items():
        dense = oracle.dense(observable)
        values = []
        for k in (3, 1):
            vector = circuits.plain(tt.formula("suzuki-4"), partition, 0.7, k) @ START.amplitudes
            values.append(np.vdot(vector, dense @ vector).real)
        weights = [float(weight) for weight in found.weights]
        for place in range(2):
            # The dense oracle itself: some 50 products of dimension 32, each 1e-15.
            assert abs(found.base_values[name][place, 0] - values[place]) <= found.base_bounds[name][place, 0] + 1e-13
        assert abs(found.values[name][0] - np.dot(weights, values)) <= found.rounding[name][0] + 2e-13
        assert found.rounding[name][0] >= np.dot(np.abs(weights), found.base_bounds[name][:, 0])
        assert np.all(found.error[name] == found.truncation[name] + found.rounding[name])
        coarser = found.base_values[name][0, 0]  # without the smallest count one circuit is left
        assert found.truncation[name][0] == abs(found.values[name][0] - coarser)


def test_noise_is_carried_with_the_norm_and_the_bound_is_reached():
    found = extrapolate(CHAIN, START, 0.7, steps=(1, 2, 3), observables=WATCHED)
    weights = np.array([float(weight) for weight in found.weights])
    base = found.base_values["bond"][:, 0]
    generator = np.random.default_rng(11)
    level = 1e-3
    moved = np.array(
        [abs(weights @ (base + generator.uniform(-level, level, 3)) - found.values["bond"][0]) for _ in range(4000)]
    )
    limit = found.carried(level)
    assert limit == pytest.approx(47 / 15 * level, rel=4 * UNIT)
    assert moved.max() <= limit + 1e-14
    # All three within a fifth of their worst corner has a chance of 2 (1/10)³ a draw: missed by 4000 draws with e^-8.
    assert moved.max() >= 0.8 * limit
    corner = weights @ (base + level * np.sign(weights)) - found.values["bond"][0]
    assert corner == pytest.approx(limit, rel=1e-9)
    assert found.carried([0.0, 0.0, 1.0]) == pytest.approx(81 / 40, rel=4 * UNIT)


def test_shots_grow_with_the_square_of_the_norm():
    found = extrapolate(CHAIN, START, 0.7, steps=(2, 4, 12), observables=WATCHED)
    assert found.norm1 == Fraction(4, 3) and found.shot_factor == Fraction(16, 9)
    assert sum(found.shot_shares) == 1
    generator = np.random.default_rng(5)
    shots, deviation, runs = 9000, 0.7, 4000
    counts = [float(share * shots) for share in found.shot_shares]
    means = generator.normal(0.0, deviation / np.sqrt(counts), size=(runs, 3))
    spread = np.std(means @ [float(weight) for weight in found.weights])
    expected = found.standard_error(deviation, shots)
    # A standard deviation from N runs is known to 1/√(2N) = 1.1 %: five of these.
    assert spread == pytest.approx(expected, rel=0.056)
    assert expected == pytest.approx(deviation / np.sqrt(shots / float(found.shot_factor)), rel=1e-14)
    # No other split does better: the one in equal parts does worse.
    assert deviation * np.sqrt(sum(float(w) ** 2 / (shots / 3) for w in found.weights)) > expected


def test_shape_cost_and_words():
    found = extrapolate(CHAIN, START, [0.5, 0.25], steps=(4, 1), observables=WATCHED, tolerance=0.1)
    assert found.times == (0.5, 0.25) and found.base_values["m"].shape == (2, 2) and found.values["m"].shape == (2,)
    strang, partition = tt.formula("strang"), tt.Partition.of(CHAIN, "commuting")
    assert found.two_qubit_gates == tuple(strang.rotations(partition, 0.5, k).two_qubit_gates() for k in (4, 1))
    assert "estimated" in repr(found) and "measured" in repr(found) and "1-norm 1.13" in repr(found)
    assert max(map(len, repr(found).splitlines())) <= 100
    unjudged = extrapolate(CHAIN, START, 0.5, steps=(4, 1), observables=WATCHED)
    assert unjudged.reference is None and unjudged.measured_error is None and unjudged.verdict is None


def test_single_precision_widens_the_rounding_and_stays_true():
    single = tt.State.from_array(START.amplitudes.astype(np.complex64))
    found = extrapolate(CHAIN, single, 0.7, steps=(4, 8), observables=WATCHED, tolerance=1e-1)
    for name, observable in WATCHED.items():
        low, high = found.measured_error[name][0]
        vector = oracle.evolution(CHAIN, 0.7) @ single.amplitudes.astype(complex)
        error = abs(found.values[name][0] - np.vdot(vector, oracle.dense(observable) @ vector).real)
        assert low <= error + 1e-13 and error <= high
        assert found.rounding[name][0] > 1e-7


def test_a_symmetric_formula_with_a_modest_claim_is_refused():
    with pytest.raises(
        errors.FormulaError, match=r"order: is below the true one \(1 claimed, 2 measured\); give order=2"
    ):
        tt.Formula("modest", 1, tt.formula("strang").stages, "test")


def extrapolated(**changes):
    arguments = {"times": 0.5, "observables": WATCHED, "steps": (1, 2)} | changes
    return extrapolate(CHAIN, START, **arguments)


@pytest.mark.parametrize(
    ("changes", "kind", "message"),
    [
        ({"formula": "lie"}, errors.FormulaError, r"formula: is not symmetric \('lie'\).*odd powers.*'strang'"),
        ({"formula": "none"}, errors.FormulaError, "name: is no known formula"),
        ({"formula": 3}, errors.ArgumentError, "formula: neither a name nor a Formula"),
        ({"rule": "none"}, errors.PartitionError, "rule"),
        ({"steps": ()}, errors.ArgumentError, r"steps: no step counts \(\(\)\); give distinct ones"),
        ({"steps": 3}, errors.ArgumentError, r"steps: no step counts \(3\)"),
        ({"steps": (2,)}, errors.ArgumentError, r"steps: one count leaves nothing to compare with \(2\).*\(2, 4\)"),
        ({"steps": (1, 2, 1)}, errors.ArgumentError, r"steps: 1 is repeated \(1, 2, 1\)"),
        ({"steps": (1, 0)}, errors.ArgumentError, r"steps: not a positive whole number \(0\)"),
        ({"steps": (1, -2)}, errors.ArgumentError, r"steps: not a positive whole number \(-2\)"),
        ({"steps": (1, 1.5)}, errors.ArgumentError, r"steps: not a positive whole number \(1.5\)"),
        ({"steps": (True, 2)}, errors.ArgumentError, r"steps: not a positive whole number \(True\)"),
        ({"times": []}, errors.ArgumentError, "times: not positive and finite"),
        ({"times": -1.0}, errors.ArgumentError, "times: not positive and finite"),
        ({"times": "1"}, errors.ArgumentError, "times: not positive and finite"),
        ({"times": [1.0, float("nan")]}, errors.ArgumentError, "times: not positive and finite"),
        ({"observables": {}}, errors.AuditError, "observables: empty"),
        ({"observables": {"m": tt.Operator("Z_0")}}, errors.StateShapeError, r"observables\['m'\]: acts on 1 qubits"),
        ({"tolerance": 0.0}, errors.ToleranceError, r"tolerance: not a positive number \(0.0\)"),
        ({"tolerance": 1e-14}, errors.ToleranceError, "tolerance"),
    ],
)
def test_bad_input_is_refused_with_what_to_do(changes, kind, message):
    with pytest.raises(kind, match=message):
        extrapolated(**changes)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: multiproduct_weights([]), r"steps: no step counts"),
        (lambda: multiproduct_weights([3, 3]), r"steps: 3 is repeated"),
        (lambda: multiproduct_weights([1, 2], order=3), r"order: not a positive even number \(3\)"),
        (lambda: multiproduct_weights([1, 2], order=0), r"order: not a positive even number \(0\)"),
        (lambda: multiproduct_weights([1, 2], order="2"), r"order: not a positive even number"),
        (lambda: well_conditioned_steps(0, 5), r"count: not a positive whole number \(0\)"),
        (lambda: well_conditioned_steps(31, 1000), r"count: out of range \(31\); give at most 30"),
        (lambda: well_conditioned_steps(3, 5), r"cost: too small for 3 distinct step counts \(5\); give 6 or more"),
        (lambda: well_conditioned_steps(3, 0), r"cost: not a positive whole number \(0\)"),
        (lambda: well_conditioned_steps(5, 10**9), r"cost: more than 300000 sequences of 5 counts"),
        (lambda: well_conditioned_steps(3, 9, order=1), r"order: not a positive even number \(1\)"),
        (lambda: extrapolated().carried(-1.0), r"noise: out of range \(-1.0\)"),
        (lambda: extrapolated().carried([1.0]), r"noise: does not fit the circuits \(1 numbers for 2 step counts\)"),
        (lambda: extrapolated().carried("x"), r"noise: out of range"),
        (lambda: extrapolated().standard_error(float("inf"), 10), r"deviation: out of range"),
        (lambda: extrapolated().standard_error(1.0, 0), r"shots: out of range \(0\); give a finite number, 1 or more"),
    ],
)
def test_bad_numbers_are_refused_with_what_to_do(call, message):
    with pytest.raises(errors.ArgumentError, match=message):
        call()


def test_progress_is_told():
    told = []
    extrapolated(progress=lambda stage, done, total: told.append((stage, done, total)))
    assert told == [("strang, commuting: 1 steps", 0, 2), ("strang, commuting: 2 steps", 1, 2), ("done", 2, 2)]
