"""OpenQASM files of circuits."""

from __future__ import annotations

import contextlib
import io
import os
import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path

from trueturn import _native
from trueturn._build import build_info
from trueturn.errors import ArgumentError
from trueturn.export.cost import Cost, written_as
from trueturn.export.hardware import Hardware, Placed
from trueturn.rotations import Rotations

__all__ = ["qasm_text", "write_qasm"]

Write = Callable[[str], object]

SHORTEST = {"one": len("h q[0];\n"), "two": len("cx q[0], q[1];\n")}
TEXT_LIMIT = 10**8


def write_qasm(
    circuit: Rotations, path: str | os.PathLike[str], version: int, comment: str, hardware: Hardware
) -> Cost:
    """Write a circuit to a file; see `Rotations.write_qasm`."""
    _require_version(version)
    if not isinstance(path, (str, os.PathLike)):
        raise ArgumentError(f"path: no path ({path!r}); give the file to write", argument="path", value=path)
    target = Path(path)
    placed = hardware.placed(circuit.qubits)
    cost, options = written_as(circuit, placed)
    folder = target.resolve().parent
    if target.is_dir() or not folder.is_dir():
        raise _unwritable(target, "is a folder" if target.is_dir() else "its folder does not exist")
    if version == 2:
        _require_room(folder, cost, target)
    work = ""
    try:
        handle, work = tempfile.mkstemp(prefix=f".{target.name[:80]}-", suffix=".part", dir=folder)
        with open(handle, "w", encoding="utf-8", newline="\n") as file:
            _write(circuit, file.write, version, comment, placed, cost, options)
            file.flush()
            os.fsync(file.fileno())
        os.chmod(work, 0o666 & ~_umask())
        os.replace(work, target.resolve())
    except OSError as error:
        raise _unwritable(target, error.strerror or str(error)) from error
    finally:
        if work:
            with contextlib.suppress(FileNotFoundError):
                os.unlink(work)
    return cost


def qasm_text(circuit: Rotations, version: int, comment: str, hardware: Hardware) -> str:
    """Return a circuit as text; see `Rotations.qasm`."""
    _require_version(version)
    placed = hardware.placed(circuit.qubits)
    cost, options = written_as(circuit, placed)
    if version == 2 and _least_bytes(cost) > TEXT_LIMIT:
        raise ArgumentError(
            f"version: a text of more than {TEXT_LIMIT:.0e} characters (version 2 has no loops); "
            "write it to a file with write_qasm, or use version 3",
            argument="version",
            value=version,
        )
    page = io.StringIO()
    _write(circuit, page.write, version, comment, placed, cost, options)
    return page.getvalue()


def _write(
    circuit: Rotations,
    write: Write,
    version: int,
    comment: str,
    placed: Placed,
    cost: Cost,
    options: _native.GateOptions,
) -> None:
    write(_head(circuit, version, comment, placed, cost))
    _native.write_gates(circuit._circuit, options, version == 3, write)


def _head(circuit: Rotations, version: int, comment: str, placed: Placed, cost: Cost) -> str:
    phase = _real(_native.global_phase(circuit._circuit))
    lines = ["OPENQASM 3.0;", 'include "stdgates.inc";'] if version == 3 else ["OPENQASM 2.0;", 'include "qelib1.inc";']
    lines.append("")
    lines += [f"// {line}".rstrip() for line in comment.splitlines()]
    lines += [
        f"// Written by trueturn {build_info()['trueturn']}.",
        f"// Implements {circuit.count} rotations exp(-i theta P) of Pauli strings on {circuit.qubits} qubits, times"
        " exp(i phase).",
        f"// phase = {phase} radians"
        + ("." if version == 3 else "; OpenQASM 2 leaves the global phase open: not written."),
        f"// Qubit k of a string is q[{'k' if placed.is_plain else 'start_layout[k]'}] at the start; an index of"
        " amplitudes has the first qubit as its lowest bit.",
        "// rx, ry, rz and rzz are the rotations, by an angle of 2 theta; all other gates are Clifford gates.",
        f"// Ladders: {placed.hardware.ladder}, {placed.hardware.order}. Two-qubit gates: {cost.two_qubit_gates}"
        f" (swaps: {cost.swaps}, three each), depth in them: {cost.two_qubit_depth}.",
    ]
    if not placed.is_plain:
        lines += [
            "// Entry k of a layout is the physical qubit that holds qubit k.",
            f"// trueturn: start_layout = {list(cost.start_layout)}",
            f"// trueturn: end_layout = {list(cost.end_layout)}",
        ]
    lines.append("")
    if placed.hardware.native == "zz":
        lines.append("gate rzz(theta) a, b { cx a, b; rz(theta) b; cx a, b; }")
    if version == 2 and cost.swaps:
        lines.append("gate swap a, b { cx a, b; cx b, a; cx a, b; }")
    if placed.qubits:
        lines.append(f"qubit[{placed.qubits}] q;" if version == 3 else f"qreg q[{placed.qubits}];")
    if version == 3 and float(phase) != 0.0:
        lines.append(f"gphase({phase});")
    return "\n".join(lines) + "\n"


def _real(value: float) -> str:
    """Write the shortest digits that read back as the same float, with a point."""
    text = repr(value)
    return text if "." in text else text.replace("e", ".0e")


def _require_version(version: object) -> None:
    if isinstance(version, bool) or version not in (2, 3):
        raise ArgumentError(
            f"version: neither 2 nor 3 ({version!r}); give one of them", argument="version", value=version
        )


def _least_bytes(cost: Cost) -> int:
    two_qubit_lines = cost.two_qubit_gates - 2 * cost.swaps
    return SHORTEST["one"] * cost.one_qubit_gates + SHORTEST["two"] * two_qubit_lines


def _require_room(folder: Path, cost: Cost, target: Path) -> None:
    needed, free = _least_bytes(cost), shutil.disk_usage(folder).free
    if needed > free:
        raise _unwritable(target, f"needs at least {needed:.3g} bytes of {free:.3g} free, since version 2 has no loops")


def _unwritable(target: Path, reason: str) -> ArgumentError:
    return ArgumentError(
        f"path: cannot be written ({target}: {reason}); choose another place", argument="path", value=str(target)
    )


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
