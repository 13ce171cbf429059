"""How two-qubit gates whose failure an observable can see are counted: plain, by the caller, or as written for a device."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from trueturn.device.causal_cone import causal_cone
from trueturn.errors import ArgumentError
from trueturn.export.cost import cost_of
from trueturn.export.hardware import Hardware
from trueturn.operator import Operator
from trueturn.randomised.checks import as_int
from trueturn.rotations import Rotations

__all__ = ["Counting", "checked_counting", "options_of", "visible_gates"]

PLAIN = "Two-qubit gates are 2(w-1) for a rotation of weight w in the cone, as the circuit is given; nothing is routed."
OWN = "Two-qubit gates are those that the function gates= counts in the cone."
WRITTEN = (
    "Two-qubit gates are those of the whole circuit as it is written for the device ({}), or 2(w-1) for a rotation of weight "
    "w in the cone where that is less."
)
ROUTED = (
    "Two-qubit gates are those of the whole circuit as it is written for the device ({}): routing puts gates on qubits outside "
    "the cone too."
)


def visible_gates(circuit: Rotations, observable: Operator, hardware: Hardware) -> int:
    """Bound the two-qubit gates that are written for a device and whose failure can reach an observable.

    No more than all of them; and where nothing is routed no more than 2(w-1) for each rotation of the causal cone, since
    savings only take gates away.
    """
    total = cost_of(circuit, hardware).two_qubit_gates
    if _routed(hardware) or not observable.support():
        return total
    return min(total, causal_cone(circuit, observable, by="support").rotations.two_qubit_gates())


@dataclass(frozen=True)
class Counting:
    """A way to count gates.

    Attributes
    ----------
    plain : callable
        Gates of Rotations as they are given; additive over blocks.
    hardware : Hardware or None
        What circuits are written for; None where `plain` says all.
    words : str
        The same as a sentence.
    """

    plain: Callable[[Rotations], int]
    hardware: Hardware | None
    words: str

    @property
    def routed(self) -> bool:
        """Whether gates outside the cone of the rotations count too."""
        return self.hardware is not None and _routed(self.hardware)

    def of(self, circuit: Rotations) -> int:
        """Count gates as they are given.

        Raises
        ------
        ArgumentError
            The function of the caller gives no count.
        """
        found = as_int(self.plain(circuit))
        if isinstance(found, bool) or not isinstance(found, int) or found < 0:
            raise ArgumentError(
                f"gates: gives no count ({found!r}); return a whole number from 0", argument="gates", value=found
            )
        return found

    def whole(self, circuit: Rotations) -> int:
        """Count all gates of a circuit, as it is written for the device where there is one."""
        return self.of(circuit) if self.hardware is None else cost_of(circuit, self.hardware).two_qubit_gates


def checked_counting(gates: object, device: object) -> Counting:
    """Give the way to count that is asked for.

    Raises
    ------
    ArgumentError
        `gates` is no function, `device` no device, or both are given.
    """
    if gates is not None and not callable(gates):
        raise ArgumentError(
            f"gates: is no function of Rotations ({gates!r}); give one that counts, or leave it out",
            argument="gates",
            value=gates,
        )
    if device is None:
        return Counting(Rotations.two_qubit_gates, None, PLAIN) if gates is None else Counting(gates, None, OWN)
    if gates is not None:
        raise ArgumentError(
            "gates: given beside device, which counts too; give one of the two", argument="gates", value=gates
        )
    hardware = device if isinstance(device, Hardware) else Hardware.of(options_of(device))
    pattern = ROUTED if _routed(hardware) else WRITTEN
    return Counting(Rotations.two_qubit_gates, hardware, pattern.format(_described(hardware)))


def options_of(device: object) -> dict[str, Any]:
    """Return the options of a device as keywords."""
    if isinstance(device, Mapping) and all(isinstance(name, str) for name in device):
        return dict(device)
    raise ArgumentError(
        f"device: neither a mapping nor a Hardware ({device!r}); give options of Rotations.cost, such as "
        "{'connectivity': 'line'}",
        argument="device",
        value=device,
    )


def _routed(hardware: Hardware) -> bool:
    return hardware.connectivity not in (None, "all")


def _described(hardware: Hardware) -> str:
    joined = "pairs joined" if hardware.join_pairs else "pairs not joined"
    if not _routed(hardware):
        return f"native {hardware.native}, {joined}, all qubits connected"
    shape = hardware.connectivity if isinstance(hardware.connectivity, str) else "own connectivity"
    return f"native {hardware.native}, {joined}, {shape}, routing {hardware.routing}"
