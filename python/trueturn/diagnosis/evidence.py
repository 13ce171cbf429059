"""Whether what a circuit shows can only be a mistake, or also a right circuit written anew.

Angle totals alone accuse nobody: a compiler that writes a block of gates anew keeps the unitary and changes totals as
it likes. It has to meet as many equations as the block's algebra has dimensions, three at least, and each rotation is
one number to meet them with. A mistake is a single number, or a single name. So an accusation stands where one number
explains the circuit: where all of it runs as a formula of the library for some Hamiltonian, or where all sound strings
do, uncut, and the others stand between them and are off by one number. Then a right circuit with the same unitary would
need two product formulas to agree by accident.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from trueturn.diagnosis.character import first_order, last_order, recognised
from trueturn.diagnosis.ordering import Settled, clashes, settle, shares_of
from trueturn.diagnosis.structure import Plan, Structure
from trueturn.diagnosis.totals import Group
from trueturn.diagnosis.unfolding import Ints, Mask, Reals

__all__ = ["unsupported"]

ALIKE = 1e-6
"""Relative difference below which two numbers are one."""
NUMBERS = 2
"""Groups that are off by a number each; three would be enough to meet the equations of one anticommuting pair."""
KINDS = 4
"""Sequences of shares that a formula of stages shows at most, see `trueturn.diagnosis.methods`."""


def unsupported(structure: Structure) -> str:
    """Say why a right circuit written anew could look like this one; empty where none could.

    Parameters
    ----------
    structure : Structure
        Of a reading that leaves something to explain.
    """
    groups = structure.reading.groups
    if not groups or _all_commute(structure) or _runs_throughout(structure):
        return ""
    if not structure.plans:
        if all(group.kind == "missing" for group in groups) and _in_stages(structure):
            return ""
        return "the rotations of the strings that are right do not run as those of any known formula"
    numbers = {mask: string for string, mask in enumerate(structure.masks)}
    accused = sorted({numbers[mask] for group in groups for mask in group.found if mask in numbers})
    if _any_clash(structure, accused):
        return "strings that are off do not commute with one another, and do not run as a formula either"
    return _against(structure, structure.plans[0], groups, numbers)


def _all_commute(structure: Structure) -> bool:
    """Whether the strings of the circuit commute, so that their totals are its unitary."""
    return structure.neighbours is not None and not any(others.size for others in structure.neighbours)


def _runs_throughout(structure: Structure) -> bool:
    """Whether the circuit runs as a formula of the library, for whatever coefficients, as it is or once renamed."""
    if structure.settled is None or structure.neighbours is None:
        return False
    if _is_formula(structure.settled, structure.neighbours):
        return True
    names = {
        found: wanted
        for group in structure.reading.groups
        if group.kind in ("letters", "place")
        for found, wanted in zip(group.found, group.wanted, strict=True)
    }
    masks = [names.get(mask, mask) for mask in structure.masks]
    if not names or len(set(masks)) < len(masks):
        return False
    neighbours = clashes(masks, structure.hamiltonian.terms.qubits)
    return _is_formula(settle(structure.word, neighbours), neighbours)


def _is_formula(settled: Settled, neighbours: Sequence[Ints]) -> bool:
    strings = [string for string, places in enumerate(settled.places) if places.size]
    orders = (first_order(settled, strings), last_order(settled, strings, True), last_order(settled, strings, False))
    return any(recognised(settled, neighbours, strings, order) for order in dict.fromkeys(orders))


def _in_stages(structure: Structure) -> bool:
    """Whether sound strings share few sequences of angles, as those of a formula that is not in the library do."""
    if structure.neighbours is None:
        return False
    kept = np.zeros(len(structure.masks), dtype=bool)
    kept[structure.sound] = True
    settled = settle(structure.word, structure.neighbours, kept)
    seen: list[Reals] = []
    for string in structure.sound:
        shares = shares_of(settled.angles[string])
        if shares is None:
            return False
        if not any(_equal(shares, one) for one in seen):
            seen.append(shares)
    return len(seen) <= KINDS and len(structure.sound) >= 2 * len(seen)


def _equal(one: Reals, two: Reals) -> bool:
    return one.size == two.size and bool(np.all(np.abs(one - two) <= ALIKE * np.max(np.abs(two))))


def _any_clash(structure: Structure, strings: Sequence[int]) -> bool:
    assert structure.neighbours is not None
    return any(np.intersect1d(structure.neighbours[string], strings).size for string in strings)


def _against(structure: Structure, plan: Plan, groups: Sequence[Group], numbers: dict[Mask, int]) -> str:
    """Say what speaks against a plan and one number for each group; empty where nothing does."""
    assert structure.settled is not None
    if sum(bool(group.found) for group in groups) > NUMBERS:
        return "strings that are off are so by several amounts"
    for group in groups:
        for mask in group.found:
            string = numbers.get(mask)
            if string is None:
                continue
            if structure.clocks(plan.judged).cut(plan.model, string):
                return "strings that are off cut rotations of strings that are right"
            if structure.terms[string] < 0:
                if structure.settled.places[string].size > 1:
                    return "strings that the Hamiltonian lacks turn in several places, and not as terms of a formula do"
            elif not structure.one_number(plan, string):
                return "strings that are off are so by several amounts in several places"
    return ""
