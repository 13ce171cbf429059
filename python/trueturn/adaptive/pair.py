"""Two formulas for one step: the one that is wanted, and one of higher order that judges it."""

from __future__ import annotations

from fractions import Fraction

from trueturn.errors import ArgumentError, FormulaError
from trueturn.formulas import Formula, Stage, formula
from trueturn.formulas.order import measured_order

__all__ = ["higher_formula", "pair_of"]

_BUILDABLE = 6


def pair_of(formulas: object) -> tuple[Formula, Formula]:
    """Return (lower, higher) from a pair, or from one formula and what is made of it."""
    if isinstance(formulas, Formula):
        return formulas, formula("strang") if formulas.name == "lie" else higher_formula(formulas)
    if isinstance(formulas, tuple) and len(formulas) == 2 and all(isinstance(one, Formula) for one in formulas):
        low, high = formulas
        if high.order <= low.order:
            raise FormulaError(
                f"formulas: the second is not of higher order ({low.order}, {high.order}); give (lower, higher)",
                name=high.name,
                choices=(),
            )
        return low, high
    raise ArgumentError(
        f"formulas: is neither a Formula nor a pair of them ({formulas!r}); take them from trueturn.formula",
        argument="formulas",
        value=formulas,
    )


def higher_formula(lower: Formula) -> Formula:
    """Return a formula of higher order made of one.

    Parameters
    ----------
    lower : Formula
        Of order 6 at most.

    Returns
    -------
    Formula
        For odd order p half a step and its adjoint, of order p + 1 or more. For even order Suzuki's five copies with
        one backwards in time, of order p + 2 where `lower` is symmetric, else p + 1.

    Raises
    ------
    FormulaError
        The order is above 6: give a pair.

    References
    ----------
    .. [1] M. Suzuki, "Fractal decomposition of exponential operators", Phys. Lett. A 146, 319 (1990). From memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> higher_formula(tt.formula("strang")).order
    4
    """
    if lower.order > _BUILDABLE:
        raise FormulaError(
            f"formulas: none of higher order is made of {lower.name!r} (order {lower.order}); "
            f"give a pair (lower, higher), such as ({lower.name!r}, one of order {lower.order + 2})",
            name=lower.name,
            choices=(),
        )
    if lower.order % 2:
        halves = [Stage(0.5 * stage.weight, stage.direction) for stage in lower.stages]
        mirrored = [Stage(s.weight, "reverse" if s.direction == "forward" else "forward") for s in reversed(halves)]
        stages = (*halves, *mirrored)
    else:
        odd = lower.order + 1
        outer = 1.0 / (4.0 - 4.0 ** (1.0 / odd))
        copies = (outer, outer, 1.0 - 4.0 * outer, outer, outer)
        stages = tuple(Stage(copy * stage.weight, stage.direction) for copy in copies for stage in lower.stages)
    order, _ = measured_order([(Fraction(stage.weight), stage.direction == "reverse") for stage in stages])
    return Formula(f"{lower.name}, raised", order, stages, f"made of {lower.name}: {lower.source}")
