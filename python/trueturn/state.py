"""State vectors, evolved in place."""

from __future__ import annotations

import math
import os
import tempfile
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn import _allocation, _memory, _native, _threads
from trueturn._arrays import shared_array
from trueturn._product import site_amplitudes
from trueturn.errors import (
    ArgumentError,
    StateShapeError,
    StateSpoiledError,
    StateTypeError,
)
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["Run", "State"]

Progress = Callable[[int, int], object]


@dataclass(frozen=True)
class Run:
    """What an `apply` did: finished passes over memory, and the workers that took part in each of them."""

    passes: int
    workers: int


class State:
    """A vector of 2**n amplitudes that rotations evolve in place.

    Qubit q is bit q of the amplitude index. Make one with `product`, `computational`, `random`, `from_array` or `load`.

    Notes
    -----
    The array is the caller's to read between calls and the engine's during one: the interpreter lock is released, and
    another thread that evolves the same array gets `StateBusyError`. Results have the same bits for any number of
    threads and any instruction set.

    Examples
    --------
    >>> import trueturn as tt
    >>> state = tt.State.product("0+")
    >>> state.rotate("X_0", 0.25)
    >>> round(state.expectation(tt.Operator("Z_0", qubits=2)), 12) == round(math.cos(0.5), 12)
    True
    """

    __slots__ = ("_array", "_run", "_spoiled")
    _array: npt.NDArray[Any]
    _run: Run | None
    _spoiled: bool

    def __init__(self) -> None:
        raise StateTypeError(
            "state: made by its constructors only; use State.product, .computational, .random, .from_array or .load",
            dtype=None,
            expected="State",
        )

    @classmethod
    def _over(cls, array: npt.NDArray[Any]) -> State:
        made = cls.__new__(cls)
        made._array, made._run, made._spoiled = array, None, False
        return made

    @classmethod
    def product(cls, sites: str | Sequence[object], *, dtype: npt.DTypeLike = np.complex128) -> State:
        """Return a product state.

        Parameters
        ----------
        sites : str or sequence
            Qubit 0 first. A text of ``0 1 + -``, or a list of ``"0" "1" "+" "-" "+i" "-i"`` or pairs (theta, phi) of
            Bloch angles in radians: cos(θ/2) |0> + e^{iφ} sin(θ/2) |1>.
        dtype : complex128 (default) or complex64

        Raises
        ------
        ArgumentError
            An entry that is none of these.
        MemoryRefusedError
            The state does not fit; refused before anything is allocated.
        """
        factors = site_amplitudes(sites)
        array = _allocate("product", len(factors), dtype)
        array[0] = 1.0
        for qubit, (zero, one) in enumerate(factors):
            half = 1 << qubit
            np.multiply(array[:half], one, out=array[half : 2 * half])
            array[:half] *= zero
        return cls._over(array)

    @classmethod
    def computational(cls, index: int, qubits: int, *, dtype: npt.DTypeLike = np.complex128) -> State:
        """Return the basis state whose qubit q is bit q of `index`.

        Raises
        ------
        ArgumentError
            `index` is not a whole number from 0 to 2**qubits - 1.
        MemoryRefusedError
            The state does not fit.
        """
        whole = isinstance(index, (int, np.integer)) and not isinstance(index, bool)
        count = _whole("qubits", qubits, 0)
        if not whole or index < 0 or int(index).bit_length() > count:
            raise ArgumentError(
                f"index: no basis state of {count} qubits ({index!r}); give 0 to 2**{count} - 1",
                argument="index",
                value=index,
            )
        array = _allocate("computational", count, dtype)
        array[index] = 1.0
        return cls._over(array)

    @classmethod
    def random(cls, qubits: int, seed: int, *, dtype: npt.DTypeLike = np.complex128) -> State:
        """Return a state drawn from the Haar measure: normalised Gaussian amplitudes from NumPy's PCG64.

        Raises
        ------
        ArgumentError
            `seed` is not a whole number, 0 or more.
        MemoryRefusedError
            The state does not fit.
        """
        count = _whole("qubits", qubits, 0)
        generator = np.random.Generator(np.random.PCG64(_whole("seed", seed, 0)))
        array = _allocate("random", count, dtype)
        piece = min(array.size, 1 << 20)
        for start in range(0, array.size, piece):
            numbers = generator.standard_normal(2 * piece)
            array[start : start + piece] = numbers[0::2] + 1j * numbers[1::2]
        made = cls._over(array)
        array *= 1.0 / made.norm()
        return made

    @classmethod
    def from_array(cls, array: Any) -> State:
        """Return a state over an array of the caller's: no copy, the array itself is evolved.

        Parameters
        ----------
        array : ndarray, shape (2**n,), complex128 or complex64, C-contiguous, aligned, writeable
            Or an array of another library that shares its memory by DLPack or the array interface.

        Raises
        ------
        StateTypeError, StateShapeError, StateLayoutError
            The array is of another type, length or layout; the message says what to do.
        StateBusyError
            The array is in use by another call.
        ArgumentError
            An amplitude is not finite.
        """
        try:
            shared = shared_array(array)
        except TypeError as failure:
            raise StateTypeError(
                f"array: {failure} ({type(array).__name__}); move it to the processor, or give a copy",
                dtype=type(array),
                expected="complex128 or complex64",
            ) from None
        array = array if shared is None else shared  # what shares no memory is refused by the core
        norms = _native.squared_norms(array, 1 if np.size(array) < 1 << 16 else _threads.resolve(None))
        if not np.isfinite(norms).all():
            raise ArgumentError(
                "array: not finite (it holds NaN or infinite amplitudes); give finite ones",
                argument="array",
                value=array,
            )
        return cls._over(array)

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> State:
        """Read a state from an NPY file.

        Raises
        ------
        ArgumentError
            The file is missing or is no NPY file.
        StateTypeError, StateShapeError
            It holds something else than 2**n complex amplitudes.
        """
        try:
            held = np.load(path, mmap_mode="r", allow_pickle=False)
            if isinstance(held, np.ndarray):
                _memory.require(held.nbytes, "load", 1)
                held = np.load(path, allow_pickle=False)  # read, not mapped: pages of the file would count as ours
        except (OSError, ValueError, EOFError) as failure:
            raise ArgumentError(
                f"path: cannot be read as an NPY file ({os.fspath(path)}: {failure}); give a file that State.save wrote",
                argument="path",
                value=path,
            ) from None
        return cls.from_array(np.ascontiguousarray(held))

    def save(self, path: str | os.PathLike[str]) -> None:
        """Write the amplitudes to an NPY file, under a temporary name that is renamed when complete."""
        target = Path(path)
        handle, name = tempfile.mkstemp(dir=target.parent, prefix=f".{target.name}.", suffix=".part")
        try:
            with os.fdopen(handle, "wb") as file:
                np.save(file, self.amplitudes, allow_pickle=False)
            os.chmod(name, 0o666 & ~_umask())
            os.replace(name, target)
        except BaseException:
            Path(name).unlink(missing_ok=True)
            raise

    @property
    def amplitudes(self) -> npt.NDArray[Any]:
        """The array itself, shape (2**qubits,); not a copy.

        Raises
        ------
        StateSpoiledError
            A second interrupt left the state half-way through a pass.
        """
        if self._spoiled:
            raise StateSpoiledError(
                "state: spoiled by a second interrupt half-way through a pass; make it again from its start"
            )
        return self._array

    @property
    def __array_interface__(self) -> dict[str, Any]:
        """Share the amplitudes with whatever reads NumPy's array interface; no copy."""
        return dict(self.amplitudes.__array_interface__)

    def __dlpack__(self, **options: Any) -> Any:
        """Share the amplitudes by DLPack; no copy, unless the options ask for one."""
        return self.amplitudes.__dlpack__(**options)

    def __dlpack_device__(self) -> tuple[int, int]:
        """The processor."""
        device: tuple[int, int] = self.amplitudes.__dlpack_device__()
        return device

    @property
    def qubits(self) -> int:
        """Number of qubits."""
        return int(self._array.size).bit_length() - 1

    @property
    def dtype(self) -> np.dtype[Any]:
        """complex128 or complex64."""
        return self._array.dtype

    @property
    def last_run(self) -> Run | None:
        """What the last `apply` did, or None."""
        return self._run

    def apply(self, rotations: Rotations, *, threads: int | None = None, progress: Progress | None = None) -> None:
        """Evolve the state in place by a circuit; returns None.

        Parameters
        ----------
        rotations : Rotations
            On as many qubits as the state.
        threads : int, optional
            Default: `trueturn.threads`, then ``TRUETURN_NUM_THREADS``, then all processors. States below 2**16
            amplitudes use one thread whatever is asked.
        progress : callable, optional
            Called with (finished passes, passes in all) about forty times a second at most; an exception of its own
            stops the run after the current pass and passes through.

        Raises
        ------
        StateShapeError
            The circuit acts on another number of qubits.
        StateBusyError
            Another call is using the array.
        KeyboardInterrupt
            Ctrl-C: the state is that of the finished passes, a valid unit vector. A second Ctrl-C stops at once; the
            state is then spoiled and later calls say so.

        Notes
        -----
        Rounding: see `Rotations.rounding_bound`. Memory beyond the state: one coset of 64 KiB for each thread.
        """
        _require("rotations", rotations, Rotations, "make one by a formula's .rotations")
        self._run = Run(*self._guarded(_native.evolve, rotations._circuit, _threads.resolve(threads), progress))

    def _guarded(self, call: Callable[..., Any], *arguments: Any) -> Any:
        try:
            return call(self.amplitudes, *arguments)
        except StateSpoiledError:
            if self._spoiled:
                raise
            self._spoiled = True
            raise KeyboardInterrupt("stopped at once on a second interrupt; the state is spoiled") from None

    def rotate(self, string: str, angle: float) -> None:
        """Apply exp(-i angle P) in place; `string` is written as ``"X_0 Z_3"``, `angle` is in radians.

        Raises
        ------
        TermError
            The string does not parse or acts outside of the state.
        RotationError
            The angle is not finite.
        """
        operator = Operator.gather([(1.0, string)], qubits=self.qubits)
        factor = float(operator.coefficients[0])
        turn = Rotations(operator.x_masks, operator.z_masks, [angle], self.qubits)
        self.apply(turn if factor > 0.0 else turn.inverse())

    def expectation(self, operator: Operator, *, threads: int | None = None) -> float:
        """Return <ψ|operator|ψ>; the state is not normalised first.

        Raises
        ------
        StateShapeError
            The operator acts on another number of qubits.
        """
        _require("operator", operator, Operator, "make one from text: Operator('Z_0', qubits=…)")
        return self.expectations([operator], threads=threads).item()

    def expectations(self, operators: Sequence[Operator], *, threads: int | None = None) -> npt.NDArray[np.float64]:
        """Return <ψ|operator|ψ> for each of several operators, shape (len(operators),).

        They share the traversals of the state, up to 64 operators at a time: two or three for local operators, more where
        their x masks are many and independent. The last bits of an expectation are the same whenever the same operators
        are asked for together, in the same order.

        Raises
        ------
        StateShapeError
            An operator acts on another number of qubits.
        ArgumentError
            An entry is no Operator.
        """
        for operator in operators:
            _require("operator", operator, Operator, "make one from text: Operator('Z_0', qubits=…)")
        terms = [operator._terms for operator in operators]
        return np.array(_native.expectations(terms, self.amplitudes, _threads.resolve(threads)))

    def variance(self, operator: Operator, *, threads: int | None = None) -> float:
        """Return ‖(operator - mean) ψ‖², the variance for a unit vector.

        Raises
        ------
        StateShapeError
            The operator acts on another number of qubits.
        MemoryRefusedError
            A second state vector does not fit.
        """
        workers = _threads.resolve(threads)
        shifted = operator - self.expectation(operator, threads=threads)
        _memory.require(16 << self.qubits, "variance", 2)
        source = self.amplitudes.astype(np.complex128, copy=False)
        image = np.empty_like(source)
        _native.apply_terms(shifted._terms, source, image, workers)
        return _native.pairwise_sum(_native.squared_norms(image, workers).tolist())

    def overlap(self, other: State, *, threads: int | None = None) -> complex:
        """Return <self|other>, summed in double precision.

        Raises
        ------
        StateShapeError, StateTypeError
            The states differ in qubits or precision.
        """
        _require("other", other, State, "make one by State.from_array")
        return _native.overlap(self.amplitudes, other.amplitudes, _threads.resolve(threads))

    def distance(self, other: State, phase: str = "kept", *, threads: int | None = None) -> float:
        """Return ‖self - other‖, or with ``phase="free"`` the least ‖self - e^{iα} other‖ over α.

        Raises
        ------
        ArgumentError
            `phase` is neither ``"kept"`` nor ``"free"``.
        StateShapeError, StateTypeError
            The states differ in qubits or precision.

        Notes
        -----
        The free distance is computed as a norm of a difference too: √(2 - 2|overlap|) would lose half the digits.
        """
        if phase not in ("kept", "free"):
            raise ArgumentError(f'phase: unknown ({phase!r}); give "kept" or "free"', argument="phase", value=phase)
        _require("other", other, State, "make one by State.from_array")
        factor = 1.0 + 0.0j
        if phase == "free":
            shared = other.overlap(self, threads=threads)
            factor = shared / abs(shared) if shared else factor
        return _native.distance(self.amplitudes, other.amplitudes, factor, _threads.resolve(threads))

    def norm(self, *, threads: int | None = None) -> float:
        """Return ‖ψ‖."""
        squares = _native.squared_norms(self.amplitudes, _threads.resolve(threads))
        return math.sqrt(_native.pairwise_sum(squares.tolist()))

    def sample(self, shots: int, seed: int) -> npt.NDArray[np.int64]:
        """Draw basis-state indices with probabilities |amplitude|² / ‖ψ‖².

        Returns
        -------
        ndarray, shape (shots,), int64
            In order of drawing; the same for the same seed.

        Raises
        ------
        ArgumentError
            `shots` or `seed` is not a whole number, 0 or more; all amplitudes are 0.
        """
        generator = np.random.Generator(np.random.PCG64(_whole("seed", seed, 0)))
        draws = generator.random(_whole("shots", shots, 0))
        squares = _native.squared_norms(self.amplitudes, _threads.resolve(None))
        ends = np.cumsum(squares)
        if not ends[-1] > 0.0:
            raise ArgumentError(
                f"state: nothing to draw from (squared norm {ends[-1]:g}); give it amplitudes",
                argument="state",
                value=0.0,
            )
        targets = draws * ends[-1]
        blocks = np.minimum(np.searchsorted(ends, targets, side="right"), ends.size - 1)
        size = self._array.size // squares.size if self._array.size >= squares.size else self._array.size
        found = np.empty(draws.size, dtype=np.int64)
        for block in np.unique(blocks):
            here = np.flatnonzero(blocks == block)
            part = self.amplitudes[block * size : (block + 1) * size]
            inside = np.cumsum(np.abs(part.astype(np.complex128)) ** 2)
            rest = targets[here] - (ends[block] - squares[block])
            within = np.searchsorted(inside, np.clip(rest, 0.0, None), side="right")
            last = int(np.flatnonzero(np.abs(part))[-1])
            found[here] = block * size + np.minimum(within, last)
        return found

    def copy(self) -> State:
        """Return a state of its own with the same amplitudes.

        Raises
        ------
        MemoryRefusedError
            A second state vector does not fit.
        """
        _memory.require(self._array.nbytes, "copy", 2)
        room = _allocation.amplitudes(self._array.size, self._array.dtype)
        np.copyto(room, self.amplitudes)
        return State._over(room)

    def __repr__(self) -> str:
        spoiled = ", spoiled" if self._spoiled else ""
        return f"State(qubits={self.qubits}, dtype={self.dtype}{spoiled})"


