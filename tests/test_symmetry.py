"""Symmetries: known ones of known models, dense matrices as oracle, and drift where a part breaks one."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
import strategies
import trueturn as tt
from trueturn import errors
from trueturn.symmetry import symmetries


def commute(a, b):
    # Sums of at most 64 products of numbers of up to 50: rounding below 64 · 2500 · 2^-52 < 1e-10.
    return np.max(np.abs(a @ b - b @ a)) < 1e-10


def total(letter, n):
    return sum(oracle.pauli(f"{letter}_{q}", n) for q in range(n)) / 2


def product(letter, n):
    return oracle.pauli(" ".join(f"{letter}_{q}" for q in range(n)), n)


def permutation(names, n):
    """The matrix that moves qubit q to names[q]."""
    made = np.zeros((2**n, 2**n))
    for state in range(2**n):
        made[sum((state >> q & 1) << names[q] for q in range(n)), state] = 1
    return made


def expected(matrix, n):
    """Every symmetry decided with matrices alone."""
    x, y, z = (total(letter, n) for letter in "XYZ")
    flip = product("Y", n)
    found = {
        "particle number": commute(matrix, z),
        "spin x": commute(matrix, x),
        "spin y": commute(matrix, y),
        "spin z": commute(matrix, z),
        "spin squared": commute(matrix, x @ x + y @ y + z @ z),
        "parity x": commute(matrix, product("X", n)),
        "parity y": commute(matrix, product("Y", n)),
        "parity z": commute(matrix, product("Z", n)),
        "conjugation": np.max(np.abs(matrix - matrix.conj())) < 1e-10,
        "spin-flip time reversal": np.max(np.abs(flip @ matrix.conj() @ flip.conj().T - matrix)) < 1e-10,
    }
    if n % 2 == 0:
        up = sum(oracle.pauli(f"Z_{q}", n) for q in range(0, n, 2))
        down = sum(oracle.pauli(f"Z_{q}", n) for q in range(1, n, 2))
        found["electron spin z"] = commute(matrix, up - down)
    if n > 1:
        found["reflection"] = commute(matrix, permutation([n - 1 - q for q in range(n)], n))
    return found


def translations(matrix, n):
    return [d for d in range(1, n) if commute(matrix, permutation([(q + d) % n for q in range(n)], n))]


MODELS = [
    tt.model.heisenberg(tt.lattice.ring(5), 1.0),
    tt.model.heisenberg(tt.lattice.ring(4), 1.0, z=0.5),
    tt.model.exchange(tt.lattice.chain(4), xx=1, yy=1, zz=0.5),
    tt.model.exchange(tt.lattice.ring(4), xx=1, yy=0.4, zz=0.5, y=0.3),
    tt.model.ising(tt.lattice.ring(6), zz=-1, x=0.7),
    tt.model.ising(tt.lattice.chain(3), zz=-1, x=0.7, z=0.1),
    tt.model.hubbard(tt.lattice.chain(3), hopping=1.0, repulsion=4.0),
    tt.model.hubbard(tt.lattice.ring(3), hopping=1.0, repulsion=4.0, potential=0.3),
    tt.Operator("X_0 Y_1 - Y_0 X_1"),
    tt.Operator("X_0 Y_1 Z_2 + Y_0 Z_1 X_2 + Z_0 X_1 Y_2 - Y_0 X_1 Z_2 - X_0 Z_1 Y_2 - Z_0 Y_1 X_2"),
    tt.Operator("Z_0 Z_2 + Z_1 Z_3 + 0.5 X_0 + 0.5 X_2 + 0.2 X_1 + 0.2 X_3"),
    tt.Operator("1.5", qubits=2),
    tt.Operator("X_0"),
]


def check(h):
    partition = tt.Partition.of(h, "commuting")
    found = symmetries(h, partition)
    matrices = [oracle.dense(h), *map(oracle.dense, partition.parts)]
    rows = [expected(matrix, h.qubits) for matrix in matrices]
    for name, kept in rows[0].items():
        assert found[name].kept == kept, name
        assert found[name].parts == tuple(row[name] for row in rows[1:]), name
    shifts = [row.name for row in found if row.name.startswith("translation by ")]
    assert len(found) == len(rows[0]) + len(shifts)
    assert len(shifts) == (h.qubits > 1)
    for name in shifts:
        shift = int(name.removeprefix("translation by "))
        moves = [translations(matrix, h.qubits) for matrix in matrices]
        assert shift == min(moves[0], default=1)
        assert (found[name].kept, *found[name].parts) == tuple(shift in each for each in moves)


@pytest.mark.parametrize("h", MODELS)
def test_models_agree_with_dense_matrices(h):
    check(h)


@given(h=strategies.operators(max_qubits=4, max_terms=4, values=st.sampled_from([1.0, -1.0, 0.5])))
@settings(max_examples=40)
def test_any_operators_agree_with_dense_matrices(h):
    check(h)


@pytest.mark.parametrize("h", MODELS[:8])
def test_quantities_are_the_operators_they_claim_to_be(h):
    n = h.qubits
    x, y, z = (total(letter, n) for letter in "XYZ")
    found = symmetries(h)
    quantities = {row.name: oracle.dense(row.quantity) for row in found if row.quantity is not None}
    # entries are sums of at most 3 · 36 numbers below 10: rounding below 1e-12
    assert np.allclose(quantities["spin squared"], x @ x + y @ y + z @ z, atol=1e-12)
    assert np.allclose(quantities["spin x"], x, atol=1e-12)
    assert np.allclose(quantities["particle number"].diagonal(), [k.bit_count() for k in range(2**n)], atol=1e-12)
    if n % 2 == 0:
        up, down = 0b010101, 0b101010
        halves = [((k & up).bit_count() - (k & down).bit_count()) / 2 for k in range(2**n)]
        assert np.allclose(quantities["electron spin z"].diagonal(), halves, atol=1e-12)


def test_known_models_have_the_symmetries_of_the_textbooks():
    # common practice
    spins = {"spin x", "spin y", "spin z", "spin squared"}
    everything = {"parity x", "parity y", "parity z", "translation by 1", "reflection", "conjugation"}
    heisenberg = symmetries(tt.model.heisenberg(tt.lattice.ring(6), 1.0))
    assert spins | everything | {"spin-flip time reversal"} <= set(heisenberg.kept)
    xxz = set(symmetries(tt.model.exchange(tt.lattice.ring(6), xx=1, yy=1, zz=0.5)).kept)
    assert xxz & spins == {"spin z"}
    field = set(symmetries(tt.model.heisenberg(tt.lattice.ring(6), 1.0, z=0.5)).kept)
    assert field & spins == {"spin z", "spin squared"} and "spin-flip time reversal" not in field
    ising = set(symmetries(tt.model.ising(tt.lattice.ring(6), zz=-1, x=0.7)).kept)
    assert ising & (spins | everything) == {"parity x", "translation by 1", "reflection", "conjugation"}
    hubbard = set(symmetries(tt.model.hubbard(tt.lattice.square(2, 2), hopping=1.0, repulsion=4.0)).kept)
    assert {"particle number", "electron spin z", "parity z", "conjugation"} <= hubbard
    assert not hubbard & {"spin x", "spin y", "spin squared"}


def spread(h, partition, quantity, start):
    """How far an expectation moves from its start over ten Strang steps."""
    state = tt.State.product(start)
    first = state.expectation(quantity)
    step = tt.formula("strang").rotations(partition, 0.3, 1)
    worst = 0.0
    for _ in range(10):
        state.apply(step)
        worst = max(worst, abs(state.expectation(quantity) - first))
    return worst


@pytest.mark.parametrize(
    ("h", "keeping", "breaking", "name", "start"),
    [
        (tt.model.heisenberg(tt.lattice.ring(6), 1.0, z=0.5), "bond", "axis", "spin z", "010011"),
        (tt.model.heisenberg(tt.lattice.ring(6), 1.0, z=0.5), "bond", "axis", "spin squared", "01+0i1"),
        (tt.model.heisenberg(tt.lattice.chain(6), 1.0), "bond", "axis", "spin x", "0+-01+"),
        (tt.model.ising(tt.lattice.ring(6), zz=-1, x=0.7), "commuting", None, "parity x", "++-0+1"),
    ],
)
def test_a_part_that_breaks_a_symmetry_lets_its_quantity_drift(h, keeping, breaking, name, start):
    start = [{"i": "+i"}.get(letter, letter) for letter in start]
    kept = symmetries(h, tt.Partition.of(h, keeping))[name]
    assert kept.kept and not kept.broken_by
    # Some 300 rotations, each off by 5 u in the 2-norm, and a quantity of norm at most 12: below 1e-11.
    assert spread(h, tt.Partition.of(h, keeping), kept.quantity, start) < 1e-11
    if breaking is not None:
        lost = symmetries(h, tt.Partition.of(h, breaking))[name]
        assert lost.kept and lost.broken_by
        assert spread(h, tt.Partition.of(h, breaking), lost.quantity, start) > 1e-3


def test_hubbard_parts_by_hopping_keep_the_electrons_and_scattered_strings_lose_them():
    # X Z X and Y Z Y of one hopping commute: together they move an electron, alone they make pairs.
    h = tt.model.hubbard(tt.lattice.chain(3), hopping=1.0, repulsion=4.0)
    single = tt.Partition.of(h, "single")
    pairs = {}
    for part in single.parts:
        if part.x_masks[0]:
            pairs.setdefault(part.x_masks[0], []).append(part)
    rest = [part for part in single.parts if not part.x_masks[0]]
    kept = tt.Partition([a + b for a, b in pairs.values()] + [*rest, tt.Operator(str(single.identity), qubits=6)])
    for name in ("particle number", "electron spin z"):
        assert not symmetries(h, kept)[name].broken_by
        assert symmetries(h, single)[name].broken_by
    number = symmetries(h)["particle number"].quantity
    # 10 Strang steps of 17 parts: bound as above
    assert spread(h, kept, number, "100100") < 1e-11
    assert spread(h, single, number, "100100") < 1e-11  # as given, both stand side by side: no other circuit
    assert spread(h, single.shuffled(1), number, "100100") > 1e-3


def test_endangered_names_what_a_partition_breaks():
    h = tt.model.heisenberg(tt.lattice.ring(4), 1.0)
    assert symmetries(h).endangered == ()
    axis = symmetries(h, tt.Partition.of(h, "axis"))
    assert axis.endangered == ("particle number", "spin x", "spin y", "spin z", "spin squared")
    bond = symmetries(h, tt.Partition.of(h, "bond"))
    assert bond.endangered == ("translation by 1",)
    assert bond["translation by 1"].broken_by == (0, 1)
    assert [row.name for row in bond] == [row.name for row in bond.rows] and len(bond) == 13


def test_the_table_reads_as_printed():
    h = tt.model.heisenberg(tt.lattice.ring(3), 1.0)
    lines = repr(symmetries(h, tt.Partition.of(h, "single"))).splitlines()
    assert lines[0] == "symmetry                 Hamiltonian  parts"
    assert lines[1] == "particle number          keeps        6 of 9 break (0, 1, 3, 4, 6, 7); may drift"
    assert lines[5] == "spin squared             keeps        all break (0, 1, 2, 3, 4, 5, 6, 7, …); may drift"
    assert lines[9] == "translation by 1         keeps        all break (0, 1, 2, 3, 4, 5, 6, 7, …); may be lost"
    assert lines[11] == "conjugation              keeps        all keep"
    assert repr(symmetries(h)).splitlines()[1] == "particle number          keeps"


def test_rounded_coefficients_do_not_break_a_symmetry():
    h = tt.Operator("0.3 X_0 X_1") + 0.1 * tt.Operator("Y_0 Y_1") + 0.2 * tt.Operator("Y_0 Y_1")
    assert h.coefficients[0] != h.coefficients[1]  # 0.1 + 0.2 misses 0.3 by one rounding
    moved = h + tt.Operator("0.3 X_1 X_2 + 0.3 Y_1 Y_2", qubits=3)
    assert symmetries(moved)["reflection"].kept
    assert not symmetries(moved + tt.Operator("1e-14 Z_0"))["reflection"].kept


def test_a_hundred_and_twenty_eight_qubits():
    h = tt.model.heisenberg(tt.lattice.ring(128), 1.0, z=0.5)
    found = symmetries(h, tt.Partition.of(h, "axis"))
    assert found["spin z"].kept and found["spin z"].broken_by == (0, 1)
    assert found["spin squared"].kept and found["spin squared"].broken_by == (0, 1, 2)
    assert found["translation by 1"].kept and not found["spin x"].kept
    shifted = tt.model.heisenberg(tt.lattice.ring(128), 1.0, z=[0.5, 0.1, 0.1, 0.1] * 32)
    assert symmetries(shifted)["translation by 4"].kept


def test_further_symmetries_are_judged_too():
    h = tt.model.heisenberg(tt.lattice.chain(4), [1.0, 0.3, 1.0])
    found = symmetries(
        h,
        tt.Partition.of(h, "bond"),
        also={"first spin": tt.Operator("Z_0"), "halves": {0: 2, 1: 3, 2: 0, 3: 1}, "pair": {0: 1, 1: 0}},
    )
    assert [found[name].kept for name in ("first spin", "halves", "pair")] == [False, False, False]
    assert found["pair"].parts == (True, False)
    assert found["first spin"].quantity == tt.Operator("Z_0")


H = tt.Operator("X_0 X_1 + Z_0")


@pytest.mark.parametrize(
    ("make", "kind", "pieces"),
    [
        (lambda: symmetries("X_0"), errors.OperatorError, ["operator:", "('X_0')", "trueturn.Operator"]),
        (lambda: symmetries(H, "single"), errors.PartitionError, ["partition:", "('single')", "Partition.of"]),
        (
            lambda: symmetries(H, tt.Partition([tt.Operator("X_0 X_1")])),
            errors.PartitionError,
            ["parts: do not sum", "Z_0 lacks 1.0"],
        ),
        (lambda: symmetries(H, also=[1]), errors.ArgumentError, ["also:", "([1])", "{name:"]),
        (lambda: symmetries(H, also={"spin z": H}), errors.ArgumentError, ["also:", "('spin z')", "another"]),
        (lambda: symmetries(H, also={"swap": 3}), errors.OperatorError, ["also:", "'swap'", "(3)", "{old: new}"]),
        (lambda: symmetries(H, also={"swap": {0: 1}}), errors.OperatorError, ["'swap'", "({0: 1})", "permute"]),
        (lambda: symmetries(H, also={"swap": {0: 2, 2: 0}}), errors.OperatorError, ["'swap'", "(2)", "0 to 1"]),
        (lambda: symmetries(H)["spinz"], errors.ArgumentError, ["name:", "('spinz')", "'spin z'"]),
    ],
)
def test_bad_input_is_refused_with_argument_value_and_remedy(make, kind, pieces):
    with pytest.raises(kind) as caught:
        make()
    for piece in pieces:
        assert piece in str(caught.value)
