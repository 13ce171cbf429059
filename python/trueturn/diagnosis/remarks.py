"""What is worth knowing about a circuit besides mistakes: remarks, and its character."""

from __future__ import annotations

import math

from trueturn.diagnosis.case import Case
from trueturn.diagnosis.frames import SLACK
from trueturn.diagnosis.result import Character, Finding
from trueturn.diagnosis.structure import STILL, Hamiltonian, Plan, Structure
from trueturn.formulas import formula
from trueturn.rotations import Rotations

__all__ = ["character_of", "remarks_on"]

SOME = 1e-9


def remarks_on(
    case: Case, structure: Structure, rotations: Rotations, hamiltonian: Hamiltonian, time: float
) -> list[Finding]:
    """Say what does not make the circuit wrong, yet is worth knowing."""
    remarks: list[Finding] = []
    if case.cost:
        return remarks
    plan = structure.plans[0] if structure.plans else None
    merged = plan.circuit(hamiltonian, time) if plan is not None else None
    saved = int(case.unfolded.counts.sum()) - merged.count if merged is not None else 0
    if merged is not None and saved > 0:
        text = "Equal strings meet without being merged; the circuit is right, and longer than needed."
        fact = f"{rotations.count} rotations, {merged.count} once merged"
        remarks.append(_remark("half-steps not merged", text, fact, f"Merge them and save {saved} rotations.", merged))
    moves = list(case.relabelled)
    moves += [(q, to) for q, to in enumerate(rotations.relabelling) if q != to]
    if moves:
        text = "The circuit ends with its qubits relabelled, as routing leaves them."
        fact = f"at the end, qubits are elsewhere: {', '.join(f'{old} on {new}' for old, new in moves)}"
        change = "Read the qubits where they are, or state the layout at the end (end_layout)."
        remarks.append(_remark("qubits relabelled", text, fact, change, case.rotations))
    phase = 0.0 - hamiltonian.operator.identity_coefficient * time
    found = case.unfolded.phase + case.moved_phase
    off = math.remainder(found - phase, 2 * math.pi)
    # Each moved gate may have been off by SLACK.
    if abs(off) > SOME * max(1.0, abs(phase)) + SLACK * case.moved and not moves:
        text = "The global phase is not that of exp(-iHt); no measurement can tell."
        fact = f"phase {found!r}, where the identity of the Hamiltonian gives {phase!r}"
        remarks.append(_remark("global phase", text, fact, f"Set the phase to {phase!r}.", None))
    return remarks


def _remark(kind: str, text: str, fact: str, change: str, fixed: Rotations | None) -> Finding:
    return Finding(kind, False, text, (fact,), change, fixed)


def character_of(structure: Structure, doubtful: bool) -> Character:
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
