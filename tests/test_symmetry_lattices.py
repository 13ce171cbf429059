"""Translations and reflections of lattices and of electrons, and the total spin of electrons."""

from __future__ import annotations

import numpy as np
import pytest

import oracle
import trueturn as tt
from test_symmetry import commute, electron_spins, fermion_move, permutation, spread
from trueturn import _symmetry_electrons as electrons
from trueturn.symmetry import symmetries


def moves(found):
    return {row.name: row.kept for row in found if "translation" in row.name or "reflection" in row.name}


def hubbard(lattice, **more):
    return tt.model.hubbard(lattice, hopping=more.pop("hopping", 1.0), repulsion=4.0, **more)


def test_a_torus_has_its_translations_with_and_without_the_lattice():
    torus = tt.lattice.square(3, 3, periodic=True)
    h = tt.model.ising(torus, zz=-1, x=0.7)
    row, column = "translation by 1 row (3 × 3)", "translation by 1 column (3 × 3)"
    assert moves(symmetries(h)) == {"translation by 3": True, row: True, column: True, "reflection": True}
    mirrors = [f"reflection {what} (3 × 3)" for what in ("of rows", "of columns", "in the diagonal")]
    assert moves(symmetries(h, lattice=torus)) == dict.fromkeys([row, column, *mirrors], True)
    # a field on the first column alone
    broken = tt.model.ising(torus, zz=-1, x=[1, 0, 0] * 3)
    found = moves(symmetries(broken, lattice=torus))
    assert found == {row: True, column: False, mirrors[0]: True, mirrors[1]: False, mirrors[2]: False}
    assert column not in moves(symmetries(broken))
    stripes = tt.model.ising(tt.lattice.square(2, 4, periodic=True), zz=-1, x=[1, 0, 1, 0] * 2)
    assert moves(symmetries(stripes))["translation by 2 columns (2 × 4)"]


def test_lattices_give_the_moves_that_map_bonds_to_bonds():
    def named(lattice):
        return set(moves(symmetries(tt.model.heisenberg(lattice, 1.0), lattice=lattice)))

    assert named(tt.lattice.ring(6)) == {"translation by 1", "reflection"}
    assert named(tt.lattice.chain(6)) == {"reflection"}
    # exchanging the legs is a translation by one of two
    legs = "translation by 1 column (3 × 2)"
    assert named(tt.lattice.ladder(3)) == {legs, "reflection of rows (3 × 2)"}
    closed = tt.lattice.from_bonds([*tt.lattice.ladder(5).bonds, (0, 8), (1, 9)])
    assert "translation by 2" in named(closed)  # along the legs, closed


@pytest.mark.parametrize("lattice", [tt.lattice.ring(2), tt.lattice.ring(4), tt.lattice.square(2, 2, periodic=True)])
def test_rings_of_electrons_move_with_fermion_signs_and_keep_their_spin(lattice):
    h = hubbard(lattice)
    found = symmetries(h, lattice=lattice)
    assert {"electron spin x", "electron spin y", "electron spin z", "electron spin squared"} <= set(found.kept)
    fermions = {name: kept for name, kept in moves(found).items() if name.startswith("fermion ")}
    assert all(fermions.values()) and any("translation" in name for name in fermions)
    n = h.qubits
    x, y, z = electron_spins(n)
    # sums of at most 4 (16 squared) numbers of at most 1/4: rounding below 1e-13
    for name, matrix in {"x": x, "y": y, "z": z, "squared": x @ x + y @ y + z @ z}.items():
        assert np.allclose(oracle.dense(found[f"electron spin {name}"].quantity), matrix, atol=1e-13)
    # renaming qubits without the signs is none, where a hopping passes the boundary
    if lattice.name == "ring(4)":
        assert not commute(oracle.dense(h), permutation([(q + 2) % n for q in range(n)], n))


def test_every_string_moves_as_the_matrices_of_fermions_do():
    random = np.random.default_rng(5)
    sites, flipped = {0: 2, 1: 0, 2: 1}, [0, 2]
    unitary = fermion_move(sites, [True, False, True], 6)
    for _ in range(60):
        x, z = (int(mask) for mask in random.integers(64, size=2))
        moved = electrons.image(tt.Operator.from_masks([x], [z], [1.0], 6), sites, flipped)
        # products of entries 0, 1, -1, i, -i: exact
        assert np.array_equal(oracle.dense(moved), unitary @ oracle.string(x, z, 6) @ unitary.T)


