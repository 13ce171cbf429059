"""A circuit written out as a matrix, repeated blocks by repeated squaring."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from trueturn.reference.certificate import UNIT
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["circuit_matrix"]

Matrix = npt.NDArray[np.complex128]


def circuit_matrix(rotations: Rotations, *, threads: int, angle_roundings: int = 0) -> tuple[Matrix, float]:
    """Return the matrix of a circuit and an estimate of its error in the spectral norm.

    Parameters
    ----------
    rotations : Rotations
        On few qubits: a matrix has 4**qubits entries of 16 bytes, and three are held.
    threads : int
    angle_roundings : int
        Roundings that went into each angle.

    Notes
    -----
    The engine's rounding bound holds for each column, so √d of it for the matrix in the Frobenius norm, d = 2**qubits.
    A product of two matrices is taken to be off by d u, and what it is off by is carried through the remaining
    factors, all of norm 1: d u for each repeat in all. That is estimated, about √d times more than is seen.

    The product of the blocks is compared with one run of the circuit on a random state. Where they differ the circuit
    does more than its blocks, such as a final relabelling of qubits, and is run column by column instead.
    """
    size = 1 << rotations.qubits
    error = math.sqrt(size) * rotations.rounding_bound(angle_roundings)
    matrix = np.exp(1j * rotations.phase) * _blocks(rotations, threads)
    repeats = sum(float(block.repeat) for block in rotations.blocks)
    estimate = error + size * UNIT * (repeats + 2.0)
    probe = State.random(rotations.qubits, 0)
    image = matrix @ probe.amplitudes
    probe.apply(rotations, threads=threads)
    if np.linalg.norm(image - probe.amplitudes) <= estimate:
        return matrix, estimate
    columns = _identity(size)
    for k in range(size):
        State.from_array(columns[k]).apply(rotations, threads=threads)
    return columns.T, error


def _blocks(rotations: Rotations, threads: int) -> Matrix:
    size = 1 << rotations.qubits
    total = _identity(size)
    for body, repeat in rotations.blocks:
        inner = body.blocks
        flat = len(inner) == 0 or (len(inner) == 1 and inner[0].repeat == 1)
        once = _listed(body, threads) if flat else _blocks(body, threads)
        total = np.linalg.matrix_power(once, repeat) @ total
    return total


def _listed(rotations: Rotations, threads: int) -> Matrix:
    """Run a plain list on all basis states at once: those are one state of twice the qubits, unnormalised."""
    columns = _identity(1 << rotations.qubits)
    wide = Rotations(rotations.x_masks, rotations.z_masks, rotations.angles, 2 * rotations.qubits)
    State.from_array(columns.reshape(-1)).apply(wide, threads=threads)
    return columns.T


def _identity(size: int) -> Matrix:
    return np.eye(size, dtype=np.complex128)
