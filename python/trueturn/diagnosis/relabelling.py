"""Find the qubit permutations that turn one weighted set of Pauli strings into another.

Qubits are told apart by what acts on them: colours are refined until they stop splitting, then a qubit of the
smallest ambiguous class is fixed and refinement goes on (individualisation and refinement, as in graph
isomorphism: B. D. McKay, Congressus Numerantium 30, 45 (1981); from memory). Symmetric Hamiltonians have several
answers; at most `MOST` are returned.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence

import numpy as np

from trueturn.diagnosis.unfolding import Mask, Reals

__all__ = ["MOST", "permutations", "permuted"]

MOST = 24
VISITS = 300
"""Colourings that are refined before the search gives up."""

_Key = tuple[int, tuple[tuple[int, tuple[tuple[int, int], ...], int], ...]]
_String = tuple[int, tuple[tuple[int, int], ...]]  # class of the coefficient; (qubit, letter) pairs


def permuted(mask: Mask, names: Sequence[int]) -> Mask:
    """Move the letter on each qubit q to qubit ``names[q]``."""
    x, z = mask
    new_x = new_z = 0
    rest = x | z
    while rest:
        low = rest & -rest
        qubit = low.bit_length() - 1
        new_x |= (x >> qubit & 1) << names[qubit]
        new_z |= (z >> qubit & 1) << names[qubit]
        rest ^= low
    return new_x, new_z


def permutations(
    masks: Sequence[Mask], values: Reals, wanted: Sequence[Mask], wanted_values: Reals, qubits: int, slack: float
) -> list[tuple[int, ...]]:
    """List permutations that carry `masks` with `values` to `wanted` with `wanted_values`.

    Parameters
    ----------
    slack : float
        Values nearer than this, relative to the largest, are equal.

    Returns
    -------
    list of tuple of int
        ``names[q]`` is where qubit q goes. Empty where there is none, or where the search gave up.
    """
    if len(masks) != len(wanted) or not masks:
        return []
    classes = _classes(np.concatenate([values, wanted_values]), slack)
    here = [(int(group), _letters(mask)) for group, mask in zip(classes[: len(masks)], masks, strict=True)]
    there = [(int(group), _letters(mask)) for group, mask in zip(classes[len(masks) :], wanted, strict=True)]
    if Counter(group for group, _ in here) != Counter(group for group, _ in there):
        return []
    target = {mask: group for (group, _), mask in zip(there, wanted, strict=True)}
    found: list[tuple[int, ...]] = []
    for names in _search(here, there, qubits):
        if (
            all(target.get(permuted(mask, names)) == group for (group, _), mask in zip(here, masks, strict=True))
            and names not in found
        ):
            found.append(names)
            if len(found) == MOST:
                break
    return found


def _classes(values: Reals, slack: float) -> np.ndarray[tuple[int], np.dtype[np.intp]]:
    order = np.argsort(values, kind="stable")
    jumps = np.diff(values[order]) > slack * max(float(np.max(np.abs(values))), 5e-324)
    classes = np.empty(values.size, dtype=np.intp)
    classes[order] = np.concatenate([[0], np.cumsum(jumps)])
    return classes


def _letters(mask: Mask) -> tuple[tuple[int, int], ...]:
    x, z = mask
    both = x | z
    return tuple((q, (x >> q & 1) + 2 * (z >> q & 1)) for q in range(both.bit_length()) if both >> q & 1)


def _search(here: Sequence[_String], there: Sequence[_String], qubits: int) -> Iterator[tuple[int, ...]]:
    start = [_idle_apart(here, qubits), _idle_apart(there, qubits)]
    visits = 0
    stack = [start]
    while stack and visits < VISITS:
        visits += 1
        left, right = _refined(here, there, *stack.pop())
        if Counter(left) != Counter(right):
            continue
        sizes = Counter(left)
        if len(sizes) == qubits:
            place = {colour: qubit for qubit, colour in enumerate(right)}
            yield tuple(place[colour] for colour in left)
            continue
        cell = min((colour for colour, size in sizes.items() if size > 1), key=lambda colour: (sizes[colour], colour))
        fresh = qubits + max(left)
        one = left.index(cell)
        choices = [other for other, colour in enumerate(right) if colour == cell]
        for other in reversed(choices):
            new_left, new_right = list(left), list(right)
            new_left[one] = new_right[other] = fresh
            stack.append([new_left, new_right])


def _idle_apart(strings: Sequence[_String], qubits: int) -> list[int]:
    """Colour qubits that nothing acts on by their rank among such, so that they are not searched over."""
    busy = {qubit for _, letters in strings for qubit, _ in letters}
    colours, idle = [], 0
    for qubit in range(qubits):
        idle += qubit not in busy
        colours.append(0 if qubit in busy else idle)
    return colours


def _refined(
    here: Sequence[_String], there: Sequence[_String], left: list[int], right: list[int]
) -> tuple[list[int], list[int]]:
    """Split colours by what the strings on each qubit look like, until nothing splits any more."""
    count = 0
    while True:
        keys = _keys(here, left), _keys(there, right)
        names = {key: name for name, key in enumerate(sorted({*keys[0], *keys[1]}))}
        left, right = [names[key] for key in keys[0]], [names[key] for key in keys[1]]
        if len(names) == count:
            return left, right
        count = len(names)


def _keys(strings: Sequence[_String], colours: Sequence[int]) -> list[_Key]:
    """Give for each qubit its colour, and the strings on it by class, colours and its own letter."""
    seen: list[list[tuple[int, tuple[tuple[int, int], ...], int]]] = [[] for _ in colours]
    for group, letters in strings:
        look = tuple(sorted((letter, colours[qubit]) for qubit, letter in letters))
        for qubit, letter in letters:
            seen[qubit].append((group, look, letter))
    return [(colour, tuple(sorted(own))) for colour, own in zip(colours, seen, strict=True)]
