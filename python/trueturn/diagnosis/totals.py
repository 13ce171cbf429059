"""First moment: the angle total of each string against c·t, and what the differences have in common.

Differences are sorted into groups that one mistake explains: strings off by one and the same factor, strings
missing, strings that the Hamiltonian lacks, strings written with other letters or on other qubits.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from trueturn.diagnosis.unfolding import Mask, Reals

__all__ = ["Group", "Sheet", "letter_pairs", "support"]

SAME_FACTOR = 1e-6
"""Factors nearer than this, relative, are one factor."""


@dataclass(frozen=True)
class Group:
    """Strings that one mistake explains.

    Attributes
    ----------
    kind : {"factor", "missing", "extra", "letters", "place"}
        ``letters`` and ``place``: `wanted` strings were written as `found` ones.
    found : tuple of masks
        Strings of the circuit that are wrong; empty for ``missing``.
    wanted : tuple of masks
        Strings of the Hamiltonian; empty for ``extra``.
    factor : float
        Total over c·t for ``factor``; +1 or -1 for ``letters`` and ``place``; the total itself for ``extra``.
    """

    kind: str
    found: tuple[Mask, ...]
    wanted: tuple[Mask, ...]
    factor: float


@dataclass(frozen=True)
class Sheet:
    """Totals of a circuit beside those that were wanted.

    Attributes
    ----------
    found, wanted : mapping of mask to float
        Σθ of the circuit's strings; c·t of the Hamiltonian's, the identity left out.
    slack : mapping of mask to float
        What rounding may contribute to each total.
    tolerance : float
        Share of c·t that counts as rounding besides.
    """

    found: Mapping[Mask, float]
    wanted: Mapping[Mask, float]
    slack: Mapping[Mask, float]
    tolerance: float

    def allowed(self, mask: Mask) -> float:
        """Give how far a total may be off."""
        least = min((abs(value) for value in self.wanted.values()), default=1.0)
        return self.tolerance * abs(self.wanted.get(mask, least)) + self.slack.get(mask, 0.0)

    def factors(self) -> list[float]:
        """List total over c·t of the strings that both sides have, but for totals that are nothing but rounding."""
        return [
            self.found[mask] / value
            for mask, value in self.wanted.items()
            if abs(self.found.get(mask, 0.0)) > self.slack.get(mask, 0.0)
        ]

    def common_factor(self) -> float:
        """Give the factor that most strings share; of equally many the one nearest to 1."""
        factors = sorted(factor for factor in self.factors() if factor)
        best, most = 1.0, 0
        for start in _runs(np.array(factors)):
            run = factors[start[0] : start[1]]
            middle = run[len(run) // 2]
            if len(run) > most or (len(run) == most and abs(middle - 1) < abs(best - 1)):
                best, most = middle, len(run)
        return best

    def groups(self, factor: float = 1.0) -> list[Group]:
        """Sort what is off, once all wanted totals are multiplied by a factor, into groups."""
        limits = {mask: self.allowed(mask) * max(1.0, abs(factor)) for mask in {**self.found, **self.wanted}}
        off: dict[Mask, float] = {}  # total over wanted
        missing: list[Mask] = []
        for mask, value in self.wanted.items():
            total = self.found.get(mask, 0.0)
            if abs(total - factor * value) > limits[mask]:
                if abs(total) <= limits[mask]:
                    missing.append(mask)
                else:
                    off[mask] = total / (factor * value)
        extra = {
            mask: total for mask, total in self.found.items() if mask not in self.wanted and abs(total) > limits[mask]
        }
        groups = self._slips(factor, missing, extra, off, limits)
        return groups + _by_factor(off) + _missing(missing) + _extra(extra)

    def _slips(
        self,
        factor: float,
        missing: list[Mask],
        extra: dict[Mask, float],
        off: dict[Mask, float],
        limits: Mapping[Mask, float],
    ) -> list[Group]:
        """Pair strings that are missing with others that have just their angle too much; takes them out."""
        surplus = dict(extra)
        surplus.update({mask: self.found[mask] - factor * self.wanted[mask] for mask in off})
        by_support: dict[int, list[Mask]] = {}
        for mask in surplus:
            by_support.setdefault(support(mask), []).append(mask)
        gathered: dict[tuple[object, ...], list[tuple[Mask, Mask]]] = {}
        for near in (True, False):
            for mask in list(missing):
                value = factor * self.wanted[mask]
                pool = by_support.get(support(mask), []) if near else list(extra)
                fits = [
                    other
                    for other in pool
                    if other in surplus
                    and abs(abs(surplus[other]) - abs(value)) <= 2 * (limits[mask] + limits[other])
                    and (near or letter_counts(other) == letter_counts(mask))
                ]
                if len(fits) == 1 or (near and fits):
                    other = fits[0]
                    sign = 1.0 if surplus[other] * value > 0 else -1.0
                    key = (letter_pairs(mask, other), sign) if near else ("place", mask, sign)
                    gathered.setdefault(key, []).append((mask, other))
                    missing.remove(mask)
                    surplus.pop(other)
                    extra.pop(other, None)
                    off.pop(other, None)
        return [
            Group(
                "place" if key[0] == "place" else "letters",
                tuple(other for _, other in pairs),
                tuple(mask for mask, _ in pairs),
                float(str(key[-1])),
            )
            for key, pairs in gathered.items()
        ]


def support(mask: Mask) -> int:
    """Give the qubits of a string as a bit mask."""
    return mask[0] | mask[1]


def letter_counts(mask: Mask) -> tuple[int, int, int]:
    """Count the letters X, Y and Z of a string."""
    x, z = mask
    return (x & ~z).bit_count(), (x & z).bit_count(), (z & ~x).bit_count()


def letter_pairs(wanted: Mask, found: Mask) -> frozenset[str]:
    """List the changes of letters between two strings on the same qubits, such as ``"XY"`` for X written as Y."""
    both = support(wanted)
    letters = "IXZY"
    pairs = set()
    for qubit in range(both.bit_length()):
        one, two = ((x >> qubit & 1) + 2 * (z >> qubit & 1) for x, z in (wanted, found))
        if one != two:
            pairs.add(letters[one] + letters[two])
    return frozenset(pairs)


def _runs(values: Reals) -> list[tuple[int, int]]:
    """Cut sorted numbers into runs of equal ones; (start, stop) pairs."""
    if not values.size:
        return []
    cuts = np.flatnonzero(np.diff(values) > SAME_FACTOR * np.maximum(np.abs(values[1:]), np.abs(values[:-1]))) + 1
    edges = [0, *cuts.tolist(), values.size]
    return list(pairwise(edges))


def _by_factor(off: Mapping[Mask, float]) -> list[Group]:
    masks = sorted(off, key=lambda mask: off[mask])
    factors = np.array([off[mask] for mask in masks])
    return [
        Group("factor", (chosen := tuple(masks[start:stop])), chosen, float(factors[(start + stop - 1) // 2]))
        for start, stop in _runs(factors)
    ]


def _missing(missing: Sequence[Mask]) -> list[Group]:
    """Missing strings: those of one bond together, or those of one kind of letters if all are of it."""
    if not missing:
        return []
    kinds = {letter_counts(mask) for mask in missing}
    if len(kinds) == 1:
        return [Group("missing", (), tuple(missing), 0.0)]
    by_support: dict[int, list[Mask]] = {}
    for mask in missing:
        by_support.setdefault(support(mask), []).append(mask)
    return [Group("missing", (), tuple(masks), 0.0) for masks in by_support.values()]


def _extra(extra: Mapping[Mask, float]) -> list[Group]:
    masks = sorted(extra, key=lambda mask: extra[mask])
    totals = np.array([extra[mask] for mask in masks])
    return [Group("extra", tuple(masks[start:stop]), (), float(totals[start])) for start, stop in _runs(totals)]
