"""What a plan found: an audit whose candidates were all searched for, ranked by what they cost."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from trueturn.audit.result import Audit, Interval, Row

__all__ = ["FrontPoint", "Plan", "PlanRow"]


@dataclass(frozen=True, kw_only=True)
class PlanRow(Row):
    """One way to build the circuit, at the least step count that meets the tolerance; a `Row` and more.

    Attributes
    ----------
    rule, ordering : str
        Which partition, and which order of its parts.
    same_as : str
        Label of an earlier row with the same formula and the same parts in the same order, whose runs this row shares; else
        empty.
    costs : mapping of str to float
        ``two_qubit_gates``, ``depth``, ``rotations``, ``t_count`` where a synthesis error was given, ``wall_time``
        (seconds that the simulation of this step count took here), and the user's own.
    trial_costs : tuple of float
        What each of `trials` costs, in the first cost of `Plan.cost`.
    verified : bool
        Whether `steps` is the least as defined: it meets, the count before it misses, and what was tested up to its double
        meets. False where the search was interrupted or given up, or found nothing.
    fitted_order : float or None
        How fast the error falls from `steps` to the largest count that was run: -d log(error) / d log(steps), between
        the upper ends of the intervals. None where that is all rounding.
    bound_steps : int or None
        Least step count that a theorem proves to meet the tolerance, in exact arithmetic; None without one.
    bound_steps_source : str
        The theorem, or why there is no such count.
    overpays : float or None
        `bound_steps` over `steps`.
    noise : float or None
        What failing two-qubit gates may add to the error of an observable, at most, by the model of `trueturn.planning.noise`;
        None without a device that states their rate. Not part of `error` or `verdict`, which are about the ideal circuit.
    room : bool
        Meets, and would with `noise` added to the upper end of its error.
    efficient : bool
        Meets, and no other row that meets is at most as costly in every cost of `Plan.compared` and less so in one.
    """

    rule: str
    ordering: str
    same_as: str
    costs: Mapping[str, float]
    trial_costs: tuple[float, ...]
    verified: bool
    fitted_order: float | None
    bound_steps: int | None
    bound_steps_source: str
    overpays: float | None
    noise: float | None
    room: bool
    efficient: bool


@dataclass(frozen=True)
class FrontPoint:
    """A step count of one row on the front of error and cost.

    `row` is a number in `Plan.rows`; `certain` says that the point stays on the front whatever the true errors are within
    their intervals.
    """

    row: int
    label: str
    steps: int
    cost: float
    error: Interval
    certain: bool


@dataclass(frozen=True, repr=False, kw_only=True)
class Plan(Audit):
    """Ways to build a circuit, ranked; made by `plan`.

    An `Audit` whose rows stand in the order of their rank: those that meet the tolerance by the first of `cost`, ties by the
    others, first those that have room for the noise of the device; then the undecided, then those that miss, by their error.
    `recommended` is the first row where it meets and has room.

    Attributes
    ----------
    rows : tuple of PlanRow
    tolerance : float
        On the whole error: that of the circuit and that of synthesis.
    synthesis_error : float or None
        The part of `tolerance` that is set aside for the synthesis of rotations; rows meet what is left.
    cost : tuple of str
        What rows are ranked by.
    compared : tuple of str
        The costs of which `PlanRow.efficient` speaks: those of `cost` where they are several, else all that do not
        depend on the machine at hand.
    front : tuple of FrontPoint
        All step counts that were run, of all rows, that no other beats: each has a smaller upper end of the error than all that
        cost as much or less (the first of `cost`). Ascending in cost.
    evolutions : int
        How many circuits were run: a formula on one partition with one step count each, none of them twice.
    interrupted : bool
        Whether the search was stopped by Ctrl-C; `unsearched` names the ways that were not begun.
    unsearched : tuple of str
    left_out : mapping of str to str
        Ways that cannot be run, with the reason.
    """

    rows: tuple[PlanRow, ...]
    recommended: PlanRow | None
    synthesis_error: float | None
    cost: tuple[str, ...]
    compared: tuple[str, ...]
    front: tuple[FrontPoint, ...]
    evolutions: int
    interrupted: bool
    unsearched: tuple[str, ...]
    left_out: Mapping[str, str]

    @property
    def allowed(self) -> float:
        """The error that a circuit may have: the tolerance less what is set aside for synthesis."""
        return self.tolerance - (self.synthesis_error or 0.0)

    def write(self, folder: str | Path) -> Path:
        """Write plan.html, plan.json and plan.csv into a folder and return its path.

        The folder is written under a temporary name and renamed when complete. An existing folder is replaced only
        if it is a plan folder (it holds plan.json) or empty.

        Raises
        ------
        ArgumentError
            The folder cannot be replaced or made.
        """
        from trueturn.planning.report import write_folder

        return write_folder(self, Path(folder))

    def to_dict(self) -> dict[str, Any]:
        """Give everything that the report shows as plain numbers, texts, lists and mappings (plan.json)."""
        from trueturn.planning.report import to_dict

        return to_dict(self)

    def __repr__(self) -> str:
        from trueturn.planning.report import plain_table

        return plain_table(self)
