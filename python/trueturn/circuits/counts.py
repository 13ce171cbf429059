"""The gates of an OpenQASM file, counted as they stand in it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

__all__ = ["GateCounts"]

_MOST = 2**64 - 1


@dataclass(frozen=True)
class GateCounts:
    """The gates of a file's evolution, loops written out; fields that `Cost` has too mean the same. Stops at 2**64 - 1.

    A gate of the standard library is one gate on its qubits, with its controls where it has a modifier. A gate that the
    file defines counts by its body, unless it is named as native.

    Attributes
    ----------
    two_qubit_gates : int
        Three for each swap; a gate with one control is one.
    swaps : int
    larger_gates : int
        Gates on more than two qubits, such as ccx; they are not among the two-qubit gates.
    one_qubit_gates : int
        Rotations included.
    rotations : int
        Rotations exp(-i θ P) of the products of rotations that the gates are: one for rz and for p, three for u3, two for
        crz, seven for ccx. Clifford gates without an angle have none.
    clifford_rotations, t_rotations : int
        Those with θ a multiple of π/4, which take no T gate, and with θ an odd multiple of π/8, which take one.
    two_qubit_depth, depth : int or None
        Layers of gates on two or more qubits, and of all gates, when each starts as soon as its qubits are free; a swap is
        three, and a barrier holds its qubits back until all of them are free. None where the repeats of a loop take too long
        to follow.
    """

    two_qubit_gates: int
    swaps: int
    larger_gates: int
    one_qubit_gates: int
    rotations: int
    clifford_rotations: int
    t_rotations: int
    two_qubit_depth: int | None
    depth: int | None

    @classmethod
    def _of(cls, gates: Sequence[int], rotations: Sequence[int], depths: Sequence[int | None]) -> GateCounts:
        """Take the numbers of the reader: two-qubit gates without swaps, swaps, larger ones, one-qubit ones; …"""
        two, swaps, larger, one = gates
        clifford, t_like, _ = rotations
        return cls(
            two_qubit_gates=min(two + 3 * swaps, _MOST),
            swaps=swaps,
            larger_gates=larger,
            one_qubit_gates=one,
            rotations=min(sum(rotations), _MOST),
            clifford_rotations=clifford,
            t_rotations=t_like,
            two_qubit_depth=depths[1],
            depth=depths[0],
        )

    @property
    def words(self) -> str:
        """What a table of two-qubit gates leaves out, in one clause."""
        said = [_many(self.one_qubit_gates, "one-qubit gate"), _many(self.rotations, "rotation")]
        if self.rotations:
            said[-1] += f" ({self.clifford_rotations} Clifford, {self.t_rotations} of T's kind)"
        if self.swaps:
            said.append(_many(self.swaps, "swap"))
        if self.larger_gates:
            said.append(_many(self.larger_gates, "gate") + " on more than two qubits, so two-qubit gates are not known")
        return "the file has " + ", ".join(said)


def _many(count: int, what: str) -> str:
    return f"{count} {what}{'' if count == 1 else 's'}"
