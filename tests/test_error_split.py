"""The split of a leading error: orthogonal shares, the least-squares optimum, and what the shares mean in time."""

from __future__ import annotations

import itertools
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
from trueturn.accuracy import pauli_links
from trueturn.accuracy.pauli_links import Links

RING = tt.model.heisenberg(tt.lattice.ring(6), 1.0, z=[0.3, -0.6, 0.5, 0.1, -0.4, 0.2])
BOND = tt.Partition.of(RING, "bond")


def strings(operator):
    return list(zip(operator.x_masks, operator.z_masks, strict=True))


@given(strategies.operators(max_qubits=4, max_terms=8), strategies.pauli_strings(4))
def test_brackets_of_single_strings_are_those_of_operators(operator, string):
    wide = tt.Operator.from_masks(operator.x_masks, operator.z_masks, operator.coefficients, 4).without_identity()
    x, z = string
    found = list(Links(wide).bracket(x, z))
    expected = wide.bracket(tt.Operator.from_masks([x], [z], [1.0], 4))
    made = tt.Operator.from_masks([x for (x, _), _ in found], [z for (_, z), _ in found], [c for _, c in found], 4)
    assert made == expected  # products of one coefficient by 2 are exact


def test_diameters_count_bonds_of_the_interaction_graph():
    links = Links(tt.model.ising(tt.lattice.ring(8), zz=1.0, x=0.5))
    assert [links.diameter(mask) for mask in (0, 1, 0b11, 0b101, 0b10001, 0b1000_0001)] == [0, 0, 1, 2, 4, 1]
    apart = Links(tt.Operator("Z_0 Z_1 + X_2", qubits=3))
    assert apart.diameter(0b101) == 3  # not connected


def dense_split(error, hamiltonian, columns):
    """The same least squares over given strings of G by dense algebra on vectors of matrix entries."""
    h = oracle.dense(hamiltonian)
    images = []
    for x, z in columns:
        g = oracle.string(x, z, hamiltonian.qubits)
        images.append((1j * (h @ g - g @ h)).ravel())
    target = oracle.dense(error).ravel()
    matrix = np.stack(images, axis=1)
    matrix, target = np.vstack([matrix.real, matrix.imag]), np.concatenate([target.real, target.imag])
    solution = np.linalg.lstsq(matrix, target, rcond=1e-10)[0]
    return np.linalg.norm(matrix @ solution) ** 2 / np.linalg.norm(target) ** 2


@pytest.mark.parametrize(
    ("name", "weight", "diameter"), [("lie", 2, 1), ("lie", 3, 2), ("strang", 2, 1), ("strang", 3, 2)]
)
def test_the_removable_share_is_that_of_dense_least_squares_over_all_strings_in_range(name, weight, diameter):
    chain = tt.model.heisenberg(tt.lattice.chain(4), 1.0, z=[0.3, -0.6, 0.5, 0.1])
    series = tt.simulated_series(name, tt.Partition.of(chain, "axis"), 3)
    found = series.split(weight=weight, diameter=diameter)
    links = Links(chain)
    inside = [
        (x, z)
        for x in range(16)
        for z in range(16)
        if 0 < (x | z).bit_count() <= weight and links.diameter(x | z) <= diameter
    ]
    assert found.candidates <= len(inside)
    # both solve to about 1e-13 times the condition of a few hundred
    assert found.removable_share == pytest.approx(dense_split(series.leading, chain, inside), abs=1e-9)


@pytest.mark.parametrize("name", ["lie", "strang", "suzuki-4"])
def test_shares_are_orthogonal_and_add_up(name):
    formula = tt.formula(name)
    split = tt.simulated_series(formula, BOND, formula.order + 1).split()
    assert (split.removable + split.along + split.rest).near(split.error, 1e-12)
    assert split.removable.near(RING.bracket(split.generator), 1e-13)  # terms of H in another order
    assert split.optimality < 1e-10
    # Pythagoras up to twice the cross term, plus rounding
    assert abs(split.removable_share + split.rescaling_share + split.rest_share - 1) < 3e-10
    trace = np.trace(oracle.dense(split.error) @ oracle.dense(RING)) / np.trace(oracle.dense(RING) @ oracle.dense(RING))
    assert split.rescaling == pytest.approx(trace.real, rel=1e-12, abs=1e-15)
    assert all((x | z).bit_count() <= split.weight for x, z in strings(split.generator))


