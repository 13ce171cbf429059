"""How the engine carries a circuit out: passes over the state, and the time that they should take."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np
import numpy.typing as npt

from trueturn import _allocation, _native
from trueturn.errors import ArgumentError

__all__ = ["MemoryPass", "PassPlan", "pass_plan"]

_CACHED_QUBITS = 12
_LARGEST_PROBE = 22
_MOST_QUBITS = 62


@dataclass(frozen=True)
class MemoryPass:
    """One traversal of the state.

    Attributes
    ----------
    rotations : int
        Rotations that it carries out.
    operations : int
        Operations they were joined into: a whole bond, or a run of diagonal strings, is one.
    tile_runs : int
        Times that amplitudes go from cache to registers and back.
    block_qubits : int
        2**block_qubits amplitudes are in cache at a time.
    in_place : bool
        Whether the blocks are contiguous; else they are gathered and put back.
    """

    rotations: int
    operations: int
    tile_runs: int
    block_qubits: int
    in_place: bool


@dataclass(frozen=True)
class PassPlan:
    """What `Rotations.plan` returns. Deterministic but for `seconds`.

    Attributes
    ----------
    blocks : tuple of (int, tuple of MemoryPass)
        In order of time: how often these passes run in a row. A body that repeats is planned over four repeats at once.
    passes, rotations : int
        In all.
    seconds : float
        Predicted time on one thread, from the costs of a pass, a tile run and an operation measured on this machine when
        first asked. A guide within a factor of two or so, not a promise: see ``benches/`` for measurements.
    """

    qubits: int
    blocks: tuple[tuple[int, tuple[MemoryPass, ...]], ...]
    seconds: float

    @property
    def passes(self) -> int:
        """Passes in all."""
        return sum(times * len(passes) for times, passes in self.blocks)

    @property
    def rotations(self) -> int:
        """Rotations in all; equal strings that met have merged."""
        return sum(times * sum(one.rotations for one in passes) for times, passes in self.blocks)

    def __str__(self) -> str:
        """Return a table, one line a pass."""
        lines = [
            f"{self.rotations} rotations on {self.qubits} qubits in {self.passes} passes, "
            f"about {self.seconds:.2g} s on one thread"
        ]
        for times, passes in self.blocks:
            lines.append(f"  {times} ×")
            for one in passes:
                where = "in place" if one.in_place else "gathered"
                lines.append(
                    f"    {one.rotations:>5} rotations, {one.operations:>4} operations, {one.tile_runs:>3} tile runs, "
                    f"blocks of 2^{one.block_qubits} {where}"
                )
        return "\n".join(lines)


def pass_plan(circuit: _native.Rotations, dtype: npt.DTypeLike) -> PassPlan:
    """Plan a native circuit for amplitudes of a type."""
    if circuit.qubits > _MOST_QUBITS:
        raise ArgumentError(
            f"plan: no state vector has {circuit.qubits} qubits; plan circuits of at most {_MOST_QUBITS}",
            argument="plan",
            value=circuit.qubits,
        )
    try:
        kind = None if dtype is None else np.dtype(dtype)
    except TypeError:
        kind = None
    if kind not in (np.dtype(np.complex64), np.dtype(np.complex128)):
        raise ArgumentError(
            f"dtype: amplitudes have none of this kind ({dtype}); give complex128 or complex64",
            argument="dtype",
            value=dtype,
        )
    single = kind == np.dtype(np.complex64)
    blocks = tuple(
        (
            times,
            tuple(
                MemoryPass(rotations, operations, runs, dimension, contiguous)
                for rotations, dimension, contiguous, runs, operations in passes
            ),
        )
        for times, passes in circuit.passes(single)
    )
    costs = _costs(min(circuit.qubits, _LARGEST_PROBE), single)
    once = [
        times
        * sum(costs.traversal + costs.tile_run * one.tile_runs + costs.operation * one.operations for one in passes)
        for times, passes in blocks
    ]
    return PassPlan(circuit.qubits, blocks, math.fsum(once) * 2.0**circuit.qubits)


@dataclass(frozen=True)
class _Costs:
    """Seconds for each amplitude on one thread."""

    traversal: float
    tile_run: float
    operation: float


@cache
def _costs(qubits: int, single: bool) -> _Costs:
    """Measure a pass over a state of this size, and tile runs and operations in cache."""
    kind = np.complex64 if single else np.complex128
    # X strings on three qubits above the lanes of a vector share a tile run; each triple makes one of its own.
    triples = [[1 << (5 + q) for q in range(3)], [1 << (8 + q) for q in range(3)]]
    one = _seconds(_CACHED_QUBITS, kind, triples[0])
    two = _seconds(_CACHED_QUBITS, kind, triples[0] + triples[1])
    wide = _seconds(_CACHED_QUBITS, kind, [mask ^ low for mask in triples[0] for low in (0, 1, 2, 3)])
    operation = max((wide - one) / 9.0, 1e-12)
    tile_run = max(two - one - 3.0 * operation, 1e-12)
    return _Costs(max(_seconds(qubits, kind, []) - tile_run, 1e-12), tile_run, operation)


def _seconds(qubits: int, kind: npt.DTypeLike, x_masks: list[int]) -> float:
    """Seconds an amplitude of a circuit of X strings, or of a global phase where there are none; the best of three."""
    phase = 0.0 if x_masks else 0.1
    circuit = _native.Rotations.from_list(x_masks, [0] * len(x_masks), np.full(len(x_masks), 0.1), qubits, phase)
    state = _allocation.amplitudes(1 << qubits, kind)
    return _best(lambda: _native.evolve(state, circuit, 1, None)) / state.size


def _best(work: Callable[[], object]) -> float:
    found = math.inf
    for _ in range(3):
        start = time.perf_counter()
        work()
        found = min(found, time.perf_counter() - start)
    return found
