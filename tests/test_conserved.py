"""Conserved fields are found exactly, and references without them are those with them."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
import trueturn as tt
from strategies import operators
from trueturn import Operator, State
from trueturn.reference.conserved import NO_FIELD, conserved_field

UNIT_ROUNDOFF = 2.0**-53


def field_of(text, qubits=None):
    return dict(conserved_field(Operator(text, qubits=qubits)).strengths)


def test_hopping_shares_the_mean_field():
    assert field_of("X_0 X_1 + Y_0 Y_1 + 2 Z_0 + 4 Z_1") == {0: 3.0, 1: 3.0}
    # Z strings of a fermion's hop lie outside of the x mask; Z Z terms take no part.
    assert field_of("X_0 Z_1 X_2 + Y_0 Z_1 Y_2 + Z_0 Z_2 + 3 Z_0") == {0: 1.5, 2: 1.5}
    # What does not hop keeps its own.
    assert field_of("X_0 X_1 + Y_0 Y_1 + Z_0 + Z_1 + 0.25 Z_2") == {0: 1.0, 1: 1.0, 2: 0.25}


def test_pairing_shares_the_staggered_field():
    assert field_of("X_0 X_1 - Y_0 Y_1 + 2 Z_0 - 4 Z_1") == {0: 3.0, 1: -3.0}
    # Hopping and pairing together conserve nothing but parity.
    assert field_of("X_0 X_1 + Z_0 + Z_1") == {}
    assert field_of("X_0 X_1 + 0.999 Y_0 Y_1 + Z_0 + Z_1") == {}


def test_signs_contradict_round_an_odd_ring_of_pairings():
    bonds = " + ".join(f"X_{a} X_{b} - Y_{a} Y_{b}" for a, b in ((0, 1), (1, 2), (0, 2)))
    assert field_of(bonds + " + Z_0 - Z_1 + Z_2") == {}
    assert field_of(bonds + " + Z_0 + 0.5 Z_3") == {3: 0.5}


def test_imaginary_hopping_counts_too():
    assert field_of("X_0 Y_1 - Y_0 X_1 + Z_0 + 3 Z_1") == {0: 2.0, 1: 2.0}
    assert field_of("X_0 Y_1 + Y_0 X_1 + Z_0 - 3 Z_1") == {0: 2.0, 1: -2.0}


def test_transverse_fields_and_wide_terms_rule_it_out():
    assert field_of("X_0 + Z_0") == {}
    assert field_of("X_0 X_1 X_2 X_3 X_4 + Z_0 + Z_5") == {5: 1.0}
    # Four at a time: a pair hops from 0, 1 to 2, 3, which the class of hopping fulfils and separate fields do not.
    hop = "X_0 X_1 X_2 X_3 - X_0 X_1 Y_2 Y_3 + X_0 Y_1 X_2 Y_3 + X_0 Y_1 Y_2 X_3"
    hop += " + Y_0 X_1 X_2 Y_3 + Y_0 X_1 Y_2 X_3 - Y_0 Y_1 X_2 X_3 + Y_0 Y_1 Y_2 Y_3"
    hops = " + ".join(f"X_{a} X_{a + 1} + Y_{a} Y_{a + 1}" for a in range(3))
    assert field_of(f"{hop} + Z_0") == {}
    assert field_of(f"{hop} + {hops} + 4 Z_0") == dict.fromkeys(range(4), 1.0)


def test_there_is_nothing_to_take_out_without_fields_or_with_nothing_else():
    assert conserved_field(Operator("X_0 X_1 + Y_0 Y_1")) is NO_FIELD
    assert conserved_field(Operator("Z_0 + 2 Z_1")) is NO_FIELD
    assert conserved_field(Operator("X_0 X_1 + Y_0 Y_1 + 1.7e308 Z_0 - 1.7e308 Z_1")) is NO_FIELD


@given(operators(max_qubits=5, max_terms=12))
def test_what_is_found_commutes(operator):
    field = conserved_field(operator)
    diagonal = np.zeros(1 << operator.qubits)
    for qubit, strength in field.strengths:
        diagonal += strength * (1.0 - 2.0 * (np.arange(diagonal.size) >> qubit & 1))
    matrix = oracle.dense(operator)
    # The matrix is summed from rounded terms: entries that cancel exactly may leave 12 roundoffs of Σ|c|.
    rounding = 16 * UNIT_ROUNDOFF * operator.one_norm() * (1.0 + field.norm)
    assert np.max(np.abs(diagonal[:, None] * matrix - matrix * diagonal[None, :]), initial=0.0) <= 4 * rounding
    assert np.max(np.abs(diagonal)) <= field.norm
    bare = oracle.dense(field.taken_from(operator))
    assert np.linalg.norm(bare + np.diag(diagonal) - matrix, 2) <= field.blur + 4 * rounding


@st.composite
def hopping_models(draw):
    qubits = draw(st.integers(2, 8))
    strength = st.floats(-1.0, 1.0, width=32)
    parts = []
    for a in range(qubits - 1):
        c, kind = draw(strength), draw(st.sampled_from(["hop", "pair"] if draw(st.booleans()) else ["hop"]))
        parts += [(c, f"X_{a} X_{a + 1}"), (c if kind == "hop" else -c, f"Y_{a} Y_{a + 1}"), (draw(strength), f"Z_{a}")]
    return Operator.gather([*parts, (0.7, f"Z_{qubits - 1}"), (0.1, "X_0 X_1"), (0.1, "Y_0 Y_1")], qubits)


@settings(max_examples=25)
@given(hopping_models(), st.booleans(), st.floats(0.1, 3.0))
def test_references_stay_inside_their_certificates(operator, real, time):
    start = State.random(operator.qubits, 5)
    if real:
        values = start.amplitudes.real / np.linalg.norm(start.amplitudes.real)
        start = State.from_array(values.astype(np.complex128))
    found = tt.reference(operator, start, [time, time / 3, 2 * time], 1e-10, keep="all")
    matrix = oracle.dense(operator)
    low, high = found.certificate.spectral_interval
    levels = np.linalg.eigvalsh(matrix)
    assert low <= levels[0] + 1e-12
    assert levels[-1] <= high + 1e-12
    for at, state in zip(found.times, found.states, strict=True):
        exact = scipy.linalg.expm(-1j * at * matrix) @ start.amplitudes
        # Scaling and squaring is off by some N u of the norm times time.
        rounding = 256 * 2 * UNIT_ROUNDOFF * (1.0 + operator.one_norm() * at)
        assert np.linalg.norm(state.amplitudes - exact) <= found.certificate.error_bound[at] + rounding


@pytest.mark.parametrize("qubits", [6, 7, 9])
def test_real_and_complex_starts_agree_by_linearity(qubits):
    """Below seven qubits nothing is folded; above, real and imaginary part of a start run folded, the whole does not."""
    ring = tt.model.heisenberg(tt.lattice.ring(qubits), 1.0, z=[0.1 * q for q in range(qubits)])
    whole = State.random(qubits, 3).amplitudes
    parts = [part / np.linalg.norm(part) for part in (whole.real, whole.imag)]
    times = [0.4, 1.0, 1.9, 2.0, 2.5]
    ends = [tt.reference(ring, State.from_array(part.astype(np.complex128)), times, keep="all") for part in parts]
    together = tt.reference(ring, State.from_array(whole), times, keep="all")
    for place, time in enumerate(times):
        real, imaginary = (end.states[place].amplitudes for end in ends)
        combined = np.linalg.norm(whole.real) * real + 1j * np.linalg.norm(whole.imag) * imaginary
        bound = sum(end.certificate.error_bound[time] for end in (*ends, together))
        assert np.linalg.norm(combined - together.states[place].amplitudes) <= bound


def test_real_starts_have_the_same_bits_for_any_number_of_threads():
    ring = tt.model.heisenberg(tt.lattice.ring(17), 1.0, z=0.3)
    start = State.product("01+-" * 4 + "0")
    ends = [tt.reference(ring, start, [0.2, 0.3], threads=threads).states[0].amplitudes for threads in (1, 2, 3)]
    assert all(np.array_equal(ends[0], end) for end in ends)
    exact = tt.reference(ring, State.from_array(1j * start.amplitudes), [0.2, 0.3]).states[0].amplitudes
    assert np.linalg.norm(ends[0] + 1j * exact) < 2e-10


def test_taking_the_field_out_saves_terms():
    ring = tt.model.heisenberg(tt.lattice.ring(12), 1.0, z=2.0)
    bare = tt.model.heisenberg(tt.lattice.ring(12), 1.0)
    start = State.product("01" * 6)
    found, without = (tt.reference(operator, start, 1.0) for operator in (ring, bare))
    assert found.certificate.applications == without.certificate.applications
    low, high = found.certificate.spectral_interval
    assert low <= -24.0
    assert high >= 36.0 - 1e-9
