"""One way to write a circuit down, as it is or with its Clifford gates at the end: totals, and how to read them."""

from __future__ import annotations

from dataclasses import dataclass, replace

from trueturn.diagnosis.frames import MOST as MOST_MOVED
from trueturn.diagnosis.frames import moved_to_the_end
from trueturn.diagnosis.ordering import clashes, settle
from trueturn.diagnosis.readings import Reading, readings
from trueturn.diagnosis.structure import MOST_STRINGS, Hamiltonian
from trueturn.diagnosis.totals import Sheet
from trueturn.diagnosis.unfolding import Mask, Unfolded, edited, unfold
from trueturn.rotations import Rotations

__all__ = ["UNIT", "Case", "as_it_is", "best_case", "sheet_of"]

UNIT = 2.0**-53


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


def best_case(rotations: Rotations, hamiltonian: Hamiltonian, time: float, tolerance: float) -> Case:
    """Take the circuit as it is, or with its Clifford gates moved to the end where that leaves less to explain."""
    frame = rotations.frame  # circuits read from a file may end in one
    framed = frame.count > 0
    moved_qubits = any(q != to for q, to in enumerate(rotations.relabelling))
    plain = edited(rotations, as_it_is, rotations.phase) if framed or moved_qubits else rotations
    case = _case(plain, hamiltonian, time, tolerance)
    if framed:
        left = moved_to_the_end(frame)
        if left is not None:
            case = replace(case, residual=left.residual, relabelled=left.relabelled)
            plain = plain + edited(frame, as_it_is, frame.phase)
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


def as_it_is(mask: Mask) -> tuple[Mask, float]:
    return mask, 1.0


def _case(rotations: Rotations, hamiltonian: Hamiltonian, time: float, tolerance: float) -> Case:
    unfolded = unfold(rotations)
    sheet = sheet_of(unfolded, hamiltonian, time, tolerance)
    return Case(
        rotations, unfolded, sheet, tuple(readings(sheet, rotations.qubits)), _hidden(unfolded, sheet, rotations)
    )


def sheet_of(unfolded: Unfolded, hamiltonian: Hamiltonian, time: float, tolerance: float) -> Sheet:
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
