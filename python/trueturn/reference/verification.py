"""Verifying a reference folder: nothing altered, nothing missing, and the physics within the certificate."""

from __future__ import annotations

import csv
import hashlib
import json
import math
import os
from collections.abc import Callable, Iterator
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn import _threads
from trueturn.audit.figures import upper
from trueturn.errors import ArgumentError, MemoryRefusedError, TrueturnError
from trueturn.operator import Operator
from trueturn.reference.certificate import UNIT, expectation_rounding, expectation_shift, norm_bound
from trueturn.reference.folder import EXPECTATIONS, KIND, MANIFEST, SCHEMA, SEAL, columns, digest
from trueturn.state import State

__all__ = ["Check", "Verification", "verify"]

Progress = Callable[[str, float, float], object]


@dataclass(frozen=True)
class Check:
    """One thing that was looked at: what, whether it holds, and the figures or what is wrong."""

    name: str
    holds: bool
    detail: str


@dataclass(frozen=True)
class Verification:
    """What verifying a reference folder found.

    Attributes
    ----------
    folder : Path
    checks : tuple of Check
        In the order they were made; what could not be looked at because of an earlier failure is left out.
    """

    folder: Path
    checks: tuple[Check, ...]

    @property
    def holds(self) -> bool:
        """Whether every check holds."""
        return all(check.holds for check in self.checks)

    def __bool__(self) -> bool:
        """Whether every check holds, so that ``if verify(folder)`` says what it seems to."""
        return self.holds

    @property
    def failures(self) -> tuple[Check, ...]:
        """The checks that do not hold."""
        return tuple(check for check in self.checks if not check.holds)

    def to_dict(self) -> dict[str, Any]:
        """Give everything as plain data."""
        listed = [{"name": check.name, "holds": check.holds, "detail": check.detail} for check in self.checks]
        return {"kind": "trueturn verification", "schema": 1, "holds": self.holds, "checks": listed}

    def __repr__(self) -> str:
        lines = [f"{'✓' if check.holds else '✗'} {check.name}: {check.detail}" for check in self.checks]
        return "\n".join([f"{self.folder}: {'verified' if self.holds else 'NOT verified'}", *lines])


class _Malformed(Exception):
    """The manifest does not say what its schema asks for."""


def verify(
    folder: str | os.PathLike[str], *, threads: int | None = None, progress: Progress | None = None
) -> Verification:
    """Verify a reference folder.

    Parameters
    ----------
    folder : str or path-like
        As `Reference.write` or ``trueturn reference JOB --into FOLDER`` wrote it.
    threads : int, optional
    progress : callable, optional
        Called with (name of the file, files done, files in all).

    Returns
    -------
    Verification
        Its `holds` is the answer, `failures` names what is wrong.

    Raises
    ------
    ArgumentError
        `folder` is no path, does not exist or holds no manifest.json.
    MemoryRefusedError
        One state vector does not fit.

    Notes
    -----
    Looked at, in this order: the manifest and the SHA-256 that seals it; length and SHA-256 of every file, and that there is
    no other; the certificate (each bound is truncation plus rounding and within the tolerance); the table against the
    certificate; and for each state its norm, its energy (both conserved by exact evolution, so off by no more than the
    certified error allows), and its expectations against the table. A change of a single byte is found by a digest; who can
    rewrite all digests can forge a folder, so keep the manifest's own digest elsewhere where that matters.

    That the states are those of the Hamiltonian at these times is not proven by any of this: norm and energy are necessary,
    not sufficient. Computing the reference again is.
    """
    if not isinstance(folder, (str, os.PathLike)):
        raise ArgumentError(
            f"folder: no path ({folder!r}); give one that trueturn reference --into wrote",
            argument="folder",
            value=folder,
        )
    place = Path(folder)
    if not (place / MANIFEST).is_file():
        wrong = "holds no manifest.json" if place.is_dir() else "no such folder"
        raise ArgumentError(
            f"folder: {wrong} ({place}); give one that trueturn reference --into wrote",
            argument="folder",
            value=str(place),
        )
    checks: list[Check] = []
    try:
        for check in _checks(place, _threads.resolve(threads), progress):
            checks.append(check)
    except _Malformed as fault:
        checks.append(Check("schema", False, f"{MANIFEST}: {fault}"))
    return Verification(place, tuple(checks))


def _checks(folder: Path, threads: int, progress: Progress | None) -> Iterator[Check]:
    manifest, check = _sealed(folder)
    yield check
    if manifest is None:
        return
    files = _mapping(manifest, "files")
    intact = set()
    for done, (name, facts) in enumerate(files.items()):
        if progress is not None:
            progress(name, done, len(files))
        check = _intact(folder, name, facts)
        intact |= {name} if check.holds else set()
        yield check
    strangers = sorted(
        entry.name for entry in folder.iterdir() if entry.name not in {MANIFEST, *files} and entry.name[0] != "."
    )
    if strangers:
        yield Check(strangers[0], False, "is not listed in the manifest")
    record = _Record(manifest)
    yield record.certificate_check()
    table = None
    if EXPECTATIONS in intact:
        table = record.read_table(folder / EXPECTATIONS)
        yield record.table_check(table)
    for time, name in record.states:
        if name not in files:
            yield Check(name, False, "the manifest gives no SHA-256 for this state")
        elif name in intact:
            yield from record.state_checks(folder / name, time, table, threads)
    if progress is not None:
        progress("done", len(files), len(files))


