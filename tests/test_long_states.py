"""Applications of operators to states so long that the next coset is fetched and copied while one is at work.

That begins at 8 MiB: 19 qubits, of a folded real state 20. The oracle adds up strings amplitude by amplitude.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

import trueturn as tt

UNIT_ROUNDOFF = 2.0**-53


def strings(qubits, count, seed, *, real):
    """Coefficients with masks all over the index; with an even number of Y each if `real`."""
    generator = np.random.default_rng(seed)
    found = {}
    while len(found) < count:
        x, z = (int(mask) for mask in generator.integers(0, 1 << qubits, 2))
        if not real or (x & z).bit_count() % 2 == 0:
            found[x, z] = float(generator.uniform(-1.0, 1.0))
    return found


def operator(terms, qubits):
    x, z = ([masks[place] for masks in terms] for place in (0, 1))
    return tt.Operator.from_masks(x, z, list(terms.values()), qubits=qubits)


def image(terms, amplitudes):
    index = np.arange(len(amplitudes))
    out = np.zeros_like(amplitudes)
    for (x, z), coefficient in terms.items():
        source = index ^ x
        sign = 1.0 - 2.0 * (np.bitwise_count(source & z) & 1)
        out += coefficient * 1j ** ((x & z).bit_count() % 4) * sign * amplitudes[source]
    return out


@pytest.mark.parametrize("threads", [1, 2])
def test_mean_and_variance_are_those_of_the_strings_added_up(threads):
    terms = strings(19, 24, 1, real=False)
    state = tt.State.random(19, 3)
    applied = image(terms, state.amplitudes)
    mean = np.vdot(state.amplitudes, applied).real
    watched = operator(terms, 19)
    # Each string is rounded at most 2 + 24 + 24 times, and a sum of 2^19 products by its tree and the oracle's alike.
    size = sum(abs(coefficient) for coefficient in terms.values())
    assert abs(state.expectation(watched, threads=threads) - mean) <= 100 * UNIT_ROUNDOFF * size
    square = np.vdot(applied, applied).real
    off = 200 * UNIT_ROUNDOFF * size**2
    assert abs(state.variance(watched, threads=threads) - (square - mean**2)) <= off


@pytest.mark.parametrize(("qubits", "real"), [(19, False), (20, True)])
def test_a_reference_is_within_its_certificate_of_the_taylor_series(qubits, real):
    terms = strings(qubits, 16, 2, real=real)
    start = tt.State.product("01+-" * 5) if real else tt.State.random(qubits, 5)
    size = sum(abs(coefficient) for coefficient in terms.values())
    time = 0.5 / size
    found = tt.reference(operator(terms, qubits), start, [time], threads=2)
    term, expected = start.amplitudes.copy(), start.amplitudes.copy()
    # The rest of the series is below 0.5^13 / 13! = 2e-14.
    for order in range(1, 13):
        term = image(terms, term) * (-1j * time / order)
        expected += term
    off = np.linalg.norm(found.states[0].amplitudes - expected)
    bound = found.certificate.error_bound[time]
    assert off <= bound + 0.5**13 / math.factorial(13) + 100 * UNIT_ROUNDOFF
