"""Many bit masks at once: arrays of 64-bit words, lowest word first, so that numpy does the Pauli algebra."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt

__all__ = ["Words", "counts", "from_bits", "from_integers", "integers", "to_bits", "word_count"]

Words: TypeAlias = npt.NDArray[np.uint64]
"""Shape (…, words): bit q of a mask is bit q % 64 of word q // 64."""

_ONES = np.array([value.bit_count() for value in range(256)], dtype=np.int64)


def word_count(bits: int) -> int:
    """Return how many words hold that many bits."""
    return -(-bits // 64)


def from_bits(bits: npt.NDArray[Any]) -> Words:
    """Pack bits, shape (…, n), 0 or 1, into words."""
    size = bits.shape[-1]
    padded = np.zeros((*bits.shape[:-1], 64 * word_count(size)), dtype=np.uint8)
    padded[..., :size] = bits
    packed = np.packbits(padded, axis=-1, bitorder="little")
    return np.ascontiguousarray(packed).view("<u8").astype(np.uint64, copy=False)


def to_bits(words: Words, size: int) -> npt.NDArray[np.uint8]:
    """Unpack words into bits, shape (…, size)."""
    raw = np.ascontiguousarray(words).astype("<u8", copy=False).view(np.uint8)
    return np.unpackbits(raw, axis=-1, bitorder="little")[..., :size]


def counts(words: Words) -> npt.NDArray[np.int64]:
    """Return the number of ones in each mask: shape (…)."""
    raw = np.ascontiguousarray(words).view(np.uint8)
    found: npt.NDArray[np.int64] = _ONES[raw].sum(axis=-1)
    return found


def integers(words: Words) -> list[int]:
    """Return masks of shape (m, words) as Python integers."""
    columns = [words[:, place].tolist() for place in range(words.shape[1])]
    if len(columns) == 1:
        return list(columns[0])
    return [low | high << 64 for low, high in zip(*columns, strict=True)]


def from_integers(masks: Iterable[int], size: int) -> Words:
    """Return Python integers below 2**size as words: shape (m, words)."""
    low = (1 << 64) - 1
    rows = [[mask >> 64 * place & low for place in range(word_count(size))] for mask in masks]
    return np.array(rows, dtype=np.uint64).reshape(len(rows), word_count(size))
