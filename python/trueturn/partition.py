"""Partitions: a Hamiltonian as ordered parts, each of which can be exponentiated exactly.

A part's terms commute pairwise, so the exponential of a part is a product of rotations without error; all the
error of a product formula comes from parts that do not commute with each other. Which terms share a part, and
the order of the parts, set that error.
"""

from __future__ import annotations

import difflib
import random
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, final

import numpy as np

from trueturn._partition_checks import check_commuting, commutes, given_parts, whole_number
from trueturn.errors import InternalError, PartitionError
from trueturn.operator import Operator
from trueturn.partition_rules import RULES, string_text, subset

if TYPE_CHECKING:
    from trueturn.error_saving import Improved
    from trueturn.formulas import Formula

__all__ = ["Partition"]


@final
class Partition:
    """Ordered parts whose sum is the Hamiltonian; immutable.

    Parameters
    ----------
    parts : iterable of Operator
        In the order in which a forward stage applies them. Inside each, all terms commute pairwise. All act
        on the same number of qubits. Identity terms are taken out and added up in `identity`; parts left
        without a term are left out.

    Attributes
    ----------
    parts : tuple of Operator
        Without identity terms, each with at least one term.
    identity : float
        Coefficient of the identity, which every formula turns into an exact global phase.
    qubits : int
    rule : str
        The rule that made the parts, or ``"given"``; changes of order are noted behind it.

    Raises
    ------
    PartitionError
        No parts, a part that is no Operator, parts on different numbers of qubits, or two terms of one part
        that do not commute (the message names both).

    Notes
    -----
    The same string may stand in several parts. Checking costs at worst one comparison for each
    pair of terms of a part. Two partitions are equal when parts, order and identity are.

    Examples
    --------
    >>> import trueturn as tt
    >>> h = tt.Operator("Z_0 Z_1 + 0.5 X_0 + 0.5 X_1 + 3")
    >>> partition = tt.Partition.of(h, "axis")
    >>> [str(part) for part in partition.parts], partition.identity
    (['0.5 X_0 + 0.5 X_1', '1.0 Z_0 Z_1'], 3.0)
    >>> partition.operator() == h
    True
    """

    __slots__ = ("_identity", "_parts", "_qubits", "_rule")

    def __init__(self, parts: Iterable[Operator]) -> None:
        given = given_parts(parts)
        for number, part in enumerate(given):
            check_commuting(number, part)
        self._parts = tuple(part for part in (p.without_identity() for p in given) if len(part))
        self._identity = float(np.sum([part.identity_coefficient for part in given]))
        self._qubits = given[0].qubits
        self._rule = "given"

    @classmethod
    def of(cls, operator: Operator, rule: str) -> Partition:
        """Distribute the terms of an operator over parts.

        Parameters
        ----------
        operator : Operator
        rule : str
            - ``single``: each term a part of its own, in the given order.
            - ``magnitude``: the same, largest absolute coefficient first; equal ones keep their order.
            - ``lexicographic``: the same, sorted by the letters from qubit 0 on, with I before X, Y and Z.
            - ``commuting``: few parts; each term joins the first part with all of whose terms it commutes.
            - ``commuting-largest-first``, ``-smallest-last``, ``-saturation``: the same, taking terms in another
              order (`trueturn.vertex_colouring`), often with fewer parts; parts stand by their first terms.
            - ``commuting-fewest``: whichever of these four makes fewest parts, the first named of equals.
            - ``bond``: two-qubit terms are edges of a graph, coloured so that edges of one colour share no
              qubit. One part for each colour with all commuting terms of its edges; strings of an edge that
              do not commute with those go into further parts right after. One-qubit terms follow in
              commuting parts of their own.
            - ``axis``: strings of X alone, of Y alone, of Z alone, then the others in commuting parts.
            - ``gate-saving``: the parts of ``commuting``, put in order by `gate_saving`.
            - ``error-saving``: the parts of ``commuting`` in the order of ``improved("strang")``.

        Returns
        -------
        Partition
            Made of the operator's terms with unchanged coefficients, each in exactly one part, in the given
            order inside a part (``gate-saving`` excepted). Deterministic.

        Raises
        ------
        PartitionError
            Unknown rule, ``bond`` for an operator with a term on more than two qubits, or ``error-saving`` where
            there are too many nested brackets.

        Notes
        -----
        ``bond`` gives the even and the odd bonds of a chain, two parts on rings of even length,
        and at most one more part than the largest number of bonds at a qubit when all strings of a bond
        commute. The rules ``commuting-…`` take about terms² × qubits operations: seconds for 10^4 terms.

        Examples
        --------
        >>> import trueturn as tt
        >>> h = tt.model.heisenberg(tt.lattice.ring(6), 1.0, z=0.5)
        >>> [len(part) for part in tt.Partition.of(h, "bond").parts]
        [9, 9, 6]
        """
        if not isinstance(operator, Operator):
            raise PartitionError(
                f"operator: is not an Operator ({operator!r}); use trueturn.Operator or trueturn.model",
                argument="operator",
            )
        if not isinstance(rule, str) or rule not in RULES:
            near = difflib.get_close_matches(rule, RULES, n=1, cutoff=0.5) if isinstance(rule, str) else []
            hint = f"did you mean {near[0]!r}? " if near else ""
            raise PartitionError(
                f"rule: is unknown ({rule!r}); {hint}choose one of {', '.join(map(repr, RULES))}",
                argument="rule",
                choices=tuple(RULES),
            )
        terms = operator.without_identity()
        made = cls.__new__(cls)
        made._parts = tuple(subset(terms, group) for group in RULES[rule](terms))
        made._identity, made._qubits, made._rule = operator.identity_coefficient, operator.qubits, rule
        if made.operator() != operator or not all(map(commutes, made._parts)):
            raise InternalError(f"partition: rule {rule!r} made wrong parts; please report this with the operator")
        return made

    @property
    def parts(self) -> tuple[Operator, ...]:
        """The parts, in the order in which a forward stage applies them."""
        return self._parts

    @property
    def identity(self) -> float:
        """Coefficient of the identity."""
        return self._identity

    @property
    def qubits(self) -> int:
        """Number of qubits acted on."""
        return self._qubits

    @property
    def rule(self) -> str:
        """The rule that made the parts, or ``"given"``, and what was done to the order since."""
        return self._rule

    def operator(self) -> Operator:
        """Add up the parts and the identity.

        Returns
        -------
        Operator
            Exactly the operator that was partitioned; terms in the order of the parts, then the identity.
        """
        x = [mask for part in self._parts for mask in part.x_masks] + [0]
        z = [mask for part in self._parts for mask in part.z_masks] + [0]
        coefficients = np.concatenate([*(part.coefficients for part in self._parts), [self._identity]])
        return Operator.from_masks(x, z, coefficients, self._qubits)

    def require_sum(self, operator: Operator) -> None:
        """Refuse unless the parts and the identity add up to an operator.

        Parameters
        ----------
        operator : Operator

        Raises
        ------
        PartitionError
            Another number of qubits, or a coefficient that differs by more than rounding explains: len(parts)
            · 2⁻⁵² times the largest coefficient, for strings that are divided among parts.
        """
        if operator.qubits != self._qubits:
            raise PartitionError(
                f"parts: act on {self._qubits} qubits and the operator on {operator.qubits}; "
                f"build every part with qubits={operator.qubits}",
                argument="parts",
            )
        rest = operator - self.operator()
        if len(rest):
            largest = max(float(np.max(np.abs(part.coefficients))) for part in (operator, *self._parts) if len(part))
            worst = int(np.argmax(np.abs(rest.coefficients)))
            missing = float(rest.coefficients[worst])
            if abs(missing) > len(self._parts) * 2.0**-52 * largest:
                text = string_text(rest.x_masks[worst], rest.z_masks[worst]) or "the identity"
                raise PartitionError(
                    f"parts: do not sum to the operator ({text} lacks {missing!r}); add what is missing, "
                    "or use Partition.of(operator, rule)",
                    argument="parts",
                )

    def shuffled(self, seed: int) -> Partition:
        """Put the parts in a random order.

        Parameters
        ----------
        seed : int
            At least 0. One seed gives one order on every machine.

        Returns
        -------
        Partition

        Raises
        ------
        PartitionError
            `seed` is not an integer of at least 0.

        Notes
        -----
        Fisher-Yates exchanges driven by the Mersenne Twister of Python's `random.Random`.

        Examples
        --------
        >>> import trueturn as tt
        >>> partition = tt.Partition.of(tt.Operator("X_0 + Y_0 + Z_0"), "single")
        >>> partition.shuffled(1) == partition.shuffled(1)
        True
        """
        remedy = "give an integer of at least 0"
        number = whole_number("seed", seed, remedy)
        if number < 0:
            raise PartitionError(f"seed: is negative ({seed}); {remedy}", argument="seed")
        order = list(range(len(self._parts)))
        draw = random.Random(number)
        for last in range(len(order) - 1, 0, -1):
            other = int(draw.random() * (last + 1))
            order[last], order[other] = order[other], order[last]
        return self._in_order(order, f"shuffled({number})")

    def reordered(self, indices: Sequence[int]) -> Partition:
        """Put the parts in a given order.

        Parameters
        ----------
        indices : sequence of int
            Part ``indices[k]`` of this partition becomes part k; each exactly once.

        Returns
        -------
        Partition

        Raises
        ------
        PartitionError
            `indices` is not an arrangement of 0 … len(parts) - 1.

        Examples
        --------
        >>> import trueturn as tt
        >>> partition = tt.Partition.of(tt.Operator("X_0 + Y_0 + Z_0"), "single")
        >>> [str(part) for part in partition.reordered([2, 0, 1]).parts]
        ['1.0 Z_0', '1.0 X_0', '1.0 Y_0']
        """
        count = len(self._parts)
        remedy = f"give each of the numbers 0 to {count - 1} once" if count else "there are no parts to reorder"
        try:
            entries = list(indices)
        except TypeError:
            raise PartitionError(f"indices: is not a sequence ({indices!r}); {remedy}", argument="indices") from None
        order = [whole_number("indices", entry, remedy) for entry in entries]
        if sorted(order) != list(range(count)):
            raise PartitionError(f"indices: does not arrange the {count} parts ({order}); {remedy}", argument="indices")
        return self._in_order(order, "reordered")

    def gate_saving(self, ladder: str = "ascending") -> Partition:
        """Order parts, and the terms inside them, so that ladders of neighbours cancel.

        Parameters
        ----------
        ladder : {"ascending", "z-first"}
            How a string's qubits are strung together; see `trueturn.ladders.saved_gates`, which counts what
            is saved.

        Returns
        -------
        Partition
            The same parts, terms sorted by ladder inside each, which saves most there. The first part stays
            first; the next is always the one that shares most with the last string.

        Raises
        ------
        ArgumentError
            Unknown ladder.

        Examples
        --------
        >>> import trueturn as tt
        >>> h = tt.Operator("Z_0 Z_1 Z_2 + Z_2 Z_3 + Z_0 Z_1 Z_3")
        >>> print(tt.Partition.of(h, "commuting").gate_saving().parts[0])
        1.0 Z_0 Z_1 Z_2 + 1.0 Z_0 Z_1 Z_3 + 1.0 Z_2 Z_3
        """
        from trueturn.ladders import gate_saving_order, known_ladder

        made = gate_saving_order(self._parts, known_ladder(ladder))
        return self._with_parts([subset(self._parts[part], terms) for part, terms in made], f"gate-saving({ladder})")

    def improved(
        self, formula: Formula | str, *, for_: str | Operator = "norm", seed: int = 0, evaluations: int = 2000
    ) -> Improved:
        """Look for an order of the parts with a smaller leading error.

        Parameters
        ----------
        formula : Formula or str
            Lie or Strang, or a Formula with their stages.
        for_ : {"norm", "rms"} or Operator
            What is to be small of the leading error operator D: ``"norm"``, the sum of |coefficients|, which
            bounds its spectral norm; ``"rms"``, the root of the sum of squares, the error averaged over input
            states; an observable O, the sum of |coefficients| of i[D, O].
        seed : int
            At least 0; one seed gives one result.
        evaluations : int
            Most orders to look at. All are tried where there are no more (6 parts with the default).

        Returns
        -------
        Improved
            The partition in its new order, and the figure before and after, which never rises; on up to 10 qubits
            also the measured error of one real step, and orders for which that rises are not taken.

        Raises
        ------
        FormulaError
            A formula whose leading error is not at hand; `choices` names those that are.
        ArgumentError
            `for_`, `seed` or `evaluations` out of range.
        OperatorError, PartitionError
            An observable on other qubits; too many nested brackets.

        Notes
        -----
        A step τ is exp(-iτ(H + τ^p D + …)) for order p; D is made of brackets (`trueturn.leading_error`), parts²
        (Lie) or parts³ (Strang) of them, fewer for local parts. Its figure is an estimate to leading order.

        Examples
        --------
        >>> import trueturn as tt
        >>> partition = tt.Partition([tt.Operator("Z_0"), tt.Operator("Z_0"), tt.Operator("X_0")])
        >>> found = partition.improved("lie")
        >>> print(found.gain, round(found.measured_gain))
        inf 64
        """
        from trueturn.error_saving import improve

        return improve(self, formula, for_, seed, evaluations)

    def _in_order(self, order: list[int], note: str) -> Partition:
        return self._with_parts([self._parts[k] for k in order], note)

    def _with_parts(self, parts: list[Operator], note: str) -> Partition:
        made = Partition.__new__(Partition)
        made._parts = tuple(parts)
        made._identity, made._qubits, made._rule = self._identity, self._qubits, f"{self._rule} {note}"
        return made

    def _key(self) -> tuple[object, ...]:
        return self._qubits, self._identity, self._parts

    def __len__(self) -> int:
        return len(self._parts)

    def __eq__(self, other: object) -> bool:
        return self._key() == other._key() if isinstance(other, Partition) else NotImplemented

    def __hash__(self) -> int:
        return hash(self._key())

    def __repr__(self) -> str:
        sizes = ", ".join(str(len(part)) for part in self._parts[:8])
        more = ", …" if len(self._parts) > 8 else ""
        count = len(self._parts)
        return f"<Partition {self._rule!r} of {self._qubits} qubits: {count} parts of {sizes}{more} terms>"
