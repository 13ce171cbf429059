"""Evolution in whole numbers: amplitudes are integers over 2**BITS, so that doubles enter exactly.

Multiplying by a double or another fixed-point number and shifting back is off by one unit of 2**-BITS at
most. A Taylor series loses as many bits as exp(‖H‖t) has, 58 at ‖H‖t = 40, so that of 320 bits some 75
decimal digits are left.
"""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np

BITS = 320
ONE = 1 << BITS


def fixed(value):
    """A double, fraction or mpmath number as an integer over 2**BITS."""
    if isinstance(value, mpmath.mpf):
        return int(mpmath.nint(value * ONE))
    return int(Fraction(value) * ONE)


def vector(amplitudes):
    """Real and imaginary parts of an array of complex numbers: rows of integers."""
    return np.array(
        [[fixed(float(part)) for part in amplitudes.real], [fixed(float(part)) for part in amplitudes.imag]],
        dtype=object,
    )


def string_times(x, z, amplitudes):
    """(P v)[j] = i^y (-1)^(bits shared by z and k) v[k] at k = j ^ x, with y the number of Y factors."""
    source = np.arange(amplitudes.shape[1]) ^ x
    signs = np.array([-1 if (int(k) & z).bit_count() & 1 else 1 for k in source], dtype=object)
    real, imaginary = amplitudes[:, source] * signs
    for _ in range((x & z).bit_count() & 3):
        real, imaginary = -imaginary, real
    return np.array([real, imaginary], dtype=object)


def evolved(operator, amplitudes, time):
    """exp(-i H t) by its Taylor series in one step, to far more digits than doubles have.

    With v = a + i b, the generator -i H t is the real matrix [[Im, Re], [-Re, Im]] of H t on (a, b).
    """
    size = 2**operator.qubits
    columns = np.zeros((2, size, size), dtype=object)
    for x, z, c in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True):
        weight = int(Fraction(float(c)) * Fraction(time) * ONE)
        for k in range(size):
            unit = np.zeros((2, size), dtype=object)
            unit[0, k] = weight
            columns[:, :, k] += string_times(int(x), int(z), unit)
    real, imaginary = columns
    generator = np.block([[imaginary, real], [-real, imaginary]])
    term = total = vector(amplitudes).ravel()
    order = 0
    while max(abs(entry) for entry in term) > 1 << 40:
        order += 1
        term = ((generator @ term) >> BITS) // order
        total = total + term
    return total.reshape(2, size)


def rotated(circuit, amplitudes):
    """A written-out circuit rotation by rotation, sines and cosines by mpmath at 60 digits."""
    now = vector(amplitudes)
    with mpmath.workdps(60):
        for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
            cosine, sine = (fixed(f(mpmath.mpf(float(angle)))) for f in (mpmath.cos, mpmath.sin))
            real, imaginary = string_times(int(x), int(z), now)
            now = (now * cosine + np.array([imaginary, -real], dtype=object) * sine) >> BITS
        cosine, sine = (fixed(f(mpmath.mpf(circuit.phase))) for f in (mpmath.cos, mpmath.sin))
    return (now * cosine + np.array([-now[1], now[0]], dtype=object) * sine) >> BITS


def distance(amplitudes, exact):
    """‖amplitudes - exact‖ for doubles against fixed point."""
    gap = vector(amplitudes) - exact
    return float(np.sqrt(sum(int(entry) ** 2 / ONE**2 for entry in gap.ravel())))
