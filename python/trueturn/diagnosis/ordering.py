"""What the order of a circuit means: which rotations can pass each other, merge, or change places.

Two rotations can change places when their strings commute, and equal strings with nothing between them that
anticommutes add up to one. `settle` merges all that can merge. What is left is fixed, up to changes of
place without effect, by the sequence of angles of each string and by the *gaps* that the rotations of one string
fall into between those of an anticommuting one: words that agree in these are one unitary (Cartier, Foata,
Lecture Notes in Mathematics 85 (1969), for the order of letters; from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from trueturn.diagnosis.unfolding import Ints, Mask, Reals, Word

__all__ = ["Settled", "clashes", "order_moments", "settle", "shares_of"]

ROWS = 512
ROUNDS = 64
UNIT = 2.0**-53


@dataclass(frozen=True)
class Settled:
    """Each string's rotations after all merging: places in the word (ascending), and angles in radians."""

    places: list[Ints]
    angles: list[Reals]


def clashes(masks: Sequence[Mask], qubits: int) -> list[Ints]:
    """List, for each string, the numbers of those that anticommute with it."""
    if not masks:
        return []
    x = _bits([mask[0] for mask in masks], qubits)
    z = _bits([mask[1] for mask in masks], qubits)
    found: list[Ints] = []
    for start in range(0, len(masks), ROWS):
        stop = start + ROWS
        odd = (x[start:stop] @ z.T + z[start:stop] @ x.T) % 2  # counts up to 256 are exact in single precision
        found += [np.flatnonzero(row) for row in odd]
    return found


def _bits(masks: list[int], qubits: int) -> npt.NDArray[np.float32]:
    width = max(1, (qubits + 7) // 8)
    raw = np.frombuffer(b"".join(mask.to_bytes(width, "little") for mask in masks), dtype=np.uint8)
    return np.unpackbits(raw.reshape(len(masks), width), axis=1, bitorder="little").astype(np.float32)


def settle(word: Word, neighbours: Sequence[Ints], kept: npt.NDArray[np.bool_] | None = None) -> Settled:
    """Merge equal strings that meet, and drop what cancels, until nothing changes.

    Parameters
    ----------
    word : Word
    neighbours : sequence of arrays
        From `clashes`.
    kept : ndarray of bool, shape (len(neighbours),), optional
        Strings to look at; the others are taken out first.

    Cost
    ----
    Σ over strings of (its rotations + those of the strings that anticommute with it), a few times over.
    """
    if not neighbours:
        return Settled([], [])
    origin = np.arange(len(word)) if kept is None else np.flatnonzero(kept[word.strings])
    strings, angles = word.strings[origin], word.angles[origin]
    nothing = 8 * UNIT * np.bincount(strings, weights=np.abs(angles), minlength=len(neighbours))
    for _ in range(ROUNDS):
        places, values = _merged(strings, angles, neighbours)
        dead = [np.abs(value) <= limit for value, limit in zip(values, nothing, strict=True)]
        if not any(bool(one.any()) for one in dead):
            break
        keep = np.zeros(strings.size, dtype=bool)
        sums = np.zeros(strings.size)
        for place, value, gone in zip(places, values, dead, strict=True):
            keep[place[~gone]] = True
            sums[place] = value
        origin, strings, angles = origin[keep], strings[keep], sums[keep]
    return Settled([origin[place] for place in places], values)


def _merged(strings: Ints, angles: Reals, neighbours: Sequence[Ints]) -> tuple[list[Ints], list[Reals]]:
    order = np.argsort(strings, kind="stable")
    places = np.split(order, np.searchsorted(strings[order], np.arange(1, len(neighbours))))
    merged_places, merged_angles = [], []
    for own, others in zip(places, neighbours, strict=True):
        if own.size > 1:
            hit = np.zeros(own.size + 1, dtype=bool)
            for other in others:
                hit[np.searchsorted(own, places[other])] = True
            starts = np.concatenate([[0], np.flatnonzero(hit[1:-1]) + 1])
            merged_places.append(own[starts])
            merged_angles.append(np.add.reduceat(angles[own], starts))
        else:
            merged_places.append(own)
            merged_angles.append(angles[own])
    return merged_places, merged_angles


def order_moments(settled: Settled, neighbours: Sequence[Ints], most: int = 4096) -> Reals:
    """Compute the second moment of pairs of anticommuting strings, as shares.

    For strings P, Q with angles θ the moment is m = Σ_{i<j} (θ_i^P θ_j^Q - θ_i^Q θ_j^P) / (Θ^P Θ^Q): the circuit is
    exp(-i Σ Θ^P P - Σ_{P<Q} (m/2) Θ^P Θ^Q [Q, P] + third order). It is 1 where all of P comes before all of Q, 1/r
    in absolute value for r steps of first order, and 0 wherever the circuit is symmetric in time.

    Returns
    -------
    ndarray
        |m| of each pair; of `most` of them, spread evenly, where there are more. Strings whose total is nothing but
        rounding have none.
    """
    pairs = [(p, int(q)) for p, others in enumerate(neighbours) for q in others if p < q]
    chosen = pairs[:: max(1, -(-len(pairs) // most))]
    shares = {string: own for string, angles in enumerate(settled.angles) if (own := shares_of(angles)) is not None}
    found = []
    for p, q in chosen:
        if p in shares and q in shares:
            before = np.concatenate([[0.0], np.cumsum(shares[q])])
            earlier = before[np.searchsorted(settled.places[q], settled.places[p])]
            found.append(abs(float(shares[p] @ (1.0 - 2.0 * earlier))))
    return np.array(found)


def shares_of(angles: Reals) -> Reals | None:
    """Divide the angles of a string by their total; None where that is lost in rounding."""
    total = float(angles.sum())
    return angles / total if abs(total) > 1e-9 * float(np.abs(angles).sum()) else None
