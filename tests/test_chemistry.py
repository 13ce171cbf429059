"""Hamiltonians of electrons: integrals, encodings, active spaces, dropped parity qubits."""

from __future__ import annotations

import time

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import fermions
import oracle
import trueturn as tt
from trueturn.chemistry import ENCODINGS, Integrals, encode

# Matrices of dimension at most 256 with entries up to 100, summed over some 1000 terms: rounding below 1e-10.
ROUNDING = 1e-10


def spectrum(operator):
    return np.linalg.eigvalsh(oracle.dense(operator))


def integrals_of(constant, one, two, electrons=(1, 1)):
    return Integrals.from_arrays(constant, one[0], two[0, 0], electrons)


@pytest.mark.parametrize("order", ["interleaved", "blocked"])
@pytest.mark.parametrize("n", [1, 2, 3])
def test_the_hamiltonian_is_that_of_fermion_matrices(n, order):
    drawn = fermions.random_integrals(n, seed=n)
    found = oracle.dense(integrals_of(*drawn).operator(order=order))
    assert np.abs(found - fermions.hamiltonian(*drawn, order)).max() < ROUNDING


@pytest.mark.parametrize("encoding", ENCODINGS)
@settings(max_examples=10)
@given(n=st.integers(1, 3), seed=st.integers(0, 2**32 - 1))
def test_every_encoding_has_the_same_spectrum(encoding, n, seed):
    found = integrals_of(*fermions.random_integrals(n, seed))
    plain, encoded = found.operator(), found.operator(encoding)
    assert len(plain) == len(encoded)
    assert np.abs(spectrum(plain) - spectrum(encoded)).max() < ROUNDING


@pytest.mark.parametrize("encoding", ENCODINGS)
def test_an_encoding_maps_occupations_as_it_says(encoding):
    """Every basis state of 5 modes: the number operator of each mode reads the occupation back, whatever the encoding."""
    numbers = [encode(tt.Operator(f"0.5 - 0.5 Z_{mode}", qubits=5), encoding) for mode in range(5)]
    held = {"jordan-wigner": lambda f: f, "parity": lambda f: np.cumsum(f) % 2}
    # Qubits 0 to 4 of the binary tree: f0; f0+f1; f2; f0+f1+f2+f3; f4 (Seeley, Richard, Love 2012, equation 34, from memory).
    tree = np.array([[1, 0, 0, 0, 0], [1, 1, 0, 0, 0], [0, 0, 1, 0, 0], [1, 1, 1, 1, 0], [0, 0, 0, 0, 1]])
    held["bravyi-kitaev"] = lambda f: tree @ f % 2
    for index in range(32):
        occupations = np.array([index >> mode & 1 for mode in range(5)])
        state = tt.State.product("".join(map(str, held[encoding](occupations))))
        for mode, number in enumerate(numbers):
            assert state.expectation(number) == occupations[mode]


@pytest.mark.parametrize("encoding", ENCODINGS)
def test_encoding_is_conjugation_by_the_permutation_of_basis_states(encoding):
    operator = tt.Operator.from_masks(range(1, 16), range(2, 17 * 15, 17)[:15], np.arange(1.0, 16.0), 8)
    permutation = np.zeros((256, 256))
    for index in range(256):
        occupations = "".join(str(index >> mode & 1) for mode in range(8))
        text = encoded_text(encoding, occupations)
        permutation[int(text[::-1], 2), index] = 1.0
    expected = permutation @ oracle.dense(operator) @ permutation.T
    assert np.array_equal(oracle.dense(encode(operator, encoding)), expected)


def encoded_text(encoding, occupations):
    """Encode occupations by hand: sums over ranges of modes."""
    bits = [int(bit) for bit in occupations]
    first = {
        "jordan-wigner": lambda i: i,
        "parity": lambda i: 0,
        "bravyi-kitaev": lambda i: i + 1 - ((i + 1) & -(i + 1)),
    }
    return "".join(str(sum(bits[first[encoding](i) : i + 1]) % 2) for i in range(len(bits)))


