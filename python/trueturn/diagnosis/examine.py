"""From a circuit and a Hamiltonian to a diagnosis."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from trueturn.diagnosis.describe import describe
from trueturn.diagnosis.evidence import unsupported
from trueturn.diagnosis.frames import MOST as MOST_MOVED
from trueturn.diagnosis.frames import QUARTER, SLACK, moved_to_the_end
from trueturn.diagnosis.ordering import clashes, settle
from trueturn.diagnosis.readings import Reading, readings
from trueturn.diagnosis.result import Character, Diagnosis, Finding
from trueturn.diagnosis.slips import slip_place, turned_behind
from trueturn.diagnosis.structure import MOST_STRINGS, STILL, Hamiltonian, Plan, Structure
from trueturn.diagnosis.totals import Group, Sheet
from trueturn.diagnosis.unfolding import Mask, Unfolded, edited, unfold
from trueturn.formulas import formula
from trueturn.operator import Operator
from trueturn.partition_rules import string_text
from trueturn.rotations import Rotations

__all__ = ["examine"]

UNIT = 2.0**-53
MOST_MISTAKES = 3
"""More mistakes than this at once are not a diagnosis but a guess."""
SOME = 1e-9
RIVAL = 0.1
"""Readings whose doubt differs by less are not told apart."""


@dataclass(frozen=True)
class Case:
    """One way to write the circuit down, with its totals and readings."""

    rotations: Rotations
    unfolded: Unfolded
    sheet: Sheet
    readings: tuple[Reading, ...]
    hidden: tuple[Mask, ...] = ()
    residual: tuple[str, ...] = ()
    relabelled: tuple[tuple[int, int], ...] = ()
    moved: int = 0
    moved_phase: float = 0.0

    @property
    def cost(self) -> float:
        """How much there is to explain."""
        return self.readings[0].cost + (1.0 if self.residual else 0.0) + (1.0 if self.hidden else 0.0)


def examine(rotations: Rotations, operator: Operator, time: float, tolerance: float) -> Diagnosis:
    """Diagnose; the arguments are checked already."""
    hamiltonian = Hamiltonian(operator)
    case = _best_case(rotations, hamiltonian, time, tolerance)
    structure, rivals = _chosen(case, hamiltonian)
    remarks = _remarks(case, structure, rotations, hamiltonian, time)
    reason = _undetermined(case, structure) if case.cost else ""
    mistakes: list[Finding] = []
    if case.cost and not reason:
        mistakes = describe(case.rotations, case.unfolded, case.sheet, structure, rivals, time, case.residual)
    if reason and (slip := _slip(rotations, hamiltonian, time, tolerance)) is not None:
        mistakes, reason, remarks = [slip], "", []
    return Diagnosis(
        matches=None if reason else not mistakes,
        findings=(*mistakes, *remarks),
        character=_character(structure, bool(reason)),
        reason=reason,
        deviation=_deviation(case.sheet),
        qubits=rotations.qubits,
        rotations=rotations.count,
        time=time,
    )


def _slip(rotations: Rotations, hamiltonian: Hamiltonian, time: float, tolerance: float) -> Finding | None:
    """Look for one place behind which every string is turned by the Clifford gates left over."""
    frame = rotations.frame
    plain = rotations
    if frame.count:
        plain = edited(rotations, _as_it_is, rotations.phase) + edited(frame, _as_it_is, 0.0)
    moved = moved_to_the_end(plain)
    if moved is None or not (moved.residual or moved.relabelled):
        return None
    unfolded = unfold(moved.rotations)
    sheet = _sheet(unfolded, hamiltonian, time, tolerance)
    images = dict(zip(unfolded.masks, moved.back(unfolded.masks), strict=True))
    place = slip_place(moved.rotations, images, sheet)
    if place is None:
        return None
    left = ", ".join(moved.residual) or "qubits"
    phase = 0.0 - hamiltonian.operator.identity_coefficient * time
    return Finding(
        kind="basis change",
        mistake=True,
        text=f"A Clifford gate is lost or wrong before rotation {place}: from there on every string is turned.",
        evidence=(
            f"the product of the Clifford gates changes {left}",
            f"with the strings from rotation {place} on turned back, all angle totals are c·t",
        ),
        change=f"Mend the basis change before rotation {place} (Clifford gates not counted).",
        fixed=turned_behind(moved.rotations, images, place, phase),
    )


def _best_case(rotations: Rotations, hamiltonian: Hamiltonian, time: float, tolerance: float) -> Case:
    """Take the circuit as it is, or with its Clifford gates moved to the end where that leaves less to explain."""
    frame = rotations.frame  # circuits read from a file may end in one
    framed = frame.count > 0
    moved_qubits = any(q != to for q, to in enumerate(rotations.relabelling))
    plain = edited(rotations, _as_it_is, rotations.phase) if framed or moved_qubits else rotations
    case = _case(plain, hamiltonian, time, tolerance)
    if framed:
        left = moved_to_the_end(frame)
        if left is not None:
            case = replace(case, residual=left.residual, relabelled=left.relabelled)
            plain = plain + edited(frame, _as_it_is, frame.phase)
    merged = _merged(plain) if case.cost else plain
    for source, nearest in ((plain, False), (merged, False), (plain, True), (merged, True)):
        moved = moved_to_the_end(source, nearest) if case.cost else None
        if moved is None:
            continue
        other = _case(moved.rotations, hamiltonian, time, tolerance)
        other = replace(other, residual=moved.residual, relabelled=moved.relabelled, moved=moved.gates)
        if other.cost < case.cost - 0.5 and not (nearest and other.cost):
            case = other if moved.residual or moved.relabelled else replace(other, moved_phase=moved.phase)
    return case


def _merged(rotations: Rotations) -> Rotations:
    """Merge what can merge, so that gates cut in two are seen whole; long circuits stay as they are."""
    if not 0 < rotations.count <= MOST_MOVED:
        return rotations
    unfolded = unfold(rotations)
    settled = settle(unfolded.word, clashes(unfolded.masks, rotations.qubits))
    listed = [
        (place, unfolded.masks[string], angle)
        for string, (places, angles) in enumerate(zip(settled.places, settled.angles, strict=True))
        for place, angle in zip(places.tolist(), angles.tolist(), strict=True)
    ]
    listed.sort()
    x, z = [mask[0] for _, mask, _ in listed], [mask[1] for _, mask, _ in listed]
    return Rotations(x, z, [angle for _, _, angle in listed], rotations.qubits, unfolded.phase)


def _as_it_is(mask: Mask) -> tuple[Mask, float]:
    return mask, 1.0


def _case(rotations: Rotations, hamiltonian: Hamiltonian, time: float, tolerance: float) -> Case:
    unfolded = unfold(rotations)
    sheet = _sheet(unfolded, hamiltonian, time, tolerance)
    return Case(
        rotations, unfolded, sheet, tuple(readings(sheet, rotations.qubits)), _hidden(unfolded, sheet, rotations)
    )


def _sheet(unfolded: Unfolded, hamiltonian: Hamiltonian, time: float, tolerance: float) -> Sheet:
    roundings = (unfolded.counts + 4.0) * UNIT * unfolded.sizes
    return Sheet(
        found=dict(zip(unfolded.masks, unfolded.totals.tolist(), strict=True)),
        wanted={mask: c * time for mask, c in zip(hamiltonian.masks, hamiltonian.coefficients, strict=True)},
        slack=dict(zip(unfolded.masks, roundings.tolist(), strict=True)),
        tolerance=tolerance,
    )


def _hidden(unfolded: Unfolded, sheet: Sheet, rotations: Rotations) -> tuple[Mask, ...]:
    """List strings that the Hamiltonian lacks, whose angles sum to nothing and yet do not cancel where they stand."""
    doubtful = [
        string
        for string, mask in enumerate(unfolded.masks)
        if mask not in sheet.wanted
        and abs(unfolded.totals[string]) <= sheet.allowed(mask) < float(unfolded.sizes[string])
    ]
    if not doubtful or len(unfolded.masks) > MOST_STRINGS:
        return tuple(unfolded.masks[string] for string in doubtful)
    settled = settle(unfolded.word, clashes(unfolded.masks, rotations.qubits))
    return tuple(unfolded.masks[string] for string in doubtful if settled.places[string].size)


def _chosen(case: Case, hamiltonian: Hamiltonian) -> tuple[Structure, list[Reading]]:
    """Choose among readings that leave equally much: the one whose order of rotations is the most usual.

    Returns
    -------
    Structure
    list of Reading
        Others that do as well.
    """
    structures = [Structure(case.unfolded, hamiltonian, reading) for reading in case.readings]
    if len(structures) == 1:
        return structures[0], []

    def doubt(structure: Structure) -> float:
        plan = structure.plans[0] if structure.plans else None
        if plan is None:
            return structure.reading.cost + 0.45
        usual = 0.0 if plan.given else 0.2 if plan.rule else 0.4
        return structure.reading.cost + usual + 0.01 * plan.place + 0.01 * min(plan.unexplained, 10.0)

    ranked = sorted(((doubt(structure), place) for place, structure in enumerate(structures)))
    least = ranked[0][0]
    rivals = [structures[place].reading for value, place in ranked[1:] if value < least + RIVAL]
    return structures[ranked[0][1]], rivals


def _undetermined(case: Case, structure: Structure) -> str:
    """Say why the circuit does not determine the answer; empty where it does."""
    reading = structure.reading
    advice = "; where the state fits in memory, an audit decides"
    if case.hidden:
        names = ", ".join(string_text(*mask) for mask in case.hidden[:4])
        return f"strings that the Hamiltonian lacks turn forth and back ({names}), as in a change of basis{advice}"
    if _only_whole_turns(case.sheet):
        return f"the angle totals agree with c·t only modulo π, so that several circuits would look like this{advice}"
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


def _only_whole_turns(sheet: Sheet) -> bool:
    """Whether every total that is off is off by a multiple of π."""
    off = False
    for mask in {**sheet.found, **sheet.wanted}:
        rest = sheet.found.get(mask, 0.0) - sheet.wanted.get(mask, 0.0)
        if abs(rest) <= sheet.allowed(mask):
            continue
        turns = round(rest / math.pi)
        if not turns or abs(rest - turns * math.pi) > sheet.allowed(mask) + 4 * UNIT * abs(rest):
            return False
        off = True
    return off


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


def _remarks(
    case: Case, structure: Structure, rotations: Rotations, hamiltonian: Hamiltonian, time: float
) -> list[Finding]:
    """Say what does not make the circuit wrong, yet is worth knowing."""
    remarks: list[Finding] = []
    if case.cost:
        return remarks
    plan = structure.plans[0] if structure.plans else None
    if plan is not None:
        merged = plan.circuit(hamiltonian, time)
        if merged.count < case.unfolded.counts.sum():
            saved = int(case.unfolded.counts.sum()) - merged.count
            remarks.append(
                Finding(
                    kind="half-steps not merged",
                    mistake=False,
                    text="Equal strings meet without being merged; the circuit is right, and longer than needed.",
                    evidence=(f"{rotations.count} rotations, {merged.count} once merged",),
                    change=f"Merge them and save {saved} rotations.",
                    fixed=merged,
                )
            )
    moves = list(case.relabelled)
    moves += [(q, to) for q, to in enumerate(rotations.relabelling) if q != to]
    if moves:
        shown = ", ".join(f"{old} on {new}" for old, new in moves)
        remarks.append(
            Finding(
                kind="qubits relabelled",
                mistake=False,
                text="The circuit ends with its qubits relabelled, as routing leaves them.",
                evidence=(f"at the end, qubits are elsewhere: {shown}",),
                change="Read the qubits where they are, or state the layout at the end (end_layout).",
                fixed=case.rotations,
            )
        )
    phase = 0.0 - hamiltonian.operator.identity_coefficient * time
    found = case.unfolded.phase + case.moved_phase
    off = math.remainder(found - phase, 2 * math.pi)
    # Each moved gate may have been off by SLACK.
    if abs(off) > SOME * max(1.0, abs(phase)) + SLACK * case.moved and not moves:
        remarks.append(
            Finding(
                kind="global phase",
                mistake=False,
                text="The global phase is not that of exp(-iHt); no measurement can tell.",
                evidence=(f"phase {found!r}, where the identity of the Hamiltonian gives {phase!r}",),
                change=f"Set the phase to {phase!r}.",
                fixed=None,
            )
        )
    return remarks


def _deviation(sheet: Sheet) -> float:
    strings = {**sheet.found, **sheet.wanted}
    return max((abs(sheet.found.get(mask, 0.0) - sheet.wanted.get(mask, 0.0)) for mask in strings), default=0.0)


def _character(structure: Structure, doubtful: bool) -> Character:
    """Say which formula it is, as far as the order of the rotations shows."""
    if structure.neighbours is None:
        return Character(None, None, None, None, None, None, "Too many strings to compare the order of rotations.")
    if not any(others.size for others in structure.neighbours):
        text = "All strings commute: any order of the rotations is exact."
        return Character(None, None, None, True, 0.0, None, text)
    moments = structure.moments
    largest = float(moments.max()) if moments.size else None
    symmetric = None if largest is None else largest < STILL
    plan = None if doubtful else next(iter(structure.plans), None)
    if plan is None:
        order = None if symmetric is None else 2 if symmetric else 1
        shown = "" if largest is None else f" (largest second moment {largest:.3g})"
        text = "No formula of the library explains the order of the rotations; " + (
            "its second moments vanish, as those of symmetric formulas of order 2 and more do."
            if symmetric
            else f"its second moments do not vanish{shown}: first-order character."
        )
        return Character(None, None, order, symmetric, largest, None, text)
    name = plan.model.method.name
    order = formula(name).order
    rule = plan.rule or None
    where = (
        "" if rule is None else f", strings in the order of {rule!r}" + ("" if plan.given else " with parts reordered")
    )
    text = f"The rotations run as {name} (order {order}) in {_counted(plan)}{where}."
    return Character(name, plan.steps, order, symmetric, largest, rule, text)


def _counted(plan: Plan) -> str:
    return "1 step" if plan.steps == 1 else f"{plan.steps} equal steps"
