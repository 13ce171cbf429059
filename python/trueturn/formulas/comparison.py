"""Which formula is best for which error, and what a step costs on a given Hamiltonian.

Best is measured. On the three sample parts of `trueturn.formulas.leading`, each formula runs for unit time with
1, 2, 3, … whole steps, and its distance from the exact evolution in the spectral norm is taken each time. The cost
is the number of exponentials of parts of the whole circuit, neighbours merged. The leading error plays no part:
where a few steps do, it is off by half a step, which is more than lies between the formulas.

Distances are those of double precision, and a circuit of N exponentials rounds by some N units, 1e-13 at a thousand.
So 1e-12 is the least error that is compared.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from functools import cache

import numpy as np
import numpy.typing as npt

from trueturn.errors import FormulaError
from trueturn.formulas.base import Formula
from trueturn.formulas.leading import PARTS, sample_parts
from trueturn.formulas.merging import merged_runs, repeated
from trueturn.partition import Partition

__all__ = ["ERRORS", "MOST", "best_for", "fewest_exponentials", "rotations_per_step", "span", "three_digits"]

ERRORS = tuple(10.0**-k for k in range(1, 13))
"""Errors in unit time at which formulas are compared: 0.1 down to 1e-12."""
MOST = 4096
"""Circuits of more exponentials are not run."""

_Matrix = npt.NDArray[np.complex128]


def best_for(formulas: Sequence[Formula]) -> dict[str, tuple[float, ...]]:
    """Say for which of `ERRORS` each formula needs the fewest exponentials, by running them.

    A formula with an entry is on the efficiency front of those given; the others are beaten everywhere. Formulas
    of equal cost share an error. Formulas that require a structure take no part, and an error that none reaches
    with `MOST` exponentials has no winner.

    Examples
    --------
    >>> import trueturn as tt
    >>> best_for([tt.formula("strang"), tt.formula("triple-jump-4")])["strang"][0]
    0.1
    """
    general = [one for one in formulas if not one.requires]
    most = 64
    while True:
        costs = [fewest_exponentials(one, most) for one in general]
        least = [min((cost[at] for cost in costs), default=math.inf) for at in range(len(ERRORS))]
        if most >= MOST or all(map(math.isfinite, least)):
            break
        most *= 2  # what a formula needs beyond the least of the others is not asked
    won: dict[str, list[float]] = {}
    for at, error in enumerate(ERRORS):
        for one, cost in zip(general, costs, strict=True):
            if cost[at] == least[at] < math.inf:
                won.setdefault(one.name, []).append(error)
    return {name: tuple(errors) for name, errors in won.items()}


@cache
def fewest_exponentials(formula: Formula, most: int = MOST) -> tuple[float, ...]:
    """Count the exponentials of the fewest whole steps that reach each of `ERRORS`; see the module.

    Parameters
    ----------
    formula : Formula
    most : int
        Circuits of more exponentials are not run.

    Returns
    -------
    tuple of float
        Whole numbers, one for each of `ERRORS`; infinite where `most` exponentials do not reach it.

    Examples
    --------
    >>> import trueturn as tt
    >>> fewest_exponentials(tt.formula("strang"), 100)[:3]
    (9, 21, 57)
    """
    runs = merged_runs(formula.exact_stages(), PARTS)
    spectra, exact = _sample()
    found: list[float] = [math.inf] * len(ERRORS)
    steps = 1
    while (cost := sum(len(block) * repeat for block, repeat in repeated(runs, steps))) <= most:
        factors: dict[tuple[int, object], _Matrix] = {}
        step = np.eye(len(exact), dtype=np.complex128)
        for part, weight in runs:
            if (part, weight) not in factors:
                factors[part, weight] = _evolution(*spectra[part], float(weight) / steps)
            step = factors[part, weight] @ step
        distance = float(np.linalg.norm(np.linalg.matrix_power(step, steps) - exact, 2))
        for at, error in enumerate(ERRORS):
            if distance <= error and found[at] == math.inf:
                found[at] = cost
        if found[-1] < math.inf or cost == 0:
            break
        steps += 1
    return tuple(found)


@cache
def _sample() -> tuple[list[tuple[npt.NDArray[np.float64], _Matrix]], _Matrix]:
    """Levels and vectors of the sample parts, and the exact evolution of their sum for unit time."""
    parts = sample_parts()
    return [np.linalg.eigh(part) for part in parts], _evolution(*np.linalg.eigh(sum(parts)), 1.0)


def _evolution(levels: npt.NDArray[np.float64], vectors: _Matrix, time: float) -> _Matrix:
    return np.asarray((vectors * np.exp(-1j * time * levels)) @ vectors.conj().T)


def span(errors: Sequence[float]) -> str:
    """Write neighbouring powers of ten as ranges.

    Examples
    --------
    >>> span((1e-3, 1e-4)), span((0.1,)), span(()), span((0.1, 1e-3, 1e-4))
    ('1e-3 … 1e-4', '1e-1', '', '1e-1, 1e-3 … 1e-4')
    """
    ranges: list[list[int]] = []
    for power in (round(-math.log10(error)) for error in errors):
        if ranges and ranges[-1][-1] + 1 == power:
            ranges[-1].append(power)
        else:
            ranges.append([power])
    return ", ".join(f"1e-{one[0]}" if len(one) == 1 else f"1e-{one[0]} … 1e-{one[-1]}" for one in ranges)


def three_digits(value: float) -> str:
    """Write a number above 0.1 to three digits, or to units where that is more.

    Examples
    --------
    >>> three_digits(1.2), three_digits(34.567), three_digits(1234.5)
    ('1.20', '34.6', '1234')
    """
    return f"{value:.2f}" if value < 9.995 else f"{value:.1f}" if value < 99.95 else f"{value:.0f}"


def rotations_per_step(formula: Formula, partition: Partition) -> int | None:
    """Count the rotations that one more step adds to a long circuit; None where the formula is refused.

    Examples
    --------
    >>> import trueturn as tt
    >>> partition = tt.Partition.of(tt.Operator("Z_0 Z_1 + 0.5 X_0 + 0.5 X_1"), "commuting")
    >>> rotations_per_step(tt.formula("strang"), partition)
    3
    """
    try:
        return formula.rotations(partition, 1.0, 4).count - formula.rotations(partition, 1.0, 3).count
    except FormulaError:
        return None
