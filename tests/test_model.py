"""Models against constructions that share nothing with them: Kronecker products and fermion matrices."""

from __future__ import annotations

import math
from functools import reduce

import numpy as np
import pytest

import oracle
from trueturn import Operator, errors, lattice, model

UNIT = 2.0**-53


def written_out(terms, qubits):
    """Sum coefficients times Kronecker products, term by term."""
    return sum((c * oracle.pauli(text, qubits) for c, text in terms), np.zeros((2**qubits, 2**qubits), complex))


def test_ising_has_the_signs_that_it_states():
    made = model.ising(lattice.chain(3), zz=-1.5, x=0.5, z=[0.1, 0.2, 0.3])
    expected = written_out(
        [(-1.5, "Z_0 Z_1"), (-1.5, "Z_1 Z_2")]
        + [(0.5, f"X_{k}") for k in range(3)]
        + [(0.1, "Z_0"), (0.2, "Z_1"), (0.3, "Z_2")],
        3,
    )
    assert np.array_equal(made.dense(), expected) or np.allclose(made.dense(), expected, rtol=0, atol=8 * UNIT)


def test_exchange_takes_one_strength_per_bond_or_site():
    made = model.exchange(
        lattice.ring(3), xx=[1, 2, 3], yy=-0.5, zz=np.array([0.0, 0.25, 0.0]), x=0.1, y=[0, 0, 0.7], z=-1
    )
    bonds = [(0, 1), (1, 2), (0, 2)]
    expected = written_out(
        [(c, f"X_{i} X_{j}") for c, (i, j) in zip([1, 2, 3], bonds, strict=True)]
        + [(-0.5, f"Y_{i} Y_{j}") for i, j in bonds]
        + [(0.25, "Z_1 Z_2"), (0.7, "Y_2")]
        + [(c, f"{letter}_{k}") for k in range(3) for c, letter in ((0.1, "X"), (-1, "Z"))],
        3,
    )
    # 14 terms of at most 3, each addition rounded: 14 · 14 · 3 u
    assert np.abs(made.dense() - expected).max() <= 588 * UNIT
    assert len(made) == 3 + 3 + 1 + 3 + 1 + 3


def test_zero_strengths_give_no_term():
    assert len(model.ising(lattice.chain(4), zz=0, x=0)) == 0
    assert model.ising(lattice.chain(4), zz=0, x=0).qubits == 4
    assert model.ising(lattice.chain(3), zz=[1, 0], x=0) == Operator("Z_0 Z_1")


def test_heisenberg_singlet_and_triplet_energies():
    # Two spins 1/2: S·S is -3/4 in the singlet and 1/4 in the triplet; textbook, from memory.
    made = model.heisenberg(lattice.chain(2), 1.0, spin="half")
    assert np.allclose(np.linalg.eigvalsh(made.dense()), [-0.75, 0.25, 0.25, 0.25], rtol=0, atol=32 * UNIT)
    pauli = model.heisenberg(lattice.chain(2), 1.0)
    assert np.allclose(np.linalg.eigvalsh(pauli.dense()), [-3, 1, 1, 1], rtol=0, atol=128 * UNIT)


def test_heisenberg_half_scales_the_field_too():
    made = model.heisenberg(lattice.chain(2), 0, z=[1.0, 0.5], spin="half")
    assert made == Operator("0.5 Z_0 + 0.25 Z_1")


def fermion_operators(modes):
    """Annihilators as matrices on occupation states, signs by counting the occupied modes before each."""
    made = []
    for mode in range(modes):
        matrix = np.zeros((2**modes, 2**modes))
        for state in range(2**modes):
            if state >> mode & 1:
                before = sum(state >> other & 1 for other in range(mode))
                matrix[state ^ (1 << mode), state] = (-1) ** before
        made.append(matrix)
    return made


def test_fermion_oracle_obeys_the_anticommutation_relations():
    made = fermion_operators(4)
    for i, a in enumerate(made):
        for j, b in enumerate(made):
            assert np.array_equal(a @ b.T + b.T @ a, np.eye(16) * (i == j))
            assert not (a @ b + b @ a).any()


@pytest.mark.parametrize(
    ("shape", "hopping", "repulsion", "potential"),
    [
        (lattice.chain(2), 1.0, 4.0, 0.0),
        (lattice.chain(3), [1.0, -0.3], 2.0, [0.5, 0.0, -1.0]),
        (lattice.ring(4), 0.7, [1.0, 2.0, 0.0, -3.0], 0.25),
        (lattice.from_bonds([(0, 2), (1, 2)]), 1.0, 0.0, 0.0),
    ],
)
def test_hubbard_agrees_with_fermion_matrices(shape, hopping, repulsion, potential):
    modes = 2 * shape.sites
    c = fermion_operators(modes)
    number = [a.T @ a for a in c]
    t = np.broadcast_to(hopping, len(shape.bonds))
    u, mu = np.broadcast_to(repulsion, shape.sites), np.broadcast_to(potential, shape.sites)
    expected = np.zeros((2**modes, 2**modes))
    for (i, j), strength in zip(shape.bonds, t, strict=True):
        for spin in (0, 1):
            hop = c[2 * i + spin].T @ c[2 * j + spin]
            expected -= strength * (hop + hop.T)
    for site in range(shape.sites):
        up, down = number[2 * site], number[2 * site + 1]
        expected += u[site] * up @ down - mu[site] * (up + down)
    made = model.hubbard(shape, hopping, repulsion, potential)
    # every entry sums at most len(made) terms of at most the one-norm, each addition rounded
    assert np.abs(made.dense() - expected).max() <= 2 * len(made) * made.one_norm() * UNIT


