"""The header of an FCIDUMP file: a Fortran namelist from ``&FCI`` to ``&END`` or a slash."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import NoReturn

from trueturn.errors import IntegralsError

__all__ = ["Header", "Line", "fault", "read_header"]

_OPEN = re.compile(r"\s*[&$]FCI\b", re.IGNORECASE)
_CLOSE = re.compile(r"(?:[&$]END\b|/)(.*)$", re.IGNORECASE)
_ENTRY = re.compile(
    r"""\s*(?:
        (?P<key>[A-Za-z_]\w*(?:\(\d+\))?)\s*=
        |(?P<value>(?:\d+\*)?(?:(?P<number>[+-]?(?:\d+\.?\d*|\.\d+)(?:[ED][+-]?\d+)?)(?![\w.])|\.[TF]\w*\.?|[TF]\b|'[^']*'|"[^"]*"))
        |,)""",
    re.IGNORECASE | re.VERBOSE,
)
# Keys of whole numbers. Programs add keys of their own, some with other numbers.
_WHOLE_NUMBERS = ("NORB", "NELEC", "MS2", "ISYM", "ORBSYM")
_SHOWN = 60


@dataclass(frozen=True)
class Line:
    """One line of a file, for complaints."""

    path: str
    number: int
    text: str


@dataclass(frozen=True)
class Header:
    """What the header states.

    Attributes
    ----------
    norb : int
        NORB, the largest index.
    spin_orbitals : bool
        Whether indices number spin orbitals, up and down in turn, rather than orbitals.
    electrons : (int, int) or None
        Spin up and down, from NELEC and MS2; None where NELEC is missing, or is odd without MS2.
    unrestricted : Line or None
        The line that says that the integrals depend on spin.
    closing : Line
        Where the header ends.
    """

    norb: int
    spin_orbitals: bool
    electrons: tuple[int, int] | None
    unrestricted: Line | None
    closing: Line

    @property
    def orbitals(self) -> int:
        """Number of orbitals, each for both spins."""
        return self.norb // 2 if self.spin_orbitals else self.norb


def fault(line: Line, wrong: str, remedy: str) -> NoReturn:
    """Refuse a line: ``path: line 7 of h2.fcidump: what is wrong (the line); what to do``."""
    shown = " ".join(line.text.split())
    shown = shown if len(shown) <= _SHOWN else shown[: _SHOWN - 1] + "…"
    raise IntegralsError(
        f"path: line {line.number} of {line.path}: {wrong} ({shown}); {remedy}", path=line.path, line=line.number
    )


def read_header(lines: Iterator[Line], path: str, spin_orbitals: bool) -> Header:
    """Read lines up to the end of the header, and check what they state.

    Raises
    ------
    IntegralsError
        The header is missing, is not closed, holds something else than keys and values, or contradicts itself.
    """
    opening = next((line for line in lines if line.text.strip()), None)
    start = None if opening is None else _OPEN.match(opening.text)
    if opening is None or start is None:
        fault(opening or Line(path, 1, ""), "no header", "begin an FCIDUMP file with &FCI NORB=…, NELEC=…")
    values: dict[str, list[str]] = {}
    places: dict[str, Line] = {}
    key = ""
    line: Line | None = opening
    rest = opening.text[start.end() :]
    last = opening
    while line is not None:
        last = line
        closing = _CLOSE.search(rest)
        body = rest[: closing.start()] if closing else rest
        key = _entries(line, body, key, values, places)
        if closing:
            if closing[1].strip():
                fault(line, f"text after the end of the header ({closing[1].strip()})", "begin a new line after &END")
            return _checked(opening, line, values, places, spin_orbitals)
        line = next(lines, None)
        rest = "" if line is None else line.text
    fault(last, "the file ends inside the header", "close it with &END or a slash")


def _entries(line: Line, body: str, key: str, values: dict[str, list[str]], places: dict[str, Line]) -> str:
    """Take keys and values from one line; return the key that further values belong to."""
    place = 0
    body = body.rstrip()
    while place < len(body):
        found = _ENTRY.match(body, place)
        broken = found is not None and found["number"] and not found["number"].lstrip("+-").isdigit()
        if found is None or (found["value"] and not key) or (broken and key in _WHOLE_NUMBERS):
            piece = body[place:].split()[0]
            fault(
                line,
                f"no key or whole number of a header ({piece})",
                "close the header with &END or a slash before the integrals",
            )
        place = found.end()
        if found["key"]:
            key = found["key"].upper()
            if key in values:
                fault(line, f"{key} is given twice", "keep one")
            values[key], places[key] = [], line
        elif found["value"]:
            values[key].append(found["value"])
    return key


def _checked(
    opening: Line, closing: Line, values: dict[str, list[str]], places: dict[str, Line], spin_orbitals: bool
) -> Header:
    norb = _whole("NORB", values, places)
    if norb is None:
        fault(opening, "NORB, the number of orbitals, is missing from the header", "add NORB=…")
    if norb < 1:
        fault(places["NORB"], f"NORB is not above zero ({norb})", "give the number of orbitals")
    if spin_orbitals and norb % 2:
        fault(places["NORB"], f"NORB is odd ({norb}), but spin orbitals come in pairs", "leave spin_orbitals out")
    symmetries = _whole_list("ORBSYM", values, places)
    if symmetries is not None and symmetries != norb:
        wrong = f"ORBSYM has {symmetries} entries for NORB = {norb} orbitals"
        fault(places["ORBSYM"], wrong, "mend either, or leave ORBSYM out: it is not used")
    unrestricted = None
    for name in ("UHF", "IUHF"):
        if any(re.fullmatch(r"\.?T\w*\.?|[+-]?0*[1-9]\d*", value, re.IGNORECASE) for value in values.get(name, [])):
            unrestricted = places[name]
    electrons = _electrons(norb // 2 if spin_orbitals else norb, norb, values, places)
    return Header(norb, spin_orbitals, electrons, unrestricted, closing)


def _electrons(
    orbitals: int, norb: int, values: dict[str, list[str]], places: dict[str, Line]
) -> tuple[int, int] | None:
    count, spin = _whole("NELEC", values, places), _whole("MS2", values, places)
    if count is None:
        return None
    line = places["NELEC"]
    if not 0 <= count <= 2 * orbitals:
        fault(line, f"NELEC = {count} does not fit: NORB = {norb} orbitals hold 0 to {2 * orbitals}", "mend either")
    if spin is None:
        return None if count % 2 else (count // 2, count // 2)
    if (count + spin) % 2 or abs(spin) > min(count, 2 * orbitals - count):
        fault(places["MS2"], f"MS2 = {spin} contradicts NELEC = {count} in {orbitals} orbitals", "mend either")
    return (count + spin) // 2, (count - spin) // 2


def _whole(name: str, values: dict[str, list[str]], places: dict[str, Line]) -> int | None:
    if name not in values:
        return None
    given = values[name]
    if len(given) != 1 or not re.fullmatch(r"[+-]?\d{1,9}", given[0]):
        fault(
            places[name],
            f"{name} is not one whole number of at most 9 digits ({' '.join(given)})",
            f"write {name}=2, say",
        )
    return int(given[0])


def _whole_list(name: str, values: dict[str, list[str]], places: dict[str, Line]) -> int | None:
    """Return how many whole numbers a list holds; ``3*1`` stands for three."""
    if name not in values:
        return None
    total = 0
    for value in values[name]:
        found = re.fullmatch(r"(?:(\d{1,9})\*)?[+-]?\d{1,9}", value)
        if found is None:
            fault(places[name], f"{name} holds no whole number ({value})", "give one symmetry number an orbital")
        total += int(found[1] or 1)
    return total
