"""Reference folders: a reference on disk that numpy and any CSV reader can use without trueturn.

``manifest.json`` holds inputs, certificate and the SHA-256 of each other file; ``expectations.csv`` one line a time;
``state_*.npy`` the amplitudes. A folder is written under a temporary name and renamed when complete. States go to disk in
pieces, so a state costs no second vector.
"""

from __future__ import annotations

import csv
import hashlib
import io
import json
import os
import re
import shutil
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from trueturn import _folders
from trueturn._build import build_info
from trueturn._memory import readable
from trueturn._terms_file import one_a_line
from trueturn.errors import ArgumentError
from trueturn.operator import Operator
from trueturn.reference.certificate import Certificate

if TYPE_CHECKING:
    from trueturn.reference import Reference

__all__ = [
    "EXPECTATIONS",
    "KIND",
    "MANIFEST",
    "SCHEMA",
    "FolderWriter",
    "certificate_data",
    "digest",
    "opened",
    "require_names",
    "require_room",
    "seal",
]

SCHEMA = 1
KIND = "trueturn reference"
MANIFEST = "manifest.json"
EXPECTATIONS = "expectations.csv"
SEAL = "sha256_of_the_lines_above"
CONVENTIONS = (
    "State at time t is exp(-i H t) applied to the start, hbar = 1, global phase kept. Qubit q is bit q of the amplitude "
    "index. Errors are bounds on the 2-norm distance of a state from the exact one."
)
_PIECE = 1 << 24
_STATE = re.compile(r"state_\d+\.npy")


def belongs(name: str) -> bool:
    """Whether a name is that of a file of a reference folder."""
    return name in (MANIFEST, EXPECTATIONS) or _STATE.fullmatch(name) is not None


_FOLDER = ("reference", MANIFEST, belongs)


def require_replaceable(folder: Path) -> None:
    """Refuse a place where a reference folder cannot be written without losing something."""
    _folders.require_replaceable(folder, *_FOLDER)


@contextmanager
def opened(folder: Path, times: Sequence[float], names: Sequence[str]) -> Iterator[FolderWriter]:
    """Give a writer to a fresh folder, which takes the place of `folder` when the block ends well.

    Raises
    ------
    ArgumentError
        The place is taken by something else, or a name of an observable cannot head a column.
    OSError
        As raised by the system, such as a full disk; the old folder is then as it was.
    """
    require_names(names)
    with _folders.replacing(folder, *_FOLDER) as fresh:
        yield FolderWriter(fresh, times)


def require_names(names: Sequence[str]) -> None:
    """Refuse names of observables that would make the table hard to read or ambiguous."""
    heads = columns(names)
    for name in names:
        if not name.isprintable() or heads.count(name) > 1:
            raise ArgumentError(
                f"observables: a name that cannot head a column ({name!r}); "
                "give printable names other than time, state_error_bound and NAME_bound of another",
                argument="observables",
                value=name,
            )


def columns(names: Sequence[str]) -> list[str]:
    """Return the heads of the table: time, bound on the state, then value and bound for each observable."""
    return ["time", "state_error_bound", *(head for name in names for head in (name, f"{name}_bound"))]


def require_room(folder: Path, states: int, qubits: int) -> None:
    """Refuse what the disk has no room for, before anything is computed.

    Raises
    ------
    ArgumentError
        The states need more than is free beside `folder`.
    """
    above = next(place for place in folder.absolute().parents if place.exists())
    needed, free = states * (16 << qubits), shutil.disk_usage(above).free
    if needed > free:
        raise ArgumentError(
            f"folder: the states do not fit on the disk ({readable(needed)} of {readable(free)} free); "
            "keep fewer states, or choose another place",
            argument="folder",
            value=str(folder),
        )


