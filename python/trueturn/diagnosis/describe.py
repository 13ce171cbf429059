"""Name the mistakes, and make the mended circuits.

Mistakes that touch every rotation of a string alike are mended where they stand, so that all else stays as it is.
Where the place of a rotation matters (a term that is missing, a seam merged wrongly, another number of steps), the
circuit is built again from the formula, the number of steps and the order that the sound strings show.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from trueturn.audit.figures import plain
from trueturn.diagnosis.case import Case
from trueturn.diagnosis.readings import Reading
from trueturn.diagnosis.result import Finding
from trueturn.diagnosis.structure import Hamiltonian, Plan, Structure
from trueturn.diagnosis.totals import Group, letter_pairs, support
from trueturn.diagnosis.unfolding import Mask, edited
from trueturn.partition_rules import string_text
from trueturn.rotations import Rotations

__all__ = ["Describer"]

SHOWN = 4
WHOLE = 1e-6
UNKNOWN = "The circuit does not show where the rotations belong; build it again from the Hamiltonian."


class Describer:
    """Name the mistakes of a circuit whose totals are off.

    Parameters
    ----------
    case : Case
    structure : Structure
        Of the case, under the reading chosen.
    rivals : sequence of Reading
        Others that fit as well.
    time : float
    """

    def __init__(self, case: Case, structure: Structure, rivals: Sequence[Reading], time: float) -> None:
        self.rotations = case.rotations
        self.sheet = case.sheet
        self.structure = structure
        self.hamiltonian: Hamiltonian = structure.hamiltonian
        self.reading: Reading = structure.reading
        self.rivals = rivals
        self.time = time
        self.residual = case.residual
        self.plan: Plan | None = structure.plans[0] if structure.plans else None
        self.string_of = {mask: string for string, mask in enumerate(structure.masks)}
        self.totals: list[float] = case.unfolded.totals.tolist()
        self.phase = 0.0 - self.hamiltonian.operator.identity_coefficient * time

    def findings(self) -> list[Finding]:
        """Global mistakes first, then those of single strings; each with the circuit mended so far."""
        reading = self.reading
        found: list[Finding] = []
        rebuilt = self._rebuilt() if self._needs_rebuilding() else None
        if self.residual:
            found.append(self._residual_clifford())
        if reading.kind != "given":
            found.append(self._relabelled(self._edited((), scale=False)))
        if reading.factor != 1.0:
            found.append(self._scaled(self._edited((), scale=True)))
        done: list[Group] = []
        for group in reading.groups:
            done.append(group)
            mended = rebuilt if self._needs_rebuilding() else self._edited(done, scale=True)
            found.append(self._of_group(group, mended))
        return found

    # --- circuits

    def _needs_rebuilding(self) -> bool:
        return self._steps_wrong() or any(self._irregular(group) for group in self.reading.groups)

    def _irregular(self, group: Group) -> bool:
        """Whether a group cannot be mended where its rotations stand."""
        if group.kind == "missing":
            return True
        if group.kind in ("letters", "place"):
            return any(mask in self.sheet.wanted for mask in group.found)
        return group.kind == "factor" and self.structure.uneven(group)

    def _rebuilt(self) -> Rotations | None:
        if self.plan is None:
            return None
        factor = self.reading.factor
        steps = self.plan.steps / factor if self._steps_wrong() else self.plan.steps
        return self.plan.circuit(self.hamiltonian, self.time, round(steps))

    def _edited(self, groups: Sequence[Group], scale: bool) -> Rotations:
        """Mend where things stand: labels, the common factor, and some groups."""
        factor = self.reading.factor if scale else 1.0
        rewritten: dict[Mask, tuple[Mask, float] | None] = {}
        for group in groups:
            for place, mask in enumerate(group.found):
                if group.kind == "extra":
                    rewritten[mask] = None
                elif group.kind == "factor":
                    total = self.sheet.wanted[mask] * factor
                    rewritten[mask] = (mask, total / self._total(mask))
                else:
                    rewritten[mask] = (group.wanted[place], group.factor)

        def change(mask: Mask) -> tuple[Mask, float] | None:
            mask = self.reading.mask(mask)
            new = rewritten.get(mask, (mask, 1.0))
            return None if new is None else (new[0], new[1] / factor)

        return edited(self.rotations, change, self.phase)

    def _total(self, mask: Mask) -> float:
        string = self.string_of.get(mask)
        return 0.0 if string is None else self.totals[string]

    # --- what is wrong everywhere

    def _residual_clifford(self) -> Finding:
        return Finding(
            kind="residual Clifford",
            mistake=True,
            text="Clifford gates are left over: a basis change is not undone.",
            evidence=(f"the product of the Clifford gates changes {_listed(self.residual)}",),
            change="Undo the basis change at the end; here the Clifford gates are taken out.",
            fixed=self._edited((), scale=False),
        )

    def _relabelled(self, mended: Rotations) -> Finding:
        kind, text, fact, change = _reading_words(self.reading, self.rotations.qubits)
        off = sum(mask not in self.sheet.wanted for mask in self.sheet.found)
        others = tuple(
            (_reading_words(rival, self.rotations.qubits)[3], edited(self.rotations, _renaming(rival), self.phase))
            for rival in self.rivals[:SHOWN]
            if rival.kind != "given" and rival.factor == 1.0 and not rival.groups
        )
        evidence = (f"{off} of {len(self.sheet.found)} strings are not in the Hamiltonian as they stand", fact)
        return Finding(kind, True, text, evidence, change, mended, alternatives=others, certain=not self.rivals)

    def _steps_wrong(self) -> bool:
        """Whether the common factor reads as a number of steps: a whole one, and no plain factor of two."""
        return self._meant_steps() is not None and not _near_any(self.reading.factor, (2.0, 0.5))

    def _meant_steps(self) -> int | None:
        factor = self.reading.factor
        if self.plan is None or factor <= 0 or factor == 1.0:
            return None
        steps = self.plan.steps / factor
        whole = round(steps)
        return whole if whole >= 1 and abs(steps - whole) <= WHOLE * steps else None

    def _scaled(self, mended: Rotations) -> Finding:
        factor = self.reading.factor
        common = len(self.sheet.wanted) - sum(len(g.wanted or g.found) for g in self.reading.groups)
        evidence = (f"the totals of {common} strings are {shown(factor)} times c·t",)
        steps = self._meant_steps()
        alternatives: tuple[tuple[str, Rotations], ...] = ()
        if self.plan is not None and steps is not None:
            circuit = self.plan.circuit(self.hamiltonian, self.time, steps)
            if self._steps_wrong():
                return Finding(
                    "steps",
                    True,
                    f"The circuit runs {counted(self.plan.steps)} where {steps} of this size reach the time.",
                    (*evidence, f"a step takes {shown(self.time / steps)}"),
                    f"Run {counted(steps)}.",
                    circuit,
                    alternatives=((f"scale all angles by {shown(1 / factor)}", mended),),
                )
            alternatives = ((f"run {counted(steps)} instead of {self.plan.steps}", circuit),)
        if _near_any(factor, (2.0,)):
            what = (
                "angles doubled",
                "All angles are doubled (a rotation is exp(-i θ P); rz(φ) is θ = φ/2).",
                "Halve them.",
            )
        elif _near_any(factor, (0.5,)):
            what = (
                "angles halved",
                "All angles are halved (a rotation is exp(-i θ P); rz(φ) is θ = φ/2).",
                "Double them.",
            )
        elif _near_any(factor, (-1.0,)):
            what = ("time reversed", "The circuit runs backwards in time.", "Change the sign of all angles.")
        else:
            text = f"All angles are {shown(factor)} times what they should be."
            what = ("angles scaled", text, f"Multiply all angles by {shown(1 / factor)}, or check the time.")
        return Finding(
            what[0], True, what[1], evidence, what[2], mended, alternatives=alternatives, certain=not alternatives
        )

    # --- what is wrong with some strings

    def _of_group(self, group: Group, mended: Rotations | None) -> Finding:
        strings = tuple(_text(mask) for mask in (group.wanted or group.found))
        kind, text, change = self._words(group)
        irregular = self._irregular(group)
        facts = tuple(self._fact(mask) for mask in dict.fromkeys((*group.wanted, *group.found)))
        evidence = facts[:SHOWN] + ((f"and {len(facts) - SHOWN} more alike",) if len(facts) > SHOWN else ())
        if irregular and self.plan is not None:
            rule = f" in the order of {self.plan.rule!r}" if self.plan.rule else ""
            name = self.plan.model.method.name
            evidence += (f"the other strings run as {name} in {counted(self.plan.steps)}{rule}",)
        others = () if mended is None else self._other_formulas(group) or self._other_places(group)
        repeated = group.kind == "factor" and abs(group.factor - 2.0) <= WHOLE  # which of the two should stay?
        placed = (group.kind in ("missing", "letters", "place") or repeated) and irregular
        guessed = placed and self.plan is not None and not self.plan.given
        if guessed and mended is not None:
            change += " No rule gives this order of parts, so the place is a guess."
        return Finding(
            kind,
            True,
            text,
            evidence,
            change if mended is not None else UNKNOWN,
            mended,
            strings,
            others,
            certain=not (others or guessed),
        )

    def _words(self, group: Group) -> tuple[str, str, str]:
        names = _listed([_text(mask) for mask in (group.wanted or group.found)])
        if group.kind == "missing":
            if self._at_the_boundary(group):
                return "boundary bond lost", f"The bond that closes the lattice is lost: {names}.", "Add it."
            return "term missing", f"Missing: {names}.", "Add the rotations."
        if group.kind == "extra":
            return "term extra", f"Not in the Hamiltonian: {names}.", "Take the rotations out."
        if group.kind == "letters":
            changes = ", ".join(
                f"{pair[0]} as {pair[1]}" for pair in sorted(letter_pairs(group.wanted[0], group.found[0]))
            )
            text = f"{names} written with other letters ({changes}): a basis change is wrong."
            return "term letters", text, "Mend the basis change."
        if group.kind == "place":
            return "term misplaced", f"{names} acts on {_text(group.found[0])} instead.", "Move it to its qubits."
        factor = group.factor
        if self._irregular(group):
            if abs(factor - 2.0) <= WHOLE and len(group.found) == 1:
                return "term repeated", f"{names} appears twice in every step.", "Take one of the two out."
            if self._at_seams(group):
                text = f"Half-steps of {names} are merged wrongly: the total is {shown(factor)} times c·t."
                return "half-steps merged wrongly", text, "Merge equal neighbours by adding their angles."
            text = f"{names} turns by a wrong angle in some places: the total is {shown(factor)} times c·t."
            return "rotation wrong in places", text, "Put the rotations of every step alike."
        if abs(factor - 2.0) <= WHOLE:
            return "term repeated", f"{names} acts twice as long as it should.", "Take the repetition out."
        if abs(factor + 1.0) <= WHOLE:
            return "term sign", f"{names} has the wrong sign.", "Change the sign of its angles."
        text = f"{names} has the wrong strength: {shown(factor)} times that of the Hamiltonian."
        return "term strength", text, f"Multiply its angles by {shown(1 / factor)}."

    def _fact(self, mask: Mask) -> str:
        wanted = self.sheet.wanted.get(mask, 0.0)
        return f"{_text(mask)}: total {shown(self._total(mask))}, where c·t is {shown(wanted)}"

    def _at_seams(self, group: Group) -> bool:
        """Whether all strings of the group stand at an end of the order, where half-steps meet."""
        assert self.plan is not None
        order, neighbours = self.plan.order, self.hamiltonian.neighbours
        ranks = {term: rank for rank, term in enumerate(order)}
        for mask in group.wanted:
            term = self.hamiltonian.numbers[mask]
            sides = {ranks[int(other)] > ranks[term] for other in neighbours[term]}
            if len(sides) != 1:
                return False
        return True

    def _at_the_boundary(self, group: Group) -> bool:
        """Whether the strings missing span farther than the other bonds: those that close a ring or a torus."""
        spans = sorted(_span(mask) for mask in self.sheet.wanted if _span(mask))
        lost = [_span(mask) for mask in group.wanted]
        return bool(spans) and len(set(lost)) == 1 and lost[0] > max(1, spans[len(spans) // 2])

    def _other_formulas(self, group: Group) -> tuple[tuple[str, Rotations], ...]:
        """Circuits of other formulas or step counts from which the same strings are off by one number as well."""
        if group.kind != "factor" or self.plan is None or self._steps_wrong():
            return ()
        seen = {(self.plan.model.method.name, self.plan.steps)}
        found = []
        for plan in self.structure.plans:
            key = name, steps = plan.model.method.name, plan.steps
            if key not in seen and all(self.structure.one_number(plan, one) for one in self.structure.damaged):
                seen.add(key)
                found.append((f"build {name} in {counted(steps)}", plan.circuit(self.hamiltonian, self.time)))
        return tuple(found[:SHOWN])

    def _other_places(self, group: Group) -> tuple[tuple[str, Rotations], ...]:
        """Circuits with missing strings elsewhere, where another rule fits as well."""
        if self.plan is None or group.kind not in ("missing", "letters", "place"):
            return ()
        seen = [self.plan.order]
        found = []
        for plan in self.structure.plans:
            fits = plan.given == self.plan.given and plan.unexplained == self.plan.unexplained
            if fits and not any(self.hamiltonian.rules.same(plan.order, order) for order in seen):
                seen.append(plan.order)
                circuit = plan.circuit(self.hamiltonian, self.time)
                found.append((f"put it where the rule {plan.rule!r} has it", circuit))
        return tuple(found)


def _renaming(reading: Reading) -> Callable[[Mask], tuple[Mask, float]]:
    return lambda mask: (reading.mask(mask), 1.0)


def _reading_words(reading: Reading, qubits: int) -> tuple[str, str, str, str]:
    """Word a reading: kind, what is wrong, evidence, change."""
    if reading.kind == "reversed":
        return (
            "qubits reversed",
            "The qubits are numbered in reverse order.",
            "with qubit q read as qubit n-1-q the angle totals fit",
            "Reverse the order of the qubits.",
        )
    if reading.kind == "permuted":
        moved = ", ".join(f"{q}→{name}" for q, name in enumerate(reading.names) if q != name)
        fact = f"with qubits read as {moved} the angle totals fit"
        return "qubits permuted", "The qubits are permuted.", fact, f"Rename the qubits: {moved}."
    letters = reading.exchange
    turned = " and ".join(letters) if len(letters) == 2 else "→".join((*letters, letters[0]))
    where = ", ".join(map(str, _qubits(reading.where)))
    on = "on every qubit" if reading.where.bit_count() == qubits else f"on qubit {where}"
    return (
        "letters exchanged",
        f"{turned} are exchanged {on}: a basis change is wrong.",
        "with the letters exchanged back the angle totals fit",
        f"Exchange {turned} {on}.",
    )


def counted(steps: int) -> str:
    """Write a number of steps."""
    return "1 step" if steps == 1 else f"{steps} steps"


def shown(value: float) -> str:
    """Write a number to eight digits, or as shortly as these can be read back."""
    return plain(float(f"{value:.8g}"))


def _near_any(value: float, targets: Sequence[float]) -> bool:
    return any(abs(value - target) <= WHOLE * abs(target) for target in targets)


def _text(mask: Mask) -> str:
    return string_text(*mask) or "1"


def _listed(names: Sequence[str]) -> str:
    more = f" and {len(names) - SHOWN} more" if len(names) > SHOWN else ""
    return ", ".join(names[:SHOWN]) + more


def _qubits(mask: int) -> list[int]:
    return [qubit for qubit in range(mask.bit_length()) if mask >> qubit & 1]


def _span(mask: Mask) -> int:
    qubits = _qubits(support(mask))
    return qubits[-1] - qubits[0] if len(qubits) > 1 else 0
