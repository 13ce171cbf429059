"""What a circuit does: ordered Pauli rotations in repeated blocks, then a frame."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
import numpy.typing as npt

from trueturn import _native
from trueturn import _rotation_arguments as checked
from trueturn.errors import RotationError
from trueturn.operator import Operator
from trueturn.pass_plan import PassPlan, pass_plan

if TYPE_CHECKING:
    import os

    from trueturn.circuits.counts import GateCounts
    from trueturn.export import Cost

__all__ = ["Block", "Rotations"]

WRITTEN_OUT_LIMIT = 10**7


class Block(NamedTuple):
    """A circuit and how often it runs."""

    rotations: Rotations
    repeat: int


class Rotations:
    """Ordered rotations exp(-i θ P), repeated blocks of them, a global phase and a final frame; immutable.

    Parameters
    ----------
    x, z : sequence of int
        Bit masks of the strings: bit q of x where qubit q carries X or Y, bit q of z where it carries Z or Y.
    angles : sequence of float
        θ in radians, without a factor 1/2 (an OpenQASM ``rz(φ)`` is θ = φ/2). Kept as given, never reduced.
    qubits : int
        At most 128.
    phase : float, optional
        The circuit is exp(i phase) times the rotations.

    Raises
    ------
    RotationError
        Lengths differ, an angle or the phase is not finite, a string acts outside of the qubits.

    Notes
    -----
    Repeats are stored, never written out: a million steps cost what one costs.

    The circuit is exp(i phase) T C R: the blocks R first, then the Clifford C (`frame`), then the relabelling T. Most
    circuits have neither; those read from a file may. `inverse`, `times` and ``+`` pull the strings that follow a frame
    back through it, exactly.

    Examples
    --------
    >>> step = Rotations(x=[0b01, 0b00], z=[0b00, 0b11], angles=[0.1, 0.2], qubits=2)
    >>> step.times(1000).count
    2000
    """

    __slots__ = ("_circuit", "_gate_counts")
    _circuit: _native.Rotations
    _gate_counts: GateCounts | None

    def __init__(
        self,
        x: Iterable[int],
        z: Iterable[int],
        angles: Sequence[float] | npt.NDArray[np.float64],
        qubits: int,
        phase: float = 0.0,
    ) -> None:
        self._circuit = _native.Rotations.from_list(
            checked.masks("x", x),
            checked.masks("z", z),
            checked.angles(angles),
            checked.qubits(qubits),
            checked.number("phase", phase),
        )
        self._gate_counts = None

    @classmethod
    def _wrap(cls, native: _native.Rotations, gate_counts: GateCounts | None = None) -> Rotations:
        made = cls.__new__(cls)
        made._circuit = native
        made._gate_counts = gate_counts
        return made

    @property
    def qubits(self) -> int:
        """Number of qubits."""
        return self._circuit.qubits

    @property
    def count(self) -> int:
        """Number of rotations, repeats included; stops at 2**64 - 1."""
        return self._circuit.count

    @property
    def phase(self) -> float:
        """Global phase in radians, not reduced."""
        return self._circuit.phase

    @property
    def gate_counts(self) -> GateCounts | None:
        """The gates of the file that this circuit was read from; None where it was made otherwise, or changed since.

        `cost`, `two_qubit_gates` and `depth` are about the rotations, however they were written.
        """
        return self._gate_counts

    @property
    def blocks(self) -> tuple[Block, ...]:
        """The blocks in order of time. A block's rotations carry phase 0; a plain list is one block."""
        return tuple(Block(Rotations._wrap(body), repeat) for body, repeat in self._circuit.blocks())

    @property
    def frame(self) -> Rotations:
        """The Clifford that follows the blocks: rotations by multiples of π/4, and its phase, a multiple of π/4.

        Without rotations and of phase 0 where there is none.
        """
        found = self._circuit.frame()
        if found is None:
            return Rotations([], [], [], self.qubits)
        return Rotations._wrap(found[0])

    @property
    def relabelling(self) -> tuple[int, ...]:
        """Where each qubit is at the end: entry q is the qubit that holds what qubit q held; applied after `frame`."""
        found = self._circuit.frame()
        return tuple(range(self.qubits)) if found is None else tuple(found[1])

    def with_frame(self, clifford: Rotations | None = None, relabelling: Sequence[int] | None = None) -> Rotations:
        """Return this circuit followed by a Clifford and then a relabelling of qubits.

        Parameters
        ----------
        clifford : Rotations, optional
            Rotations by multiples of π/4 (up to 4 units in the last place), with a phase that is a multiple of π/4, and no
            frame of its own. None does nothing.
        relabelling : sequence of int, optional
            Entry q is the qubit that qubit q becomes. None keeps all in place.

        Returns
        -------
        Rotations
            Its `frame` is the same operator written in a fixed way; a relabelling that the Clifford hides, such as three
            cx for a swap, is found and moved to `relabelling`, and a frame that does nothing is dropped.

        Raises
        ------
        RotationError
            The numbers of qubits differ, an angle is no multiple of π/4, or `relabelling` is no permutation.

        Examples
        --------
        >>> Rotations([1], [0], [0.25], qubits=2).with_frame(relabelling=[1, 0]).relabelling
        (1, 0)
        """
        moves = checked.permutation(relabelling, self.qubits)
        if clifford is None:
            return Rotations._wrap(self._circuit.with_frame([], [], [], 0, moves))
        if (
            not isinstance(clifford, Rotations)
            or clifford.qubits != self.qubits
            or clifford._circuit.frame() is not None
        ):
            raise RotationError(
                f"clifford: no Rotations without a frame on {self.qubits} qubits ({clifford!r}); "
                "give rotations by multiples of π/4",
                argument="clifford",
            )
        x, z, angles = clifford._written_out()
        turns = [checked.eighths("clifford", angle) for angle in angles.tolist()]
        eighths = checked.eighths("clifford", clifford.phase)
        return Rotations._wrap(self._circuit.with_frame(x, z, turns, eighths, moves))

    @property
    def x_masks(self) -> npt.NDArray[np.object_]:
        """x mask of each rotation, written out: shape (count,), Python ints (masks have up to 128 bits)."""
        return checked.object_array(self._written_out()[0])

    @property
    def z_masks(self) -> npt.NDArray[np.object_]:
        """z mask of each rotation, written out: shape (count,), Python ints."""
        return checked.object_array(self._written_out()[1])

    @property
    def angles(self) -> npt.NDArray[np.float64]:
        """Angle of each rotation in radians, written out: shape (count,).

        Raises
        ------
        RotationError
            There are more than 10**7 rotations; use `blocks`.
        """
        return self._written_out()[2]

    def _written_out(self) -> tuple[list[int], list[int], npt.NDArray[np.float64]]:
        columns = self._circuit.written_out(WRITTEN_OUT_LIMIT)
        if columns is None:
            raise RotationError(
                f"rotations: too many to write out ({self.count}); use .blocks, which keeps repeats apart",
                argument="rotations",
            )
        return columns

    def inverse(self) -> Rotations:
        """Return the circuit that undoes this one."""
        return Rotations._wrap(self._circuit.inverse())

    def times(self, k: int) -> Rotations:
        """Return the circuit run `k` times over, at no cost in memory.

        A frame that changes the strings of the next repeat makes as many different repeats as it takes to come back to
        itself; those are written out.

        Raises
        ------
        RotationError
            `k` is not a whole number from 0 to 2**63, or a frame would write out more than about 2**19 rotations.
        """
        count = checked.whole_or_none(k)
        if count is None or not 0 <= count <= 2**63:
            raise RotationError(f"k: not a repeat count ({k!r}); give a whole number, 0 or more", argument="k")
        return Rotations._wrap(self._circuit.times(count))

    def __add__(self, other: Rotations) -> Rotations:
        """Return this circuit followed by the other; nothing merges at the seam."""
        if not isinstance(other, Rotations):
            return NotImplemented
        return Rotations._wrap(self._circuit.then(other._circuit))

    def angle_totals(self) -> Operator:
        """Return Σ θ P over all rotations: the first moment of the circuit.

        For a consistent product formula it is t times the Hamiltonian without its identity term, whose share is
        minus `phase`. A frame is left out.

        Returns
        -------
        Operator
        """
        totals: dict[tuple[int, int], float] = {}
        for (x_masks, z_masks, angles), times in self._circuit.lists():
            for x, z, angle in zip(x_masks, z_masks, angles, strict=True):
                totals[x, z] = totals.get((x, z), 0.0) + times * float(angle)
        return Operator.from_masks([x for x, _ in totals], [z for _, z in totals], list(totals.values()), self.qubits)

    def two_qubit_gates(self) -> int:
        """Return the number of two-qubit gates: 2(w-1) for a rotation of weight w.

        References
        ----------
        M. A. Nielsen, I. L. Chuang, Quantum Computation and Quantum Information (2000), section 4.7.3.
        """
        return self._circuit.two_qubit_gates()

    def depth(self) -> int:
        """Return the depth in two-qubit gates.

        A rotation of weight w holds its qubits for 2(w-1) gates in a row; it starts as soon as all of them are free.
        """
        return self._circuit.two_qubit_depth()

    def plan(self, dtype: npt.DTypeLike = np.complex128) -> PassPlan:
        """Show how `State.apply` will carry the circuit out.

        Passes over the state, rotations in each, and the time that they should take on one thread. Costs planning, and at the
        first call some tens of milliseconds to measure this machine. A relabelling of qubits at the end is not counted.

        Raises
        ------
        ArgumentError
            The circuit acts on more than 62 qubits.

        Examples
        --------
        >>> import trueturn as tt
        >>> ring = tt.model.heisenberg(tt.lattice.ring(20), 1.0)
        >>> step = tt.formula("strang").rotations(tt.Partition.of(ring, "bond"), 0.1, 1)
        >>> plan = step.plan()
        >>> plan.rotations, plan.passes
        (90, 3)
        """
        return pass_plan(self._circuit, dtype)

    def cost(self, **device: Any) -> Cost:
        """Return what the circuit costs as gates, counted without writing it out.

        Parameters
        ----------
        **device
            The fields of `trueturn.export.Hardware`: ladder, order, join_pairs, native, connectivity, layout, routing,
            two_qubit_error, one_qubit_error, readout_error, synthesis_error.

        Returns
        -------
        Cost
            The counts are those of the file that `write_qasm` writes with the same options.

        Raises
        ------
        ArgumentError
            An unknown option or word, a connectivity that does not hold the circuit or is disconnected.
        RotationError
            An angle too large to be doubled.
        MemoryRefusedError
            The gates of repeated bodies do not fit.

        Examples
        --------
        >>> import trueturn as tt
        >>> bond = Rotations(x=[0b11, 0b11, 0], z=[0, 0b11, 0b11], angles=[0.1, 0.1, 0.1], qubits=2)
        >>> cost = bond.times(1000).cost()
        >>> cost.unsaved_two_qubit_gates, cost.two_qubit_gates  # XX + YY + ZZ: 6 alone, 3 together
        (6000, 3000)
        """
        from trueturn.export.cost import cost_of
        from trueturn.export.hardware import Hardware

        return cost_of(self, Hardware.of(device))

    def write_qasm(self, path: str | os.PathLike[str], version: int = 3, *, comment: str = "", **device: Any) -> Cost:
        """Write the circuit as OpenQASM and return what it costs.

        Parameters
        ----------
        path : str or path
            Written under a temporary name and renamed when complete.
        version : {3, 2}
            In version 3 repeated blocks are loops; version 2 has none and writes them out.
        comment : str
            Lines for the head of the file.
        **device
            As for `cost`.

        Returns
        -------
        Cost

        Raises
        ------
        ArgumentError
            As for `cost`; or `path` is no path or the file cannot be written, an old one then being left as it was.

        Notes
        -----
        Only gates of the version's standard library, or defined in the file. Angles have all their digits. The
        rotations keep their order and their angles; only strings that are the identity join the global phase, which
        version 3 writes as ``gphase`` and version 2, which leaves it open, as a comment.

        With a connectivity the file is about physical qubits; the comments ``trueturn: start_layout`` and ``trueturn:
        end_layout`` say which of them hold the qubits.
        """
        from trueturn.export.hardware import Hardware
        from trueturn.export.qasm import write_qasm

        return write_qasm(self, path, version, comment, Hardware.of(device))

    def qasm(self, version: int = 3, *, comment: str = "", **device: Any) -> str:
        r"""Return the text that `write_qasm` writes.

        Examples
        --------
        >>> step = Rotations(x=[0b0], z=[0b11], angles=[0.25], qubits=2)
        >>> print(step.times(100).qasm().partition("qubit[2] q;\n")[2], end="")
        cx q[0], q[1];
        for int step0 in [1:100] {
          rz(0.5) q[1];
        }
        cx q[0], q[1];
        """
        from trueturn.export.hardware import Hardware
        from trueturn.export.qasm import qasm_text

        return qasm_text(self, version, comment, Hardware.of(device))

    def rounding_bound(self, angle_roundings: int = 0, unit: float = 2.0**-53) -> float:
        """Return a bound on the 2-norm error that rounding adds when a unit vector is evolved.

        Parameters
        ----------
        angle_roundings : int
            Roundings that went into forming each angle; 0 where the angles are taken as exact.
        unit : float
            Unit roundoff of the amplitudes: 2**-53 for complex128, 2**-24 for complex64.

        Notes
        -----
        The engine joins rotations into operations; each kind costs a number of roundoffs that `docs/engine.md` derives:
        5 for a diagonal string, 8 for a string that mixes, 5 for up to 16 strings with one x mask, 18 or 21 for a whole
        bond of three. An angle off by k roundings costs k u |θ|, and each addition of angles of strings that mix u times
        their size. The global phase is a diagonal string; so is the phase of the frame, whose rotations by π/4 or π/2,
        rounded, are off by u |θ| at most. A relabelling moves amplitudes whole. A factor exp(bound) covers products of
        errors.
        """
        double = 2.0**-53
        clifford = self.frame
        units, angles = self._circuit.rounding_units()
        if angle_roundings:
            angles += angle_roundings * (self._circuit.angle_sum() + abs(self.phase))
        for part in (self, clifford):
            units += 5.0 if part.phase else 0.0
        turned, added = clifford._circuit.rounding_units()
        units += turned
        angles += added + clifford._circuit.angle_sum() + abs(clifford.phase)
        linear = unit * units + double * angles
        bound = float(linear) * math.exp(min(float(linear), 600.0))
        return bound if math.isfinite(bound) else math.inf

    def __len__(self) -> int:
        return self.count

    def __eq__(self, other: object) -> bool:
        """Equal blocks, repeats, strings, angles, phase and frame; circuits that do the same can still differ in these."""
        return isinstance(other, Rotations) and self._circuit.same_as(other._circuit)

    def __hash__(self) -> int:
        return hash((self.qubits, self.count, self.phase))

    def __repr__(self) -> str:
        found = self._circuit.frame()
        frame = "" if found is None else f", frame={found[0].count}, relabelling={tuple(found[1])}"
        size = f"count={self.count}, qubits={self.qubits}, blocks={len(self.blocks)}"
        return f"Rotations({size}, phase={self.phase!r}{frame})"