class FolderWriter:
    """Fills a fresh folder: states as they come, then everything else.

    Parameters
    ----------
    folder : Path
        Exists and is empty.
    times : sequence of float
        All times of the reference, in its order.
    """

    def __init__(self, folder: Path, times: Sequence[float]) -> None:
        self.folder = folder
        self.times = list(times)
        self._files: dict[str, dict[str, Any]] = {}
        self._states: dict[float, str] = {}

    def add_state(self, time: float, amplitudes: npt.NDArray[Any]) -> None:
        """Write the amplitudes at one of the times."""
        width = len(str(len(self.times) - 1))
        name = f"state_{self.times.index(time):0{width}}.npy"
        self._states[time] = name
        with (self.folder / name).open("wb") as file:
            self._files[name] = write_array(file, amplitudes)

    def finish(self, found: Reference, title: str, start: str) -> None:
        """Write the table of expectations and the manifest."""
        assert found.inputs is not None
        text = table(found)
        data = text.encode()
        (self.folder / EXPECTATIONS).write_bytes(data)
        self._files[EXPECTATIONS] = {"bytes": len(data), "sha256": hashlib.sha256(data).hexdigest()}
        inputs = found.inputs
        document = {
            "kind": KIND,
            "schema": SCHEMA,
            "title": title,
            "conventions": CONVENTIONS,
            "made_with": {str(key): str(value) for key, value in build_info().items()},
            "inputs": {
                "qubits": inputs.operator.qubits,
                "hamiltonian": terms(inputs.operator),
                "observables": {name: terms(operator) for name, operator in inputs.observables.items()},
                "start": {
                    "words": start,
                    "norm": inputs.start_norm,
                    "energy_without_identity": inputs.start_energy,
                    "energy_rounding": inputs.energy_rounding,
                },
                "times": [float(time) for time in found.times],
                "tolerance": inputs.tolerance,
            },
            "certificate": certificate_data(found.certificate, found.times),
            "states": [{"time": float(time), "file": name} for time, name in sorted(self._states.items())],
            "files": dict(sorted(self._files.items())),
        }
        with (self.folder / MANIFEST).open("wb") as file:
            file.write(seal(document).encode())
            file.flush()
            os.fsync(file.fileno())


def terms(operator: Operator) -> list[str]:
    """Return an operator as text that reads back exactly, one term an entry; none for zero."""
    return one_a_line(str(operator)) if len(operator) else []


def certificate_data(certificate: Certificate, times: Sequence[float]) -> dict[str, Any]:
    """Return a certificate as plain data, bounds in the order of the times."""

    def in_order(bounds: Mapping[float, float]) -> list[float]:
        return [float(bounds[time]) for time in times]

    return {
        "method": certificate.method,
        "proven": bool(certificate.proven),
        "error_bound": in_order(certificate.error_bound),
        "truncation": in_order(certificate.truncation),
        "rounding": in_order(certificate.rounding),
        "spectral_interval": [float(end) for end in certificate.spectral_interval],
        "spectral_route": certificate.spectral_route,
        "applications": int(certificate.applications),
        "notes": list(certificate.notes),
    }


def table(found: Reference) -> str:
    """Return the table of expectations: numbers in full, one line a time."""
    page = io.StringIO()
    writer = csv.writer(page, lineterminator="\n")
    writer.writerow(columns(list(found.expectations)))
    for place, time in enumerate(found.times):
        row = [float(time), float(found.certificate.error_bound[time])]
        for name, values in found.expectations.items():
            row += [float(values[place]), float(found.expectation_bounds[name][place])]
        writer.writerow([repr(value) for value in row])
    return page.getvalue()


def seal(document: Mapping[str, Any]) -> str:
    """Return the manifest as text, its last entry the SHA-256 of all lines above it."""
    body = json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False)
    head = body.removesuffix("\n}") + ",\n"
    return f'{head} "{SEAL}": "{hashlib.sha256(head.encode()).hexdigest()}"\n}}\n'


def write_array(file: Any, array: npt.NDArray[Any]) -> dict[str, Any]:
    """Write an NPY file piece by piece, and return its length and SHA-256."""
    seen = hashlib.sha256()
    head = io.BytesIO()
    np.lib.format.write_array_header_1_0(head, np.lib.format.header_data_from_array_1_0(array))
    length = 0
    data = np.ascontiguousarray(array).view(np.uint8).data
    for piece in (memoryview(head.getvalue()), *(data[at : at + _PIECE] for at in range(0, len(data), _PIECE))):
        file.write(piece)
        seen.update(piece)
        length += len(piece)
    file.flush()
    os.fsync(file.fileno())
    return {"bytes": length, "sha256": seen.hexdigest()}


def digest(path: Path) -> tuple[int, str]:
    """Return the length and SHA-256 of a file, read piece by piece."""
    seen = hashlib.sha256()
    length = 0
    with path.open("rb") as file:
        while piece := file.read(_PIECE):
            seen.update(piece)
            length += len(piece)
    return length, seen.hexdigest()
