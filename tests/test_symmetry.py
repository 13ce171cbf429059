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


def annihilator(q, n):
    """Orbital q in the Jordan-Wigner picture: |1> is an electron."""
    before = " ".join(f"Z_{k}" for k in range(q))
    return (oracle.pauli(f"{before} X_{q}", n) + 1j * oracle.pauli(f"{before} Y_{q}", n)) / 2


def electron_spins(n):
    raising = sum(annihilator(q, n).conj().T @ annihilator(q + 1, n) for q in range(0, n, 2))
    lowering = raising.conj().T
    z = (raising @ lowering - lowering @ raising) / 2
    return (raising + lowering) / 2, (raising - lowering) / 2j, z


def fermion_move(sites, signs, n):
    """The unitary that sends c†_q to its sign times c†_{new q}, made from occupations."""
    new = [2 * sites[q // 2] + q % 2 for q in range(n)]
    made = np.zeros((2**n, 2**n))
    for state in range(2**n):
        order = [new[q] for q in range(n) if state >> q & 1]
        swaps = sum(a > b for k, a in enumerate(order) for b in order[k + 1 :])
        minus = swaps + sum(signs[q // 2] for q in range(n) if state >> q & 1)
        made[sum(1 << q for q in order), state] = (-1) ** minus
    return made


def expected(matrix, n, electronic):
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
    if electronic:
        ex, ey, ez = electron_spins(n)
        found["electron spin x"] = commute(matrix, ex)
        found["electron spin y"] = commute(matrix, ey)
        found["electron spin squared"] = commute(matrix, ex @ ex + ey @ ey + ez @ ez)
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
    tt.model.hubbard(tt.lattice.ring(2), hopping=1.0, repulsion=4.0),
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
    n = h.qubits
    electronic = n % 2 == 0 and commute(matrices[0], total("Z", n))
    rows = [expected(matrix, n, electronic) for matrix in matrices]
    for name, kept in rows[0].items():
        assert found[name].kept == kept, name
        assert found[name].parts == tuple(row[name] for row in rows[1:]), name
    shifts = [row.name for row in found if row.name.startswith("translation by ") and "(" not in row.name]
    rectangles = [row.name for row in found if row.name.startswith("translation by ") and "(" in row.name]
    fermions = [row.name for row in found if row.name.startswith("fermion ")]
    assert len(found) == len(rows[0]) + len(shifts) + len(rectangles) + len(fermions)
    check_rectangles(found, matrices, n)
    check_fermions(found, fermions, matrices, n, electronic)
    assert len(shifts) == (h.qubits > 1)
    for name in shifts:
        shift = int(name.removeprefix("translation by "))
        moves = [translations(matrix, h.qubits) for matrix in matrices]
        assert shift == min(moves[0], default=1)
        assert (found[name].kept, *found[name].parts) == tuple(shift in each for each in moves)


def check_rectangles(found, matrices, n):
    """Each kept translation of columns has its row: the least of each rectangle."""
    columns = {}
    for rows, width in [(rows, n // rows) for rows in range(2, n) if n % rows == 0]:
        for d in [d for d in range(1, width) if width % d == 0]:
            names = [q // width * width + (q % width + d) % width for q in range(n)]
            kept = [commute(matrix, permutation(names, n)) for matrix in matrices]
            if kept[0]:
                columns[f"translation by {d} column{'s' * (d > 1)} ({rows} × {width})"] = tuple(kept[1:])
                break
    assert {row.name: row.parts for row in found if "column" in row.name and "fermion" not in row.name} == columns


def check_fermions(found, names, matrices, n, electronic):
    sites = n // 2
    if not electronic or sites < 2:
        assert not names
        return
    for name in names:
        if "column" in name or "row" in name:
            assert name.endswith("2 × 2 sites)") and sites == 4
            step = 2 if "row" in name else None
            new = [(s + 2) % 4 if step else s ^ 1 for s in range(4)]
            crossed = [s >= 2 if step else s % 2 for s in range(4)]
        elif "reflection" in name:
            new, crossed = [sites - 1 - s for s in range(sites)], [False] * sites
        else:
            step = int(name.split()[3])
            new, crossed = [(s + step) % sites for s in range(sites)], [s + step >= sites for s in range(sites)]
        signs = crossed if "antiperiodic" in name else [False] * sites
        kept = [commute(matrix, fermion_move(new, signs, n)) for matrix in matrices]
        assert (found[name].kept, *found[name].parts) == tuple(kept), name
    assert sum("column" not in name and "row" not in name for name in names) == 2


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
    assert {"electron spin x", "electron spin y", "electron spin squared"} <= hubbard
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
    assert [row.name for row in bond] == [row.name for row in bond.rows] and len(bond) == 19


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
        (lambda: symmetries(H, lattice=2), errors.ArgumentError, ["lattice:", "(2)", "lattice.ring(4)"]),
        (
            lambda: symmetries(H, lattice=tt.lattice.ring(3)),
            errors.ArgumentError,
            ["lattice:", "2 qubits (ring(3) of 3 sites)", "up and down"],
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
