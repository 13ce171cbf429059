"""A formula as data: what a family file lists."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from trueturn.formulas.base import Direction, Formula, Stage
from trueturn.formulas.weights import Number

__all__ = ["Entry"]


@dataclass(frozen=True)
class Entry:
    """One formula as data. Give exactly one of: `weights`; `a` and `b`; `stages`.

    Attributes
    ----------
    name : str
        Lower case with hyphens.
    order : int
        Claimed; measured when the formula is made.
    source : str
        Author, title, year, and the equation or table; "from memory" where it was not read.
    weights : sequence
        Of a composition of Strang steps.
    a, b : sequences
        Of a splitting method for two operators.
    stages : sequence of (float, direction)
    """

    name: str
    order: int
    source: str
    weights: Sequence[Number] = ()
    a: Sequence[Number] = ()
    b: Sequence[Number] = ()
    stages: Sequence[tuple[float, Direction]] = ()

    def formula(self) -> Formula:
        """Make the formula, which measures its order."""
        if self.weights:
            return Formula.composition(self.weights, name=self.name, order=self.order, source=self.source)
        if self.a:
            return Formula.splitting(self.a, self.b, name=self.name, order=self.order, source=self.source)
        return Formula(self.name, self.order, tuple(Stage(*stage) for stage in self.stages), self.source)