def test_a_boundary_with_a_sign_is_antiperiodic():
    ring = tt.lattice.ring(4)
    turned = hubbard(ring, hopping=[1, 1, 1, -1])
    found = symmetries(turned)
    name = "fermion translation by 1 (sites, antiperiodic)"
    assert found[name].kept and "antiperiodic" in found[name].meaning
    unitary = fermion_move([1, 2, 3, 0], [False, False, False, True], 8)
    assert commute(oracle.dense(turned), unitary)
    assert "periodic" in symmetries(hubbard(ring))["fermion translation by 1 (sites)"].meaning
    halves = moves(symmetries(hubbard(ring, potential=[0.5, 0, 0.5, 0])))
    assert halves["fermion translation by 2 (sites)"] and halves["fermion reflection (sites)"] is False
    none = moves(symmetries(hubbard(tt.lattice.chain(4))))
    assert none["fermion translation by 1 (sites)"] is False and none["fermion reflection (sites)"]


def test_a_magnetic_field_breaks_electron_spin_x_and_y():
    ring = tt.lattice.ring(4)
    h = hubbard(ring) + tt.Operator.gather([(0.1 * (-1) ** q, f"Z_{q}") for q in range(8)])
    found = symmetries(h)
    kept = {name for name in found.kept if name.startswith("electron")}
    assert kept == {"electron spin z", "electron spin squared"}
    one = symmetries(hubbard(ring) + tt.Operator("0.1 Z_0 - 0.1 Z_1", qubits=8))
    assert {name for name in one.kept if name.startswith("electron")} == {"electron spin z"}


def test_electron_rows_show_where_electrons_are_meant_and_the_table_says_so():
    names = [row.name for row in symmetries(tt.model.ising(tt.lattice.ring(4), zz=1, x=1))]
    assert "electron spin x" not in names and not any(name.startswith("fermion") for name in names)
    odd = repr(symmetries(tt.model.heisenberg(tt.lattice.ring(3), 1.0)))
    assert "electron" not in odd
    text = repr(symmetries(hubbard(tt.lattice.ring(2)))).splitlines()
    assert text[-2].startswith("electron, fermion: qubits 2s and 2s + 1 are the up and down orbitals")
    assert text[-1] == "spin x, y, z, squared: another picture, in which each qubit is a spin 1/2"


def test_parts_that_break_the_spin_of_electrons_let_it_drift():
    h = hubbard(tt.lattice.chain(3))
    hops = {}
    rest = [tt.Operator("0", qubits=6)]
    for x, z, value in zip(h.x_masks, h.z_masks, h.coefficients, strict=True):
        term = tt.Operator.from_masks([x], [z], [value], 6)
        if x:
            hops[x] = hops[x] + term if x in hops else term
        else:
            rest.append(term)
    onsite = sum(rest[1:], rest[0])
    by_spin = tt.Partition([*hops.values(), onsite])
    # both spins of a bond, at x and twice x
    apart = tt.Partition([*(hops[x] + hops[2 * x] for x in hops if 2 * x in hops and x in (0b101, 0b10100)), onsite])
    found = symmetries(h, by_spin)
    for name in ("electron spin x", "electron spin y", "electron spin squared"):
        assert found[name].kept and found[name].broken_by == (0, 1, 2, 3)
        assert not symmetries(h, apart)[name].broken_by
    single = tt.Partition.of(h, "single").shuffled(1)
    assert symmetries(h, single)["electron spin squared"].broken_by
    total = found["electron spin squared"].quantity
    assert spread(h, single, total, "100110") > 1e-3


def test_a_hundred_and_twenty_eight_qubits_of_electrons():
    torus = tt.lattice.square(8, 8, periodic=True)
    h = hubbard(torus)
    found = symmetries(h, lattice=torus)
    assert found["fermion translation by 1 column (8 × 8 sites)"].kept
    assert found["fermion translation by 1 row (8 × 8 sites)"].kept
    assert found["electron spin squared"].kept
    assert symmetries(h)["fermion translation by 8 (sites)"].kept