def test_a_larger_range_removes_no_less():
    series = tt.simulated_series("strang", BOND, 3)
    shares = [series.split(weight=w, diameter=d).removable_share for w, d in ((1, 0), (2, 1), (3, 2), (4, 3))]
    assert all(small <= large + 1e-10 for small, large in itertools.pairwise(shares))
    assert shares[-1] > shares[0] + 0.5


def test_first_order_of_two_parts_is_second_order_seen_from_elsewhere():
    # D. Layden, Phys. Rev. Lett. 128, 210501 (2022): with two parts the whole first-order error is removable, by half
    # of the second part here: E = i[A, B]/2 = i[H, B/2].
    a, b = tt.Operator("0.7 X_0 + 0.4 X_1 + 0.2 X_2"), tt.Operator("Z_0 Z_1 + 0.5 Z_1 Z_2 + 0.3 Z_0")
    split = tt.simulated_series("lie", tt.Partition([a, b]), 2).split()
    assert split.removable_share == pytest.approx(1.0, abs=1e-12)
    assert len(split.rest) == 0 or split.rest.one_norm() < 1e-12
    assert split.removable.near((a + b).bracket(b * 0.5), 1e-12)


def test_an_error_along_the_hamiltonian_is_all_rescaling():
    split = tt.split_error(RING * 0.25, RING)
    assert split.rescaling == pytest.approx(0.25, rel=1e-12)
    assert split.rescaling_share == pytest.approx(1.0, rel=1e-12)
    assert split.rest_share < 1e-20 and split.removable_share < 1e-20


@pytest.mark.parametrize("name", ["strang", "suzuki-4"])
def test_removal_and_rescaling_leave_an_error_that_is_the_rest(name):
    """At a long time the circuit, conjugated by exp(±iτ^p G) and with its clock corrected, errs by the rest alone."""
    formula = tt.formula(name)
    partition = tt.Partition.of(tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7, z=0.2), "axis")
    hamiltonian = partition.operator()
    series = tt.simulated_series(formula, partition, formula.order + 3)
    split = series.split(weight=4, diameter=3)

    def norm(operator):
        return np.linalg.norm(oracle.dense(operator), 2)

    step, steps = 0.02, 4000
    small, time = step**formula.order, step * steps
    circuit = circuits.matrix(formula.rotations(partition, time, steps))
    turn = scipy.linalg.expm(-1j * small * oracle.dense(split.generator))
    exact, corrected = (oracle.evolution(hamiltonian, time * (1 + c * small)) for c in (0.0, split.rescaling))
    plain = np.linalg.norm(circuit - exact, 2)
    mended = np.linalg.norm(turn.conj().T @ circuit @ turn - corrected, 2)
    # The generators of the two differ by τ^p rest, by the next term of the series (and half as much again for all after
    # it), and by what conjugation leaves at second order; rounding of the oracle is about 4000 steps of 1e-15.
    rest = small * time * norm(split.rest)
    next_term = 1.5 * small * step**2 * time * norm(series.terms[formula.order + 2])
    g = norm(split.generator)
    second = small**2 * time * (2 * g * norm(split.error) + 2 * g**2 * norm(hamiltonian))
    assert mended < rest + next_term + second + 1e-11
    assert rest + next_term + second < 0.5 * small * time * norm(split.error)
    assert plain > 1.5 * mended
    # and the removable share alone stays bounded: at most 2 τ^p ‖G‖
    bounded = np.linalg.norm(turn @ exact @ turn.conj().T - exact, 2)
    assert bounded <= 2 * small * np.linalg.norm(oracle.dense(split.generator), 2) * (1 + 1e-9) + 1e-13


