"""Exception classes of trueturn.

Every class derives from `TrueturnError` and from the built-in that a caller would expect. A message reads
``argument: what is wrong (value); what to do``, and the facts in it are attributes too.
`KeyboardInterrupt` and a callback's own exception pass through unchanged.
"""

from __future__ import annotations

from typing import Any

__all__ = [
    "ArgumentError",
    "AuditError",
    "EnsembleError",
    "FormulaError",
    "IntegralsError",
    "InternalError",
    "JobError",
    "MemoryRefusedError",
    "ModelError",
    "OperatorError",
    "PartitionError",
    "QasmError",
    "RotationError",
    "StateBusyError",
    "StateLayoutError",
    "StateShapeError",
    "StateSpoiledError",
    "StateTypeError",
    "TermError",
    "ToleranceError",
    "TrueturnError",
]


class TrueturnError(Exception):
    """Base of every error that trueturn raises on its own account."""

    def __init__(self, message: str, **details: Any) -> None:
        super().__init__(message)
        for name, value in details.items():
            setattr(self, name, value)


class ArgumentError(TrueturnError, ValueError):
    """A number or option out of its range: a time, a step count, a seed, a thread count."""

    argument: str
    value: Any


class TermError(TrueturnError, ValueError):
    """Operator text that does not parse or is not Hermitian."""

    text: str
    position: tuple[int, int]


class OperatorError(TrueturnError, ValueError):
    """Masks, coefficients or qubit numbers that make no Hermitian operator."""

    argument: str


class ModelError(TrueturnError, ValueError):
    """A lattice or a model whose bonds, sites or strengths do not fit."""

    argument: str


class PartitionError(TrueturnError, ValueError):
    """Parts that do not commute inside, do not sum to the Hamiltonian, or an unknown rule."""

    argument: str


class RotationError(TrueturnError, ValueError):
    """Angles or repeats that make no circuit."""

    argument: str


class QasmError(TrueturnError, ValueError):
    """An OpenQASM text that is no unitary circuit with known values, or a file that cannot be read."""

    path: str
    line: int
    column: int


class FormulaError(TrueturnError, ValueError):
    """An unknown formula, weights that are not consistent, or a claimed order that is not reached."""

    name: str
    choices: tuple[str, ...]


class StateShapeError(TrueturnError, ValueError):
    """A state that is not one-dimensional, not of length 2**n, or on another number of qubits."""

    shape: Any
    expected: Any


class StateTypeError(TrueturnError, TypeError):
    """Not an array, or an array of another type than complex128 and complex64 in native byte order."""

    dtype: Any
    expected: Any


class StateLayoutError(TrueturnError, ValueError):
    """A strided, misaligned or read-only array."""

    reason: str


class StateBusyError(TrueturnError, RuntimeError):
    """The array is in use by another call."""


class StateSpoiledError(TrueturnError, RuntimeError):
    """The state was left half-way through a pass by a second interrupt and holds nothing meaningful."""


class ToleranceError(TrueturnError, ValueError):
    """A tolerance that cannot be certified in the precision at hand; `achievable` says what can."""

    tolerance: float
    achievable: float


class MemoryRefusedError(TrueturnError, MemoryError):
    """A request that does not fit in memory, refused before anything was allocated."""

    needed: int
    available: int
    largest_qubits: int


class AuditError(TrueturnError, ValueError):
    """An audit that cannot be carried out as asked."""

    reason: str
    limit: Any


class EnsembleError(TrueturnError, RuntimeError):
    """Samples of a randomised formula that were not finished: one failed, or the executor died.

    `partial` is the average over the finished ones (None without any), `missing` numbers the others.
    """

    partial: Any
    missing: tuple[int, ...]


class JobError(TrueturnError, ValueError):
    """A job file that is missing, malformed, or has an unknown key."""

    path: str
    key: str


class IntegralsError(TrueturnError, ValueError):
    """A file of integrals that is malformed, cut off, or contradicts itself; `line` counts from 1."""

    path: str
    line: int


class InternalError(TrueturnError, RuntimeError):
    """A bug of trueturn; please report it with the output of `trueturn.build_info()`."""
