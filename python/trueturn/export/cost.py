"""What a circuit costs as gates of a device."""

from __future__ import annotations

import math
from dataclasses import dataclass

from trueturn import _memory, _native
from trueturn.device.shares import t_gates
from trueturn.errors import RotationError
from trueturn.export.hardware import Hardware, Placed
from trueturn.ladders import is_list
from trueturn.rotations import Rotations

__all__ = ["Cost", "cost_as_written", "cost_of", "written_as"]

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
    two_qubit_depth, depth : int or None
        Layers of two-qubit gates, and of all gates, when each starts as soon as its qubits are free; a swap is three. None
        only for a file with loops that take too long to follow.
    one_qubit_gates : int
        Rotations included.
    rotations : int
        Rotations exp(-i θ P) that are not a mere global phase.
    clifford_rotations, t_rotations : int
        Those with θ a multiple of π/4, which take no T gate, and with θ an odd multiple of π/8, which take one.
    t_count : int
        T gates where the R other rotations are synthesised, each to ε = synthesis_error / R, so that together they are
        off by no more than `synthesis_error` in the operator norm (triangle inequality): 3 log2(1/ε) each, rounded up
        (Ross, Selinger 2016, the leading term of the typical count).
    synthesis_error : float
    success : float or None
        Probability that no gate and no readout fails; None where the device states no rate.
    routing : str
        ``"bridges"`` or ``"swaps"``, as it was done; ``"as written"`` for a file that was read.
    start_layout, end_layout : tuple of int
        Entry q is the physical qubit that holds qubit q.
    physical_qubits : int
    larger_gates : int
        Gates on more than two qubits, which only files that were read have; not among the two-qubit gates.

    References
    ----------
    N. J. Ross, P. Selinger, "Optimal ancilla-free Clifford+T approximation of z-rotations", Quantum Inf. Comput. 16,
    901 (2016), abstract.
    """

    two_qubit_gates: int
    unsaved_two_qubit_gates: int
    swaps: int
    two_qubit_depth: int | None
    depth: int | None
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
    larger_gates: int = 0

    @property
    def assumptions(self) -> tuple[str, ...]:
        """What these figures take for granted, in sentences."""
        said = [
            "T count: 3 log2(1/ε), rounded up, for each rotation that is neither Clifford nor T-like: the leading term of "
            "the typical count (Ross, Selinger 2016), ε being the synthesis error divided by their number."
        ]
        if self.routing == "as written":
            said.append(
                "Gates of a file count as they stand there; a gate that the file defines counts by its body, unless it is "
                "named as native. Rotations are those of the products of rotations that the gates are."
            )
        if self.success is not None:
            said.append(
                "Success: gates and readouts fail independently at the rates given, and any failure spoils the result; "
                "idle qubits do not decay. An observable on few qubits may fare better."
            )
        return tuple(said)


def cost_of(circuit: Rotations, hardware: Hardware) -> Cost:
    """Count the gates of a circuit on a device; see `Rotations.cost`."""
    return written_as(circuit, hardware.placed(circuit.qubits))[0]


def cost_as_written(
    circuit: Rotations, hardware: Hardware, start_layout: tuple[int, ...], end_layout: tuple[int, ...], physical: int
) -> Cost:
    """Return the cost of a circuit that was read as its file has it; only rates and synthesis error of the device matter."""
    counts = circuit.gate_counts
    assert counts is not None
    other = counts.rotations - counts.clifford_rotations - counts.t_rotations
    known = not counts.larger_gates
    return Cost(
        two_qubit_gates=counts.two_qubit_gates,
        unsaved_two_qubit_gates=circuit.two_qubit_gates(),
        swaps=counts.swaps,
        two_qubit_depth=counts.two_qubit_depth,
        depth=counts.depth,
        one_qubit_gates=counts.one_qubit_gates,
        rotations=counts.rotations,
        clifford_rotations=counts.clifford_rotations,
        t_rotations=counts.t_rotations,
        t_count=t_gates(other, counts.t_rotations, hardware.synthesis_error),
        synthesis_error=hardware.synthesis_error,
        success=_success(hardware, counts.two_qubit_gates, counts.one_qubit_gates, circuit.qubits) if known else None,
        routing="as written",
        start_layout=start_layout,
        end_layout=end_layout,
        physical_qubits=physical,
        larger_gates=counts.larger_gates,
    )


def written_as(circuit: Rotations, placed: Placed) -> tuple[Cost, _native.GateOptions]:
    """Return the cost and the options that it holds for: routing and layout with the fewest two-qubit gates."""
    if not math.isfinite(_native.global_phase(circuit._circuit)):
        raise RotationError("phase: grows out of range with the identity strings; use smaller angles", argument="phase")
    _require_memory(circuit)
    best: tuple[Cost, _native.GateOptions] | None = None
    for routing, layout in placed.attempts(circuit):
        options = placed.options(routing, layout)
        made = _counted(circuit, placed, options, routing, layout)
        if best is None or made.two_qubit_gates < best[0].two_qubit_gates:
            best = made, options
    assert best is not None
    return best


def _counted(
    circuit: Rotations, placed: Placed, options: _native.GateOptions, routing: str, layout: tuple[int, ...]
) -> Cost:
    numbers, end = _native.gate_counts(circuit._circuit, options)
    controlled, zz, swaps, one_qubit, clifford, t_like, other, depth, two_qubit_depth = numbers
    hardware = placed.hardware
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
        t_count=t_gates(other, t_like, hardware.synthesis_error),
        synthesis_error=hardware.synthesis_error,
        success=_success(hardware, two_qubit, one_qubit, circuit.qubits),
        routing=routing,
        start_layout=layout,
        end_layout=tuple(end),
        physical_qubits=placed.qubits,
    )


def _success(hardware: Hardware, two_qubit: int, one_qubit: int, qubits: int) -> float | None:
    rates = (hardware.two_qubit_error, hardware.one_qubit_error, hardware.readout_error)
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
