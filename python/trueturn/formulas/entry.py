"""A formula as data: what a family file lists, and short ways to write symmetric lists of digits."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from trueturn.formulas.base import Direction, Formula, Stage
from trueturn.formulas.weights import ExactStage, Number, composed, exact_weights, split

__all__ = ["Entry", "closed_even", "closed_odd", "mirrored"]


@dataclass(frozen=True)
class Entry:
    """One formula as data. Give exactly one of: `weights`; `a` and `b`; `stages`.

    Attributes
    ----------
    name : str
        Lower case with hyphens: family, order, and the number of stages or a letter where a family needs it.
    order : int
        Claimed, on general operators; measured when the formula is made.
    source : str
        Author, title, year, and the equation or table; "from memory" where it was not read.
    weights : sequence
        Of a composition of Strang steps.
    a, b : sequences
        Of a splitting method for two operators.
    stages : sequence of (number or decimal text, direction)
    requires : str
        A structure of `trueturn.formulas.structure` that the set leans on; empty for general sets.
    special_order : int, optional
        The order where that structure holds.
    """

    name: str
    order: int
    source: str
    weights: Sequence[Number] = ()
    a: Sequence[Number] = ()
    b: Sequence[Number] = ()
    stages: Sequence[tuple[Number, Direction]] = ()
    requires: str = ""
    special_order: int | None = None

    def exact_stages(self) -> list[ExactStage]:
        """List the stages with the digits of the source, before they are rounded to floats."""
        if self.weights:
            return composed(self.weights, self.name)
        if self.a:
            return split(self.a, self.b, self.name)
        weights = exact_weights("stages", [weight for weight, _ in self.stages], self.name)
        return [(weight, direction) for weight, (_, direction) in zip(weights, self.stages, strict=True)]

    def formula(self) -> Formula:
        """Make the formula, which measures its order."""
        stages = tuple(Stage(float(weight), direction) for weight, direction in self.exact_stages())
        return Formula(self.name, self.order, stages, self.source, self.requires, self.special_order)


def mirrored(*half: str) -> tuple[str, ...]:
    """Complete a list that reads the same both ways; the last entry given is the one in the middle.

    Examples
    --------
    >>> mirrored("0.3", "0.4")
    ('0.3', '0.4', '0.3')
    """
    return half + half[-2::-1]


def closed_odd(*half: str) -> tuple[Fraction, ...]:
    """Complete a list that reads the same both ways by the entry in the middle that makes the sum 1.

    Examples
    --------
    >>> [str(entry) for entry in closed_odd("0.3")]
    ['3/10', '2/5', '3/10']
    """
    digits = tuple(Fraction(text) for text in half)
    return (*digits, 1 - 2 * sum(digits, Fraction(0)), *digits[::-1])


def closed_even(*half: str) -> tuple[Fraction, ...]:
    """Complete a list that reads the same both ways by two equal entries in the middle that make the sum 1.

    Examples
    --------
    >>> [str(entry) for entry in closed_even("0.2")]
    ['1/5', '3/10', '3/10', '1/5']
    """
    digits = tuple(Fraction(text) for text in half)
    digits += (Fraction(1, 2) - sum(digits, Fraction(0)),)
    return digits + digits[::-1]
