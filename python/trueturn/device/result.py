"""What a budget found: the shares of the error of each candidate, and when a higher order wins."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from trueturn.audit.figures import interval

if TYPE_CHECKING:
    from trueturn.audit.candidate import Candidate

__all__ = ["Budget", "Crossover", "Spending"]

Interval = tuple[float, float]


@dataclass(frozen=True)
class Spending:
    """One candidate at the step count that makes its total least.

    Attributes
    ----------
    candidate : Candidate
    label : str
        Formula and partition rule.
    steps : int
    fewest_steps : int or None
        The smallest step count whose total is within the tolerance by the law; None where there is none.
    algorithmic : float
        Error of the formula. By kind: ``"proven"`` a bound; ``"given"`` by the caller; ``"fitted"`` a law fitted to
        measurements at several step counts, or ``"measured"`` the upper end of `measured` where that is larger.
    algorithmic_kind : str
    law : str
        Where the errors at other step counts come from.
    measured : (float, float) or None
        Interval that holds the error at `steps`, where it was measured.
    gates : float
        Share of two-qubit gates: (1 - (1-p)^G) W, proven under the model of independent stochastic failures.
    synthesis : float
        W times the synthesis error; 0 where rotations are native.
    shots : float
        Statistical share at the confidence of the budget; 0 where no number of shots is given.
    total : float
        Their sum, all but the shots capped at W: no two expectations differ by more.
    two_qubit_gates, gates_in_cone : int
        Of the whole circuit, and those whose noise can reach the observable.
    t_count : int or None
        T gates in the cone, typical value; None where rotations are native.
    needed_shots : int or None
        The fewest shots that keep the total within the tolerance at `steps`; None where no number does.
    allowed_error : float or None
        The largest two-qubit error rate at which some step count meets the tolerance, all else unchanged; None where
        none does even with perfect gates.
    verdict : "meets" or "misses"
        Whether `total` is within the tolerance. The total is an upper bound under the model, so ``"misses"`` says that
        the budget does not close, not that the true error is surely larger.
    """

    candidate: Candidate
    label: str
    steps: int
    fewest_steps: int | None
    algorithmic: float
    algorithmic_kind: str
    law: str
    measured: Interval | None
    gates: float
    synthesis: float
    shots: float
    total: float
    two_qubit_gates: int
    gates_in_cone: int
    t_count: int | None
    needed_shots: int | None
    allowed_error: float | None
    verdict: str


@dataclass(frozen=True)
class Crossover:
    """The gate quality at which the formula of higher order starts to win.

    Attributes
    ----------
    lower, higher : str
        Labels of the candidates, by order.
    two_qubit_error : float or None
        Below this rate the least total of `higher` is below that of `lower`; above, it is not. None where one of them
        wins at every rate that was tried.
    winner : str or None
        The label that wins throughout, where `two_qubit_error` is None; None where neither beats a guess.
    """

    lower: str
    higher: str
    two_qubit_error: float | None
    winner: str | None

    def __str__(self) -> str:
        if self.two_qubit_error is not None:
            rate = interval(self.two_qubit_error, self.two_qubit_error)
            return f"{self.higher} beats {self.lower} at two-qubit error rates below {rate}."
        if self.winner is None:
            return f"Neither {self.higher} nor {self.lower} is of use at any two-qubit error rate."
        other = self.lower if self.winner == self.higher else self.higher
        return f"{self.winner} is as good as {other} or better at every two-qubit error rate."


@dataclass(frozen=True, repr=False)
class Budget:
    """How the tolerance of one expectation is spent on a real device; made by `device_budget`.

    Attributes
    ----------
    rows : tuple of Spending
        By least total; with perfect gates, by fewest gates among those that meet the tolerance.
    best : Spending
        The first row.
    verdict : "meets" or "misses"
    statement : str
        The answer in plain words.
    crossovers : tuple of Crossover
        For each pair of candidates of neighbouring orders.
    left_out : mapping of str to str
        Candidates without an algorithmic error, with the reason.
    tolerance, time : float
    observable : str
    width : float
        Distance between the largest and the smallest eigenvalue of the observable (proven upper bound).
    two_qubit_error : float
    shot_count : int or None
    synthesis_error : float or None
    confidence : float
        Of the statistical share.
    assumptions : tuple of str
    """

    rows: tuple[Spending, ...]
    verdict: str
    statement: str
    crossovers: tuple[Crossover, ...]
    left_out: Mapping[str, str]
    tolerance: float
    time: float
    observable: str
    width: float
    two_qubit_error: float
    shot_count: int | None
    synthesis_error: float | None
    confidence: float
    assumptions: tuple[str, ...]

    @property
    def best(self) -> Spending:
        """The first row."""
        return self.rows[0]

    def table(self, width: int = 100) -> str:
        """Write the budget as text of at most `width` columns, never fewer than 80."""
        from trueturn.device.table import written

        return written(self, max(80, width))

    def to_dict(self) -> dict[str, Any]:
        """Give everything as plain numbers, texts, lists and mappings."""
        from trueturn.device.table import document

        return document(self)

    def __repr__(self) -> str:
        return self.table()