@pytest.mark.parametrize("encoding", ["parity", "bravyi-kitaev"])
@pytest.mark.parametrize("electrons", [(1, 1), (2, 1), (0, 2), (2, 0)])
def test_without_its_parity_qubits_the_operator_acts_on_the_sector_alone(encoding, electrons):
    found = integrals_of(*fermions.random_integrals(2, seed=7), electrons)
    full = oracle.dense(found.operator(order="blocked"))
    parities = [[(index & 0b11).bit_count() % 2, (index >> 2).bit_count() % 2] for index in range(16)]
    inside = [k for k, parity in enumerate(parities) if parity == [electrons[0] % 2, electrons[1] % 2]]
    small = found.operator(encoding, drop_parity_qubits=True)
    assert small.qubits == 2
    assert np.abs(spectrum(small) - np.linalg.eigvalsh(full[np.ix_(inside, inside)])).max() < ROUNDING


def test_the_determinant_has_the_same_energy_in_every_encoding():
    found = integrals_of(*fermions.random_integrals(3, seed=5), (2, 1))
    energies = [
        tt.State.product(found.determinant(encoding, order=order)).expectation(found.operator(encoding, order=order))
        for encoding in ENCODINGS
        for order in ("interleaved", "blocked")
    ]
    small = tt.State.product(found.determinant("parity", drop_parity_qubits=True))
    energies.append(small.expectation(found.operator("parity", drop_parity_qubits=True)))
    assert np.ptp(energies) < ROUNDING
    assert found.determinant() == "111000" and found.determinant(order="blocked") == "110100"


@settings(max_examples=8)
@given(seed=st.integers(0, 2**32 - 1), unrestricted=st.booleans())
def test_an_active_space_is_the_block_of_the_whole_where_frozen_orbitals_are_filled_and_others_empty(
    seed, unrestricted, tmp_path_factory
):
    constant, one, two = fermions.random_integrals(4, seed, spins=2 if unrestricted else 1)
    path = fermions.write_fcidump(
        tmp_path_factory.mktemp("dump") / "a", constant, one, two, (2, 2), unrestricted=unrestricted
    )
    whole = tt.read_fcidump(path).dense()
    small = tt.read_fcidump(path, frozen=[1], window=[3, 0])
    # Orbital 1 is qubits 2 and 3; orbitals 3 and 0, in this order, become qubits 0 to 3.
    to_whole = {0: 6, 1: 7, 2: 0, 3: 1}
    places, signs = [], []
    for index in range(16):
        filled = [to_whole[q] for q in range(4) if index >> q & 1]
        places.append(sum(1 << q for q in filled) | 0b1100)
        # The order of fermion operators differs: count exchanges, the frozen pair being even.
        signs.append((-1) ** sum(a > b for place, a in enumerate(filled) for b in filled[place + 1 :]))
    block = np.outer(signs, signs) * whole[np.ix_(places, places)]
    assert np.abs(small.dense() - block).max() < ROUNDING


def test_freezing_by_count_takes_the_lowest_orbitals_and_the_next_for_the_window():
    found = integrals_of(*fermions.random_integrals(4, seed=3), (3, 2))
    by_count, by_name = found.active(1, 2), found.active([0], [1, 2])
    assert by_count.electrons == by_name.electrons == (2, 1)
    assert by_count.operator() == by_name.operator()


def test_the_hubbard_model_comes_out_of_integrals_too():
    lattice = tt.lattice.ring(3)
    hopping, potential = [1.0, 0.7, -0.4], [0.3, -0.2, 0.1]
    h = -np.diag(potential)
    for (i, j), t in zip(lattice.bonds, hopping, strict=True):
        h[i, j] = h[j, i] = -t
    g = np.zeros((3, 3, 3, 3))
    for site in range(3):
        g[site, site, site, site] = 4.0
    # The integrals let an electron interact with itself only through a†a† aa, which vanishes: U n↑ n↓ is left.
    model = tt.model.hubbard(lattice, hopping, 4.0, potential)
    assert Integrals.from_arrays(0.0, h, g).operator().near(model, 1e-14)
    for encoding in ENCODINGS:
        assert np.abs(spectrum(encode(model, encoding)) - spectrum(model)).max() < ROUNDING


def test_sixteen_orbitals_take_seconds():
    """Invented integrals without any symmetry, so that no term vanishes; a minute is what was asked for."""
    draw = np.random.default_rng(0)
    shapes = draw.normal(size=(8, 16, 16))
    shapes += shapes.transpose(0, 2, 1)
    g = np.einsum("aij,akl->ijkl", shapes, shapes, optimize=True)
    found = Integrals.from_arrays(0.0, shapes[0], (g + g.transpose(2, 3, 0, 1)) / 2)
    began = time.perf_counter()
    operator = found.operator("bravyi-kitaev")
    assert time.perf_counter() - began < 60.0
    assert operator.qubits == 32 and len(operator) > 50_000


