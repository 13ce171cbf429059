"""The section [device] of a job file: what a circuit runs on."""

from __future__ import annotations

from dataclasses import dataclass

from trueturn.audit.job_table import Table

__all__ = ["DEVICE_KEYS", "Device", "read_device"]

DEVICE_KEYS = ("two_qubit_error", "shots", "synthesis_error", "confidence")


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
    """

    two_qubit_error: float | None
    shots: int | None
    synthesis_error: float | None
    confidence: float


def read_device(file: Table) -> Device | None:
    """Read the section; None where the file has none."""
    if "device" not in file:
        return None
    section = file.table("device")
    section.only(DEVICE_KEYS)
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
    )
