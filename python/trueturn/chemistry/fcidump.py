"""Reading FCIDUMP files: integrals over orbitals as text.

The layout is that of P. J. Knowles, N. C. Handy, Comput. Phys. Commun. 54, 75 (1989), from memory, with what is common
practice since: a slash as the end of the header, D exponents, lines of orbital energies (``e i 0 0 0``), integrals in any of
their eight images, some or all of them listed. Integrals that depend on spin come in six blocks, each but the last closed by
a line ``0.0 0 0 0 0``: (up up|up up), (down down|down down), (up up|down down), h of up, h of down, the constant (common
practice, from memory).
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from trueturn import _memory
from trueturn.chemistry._header import Header, Line, fault, read_header
from trueturn.chemistry.encodings import checked_sector
from trueturn.chemistry.integrals import SYMMETRIC_TO, Integrals, Orbitals, Order, Reals, pair_table
from trueturn.errors import ArgumentError, IntegralsError
from trueturn.operator import Operator

__all__ = ["read_fcidump", "read_integrals"]

_NUMBER = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+))(?:[EDQedq]([+-]?\d+)|([+-]\d+))?")
_LONGEST_LINE = 1 << 16
_COLUMNS = "a line is a number and four orbital indices"
_SEPARATORS = 5


def read_fcidump(
    path: str | os.PathLike[str],
    encoding: str = "jordan-wigner",
    *,
    frozen: Orbitals = 0,
    window: Orbitals | None = None,
    order: Order | None = None,
    drop_parity_qubits: bool = False,
    electrons: tuple[int, int] | None = None,
    spin_orbitals: bool = False,
) -> Operator:
    """Read a molecule's Hamiltonian from an FCIDUMP file.

    Parameters
    ----------
    path : str or path-like
    encoding : "jordan-wigner", "parity" or "bravyi-kitaev"
        How occupations of spin orbitals become qubits; see `trueturn.chemistry.encode`.
    frozen : int or iterable of int
        Orbitals that stay filled: that many lowest ones, or these, counted from 0.
    window : int or iterable of int, optional
        Orbitals that stay active: that many next ones, or these. Default: all but the frozen.
    order : "interleaved" or "blocked", optional
        Spin orbital ``2 * orbital + spin`` (the default), or ``spin * orbitals + orbital``; spin 0 is up.
    drop_parity_qubits : bool
        Leave out the two qubits that hold the parities of the electrons with spin up and of all.
    electrons : (int, int), optional
        Numbers of electrons with spin up and down. Default: as NELEC and MS2 of the file say.
    spin_orbitals : bool
        The file's indices number spin orbitals, odd ones up and even ones down, so that NORB is twice the number of
        orbitals. Some programs write unrestricted integrals so; the file does not tell.

    Returns
    -------
    Operator
        In the energy unit of the file, usually hartree; the constant is its identity term.

    Raises
    ------
    IntegralsError
        The file cannot be read or is no FCIDUMP file, or its entries are missing, out of range or contradict each other;
        carries `path` and `line`.
    ArgumentError
        `path` is no path, an option is out of range, or qubits cannot be dropped.
    MemoryRefusedError
        Integrals or terms would not fit.

    Notes
    -----
    ISYM and ORBSYM are not used: an integral that symmetry makes zero is one that the file leaves out. What the file leaves
    out is zero, but for the constant, whose line ends a whole file. See `trueturn.chemistry.Integrals.operator` for the
    Hamiltonian, its rounding and its cost.

    References
    ----------
    P. J. Knowles, N. C. Handy, Comput. Phys. Commun. 54, 75 (1989). From memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> text = "&FCI NORB=1, NELEC=1, MS2=1 &END\\n 0.5 1 1 1 1\\n -1.0 1 1 0 0\\n 0.25 0 0 0 0\\n"
    >>> from tempfile import TemporaryDirectory
    >>> with TemporaryDirectory() as folder:
    ...     file = Path(folder) / "invented.fcidump"
    ...     _ = file.write_text(text)
    ...     print(tt.read_fcidump(file))
    -0.625 + 0.375 Z_0 + 0.375 Z_1 + 0.125 Z_0 Z_1
    """
    found = read_integrals(path, electrons=electrons, spin_orbitals=spin_orbitals).active(frozen, window)
    return found.operator(encoding, order=order, drop_parity_qubits=drop_parity_qubits)


def read_integrals(
    path: str | os.PathLike[str], *, electrons: tuple[int, int] | None = None, spin_orbitals: bool = False
) -> Integrals:
    """Read the integrals of an FCIDUMP file; see `read_fcidump`.

    Parameters
    ----------
    path : str or path-like
    electrons : (int, int), optional
        Numbers of electrons with spin up and down. Default: as NELEC and MS2 of the file say.
    spin_orbitals : bool
        Whether the file's indices number spin orbitals, odd ones up and even ones down.

    Returns
    -------
    Integrals

    Raises
    ------
    IntegralsError, ArgumentError, MemoryRefusedError
        As for `read_fcidump`.
    """
    if not isinstance(path, (str, os.PathLike)):
        raise ArgumentError(f"path: no path ({path!r}); give an FCIDUMP file", argument="path", value=path)
    name = Path(path).name
    try:
        Path(path).open("rb").close()
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        message = f"path: cannot be read ({os.fspath(path)}: {reason}); give an FCIDUMP file"
        raise IntegralsError(message, path=str(path), line=1) from error
    with open(path, encoding="utf-8", errors="replace", newline=None) as file:
        lines = _lines(file, name)
        header = read_header(lines, name, spin_orbitals)
        if electrons is not None:
            electrons = checked_sector(electrons, 2 * header.orbitals)
        table = _Table(header, 3 if header.unrestricted and not spin_orbitals else 1)
        constant = table.fill(lines)
    if spin_orbitals:
        one, two = _by_spin(table.one[0], table.two[0])
    elif header.unrestricted is None:
        one, two = table.one * 2, table.two * 3
    else:
        one, two = table.one, [table.two[0], table.two[2], table.two[1]]
    return Integrals(constant, (one[0], one[1]), (two[0], two[1], two[2]), electrons or header.electrons)


def _by_spin(one: Reals, two: Reals) -> tuple[list[Reals], list[Reals]]:
    """Sort integrals over spin orbitals, up and down in turn, by spin: up, down; up up, up down, down down."""
    i, j = np.triu_indices(len(one) // 2)
    table = pair_table(len(one))
    up, down = table[2 * i, 2 * j], table[2 * i + 1, 2 * j + 1]
    blocks = [
        np.ascontiguousarray(two[np.ix_(rows, columns)]) for rows, columns in ((up, up), (up, down), (down, down))
    ]
    return [one[0::2, 0::2].copy(), one[1::2, 1::2].copy()], blocks


def _lines(file: Any, name: str) -> Iterator[Line]:
    number = 0
    while text := file.readline(_LONGEST_LINE):
        number += 1
        if len(text) == _LONGEST_LINE:
            fault(Line(name, number, text), "longer than any line of an FCIDUMP file", "check that it is one")
        yield Line(name, number, text)


@dataclass
class _Table:
    """Integrals as they come in; entry NaN is one that no line has given yet."""

    header: Header
    blocks: int
    one: list[Reals] = field(init=False)
    two: list[Reals] = field(init=False)
    last: Line | None = None
    block: int = 0
    anything: bool = False

    def __post_init__(self) -> None:
        n = self.header.norb
        pairs = n * (n + 1) // 2
        _memory.require(8 * self.blocks * pairs * pairs + 24 * n * n, "read_fcidump")
        self.two = [np.full((pairs, pairs), np.nan) for _ in range(self.blocks)]
        self.one = [np.full((n, n), np.nan) for _ in range(2 if self.blocks > 1 else 1)]
        self._pair = pair_table(n).tolist()

    def fill(self, lines: Iterator[Line]) -> float:
        """Take every line; return the constant. Afterwards what was not given is zero."""
        constant: float | None = None
        for line in lines:
            if not line.text.strip():
                continue
            self.last = line
            value, p, q, r, s = self._columns(line)
            if not (p or q or r or s):
                if self._separates(line, value):
                    continue
                if constant is not None and abs(constant - value) > SYMMETRIC_TO:
                    fault(line, f"a second constant, {value:g} after {constant:g}", "keep one")
                constant = value
            elif p and q and r and s:
                self._two_electrons(line, value, p, q, r, s)
            elif p and q and not (r or s):
                self._one_electron(line, value, p, q)
            elif not (p and not (q or r or s)):  # e i 0 0 0 is an orbital energy, which the Hamiltonian does not need
                remedy = "write i j k l, i j 0 0, i 0 0 0 or 0 0 0 0"
                fault(line, f"orbital indices {p} {q} {r} {s} with a 0 among them have no meaning", remedy)
        self._require_complete(self.last or self.header.closing, constant)
        for array in (*self.one, *self.two):
            np.nan_to_num(array, copy=False, nan=0.0)
        assert constant is not None
        return constant

    def _columns(self, line: Line) -> tuple[float, int, int, int, int]:
        columns = line.text.split()
        if len(columns) != 5:
            fault(line, f"has {len(columns)} columns, not 5", _COLUMNS)
        found = _NUMBER.fullmatch(columns[0])
        value = float("nan") if found is None else float(f"{found[1]}e{found[2] or found[3] or 0}")
        if not abs(value) < float("inf"):
            remedy = "give a finite real number; complex integrals are not read"
            fault(line, f"{columns[0]} is no finite number", remedy)
        indices = []
        for column in columns[1:]:
            if not (column.isascii() and column.isdigit()):
                fault(line, f"{column} is no orbital index", _COLUMNS)
            index = int(column) if len(column) < 10 else 10**9
            if index > self.header.norb:
                wrong = f"orbital index {column[:20]} is above NORB = {self.header.norb}"
                fault(line, wrong, "number orbitals from 1 to NORB")
            indices.append(index)
        p, q, r, s = indices
        return value, p, q, r, s

    def _two_electrons(self, line: Line, value: float, p: int, q: int, r: int, s: int) -> None:
        block = self._expect(line, (0, 1, 2), "a two-electron integral")
        row, column = self._pair[p - 1][q - 1], self._pair[r - 1][s - 1]
        table = self.two[block]
        self._same_spin(line, value, (p, q), (r, s))
        self._set(line, table, (row, column), value)
        if block != 2:
            table[column, row] = table[row, column]

    def _one_electron(self, line: Line, value: float, p: int, q: int) -> None:
        block = self._expect(line, (3, 4), "a one-electron integral") - 3 if self.blocks > 1 else 0
        table = self.one[block]
        self._same_spin(line, value, (p, q))
        self._set(line, table, (p - 1, q - 1), value)
        table[q - 1, p - 1] = table[p - 1, q - 1]

    def _same_spin(self, line: Line, value: float, *pairs: tuple[int, int]) -> None:
        """Refuse an integral between spin orbitals of different spins."""
        if self.header.spin_orbitals and abs(value) > SYMMETRIC_TO and any((p - q) % 2 for p, q in pairs):
            remedy = "odd numbers must be spin up and even ones down; else leave spin_orbitals out"
            fault(line, "pairs spin orbitals of different spins", remedy)

    def _set(self, line: Line, table: Reals, place: tuple[int, int], value: float) -> None:
        self.anything = True
        held = float(table[place])
        if abs(held - value) > SYMMETRIC_TO:  # never true of NaN
            shown = line.text.split()[0]
            fault(line, f"gives {shown} for an integral that an earlier line gave as {held!r}", "keep the right one")
        if held != held:
            table[place] = value

    def _separates(self, line: Line, value: float) -> bool:
        """Whether a line of four zeros ends a block of spin-dependent integrals."""
        if self.blocks == 1 or self.block == _SEPARATORS:
            return False
        if value != 0.0:
            self._refuse_blocks(f"line {line.number} gives the constant in block {self.block + 1} of 6")
        self.block += 1
        return True

    def _expect(self, line: Line, blocks: tuple[int, ...], what: str) -> int:
        """Return the block at hand, which must be one of these where integrals depend on spin."""
        if self.blocks > 1 and self.block not in blocks:
            self._refuse_blocks(f"line {line.number} gives {what} in block {self.block + 1} of 6")
        return self.block

    def _require_complete(self, end: Line, constant: float | None) -> None:
        if self.blocks > 1 and self.block < _SEPARATORS:
            self._refuse_blocks(f"the file ends in block {self.block + 1} of 6")
        if constant is None:
            remedy = "end it with a line such as 0.7 0 0 0 0, or 0.0 0 0 0 0 where there is none"
            fault(end, "the file ends without the constant, so it may be cut off", remedy)
        if not self.anything:
            fault(end, "the file holds no integrals", "check that it is whole")

    def _refuse_blocks(self, what: str) -> None:
        assert self.header.unrestricted is not None
        fault(
            self.header.unrestricted,
            f"UHF is set, so the integrals must come in six blocks by spin, but {what}",
            "take UHF out if both spins share the integrals, close each block with 0.0 0 0 0 0, or say spin_orbitals=True "
            "if odd and even orbital numbers are the two spins",
        )
