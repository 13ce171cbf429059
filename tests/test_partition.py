"""Partitions: parts commute inside and sum exactly to the Hamiltonian; each rule makes what it promises."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
import strategies
from trueturn import Operator, Partition, errors, lattice, model
from trueturn.edge_colouring import colour_edges

RULES = (
    "single",
    "magnitude",
    "lexicographic",
    "commuting",
    "commuting-largest-first",
    "commuting-smallest-last",
    "commuting-saturation",
    "commuting-fewest",
    "bond",
    "axis",
    "gate-saving",
    "error-saving",
)


def texts(partition):
    return [str(part) for part in partition.parts]


@given(operator=strategies.operators(max_qubits=4, max_terms=12), rule=st.sampled_from(RULES))
def test_every_rule_distributes_the_terms_into_commuting_parts(operator, rule):
    if rule == "bond" and any((x | z).bit_count() > 2 for x, z in terms_of(operator)):
        with pytest.raises(errors.PartitionError):
            Partition.of(operator, rule)
        return
    partition = Partition.of(operator, rule)
    assert partition.operator() == operator
    assert partition.identity == operator.identity_coefficient
    assert sum(map(len, partition.parts)) == len(operator.without_identity())
    for part in partition.parts:
        assert part.qubits == operator.qubits
        matrices = [oracle.string(x, z, part.qubits) for x, z in terms_of(part)]
        for left, right in itertools.combinations(matrices, 2):
            assert np.array_equal(left @ right, right @ left)  # entries are units: no rounding
    assert partition == Partition.of(operator, rule)


@given(
    operator=strategies.operators(max_qubits=4, max_terms=12),
    rule=st.sampled_from(
        ("single", "commuting", "axis", "commuting-saturation", "commuting-smallest-last", "error-saving")
    ),
)
def test_the_given_order_is_kept_inside_a_part(operator, rule):
    place = {string: number for number, string in enumerate(terms_of(operator))}
    for part in Partition.of(operator, rule).parts:
        numbers = [place[string] for string in terms_of(part)]
        assert numbers == sorted(numbers)


def terms_of(operator):
    return list(zip(operator.x_masks.tolist(), operator.z_masks.tolist(), strict=True))


def test_single_and_magnitude_put_each_term_alone():
    h = Operator("0.5 X_0 - 2.0 Z_0 + 0.5 Y_0 + 1.0 X_1 + 7")
    assert texts(Partition.of(h, "single")) == ["0.5 X_0", "-2.0 Z_0", "0.5 Y_0", "1.0 X_1"]
    assert texts(Partition.of(h, "magnitude")) == ["-2.0 Z_0", "1.0 X_1", "0.5 X_0", "0.5 Y_0"]


def test_lexicographic_sorts_by_letters_from_qubit_0_on():
    h = Operator("Z_0 + X_0 Z_1 + Y_0 + X_1 + X_0 + X_0 Y_1 + X_0 X_1")
    # II < IX < XI < XX < XY < XZ < YI < ZI
    expected = ["1.0 X_1", "1.0 X_0", "1.0 X_0 X_1", "1.0 X_0 Y_1", "1.0 X_0 Z_1", "1.0 Y_0", "1.0 Z_0"]
    assert texts(Partition.of(h, "lexicographic")) == expected


def test_axis_takes_x_then_y_then_z_then_mixed_strings():
    h = Operator("Z_0 + X_0 Y_1 + Z_0 Z_1 + Y_0 Y_1 + X_0 X_1 + X_1 + Z_0 X_1")
    assert texts(Partition.of(h, "axis")) == [
        "1.0 X_0 X_1 + 1.0 X_1",
        "1.0 Y_0 Y_1",
        "1.0 Z_0 + 1.0 Z_0 Z_1",
        "1.0 X_0 Y_1 + 1.0 Z_0 X_1",
    ]


def test_axis_on_the_ring_gives_xx_yy_and_zz_with_fields():
    h = model.heisenberg(lattice.ring(5), 1.0, z=0.3)
    assert [len(part) for part in Partition.of(h, "axis").parts] == [5, 5, 10]


def test_commuting_finds_two_parts_for_the_transverse_field_chain():
    h = model.ising(lattice.chain(6), zz=-1, x=0.7)
    assert [len(part) for part in Partition.of(h, "commuting").parts] == [5, 6]


def test_bond_is_even_odd_on_a_chain_with_all_strings_of_a_bond():
    h = model.heisenberg(lattice.chain(5), 1.0)
    even, odd = Partition.of(h, "bond").parts
    assert even.support() == (0, 1, 2, 3)
    assert odd.support() == (1, 2, 3, 4)
    assert len(even) == len(odd) == 6


@pytest.mark.parametrize(
    ("shape", "colours"),
    [
        (lattice.chain(7), 2),
        (lattice.ring(6), 2),
        (lattice.ring(5), 3),
        (lattice.ladder(4), 3),
        (lattice.square(3, 4), 4),
        (lattice.square(4, 4, periodic=True), 4),
        (lattice.complete(6), 5),
        (lattice.complete(5), 5),
        # the worst order for a greedy colouring of a path: its ends first
        (lattice.from_bonds([(0, 1), (3, 4), (1, 2), (2, 3)]), 2),
    ],
)
def test_bond_uses_few_colours(shape, colours):
    parts = Partition.of(model.heisenberg(shape, 1.0), "bond").parts
    assert len(parts) == colours
    for part in parts:
        bonds = {x | z for x, z in terms_of(part)}
        assert sum(bond.bit_count() for bond in bonds) == len(part.support())  # disjoint


@given(st.data())
def test_edges_are_coloured_properly_with_at_most_one_colour_more_than_the_degree(data):
    vertices = data.draw(st.integers(2, 10))
    possible = list(itertools.combinations(range(vertices), 2))
    edges = data.draw(st.lists(st.sampled_from(possible), unique=True))
    colours = colour_edges(edges)
    at = [(vertex, colour) for edge, colour in zip(edges, colours, strict=True) for vertex in edge]
    assert len(set(at)) == len(at)
    degrees = [sum(vertex in edge for edge in edges) for vertex in range(vertices)]
    assert len(set(colours)) <= max(degrees) + 1


@given(st.data())
def test_bipartite_graphs_need_no_more_colours_than_the_degree(data):
    possible = list(itertools.product(range(5), range(5, 10)))
    edges = data.draw(st.lists(st.sampled_from(possible), unique=True, min_size=1))
    degrees = [sum(vertex in edge for edge in edges) for vertex in range(10)]
    assert len(set(colour_edges(edges))) == max(degrees)  # König 1916, from memory


def test_bond_puts_strings_that_do_not_commute_into_further_parts():
    h = Operator("X_0 X_1 + X_0 Y_1 + Y_0 X_1 + Z_2 Z_3 + Z_1 Z_2")
    assert texts(Partition.of(h, "bond")) == [
        "1.0 X_0 X_1 + 1.0 Z_2 Z_3",
        "1.0 X_0 Y_1 + 1.0 Y_0 X_1",
        "1.0 Z_1 Z_2",
    ]


def test_bond_puts_fields_after_the_bonds():
    h = Operator("X_0 + Z_0 Z_1 + Z_1 + X_1 + Z_0")
    assert texts(Partition.of(h, "bond")) == ["1.0 Z_0 Z_1", "1.0 X_0 + 1.0 Z_1", "1.0 X_1 + 1.0 Z_0"]
    fields = model.ising(lattice.chain(3), zz=1, x=1, z=1)
    assert texts(Partition.of(fields, "bond"))[2:] == [
        "1.0 X_0 + 1.0 X_1 + 1.0 X_2",
        "1.0 Z_0 + 1.0 Z_1 + 1.0 Z_2",
    ]


def test_identities_are_taken_out_of_given_parts():
    partition = Partition([Operator("X_0 + 1.5"), Operator("2.0", qubits=1), Operator("Z_0 - 0.25")])
    assert texts(partition) == ["1.0 X_0", "1.0 Z_0"]
    assert partition.identity == 3.25
    assert partition.operator() == Operator("X_0 + Z_0 + 3.25")
    assert partition.rule == "given"


def test_an_operator_without_strings_has_no_parts():
    for operator in (Operator("2.5", qubits=3), model.ising(lattice.chain(3), zz=0, x=0)):
        for rule in RULES:
            partition = Partition.of(operator, rule)
            assert partition.parts == ()
            assert partition.operator() == operator
            assert partition.qubits == 3
    assert Partition([Operator("2.5", qubits=3)]).parts == ()


def test_shuffled_is_a_fixed_arrangement_for_each_seed():
    h = model.exchange(lattice.chain(6), xx=1, yy=0.5, zz=0.25, x=0.1)
    partition = Partition.of(h, "single")
    shuffled = partition.shuffled(7)
    assert shuffled == partition.shuffled(7)
    assert shuffled != partition.shuffled(8)
    assert shuffled != partition
    assert sorted(texts(shuffled)) == sorted(texts(partition))
    assert shuffled.operator() == h
    # Recorded, not published: Mersenne Twister draws are the same everywhere.
    five = Partition.of(Operator("X_0 + X_1 + X_2 + X_3 + X_4"), "single")
    assert [part.support()[0] for part in five.shuffled(0).parts] == [2, 0, 1, 3, 4]


def test_reordered_takes_part_by_part():
    partition = Partition.of(Operator("X_0 + Y_0 + Z_0"), "single")
    assert texts(partition.reordered(np.array([2, 0, 1]))) == ["1.0 Z_0", "1.0 X_0", "1.0 Y_0"]
    assert partition.reordered([0, 1, 2]) == partition
    assert hash(partition.reordered([0, 1, 2])) == hash(partition)
    assert partition.reordered([2, 1, 0]).rule == "single reordered"


def test_require_sum_accepts_divided_strings_and_refuses_missing_ones():
    partition = Partition([Operator("0.1 X_0 + Z_1"), Operator("0.2 X_0 + Y_1")])
    partition.require_sum(Operator("0.3 X_0 + Z_1 + Y_1"))  # 0.1 + 0.2 misses 0.3 by one rounding
    with pytest.raises(errors.PartitionError, match=r"parts: do not sum.*Y_1 lacks 0.5.*; add what is missing"):
        partition.require_sum(Operator("0.3 X_0 + Z_1 + 1.5 Y_1"))
    with pytest.raises(errors.PartitionError, match=r"the identity lacks 1.0"):
        partition.require_sum(Operator("0.3 X_0 + Z_1 + Y_1 + 1"))
    with pytest.raises(errors.PartitionError, match=r"parts: act on 2 qubits.*on 3; build every part with qubits=3"):
        partition.require_sum(Operator("0.3 X_0 + Z_1 + Y_1", qubits=3))


PARTITION = Partition.of(Operator("X_0 + Y_0 + Z_0"), "single")


@pytest.mark.parametrize(
    ("make", "argument", "pieces"),
    [
        (lambda: Partition([]), "parts", ["parts:", "([])", "Partition.of(operator, rule)"]),
        (
            lambda: Partition(Operator("X_0")),
            "parts",
            ["parts:", "Operator('1.0 X_0'", "sequence of Operators"],
        ),
        (lambda: Partition(5), "parts", ["parts:", "(5)", "sequence of Operators"]),
        (lambda: Partition(["X_0"]), "parts", ["part 0", "('X_0')", "sequence of Operators"]),
        (
            lambda: Partition([Operator("Z_0"), Operator("Z_1 + X_0 Y_2 + Z_0 Z_1 Z_2 + X_1")]),
            "parts",
            ["qubits=3", "part 1 acts on 3 qubits and part 0 on 1"],
        ),
        (
            lambda: Partition([Operator("Z_0", qubits=2), Operator("X_0 Y_1 + Z_0")]),
            "parts",
            ["X_0 Y_1 and Z_0 in part 1 do not commute", "different parts", "'commuting'"],
        ),
        (lambda: Partition.of("X_0", "single"), "operator", ["operator:", "('X_0')", "trueturn.Operator"]),
        (
            lambda: Partition.of(Operator("X_0"), "bonds"),
            "rule",
            ["('bonds')", "did you mean 'bond'?", "'axis'"],
        ),
        (
            lambda: Partition.of(Operator("X_0"), "commuting-saturated"),
            "rule",
            ["('commuting-saturated')", "did you mean 'commuting-saturation'?"],
        ),
        (lambda: Partition.of(Operator("X_0"), "lexicographical"), "rule", ["did you mean 'lexicographic'?"]),
        (lambda: Partition.of(Operator("X_0"), "gates-saving"), "rule", ["did you mean 'gate-saving'?"]),
        (lambda: Partition.of(Operator("X_0"), "error saving"), "rule", ["did you mean 'error-saving'?"]),
        (lambda: Partition.of(Operator("X_0"), 3), "rule", ["rule:", "(3)", "choose one of 'single'"]),
        (
            lambda: Partition.of(Operator("Z_0 Z_1 + X_0 Y_1 Z_3"), "bond"),
            "rule",
            ["X_0 Y_1 Z_3", "3", "use 'commuting', 'axis', 'single' or 'magnitude'"],
        ),
        (lambda: PARTITION.shuffled(-1), "seed", ["seed:", "(-1)", "at least 0"]),
        (lambda: PARTITION.shuffled(1.0), "seed", ["seed:", "(1.0)", "at least 0"]),
        (lambda: PARTITION.reordered([0, 1]), "indices", ["indices:", "([0, 1])", "0 to 2 once"]),
        (lambda: PARTITION.reordered([0, 1, 1]), "indices", ["indices:", "([0, 1, 1])", "0 to 2 once"]),
        (lambda: PARTITION.reordered(["a", 1, 2]), "indices", ["indices:", "('a')", "0 to 2 once"]),
        (lambda: PARTITION.reordered(3), "indices", ["indices:", "(3)", "0 to 2 once"]),
    ],
)
def test_bad_input_is_refused_with_argument_value_and_remedy(make, argument, pieces):
    with pytest.raises(errors.PartitionError) as caught:
        make()
    assert caught.value.argument == argument
    for piece in pieces:
        assert piece in str(caught.value)


def test_an_unknown_rule_carries_the_choices():
    with pytest.raises(errors.PartitionError) as caught:
        Partition.of(Operator("X_0"), "colour")
    assert caught.value.choices == RULES
