"""What a diagnosis says: findings with evidence and a mended circuit, and the character of the circuit."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from trueturn.audit.figures import plain, upper
from trueturn.rotations import Rotations

__all__ = ["Character", "Diagnosis", "Finding"]

SCHEMA = 1


@dataclass(frozen=True)
class Finding:
    """One mistake, or one remark.

    Attributes
    ----------
    kind : str
        Short name: ``"angles doubled"``, ``"term missing"``, …; the list is in docs/broken-circuit.md.
    mistake : bool
        False for a remark: the circuit does what it should, yet there is something to know.
    text : str
        What is wrong, in a sentence.
    evidence : tuple of str
        The numbers behind it.
    change : str
        What to do about it.
    fixed : Rotations or None
        The circuit with this change and those of the findings before it. Findings that can only be mended
        together share one circuit. None where the circuit does not say how to mend it.
    strings : tuple of str
        The Pauli strings concerned, in the Hamiltonian's labels; empty where all are.
    alternatives : tuple of (str, Rotations)
        Other changes that would explain the same evidence.
    certain : bool
        False where the circuit leaves several changes open: `fixed` is the most usual one, `alternatives` are others
        (not all of them where the place of a rotation is open).
    """

    kind: str
    mistake: bool
    text: str
    evidence: tuple[str, ...]
    change: str
    fixed: Rotations | None = field(repr=False)
    strings: tuple[str, ...] = ()
    alternatives: tuple[tuple[str, Rotations], ...] = field(default=(), repr=False)
    certain: bool = True


@dataclass(frozen=True)
class Character:
    """What kind of product formula the circuit is, from the order of its rotations.

    Attributes
    ----------
    formula : str or None
        Name in `trueturn.formulas`; None where none fits.
    steps : int or None
    order : int or None
        Effective order: that of the formula, otherwise 1 where second-order moments are left, and 2, meaning at
        least 2, where there are none. None where all strings commute, or nothing was found out.
    symmetric : bool or None
        Whether the second moments vanish, as they do for circuits that read the same backwards.
    moment : float or None
        Largest second moment |m| of an anticommuting pair, as `trueturn.diagnosis.ordering.order_moments` has it.
    rule : str or None
        A partition rule that the order of the strings agrees with.
    text : str
        The same in a sentence.
    """

    formula: str | None
    steps: int | None
    order: int | None
    symmetric: bool | None
    moment: float | None
    rule: str | None
    text: str


@dataclass(frozen=True)
class Diagnosis:
    """Whether a circuit implements exp(-iHt) by a product formula, and what is wrong where it does not.

    Attributes
    ----------
    matches : bool or None
        True: every angle total is c·t. False: it is not, and `findings` says why. None: the circuit does not
        determine the answer; `reason` says why.
    findings : tuple of Finding
        Mistakes first, then remarks.
    character : Character
    reason : str
        Why nothing can be told; empty otherwise.
    deviation : float
        Largest |Θ - c·t| over the strings, in radians.
    qubits, rotations : int
        Size of the circuit.
    time : float
    """

    matches: bool | None
    findings: tuple[Finding, ...]
    character: Character
    reason: str
    deviation: float
    qubits: int
    rotations: int
    time: float

    def __bool__(self) -> bool:
        """Refuse to be taken as true or false: there are three answers."""
        raise TypeError("ask .matches: True, False or None")

    @property
    def mistakes(self) -> tuple[Finding, ...]:
        """The findings that are mistakes."""
        return tuple(finding for finding in self.findings if finding.mistake)

    @property
    def fixed(self) -> Rotations | None:
        """The circuit with every proposed change; None where there is nothing to change or one is not known."""
        mistakes = self.mistakes
        return mistakes[-1].fixed if mistakes else None

    def to_dict(self) -> dict[str, Any]:
        """Give everything but circuits as plain data, for JSON."""
        return {
            "kind": "trueturn diagnosis",
            "schema": SCHEMA,
            "matches": self.matches,
            "reason": self.reason,
            "qubits": self.qubits,
            "rotations": self.rotations,
            "time": self.time,
            "deviation": self.deviation,
            "character": {
                "formula": self.character.formula,
                "steps": self.character.steps,
                "order": self.character.order,
                "symmetric": self.character.symmetric,
                "moment": self.character.moment,
                "rule": self.character.rule,
                "text": self.character.text,
            },
            "findings": [
                {
                    "kind": finding.kind,
                    "mistake": finding.mistake,
                    "text": finding.text,
                    "evidence": list(finding.evidence),
                    "change": finding.change,
                    "mended": finding.fixed is not None,
                    "certain": finding.certain,
                    "strings": list(finding.strings),
                    "alternatives": [text for text, _ in finding.alternatives],
                }
                for finding in self.findings
            ],
        }

    def __str__(self) -> str:
        marks = {True: "✓ MATCHES", False: "✗ DOES NOT MATCH", None: "? CANNOT TELL"}
        within = upper(self.deviation)
        mistaken = f"angle totals are off by up to {within} rad for t = {plain(self.time)}."
        if {finding.kind for finding in self.mistakes} == {"residual Clifford"}:
            mistaken = "the angle totals are right, and yet the circuit does something else at the end."
        head = {
            True: f"every angle total is c·t for t = {plain(self.time)}, within {within} rad.",
            False: mistaken,
            None: self.reason,
        }
        lines = [f"{marks[self.matches]}  {head[self.matches]}"]
        for finding in self.findings:
            lines += ["", f"{'✗' if finding.mistake else '·'} {finding.text}"]
            lines += [f"    {fact}" for fact in finding.evidence]
            lines += [f"    → {finding.change}" + ("" if finding.certain else " (the likeliest of several that fit)")]
            lines += [f"    or: {text}" for text, _ in finding.alternatives]
        lines += ["", self.character.text]
        return "\n".join(lines)
