"""Lattices: which bonds, in which order, each once; and refusals."""

from __future__ import annotations

import numpy as np
import pytest

from trueturn import errors, lattice


def test_chain_joins_neighbours_in_order():
    made = lattice.chain(4)
    assert made.sites == 4
    assert made.bonds == ((0, 1), (1, 2), (2, 3))
    assert lattice.chain(1).bonds == ()


def test_ring_closes_last():
    assert lattice.ring(5).bonds == ((0, 1), (1, 2), (2, 3), (3, 4), (0, 4))


def test_short_rings_draw_no_bond_twice():
    assert lattice.ring(2).bonds == ((0, 1),)
    assert lattice.ring(1).bonds == ()


def test_ladder_numbers_sites_by_rung_and_leg():
    made = lattice.ladder(3)
    assert made.sites == 6
    rungs = {(2 * k, 2 * k + 1) for k in range(3)}
    legs = {(2 * k + leg, 2 * k + 2 + leg) for k in range(2) for leg in (0, 1)}
    assert set(made.bonds) == rungs | legs
    assert len(made.bonds) == 7


@pytest.mark.parametrize(
    ("rows", "columns", "periodic", "bonds"),
    [
        (3, 4, False, 3 * 3 + 2 * 4),
        (3, 4, True, 2 * 12),
        (3, 2, True, 3 + 6),  # two columns: each row has one bond, not two
        (2, 2, True, 4),
        (1, 4, True, 4),  # one row: a ring, no bond from a site to itself
        (1, 1, True, 0),
    ],
)
def test_square_has_the_bonds_of_the_torus_once(rows, columns, periodic, bonds):
    made = lattice.square(rows, columns, periodic)
    assert made.sites == rows * columns
    assert len(made.bonds) == len(set(made.bonds)) == bonds
    for i, j in made.bonds:
        (row_i, column_i), (row_j, column_j) = divmod(i, columns), divmod(j, columns)
        across = (abs(row_i - row_j), abs(column_i - column_j))
        inside = {(0, 1), (1, 0)}
        assert across in (inside | {(0, columns - 1), (rows - 1, 0)} if periodic else inside)


def test_complete_joins_all():
    assert len(lattice.complete(7).bonds) == 21


def test_from_bonds_keeps_the_order_and_sorts_each_pair():
    made = lattice.from_bonds([(5, 2), (0, 1)])
    assert made.bonds == ((2, 5), (0, 1))
    assert made.sites == 6
    assert lattice.from_bonds(np.array([[0, 1], [1, 2]]), sites=5).sites == 5
    assert lattice.from_bonds([], sites=3).bonds == ()


def test_lattices_are_frozen_values():
    assert lattice.chain(3) == lattice.chain(3)
    with pytest.raises(AttributeError):
        lattice.chain(3).sites = 4


@pytest.mark.parametrize(
    ("make", "argument", "pieces"),
    [
        (lambda: lattice.chain(0), "n", ["n:", "(0)", "1 to 128"]),
        (lambda: lattice.chain(129), "n", ["n:", "(129)", "1 to 128"]),
        (lambda: lattice.chain(2.0), "n", ["n:", "(2.0)", "give an integer"]),
        (lambda: lattice.chain(True), "n", ["n:", "(True)", "give an integer"]),
        (lambda: lattice.ring("4"), "n", ["n:", "('4')", "give an integer"]),
        (lambda: lattice.ladder(65), "rungs", ["rungs:", "(65)", "1 to 64"]),
        (lambda: lattice.square(12, 11), "rows, columns", ["rows, columns:", "(132)", "at most 128"]),
        (lambda: lattice.square(2, 2, "yes"), "periodic", ["periodic:", "('yes')", "periodic=True"]),
        (lambda: lattice.complete(-1), "n", ["n:", "(-1)", "1 to 128"]),
        (lambda: lattice.from_bonds([(0, 1), (1, 0)]), "bonds", ["bonds:", "(0, 1)", "list it once"]),
        (lambda: lattice.from_bonds([(1, 1)]), "bonds", ["bonds:", "(1, 1)", "leave it out"]),
        (lambda: lattice.from_bonds([(0, 1, 2)]), "bonds", ["bonds:", "(0, 1, 2)", "(i, j)"]),
        (lambda: lattice.from_bonds([3]), "bonds", ["bonds:", "(3)", "(i, j)"]),
        (lambda: lattice.from_bonds([(0, -1)]), "bonds", ["bonds:", "(0, -1)", "0 to 127"]),
        (lambda: lattice.from_bonds([(0, 3)], sites=3), "bonds", ["bonds:", "(0, 3)", "sites"]),
        (lambda: lattice.from_bonds([]), "pairs", ["pairs:", "([])", "give `sites`"]),
        (lambda: lattice.from_bonds(None), "pairs", ["pairs:", "(None)", "write"]),
        (lambda: lattice.Lattice(3, ((1, 0),)), "bonds", ["bonds:", "(1, 0)", "from_bonds"]),
    ],
)
def test_bad_input_is_refused_with_argument_value_and_remedy(make, argument, pieces):
    with pytest.raises(errors.ModelError) as caught:
        make()
    assert caught.value.argument == argument
    for piece in pieces:
        assert piece in str(caught.value)
