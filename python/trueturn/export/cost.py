"""What a circuit costs as gates of a device."""

from __future__ import annotations

import math
from dataclasses import dataclass

from trueturn import _memory, _native
from trueturn.errors import RotationError
from trueturn.export.device import Device, Placed
from trueturn.ladders import is_list
from trueturn.rotations import Rotations

__all__ = ["Cost", "cost_of", "t_count", "written_as"]

BYTES_PER_GATE = 64  # a gate of a repeated body while its ends are compared: itself, twice, and its place on two qubits


@dataclass(frozen=True)
class Cost:
    """What a circuit costs as gates of a device; counts stop at 2**64 - 1.

    Attributes
    ----------
    two_qubit_gates : int
        After all savings and with routing: controlled gates, native zz gates, and three for each swap.
    unsaved_two_qubit_gates : int
        2(w-1) for each rotation of weight w: nothing saved, nothing routed.
    swaps : int
    two_qubit_depth, depth : int
        Layers of two-qubit gates, and of all gates, when each starts as soon as its qubits are free; a swap is three.
    one_qubit_gates : int
        Rotations included.
    rotations : int
        Rotations exp(-i θ P) that are not a mere global phase.
    clifford_rotations, t_rotations : int
        Those with θ a multiple of π/4, which take no T gate, and with θ an odd multiple of π/8, which take one.
    t_count : int
        T gates when every other rotation is synthesised with its share of `synthesis_error`; see `t_count` below.
    synthesis_error : float
    success : float or None
        Probability that no gate and no readout fails; None where the device states no rate.
    routing : str
        ``"bridges"`` or ``"swaps"``, as it was done.
    start_layout, end_layout : tuple of int
        Entry q is the physical qubit that holds qubit q.
    physical_qubits : int
    """

    two_qubit_gates: int
    unsaved_two_qubit_gates: int
    swaps: int
    two_qubit_depth: int
    depth: int
    one_qubit_gates: int
    rotations: int
    clifford_rotations: int
    t_rotations: int
    t_count: int
    synthesis_error: float
    success: float | None
    routing: str
    start_layout: tuple[int, ...]
    end_layout: tuple[int, ...]
    physical_qubits: int

    @property
    def assumptions(self) -> tuple[str, ...]:
        """What these figures take for granted, in sentences."""
        said = [
            "T count: 3 log2(1/ε) for each rotation that is neither Clifford nor T-like, the leading term of a typical "
            "count (Ross, Selinger 2016), with ε the synthesis error divided by the number of such rotations."
        ]
        if self.success is not None:
            said.append(
                "Success: gates and readouts fail independently at the rates given, and any failure spoils the result; "
                "idle qubits do not decay. An observable on few qubits may fare better."
            )
        return tuple(said)


def cost_of(circuit: Rotations, device: Device) -> Cost:
    """Count the gates of a circuit on a device; see `Rotations.cost`."""
    return written_as(circuit, device.placed(circuit.qubits))[0]


def written_as(circuit: Rotations, placed: Placed) -> tuple[Cost, _native.GateOptions]:
    """Return the cost and the options that it holds for: the routing with the fewest two-qubit gates."""
    if not math.isfinite(_native.global_phase(circuit._circuit)):
        raise RotationError("phase: grows out of range with the identity strings; use smaller angles", argument="phase")
    _require_memory(circuit)
    best: tuple[Cost, _native.GateOptions] | None = None
    for routing in placed.routings():
        options = placed.options(routing)
        made = _counted(circuit, placed, options, routing)
        if best is None or made.two_qubit_gates < best[0].two_qubit_gates:
            best = made, options
    assert best is not None
    return best


def _counted(circuit: Rotations, placed: Placed, options: _native.GateOptions, routing: str) -> Cost:
    numbers, end = _native.gate_counts(circuit._circuit, options)
    controlled, zz, swaps, one_qubit, clifford, t_like, other, depth, two_qubit_depth = numbers
    device = placed.device
    two_qubit = min(controlled + zz + 3 * swaps, 2**64 - 1)
    return Cost(
        two_qubit_gates=two_qubit,
        unsaved_two_qubit_gates=circuit.two_qubit_gates(),
        swaps=swaps,
        two_qubit_depth=two_qubit_depth,
        depth=depth,
        one_qubit_gates=one_qubit,
        rotations=min(clifford + t_like + other, 2**64 - 1),
        clifford_rotations=clifford,
        t_rotations=t_like,
        t_count=t_like + t_count(other, device.synthesis_error),
        synthesis_error=device.synthesis_error,
        success=_success(device, two_qubit, one_qubit, circuit.qubits),
        routing=routing,
        start_layout=placed.layout,
        end_layout=tuple(end),
        physical_qubits=placed.qubits,
    )


def t_count(rotations: int, synthesis_error: float) -> int:
    """Return the T gates for rotations by general angles, rounded up.

    Parameters
    ----------
    rotations : int
        R of them.
    synthesis_error : float
        For all together, in the operator norm: each gets an equal share ε = synthesis_error / R, and the triangle
        inequality adds the shares up.

    Returns
    -------
    int
        R · 3 log2(1/ε).

    References
    ----------
    N. J. Ross, P. Selinger, "Optimal ancilla-free Clifford+T approximation of z-rotations", Quantum Inf. Comput. 16,
    901 (2016), abstract: 3 log2(1/ε) + O(log log(1/ε)) in the typical case. The leading term is taken.

    Examples
    --------
    >>> t_count(1, 1e-3), t_count(100, 1e-3)
    (30, 4983)
    """
    if rotations == 0:
        return 0
    return max(0, math.ceil(rotations * 3.0 * (math.log2(rotations) - math.log2(synthesis_error))))


def _success(device: Device, two_qubit: int, one_qubit: int, qubits: int) -> float | None:
    rates = (device.two_qubit_error, device.one_qubit_error, device.readout_error)
    if all(rate is None for rate in rates):
        return None
    return math.exp(
        math.fsum(
            count * math.log1p(-rate) for count, rate in zip((two_qubit, one_qubit, qubits), rates, strict=True) if rate
        )
    )


def _require_memory(circuit: Rotations) -> None:
    """Refuse repeated bodies whose gates do not fit; everything else streams."""
    gates = sum(_stored(block.rotations) for block in circuit.blocks if block.repeat > 1)
    _memory.require(BYTES_PER_GATE * gates, "circuit")


def _stored(body: Rotations) -> int:
    if is_list(body):
        return 2 * body.two_qubit_gates() + 3 * body.count
    return sum(_stored(block.rotations) for block in body.blocks)