def _sealed(folder: Path) -> tuple[dict[str, Any] | None, Check]:
    """Read the manifest, and compare it with the digest on its last line."""
    data = (folder / MANIFEST).read_bytes()
    head, found, tail = data.rpartition(f' "{SEAL}": '.encode())
    expected = f'"{hashlib.sha256(head).hexdigest()}"\n}}\n'.encode()
    try:
        manifest = json.loads(data)
    except (ValueError, RecursionError) as fault:
        return None, Check(MANIFEST, False, f"is not JSON any more ({fault})")
    if not isinstance(manifest, dict) or manifest.get("kind") != KIND:
        return None, Check(MANIFEST, False, f"is not of the kind {KIND!r}")
    if manifest.get("schema") != SCHEMA:
        return None, Check(MANIFEST, False, f"has schema {manifest.get('schema')!r}; this version reads {SCHEMA}")
    if not found or tail != expected:
        return None, Check(MANIFEST, False, "was altered: its text does not have the SHA-256 on its last line")
    return manifest, Check(MANIFEST, True, f"sealed, schema {SCHEMA}")


def _intact(folder: Path, name: str, facts: Any) -> Check:
    if Path(name).name != name or name in ("", ".", ".."):
        raise _Malformed(f"files: {name!r} is no plain file name")
    if not isinstance(facts, dict):
        raise _Malformed(f"files: {name!r} has no length and digest")
    if not (folder / name).is_file():
        return Check(name, False, "is missing")
    length, seen = digest(folder / name)
    if length != facts.get("bytes"):
        return Check(name, False, f"has {length} bytes, not {facts.get('bytes')}")
    if seen != facts.get("sha256"):
        return Check(name, False, "was altered: its SHA-256 is not that of the manifest")
    return Check(name, True, "SHA-256 as in the manifest")


