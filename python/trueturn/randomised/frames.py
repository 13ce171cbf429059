"""Random Pauli frames: many circuits that do exactly the same, and on a noisy machine err differently.

Before each segment of the circuit a Pauli string G is applied. The frame F = G_k … G_1 is what has been applied so far;
a segment in frame F is F U F†, in which exactly the angles of strings that anticommute with F change sign. A last string
undoes the frame. Products of strings carry powers of i, which are counted as whole numbers, so the circuit is unchanged
with its phase.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from trueturn.errors import RotationError
from trueturn.operator import Operator
from trueturn.randomised.channel import ChannelBound
from trueturn.randomised.checks import require_size, whole
from trueturn.randomised.columns import Columns
from trueturn.randomised.ensemble import Ensemble
from trueturn.rotations import Rotations

__all__ = ["Framed", "framed"]

_Lists = tuple[list[int], list[int], list[float]]


@dataclass(frozen=True)
class Framed(Ensemble):
    """One circuit in random Pauli frames; see `framed`."""

    circuit: Rotations
    seed: int
    every: int | None = None

    @property
    def qubits(self) -> int:
        """Number of qubits."""
        return self.circuit.qubits

    @property
    def operator(self) -> Operator | None:
        """None: a frame changes how the circuit is run, not what it does."""
        return None

    @property
    def time(self) -> float | None:
        """None, as for `operator`."""
        return None

    def channel_bound(self) -> ChannelBound | None:
        """None: each sample is the given circuit exactly, and the bound on that is the circuit's own."""
        return None

    def _draw(self, generator: np.random.Generator) -> Rotations:
        writer = _FrameWriter(self.qubits)
        for x, z, angles in _segments(self.circuit, self.every):
            writer.turn_to(_random_mask(generator, self.qubits), _random_mask(generator, self.qubits))
            writer.write(x, z, angles)
        writer.turn_to(0, 0)
        phase = self.circuit.phase + writer.quarters * (math.pi / 2.0)
        return writer.columns.rotations(self.qubits, phase, math.inf)

    def __getstate__(self) -> dict[str, Any]:
        return {"circuit": _packed(self.circuit), "seed": self.seed, "every": self.every}

    def __setstate__(self, state: dict[str, Any]) -> None:
        for name, value in state.items():
            object.__setattr__(self, name, _unpacked(value) if name == "circuit" else value)


class _FrameWriter:
    """Writes segments in a frame, and the one-qubit turns that change the frame."""

    def __init__(self, qubits: int) -> None:
        self.columns = Columns()
        self.quarters = 0  # the global phase owed, in units of π/2, modulo 4
        self._qubits = qubits
        self._x = self._z = 0

    def turn_to(self, x: int, z: int) -> None:
        """Apply the Pauli string that leads to the frame (x, z): on each qubit exp(-i π/2 P) = -i P."""
        gate_x, gate_z = x ^ self._x, z ^ self._z
        touched = gate_x | gate_z
        for qubit in range(self._qubits):
            bit = 1 << qubit
            if touched & bit:
                self.columns.x.append(gate_x & bit)
                self.columns.z.append(gate_z & bit)
                self.columns.angles.append(math.pi / 2.0)
        # A string is i^|x&z| X^x Z^z, so gate · frame = i^power (new frame), and -i for each turn is owed too.
        power = (gate_x & gate_z).bit_count() + (self._x & self._z).bit_count() - (x & z).bit_count()
        power += 2 * (gate_z & self._x).bit_count()
        self.quarters = (self.quarters + touched.bit_count() - power) % 4
        self._x, self._z = x, z

    def write(self, x: list[int], z: list[int], angles: list[float]) -> None:
        """Append a segment; angles of strings that anticommute with the frame change sign."""
        self.columns.x += x
        self.columns.z += z
        for string_x, string_z, angle in zip(x, z, angles, strict=True):
            shared = (string_x & self._z).bit_count() + (string_z & self._x).bit_count()
            self.columns.angles.append(-angle if shared & 1 else angle)


