"""The section [device] of a job file: what a circuit runs on."""

from __future__ import annotations

from dataclasses import dataclass

from trueturn import lattice
from trueturn.audit.job_table import Table
from trueturn.export.hardware import Hardware

__all__ = ["DEVICE_KEYS", "Device", "read_device"]

DEVICE_KEYS = ("two_qubit_error", "shots", "synthesis_error", "confidence")
GATE_KEYS = ("ladder", "order", "native", "routing")
HARDWARE_KEYS = (
    *GATE_KEYS,
    "join_pairs",
    "connectivity",
    "rows",
    "columns",
    "layout",
    "one_qubit_error",
    "readout_error",
)


@dataclass(frozen=True)
class Device:
    """What a job says about its device.

    Attributes
    ----------
    two_qubit_error : float or None
        Probability that a two-qubit gate fails.
    shots : int or None
    synthesis_error : float or None
        Operator-norm error allowed for all rotations together; None where rotations are native.
    confidence : float
        With which the statistical error holds.
    hardware : Hardware
        Gates, connectivity and rates, for `trueturn cost` and `trueturn export`.
    """

    two_qubit_error: float | None
    shots: int | None
    synthesis_error: float | None
    confidence: float
    hardware: Hardware


def read_device(file: Table, qubits: int) -> Device | None:
    """Read the section for circuits on so many qubits; None where the file has none."""
    if "device" not in file:
        return None
    section = file.table("device")
    section.only((*DEVICE_KEYS, *HARDWARE_KEYS))
    rate = None
    if "two_qubit_error" in section:
        rate = section.number("two_qubit_error", "two_qubit_error = 0.003")
        if not 0.0 <= rate < 1.0:
            remedy = "write a probability from 0 to below 1, such as two_qubit_error = 0.003"
            raise section.error("two_qubit_error", "no possible rate", remedy, rate)
    sure = section.number("confidence", "confidence = 0.95") if "confidence" in section else 0.95
    if not 0.0 < sure < 1.0:
        raise section.error("confidence", "not between 0 and 1", "write confidence = 0.95", sure)
    return Device(
        two_qubit_error=rate,
        shots=section.whole("shots", "shots = 10000") if "shots" in section else None,
        synthesis_error=(
            section.positive("synthesis_error", "synthesis_error = 1e-3") if "synthesis_error" in section else None
        ),
        confidence=sure,
        hardware=read_hardware(section, qubits),
    )


def read_hardware(section: Table, qubits: int) -> Hardware:
    """Read what the circuits are written for, and try whether they fit."""
    options = {key: section.values[key] for key in (*GATE_KEYS, "join_pairs", "layout") if key in section}
    for key in ("two_qubit_error", "one_qubit_error", "readout_error", "synthesis_error"):
        if key in section:
            options[key] = section.number(key, f"{key} = 0.001")
    if "connectivity" in section:
        options["connectivity"] = section.values["connectivity"]
    for key in ("rows", "columns"):
        if (key in section) and (
            options.get("connectivity") != "grid" or "rows" not in section or "columns" not in section
        ):
            raise section.error(key, "goes with a grid", 'write connectivity = "grid", rows = 3, columns = 4')
    with section.blame(""):
        if "rows" in section:
            sizes = (section.whole("rows", "rows = 3"), section.whole("columns", "columns = 4"))
            options["connectivity"] = lattice.square(*sizes)
        hardware = Hardware.of(options)
        hardware.placed(qubits)
    return hardware