def test_masks_beyond_one_word_are_right():
    """33 orbitals are 66 qubits. A Hubbard chain is an independent statement of the same Hamiltonian."""
    n = 33
    h = np.zeros((n, n))
    g = np.zeros((n, n, n, n))
    for site in range(n - 1):
        h[site, site + 1] = h[site + 1, site] = -1.0 - site / 64
    g[np.diag_indices(n, 4)] = 2.0
    model = tt.model.hubbard(tt.lattice.chain(n), [1.0 + site / 64 for site in range(n - 1)], 2.0)
    assert Integrals.from_arrays(0.0, h, g).operator().near(model, 1e-12)
    back = encode(model, "bravyi-kitaev")
    assert back.qubits == 66 and len(back) == len(model)
    assert sorted(back.coefficients**2) == sorted(model.coefficients**2)
    brackets = [model.bracket_vanishes(tt.Operator(f"Z_{q}", qubits=66)) for q in (64, 65)]
    assert brackets == [False, False]


BAD = [
    (lambda i: i.operator("jordan wigner"), r"encoding: unknown \('jordan wigner'\); did you mean 'jordan-wigner'\?"),
    (lambda i: i.operator(order="blokced"), r"order: unknown \('blokced'\); give one of"),
    (lambda i: i.operator("parity", order="interleaved", drop_parity_qubits=True), "order: interleaved spins leave"),
    (
        lambda i: i.operator(drop_parity_qubits=True),
        r"no single qubit holds the parity here \(jordan-wigner, 6 modes\)",
    ),
    (lambda i: i.operator("bravyi-kitaev", drop_parity_qubits=True), "or a power of two of orbitals"),
    (lambda i: i.active(frozen=4), r"frozen: out of range \(4 of 3 orbitals\); give a count, or orbitals from 0 to 2"),
    (lambda i: i.active(frozen=[3]), r"frozen: orbital out of range \(3\)"),
    (lambda i: i.active(window=[1, 1]), r"window: orbital named twice \(1\)"),
    (lambda i: i.active(frozen=[1], window=[1, 2]), r"window: holds a frozen orbital \(1\)"),
    (lambda i: i.active(frozen=3), r"window: no active orbital is left \(of 3\)"),
    (lambda i: i.active(window="0"), r"window: no orbital numbers \('0'\)"),
    (lambda i: i.active(frozen=2), "window: 0 electrons with spin up and -1 with spin down are left for 1"),
    (lambda i: Integrals.from_arrays(0.0, np.eye(2), np.zeros((2, 2))), r"shapes do not fit \(\(2, 2\) and \(2, 2\)\)"),
    (lambda i: Integrals.from_arrays(np.nan, np.eye(1), np.zeros((1,) * 4)), "one, two: not finite"),
    (lambda i: Integrals.from_arrays(0.0, [[0, 1], [2, 0]], np.zeros((2,) * 4)), r"not symmetric .* differ by 1\)"),
    (
        lambda i: Integrals(i.constant, i.one, i.two).determinant(),
        "determinant: the numbers of electrons are not known",
    ),
    (lambda i: encode("Z_0", "parity"), r"operator: no Operator \(str\)"),
    (
        lambda i: encode(tt.Operator("X_0", qubits=4), "parity", sector=(1, 1)),
        "changes the number of electrons with spin up",
    ),
    (lambda i: encode(tt.Operator("Z_0", qubits=4), "parity", sector=(3, 1)), r"fit into 2 orbitals \(\(3, 1\)\)"),
    (lambda i: encode(tt.Operator("Z_0", qubits=3), "parity", sector=(1, 1)), r"odd number of spin orbitals \(3\)"),
    (lambda i: encode(tt.Operator("Z_0", qubits=2), "parity", sector=(1, 1)), r"leaves no qubit \(of 2\)"),
]


@pytest.mark.parametrize(("call", "message"), BAD)
def test_bad_arguments_are_refused_by_name(call, message):
    with pytest.raises(tt.errors.ArgumentError, match=message):
        call(integrals_of(*fermions.random_integrals(3, seed=0), (2, 1)))
