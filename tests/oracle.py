"""The dense oracle: Kronecker products in plain lines.

Qubit 0 is the least significant bit of an index, so its factor stands last in a Kronecker product.
"""

from __future__ import annotations

import numpy as np
import scipy.linalg

MATRICES = {
    "I": np.eye(2, dtype=complex),
    "X": np.array([[0, 1], [1, 0]], dtype=complex),
    "Y": np.array([[0, -1j], [1j, 0]]),
    "Z": np.array([[1, 0], [0, -1]], dtype=complex),
}


def pauli(text, qubits):
    """Return the matrix of factors such as ``"X_0 Z_3"``; no factors are the identity."""
    letters = dict.fromkeys(range(qubits), "I")
    for factor in text.split():
        letter, qubit = factor.split("_")
        letters[int(qubit)] = letter
    matrix = np.eye(1, dtype=complex)
    for qubit in range(qubits):
        matrix = np.kron(MATRICES[letters[qubit]], matrix)
    return matrix


def string(x, z, qubits):
    """Return the matrix of the string with these masks."""
    matrix = np.eye(1, dtype=complex)
    for qubit in range(qubits):
        matrix = np.kron(MATRICES["IXZY"[(x >> qubit & 1) + 2 * (z >> qubit & 1)]], matrix)
    return matrix


def dense(operator):
    """Return the matrix of an `Operator`."""
    matrix = np.zeros((2**operator.qubits, 2**operator.qubits), dtype=complex)
    for x, z, coefficient in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True):
        matrix += coefficient * string(x, z, operator.qubits)
    return matrix


def evolution(operator, time):
    """Return exp(-i H t)."""
    return scipy.linalg.expm(-1j * time * dense(operator))


def rotation(x, z, angle, qubits):
    """Return exp(-i angle P), without a factor 1/2."""
    return np.cos(angle) * np.eye(2**qubits) - 1j * np.sin(angle) * string(x, z, qubits)


def string_times(x, z, amplitudes):
    """P v index by index: (P v)[j] = i^y (-1)^(bits shared by z and k) v[k] at k = j ^ x, y being the number
    of Y factors.

    Works in the precision of the amplitudes, extended precision included.
    """
    source = np.arange(amplitudes.size) ^ x
    shared = source & z
    for shift in (16, 8, 4, 2, 1):
        shared = shared ^ shared >> shift
    return (1, 1j, -1, -1j)[(x & z).bit_count() & 3] * amplitudes[source] * (1 - 2 * (shared & 1))


def rotated(circuit, amplitudes):
    """A circuit rotation by rotation, index by index."""
    now = amplitudes
    for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
        now = np.cos(angle) * now - 1j * np.sin(angle) * string_times(int(x), int(z), now)
    return np.exp(1j * circuit.phase) * now
