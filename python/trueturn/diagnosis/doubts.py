"""When a circuit does not determine the answer, and why."""

from __future__ import annotations

import math
from functools import reduce

import numpy as np

from trueturn.diagnosis.case import UNIT, Case
from trueturn.diagnosis.evidence import unsupported
from trueturn.diagnosis.frames import QUARTER
from trueturn.diagnosis.structure import Structure
from trueturn.diagnosis.totals import Group, Sheet
from trueturn.partition_rules import string_text

__all__ = ["undetermined"]

MOST_MISTAKES = 3
"""More mistakes than this at once are not a diagnosis but a guess."""
SOME = 1e-9


def undetermined(case: Case, structure: Structure) -> str:
    """Say why the circuit does not determine the answer; empty where it does."""
    reading = structure.reading
    advice = "; where the state fits in memory, an audit decides"
    if case.hidden:
        names = ", ".join(string_text(*mask) for mask in case.hidden[:4])
        return f"strings that the Hamiltonian lacks turn forth and back ({names}), as in a change of basis{advice}"
    if period := _turned_through(case.sheet):
        return f"the angle totals agree with c·t only modulo {period}, so that several circuits would look like this{advice}"
    if reading.cost >= 2 and _random_sample(case):
        return (
            "the circuit looks like one random sample (equal angles, counts like drawn ones); only the average over "
            f"samples follows exp(-iHt){advice}"
        )
    if len(reading.groups) > MOST_MISTAKES:
        return (
            f"the angle totals differ in {sum(len(g.found or g.wanted) for g in reading.groups)} strings in no common "
            f"way: blocks resynthesised beyond recognition, or a circuit for something else{advice}"
        )
    if case.residual and (reading.groups or reading.kind != "given" or reading.factor != 1.0):
        return (
            f"Clifford gates are left over ({', '.join(case.residual[:4])} changed), and angle totals are off{advice}"
        )
    if len(reading.groups) > 1 and any(_quarter_turns(case.sheet, group) for group in reading.groups):
        return f"several strings are off, some by quarter turns alone, as in a set of native gates{advice}"
    if why := unsupported(structure):
        return f"{why}, so that a right circuit whose blocks were resynthesised could look like this one{advice}"
    return ""


def _quarter_turns(sheet: Sheet, group: Group) -> bool:
    """Whether the totals of a group are multiples of π/4 above zero, as those of Clifford gates are."""
    totals = [sheet.found[mask] for mask in group.found if mask in sheet.found]
    turns = [round(total / QUARTER) for total in totals]
    return any(
        turn != 0 and abs(total - turn * QUARTER) <= SOME * abs(total)
        for total, turn in zip(totals, turns, strict=True)
    )


def _turned_through(sheet: Sheet) -> str:
    """Give the period modulo which every total that is off agrees: "π", or "π/2", or nothing.

    A turn by π is -1. Turns by π/2 are the strings themselves: where their product is the identity, they can be drawn
    together through the circuit and vanish, and change signs of what they pass.
    """
    off, whole, drawn = False, True, []
    for mask in {**sheet.found, **sheet.wanted}:
        found, wanted = sheet.found.get(mask, 0.0), sheet.wanted.get(mask, 0.0)
        allowed = sheet.allowed(mask) + 4 * UNIT * abs(found)
        if abs(found - wanted) <= allowed:
            continue
        off = True
        turns = [_half_turns(found - sign * wanted, allowed) for sign in (1.0, -1.0)]
        fits = [turn for turn in turns if turn is not None]
        if not fits:
            return ""
        whole = whole and turns[0] is not None and turns[0] % 2 == 0
        if fits[0] % 2:
            drawn.append(mask)
    if off and whole:
        return "π"
    product = reduce(lambda one, two: (one[0] ^ two[0], one[1] ^ two[1]), drawn, (0, 0))
    return "π/2" if drawn and product == (0, 0) else ""


def _half_turns(angle: float, allowed: float) -> int | None:
    """Count the turns by π/2 that an angle is; None where it is no whole number of them."""
    turns = round(2.0 * angle / math.pi)
    return turns if abs(angle - turns * math.pi / 2.0) <= allowed else None


def _random_sample(case: Case) -> bool:
    """Whether angles and counts are those of rotations drawn with chances |c| and equal angles.

    Then Σ|θ| is Σ|c t| exactly, every sign is right, every angle is a multiple of one, and the counts lie within six
    standard deviations of χ².
    """
    sheet, unfolded = case.sheet, case.unfolded
    whole = sum(abs(value) for value in sheet.wanted.values())
    if not whole or any(
        mask not in sheet.wanted or total * sheet.wanted[mask] < 0 for mask, total in sheet.found.items()
    ):
        return False
    if abs(float(unfolded.sizes.sum()) - whole) > max(sheet.tolerance, 1e-12) * whole:
        return False
    angles = np.abs(unfolded.word.angles)
    unit = float(angles.min())
    multiples = angles / unit
    if np.any(np.abs(multiples - np.rint(multiples)) > 1e-6 * multiples):
        return False
    draws = whole / unit
    chances = np.array([abs(value) / whole for value in sheet.wanted.values()])
    counts = np.array([abs(sheet.found.get(mask, 0.0)) / unit for mask in sheet.wanted])
    freedom = len(chances) - 1
    chi_squared = float(np.sum((counts - draws * chances) ** 2 / (draws * chances)))
    return chi_squared <= freedom + 6.0 * math.sqrt(2.0 * max(freedom, 1))
