"""Partitions: a Hamiltonian as ordered parts, each of which can be exponentiated exactly.

A part's terms commute pairwise, so the exponential of a part is a product of rotations without error; all the
error of a product formula comes from parts that do not commute with each other. Which terms share a part, and
the order of the parts, set that error.
"""

from __future__ import annotations

import difflib
import random
from collections.abc import Iterable, Sequence
from operator import index
from typing import final

import numpy as np

from trueturn.errors import InternalError, PartitionError
from trueturn.operator import Operator
from trueturn.partition_rules import RULES, string_text, subset

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
        given = _operators(parts)
        qubits = given[0].qubits
        for number, part in enumerate(given):
            if part.qubits != qubits:
                raise PartitionError(
                    f"parts: part {number} acts on {part.qubits} qubits and part 0 on {qubits}; "
                    f"build every part with qubits={max(p.qubits for p in given)}",
                    argument="parts",
                )
            _check_commuting(number, part)
        self._parts = tuple(part for part in (p.without_identity() for p in given) if len(part))
        self._identity = float(np.sum([part.identity_coefficient for part in given]))
        self._qubits = qubits
        self._rule = "given"

    @classmethod
    def of(cls, operator: Operator, rule: str) -> Partition:
        """Distribute the terms of an operator over parts.

        Parameters
        ----------
        operator : Operator
        rule : {"single", "commuting", "bond", "axis", "magnitude"}
            - ``single``: each term a part of its own, in the given order.
            - ``magnitude``: the same, largest absolute coefficient first; equal ones keep their order.
            - ``commuting``: few parts; each term joins the first part with all of whose terms it commutes.
            - ``bond``: two-qubit terms are edges of a graph, coloured so that edges of one colour share no
              qubit. One part for each colour with all commuting terms of its edges; strings of an edge that
              do not commute with those go into further parts right after. One-qubit terms follow in
              commuting parts of their own.
            - ``axis``: strings of X alone, of Y alone, of Z alone, then the others in commuting parts.

        Returns
        -------
        Partition
            Made of the operator's terms with unchanged coefficients, each in exactly one part, in the given
            order inside a part. Deterministic.

        Raises
        ------
        PartitionError
            Unknown rule, or ``bond`` for an operator with a term on more than two qubits.

        Notes
        -----
        ``bond`` gives the even and the odd bonds of a chain, two parts on rings of even length,
        and at most one more part than the largest number of bonds at a qubit when all strings of a bond
        commute.

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
        made._identity = operator.identity_coefficient
        made._qubits = operator.qubits
        made._rule = rule
        if made.operator() != operator or not all(map(_commutes, made._parts)):
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
        number = _integer("seed", seed, "give an integer of at least 0")
        if number < 0:
            raise PartitionError(f"seed: is negative ({seed}); give an integer of at least 0", argument="seed")
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
        order = [_integer("indices", entry, remedy) for entry in entries]
        if sorted(order) != list(range(count)):
            raise PartitionError(f"indices: does not arrange the {count} parts ({order}); {remedy}", argument="indices")
        return self._in_order(order, "reordered")

    def _in_order(self, order: list[int], note: str) -> Partition:
        made = Partition.__new__(Partition)
        made._parts = tuple(self._parts[k] for k in order)
        made._identity, made._qubits = self._identity, self._qubits
        made._rule = f"{self._rule} {note}"
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


def _commutes(part: Operator) -> bool:
    return part._terms.first_anticommuting_pair() is None


def _check_commuting(number: int, part: Operator) -> None:
    pair = part._terms.first_anticommuting_pair()
    if pair is not None:
        first, second = (string_text(part.x_masks[term], part.z_masks[term]) for term in pair)
        raise PartitionError(
            f"parts: {first} and {second} in part {number} do not commute; put them into different parts, "
            "or let Partition.of(operator, 'commuting') distribute the terms",
            argument="parts",
        )


def _operators(parts: object) -> list[Operator]:
    remedy = "give a sequence of Operators, or use Partition.of(operator, rule)"
    if isinstance(parts, Operator) or not isinstance(parts, Iterable):
        raise PartitionError(f"parts: is not a sequence of Operators ({parts!r}); {remedy}", argument="parts")
    given = list(parts)
    if not given:
        raise PartitionError(f"parts: is empty ({parts!r}); {remedy}", argument="parts")
    for number, part in enumerate(given):
        if not isinstance(part, Operator):
            raise PartitionError(f"parts: part {number} is not an Operator ({part!r}); {remedy}", argument="parts")
    return given


def _integer(argument: str, value: object, remedy: str) -> int:
    try:
        if isinstance(value, bool):
            raise TypeError
        return index(value)  # type: ignore[arg-type]
    except TypeError:
        raise PartitionError(f"{argument}: is not an integer ({value!r}); {remedy}", argument=argument) from None
