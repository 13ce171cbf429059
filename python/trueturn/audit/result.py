"""What an audit found: one frozen record a candidate, and the whole."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from trueturn.audit.base_candidate import BaseCandidate
    from trueturn.circuits.counts import GateCounts
    from trueturn.operator import Operator
    from trueturn.reference import Reference

__all__ = ["Audit", "PointError", "Row", "Trial"]

Interval = tuple[float, float]


@dataclass(frozen=True)
class PointError:
    """The error of one figure at one time.

    `name` is the observable, ``"state"`` or ``"operator"``. `value` is what the candidate gives and `reference` what the
    reference gives (both ``nan`` for the latter two, which have no single value); `error` is the interval that holds the
    true error.
    """

    time: float
    name: str
    value: float
    reference: float
    error: Interval


@dataclass(frozen=True)
class Trial:
    """One step count that was run: the largest error over times and observables, and what it costs (None: not known)."""

    steps: int
    error: Interval
    verdict: str
    two_qubit_gates: int | None


@dataclass(frozen=True)
class Row:
    """One candidate of an audit.

    Attributes
    ----------
    candidate : Candidate, or what `Candidate.from_rotations` and `Candidate.from_callable` make
    label : str
        Formula and partition rule, for tables: ``"strang, commuting"``; or the name of a circuit or an implementation.
    steps : int
        Steps to the last time (``readout="along"``) or to each time (``"separate"``). Where ``least`` was asked and
        no step count within the limit met the tolerance, the largest that was tried.
    error : (float, float)
        Interval that holds the true error: the largest over the requested times and observables.
    bound : float or None
        Proven upper bound on the same error, or None where no theorem at hand covers the formula.
    bound_source : str
        Theorem and paper of `bound`, or why there is none.
    rotations, two_qubit_gates, depth : int or None
        Cost of the circuits of this candidate: rotations after merging, 2(w-1) two-qubit gates for a rotation of
        weight w, and depth in two-qubit gates. For ``readout="separate"`` the cost of the longest circuit. None for an
        implementation of the user's, whose circuit is not known. Gates and depth of a circuit that was read from a file are
        those of the file, and None where it has gates on more than two qubits.
    verdict : "meets", "misses" or "undecided"
    rounding : float
        Bound on the 2-norm error that rounding added to the candidate's state, included in `error`. 0 for an
        implementation of the user's: its rounding is part of what is judged.
    points : tuple of PointError
        Every figure at every requested time, at `steps`.
    trials : tuple of Trial
        Every step count that was run, ascending.
    accidental : tuple of int
        Step counts below `steps` that met the tolerance although a larger tested one missed it.
    note : str
        Anything the reader must know about this row; may be empty.
    gate_counts : GateCounts or None
        All gates of the file that the circuit was read from.
    """

    candidate: BaseCandidate
    label: str
    steps: int
    error: Interval
    bound: float | None
    bound_source: str
    rotations: int | None
    two_qubit_gates: int | None
    depth: int | None
    verdict: str
    rounding: float
    points: tuple[PointError, ...]
    trials: tuple[Trial, ...]
    accidental: tuple[int, ...] = ()
    note: str = ""
    gate_counts: GateCounts | None = None


@dataclass(frozen=True)
class Audit:
    """The table of candidates against a certified reference.

    Attributes
    ----------
    rows : tuple of Row
        In the order of the candidates.
    recommended : Row or None
        The row that meets the tolerance with the fewest two-qubit gates; None where no row meets it.
    reason : str
        Why, in one sentence.
    verdict : str
        ``"meets"`` where some row does; else ``"undecided"`` where some row is; else ``"misses"``.
    reference : Reference
    quantity : "observables", "state" or "operator"
    tolerance : float
    relative_to : None or "norm"
    times : tuple of float
    readout : "along" or "separate"
    observables : mapping of str to Operator
    operator : Operator
    start : str
        The start state in words.
    title : str
    energy_unit : str
        Label only; may be empty.
    assumptions, proven, measured, cautions : tuple of str
        Sentences for the reader: what was taken as given, what is proven, what only measured, what to mind.
    seconds : mapping of str to float
        Wall time by stage.
    """

    rows: tuple[Row, ...]
    recommended: Row | None
    reason: str
    verdict: str
    reference: Reference
    quantity: str
    tolerance: float
    relative_to: str | None
    times: tuple[float, ...]
    readout: str
    observables: Mapping[str, Operator]
    operator: Operator
    start: str
    title: str
    energy_unit: str
    assumptions: tuple[str, ...]
    proven: tuple[str, ...]
    measured: tuple[str, ...]
    cautions: tuple[str, ...]
    seconds: Mapping[str, float]

    def write(self, folder: str | Path) -> Path:
        """Write report.html, audit.json and audit.csv into a folder and return its path.

        The folder is written under a temporary name and renamed when complete. An existing folder is replaced only
        if it is an audit folder (it holds audit.json) or empty.
        """
        from trueturn.audit.report import write_folder

        return write_folder(self, Path(folder))

    def to_dict(self) -> dict[str, Any]:
        """Give everything that the report shows as plain numbers, texts, lists and mappings (audit.json)."""
        from trueturn.audit.report import to_dict

        return to_dict(self)

    def __repr__(self) -> str:
        from trueturn.audit.report import plain_table

        return plain_table(self)
