"""Colourings of strings: proper, never worse than what theorems promise, better than greedy where greedy is bad."""

from __future__ import annotations

import random

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import strategies
from trueturn import Operator, Partition, lattice, model
from trueturn.partition_rules import part_counts
from trueturn.vertex_colouring import STRATEGIES, Conflicts, colour_strings


def graph(operator):
    """Which strings do not commute, from the definition: an odd number of qubits with different letters."""
    strings = list(zip(operator.x_masks.tolist(), operator.z_masks.tolist(), strict=True))
    return np.array(
        [[((a & d) ^ (b & c)).bit_count() % 2 == 1 for c, d in strings] for a, b in strings], dtype=bool
    ).reshape(len(strings), len(strings))


def degeneracy(edges):
    """The largest least degree met while the vertex of least degree is taken away again and again."""
    left, worst = list(range(len(edges))), 0
    while left:
        degrees = [int(edges[v][left].sum()) for v in left]
        worst = max(worst, min(degrees))
        left.pop(degrees.index(min(degrees)))
    return worst


def crown(pairs):
    """Strings whose conflicts make a crown graph, X_k against Z_j for j ≠ k, each pair side by side.

    Greedy colouring in this order needs a colour for each pair; two suffice.
    """
    everyone = (1 << pairs) - 1
    terms = []
    for k in range(pairs):
        terms += [(1 << k, 0), (0, everyone & ~(1 << k))]
    return Operator.from_masks([x for x, _ in terms], [z for _, z in terms], [1.0] * len(terms), pairs)


@given(operator=strategies.operators(max_qubits=5, max_terms=25, values=st.just(1.0)))
def test_colourings_are_proper_and_keep_their_theorems(operator):
    operator = operator.without_identity()
    edges = graph(operator)
    conflicts = Conflicts(operator)
    assert np.array_equal(conflicts.degrees(), edges.sum(axis=1))
    for strategy in STRATEGIES:
        colours = np.array(colour_strings(operator, strategy), dtype=int)
        assert not np.any(edges & (colours[:, None] == colours[None, :]))
        assert sorted(set(colours.tolist())) == list(range(len(set(colours.tolist()))))
        count = len(set(colours.tolist()))
        if strategy == "largest-first" and len(operator):
            degrees = sorted(edges.sum(axis=1).tolist(), reverse=True)
            # D. J. A. Welsh, M. B. Powell (1967), from memory
            assert count <= max(min(degree + 1, place) for place, degree in enumerate(degrees, start=1))
        if strategy == "smallest-last" and len(operator):
            assert count <= degeneracy(edges) + 1  # D. W. Matula, L. L. Beck (1983), from memory


@given(seed=st.integers(0, 2**20))
def test_saturation_finds_two_colours_wherever_two_suffice(seed):
    # D. Brélaz (1979), from memory. X strings commute, and so do Z strings.
    draw = random.Random(seed)
    terms = [(draw.randrange(1, 64), 0) if draw.random() < 0.5 else (0, draw.randrange(1, 64)) for _ in range(24)]
    operator = Operator.from_masks([x for x, _ in terms], [z for _, z in terms], [1.0] * 24, 6)
    assert len(Partition.of(operator, "commuting-saturation").parts) <= 2


def test_strategies_beat_greedy_on_a_crown():
    operator = crown(6)
    counts = {
        rule: len(Partition.of(operator, rule).parts)
        for rule in ("commuting", "commuting-saturation", "commuting-fewest")
    }
    assert counts == {"commuting": 6, "commuting-saturation": 2, "commuting-fewest": 2}


@given(operator=strategies.operators(max_qubits=4, max_terms=20))
def test_fewest_is_the_least_of_all_strategies(operator):
    counts = {
        rule: len(Partition.of(operator, rule).parts)
        for rule in ("commuting", *(f"commuting-{strategy}" for strategy in STRATEGIES))
    }
    assert part_counts(operator) == counts
    assert len(Partition.of(operator, "commuting-fewest").parts) == min(counts.values())


@pytest.mark.parametrize("strategy", STRATEGIES)
def test_parts_are_ordered_by_their_first_terms(strategy):
    h = model.hubbard(lattice.square(2, 3), hopping=1.0, repulsion=4.0)
    place = {string: k for k, string in enumerate(zip(h.x_masks, h.z_masks, strict=True))}
    parts = Partition.of(h, f"commuting-{strategy}").parts
    firsts = [min(place[s] for s in zip(part.x_masks, part.z_masks, strict=True)) for part in parts]
    assert firsts == sorted(firsts)


@pytest.mark.parametrize("strategy", STRATEGIES)
def test_strings_on_128_qubits_are_coloured(strategy):
    h = model.ising(lattice.chain(128), zz=1.0, x=0.5)
    assert [len(part) for part in Partition.of(h, f"commuting-{strategy}").parts] == [127, 128]
