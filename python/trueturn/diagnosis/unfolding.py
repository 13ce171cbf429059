"""A circuit as arrays: which string, by what angle; repeats stay repeats wherever they would not fit.

The first moment (angle totals) is exact whatever the repeats. For questions about order, a circuit with long
repeats is shortened: a block that runs a million times tells all it can in a few runs. What was left out is kept
as angle totals, so that the number of steps can be counted in full.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from trueturn.rotations import Rotations

__all__ = ["Ints", "Mask", "Node", "Reals", "Unfolded", "Word", "edited", "read_nodes", "unfold"]

Ints = npt.NDArray[np.intp]
Reals = npt.NDArray[np.float64]
Mask = tuple[int, int]
"""x and z mask of a string."""

WRITTEN_OUT = 200_000
"""Circuits of up to this many rotations are written out; longer repeats are shortened until they fit."""
CAPS = (1024, 256, 64, 16, 6)


@dataclass(frozen=True)
class Node:
    """A list of rotations, or nodes inside a node, and how often it runs."""

    repeat: int
    strings: Ints | None
    angles: Reals | None
    inside: tuple[Node, ...] = ()


@dataclass(frozen=True)
class Word:
    """Rotations in order of time: numbers of strings, and angles in radians; both of shape (count,)."""

    strings: Ints
    angles: Reals

    def __len__(self) -> int:
        return int(self.strings.size)


@dataclass(frozen=True)
class Unfolded:
    """A circuit in arrays.

    Attributes
    ----------
    masks : list of (int, int)
        The distinct strings, in order of first use; the identity is not among them.
    totals, sizes, counts : ndarray, shape (len(masks),)
        Σθ, Σ|θ| and the number of rotations of each string, repeats included.
    word : Word
        Written out, with long repeats shortened.
    left_out : ndarray, shape (len(masks),)
        Σθ of what shortening left out.
    phase : float
        Global phase, with rotations about the identity in it.
    """

    masks: list[Mask]
    totals: Reals
    sizes: Reals
    counts: Reals
    word: Word
    left_out: Reals
    phase: float


def unfold(rotations: Rotations) -> Unfolded:
    """Turn a circuit into arrays; time and memory grow with what it stores, not with what it repeats."""
    masks, nodes = read_nodes(rotations)
    size = len(masks)
    totals: Reals = np.zeros(size)
    sizes: Reals = np.zeros(size)
    counts: Reals = np.zeros(size)
    _add_up(nodes, 1.0, totals, sizes, counts)
    for cap in (2**63, *CAPS):
        kept = _capped(nodes, cap)
        if cap == CAPS[-1] or _length(kept) <= WRITTEN_OUT:
            break
    word = _word(kept)
    short: Reals = np.bincount(word.strings, weights=word.angles, minlength=size).astype(np.float64)
    phase = rotations.phase
    if (0, 0) in masks:
        place = masks.index((0, 0))
        phase -= float(totals[place])
        keep = word.strings != place
        strings = word.strings[keep]
        word = Word(strings - (strings > place), word.angles[keep])
        masks = masks[:place] + masks[place + 1 :]
        totals, sizes = np.delete(totals, place), np.delete(sizes, place)
        counts, short = np.delete(counts, place), np.delete(short, place)
    return Unfolded(masks, totals, sizes, counts, word, totals - short, phase)


def read_nodes(rotations: Rotations) -> tuple[list[Mask], tuple[Node, ...]]:
    """Read the blocks of a circuit, with strings numbered in order of first use."""
    numbers: dict[Mask, int] = {}

    def node(body: Rotations, repeat: int) -> Node:
        blocks = body.blocks
        if len(blocks) > 1 or (blocks and blocks[0].repeat > 1):
            return Node(repeat, None, None, tuple(node(*block) for block in blocks))
        x, z, angles = body._written_out()
        strings = np.array([numbers.setdefault(pair, len(numbers)) for pair in zip(x, z, strict=True)], dtype=np.intp)
        return Node(repeat, strings, np.asarray(angles, dtype=np.float64))

    nodes = tuple(node(*block) for block in rotations.blocks)
    return list(numbers), nodes


def edited(rotations: Rotations, change: Callable[[Mask], tuple[Mask, float] | None], phase: float) -> Rotations:
    """Rewrite every rotation where it stands, repeats untouched.

    Parameters
    ----------
    rotations : Rotations
    change : callable
        From a string to the new string and the factor of its angle; None drops its rotations. Asked once a string.
    phase : float
        Global phase of the result.
    """
    masks, nodes = read_nodes(rotations)
    new = [change(mask) for mask in masks]
    kept = np.array([one is not None for one in new], dtype=bool)
    factors = np.array([1.0 if one is None else one[1] for one in new])
    x, z = np.empty(len(new), dtype=object), np.empty(len(new), dtype=object)
    x[:] = [0 if one is None else one[0][0] for one in new]
    z[:] = [0 if one is None else one[0][1] for one in new]

    def body(node: Node) -> Rotations:
        if node.strings is None or node.angles is None:
            made = Rotations([], [], [], rotations.qubits)
            for inner in node.inside:
                made = made + body(inner).times(inner.repeat)
            return made
        stays = kept[node.strings]
        strings = node.strings[stays]
        angles = node.angles[stays] * factors[strings]
        return Rotations(x[strings].tolist(), z[strings].tolist(), angles, rotations.qubits)

    made = Rotations([], [], [], rotations.qubits, phase=phase)
    for node in nodes:
        made = made + body(node).times(node.repeat)
    return made


def _add_up(nodes: tuple[Node, ...], times: float, totals: Reals, sizes: Reals, counts: Reals) -> None:
    for node in nodes:
        runs = times * node.repeat
        if node.strings is None or node.angles is None:
            _add_up(node.inside, runs, totals, sizes, counts)
            continue
        length = totals.size
        totals += runs * np.bincount(node.strings, weights=node.angles, minlength=length)
        sizes += runs * np.bincount(node.strings, weights=np.abs(node.angles), minlength=length)
        counts += runs * np.bincount(node.strings, minlength=length)


def _capped(nodes: tuple[Node, ...], cap: int) -> tuple[Node, ...]:
    return tuple(Node(min(node.repeat, cap), node.strings, node.angles, _capped(node.inside, cap)) for node in nodes)


def _length(nodes: tuple[Node, ...]) -> int:
    return sum(
        node.repeat * (_length(node.inside) if node.strings is None else int(node.strings.size)) for node in nodes
    )


def _word(nodes: tuple[Node, ...]) -> Word:
    pieces = []
    for node in nodes:
        once = _word(node.inside) if node.strings is None or node.angles is None else Word(node.strings, node.angles)
        pieces.append(Word(np.tile(once.strings, node.repeat), np.tile(once.angles, node.repeat)))
    if not pieces:
        return Word(np.zeros(0, dtype=np.intp), np.zeros(0))
    return Word(np.concatenate([piece.strings for piece in pieces]), np.concatenate([piece.angles for piece in pieces]))
