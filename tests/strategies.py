"""Hypothesis strategies shared by all tests."""

from __future__ import annotations

import numpy as np
from hypothesis import strategies as st

from trueturn import Operator
from trueturn.rotations import Rotations

coefficients = st.floats(min_value=-4, max_value=4, allow_subnormal=False).filter(
    lambda value: value == 0 or abs(value) > 1e-6
)
"""Moderate numbers, so that dense comparisons have one scale; zero included."""

any_finite = st.floats(allow_nan=False, allow_infinity=False)
"""Every finite double, subnormal ones and both zeros included."""


def pauli_strings(qubits):
    """(x mask, z mask) on `qubits` qubits."""
    masks = st.integers(0, 2**qubits - 1)
    return st.tuples(masks, masks)


@st.composite
def operators(draw, max_qubits=4, max_terms=12, values=coefficients, min_terms=0, qubits=None, distinct=False):
    """Operators on up to `max_qubits` qubits (or exactly `qubits`); repeats merge unless `distinct`."""
    count = qubits or draw(st.integers(1, max_qubits))
    unique_by = (lambda term: term[0]) if distinct else None
    pairs = st.tuples(pauli_strings(count), values)
    terms = draw(st.lists(pairs, min_size=min_terms, max_size=max_terms, unique_by=unique_by))
    return Operator.from_masks([x for (x, _), _ in terms], [z for (_, z), _ in terms], [c for _, c in terms], count)


@st.composite
def commuting_operators(draw, max_qubits=5, max_terms=8):
    """Operators whose terms commute pairwise: Z strings with the axes of each qubit renamed."""
    count = draw(st.integers(1, max_qubits))
    z_masks = draw(st.lists(st.integers(0, 2**count - 1), max_size=max_terms))
    values = draw(st.lists(coefficients, min_size=len(z_masks), max_size=len(z_masks)))
    axes = draw(st.lists(st.sampled_from("XYZ"), min_size=count, max_size=count))
    to_x = sum(1 << qubit for qubit, axis in enumerate(axes) if axis in "XY")
    to_z = sum(1 << qubit for qubit, axis in enumerate(axes) if axis in "YZ")
    return Operator.from_masks([mask & to_x for mask in z_masks], [mask & to_z for mask in z_masks], values, count)


@st.composite
def states(draw, qubits):
    """Normalised complex vectors of length 2**qubits, from a drawn seed."""
    generator = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    vector = generator.normal(size=2**qubits) + 1j * generator.normal(size=2**qubits)
    return vector / np.linalg.norm(vector)


@st.composite
def circuits(draw, max_qubits=5, max_count=12, qubits=None):
    """Lists of rotations with a global phase; angles up to 50 rad, zero included."""
    count = qubits or draw(st.integers(1, max_qubits))
    turns = st.floats(-50, 50, allow_subnormal=False)
    listed = draw(st.lists(st.tuples(pauli_strings(count), turns), max_size=max_count))
    return Rotations(
        [x for (x, _), _ in listed], [z for (_, z), _ in listed], [t for _, t in listed], count, draw(turns)
    )


@st.composite
def pair_circuits(draw, max_qubits=4):
    """Circuits of mostly two-qubit strings, so that pairs join and ladders meet, with repeated and nested blocks."""
    count = draw(st.integers(2, max_qubits))
    angles = st.floats(-4, 4, allow_subnormal=False)
    letters = st.sampled_from([(1, 0), (1, 1), (0, 1)])

    def piece(drawn):
        x = z = 0
        for qubit, (has_x, has_z) in drawn.items():
            x |= has_x << qubit
            z |= has_z << qubit
        return x, z

    strings = st.dictionaries(st.integers(0, count - 1), letters, min_size=1, max_size=2).map(piece)
    made = Rotations([], [], [], count, draw(angles))
    for _ in range(draw(st.integers(1, 3))):
        listed = draw(st.lists(st.tuples(strings, angles), max_size=7))
        block = Rotations([x for (x, _), _ in listed], [z for (_, z), _ in listed], [t for _, t in listed], count)
        if draw(st.booleans()):
            block = (block + block.times(2)).times(draw(st.integers(0, 3)))
        made = made + block.times(draw(st.integers(1, 4)))
    return made


gate_options = st.fixed_dictionaries(
    {
        "ladder": st.sampled_from(["staircase", "balanced", "hub"]),
        "order": st.sampled_from(["ascending", "z-first"]),
        "join_pairs": st.booleans(),
        "native": st.sampled_from(["cx", "cz", "zz"]),
    }
)
"""How circuits become gates: keywords of `Rotations.cost`."""


@st.composite
def framed(draw, inner):
    """A circuit that ends in a Clifford and a relabelling."""
    circuit = draw(inner)
    strings = draw(st.lists(pauli_strings(circuit.qubits), max_size=5))
    turns = [draw(st.integers(-3, 3)) * np.pi / 4 for _ in strings]
    clifford = Rotations([x for x, _ in strings], [z for _, z in strings], turns, circuit.qubits, np.pi / 4)
    return circuit.with_frame(clifford, draw(st.permutations(range(circuit.qubits))))
