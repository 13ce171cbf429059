"""Mistakes that touch the whole circuit: qubits in another order, letters exchanged, every angle off by one factor.

A reading says how to take the circuit's strings so that as few differences as possible remain. Readings are weighed
by the number of mistakes that they leave to explain; one mistake that explains everything beats two that do.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import reduce

import numpy as np

from trueturn.diagnosis.relabelling import permutations, permuted
from trueturn.diagnosis.totals import Group, Sheet, support
from trueturn.diagnosis.unfolding import Mask

__all__ = ["EXCHANGES", "Reading", "readings"]

EXCHANGES = {
    "XY": ((1, 0), (1, 1)),
    "XZ": ((0, 1), (1, 0)),
    "YZ": ((1, 1), (0, 1)),
    "XYZ": ((1, 1), (1, 0)),
    "XZY": ((0, 1), (1, 1)),
}
"""Exchanges of letters as matrices over GF(2) that take (x, z): ``"XYZ"`` turns X into Y, Y into Z, Z into X."""
MOST_SEARCHED = 20_000
"""Strings up to which qubit permutations are searched for."""
NEAR = 0.5
"""Readings within this of the least cost are kept, so that the order of the rotations can decide."""


@dataclass(frozen=True)
class Reading:
    """How to take a circuit, and what is left to explain.

    Attributes
    ----------
    kind : {"given", "reversed", "permuted", "letters"}
    names : tuple of int
        Qubit q of the circuit is qubit ``names[q]`` of the Hamiltonian; empty for the identity.
    exchange : str
        Key of `EXCHANGES`, applied to the circuit's letters on the qubits of the bit mask `where`; may be empty.
    where : int
    factor : float
        Every total of the circuit is this times the one wanted.
    groups : tuple of Group
        In the Hamiltonian's labels, after names, letters and factor.
    cost : float
    """

    kind: str
    names: tuple[int, ...] = ()
    exchange: str = ""
    where: int = 0
    factor: float = 1.0
    groups: tuple[Group, ...] = ()
    cost: float = 0.0

    def mask(self, mask: Mask) -> Mask:
        """Take a string of the circuit as one of the Hamiltonian's."""
        if self.names:
            return permuted(mask, self.names)
        if self.exchange:
            return exchanged(mask, self.exchange, self.where)
        return mask


def exchanged(mask: Mask, exchange: str, where: int) -> Mask:
    """Exchange letters on the qubits of a bit mask."""
    x, z = mask
    (a, b), (c, d) = EXCHANGES[exchange]
    new_x = (x if a else 0) ^ (z if b else 0)
    new_z = (x if c else 0) ^ (z if d else 0)
    return (x & ~where) | (new_x & where), (z & ~where) | (new_z & where)


def readings(sheet: Sheet, qubits: int) -> list[Reading]:
    """List the readings that leave least to explain, the most plausible first."""
    given = _best(sheet, Reading("given"), 0.0)
    found = [given]
    if given.groups or given.factor != 1.0:
        wrong = {mask for group in given.groups for mask in (*group.found, *group.wanted)}
        if len(wrong) > 1:
            for reading, penalty in _proposed(sheet, qubits, wrong):
                found.append(_best(sheet, reading, 1.0 + penalty))
    least = min(reading.cost for reading in found)
    return sorted((reading for reading in found if reading.cost <= least + NEAR), key=lambda reading: reading.cost)


def _best(sheet: Sheet, reading: Reading, penalty: float) -> Reading:
    """Complete a reading with the factor that leaves least, and with what it leaves."""
    seen = sheet
    if reading.kind != "given":
        found: dict[Mask, float] = {}
        slack: dict[Mask, float] = {}
        for mask, total in sheet.found.items():
            new = reading.mask(mask)
            found[new] = found.get(new, 0.0) + total
            slack[new] = slack.get(new, 0.0) + sheet.slack[mask]
        seen = Sheet(found, sheet.wanted, slack, sheet.tolerance)
    best = None
    for factor in {1.0, seen.common_factor()}:
        groups = seen.groups(factor)
        if factor != 1.0 and not any(seen.factors()):
            continue
        touched = sum(len(group.found or group.wanted) for group in groups)
        changed = 1.0 if _differs(factor) else 0.0
        everything = len(groups) == 1 and groups[0].kind == "factor" and len(groups[0].found) == len(sheet.wanted)
        cost = penalty + changed + len(groups) + 1e-4 * touched + (0.1 if everything else 0.0)
        made = Reading(
            reading.kind,
            reading.names,
            reading.exchange,
            reading.where,
            factor if changed else 1.0,
            tuple(groups),
            cost,
        )
        if best is None or made.cost < best.cost:
            best = made
    assert best is not None
    return best


def _differs(factor: float) -> bool:
    return abs(factor - 1.0) > 1e-6


def _proposed(sheet: Sheet, qubits: int, wrong: set[Mask]) -> Iterator[tuple[Reading, float]]:
    """Propose readings with the penalty of each."""
    reverse = tuple(reversed(range(qubits)))
    yield Reading("reversed", reverse), 0.0
    used = reduce(lambda mask, one: mask | support(one), [*sheet.found, *sheet.wanted], 0)
    for exchange in EXCHANGES:
        yield Reading("letters", exchange=exchange, where=used), 0.2
    shared = reduce(lambda mask, one: mask & support(one), wrong, used)
    for qubit in range(qubits):
        if shared >> qubit & 1:
            for exchange in EXCHANGES:
                yield Reading("letters", exchange=exchange, where=1 << qubit), 0.2
    for names in _permutations(sheet, qubits):
        if names != reverse:
            yield Reading("permuted", names), 0.3


def _permutations(sheet: Sheet, qubits: int) -> Sequence[tuple[int, ...]]:
    if not len(sheet.found) == len(sheet.wanted) <= MOST_SEARCHED:
        return []
    found, wanted = _values(sheet.found), _values(sheet.wanted)
    scale = float(np.abs(found).sum() / np.abs(wanted).sum())
    near = [1.0, -1.0, scale, -scale]
    for factor in near:
        gap = np.max(np.abs(np.sort(found) - np.sort(factor * wanted)))
        if gap <= 1e-6 * np.max(np.abs(found)):
            names = permutations(list(sheet.found), found, list(sheet.wanted), factor * wanted, qubits, 1e-6)
            return [one for one in names if one != tuple(range(qubits))]
    return []


def _values(totals: Mapping[Mask, float]) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    return np.array(list(totals.values()), dtype=np.float64)