def test_an_observable_sees_the_strings_that_fail_to_commute_with_it():
    split = tt.simulated_series("strang", BOND, 3).split(observable=tt.Operator("Z_0 + Z_1", qubits=6))
    watched = [tt.Operator(text, qubits=6) for text in ("Z_0", "Z_1")]
    squares = {True: [], False: []}
    for x, z, c in zip(split.error.x_masks, split.error.z_masks, split.error.coefficients, strict=True):
        one = tt.Operator.from_masks([x], [z], [c], 6)
        squares[any(len(one.bracket(o)) for o in watched)].append(c**2)
    expected = math.fsum(squares[True]) / math.fsum(squares[True] + squares[False])
    assert split.seen_share == pytest.approx(expected, rel=1e-12)
    assert 0 < split.seen_rest_share < split.seen_share < 1
    assert tt.simulated_series("strang", BOND, 3).split().seen_share is None


@given(
    strategies.operators(max_qubits=3, min_terms=2), strategies.operators(max_qubits=3, min_terms=1), st.integers(1, 3)
)
@settings(max_examples=30)
def test_any_error_is_split_into_orthogonal_shares(error, hamiltonian, weight):
    h = tt.Operator.from_masks(hamiltonian.x_masks, hamiltonian.z_masks, hamiltonian.coefficients, 3)
    e = tt.Operator.from_masks(error.x_masks, error.z_masks, error.coefficients, 3)
    if len(h.without_identity()) == 0 or len(e.without_identity()) == 0:
        return
    split = tt.split_error(e, h, weight=weight)
    total = split.removable_share + split.rescaling_share + split.rest_share
    # coefficients from 1e-6 to 4 may make i[H, ·] as ill-conditioned as 1e7, and least squares stops short of the optimum
    assert abs(total - 1) <= 2 * split.optimality + 1e-9
    assert split.optimality < 1e-5


BAD = {
    "error": (lambda: tt.split_error("X_0", RING), errors.OperatorError, r"^error: is not an Operator \('X_0'\)"),
    "hamiltonian": (lambda: tt.split_error(RING, 3), errors.OperatorError, r"^hamiltonian: is not an Operator \(3\)"),
    "no terms": (
        lambda: tt.split_error(RING, tt.Operator("2", qubits=6)),
        errors.OperatorError,
        "^hamiltonian: has no terms",
    ),
    "qubits": (lambda: tt.split_error(tt.Operator("X_0"), RING), errors.OperatorError, "^error: acts on 1 qubits"),
    "observable": (
        lambda: tt.split_error(RING, RING, observable=tt.Operator("X_0")),
        errors.OperatorError,
        "^observable: acts on 1 qubits, the hamiltonian on 6; build it with qubits=6",
    ),
    "weight": (lambda: tt.split_error(RING, RING, weight=0), errors.ArgumentError, r"^weight: is not .* from 1 \(0\)"),
    "diameter": (
        lambda: tt.split_error(RING, RING, diameter=-1),
        errors.ArgumentError,
        r"^diameter: is not .* from 0 \(-1\)",
    ),
    "half": (lambda: tt.split_error(RING, RING, weight=1.5), errors.ArgumentError, r"^weight: .*\(1\.5\)"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_refused_by_name(case):
    call, kind, message = BAD[case]
    with pytest.raises(kind, match=message):
        call()


def test_too_wide_a_range_is_refused(monkeypatch):
    monkeypatch.setattr(pauli_links, "MOST_CANDIDATES", 10)
    with pytest.raises(
        errors.ArgumentError, match=r"^weight: more than 10 strings are in range \(weight 4, diameter 3\)"
    ):
        tt.simulated_series("strang", BOND, 3).split()


def test_no_error_has_no_shares():
    split = tt.split_error(RING * 0.0, RING)
    assert (split.removable_share, split.rescaling_share, split.rest_share) == (0.0, 0.0, 0.0)
    assert "0.0% removable" in repr(split)
