"""How much memory there is, and refusal of what does not fit before anything is allocated."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from pathlib import Path

from trueturn.errors import MemoryRefusedError

__all__ = ["allowed_bytes", "available_bytes", "readable", "require"]

AMPLITUDE_BYTES = 16


def available_bytes() -> int | None:
    """Return the bytes that this process can still allocate, or None where the system does not tell.

    The least of: the kernel's own estimate (``MemAvailable``), what each enclosing control group leaves,
    and what the address-space limit leaves. Elsewhere than on Linux: the free pages that ``sysconf``
    reports, else all pages.
    """
    bounds = [bound for bound in (_kernel_estimate(), *_control_groups(), _address_space()) if bound is not None]
    return max(0, min(bounds)) if bounds else None


def allowed_bytes() -> int:
    """Return `available_bytes` as a limit for growing results: 2**63 where the system does not tell."""
    available = available_bytes()
    return 1 << 63 if available is None else available


def require(needed: int, what: str, bytes_for_qubits: Callable[[int], int] | int | None = None) -> int | None:
    """Refuse a request that does not fit.

    Parameters
    ----------
    needed : int
        Bytes about to be allocated.
    what : str
        Whose request it is, such as ``"sparse"``; opens the message.
    bytes_for_qubits : callable or int, optional
        Bytes needed as a function of the number of qubits, or a count of complex128 state vectors. Serves
        to name the largest size that fits.

    Returns
    -------
    int or None
        `available_bytes`.

    Raises
    ------
    MemoryRefusedError
        If more is needed than `available_bytes` tells; carries `needed`, `available` and `largest_qubits`
        (-1 where `bytes_for_qubits` is not given or nothing fits).
    """
    available = available_bytes()
    if available is None or needed <= available:
        return available
    if isinstance(bytes_for_qubits, int):
        vectors = bytes_for_qubits
        bytes_for_qubits = lambda qubits: vectors * AMPLITUDE_BYTES << qubits  # noqa: E731
    largest = -1
    if bytes_for_qubits is not None:
        while largest < 127 and bytes_for_qubits(largest + 1) <= available:
            largest += 1
    remedy = f"at most {largest} qubits fit" if largest >= 0 else "free memory or ask for less"
    raise MemoryRefusedError(
        f"{what}: does not fit in memory (needs {readable(needed)} of {readable(available)}); {remedy}",
        needed=needed,
        available=available,
        largest_qubits=largest,
    )


def readable(count: int) -> str:
    """Return a byte count in the unit that suits it, such as ``"1.5 GiB"``."""
    units = ("B", "KiB", "MiB", "GiB", "TiB", "PiB", "EiB")
    power = min((max(count, 1).bit_length() - 1) // 10, len(units) - 1)
    if power == 0:
        return f"{count} B"
    # Whole numbers, since an absurd request has more bytes than a float can count.
    tenths = count * 10 // 1024**power
    if tenths >= 10**8:
        return f"10^{int((count.bit_length() - 1) * 0.30103)} B"
    value = tenths / 10
    return f"{value:.1f} {units[power]}"


def _kernel_estimate() -> int | None:
    for line in _text("/proc/meminfo").splitlines():
        if line.startswith("MemAvailable:"):
            return int(line.split()[1]) * 1024
    for name in ("SC_AVPHYS_PAGES", "SC_PHYS_PAGES"):
        try:
            return os.sysconf(name) * os.sysconf("SC_PAGE_SIZE")
        except (AttributeError, ValueError, OSError):
            continue
    return None


def _control_groups() -> Iterator[int]:
    """Yield what each control group around this process leaves, counting droppable file pages as free."""
    for line in _text("/proc/self/cgroup").splitlines():
        _, controllers, path = line.split(":", 2)
        if controllers == "":
            root, limit, usage = "/sys/fs/cgroup", "memory.max", "memory.current"
        elif "memory" in controllers.split(","):
            root, limit, usage = "/sys/fs/cgroup/memory", "memory.limit_in_bytes", "memory.usage_in_bytes"
        else:
            continue
        group = Path(root + path)
        for folder in (group, *group.parents):
            allowed, used = _text(folder / limit).strip(), _text(folder / usage).strip()
            if allowed.isdigit() and used.isdigit():
                yield int(allowed) - int(used) + _droppable(folder)
            if folder == Path(root):
                break


def _droppable(folder: Path) -> int:
    for line in _text(folder / "memory.stat").splitlines():
        name, _, value = line.partition(" ")
        if name in ("inactive_file", "total_inactive_file") and value.isdigit():
            return int(value)
    return 0


def _address_space() -> int | None:
    try:
        import resource
    except ImportError:  # not on every system
        return None
    limit, _ = resource.getrlimit(resource.RLIMIT_AS)
    pages = _text("/proc/self/statm").split()
    if limit == resource.RLIM_INFINITY or not pages:
        return None
    return limit - int(pages[0]) * resource.getpagesize()


def _text(path: str | Path) -> str:
    try:
        return Path(path).read_text(encoding="ascii", errors="replace")
    except OSError:
        return ""
