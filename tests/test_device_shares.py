"""The shares of a budget: against exact fractions, density matrices, drawn shots and published T counts."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
import strategies
import trueturn as tt
from trueturn.device.least import least_at
from trueturn.device.shares import (
    fitting_shots,
    gate_share,
    largest_gate_error,
    shot_scale,
    synthesised,
    t_gates,
)
from trueturn.rotations import Rotations

CNOT = {  # control, target -> matrix on two qubits, qubit 0 the least significant bit
    (0, 1): np.eye(4)[[0, 3, 2, 1]],
    (1, 0): np.eye(4)[[0, 1, 3, 2]],
}


@given(st.integers(0, 2000), st.fractions(0, 1).filter(lambda p: p < 1))
def test_the_gate_share_is_the_probability_of_a_failure(gates, error):
    exact = 1 - (1 - Fraction(float(error))) ** gates
    # log1p and expm1 are good to a few roundings; the product with the number of gates magnifies none of them but one.
    assert gate_share(gates, float(error)) == pytest.approx(float(exact), rel=1e-13, abs=1e-300)


@given(st.integers(1, 10**6), st.floats(1e-12, 0.999))
def test_the_largest_error_gives_the_share_back(gates, share):
    assert gate_share(gates, largest_gate_error(gates, share)) == pytest.approx(share, rel=1e-9)


@st.composite
def failures(draw):
    """Channels of two qubits: white noise, a unitary, or a reset."""
    kind = draw(st.sampled_from(["white", "unitary", "reset"]))
    if kind == "white":
        return lambda density: np.eye(4) / 4 * np.trace(density)
    generator = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    matrix = np.linalg.qr(generator.normal(size=(4, 4)) + 1j * generator.normal(size=(4, 4)))[0]
    if kind == "unitary":
        return lambda density: matrix @ density @ matrix.conj().T
    pure = np.outer(matrix[0], matrix[0].conj())
    return lambda density: pure * np.trace(density)


@settings(max_examples=40)
@given(
    strategies.operators(qubits=2, max_terms=4, min_terms=1).filter(lambda o: o.support()),
    strategies.states(2),
    failures(),
    st.floats(0.0, 0.5),
    st.integers(1, 6),
    st.integers(0, 2**32 - 1),
)
def test_no_failure_moves_an_expectation_by_more_than_the_share(observable, start, failure, error, gates, seed):
    generator = np.random.default_rng(seed)
    ideal = noisy = np.outer(start, start.conj())
    for _ in range(gates):
        one = oracle.evolution(tt.Operator("X_0 + Z_1 + 0.7 Y_0"), generator.uniform(-1, 1))
        gate = CNOT[(0, 1) if generator.random() < 0.5 else (1, 0)] @ one
        ideal = gate @ ideal @ gate.T.conj()
        noisy = gate @ noisy @ gate.T.conj()
        noisy = (1 - error) * noisy + error * failure(noisy)
    matrix = oracle.dense(observable)
    low, high = np.linalg.eigvalsh(matrix)[[0, -1]]
    moved = abs(np.trace(matrix @ (noisy - ideal)).real)
    assert moved <= (high - low) * gate_share(gates, error) + 1e-12 * (1 + observable.one_norm())


def test_the_share_is_reached_when_every_failure_is_the_worst():
    # |0> measured in Z, and a failure that flips: 1 - (1-p)^1 of the width 2.
    density = np.diag([1.0, 0.0])
    noisy = 0.9 * density + 0.1 * np.diag([0.0, 1.0])
    assert abs(np.trace(np.diag([1.0, -1.0]) @ (noisy - density))) == pytest.approx(2 * gate_share(1, 0.1), rel=1e-15)


def test_shots_miss_by_more_than_the_share_no_more_often_than_they_may():
    shots, confidence = 400, 0.95
    limit = shot_scale(1.0, None, confidence) / math.sqrt(shots)
    assert limit == pytest.approx(math.sqrt(2 * math.log(40) / 400), rel=1e-12)  # Hoeffding (1963), theorem 2
    generator = np.random.default_rng(3)
    for mean in (0.0, 0.3, 0.95):
        ups = generator.binomial(shots, (1 + mean) / 2, size=20_000)
        misses = np.mean(np.abs(2 * ups / shots - 1 - mean) > limit)
        assert misses <= 0.05
    # The normal law at full variance is the smaller estimate: 1.96 against 2.72 deviations.
    assert shot_scale(1.0, 1.0, confidence) == pytest.approx(1.959964, abs=1e-6)


@given(st.floats(1e-3, 10.0), st.floats(1e-4, 1.0))
def test_fitting_shots_are_the_fewest(scale, slack):
    shots = fitting_shots(scale, slack)
    assert shots is not None and scale / math.sqrt(shots) <= slack * (1 + 1e-9)
    assert shots == 1 or scale / math.sqrt(shots - 1) > slack * (1 - 1e-9)
    assert fitting_shots(scale, 0.0) is None and fitting_shots(scale, -1.0) is None


@pytest.mark.parametrize(("error", "published"), [(1e-3, 29.897), (1e-5, 49.829), (1e-10, 99.658), (1e-15, 149.487)])
def test_t_counts_are_the_published_leading_term(error, published):
    # 3 log2(1/ε): N. J. Ross, P. Selinger, Quantum Inf. Comput. 16, 901 (2016), abstract; figures computed from it.
    assert t_gates(1, 0, error) == math.ceil(published)
    # R rotations share the error: each is made to ε/R.
    assert t_gates(100, 7, 100 * error) == 7 + 100 * math.ceil(published)


@pytest.mark.parametrize("scale", [1, -1, 5, 1000])
def test_clifford_angles_cost_nothing_and_odd_eighths_one(scale):
    eighth = scale * math.pi / 8
    assert synthesised(Rotations([1], [0], [2 * eighth], 1)) == (0, 0)
    assert synthesised(Rotations([1], [0], [eighth], 1)) == ((0, 1) if scale % 2 else (0, 0))
    assert synthesised(Rotations([1], [0], [eighth * 1.0001], 1).times(12)) == (12, 0)
    assert synthesised(Rotations([1], [0], [1e-300], 1)) == (1, 0)


@given(
    st.floats(1e-3, 1e4),
    st.integers(1, 6),
    st.floats(1e-6, 1e-1),
    st.integers(1, 60),
    st.sampled_from([0.5, 2.0, 1e9]),
)
def test_the_least_total_is_the_one_that_brute_force_finds(prefactor, order, error, gates, cap):
    def noise(steps):
        return 2.0 * gate_share(gates * steps, error)

    def total(steps):
        return min(cap, prefactor * steps**-order) + noise(steps)

    most = 3000
    found = least_at(total, noise, most)
    best = min(range(1, most + 1), key=total)
    assert total(found) == total(best)
