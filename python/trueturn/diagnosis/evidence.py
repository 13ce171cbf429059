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
from trueturn.diagnosis.unfolding import Ints, Reals

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
    if structure.neighbours is None:
        return "there are too many strings to compare the order of their rotations"
    accused = [_turning(structure, group) for group in groups]
    if not structure.plans:
        if not any(accused) and _in_stages(structure):
            return ""  # strings are missing, and nothing is put in their place
        return "the rotations of the strings that are right do not run as those of any known formula"
    if sum(map(bool, accused)) > NUMBERS:
        return "strings that are off are so by several amounts"
    strings = sorted({string for group in accused for string in group})
    if _any_clash(structure, strings):
        return "strings that are off do not commute with one another, and do not run as a formula either"
    return _against(structure, structure.plans[0], strings)


def _turning(structure: Structure, group: Group) -> list[int]:
    """List the strings of a group that the circuit turns by, those whose angles sum to nothing among them."""
    settled = structure.settled
    masks = {*group.found, *(group.wanted if group.kind == "missing" else ())}
    return [
        string
        for string, mask in enumerate(structure.masks)
        if mask in masks and (settled is None or settled.places[string].size)
    ]


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


def _against(structure: Structure, plan: Plan, strings: Sequence[int]) -> str:
    """Say what speaks against a plan and one number for each string that is off; empty where nothing does."""
    assert structure.settled is not None
    clocks = structure.clocks(plan.judged)
    for string in strings:
        if clocks.cut(plan.model, string):
            return "strings that are off cut rotations of strings that are right"
        if structure.terms[string] < 0:
            if structure.settled.places[string].size > 1:
                return "strings that the Hamiltonian lacks turn in several places, and not as terms of a formula do"
        elif not structure.one_number(plan, string):
            return "strings that are off are so by several amounts in several places"
    return ""
