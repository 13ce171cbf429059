"""Processed formulas: a cheap kernel between a pre-step and its inverse, both paid once.

With P K(τ) P⁻¹ = exp(-iτH) + O(τ^{p+1}), the run of r steps is

    (P K P⁻¹)^r  =  P K^r P⁻¹,

so a kernel K of few stages has the error of a formula of order p, its effective order, while the processor P is
applied only at the two ends. A processor is a list of stages whose weights sum to 0, so it is the identity up to
O(τ²), and its inverse is the same list backwards with negated weights and exchanged directions.

Not every formula can be lifted. A Lie step of two parts becomes a Strang step when conjugated with half a step of
the first part, but of three or more general parts it stays of order 1: conjugation with a part-wise z_k A_k changes
the commutator of A_j and A_k by z_j - z_k, which cannot be the same for all pairs. A claim that is not reached is
refused.

References
----------
J. C. Butcher, "The effective order of Runge-Kutta methods", Lect. Notes Math. 109, 133 (1969); S. Blanes, F. Casas
and J. Ros, "Symplectic integration with processing: a general study", SIAM J. Sci. Comput. 21, 711 (1999); S.
Blanes, F. Casas and A. Murua, "Composition methods for differential equations with processing", SIAM J. Sci.
Comput. 27, 1817 (2006). From memory.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from trueturn.errors import ArgumentError, FormulaError
from trueturn.formulas.base import Direction, Formula, Stage
from trueturn.formulas.merging import rotations_of
from trueturn.formulas.order import MOST_ORDER, measured_order
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["PROCESSED", "Processed"]


@dataclass(frozen=True, repr=False)
class Processed:
    """A kernel between a pre-step and a post-step.

    Parameters
    ----------
    kernel : Formula
    processor : tuple of Stage
        The post-step, in the order in which its stages act; weights sum to 0. The pre-step is its exact inverse.
    name : str
    order : int
        Claimed effective order, 1 to 12, of the whole on general operators.
    source : str

    Raises
    ------
    ArgumentError
        `kernel` is no Formula.
    FormulaError
        Empty name, no stages, a processor whose weights do not sum to 0, or an order that is not reached.

    Notes
    -----
    The order is measured on pre-step, kernel and post-step in a row, exactly as for every formula; since inner
    processors cancel, it holds for every number of steps.

    Examples
    --------
    >>> from trueturn.formulas.processed import PROCESSED
    >>> PROCESSED[0]
    <Processed 'processed-4' of effective order 4: kernel of 6 stages, processor of 6>
    """

    kernel: Formula
    processor: tuple[Stage, ...]
    name: str
    order: int
    source: str

    def __post_init__(self) -> None:
        if not isinstance(self.kernel, Formula):
            raise ArgumentError(
                f"kernel: is not a Formula ({self.kernel!r}); see trueturn.formula and Formula.composition",
                argument="kernel",
                value=self.kernel,
            )
        if not isinstance(self.name, str) or not self.name.strip():
            raise self._refused(f"name: is not a name ({self.name!r}); give a text that is not empty")
        object.__setattr__(self, "processor", tuple(self.processor))
        if not self.processor:
            raise self._refused("processor: is empty (()); give stages, or use the kernel by itself")
        for number, stage in enumerate(self.processor):
            if not isinstance(stage, Stage) or stage.direction not in ("forward", "reverse"):
                raise self._refused(
                    f"processor: entry {number} is no stage ({stage!r}); "
                    "write Stage(weight, 'forward') or Stage(weight, 'reverse')"
                )
        weights = [weight for stage in self.processor if (weight := _exact(stage.weight)) is not None]
        if len(weights) < len(self.processor):
            raise self._refused(f"processor: has a weight that is not a finite number ({self.processor!r}); correct it")
        total = sum(weights, Fraction(0))
        if abs(total) > 8 * Fraction(2) ** -53 * sum(map(abs, weights), Fraction(0)):
            raise self._refused(f"processor: weights do not sum to 0 ({float(total)!r}); correct the digits")
        if isinstance(self.order, bool) or not isinstance(self.order, int) or not 1 <= self.order <= MOST_ORDER:
            raise self._refused(f"order: is not an integer from 1 to {MOST_ORDER} ({self.order!r}); give one")
        reached, shortfall = measured_order(self.exact_stages(), self.order)
        if shortfall is not None:
            raise self._refused(
                f"order: is not reached ({self.order} claimed, {reached} measured; a condition of degree "
                f"{shortfall.degree} is missed by {shortfall.residual:.1e}); correct the digits, "
                f"or give order={max(reached, 1)}"
            )

    @property
    def pre(self) -> tuple[Stage, ...]:
        """The pre-step: the inverse of the processor."""
        return tuple(
            Stage(-stage.weight, "forward" if stage.direction == "reverse" else "reverse")
            for stage in reversed(self.processor)
        )

    @property
    def post(self) -> tuple[Stage, ...]:
        """The post-step: the processor."""
        return self.processor

    def exact_stages(self) -> list[tuple[Fraction, bool]]:
        """List pre-step, one kernel and post-step as exact fractions, and whether each stage is a reverse one."""
        rows = [*self.pre, *self.kernel.stages, *self.post]
        return [(Fraction(stage.weight), stage.direction == "reverse") for stage in rows]

    def stage_count(self, steps: int) -> int:
        """Return the stages of a run of `steps` steps: those of the kernel each time, the processor's twice."""
        return steps * len(self.kernel.stages) + 2 * len(self.processor)

    def rotations(self, partition: Partition, time: float, steps: int) -> Rotations:
        """Build the circuit: pre-step, `steps` kernels, post-step.

        Parameters
        ----------
        partition : Partition
        time : float
            Total time; pre-step and post-step use time/steps.
        steps : int
            At least 1.

        Returns
        -------
        Rotations
            Kernels merge as in `Formula.rotations`; nothing merges at the two ends. The phase is the kernel's.

        Raises
        ------
        ArgumentError
            As for `Formula.rotations`.
        """
        middle = self.kernel.rotations(partition, time, steps)
        if not partition.parts:
            return middle
        parts = Partition(partition.parts)  # without the identity, whose phase is the kernel's
        before, after = (
            rotations_of(
                [(Fraction(stage.weight) / steps, stage.direction == "reverse") for stage in stages], parts, time, 1
            )
            for stages in (self.pre, self.post)
        )
        return before + middle + after

    def __repr__(self) -> str:
        return (
            f"<Processed {self.name!r} of effective order {self.order}: kernel of {len(self.kernel.stages)} stages, "
            f"processor of {len(self.processor)}>"
        )

    def _refused(self, message: str) -> FormulaError:
        return FormulaError(message, name=str(self.name), choices=())