def _allocate(what: str, qubits: int, dtype: npt.DTypeLike) -> npt.NDArray[Any]:
    try:
        kind: np.dtype[Any] | None = np.dtype(dtype)
    except TypeError:
        kind = None
    if kind is None or kind not in (np.dtype(np.complex128), np.dtype(np.complex64)):
        raise StateTypeError(
            f"dtype: wrong type ({dtype if kind is None else kind}); give complex128 or complex64",
            dtype=dtype,
            expected="complex128 or complex64",
        )
    size = kind.itemsize
    # More qubits than any address has bits are refused all the same, without writing such a number out.
    _memory.require(size << min(qubits, 128), what, lambda n: size << n)
    return _allocation.amplitudes(1 << qubits, kind)


def _require(argument: str, value: object, kind: type, remedy: str) -> None:
    if not isinstance(value, kind):
        raise ArgumentError(
            f"{argument}: no {kind.__name__} ({type(value).__name__}); {remedy}", argument=argument, value=value
        )


def _whole(argument: str, value: Any, least: int) -> int:
    if isinstance(value, bool) or not isinstance(value, (int, np.integer)) or value < least:
        raise ArgumentError(
            f"{argument}: not a whole number from {least} ({value!r}); give one", argument=argument, value=value
        )
    return int(value)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def require_same_qubits(state: State, operator: Operator, argument: str) -> None:
    """Refuse what is no state or no operator, and an operator on another number of qubits than the state."""
    _require("state", state, State, "make one by State.product or another of its constructors")
    _require(argument, operator, Operator, "make one from text: Operator('Z_0', qubits=…)")
    if operator.qubits != state.qubits:
        raise StateShapeError(
            f"{argument}: acts on {operator.qubits} qubits, the state on {state.qubits}; "
            f"build it with qubits={state.qubits}",
            shape=operator.qubits,
            expected=state.qubits,
        )


def require_normalised(state: State) -> None:
    """Refuse a state whose norm is not 1 within 1e-6 (1e-3 for complex64)."""
    norm = state.norm()
    if not abs(norm - 1.0) <= (1e-3 if state.dtype == np.dtype(np.complex64) else 1e-6):
        raise ArgumentError(
            f"state: is not normalised (norm {norm:.9g}); divide its amplitudes by their norm",
            argument="state",
            value=norm,
        )
