"""What `Rotations` accepts: each check returns the argument in its one form, or refuses it."""

from __future__ import annotations

import math
import operator as _operator
from collections.abc import Iterable, Sequence

import numpy as np
import numpy.typing as npt

from trueturn.errors import RotationError

__all__ = ["angles", "eighths", "masks", "number", "object_array", "permutation", "qubits", "whole_or_none"]


def eighths(argument: str, angle: float) -> int:
    """Return angle / (π/4) modulo 8; refuse what is further from a whole number than rounding explains."""
    turns = round(angle / (math.pi / 4))
    if abs(angle - turns * (math.pi / 4)) > 4 * math.ulp(angle):
        raise RotationError(
            f"{argument}: no multiple of π/4 ({angle!r}); give a Clifford, and rotations by other angles in a circuit of "
            "their own",
            argument=argument,
        )
    return turns % 8


def permutation(relabelling: Sequence[int] | None, count: int) -> list[int]:
    """Return where each qubit goes, or refuse what is no permutation; None keeps all in place."""
    if relabelling is None:
        return list(range(count))
    moves = [whole_or_none(target) for target in relabelling] if isinstance(relabelling, Iterable) else [None]
    if any(target is None for target in moves) or sorted(moves) != list(range(count)):  # type: ignore[type-var]
        raise RotationError(
            f"relabelling: no permutation of {count} qubits ({relabelling!r}); name each of 0 to {count - 1} once",
            argument="relabelling",
        )
    return moves  # type: ignore[return-value]


def masks(argument: str, given: Iterable[int]) -> list[int]:
    """Return bit masks of up to 128 qubits as whole numbers."""
    try:
        found = [_operator.index(mask) for mask in given]
    except TypeError:
        raise RotationError(f"{argument}: not a sequence of whole numbers; give bit masks", argument=argument) from None
    if any(not 0 <= mask < 1 << 128 for mask in found):
        raise RotationError(
            f"{argument}: a mask is negative or longer than 128 bits; give masks of qubits", argument=argument
        )
    return found


def angles(given: Sequence[float] | npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
    """Return real angles as a contiguous array of one dimension."""
    try:
        if np.iscomplexobj(given):
            raise TypeError
        found = np.ascontiguousarray(given, dtype=np.float64)
    except (TypeError, ValueError, OverflowError):
        raise RotationError("angles: not real numbers; give radians", argument="angles") from None
    if found.ndim != 1:
        raise RotationError(
            f"angles: not a list of real numbers (shape {found.shape}); give one angle per string", argument="angles"
        )
    return found


def qubits(given: int) -> int:
    """Return a number of qubits from 0 to 128."""
    count = whole_or_none(given)
    if count is None or not 0 <= count <= 128:
        raise RotationError(f"qubits: not a number of qubits ({given!r}); give 0 to 128", argument="qubits")
    return count


def whole_or_none(value: object) -> int | None:
    """Return a whole number, or None where the value is none."""
    if isinstance(value, bool):
        return None
    try:
        return _operator.index(value)  # type: ignore[arg-type]
    except TypeError:
        return None


def number(argument: str, value: float) -> float:
    """Return a real number."""
    try:
        return float(value)
    except (TypeError, ValueError, OverflowError):
        raise RotationError(f"{argument}: not a number ({value!r}); give radians", argument=argument) from None


def object_array(values: list[int]) -> npt.NDArray[np.object_]:
    """Return whole numbers of any length as an array."""
    array = np.empty(len(values), dtype=object)
    array[:] = values
    return array
