"""The effective Hamiltonian of a step: closed forms, logarithms of dense matrices, and the laws it predicts."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st

import circuits
import oracle
import strategies
import trueturn as tt
from trueturn import errors
from trueturn.accuracy.lie_series import logarithm_of_exponentials
from trueturn.formulas.processed import PROCESSED
from trueturn.leading_error import LeadingError

SPLIT = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
NAMES = ("lie", "strang", "omelyan-2", "ruth-3", "suzuki-4", "blanes-moan-4", "yoshida-6")


def exact(formula, partition, step):
    """i log(S(τ)) / τ from dense matrices; the principal branch is right while τ‖H‖ is below π."""
    return 1j * scipy.linalg.logm(circuits.plain(formula, partition, step, 1)) / step


def closed_form(step):
    """What exp(-iτZ) exp(-iτX) simulates: a turn about one axis, by the product of two unit quaternions.

    With c = cos τ, s = sin τ: (c - isZ)(c - isX) = c² - i(cs X + cs Z + s² Y), since ZX = iY. So u = cos φ = c² and
    the effective Hamiltonian is φ/(τ sin φ) (cs X + s² Y + cs Z). φ/sin φ is a function of u that is analytic off
    u <= -1, and c² <= -1 first at |τ| = |π/2 ± i arsinh 1| = 1.8 or, on the line τ = π/2 + iy, beyond it.
    """
    c, s = cmath.cos(step), cmath.sin(step)
    return cmath.acos(c * c) / (step * cmath.sqrt(1 - c**4)) * np.array([c * s, s * s, c * s])


@pytest.mark.parametrize("step", [0.05, 0.1, -0.1])
def test_x_then_z_simulates_the_turn_of_the_closed_form(step):
    found = tt.simulated_hamiltonian("lie", SPLIT, step, 10)
    values = [dict(parts(found))[dict(parts(tt.Operator(letter))).popitem()[0]] for letter in ("X_0", "Y_0", "Z_0")]
    # Cauchy's estimate on a circle inside of |τ| = π/2 bounds what cutting after τ^9 leaves; some rounding.
    radius = 1.5
    largest = max(np.abs(closed_form(radius * cmath.exp(0.01j * k))).max() for k in range(629))
    slack = 1.01 * largest * (abs(step) / radius) ** 10 / (1 - abs(step) / radius) + 1e-14
    assert slack < 3e-11
    assert np.abs(np.array(values) - closed_form(step)).max() < slack


def parts(operator):
    return [((x, z), c) for x, z, c in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True)]


def test_x_and_z_have_the_known_first_terms():
    # Baker, Campbell and Hausdorff for one step of Lie, X first: H + τ i[X, Z]/2 - τ² ([X,[X,Z]] + [Z,[Z,X]])/12,
    # with i[X, Z] = 2Y, [X,[X,Z]] = 4Z and [Z,[Z,X]] = 4X.
    series = tt.simulated_series("lie", SPLIT, 3)
    assert series.terms[0] == tt.Operator("X_0 + Z_0")
    assert series.terms[1].near(tt.Operator("Y_0"), 1e-15)
    assert series.terms[2].near(tt.Operator("-0.3333333333333333 X_0 - 0.3333333333333333 Z_0"), 1e-15)


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("order", [3, 6, 8])
def test_what_is_cut_off_falls_with_the_power_after_the_last(name, order):
    formula = tt.formula(name)
    order = max(order, formula.order + 1)
    series = tt.simulated_series(formula, circuits.P3, order)
    after = tt.simulated_series(formula, circuits.P3, order + 2)
    rest = [after.terms[k] for k in (order, order + 1)]
    first = next(k for k, term in enumerate(rest) if len(term))  # even powers vanish for symmetric formulas
    for step in (0.1, 0.05):
        gap = np.linalg.norm(exact(formula, circuits.P3, step) - oracle.dense(series.at(step)), 2)
        # rounding of the logarithm is about 1e-15/τ; the next term is the gap up to terms smaller by τ
        expected = step ** (order + first) * np.linalg.norm(oracle.dense(rest[first]), 2)
        assert gap == pytest.approx(expected, rel=8 * step, abs=2e-13)


def majorant_tail(reach, degree):
    """What degrees above one can contribute to log(exp(x_1) exp(x_2) …) with Σ‖x_k‖ = reach.

    Word by word the product less 1 is below exp(reach) - 1 and -log(1 - ·) majorises the logarithm, so the norm of
    degree k is at most the coefficient of λ^k in -log(2 - exp(λ reach)) = Σ_k b_k λ^k; its nearest singularity is at
    λ reach = ln 2, and by Cauchy's estimate at λ reach = 0.6, b_k <= -log(2 - exp(0.6)) (reach/0.6)^k.
    """
    ratio = reach / 0.6
    return -math.log(2 - math.exp(0.6)) * ratio ** (degree + 1) / (1 - ratio)


@given(strategies.operators(max_qubits=4, max_terms=6, min_terms=2), st.integers(0, 2**32), st.sampled_from(NAMES))
@settings(max_examples=25)
def test_random_hamiltonians_agree_with_the_logarithm(operator, seed, name):
    bare = operator.without_identity()
    if len(bare) == 0:
        return
    partition = tt.Partition.of(bare * (1.0 / bare.one_norm()) + 0.25, "commuting").shuffled(seed)
    formula = tt.formula(name)
    step = 0.1 / sum(abs(stage.weight) for stage in formula.stages)
    gap = np.linalg.norm(
        exact(formula, partition, step) - oracle.dense(tt.simulated_series(name, partition, 9).at(step)), 2
    )
    # the logarithm of a matrix near 1 rounds like some hundred u, over τ
    assert gap < (majorant_tail(0.1, 9) + 2e-14) / step


@pytest.mark.parametrize("rule", ["axis", "bond", "single", "commuting"])
@pytest.mark.parametrize("name", ["lie", "strang", "suzuki-4"])
def test_five_qubits_agree_with_the_logarithm(rule, name):
    chain = tt.model.heisenberg(tt.lattice.ring(5), 1.0, z=[0.3, -0.6, 0.5, 0.1, -0.4])
    partition, formula = tt.Partition.of(chain, rule), tt.formula(name)
    series = tt.simulated_series(formula, partition, 7)
    step = 0.01
    five = sum(step**k * oracle.dense(series.terms[k]) for k in range(5))
    gap = np.linalg.norm(exact(formula, partition, step) - five, 2)
    next_two = np.linalg.norm(oracle.dense(series.at(step)) - five, 2)
    # what is cut after degree 5 is its next two terms, up to terms smaller by τ times a strength of 10 at a qubit;
    # rounding of the logarithm is 1e-14 over τ
    assert gap == pytest.approx(next_two, rel=0.5, abs=2e-12)
    # and the terms of degree p + 1 and on stand far above that
    assert np.linalg.norm(oracle.dense(series.terms[0]) - five, 2) > 100 * (gap + 2e-12)


@pytest.mark.parametrize("kind", ["lie", "strang"])
def test_the_leading_error_is_that_of_the_closed_sums(kind):
    # an independent derivation: sums of brackets with factors 1/2, and 1/12 and 1/24
    chain = tt.model.heisenberg(tt.lattice.ring(6), 1.0, z=[0.3, -0.2, 0.5, 0.1, -0.4, 0.2])
    for rule in ("axis", "bond", "single"):
        partition = tt.Partition.of(chain, rule)
        degree = {"lie": 2, "strang": 3}[kind]
        series = tt.simulated_series(kind, partition, degree)
        closed = LeadingError(partition.parts, kind).operator(range(len(partition.parts)))
        assert series.leading_degree == degree
        # some hundred roundings of numbers up to 10
        assert series.leading.near(closed, 1e-12)


def test_more_parts_join_to_the_same_series():
    texts = ["0.7 X_0", "0.3 Z_0 Z_1", "-0.4 Y_1", "0.2 X_0 X_1", "0.9 Z_1"]
    generators = [tt.Operator(text, qubits=2) for text in texts]
    series = logarithm_of_exponentials(generators, 7)
    step = 0.01
    product = np.eye(4)
    for generator in generators:
        product = oracle.evolution(generator, step) @ product
    total = sum(step**k * oracle.dense(term) for k, term in series.items())
    assert np.linalg.norm(1j * scipy.linalg.logm(product) - total, 2) < majorant_tail(2.5 * step, 7)
    missing = total - step**4 * oracle.dense(series[4])
    assert np.linalg.norm(1j * scipy.linalg.logm(product) - missing, 2) > 2 * majorant_tail(2.5 * step, 7)


def test_a_processed_formula_is_expanded_as_a_whole():
    processed = PROCESSED[0]
    series = tt.simulated_series(processed, circuits.P3, processed.order + 1)
    step = 0.05
    once = processed.rotations(circuits.P3, step, 1)
    gap = np.linalg.norm(1j * scipy.linalg.logm(circuits.matrix(once)) / step - oracle.dense(series.at(step)), 2)
    leading = step**processed.order * np.linalg.norm(oracle.dense(series.leading), 2)
    assert gap < 0.3 * leading  # the next power is smaller by about τ times weights of size 2


def test_sizes_are_those_of_the_matrices():
    series = tt.simulated_series("strang", circuits.P3, 5)
    for size, term in zip(series.sizes(0.1), series.terms, strict=True):
        matrix = 0.1 ** (size.degree - 1) * oracle.dense(term.without_identity())
        norm = np.linalg.norm(matrix, 2)
        # the dense spectral interval is padded by about 1e-9 of the size
        assert norm <= size.norm_bound * (1 + 1e-12) <= norm * (1 + 1e-6) + 1e-15
        assert size.root_mean_square == pytest.approx(np.linalg.norm(matrix) / math.sqrt(8), rel=1e-12, abs=1e-15)
        assert size.one_norm >= norm * (1 - 1e-12)
        assert size.strings == len(term)


def test_identity_terms_and_commuting_parts_have_no_error():
    partition = tt.Partition([tt.Operator("Z_0 + 2", qubits=2), tt.Operator("0.3 Z_1", qubits=2)])
    series = tt.simulated_series("lie", partition, 4)
    assert series.terms[0] == tt.Operator("Z_0 + 0.3 Z_1 + 2")
    assert series.leading_degree is None and all(len(term) == 0 for term in series.terms[1:])
    assert series.at(0.3) == series.terms[0]
    with pytest.raises(errors.AuditError, match=r"^order: no error of lie on these parts up to brackets of 4"):
        _ = series.leading


def test_a_ring_of_twelve_is_local():
    ring = tt.model.heisenberg(tt.lattice.ring(12), 1.0, z=list(np.linspace(-1, 1, 12)))
    series = tt.simulated_series("suzuki-4", tt.Partition.of(ring, "bond"), 5)
    widest = max((x | z).bit_count() for x, z in zip(series.leading.x_masks, series.leading.z_masks, strict=True))
    assert widest <= 6  # five bonds in a row
    assert len(series.terms[4]) > 1000 and len(series.terms[2]) == 0


LAWS = {
    "ising ring": (tt.model.ising(tt.lattice.ring(6), zz=-1.0, x=-0.7), "axis", "000000"),
    "heisenberg ring": (tt.model.heisenberg(tt.lattice.ring(5), 1.0, z=[0.3, -0.6, 0.5, 0.1, -0.4]), "bond", "01010"),
    "mixed problem P3": (circuits.P3.operator(), None, "0+1"),
}


@pytest.mark.parametrize("model", LAWS)
@pytest.mark.parametrize(("name", "steps"), [("lie", 4000), ("strang", 200), ("suzuki-4", 24), ("blanes-moan-4", 20)])
def test_predicted_slopes_and_prefactors_agree_with_measured_ones(model, name, steps):
    hamiltonian, rule, start = LAWS[model]
    partition = circuits.P3 if rule is None else tt.Partition.of(hamiltonian, rule)
    formula, state = tt.formula(name), tt.State.product(start)
    qubits = hamiltonian.qubits
    observables = {"z": tt.Operator("Z_0", qubits=qubits), "xx": tt.Operator("X_0 X_1 + Y_1", qubits=qubits)}
    time = 1.5
    laws = tt.simulated_series(formula, partition, formula.order + 1).predict(state, time, observables)
    measured = []
    for count in (steps, 2 * steps):
        curves = tt.error_curves(formula, partition, state, time, count, observables)
        measured.append({name: 0.5 * (curve.low[0] + curve.high[0]) for name, curve in curves.items()})
    for figure, law in laws.items():
        # An observable that hardly sees the leading error has no window: below a hundredth of the state's law.
        if figure != "state" and law.prefactor < 0.01 * laws["state"].prefactor:
            continue
        assert law.interval[0] <= law.prefactor <= law.interval[1] < law.prefactor * (1 + 1e-4)
        slope = math.log2(measured[0][figure] / measured[1][figure])
        assert slope == pytest.approx(formula.order, rel=0.05)
        assert measured[1][figure] == pytest.approx(law.at(2 * steps), rel=0.05)


def test_the_prefactor_is_the_derivative_of_dense_matrices():
    series = tt.simulated_series("strang", circuits.P3, 3)
    state = tt.State.product("0+1")
    law = series.predict(state, 1.3)["state"]
    h, e = oracle.dense(series.terms[0]), oracle.dense(series.leading)
    derivative = scipy.linalg.expm_frechet(-1.3j * h, -1.3j * e, compute_expm=False)
    exact_value = 1.3**2 * np.linalg.norm(derivative @ state.amplitudes)
    assert law.interval[0] <= exact_value <= law.interval[1]
    assert law.order == 2 and law.at(10) == law.prefactor / 100


BAD = {
    "order 0": (lambda: tt.simulated_series("lie", SPLIT, 0), errors.ArgumentError, r"^order: is not a whole .*\(0\)"),
    "order 13": (lambda: tt.simulated_series("lie", SPLIT, 13), errors.ArgumentError, r"^order: .* 1 to 12 \(13\)"),
    "order text": (lambda: tt.simulated_series("lie", SPLIT, "3"), errors.ArgumentError, r"^order: .*'3'"),
    "order True": (lambda: tt.simulated_series("lie", SPLIT, True), errors.ArgumentError, r"^order: .*True"),
    "unknown": (lambda: tt.simulated_series("stang", SPLIT, 3), errors.FormulaError, "strang"),
    "no formula": (lambda: tt.simulated_series(7, SPLIT, 3), errors.ArgumentError, r"^formula: neither .*\(7\)"),
    "no parts": (lambda: tt.simulated_series("lie", "X_0", 3), errors.ArgumentError, "^partition: is not a Partition"),
    "step": (
        lambda: tt.simulated_hamiltonian("lie", SPLIT, math.nan, 3),
        errors.ArgumentError,
        r"^step_time: is not a finite number \(nan\)",
    ),
    "huge step": (
        lambda: tt.simulated_hamiltonian("lie", SPLIT, 1e300, 3),
        errors.ArgumentError,
        r"^step_time: makes coefficients of τ\^2 too large for a float \(1e\+300\); give a shorter step",
    ),
    "time 0": (
        lambda: tt.simulated_series("lie", SPLIT, 2).predict(tt.State.product("0"), 0.0),
        errors.ArgumentError,
        "^time: is 0",
    ),
    "named state": (
        lambda: tt.simulated_series("lie", SPLIT, 2).predict(tt.State.product("0"), 1.0, {"state": tt.Operator("Z_0")}),
        errors.ArgumentError,
        "^observables: one is named 'state'",
    ),
    "wrong state": (
        lambda: tt.simulated_series("lie", SPLIT, 2).predict(tt.State.product("00"), 1.0),
        errors.StateShapeError,
        "^partition: acts on 1 qubits, the state on 2",
    ),
    "wrong observable": (
        lambda: tt.simulated_series("lie", SPLIT, 2).predict(tt.State.product("0"), 1.0, {"m": tt.Operator("Z_1")}),
        errors.StateShapeError,
        "^observables",
    ),
    "structure": (
        lambda: tt.simulated_series("laskar-robutel-2", circuits.P3, 3),
        errors.FormulaError,
        "requires",
    ),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_refused_by_name(case):
    call, kind, message = BAD[case]
    with pytest.raises(kind, match=message):
        call()