def _exact(weight: object) -> Fraction | None:
    if isinstance(weight, bool) or not isinstance(weight, (int, float)):
        return None
    return Fraction(weight) if math.isfinite(weight) else None


_DIRECTIONS: tuple[Direction, Direction] = ("forward", "reverse")


def _stages(digits: Sequence[str]) -> tuple[Stage, ...]:
    return tuple(Stage(float(Fraction(text)), _DIRECTIONS[place % 2]) for place, text in enumerate(digits))


_FOUND = (
    "found here: order conditions of the whole up to degree 4 solved from 60 random starts (random.Random(1)) with the "
    "leading error on two general parts made least; met to 1e-32 by the printed digits"
)

_HALF_KERNEL = (
    "0.6089862662749988314065347790905337",
    "-0.8850193530011828824921336235499337",
    "0.7760330867261840510855988444594001",
)

_PROCESSOR = (
    "-0.2880136881462498393567363403146599",
    "-0.1441557228974130959382088964254060",
    "-0.0691725635137326162537542662648196",
    "0.2108096834462890130819590873081190",
    "0.2612182235553180906443944241305361",
    "0.0293140675557884478223459915662304",
)

PROCESSED = (
    Processed(
        kernel=Formula(
            "kernel-4", 2, _stages((*_HALF_KERNEL, *reversed(_HALF_KERNEL))), f"kernel of processed-4, {_FOUND}"
        ),
        processor=_stages(_PROCESSOR),
        name="processed-4",
        order=4,
        source=_FOUND,
    ),
)
"""Processed formulas that come with the package.

The kernel of ``processed-4`` is as long as three Strang steps, like the triple jump, which is the only symmetric
formula of order 4 of that length without a processor. On a problem of three parts of three qubits, runs of 10 to 40
steps to time 1 have 3.4 to 6.1 times less error than the triple jump with equally many stages, processor included. The
longer steps of ``blanes-moan-4`` have a smaller error still, 4 to 8 times at equally many stages.

`Candidate` and `compare` take them like formulas.
"""
