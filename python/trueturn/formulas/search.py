"""Formulas of our own: solutions of the order conditions, chosen for their error.

`Formula.search` is the way in. Many seeded starts are solved in doubles; of the solutions, those of least
leading error (or least Σ w²) are kept, and with a target the free parameters are tuned for the caller's own
system. The winner is solved again in decimals, so its digits can be printed and checked.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from decimal import Decimal, localcontext
from fractions import Fraction
from itertools import pairwise
from operator import index
from typing import SupportsIndex

import numpy as np
import numpy.typing as npt

from trueturn.errors import ArgumentError, FormulaError
from trueturn.formulas.base import Direction, Formula, Stage
from trueturn.formulas.search_solve import DIGITS, Problem
from trueturn.formulas.search_target import Target

__all__ = ["FoundFormula", "Provenance", "search"]

LEAST_STAGES = {2: 1, 4: 3, 6: 7, 8: 15}
"""Stages with which real symmetric formulas are known (Yoshida 1990), compositions and splittings alike."""

MOST_STAGES = 40
MOST_STARTS = 100_000
KEPT = 3
DESCENDED = 12
ROAMING = 150

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Provenance:
    """How a formula was found.

    Attributes
    ----------
    kind : {"composition", "splitting"}
    seed, starts : int
        Starts are drawn by Python's `random.Random(seed)`.
    solutions : int
        Distinct solutions met, after descent along the free parameters.
    free_parameters : int
        Unknowns that the order conditions leave open; they are given to six decimals exactly.
    measure : str
        What was made least; also whether tuning for a target was kept.
    residual : Decimal
        The largest miss of any order condition by the printed digits.
    leading_error : float
        Scaled leading error on general operators; see `trueturn.formulas.search_leading`. Times stages**order, so that
        lengths compare at equal cost.
    small_error, large_error : float or None
        Measured errors on the target's instances.
    untuned_small_error, untuned_large_error : float or None
        The same for the formula of least leading error.
    """

    kind: str
    seed: int
    starts: int
    solutions: int
    free_parameters: int
    measure: str
    residual: Decimal
    leading_error: float
    small_error: float | None = None
    large_error: float | None = None
    untuned_small_error: float | None = None
    untuned_large_error: float | None = None


@dataclass(frozen=True, repr=False, kw_only=True)
class FoundFormula(Formula):
    """A formula found by search, with its digits and where they come from.

    Attributes
    ----------
    weights : tuple of str
        Of a composition, as for `Formula.composition`; empty for a splitting. Forty decimals.
    a, b : tuples of str
        Of a splitting, as for `Formula.splitting`; empty for a composition. Forty decimals.
    provenance : Provenance

    Notes
    -----
    `order` is the order asked for; it has been measured like that of every formula.
    """

    weights: tuple[str, ...]
    a: tuple[str, ...]
    b: tuple[str, ...]
    provenance: Provenance


def search(
    order: int,
    stages: int,
    seed: int,
    *,
    for_: Target | None = None,
    kind: str = "composition",
    measure: str = "error",
    starts: int = 200,
    name: str | None = None,
) -> FoundFormula:
    """Search for a symmetric formula; see `Formula.search`."""
    order, stages, seed, starts = _checked(order, stages, seed, starts, kind, measure)
    if for_ is not None and not isinstance(for_, Target):
        raise ArgumentError(
            f"for_: is not a Target ({for_!r}); give Target(small=Instance(…), large=Instance(…)), or None",
            argument="for_",
            value=for_,
        )
    problem = Problem(order, stages, paired=kind == "composition")
    objective = problem.leading_error if measure == "error" else problem.weight_squares
    solutions = _solutions(problem, seed, starts, objective)
    if not solutions:
        raise FormulaError(
            f"starts: no solution of order {order} with {stages} stages was met ({starts} starts); give more starts, "
            "another seed or more stages",
            name=name or "",
            choices=(),
        )
    figures: dict[str, float] = {}
    best = solutions[0]
    told = "leading error on general operators" if measure == "error" else "sum of squared weights"
    if for_ is not None:
        best, figures, won = _tuned(problem, solutions[:KEPT], for_)
        told += (
            ", then the error on the small instance of the target"
            if won
            else " (tuned, not kept: no gain on the large instance)"
        )
    refined = problem.refine(best)
    if refined is None or refined[1] > Decimal(10) ** -30:
        raise FormulaError(
            f"seed: the solution found could not be refined to 30 digits ({seed}); give another seed",
            name=name or "",
            choices=(),
        )
    weights, residual = refined
    free = len(problem.division(best)[0])
    error = math.sqrt(problem.leading_error(np.array([float(w) for w in weights[: problem.unknowns]]))[0])
    provenance = Provenance(kind, seed, starts, len(solutions), free, told, residual, error, **figures)
    return _formula(problem, weights, provenance, name)


def _solutions(
    problem: Problem, seed: int, starts: int, objective: Callable[[Array], tuple[float, Array]]
) -> list[Array]:
    """Distinct solutions, those of least objective first; the better ones of a surface are moved to its minima."""
    met = [half for half in map(problem.solve, problem.starts(seed, starts)) if half is not None]
    met.sort(key=lambda half: objective(half)[0])
    found: list[tuple[float, Array]] = []
    if met and problem.division(met[0])[0]:
        met = met[:DESCENDED]
    for half in met:
        if problem.division(half)[0]:
            moved = problem.descend(half, objective)
            if moved is None:
                continue
            half = moved
        if all(np.abs(half - other).max() > 1e-5 for _, other in found):
            found.append((objective(half)[0], half))
    return [half for _, half in sorted(found, key=lambda pair: (round(pair[0], 12), *np.round(pair[1], 6)))]


def _tuned(problem: Problem, candidates: list[Array], target: Target) -> tuple[Array, dict[str, float], bool]:
    """Tune on the small instance; keep the outcome, and say so, only where it wins on the large one too."""

    def on(instance_error: Callable[[list[tuple[Fraction, bool]]], float]) -> Callable[[Array], float]:
        return lambda half: instance_error(_stages(problem, [Fraction(float(value)) for value in half]))

    small, large = on(target.small.stages_error), on(target.large.stages_error)
    untuned = _rounded(problem, candidates[0])
    tuned = [
        problem.roam(half, small, ROAMING * len(problem.division(half)[0])) if problem.division(half)[0] else half
        for half in candidates
    ]
    best = _rounded(problem, min(tuned, key=small))
    won = large(best) < large(untuned)
    if not won:
        best = untuned
    figures = {
        "small_error": small(best),
        "large_error": large(best),
        "untuned_small_error": small(untuned),
        "untuned_large_error": large(untuned),
    }
    return best, figures, won


def _rounded(problem: Problem, half: Array) -> Array:
    """What refinement makes of a solution, so that figures are those of the formula that is returned."""
    refined = problem.refine(half)
    return half if refined is None else np.array([float(weight) for weight in refined[0][: problem.unknowns]])


def _stages(problem: Problem, half: list[Fraction]) -> list[tuple[Fraction, bool]]:
    whole = [half[min(place, problem.length - 1 - place)] for place in range(problem.length)]
    if problem.paired:
        return [(weight / 2, reverse) for weight in whole for reverse in (False, True)]
    return [(weight, bool(place % 2)) for place, weight in enumerate(whole)]


def _formula(problem: Problem, weights: tuple[Decimal, ...], provenance: Provenance, name: str | None) -> FoundFormula:
    directions: tuple[Direction, Direction] = ("forward", "reverse")
    half = [Fraction(weight) for weight in weights[: problem.unknowns]]
    stages = tuple(Stage(float(weight), directions[reverse]) for weight, reverse in _stages(problem, half))
    texts = tuple(f"{weight:f}" for weight in weights)
    a: tuple[str, ...] = ()
    b: tuple[str, ...] = ()
    if not problem.paired:
        with localcontext() as context:
            context.prec = DIGITS + 20
            sums = [f"{left + right:f}" for left, right in pairwise(weights)]
        a, b, texts = (texts[0], *sums[1::2], texts[-1]), tuple(sums[::2]), ()
    kind, seed = provenance.kind, provenance.seed
    return FoundFormula(
        name=name or f"found-{kind}-{problem.order}-{problem.stages}-seed-{seed}",
        order=problem.order,
        stages=stages,
        source=(
            f"found by Formula.search(order={problem.order}, stages={problem.stages}, seed={seed}, kind={kind!r}) "
            f"from {provenance.starts} starts: least {provenance.measure}; order conditions met to "
            f"{provenance.residual:.1e}"
        ),
        weights=texts,
        a=a,
        b=b,
        provenance=provenance,
    )


def _checked(
    order: object, stages: object, seed: object, starts: object, kind: object, measure: object
) -> tuple[int, int, int, int]:
    if kind not in ("composition", "splitting"):
        raise _wrong("kind", "is unknown", kind, "choose 'composition' or 'splitting'")
    if measure not in ("error", "weights"):
        raise _wrong("measure", "is unknown", measure, "choose 'error' or 'weights'")
    orders = ", ".join(map(str, LEAST_STAGES))
    degree = _integer(order)
    if degree not in LEAST_STAGES:
        odd = degree is not None and degree % 2 == 1
        problem = "is odd, and symmetric formulas have even orders" if odd else "is not an order that is searched"
        raise _wrong("order", problem, order, f"choose one of {orders}")
    least = LEAST_STAGES[degree]
    count = _integer(stages)
    if count is None or not least <= count <= MOST_STAGES:
        raise _wrong(
            "stages",
            f"do not suffice for order {degree} or are too many",
            stages,
            f"the least number known to work is {least}; give {least} to {MOST_STAGES}",
        )
    number = _integer(seed)
    if number is None or number < 0:
        raise _wrong("seed", "is not an integer of at least 0", seed, "give one, such as 1")
    tries = _integer(starts)
    if tries is None or not 1 <= tries <= MOST_STARTS:
        raise _wrong("starts", "is not a number of starts", starts, f"give an integer from 1 to {MOST_STARTS}")
    return degree, count, number, tries


def _integer(value: object) -> int | None:
    """Give an integer of any kind, numpy's included, as an int; None for anything else."""
    if isinstance(value, (bool, np.bool_)) or not isinstance(value, SupportsIndex):
        return None
    try:
        return index(value)
    except TypeError:  # an array of several
        return None


def _wrong(argument: str, problem: str, value: object, remedy: str) -> ArgumentError:
    return ArgumentError(f"{argument}: {problem} ({value!r}); {remedy}", argument=argument, value=value)
