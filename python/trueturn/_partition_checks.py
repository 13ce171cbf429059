"""Checks of what users give to a partition: a clean value, or an error that names the argument."""

from __future__ import annotations

from collections.abc import Iterable
from operator import index

from trueturn.errors import PartitionError
from trueturn.operator import Operator
from trueturn.partition_rules import string_text

__all__ = ["check_commuting", "commutes", "given_parts", "whole_number"]


def commutes(part: Operator) -> bool:
    """Say whether all terms of a part commute pairwise."""
    return part._terms.first_anticommuting_pair() is None


def check_commuting(number: int, part: Operator) -> None:
    """Refuse a part with two terms that do not commute, by name."""
    pair = part._terms.first_anticommuting_pair()
    if pair is not None:
        first, second = (string_text(part.x_masks[term], part.z_masks[term]) for term in pair)
        raise PartitionError(
            f"parts: {first} and {second} in part {number} do not commute; put them into different parts, "
            "or let Partition.of(operator, 'commuting') distribute the terms",
            argument="parts",
        )


def given_parts(parts: object) -> list[Operator]:
    """Return parts as a list: at least one, all operators on the same number of qubits."""
    remedy = "give a sequence of Operators, or use Partition.of(operator, rule)"
    if isinstance(parts, Operator) or not isinstance(parts, Iterable):
        raise PartitionError(f"parts: is not a sequence of Operators ({parts!r}); {remedy}", argument="parts")
    given = list(parts)
    if not given:
        raise PartitionError(f"parts: is empty ({parts!r}); {remedy}", argument="parts")
    for number, part in enumerate(given):
        if not isinstance(part, Operator):
            raise PartitionError(f"parts: part {number} is not an Operator ({part!r}); {remedy}", argument="parts")
        if part.qubits != given[0].qubits:
            raise PartitionError(
                f"parts: part {number} acts on {part.qubits} qubits and part 0 on {given[0].qubits}; "
                f"build every part with qubits={max(p.qubits for p in given if isinstance(p, Operator))}",
                argument="parts",
            )
    return given


def whole_number(argument: str, value: object, remedy: str) -> int:
    """Return an integer, numpy ones included; booleans are refused."""
    try:
        if isinstance(value, bool):
            raise TypeError
        return index(value)  # type: ignore[arg-type]
    except TypeError:
        raise PartitionError(f"{argument}: is not an integer ({value!r}); {remedy}", argument=argument) from None
