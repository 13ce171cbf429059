"""Proven upper bounds on the error of product formulas."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from numbers import Real

from trueturn.accuracy.laws import ANALYTIC, COMMUTATOR, WIDE, Law, laws, left_out
from trueturn.errors import ArgumentError, FormulaError, ToleranceError
from trueturn.formulas import Formula
from trueturn.formulas import formula as known_formula
from trueturn.formulas.arguments import MOST_STEPS, checked_steps, checked_time
from trueturn.formulas.processed import Processed
from trueturn.formulas.structure import require_structure
from trueturn.partition import Partition

__all__ = ["INPUTS", "METHODS", "Bound", "bound", "steps_by_bound"]

TIGHTEST = "tightest"
METHODS = (COMMUTATOR, TIGHTEST, ANALYTIC)
INPUTS = ("worst", "random")

RANDOMISED = {
    "qdrift": "qdrift",
    "permuted": "permuted",
    "random-order": "permuted",
    "directed": "directed",
    "random-direction": "directed",
    "partly": "partly",
}
"""Names of randomised formulas, and what makes them in `trueturn.randomised`."""

FALLING = 1.5
"""Twice the steps leave at most 2^-p ≤ 1/2 of a bound of order p, and all of what the rounding of weights leaves."""


@dataclass(frozen=True)
class Bound:
    """A proven upper bound on the distance between a circuit and exp(-iHt).

    Attributes
    ----------
    value : float
        On ‖S - exp(-iHt)‖ in the spectral norm, or with ``inputs="random"`` on the root mean square of
        ‖(S - exp(-iHt))ψ‖ over random ψ. Not capped: above 2 it says nothing.
    theorem : str
        Which statement of the source.
    source : str
    kind : str
        ``"proven"``.
    method : str
        ``"commutator"`` or ``"analytic"``.
    inputs : str
        ``"worst"`` or ``"random"``.
    route : str
        How the norms in the bound were obtained: ``"dense"``, ``"clusters"``, ``"commuting groups"``, ``"anticommuting
        groups"``, ``"triangle inequality"``, ``"Frobenius norm"``; several are joined by commas. Empty where all
        brackets vanish.
    """

    value: float
    theorem: str
    source: str
    kind: str = "proven"
    method: str = COMMUTATOR
    inputs: str = "worst"
    route: str = ""
    _question: _Asked | None = field(default=None, repr=False, compare=False)

    @property
    def alternatives(self) -> tuple[Bound, ...]:
        """All bounds that apply to the same question and were within reach, smallest first; this one is among them.

        Computed when asked for; see `left_out`.
        """
        if self._question is None:
            return (self,)
        return tuple(sorted(self._question.all_bounds(), key=lambda one: one.value))

    @property
    def left_out(self) -> tuple[str, ...]:
        """Bounds that apply but cost too much to compute, with the reason."""
        return (
            ()
            if self._question is None
            else left_out(self._question.formula, self._question.partition, self._question.effort)
        )


@dataclass(frozen=True)
class _Question:
    """What a bound is asked for."""

    formula: Formula | Processed
    partition: Partition
    time: float
    inputs: str
    effort: float

    def laws(self, method: str) -> tuple[Law, ...]:
        random = self.inputs == "random"
        methods = [COMMUTATOR, WIDE, ANALYTIC] if method == TIGHTEST else [method]
        if random and method == TIGHTEST:
            methods.remove(ANALYTIC)
        return tuple(law for one in methods for law in laws(self.formula, self.partition, random, one, self.effort))

    def error(self, method: str, steps: int) -> float:
        return min(law.error(self.time, steps) for law in self.laws(method))

    def bound(self, law: Law, steps: int) -> Bound:
        return Bound(
            law.error(self.time, steps),
            law.theorem + law.detail(self.time, steps),
            law.source,
            method=law.method,
            inputs=self.inputs,
            route=law.route,
            _question=_Asked(self.formula, self.partition, self.time, self.inputs, self.effort, steps),
        )


@dataclass(frozen=True)
class _Asked(_Question):
    """A question with its number of steps."""

    steps: int

    def all_bounds(self) -> list[Bound]:
        return [self.bound(law, self.steps) for law in self.laws(TIGHTEST)]


def bound(
    formula: Formula | Processed | str,
    partition: Partition,
    time: float,
    steps: int,
    *,
    method: str = COMMUTATOR,
    inputs: str = "worst",
    effort: float = 1.0,
) -> Bound:
    """Return a proven bound on the error of `steps` equal steps of a formula.

    Parameters
    ----------
    formula : Formula, Processed or str
        Any; a text is looked up by `trueturn.formula`.
    partition : Partition
        On up to 128 qubits; nothing of the size of a state is made.
    time : float
    steps : int
        At least 1.
    method : {"commutator", "tightest", "analytic"}, optional
        ``"commutator"``: for lie and strang the published theorems with their exact constants; for others the merged
        nested commutators of `trueturn.accuracy.remainder`. ``"tightest"``: the smallest of all that apply.
        ``"analytic"``: from norms of the parts alone, for comparison; for the worst input only.
    inputs : {"worst", "random"}, optional
        ``"worst"``: the spectral norm of S - exp(-iHt), which no input exceeds. ``"random"``: the root mean square
        over random inputs, ‖S - exp(-iHt)‖_F/√(2^n).
    effort : float, optional
        Share of the usual work, above 0: brackets are cut earlier and norms are looser with less, tighter with more. The
        value is proven all the same, and the same on every machine.

    Returns
    -------
    Bound
        With `Bound.alternatives` for the others.

    Raises
    ------
    FormulaError
        An unknown name, a formula whose structure the partition lacks, or what is no single circuit (randomised
        ensembles have `channel_bound`, which bounds their average).
    ArgumentError
        `partition` is no Partition, `time` not finite, `steps` not a whole number from 1, `method` or `inputs`
        unknown, or `effort` not a positive number.

    Notes
    -----
    With parts A_1 … A_m in time order, G_k = A_{k+1} + … + A_m and r steps:

    - lie: t²/(2r) Σ_k ‖[G_k, A_k]‖ (Proposition 9 of [1]_);
    - strang: t³/(12 r²) Σ_k ‖[G_k, [G_k, A_k]]‖ + t³/(24 r²) Σ_k ‖[A_k, [A_k, G_k]]‖ (Proposition 10 of [1]_; the
      numbers are from memory and differ between printings);
    - others: r times the bound on one step of `trueturn.accuracy.remainder`, which has the leading error in front.

    All hold for every unitarily invariant norm; with ‖·‖_F/√(2^n), exact on sums of strings, they are those for random
    inputs [2]_. Nested brackets come from the Pauli algebra and norms from what `Bound.route` names, so a value is
    an upper bound of the theorem's own. The weights of the formula count as the doubles that they are in the
    expansion; theorems that assume exact order conditions get an allowance for them. Derivations:
    docs/error-bounds.md.

    References
    ----------
    .. [1] A. M. Childs, Y. Su, M. C. Tran, N. Wiebe, S. Zhu, Theory of Trotter error with commutator scaling,
       Phys. Rev. X 11, 011020 (2021).
    .. [2] Q. Zhao, Y. Zhou, A. F. Shaw, T. Li, A. M. Childs, Hamiltonian simulation with random inputs, Phys. Rev.
       Lett. 129, 270502 (2022).

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    >>> found = tt.bound("strang", parts, time=0.1, steps=1)
    >>> round(found.value, 9), found.route
    (0.0005, 'triangle inequality')
    >>> tt.bound("suzuki-4", parts, time=0.1, steps=1).value < 1e-6
    True
    """
    asked, method = _checked(formula, partition, time, method, inputs, effort)
    count = checked_steps(steps)
    law = min(asked.laws(method), key=lambda one: one.error(asked.time, count))
    return asked.bound(law, count)


def steps_by_bound(
    formula: Formula | Processed | str,
    partition: Partition,
    time: float,
    tolerance: float,
    *,
    method: str = COMMUTATOR,
    inputs: str = "worst",
    effort: float = 1.0,
) -> int:
    """Return the smallest number of equal steps whose proven bound is within a tolerance.

    Parameters
    ----------
    formula, partition, time, method, inputs, effort
        As for `bound`.
    tolerance : float
        Above zero, on the same distance.

    Returns
    -------
    int

    Raises
    ------
    FormulaError, ArgumentError
        As for `bound`.
    ToleranceError
        `tolerance` is not a positive number, or no step count reaches it: rounding of the formula's weights alone, or
        2**53 steps, leave more.

    Notes
    -----
    Every bound falls as steps grow, so a bisection finds the count; the norms are computed once.

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    >>> tt.steps_by_bound("strang", parts, time=1.0, tolerance=1e-3)
    23
    """
    return least_steps(formula, partition, time, tolerance, 1.0, method=method, inputs=inputs, effort=effort)


def least_steps(
    formula: Formula | Processed | str,
    partition: Partition,
    time: float,
    tolerance: float,
    per_distance: float,
    *,
    method: str,
    inputs: str = "worst",
    effort: float = 1.0,
) -> int:
    """Do as `steps_by_bound`, where the tolerance is on `per_distance` > 0 times the distance; refusals name that tolerance."""
    asked, method = _checked(formula, partition, time, method, inputs, effort)
    wanted = _checked_tolerance(tolerance)
    limit = wanted / per_distance
    if asked.error(method, MOST_STEPS) > limit:
        raise _unreachable(wanted, per_distance, asked, method)
    low, high = 0, 1
    while asked.error(method, high) > limit:
        low, high = high, min(2 * high, MOST_STEPS)
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if asked.error(method, middle) <= limit else (middle, high)
    return high


def _checked(
    formula: object, partition: object, time: object, method: object, inputs: object, effort: object
) -> tuple[_Question, str]:
    if isinstance(formula, str):
        formula = _named(formula)
    if not isinstance(formula, (Formula, Processed)):
        average = " (an ensemble's own channel_bound() bounds its average)" if hasattr(formula, "channel_bound") else ""
        raise FormulaError(
            f"formula: bounds are not defined for this ({type(formula).__name__}); give a name, a Formula or a "
            f"Processed, for all of which they are{average}",
            name=type(formula).__name__,
            choices=("Formula", "Processed"),
        )
    if not isinstance(partition, Partition):
        raise ArgumentError(
            f"partition: is not a Partition ({partition!r}); make one with Partition.of(operator, rule)",
            argument="partition",
            value=partition,
        )
    for argument, value, choices in (("method", method, METHODS), ("inputs", inputs, INPUTS)):
        if value not in choices:
            raise ArgumentError(
                f"{argument}: unknown ({value!r}); give one of {', '.join(map(repr, choices))}",
                argument=argument,
                value=value,
            )
    if method == ANALYTIC and inputs == "random":
        raise ArgumentError(
            "method: no analytic bound is at hand for random inputs ('analytic'); give 'commutator' or 'tightest'",
            argument="method",
            value=method,
        )
    if not _is_positive(effort):
        raise ArgumentError(
            f"effort: is not a positive number ({effort!r}); give a share of the usual work, such as 0.1",
            argument="effort",
            value=effort,
        )
    if isinstance(formula, Formula):
        require_structure(formula, partition)
    return _Question(formula, partition, checked_time(time), str(inputs), float(effort)), str(method)  # type: ignore[arg-type]


def _checked_tolerance(tolerance: object) -> float:
    if _is_positive(tolerance):
        return float(tolerance)  # type: ignore[arg-type]
    raise ToleranceError(
        f"tolerance: is not a positive number ({tolerance!r}); give one, such as 1e-3",
        tolerance=tolerance,
        achievable=0.0,
    )


def _is_positive(value: object) -> bool:
    """Whether this is a real number above zero whose float is finite."""
    if not isinstance(value, Real) or isinstance(value, bool):
        return False
    try:
        return 0.0 < float(value) < math.inf
    except OverflowError:
        return False


def _named(name: str) -> Formula | Processed:
    """Look a formula up; the names of randomised ones are sent to their channel bounds."""
    maker = RANDOMISED.get(name.strip().lower())
    if maker is not None:
        raise FormulaError(
            f"formula: randomised, so that a bound on one circuit says nothing ({name!r}); bound the average of its circuits "
            f"with trueturn.randomised.{maker}(…).channel_bound()",
            name=name,
            choices=(f"trueturn.randomised.{maker}",),
        )
    return known_formula(name)


def _unreachable(wanted: float, per_distance: float, asked: _Question, method: str) -> ToleranceError:
    """Refuse a tolerance, with the least value of the bound over powers of two of steps and what keeps it there."""
    values = [asked.error(method, 2**power) for power in range(MOST_STEPS.bit_length())]
    least = min(values)
    if least == math.inf:
        why = f"the bound overflows for this time ({asked.time:g}) with any; give a shorter time"
    elif values[-1] < values[-2] / FALLING:
        why = (
            f"with 2**53 steps, the most that there are, the bound is still {per_distance * least:.3g}; ask for more than "
            "that, or give a shorter time"
        )
    else:
        why = (
            f"the weights of the formula are rounded to doubles, which leaves a bound of {per_distance * least:.3g} with any; "
            "ask for more than that"
        )
    return ToleranceError(
        f"tolerance: no step count is proven to reach it ({wanted!r}): {why}",
        tolerance=wanted,
        achievable=per_distance * least,
    )
