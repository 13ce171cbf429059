"""Parts of a driven Hamiltonian: which strings share a part, whatever their strengths are at the time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from trueturn.errors import PartitionError
from trueturn.partition import Partition
from trueturn.partition_rules import RULES, string_text

if TYPE_CHECKING:
    from trueturn.driven.hamiltonian import Driven

__all__ = ["DrivenPart", "driven_parts"]

String = tuple[int, int]
Share = tuple[int, npt.NDArray[np.intp], npt.NDArray[np.float64]]


@dataclass(frozen=True, eq=False)
class DrivenPart:
    """Strings that commute pairwise, so that they commute at unequal times too.

    Attributes
    ----------
    x, z : list of int
        Masks of the strings.
    shares : list of (int, ndarray, ndarray)
        For each term of the Hamiltonian that has strings here: its number, their places, their coefficients.
    """

    x: list[int]
    z: list[int]
    shares: list[Share]

    def coefficients(self, strengths: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
        """Return the strings' coefficients, shape (m, strings), from strengths of shape (m, terms).

        Added up term by term in a fixed order.
        """
        total = np.zeros((len(strengths), len(self.x)))
        for term, places, values in self.shares:
            total[:, places] += strengths[:, term, None] * values
        return total


def driven_parts(driven: Driven, rule: str | Partition) -> list[DrivenPart]:
    """Distribute the strings of a driven Hamiltonian over parts; see `Driven.rotations`.

    Raises
    ------
    PartitionError
        Unknown rule, strings of a part that do not commute, or a partition of other strings.
    """
    if isinstance(rule, str) and rule == "terms":
        return [_own_part(driven, term) for term in range(len(driven.terms)) if _strings(driven, term)]
    if isinstance(rule, Partition):
        partition = rule
        if partition.qubits != driven.qubits:
            raise PartitionError(
                f"rule: a partition of {partition.qubits} qubits, the Hamiltonian has {driven.qubits}; "
                f"build its parts with qubits={driven.qubits}",
                argument="rule",
            )
    elif isinstance(rule, str) and rule in RULES:
        partition = Partition.of(driven.strings(), rule)
    else:
        raise PartitionError(
            f"rule: is unknown ({rule!r}); choose 'terms', one of {', '.join(map(repr, RULES))}, or give a Partition",
            argument="rule",
            choices=("terms", *RULES),
        )
    groups = [list(zip(part.x_masks.tolist(), part.z_masks.tolist(), strict=True)) for part in partition.parts]
    homes = _homes(groups)
    _require_same_strings(driven, homes)
    return [_part(driven, group) for group in groups]


def _strings(driven: Driven, term: int) -> list[tuple[String, float]]:
    """List the strings of one term with their coefficients, without the identity."""
    bare = driven.terms[term][1].without_identity()
    masks = zip(bare.x_masks.tolist(), bare.z_masks.tolist(), strict=True)
    return list(zip(masks, bare.coefficients.tolist(), strict=True))


def _own_part(driven: Driven, term: int) -> DrivenPart:
    bare = driven.terms[term][1].without_identity()
    pair = bare._terms.first_anticommuting_pair()
    if pair is not None:
        first, second = (string_text(bare.x_masks[place], bare.z_masks[place]) for place in pair)
        raise PartitionError(
            f"rule: {first} and {second} of term {term} do not commute, so they cannot share a part ('terms'); "
            "make them two terms, or use rule='commuting'",
            argument="rule",
        )
    places = np.arange(len(bare))
    return DrivenPart(bare.x_masks.tolist(), bare.z_masks.tolist(), [(term, places, np.array(bare.coefficients))])


def _part(driven: Driven, group: Sequence[String]) -> DrivenPart:
    place = {string: number for number, string in enumerate(group)}
    shares: list[Share] = []
    for term in range(len(driven.terms)):
        here = [(place[string], value) for string, value in _strings(driven, term) if string in place]
        if here:
            shares.append((term, np.array([p for p, _ in here]), np.array([value for _, value in here])))
    return DrivenPart([x for x, _ in group], [z for _, z in group], shares)


def _homes(groups: Sequence[Sequence[String]]) -> set[String]:
    homes: set[String] = set()
    for group in groups:
        for string in group:
            if string in homes:
                raise PartitionError(
                    f"rule: {string_text(*string)} stands in two parts, and its strength cannot be divided; "
                    "put each string into one part",
                    argument="rule",
                )
            homes.add(string)
    return homes


def _require_same_strings(driven: Driven, homes: set[String]) -> None:
    own = {string for term in range(len(driven.terms)) for string, _ in _strings(driven, term)}
    for strings, what, remedy in (
        (own - homes, "stands in no part", "partition .strings(), which has them all"),
        (homes - own, "is no string of the Hamiltonian", "leave it out"),
    ):
        if strings:
            raise PartitionError(f"rule: {string_text(*min(strings))} {what}; {remedy}", argument="rule")
