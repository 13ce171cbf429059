"""Cutting an operator into small clusters of neighbouring qubits.

The least eigenvalue of a sum is at least the sum of the least eigenvalues, so clusters that are solved
exactly give an outer bound of the whole; the more terms a cluster holds together, the tighter. See P. W.
Anderson, Phys. Rev. 83, 1260 (1951).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from trueturn.reference._extremes import Scaled, is_real

__all__ = ["Cluster", "components", "plan"]

STEPS_ALLOWED = 3_000_000
"""Supports looked at while planning, about a second of work."""


@dataclass(frozen=True)
class Cluster:
    """Terms on few qubits, renumbered from 0 in ascending order, and sorted: equal clusters compare equal."""

    qubits: int
    terms: tuple[Scaled, ...]

    @classmethod
    def of(cls, terms: Sequence[Scaled]) -> Cluster:
        support = 0
        for x, z, _ in terms:
            support |= x | z
        places = [place for place in range(support.bit_length()) if support >> place & 1]
        moved = [(_compressed(x, places), _compressed(z, places), coefficient) for x, z, coefficient in terms]
        return cls(len(places), tuple(sorted(moved)))

    @property
    def cost(self) -> int:
        """Multiplications of a dense solution, roughly, as a multiple of the cube of the order."""
        return (1 if is_real(self.terms) else 4) << 3 * self.qubits


def _compressed(mask: int, places: Sequence[int]) -> int:
    first, last = places[0], places[-1]
    if last - first < len(places):
        return mask >> first
    return sum(1 << new for new, old in enumerate(places) if mask >> old & 1)


def components(terms: Sequence[Scaled]) -> list[list[Scaled]]:
    """Split terms so that different lists share no qubit; their spectra add up exactly. Order is kept."""
    lists: dict[int, list[int]] = {}
    masks: dict[int, int] = {}
    for number, (x, z, _) in enumerate(terms):
        support = x | z
        touched = [label for label, mask in masks.items() if mask & support]
        label = touched[0] if touched else number
        for other in touched[1:]:
            lists[label].extend(lists.pop(other))
            masks[label] |= masks.pop(other)
        lists.setdefault(label, []).append(number)
        masks[label] = masks.get(label, 0) | support
    return [[terms[number] for number in sorted(numbers)] for _, numbers in sorted(lists.items())]


def plan(terms: Sequence[Scaled], size: int) -> tuple[list[Cluster], list[Scaled]]:
    """Assign every term to one cluster of at most `size` qubits.

    A cluster starts at the first term that is left and grows by the neighbours that bring most strength for
    each new qubit; it takes all terms that lie inside.

    Parameters
    ----------
    terms : sequence of (x, z, coefficient)
    size : int

    Returns
    -------
    clusters : list of Cluster
    left_over : list of terms
        Those on more qubits than `size`, and what is left when planning has taken too long.
    """
    by_support: dict[int, list[Scaled]] = {}
    left_over: list[Scaled] = []
    for term in terms:
        support = term[0] | term[1]
        if support.bit_count() <= size:
            by_support.setdefault(support, []).append(term)
        else:
            left_over.append(term)
    strength = {support: sum(abs(term[2]) for term in group) for support, group in by_support.items()}
    clusters = []
    steps = 0
    while strength and steps < STEPS_ALLOWED:
        mask = next(iter(strength))
        while True:
            steps += len(strength)
            gains: dict[int, float] = {}
            for support, weight in strength.items():
                new = support & ~mask
                if new and support & mask and (mask | support).bit_count() <= size:
                    gains[new] = gains.get(new, 0.0) + weight
            if not gains:
                break
            mask |= max(gains, key=lambda new: gains[new] / new.bit_count())
        inside = [support for support in strength if not support & ~mask]
        clusters.append(Cluster.of([term for support in inside for term in by_support[support]]))
        for support in inside:
            del strength[support]
    left_over.extend(term for support in strength for term in by_support[support])
    return clusters, left_over