@pytest.mark.parametrize(("t", "u"), [(1.0, 4.0), (0.5, 8.0), (1.0, -2.0), (-1.0, 3.0)])
def test_two_site_hubbard_ground_energy_at_half_filling(t, u):
    # E = (U - sqrt(U² + 16 t²))/2 in the two-electron sector with one electron of each spin; textbook
    # (N. W. Ashcroft and N. D. Mermin, "Solid State Physics", 1976, chapter 32, problem 5), from memory.
    made = model.hubbard(lattice.chain(2), t, u).dense()
    sector = [k for k in range(16) if (k & 1) + (k >> 2 & 1) == 1 and (k >> 1 & 1) + (k >> 3 & 1) == 1]
    lowest = np.linalg.eigvalsh(made[np.ix_(sector, sector)])[0]
    # eigvalsh is backward stable: a few n u ||H||, with n = 4
    assert abs(lowest - (u - math.sqrt(u * u + 16 * t * t)) / 2) <= 64 * UNIT * (abs(u) + 4 * abs(t))


def test_potential_of_half_the_repulsion_is_particle_hole_symmetric():
    made = model.hubbard(lattice.chain(2), 1.0, 4.0, 2.0)
    assert all((x | z).bit_count() != 1 for x, z in zip(made.x_masks, made.z_masks, strict=True))
    spectrum = np.linalg.eigvalsh(made.dense())
    flip = reduce(np.kron, [np.array([[0, 1], [1, 0]])] * 4)
    turned = np.linalg.eigvalsh(flip @ made.dense() @ flip)
    assert np.allclose(spectrum, turned, rtol=0, atol=256 * UNIT * made.one_norm())


def test_hubbard_identity_is_the_mean_energy():
    made = model.hubbard(lattice.chain(3), 1.0, 4.0, 1.0)
    assert made.identity_coefficient == 3 * (4.0 / 4 - 1.0)


CHAIN = lattice.chain(3)


@pytest.mark.parametrize(
    ("make", "argument", "pieces"),
    [
        (lambda: model.ising(3, zz=1, x=1), "lattice", ["lattice:", "(3)", "lattice.chain(4)"]),
        (lambda: model.ising(CHAIN, zz=[1, 2, 3], x=1), "zz", ["zz:", "(3,)", "2 bonds of chain(3)"]),
        (lambda: model.ising(CHAIN, zz=1, x=[1, 2]), "x", ["x:", "(2,)", "3 sites of chain(3)"]),
        (lambda: model.ising(CHAIN, zz=1j, x=1), "zz", ["zz:", "1j", "real number"]),
        (lambda: model.ising(CHAIN, zz=1, x=True), "x", ["x:", "(True)", "real number"]),
        (lambda: model.ising(CHAIN, zz="1", x=1), "zz", ["zz:", "('1')", "real number"]),
        (lambda: model.ising(CHAIN, zz=1, x=[[1], [1, 2]]), "x", ["x:", "[[1], [1, 2]]", "array"]),
        (lambda: model.ising(CHAIN, zz=1, x=[0, math.inf, 0]), "x", ["x:", "inf at site 1", "real number"]),
        (lambda: model.exchange(CHAIN, xx=1, yy=math.nan, zz=1), "yy", ["yy:", "nan at bond 0", "real"]),
        (lambda: model.exchange(CHAIN, xx=[[1, 2]], yy=1, zz=1), "xx", ["xx:", "(1, 2)", "2 bonds"]),
        (lambda: model.heisenberg(CHAIN, 1, spin="one"), "spin", ["spin:", "('one')", "'half'"]),
        (lambda: model.heisenberg(CHAIN, None), "coupling", ["coupling:", "(None)", "real number"]),
        (lambda: model.hubbard(CHAIN, 1, [1, 2]), "repulsion", ["repulsion:", "(2,)", "3 sites"]),
        (lambda: model.hubbard(lattice.chain(65), 1, 1), "lattice", ["lattice:", "65", "at most 64"]),
    ],
)
def test_bad_input_is_refused_with_argument_value_and_remedy(make, argument, pieces):
    with pytest.raises(errors.ModelError) as caught:
        make()
    assert caught.value.argument == argument
    for piece in pieces:
        assert piece in str(caught.value)