class _Record:
    """What the manifest says, with everything in it of the right type."""

    def __init__(self, manifest: dict[str, Any]) -> None:
        inputs, certificate = _mapping(manifest, "inputs"), _mapping(manifest, "certificate")
        start = _mapping(inputs, "start")
        self.qubits = inputs.get("qubits")
        self.operator = self._operator("hamiltonian", inputs.get("hamiltonian")).without_identity()
        watched = _mapping(inputs, "observables")
        self.observables = {name: self._operator(name, given) for name, given in watched.items()}
        self.times = _numbers(inputs, "times")
        self.tolerance = _number(inputs, "tolerance")
        self.start_norm, self.start_energy = _number(start, "norm"), _number(start, "energy_without_identity")
        self.energy_rounding = _number(start, "energy_rounding")
        self.bounds, self.truncation, self.rounding = (
            _numbers(certificate, key, len(self.times)) for key in ("error_bound", "truncation", "rounding")
        )
        low, high = _numbers(certificate, "spectral_interval", 2)
        self.interval = (low, high)
        listed = manifest.get("states")
        if not isinstance(listed, list) or not all(isinstance(entry, dict) for entry in listed):
            raise _Malformed("states: not a list of times and files")
        self.states = [(_number(entry, "time"), str(entry.get("file"))) for entry in listed]
        if any(time not in self.times for time, _ in self.states):
            raise _Malformed("states: a time that is not among those of the reference")

    def _operator(self, name: str, given: Any) -> Operator:
        if not isinstance(given, list) or not all(isinstance(term, str) for term in given):
            raise _Malformed(f"{name}: not a list of terms")
        try:
            return Operator("\n".join(given) or "0.0", self.qubits)
        except TrueturnError as fault:
            raise _Malformed(f"{name}: {fault}") from None

    def certificate_check(self) -> Check:
        """Each bound is its parts, and within the tolerance."""
        name = "certificate"
        for time, whole, cut, rounded in zip(self.times, self.bounds, self.truncation, self.rounding, strict=True):
            # One addition of two positive numbers.
            if not abs(whole - (cut + rounded)) <= 2.0 * UNIT * whole or min(whole, cut, rounded) < 0.0:
                return Check(name, False, f"the bound at t = {time!r} is not truncation plus rounding")
            if whole > self.tolerance:
                return Check(name, False, f"the bound at t = {time!r} is {upper(whole)}, above {self.tolerance!r}")
        return Check(name, True, f"state error ≤ {upper(max(self.bounds, default=0.0))}, within {self.tolerance!r}")

    def read_table(self, path: Path) -> npt.NDArray[np.float64]:
        """Return the numbers of the table."""
        heads = columns(list(self.observables))
        rows: list[list[str]] = []
        found: npt.NDArray[np.float64] = np.zeros(0)
        with path.open(encoding="utf-8", newline="") as file, suppress(ValueError, csv.Error):
            rows = list(csv.reader(file))
            found = np.array([[float(cell) for cell in row] for row in rows[1:]])
        if not rows or rows[0] != heads or found.shape != (len(self.times), len(heads)):
            raise _Malformed(f"{EXPECTATIONS} has not the columns and lines that the inputs ask for")
        return found

    def table_check(self, table: npt.NDArray[np.float64]) -> Check:
        """The table repeats times and bounds, and each expectation bound covers the state's."""
        name = f"{EXPECTATIONS} against the certificate"
        if table[:, 0].tolist() != self.times or table[:, 1].tolist() != self.bounds:
            return Check(name, False, "times or state bounds are not those of the manifest")
        for place, (label, observable) in enumerate(self.observables.items()):
            # The mean square of the eigenvalues: no proven bound on the norm is less than its root.
            norm = math.sqrt(math.fsum(observable.without_identity().coefficients ** 2))
            for time, bound, claimed in zip(self.times, self.bounds, table[:, 3 + 2 * place], strict=True):
                least = expectation_shift(norm, bound, max(1.0, self.start_norm))
                # A root, a sum and a few products on either side.
                if not claimed >= least * (1.0 - 16.0 * UNIT):
                    return Check(name, False, f"the bound of {label} at t = {time!r} is less than the state's implies")
        return Check(name, True, f"times: {len(self.times)}, observables: {len(self.observables)}")

    def state_checks(
        self, path: Path, time: float, table: npt.NDArray[np.float64] | None, threads: int
    ) -> Iterator[Check]:
        """Norm, energy and expectations of one state."""
        try:
            state = State.load(path)
        except MemoryRefusedError:
            raise
        except TrueturnError as fault:
            yield Check(path.name, False, str(fault))
            return
        if state.qubits != self.operator.qubits:
            yield Check(path.name, False, f"is a state of {state.qubits} qubits, the Hamiltonian acts on {self.qubits}")
            return
        distance = self.bounds[self.times.index(time)]
        longest = max(1.0, self.start_norm)
        norm = state.norm(threads=threads)
        # Both norms are sums of blocks of 128, 3 levels, then a tree.
        allowed = distance + 2.0 * UNIT * (136.0 + state.qubits) * longest
        yield _within(f"{path.name}: norm", abs(norm - self.start_norm), allowed)
        yield self._energy_check(path.name, state, distance, longest, threads)
        if table is not None:
            yield self._expectation_check(path.name, state, time, table, threads)

    def _energy_check(self, name: str, state: State, distance: float, longest: float, threads: int) -> Check:
        energy = state.expectation(self.operator, threads=threads)
        allowed = (
            expectation_shift(norm_bound(self.operator), distance, longest)
            + self.energy_rounding
            + expectation_rounding(self.operator, state.qubits) * longest**2
        )
        return _within(f"{name}: energy", abs(energy - self.start_energy), allowed)

    def _expectation_check(
        self, name: str, state: State, time: float, table: npt.NDArray[np.float64], threads: int
    ) -> Check:
        longest = max(1.0, self.start_norm)
        row = table[self.times.index(time)]
        for place, (label, observable) in enumerate(self.observables.items()):
            constant = observable.identity_coefficient * self.start_norm**2
            bare = observable.without_identity()
            value = constant + state.expectation(bare, threads=threads)
            # Twice the same sum, by this version and by the one that wrote the folder; and adding the constant.
            allowed = 2.0 * expectation_rounding(observable, state.qubits) * longest**2 + 4.0 * UNIT * abs(constant)
            if not abs(value - row[2 + 2 * place]) <= allowed:
                wrong = f"{label} is {value!r} in the state and {row[2 + 2 * place]!r} in {EXPECTATIONS}"
                return Check(f"{name}: expectations", False, wrong)
        return Check(f"{name}: expectations", True, f"as in {EXPECTATIONS} (observables: {len(self.observables)})")


def _within(name: str, off: float, allowed: float) -> Check:
    holds = off <= allowed
    return Check(name, holds, f"off by {upper(off)}, {'within' if holds else 'but at most'} {upper(allowed)} allowed")


def _mapping(document: dict[str, Any], key: str) -> dict[str, Any]:
    found = document.get(key)
    if not isinstance(found, dict):
        raise _Malformed(f"{key}: missing")
    return found


def _number(document: dict[str, Any], key: str) -> float:
    found = document.get(key)
    try:
        if isinstance(found, bool) or not isinstance(found, (int, float)) or not math.isfinite(found):
            raise _Malformed(f"{key}: no number")
    except OverflowError:  # a whole number of hundreds of digits
        raise _Malformed(f"{key}: no number") from None
    return float(found)


def _numbers(document: dict[str, Any], key: str, count: int | None = None) -> list[float]:
    found = document.get(key)
    if not isinstance(found, list) or count not in (None, len(found)):
        raise _Malformed(f"{key}: not a list of {'' if count is None else f'{count} '}numbers")
    return [_number({key: entry}, key) for entry in found]