def framed(rotations: Rotations, seed: int, *, every: int | None = None) -> Framed:
    """Run one circuit in random Pauli frames, which leaves what it does unchanged, phase included.

    Parameters
    ----------
    rotations : Rotations
    seed : int
        At least 0.
    every : int, optional
        Rotations in a segment, at least 1. By default each run of a block is one: for a product formula, a step.

    Returns
    -------
    Framed
        An `Ensemble`. The frame of each segment is drawn uniformly from all 4^n Pauli strings. Frames change by
        one-qubit rotations of π/2, which cost no two-qubit gates; all other angles keep their size to the last bit.

    Raises
    ------
    RotationError
        `rotations` is no Rotations.
    ArgumentError
        `seed` or `every` is no whole number in range, or a sample would have more than 10**7 rotations.

    References
    ----------
    .. [1] J. J. Wallman, J. Emerson, Noise tailoring for scalable quantum computation via randomized compiling, Phys.
       Rev. A 94, 052325 (2016), for the idea; from memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn import randomised
    >>> step = tt.Rotations(x=[0b01, 0b00], z=[0b00, 0b11], angles=[0.1, 0.2], qubits=2)
    >>> frames = randomised.framed(step.times(50), seed=3)
    >>> frames.sample(0).two_qubit_gates() == step.times(50).two_qubit_gates()
    True
    """
    if not isinstance(rotations, Rotations):
        raise RotationError(
            f"rotations: is no circuit ({rotations!r}); give Rotations, such as those of a formula",
            argument="rotations",
        )
    number = whole("seed", seed, 0, "give an integer of at least 0")
    length = None if every is None else whole("every", every, 1, "give the rotations in a segment, or None")
    runs = _runs(rotations)
    segments = runs if length is None else runs + rotations.count // length
    require_size("rotations", rotations.count, rotations.count + (segments + 1) * rotations.qubits)
    return Framed(rotations, number, length)


def _plain(rotations: Rotations) -> bool:
    blocks = rotations.blocks
    return len(blocks) == 1 and blocks[0].repeat == 1 and len(blocks[0].rotations.blocks) <= 1


def _lists(rotations: Rotations) -> _Lists:
    return rotations.x_masks.tolist(), rotations.z_masks.tolist(), rotations.angles.tolist()


def _runs(rotations: Rotations) -> int:
    """Count the runs of plain lists."""
    if not rotations.blocks or _plain(rotations):
        return min(1, rotations.count)
    return sum(repeat * _runs(body) for body, repeat in rotations.blocks)


def _segments(rotations: Rotations, every: int | None) -> Iterator[_Lists]:
    if not rotations.count:
        return
    if not _plain(rotations):
        for body, repeat in rotations.blocks:
            pieces = list(_segments(body, every))
            for _ in range(repeat):
                yield from pieces
        return
    x, z, angles = _lists(rotations)
    length = every or len(angles)
    for start in range(0, len(angles), length):
        piece = slice(start, start + length)
        yield x[piece], z[piece], angles[piece]


def _random_mask(generator: np.random.Generator, qubits: int) -> int:
    return int.from_bytes(generator.bytes(16), "little") & ((1 << qubits) - 1)


def _packed(rotations: Rotations) -> tuple[Any, ...]:
    """Write a circuit as plain lists, repeats kept apart, so that it travels to other processes."""
    blocks = rotations.blocks
    if not blocks or _plain(rotations):
        return rotations.qubits, rotations.phase, _lists(rotations), None
    return rotations.qubits, rotations.phase, None, [(_packed(body), repeat) for body, repeat in blocks]


def _unpacked(packed: tuple[Any, ...]) -> Rotations:
    qubits, phase, lists, blocks = packed
    if blocks is None:
        x, z, angles = lists
        return Rotations(x, z, angles, qubits, phase=phase)
    circuit = Rotations([], [], [], qubits, phase=phase)
    for body, repeat in blocks:
        circuit = circuit + _unpacked(body).times(repeat)
    return circuit
