"""Partition rules: which terms share a part, and the order of the parts.

A rule takes an operator without identity and returns the numbers of the terms of each part, every term once.
To add one: a function, an entry in `RULES`, and a line in the docstring of `Partition.of`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence

import numpy as np

from trueturn.edge_colouring import colour_edges
from trueturn.error_saving import EVALUATIONS, improve
from trueturn.errors import PartitionError
from trueturn.ladders import gate_saving_order
from trueturn.operator import Operator
from trueturn.vertex_colouring import STRATEGIES, colour_strings

__all__ = ["COMMUTING", "RULES", "Groups", "part_counts", "string_text", "subset"]

Groups = list[list[int]]
Rule = Callable[[Operator], Groups]


def _each_alone(terms: Operator) -> Groups:
    return [[term] for term in range(len(terms))]


def _largest_first(terms: Operator) -> Groups:
    return [[int(term)] for term in np.argsort(-np.abs(terms.coefficients), kind="stable")]


def _lexicographic(terms: Operator) -> Groups:
    """Letters I, X, Y, Z are 0, 1, 2, 3, and qubit 0 is the first digit."""
    keys = [
        [(x >> q & 1) ^ 3 * (z >> q & 1) for q in range(terms.qubits)]
        for x, z in zip(terms.x_masks.tolist(), terms.z_masks.tolist(), strict=True)
    ]
    return [[term] for term in sorted(range(len(terms)), key=keys.__getitem__)]


def _commuting(terms: Operator) -> Groups:
    return _commuting_among(terms, range(len(terms)))


def _commuting_among(terms: Operator, chosen: Iterable[int]) -> Groups:
    """Greedy colouring: each chosen term joins the first group with all of which it commutes."""
    numbers = list(chosen)
    groups: dict[int, list[int]] = {}
    for number, group in zip(numbers, subset(terms, numbers)._terms.commuting_groups().tolist(), strict=True):
        groups.setdefault(group, []).append(number)
    return [groups[group] for group in sorted(groups)]


def _commuting_by(strategy: str) -> Rule:
    def rule(terms: Operator) -> Groups:
        groups: dict[int, list[int]] = {}
        for term, colour in enumerate(colour_strings(terms, strategy)):
            groups.setdefault(colour, []).append(term)
        return list(groups.values())

    return rule


def _commuting_fewest(terms: Operator) -> Groups:
    return min((rule(terms) for rule in COMMUTING.values()), key=len)


def _gate_saving(terms: Operator) -> Groups:
    groups = _commuting(terms)
    order = gate_saving_order([subset(terms, group) for group in groups], "ascending")
    return [[groups[part][term] for term in inside] for part, inside in order]


def _error_saving(terms: Operator) -> Groups:
    groups = _commuting(terms)
    if len(groups) < 2:
        return groups
    from trueturn.partition import Partition  # imports this module

    try:
        found = improve(Partition([subset(terms, group) for group in groups]), "strang", "norm", 0, EVALUATIONS)
    except PartitionError as refused:
        raise PartitionError(
            f"rule: 'error-saving' meets too many nested brackets ({len(groups)} parts, {len(terms)} terms); "
            "use 'commuting', and .improved('lie') on what it makes",
            argument="rule",
            choices=("commuting",),
        ) from refused
    return [groups[part] for part in found.order]


def _axis(terms: Operator) -> Groups:
    pure: dict[str, list[int]] = {"X": [], "Y": [], "Z": []}
    mixed: list[int] = []
    for term, (x, z) in enumerate(zip(terms.x_masks, terms.z_masks, strict=True)):
        letter = "X" if z == 0 else "Y" if x == z else "Z" if x == 0 else None
        (mixed if letter is None else pure[letter]).append(term)
    return [group for group in pure.values() if group] + _commuting_among(terms, mixed)


def _bond(terms: Operator) -> Groups:
    bonds: dict[tuple[int, int], list[int]] = {}
    fields: list[int] = []
    for term, (x, z) in enumerate(zip(terms.x_masks, terms.z_masks, strict=True)):
        support = tuple(qubit for qubit in range(terms.qubits) if (x | z) >> qubit & 1)
        if len(support) > 2:
            raise PartitionError(
                f"rule: 'bond' takes one or two qubits a term ({string_text(x, z)} acts on {len(support)}); "
                "use 'commuting', 'axis', 'single' or 'magnitude'",
                argument="rule",
                choices=("commuting", "axis", "single", "magnitude"),
            )
        if len(support) == 2:
            bonds.setdefault((support[0], support[1]), []).append(term)
        else:
            fields.append(term)
    of_colour: dict[int, list[int]] = {}
    for colour, members in zip(colour_edges(list(bonds)), bonds.values(), strict=True):
        of_colour.setdefault(colour, []).extend(members)
    groups: Groups = []
    for colour in sorted(of_colour):
        groups += _commuting_among(terms, sorted(of_colour[colour]))
    return groups + _commuting_among(terms, fields)


COMMUTING: dict[str, Rule] = {
    "commuting": _commuting,
    **{f"commuting-{strategy}": _commuting_by(strategy) for strategy in STRATEGIES},
}
"""The ways to colour strings that do not commute."""

RULES: dict[str, Rule] = {
    "single": _each_alone,
    "magnitude": _largest_first,
    "lexicographic": _lexicographic,
    **COMMUTING,
    "commuting-fewest": _commuting_fewest,
    "bond": _bond,
    "axis": _axis,
    "gate-saving": _gate_saving,
    "error-saving": _error_saving,
}


def part_counts(operator: Operator) -> dict[str, int]:
    """Report how many parts each way of colouring makes.

    Parameters
    ----------
    operator : Operator

    Returns
    -------
    dict of str to int
        From each rule in `COMMUTING` to its number of parts; ``commuting-fewest`` makes the least of them.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.partition_rules import part_counts
    >>> part_counts(tt.Operator("X_0 + Z_1 + Z_0 + X_1"))["commuting-saturation"]
    2
    """
    terms = operator.without_identity()
    return {name: len(rule(terms)) for name, rule in COMMUTING.items()}


def subset(terms: Operator, chosen: Sequence[int]) -> Operator:
    """Pick terms by number, in the order named."""
    numbers = np.asarray(chosen, dtype=np.intp)
    return Operator.from_masks(
        terms.x_masks[numbers], terms.z_masks[numbers], terms.coefficients[numbers], terms.qubits
    )


def string_text(x: int, z: int) -> str:
    """The factors of a string, in the written notation."""
    qubits = range((x | z).bit_length())
    letters = ("I", "X", "Z", "Y")
    return " ".join(f"{letters[(x >> q & 1) + 2 * (z >> q & 1)]}_{q}" for q in qubits if (x | z) >> q & 1)
