"""One-qubit states by name or by Bloch angles."""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence

from trueturn.errors import ArgumentError

__all__ = ["site_amplitudes"]

_HALF = math.sqrt(0.5)
_NAMED: dict[str, tuple[complex, complex]] = {
    "0": (1.0, 0.0),
    "1": (0.0, 1.0),
    "+": (_HALF, _HALF),
    "-": (_HALF, -_HALF),
    "+i": (_HALF, 1j * _HALF),
    "-i": (_HALF, -1j * _HALF),
}


def site_amplitudes(sites: str | Sequence[object]) -> list[tuple[complex, complex]]:
    """Return the amplitudes of |0> and |1> for each qubit, qubit 0 first.

    Raises
    ------
    ArgumentError
        An entry is neither a name nor a pair of finite angles.
    """
    if not isinstance(sites, (str, Sequence)):
        raise _refuse(sites, "not a text or a list")
    return [_one(place, site) for place, site in enumerate(sites)]


def _one(place: int, site: object) -> tuple[complex, complex]:
    if isinstance(site, str):
        if site not in _NAMED:
            raise _refuse(site, f"unknown state of qubit {place}")
        return _NAMED[site]
    try:
        theta, phi = (float(angle) for angle in site)  # type: ignore[attr-defined]
    except (TypeError, ValueError):
        raise _refuse(site, f"no state of qubit {place}") from None
    if not (math.isfinite(theta) and math.isfinite(phi)):
        raise _refuse(site, f"angles of qubit {place} are not finite")
    return math.cos(theta / 2) + 0j, cmath.rect(1.0, phi) * math.sin(theta / 2)


def _refuse(value: object, wrong: str) -> ArgumentError:
    return ArgumentError(
        f"sites: {wrong} ({value!r}); give a text of 0 1 + -, or a list of 0 1 + - +i -i or (theta, phi) pairs",
        argument="sites",
        value=value,
    )
