"""What a product formula is: weighted stages with an order that is checked and a source."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from operator import index
from os import PathLike
from typing import TYPE_CHECKING, ClassVar

from trueturn.errors import ArgumentError, FormulaError
from trueturn.formulas.arguments import checked_error, checked_steps, checked_time
from trueturn.formulas.leading import error_coefficient, exponentials_per_step
from trueturn.formulas.merging import ANGLE_ROUNDINGS, rotations_of
from trueturn.formulas.order import MOST_ORDER, measured_order
from trueturn.formulas.structure import require_known, require_structure
from trueturn.formulas.weights import DIRECTIONS, Direction, ExactStage, Number, composed, exact_weights, split
from trueturn.partition import Partition
from trueturn.rotations import Rotations

if TYPE_CHECKING:
    from trueturn.formulas.search import FoundFormula
    from trueturn.formulas.search_target import Target

__all__ = ["Direction", "Formula", "Stage"]


@dataclass(frozen=True)
class Stage:
    """One run over all parts.

    Attributes
    ----------
    weight : float
        Share of the step's time; may be negative.
    direction : {"forward", "reverse"}
        Forward applies the first part first.
    """

    weight: float
    direction: Direction


@dataclass(frozen=True, repr=False)
class Formula:
    """A product formula: a list of stages with a claimed order and a source.

    Get the known ones from `trueturn.formula`; make others with `composition` or `splitting`.

    Parameters
    ----------
    name : str
    order : int
        Claimed order, 1 to 12: the error of one step falls as step**(order + 1). It must be the measured one,
        neither more nor less, on general operators; at 12 it is not measured whether it is more.
    stages : tuple of Stage
        In the order in which they act; at least one.
    source : str
        Where the weights come from.
    requires : str
        The structure that the weights lean on, in words; empty (the default) where any partition will do.
        Without that structure `rotations` refuses.
    special_order : int, optional
        The order where that structure holds, as the source claims it; `order` is that on general operators.

    Raises
    ------
    FormulaError
        Empty name, no stages, a weight that is not finite, weights that do not sum to 1, a claimed order
        that is out of range, not reached or below the true one, or a structure that cannot be checked.

    Notes
    -----
    With step time τ and parts A_1 … A_m, a forward stage of weight w applies exp(-i w τ A_1) first and
    exp(-i w τ A_m) last; a reverse stage applies them the other way round. The claimed order is measured, for
    any number of parts at once and free of rounding; see `trueturn.formulas.order`.

    Examples
    --------
    >>> import trueturn as tt
    >>> strang = tt.formula("strang")
    >>> strang.order, strang.symmetric, strang.stages
    (2, True, (Stage(weight=0.5, direction='forward'), Stage(weight=0.5, direction='reverse')))
    """

    ANGLE_ROUNDINGS: ClassVar[int] = ANGLE_ROUNDINGS
    """Roundings in each angle θ of `rotations`, each at most u |θ|, with u the unit roundoff 2**-53."""

    name: str
    order: int
    stages: tuple[Stage, ...]
    source: str
    requires: str = ""
    special_order: int | None = None

    def __post_init__(self) -> None:
        if not isinstance(self.name, str) or not self.name.strip():
            raise FormulaError(
                f"name: is not a name ({self.name!r}); give a text that is not empty",
                name=str(self.name),
                choices=(),
            )
        require_known(self.requires, self.name)
        if isinstance(self.stages, str) or not isinstance(self.stages, Iterable):
            raise FormulaError(
                f"stages: is no sequence of stages ({self.stages!r}); give a tuple of Stage(weight, direction)",
                name=self.name,
                choices=(),
            )
        object.__setattr__(self, "stages", tuple(self.stages))
        self._check_weights()
        object.__setattr__(self, "order", self._checked_order(self.order))

    @classmethod
    def composition(
        cls,
        weights: Sequence[Number],
        *,
        name: str,
        order: int | None = None,
        source: str = "given by the caller",
    ) -> Formula:
        """Compose Strang steps: F(w_1/2) R(w_1/2) F(w_2/2) R(w_2/2) ….

        Parameters
        ----------
        weights : sequence of float, Fraction, Decimal or decimal text
            At least one; their sum is 1. Digits in print are best given as text, which is rounded once.
        name : str
        order : int, optional
            Claimed order; by default the measured one.
        source : str, optional

        Returns
        -------
        Formula

        Raises
        ------
        FormulaError
            As for the class.

        Examples
        --------
        >>> import trueturn as tt
        >>> cube_root = 2 ** (1 / 3)
        >>> outer = 1 / (2 - cube_root)
        >>> jump = tt.Formula.composition([outer, 1 - 2 * outer, outer], name="triple jump")
        >>> jump.order
        4
        """
        return cls._measured(name, order, composed(weights, name), source)

    @classmethod
    def splitting(
        cls,
        a: Sequence[Number],
        b: Sequence[Number],
        *,
        name: str,
        order: int | None = None,
        source: str = "given by the caller",
    ) -> Formula:
        """Turn a splitting method for two operators into stages for any number of parts.

        Parameters
        ----------
        a, b : sequences of float, Fraction, Decimal or decimal text
            The method exp(a_1 A) exp(b_1 B) exp(a_2 A) … in time order; each sums to 1. `a` is as long as
            `b`, or longer by one.
        name : str
        order : int, optional
            Claimed order; by default the measured one.
        source : str, optional

        Returns
        -------
        Formula
            Alternating forward and reverse stages of weights c_1 = a_1, c_2 = b_1 - c_1, c_3 = a_2 - c_2, …,
            computed exactly and rounded once; stages of weight zero are left out.

        Raises
        ------
        FormulaError
            As for the class, or lengths that do not fit.

        Notes
        -----
        The order is kept [1]_; the error constant is not, and should be measured. A method that
        leans on special structure, such as [B, [B, [B, A]]] = 0, loses order on general parts, and its claim
        is refused.

        References
        ----------
        .. [1] R. I. McLachlan, "On the numerical integration of ordinary differential equations by symmetric
           composition methods", SIAM J. Sci. Comput. 16, 151 (1995). From memory.

        Examples
        --------
        >>> import trueturn as tt
        >>> tt.Formula.splitting([0.5, 0.5], [1.0], name="leapfrog").stages == tt.formula("strang").stages
        True
        """
        return cls._measured(name, order, split(a, b, name), source)

    @classmethod
    def search(
        cls,
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
        """Search for a symmetric formula; the same arguments give the same formula.

        Parameters
        ----------
        order : {2, 4, 6, 8}
        stages : int
            Strang steps of a composition, b-exponentials of a splitting: up to 40, and at least 1, 3, 7, 15 for
            the four orders, the least numbers known to work. More leave parameters free.
        seed : int
            At least 0.
        for_ : Target, optional
            Tune the free parameters for a small instance and keep the outcome if it also wins on a larger one.
        kind : {"composition", "splitting"}
        measure : {"error", "weights"}
            What is made least: the leading error on general operators, or Σ w².
        starts : int, up to 100000, optional
        name : str, optional

        Returns
        -------
        FoundFormula
            With forty decimals of every coefficient and its provenance.

        Raises
        ------
        ArgumentError
            An argument out of range; the message gives what is possible.
        FormulaError
            No start led to a solution.

        Notes
        -----
        Milliseconds for each start; with a target some hundred runs of the small instance for each free
        parameter. No claim is made that the optimum is global.

        Examples
        --------
        >>> import trueturn as tt
        >>> found = tt.Formula.search(2, 2, seed=1, kind="splitting", starts=10)
        >>> found.a[0][:8], float(found.provenance.residual) < 1e-28
        ('0.193183', True)
        """
        from trueturn.formulas.search import search

        return search(order, stages, seed, for_=for_, kind=kind, measure=measure, starts=starts, name=name)

    @classmethod
    def _measured(cls, name: str, order: int | None, pairs: Sequence[ExactStage], source: str) -> Formula:
        stages = tuple(Stage(float(weight), direction) for weight, direction in pairs)
        if order is None:
            reached, _ = measured_order([(Fraction(stage.weight), stage.direction == "reverse") for stage in stages])
            order = max(reached, 1)
        return cls(name, order, stages, source)

    @property
    def symmetric(self) -> bool:
        """Whether the formula is its own adjoint: a step of time -τ undoes a step of time τ exactly.

        True when the list of stages read backwards, with the directions exchanged, is the same list.
        """
        return all(
            stage.weight == mirror.weight and stage.direction != mirror.direction
            for stage, mirror in zip(self.stages, reversed(self.stages), strict=True)
        )

    @cached_property
    def error_coefficient(self) -> float:
        """The C of ‖S(τ) − exp(−iτH)‖ → C τ^(order + 1), on three fixed general operators of norm 1.

        Defined in `trueturn.formulas.leading`. Computed when first asked for, in up to a second for formulas
        of many stages.
        """
        return error_coefficient(self.exact_stages(), self.order)

    @cached_property
    def leading_error(self) -> float:
        """The error at equal cost: L with error ≈ (L / N)^order in unit time with N exponentials of parts.

        L = (exponentials per step) · C^(1/order), with C the `error_coefficient` and three parts of norm 1; see
        `trueturn.formulas.leading`. Of two formulas of one order the smaller L is the better one; of
        different orders compare `exponentials_for`.

        Examples
        --------
        >>> import trueturn as tt
        >>> tt.formula("blanes-moan-4").leading_error < tt.formula("suzuki-4").leading_error
        True
        """
        return float(exponentials_per_step(self.exact_stages()) * self.error_coefficient ** (1 / self.order))

    def exponentials_for(self, error: float) -> float:
        """Estimate how many exponentials of parts reach `error` in unit time: `leading_error` · error^(-1/order).

        Parameters
        ----------
        error : float
            Above zero.

        Returns
        -------
        float
            For three general parts of norm 1, and by the leading term alone: below a few steps of the formula
            it is no more than a trend.

        Raises
        ------
        ArgumentError
            `error` is not a finite number above zero.

        Examples
        --------
        >>> import trueturn as tt
        >>> tt.formula("strang").exponentials_for(1e-6) > tt.formula("blanes-moan-6").exponentials_for(1e-6)
        True
        """
        return float(self.leading_error * checked_error(error) ** (-1 / self.order))

    @classmethod
    def read(cls, path: str | PathLike[str]) -> Formula:
        """Read a formula from a TOML file that holds one; see `trueturn.read_formulas`.

        Raises
        ------
        JobError
            As for `read_formulas`, or the file holds more than one formula.
        """
        from trueturn.formulas.reading import read_formula

        return read_formula(path)

    def exact_stages(self) -> list[tuple[Fraction, bool]]:
        """List the weights as the exact fractions that they are, and whether each stage is a reverse one."""
        return [(Fraction(stage.weight), stage.direction == "reverse") for stage in self.stages]

    def rotations(self, partition: Partition, time: float, steps: int) -> Rotations:
        """Build the circuit of `steps` equal steps.

        Parameters
        ----------
        partition : Partition
        time : float
            Total time, in inverse units of the coefficients; may be negative.
        steps : int
            At least 1.

        Returns
        -------
        Rotations
            Equal neighbours merged across stages and steps, angles that cancel to exactly zero dropped, steps
            kept as one repeated block. The identity becomes the global phase ``-partition.identity * time``.
            Where parts share strings, equal strings that meet inside a block merge as well.

        Raises
        ------
        ArgumentError
            `partition` is no Partition, `time` not finite or so long that an angle overflows, or `steps` not
            an integer from 1 to 2**53.
        FormulaError
            `partition` lacks the structure that the formula `requires`.

        Notes
        -----
        An angle is weight · time/steps · coefficient with `ANGLE_ROUNDINGS` roundings. Strang on
        m parts costs steps (2 m - 2) + 1 exponentials of parts, and 1 when m = 1. Time and memory grow with
        stages × terms, not with steps.

        Examples
        --------
        >>> import trueturn as tt
        >>> partition = tt.Partition.of(tt.Operator("Z_0 Z_1 + 0.5 X_0 + 0.5 X_1"), "commuting")
        >>> tt.formula("strang").rotations(partition, time=1.0, steps=1000).count
        3001
        """
        if not isinstance(partition, Partition):
            raise ArgumentError(
                f"partition: is not a Partition ({partition!r}); make one with Partition.of(operator, rule)",
                argument="partition",
                value=partition,
            )
        require_structure(self, partition)
        return rotations_of(self.exact_stages(), partition, checked_time(time), checked_steps(steps))

    def __repr__(self) -> str:
        kind = "symmetric" if self.symmetric else "not symmetric"
        count = f"{len(self.stages)} stage{'s' if len(self.stages) > 1 else ''}"
        return f"<Formula {self.name!r} of order {self.order}: {count}, {kind}>"

    def _check_weights(self) -> None:
        if not self.stages:
            raise FormulaError("stages: is empty (()); give at least one stage", name=self.name, choices=())
        for number, stage in enumerate(self.stages):
            if not isinstance(stage, Stage) or stage.direction not in DIRECTIONS:
                raise FormulaError(
                    f"stages: entry {number} is no stage ({stage!r}); "
                    "write Stage(weight, 'forward') or Stage(weight, 'reverse')",
                    name=self.name,
                    choices=(),
                )
        exact_weights("stages", [stage.weight for stage in self.stages], self.name)

    def _checked_order(self, claimed: object) -> int:
        try:
            if isinstance(claimed, bool):
                raise TypeError
            order = index(claimed)  # type: ignore[arg-type]
        except TypeError:
            order = 0
        if not 1 <= order <= MOST_ORDER:
            raise FormulaError(
                f"order: is not an integer from 1 to {MOST_ORDER} ({claimed!r}); "
                "give one, or None to take the measured order",
                name=self.name,
                choices=(),
            )
        # one degree more than claimed: leading errors are read at the order, so it must be the true one
        reached, shortfall = measured_order(self.exact_stages(), min(order + 1, MOST_ORDER))
        if reached > order:
            reached, _ = measured_order(self.exact_stages())
            raise FormulaError(
                f"order: is below the true one ({order} claimed, {reached} measured); give order={reached}",
                name=self.name,
                choices=(),
            )
        if shortfall is not None and reached < order:
            raise FormulaError(
                f"order: is not reached ({order} claimed, {reached} measured; a condition of degree "
                f"{shortfall.degree} is missed by {shortfall.residual:.1e}); correct the digits, "
                f"or give order={max(reached, 1)}",
                name=self.name,
                choices=(),
            )
        return order
