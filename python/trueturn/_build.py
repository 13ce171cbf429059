"""What this copy of trueturn is made of."""

from __future__ import annotations

import platform
import sys
from importlib.metadata import PackageNotFoundError, version

from trueturn import _native, _threads

__all__ = ["build_info"]


def build_info() -> dict[str, str]:
    """Return versions, instruction sets and threads, for reports and bug reports.

    Raises
    ------
    ArgumentError
        ``TRUETURN_ISA`` or ``TRUETURN_NUM_THREADS`` is set to something impossible.
    """
    available, chosen = _native.instruction_sets()
    return {
        "trueturn": _version("trueturn"),
        "instruction_set": chosen,
        "instruction_sets_available": ", ".join(available),
        "threads": str(_threads.resolve(None)),
        "python": platform.python_version(),
        "numpy": _version("numpy"),
        "scipy": _version("scipy"),
        "system": f"{sys.platform} {platform.machine()}",
    }


def _version(package: str) -> str:
    try:
        return version(package)
    except PackageNotFoundError:
        return "not installed"
