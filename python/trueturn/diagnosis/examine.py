"""From a circuit and a Hamiltonian to a diagnosis."""

from __future__ import annotations

from trueturn.diagnosis.case import Case, as_it_is, best_case, sheet_of
from trueturn.diagnosis.describe import Describer
from trueturn.diagnosis.doubts import undetermined
from trueturn.diagnosis.frames import moved_to_the_end
from trueturn.diagnosis.readings import Reading
from trueturn.diagnosis.remarks import character_of, remarks_on
from trueturn.diagnosis.result import Diagnosis, Finding
from trueturn.diagnosis.slips import slip_place, turned_behind
from trueturn.diagnosis.structure import Hamiltonian, Structure
from trueturn.diagnosis.totals import Sheet
from trueturn.diagnosis.unfolding import edited, unfold
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["examine"]

RIVAL = 0.1
"""Readings whose doubt differs by less are not told apart."""


def examine(rotations: Rotations, operator: Operator, time: float, tolerance: float) -> Diagnosis:
    """Diagnose; the arguments are checked already."""
    hamiltonian = Hamiltonian(operator)
    case = best_case(rotations, hamiltonian, time, tolerance)
    structure, rivals = _chosen(case, hamiltonian)
    remarks = remarks_on(case, structure, rotations, hamiltonian, time)
    reason = undetermined(case, structure) if case.cost else ""
    mistakes: list[Finding] = []
    if case.cost and not reason:
        mistakes = Describer(case, structure, rivals, time).findings()
    if reason and (slip := _slip(rotations, hamiltonian, time, tolerance)) is not None:
        mistakes, reason, remarks = [slip], "", []
    return Diagnosis(
        matches=None if reason else not mistakes,
        findings=(*mistakes, *remarks),
        character=character_of(structure, bool(reason)),
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
        plain = edited(rotations, as_it_is, rotations.phase) + edited(frame, as_it_is, 0.0)
    moved = moved_to_the_end(plain)
    if moved is None or not (moved.residual or moved.relabelled):
        return None
    unfolded = unfold(moved.rotations)
    sheet = sheet_of(unfolded, hamiltonian, time, tolerance)
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


def _deviation(sheet: Sheet) -> float:
    strings = {**sheet.found, **sheet.wanted}
    return max((abs(sheet.found.get(mask, 0.0) - sheet.wanted.get(mask, 0.0)) for mask in strings), default=0.0)
