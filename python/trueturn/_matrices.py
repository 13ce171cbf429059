"""Matrices of operators: dense, sparse, and as something that multiplies vectors."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from trueturn import _apply, _memory
from trueturn.errors import MemoryRefusedError

if TYPE_CHECKING:
    import scipy.sparse
    import scipy.sparse.linalg

    from trueturn.operator import Operator

__all__ = ["dense", "diagonals", "linear_operator", "parity_signs", "sparse", "walsh_hadamard"]

DENSE_QUBITS = 12
TERMS_BEFORE_TRANSFORM = 8


def parity_signs(mask: int, qubits: int) -> npt.NDArray[np.float64]:
    """Return (-1)^(number of bits that `mask` and k share) for each index k: shape (2**qubits,), float64."""
    signs = np.ones(1 << qubits)
    for qubit in range(qubits):
        half = 1 << qubit
        np.multiply(signs[:half], -1.0 if mask >> qubit & 1 else 1.0, out=signs[half : 2 * half])
    return signs


def diagonals(
    x_masks: Sequence[int] | npt.NDArray[np.object_],
    z_masks: Sequence[int] | npt.NDArray[np.object_],
    coefficients: Iterable[float],
    qubits: int,
) -> Iterator[tuple[int, npt.NDArray[np.complex128]]]:
    """Yield, for each distinct x mask, the matrix entries at row k ^ x of each column k.

    A string sends column k to row k ^ x with i^y (-1)^(bits shared by k and z), y the number of Y factors.
    Few terms of one mask are added up in order; many go through a Walsh-Hadamard transform over z. Either way
    an entry is within max(terms, qubits) u Σ|c| of the exact one to first order, u = 2^-53.
    """
    by_mask: dict[int, list[tuple[int, complex]]] = {}
    for x, z, coefficient in zip(x_masks, z_masks, coefficients, strict=True):
        factor = float(coefficient) * (1, 1j, -1, -1j)[(x & z).bit_count() % 4]
        by_mask.setdefault(x, []).append((z, factor))
    for x, terms in by_mask.items():
        entries = np.zeros(1 << qubits, dtype=np.complex128)
        if len(terms) > TERMS_BEFORE_TRANSFORM:
            places, factors = zip(*terms, strict=True)
            entries[list(places)] = factors
            walsh_hadamard(entries)
        else:
            for z, factor in terms:
                entries += factor * parity_signs(z, qubits)
        yield x, entries


def walsh_hadamard(values: npt.NDArray[Any]) -> None:
    """Replace values[k] by the sum over z of (-1)^(bits shared by k and z) values[z], in place.

    Parameters
    ----------
    values : ndarray, shape (2**n,), contiguous
        A sum in n levels: rounding is at most n u Σ|values| to first order.
    """
    for level in range(values.size.bit_length() - 1):
        pairs = values.reshape(-1, 2, 1 << level)
        even, odd = pairs[:, 0].copy(), pairs[:, 1]
        pairs[:, 0] += odd
        pairs[:, 1] = even - odd


def dense(operator: Operator) -> npt.NDArray[np.complex128]:
    """Return the matrix; see `Operator.dense`."""
    qubits = operator.qubits
    needed = _dense_bytes(qubits)
    if qubits > DENSE_QUBITS:
        raise MemoryRefusedError(
            f"dense: too many qubits ({qubits}, which need {_memory.readable(needed)}); "
            f"at most {DENSE_QUBITS} are allowed, use sparse() or linear_operator()",
            needed=needed,
            available=_memory.available_bytes(),
            largest_qubits=DENSE_QUBITS,
        )
    _memory.require(needed, "dense", _dense_bytes)
    matrix = np.zeros((1 << qubits, 1 << qubits), dtype=np.complex128)
    columns = np.arange(1 << qubits, dtype=np.int64)
    for x, entries in diagonals(operator.x_masks, operator.z_masks, operator.coefficients, qubits):
        matrix[columns ^ x, columns] = entries
    return matrix


def _dense_bytes(qubits: int) -> int:
    """The matrix, and five vectors while it is filled."""
    return (16 << 2 * qubits) + (5 * 16 << qubits)


def sparse(operator: Operator) -> scipy.sparse.csr_matrix:
    """Return the matrix in compressed rows; see `Operator.sparse`."""
    import scipy.sparse  # slow to import, and few need it

    qubits = operator.qubits
    masks = sorted(set(operator.x_masks.tolist()))

    def needed(qubits: int) -> int:
        # Value and column number of each entry, twice while zeros are squeezed out; and five vectors.
        return (48 * len(masks) + 5 * 16) << qubits

    _memory.require(needed(qubits), "sparse", needed)
    size = 1 << qubits
    index_type = np.int32 if size * max(1, len(masks)) < 2**31 else np.int64
    rows: npt.NDArray[Any] = np.arange(size, dtype=index_type)
    values = np.zeros((size, len(masks)), dtype=np.complex128)
    columns = np.empty((size, len(masks)), dtype=index_type)
    place = {x: number for number, x in enumerate(masks)}
    for x, entries in diagonals(operator.x_masks, operator.z_masks, operator.coefficients, qubits):
        columns[:, place[x]] = rows ^ x
        values[:, place[x]] = entries[rows ^ x]
    starts = np.arange(size + 1, dtype=index_type) * len(masks)
    matrix = scipy.sparse.csr_matrix((values.ravel(), columns.ravel(), starts), shape=(size, size))
    matrix.eliminate_zeros()
    matrix.sort_indices()
    return matrix


def linear_operator(operator: Operator) -> scipy.sparse.linalg.LinearOperator:
    """Return something that multiplies vectors; see `Operator.linear_operator`."""
    import scipy.sparse.linalg

    _memory.require(2 * 16 << operator.qubits, "linear_operator", 2)
    size = 1 << operator.qubits

    def times(vector: npt.NDArray[Any]) -> npt.NDArray[np.complex128]:
        column = np.ascontiguousarray(vector.reshape(size), dtype=np.complex128)
        return _apply.operator_times(operator, column)

    return scipy.sparse.linalg.LinearOperator((size, size), matvec=times, rmatvec=times, dtype=np.dtype(np.complex128))
