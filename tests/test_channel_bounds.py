"""Bounds on averaged channels: published values, and never below the exact distance of the enumerated channel."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import channels
import oracle
import trueturn as tt
from trueturn import randomised
from trueturn.randomised.split import order_free_error, split_error

# Entries of the superoperators round at some 1e-15; so do trace norms of 16 x 16 matrices, times the size.
FLOOR = 1e-13
ONE_QUBIT = tt.Operator("0.6 X_0 + 0.4 Z_0")
THREE_AXES = tt.Partition.of(tt.Operator("0.5 X_0 + 0.3 Y_0 + 0.2 Z_0"), "single")


def check(published, name):
    return next(entry for entry in published("bounds.toml")["check"] if entry["id"] == name)


def test_qdrift_on_one_qubit_has_the_published_distance_and_bound(published):
    """E. Campbell, Random compiler for fast Hamiltonian simulation, Phys. Rev. Lett. 123, 070503 (2019); bound from
    memory, distances computed in tests/published/bounds.toml. Tolerance: that of the file."""
    values = check(published, "qdrift_one_qubit")
    assert values["N"] == [10, 100, 1000]
    for draws, distance, limit in zip(values["N"], values["half_diamond"], values["bound"], strict=True):
        found = randomised.qdrift(ONE_QUBIT, 1.0, draws, seed=0).channel_bound()
        assert found.half_diamond == pytest.approx(limit, rel=1e-12)
        assert found.diamond == 2 * found.half_diamond
        difference = channels.drift(ONE_QUBIT, 1.0, draws) - channels.ideal(ONE_QUBIT, 1.0)
        assert channels.one_qubit_diamond(difference) / 2 == pytest.approx(distance, rel=values["tol"])


def test_qdrift_sample_counts_on_p3_are_the_published_ones(published):
    """The same paper; P3 as 7 Pauli terms with λ = 4.3. The simple count is ceil(2 λ² t² / ε)."""
    values = check(published, "qdrift_counts_p3")
    for (time, tolerance), simple, exact in zip(values["t_eps"], values["N_simple"], values["N_exact"], strict=True):
        assert randomised.least_qdrift_draws(4.3, time, tolerance) == exact
        assert np.ceil(2 * 4.3**2 * time**2 / tolerance) == simple
        assert randomised.qdrift_bound(4.3, time, exact).half_diamond <= tolerance
        assert randomised.qdrift_bound(4.3, time, exact - 1).half_diamond > tolerance


def test_random_direction_on_one_qubit_has_the_published_distances_and_bound(published):
    """A. M. Childs, A. Ostrander, Y. Su, Faster quantum simulation by randomization, Quantum 3, 182 (2019), theorem on
    the first-order formula, from memory; distances computed. In the diamond norm without the factor 1/2."""
    values = check(published, "random_direction_one_qubit")
    lie = tt.formula("lie")
    ideal = channels.ideal(THREE_AXES.operator(), 1.0)
    for steps, mixture, fixed, limit in zip(
        values["r"], values["mixture"], values["fixed"], values["bound"], strict=True
    ):
        found = randomised.directed("lie", THREE_AXES, 1.0, steps, seed=0).channel_bound()
        assert found.diamond == pytest.approx(limit, rel=1e-12)
        mixed = channels.directed(lie, THREE_AXES, 1.0, steps) - ideal
        assert channels.one_qubit_diamond(mixed) == pytest.approx(mixture, rel=values["tol"])
        once = np.linalg.matrix_power(channels.run(lie, THREE_AXES.parts, 1.0 / steps), steps) - ideal
        assert channels.one_qubit_diamond(once) == pytest.approx(fixed, rel=values["tol"])


def test_the_two_oracles_of_the_diamond_norm_agree_on_a_closed_form():
    """Two unitary qubit channels are 2 sin(δ) apart, δ half the angle between the eigenvalues of U†V (A. Kitaev, A.
    Shen, M. Vyalyi, Classical and Quantum Computation (2002), section 11; from memory); a channel that forgets
    everything is 2 (1 - 1/4) from the identity, reached on the maximally entangled state."""
    turn = channels.superoperator(oracle.rotation(1, 0, 0.3, 1)) - np.eye(4)
    forget = np.outer(np.eye(2).reshape(-1), np.eye(2).reshape(-1)) / 2 - np.eye(4)
    for difference, exact in ((turn, 2 * np.sin(0.3)), (forget, 1.5)):
        # The optimiser stops within 1e-9 of the largest value; the dual value is exact here but for rounding.
        assert channels.one_qubit_diamond(difference) == pytest.approx(exact, rel=1e-7)
        assert channels.diamond_from_above(difference) == pytest.approx(exact, rel=1e-12)


@st.composite
def problems(draw):
    """A random Hamiltonian on up to 3 qubits whose bounds are not trivial, and a step count."""
    generator = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    qubits = draw(st.integers(1, 3))
    operator = channels.random_hamiltonian(generator, qubits, min(draw(st.integers(2, 4)), 4**qubits - 1))
    strength = draw(st.floats(0.1, 1.2))
    return operator * (strength / operator.one_norm()) + draw(st.sampled_from([0.0, 0.7])), draw(st.integers(1, 6))


def assert_below(difference, limit, *, tight=False):
    """Never above: refuted by an input state, proven (except for tight bounds) by a dual solution.

    For one qubit the dual value is the norm itself in all cases here; for more it may exceed the norm.
    """
    assert channels.diamond_from_below(difference) <= limit.diamond + FLOOR
    if not tight or difference.shape[0] == 4:
        assert channels.diamond_from_above(difference) <= limit.diamond + FLOOR


@given(problem=problems(), formula=st.sampled_from(["lie", "strang"]))
def test_random_orders_stay_within_their_bounds(problem, formula):
    operator, steps = problem
    partition = tt.Partition.of(operator, "single")
    ideal = channels.ideal(operator, 1.0)
    for family, exact in (
        (randomised.directed, channels.directed),
        (randomised.permuted, channels.permuted),
    ):
        limit = family(formula, partition, 1.0, steps, seed=0).channel_bound()
        assert_below(exact(tt.formula(formula), partition, 1.0, steps) - ideal, limit)


@given(problem=problems(), seed=st.integers(0, 1000), importance=st.booleans())
def test_qdrift_stays_within_its_bound(problem, seed, importance):
    operator, draws = problem
    terms = len(operator.without_identity())
    chances = np.random.default_rng(seed).dirichlet(np.full(terms, 3.0)) if importance else None
    if chances is not None and chances.min() < 1e-3:
        return
    limit = randomised.qdrift(operator, 1.0, 4 * draws, seed=0, probabilities=chances).channel_bound()
    difference = channels.drift(operator, 1.0, 4 * draws, chances) - channels.ideal(operator, 1.0)
    assert_below(difference, limit, tight=importance)


@given(problem=problems(), formula=st.sampled_from(["lie", "strang", "suzuki-4"]), draws=st.integers(1, 5))
def test_partly_random_formulas_stay_within_their_bound(problem, formula, draws):
    operator, steps = problem
    sizes = np.abs(operator.without_identity().coefficients)
    large, tail = randomised.divided(operator, float(np.median(sizes)))
    partition = tt.Partition.of(large, "single")
    limit = randomised.partly(formula, partition, tail, 1.0, steps, draws, seed=0).channel_bound()
    exact = channels.partly(tt.formula(formula), partition, tail, 1.0, steps, draws)
    assert_below(exact - channels.ideal(operator, 1.0), limit, tight=True)


def test_given_probabilities_in_proportion_to_the_terms_give_the_published_bound():
    published = randomised.qdrift(ONE_QUBIT, 1.0, 10, seed=0).channel_bound()
    given_ones = randomised.qdrift(ONE_QUBIT, 1.0, 10, seed=0, probabilities=[0.6, 0.4]).channel_bound()
    assert given_ones.half_diamond == pytest.approx(published.half_diamond, rel=1e-12)


@given(seed=st.integers(0, 2**32 - 1), formula=st.sampled_from(["lie", "strang", "suzuki-4"]), steps=st.integers(1, 4))
def test_split_errors_hold_for_parts_that_do_not_commute_inside(seed, formula, steps):
    generator = np.random.default_rng(seed)
    parts = [channels.random_hamiltonian(generator, 2, 3) * 0.3 for _ in range(3)]
    rule = tt.formula(formula)
    step = channels.run(rule, parts, 0.5 / steps, lift=lambda unitary: unitary)
    exact = oracle.evolution(parts[0] + parts[1] + parts[2], 0.5)
    error = np.linalg.norm(np.linalg.matrix_power(step, steps) - exact, 2)
    assert error <= split_error(rule, parts, 0.5, steps) + FLOOR
    strength = 0.5 * sum(part.one_norm() for part in parts)
    assert error <= order_free_error(rule, strength, steps) + FLOOR


def test_bounds_are_never_above_the_trivial_one_and_say_so():
    found = randomised.qdrift(ONE_QUBIT, 50.0, 3, seed=0).channel_bound()
    assert (found.half_diamond, found.diamond) == (1.0, 2.0)
    assert "trivial" in found.theorem
    assert randomised.random_direction_bound(10, 1e200, 1e3, 1).diamond == 2.0


def test_what_is_printed_names_both_normalisations_and_the_average():
    text = str(randomised.qdrift(ONE_QUBIT, 1.0, 100, seed=0).channel_bound())
    assert text.startswith("averaged channel (not one sample): half diamond norm ≤ 0.0204, diamond norm ≤ 0.0408")


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: randomised.qdrift_bound(-1.0, 1.0, 10), r"one_norm: is negative \(-1.0\)"),
        (lambda: randomised.qdrift_bound(1.0, np.inf, 10), r"time: is not a finite number \(inf\)"),
        (lambda: randomised.qdrift_bound(1.0, 1.0, 0), r"draws: is not a whole number from 1 \(0\)"),
        (lambda: randomised.random_direction_bound(3, -0.5, 1.0, 4), r"largest: is negative"),
        (lambda: randomised.random_direction_bound(3, 0.5, 1.0, 1.5), r"steps: is not a whole number from 1 \(1.5\)"),
        (lambda: randomised.random_direction_bound(-1, 0.5, 1.0, 1), r"parts: is not a whole number from 0"),
        (lambda: randomised.least_qdrift_draws(1.0, 1.0, 0.0), r"tolerance: is not positive"),
        (lambda: randomised.least_qdrift_draws(1.0, 1e8, 1e-9), r"tolerance: needs more than 2\*\*53 draws"),
    ],
)
def test_bounds_refuse_numbers_out_of_range(call, message):
    with pytest.raises(tt.errors.ArgumentError, match=message):
        call()
