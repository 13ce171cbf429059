"""Hermitian operators as real combinations of Pauli strings."""

from __future__ import annotations

import math
import numbers
import os
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, final

import numpy as np
import numpy.typing as npt

from trueturn import _arguments, _matrices, _memory, _terms_file
from trueturn._native import Terms
from trueturn.errors import OperatorError, TermError

if TYPE_CHECKING:
    import scipy.sparse
    import scipy.sparse.linalg

__all__ = ["Operator"]


@final
class Operator:
    """A real combination of Pauli strings, hence Hermitian: Hamiltonians and observables alike.

    Parameters
    ----------
    text : str
        The written notation, such as ``"-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25"``. A bare number is the identity
        term. Letters are X, Y, Z; the qubit number may stand in braces (``Z_{10}``). A missing coefficient
        is 1. A line break ends a term (unless it follows a sign) and ``#`` starts a comment. Factors on one
        qubit multiply out: ``X_0 X_0`` is 1.
    qubits : int, optional
        Number of qubits acted on, 1 to 128. By default just enough for the qubits named, at least 1.

    Raises
    ------
    TermError
        If the text does not parse or a term is not Hermitian (``X_0 Y_0``, complex coefficients); carries
        `text`, the offending piece, and `position`, its (line, column).
    OperatorError
        If `qubits` is out of range or repeated terms add up beyond double precision; carries `argument`.

    Notes
    -----
    Immutable. Terms keep their order; repeated strings merge at their first occurrence, and sums that are
    exactly zero are dropped while almost-zero ones are kept. Binary operations act on the larger number of
    qubits of the two.

    Two operators are equal when they have the same strings with exactly the same coefficients, in any
    order; the number of qubits is not compared, since ``Z_0`` names the same operator however many idle
    qubits stand beside it. For equality up to rounding there is `near`.

    Examples
    --------
    >>> from trueturn import Operator
    >>> hamiltonian = Operator("-1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1")
    >>> hamiltonian.qubits, len(hamiltonian)
    (2, 3)
    >>> print(hamiltonian.bracket(Operator("Z_0")))
    1.0 Y_0
    """

    __slots__ = ("_coefficients", "_hash", "_terms", "_x_masks", "_z_masks")
    __array_ufunc__ = None  # numpy scalars leave arithmetic to us

    _terms: Terms
    _coefficients: npt.NDArray[np.float64] | None
    _x_masks: npt.NDArray[np.object_] | None
    _z_masks: npt.NDArray[np.object_] | None
    _hash: int | None

    def __init__(self, text: str, qubits: int | None = None) -> None:
        if not isinstance(text, str):
            raise OperatorError(
                f"text: not a string ({type(text).__name__}); give terms such as '0.5 X_0', or use gather",
                argument="text",
            )
        self._hold(Terms.parse(text, _arguments.qubit_count(qubits)))

    @classmethod
    def _of(cls, terms: Terms) -> Operator:
        made = cls.__new__(cls)
        made._hold(terms)
        return made

    def _hold(self, terms: Terms) -> None:
        self._terms = terms
        self._coefficients = self._x_masks = self._z_masks = self._hash = None

    @classmethod
    def gather(cls, terms: Iterable[tuple[float, str]], qubits: int | None = None) -> Operator:
        """Add up pairs of a coefficient and the factors of a string.

        Parameters
        ----------
        terms : iterable of (float, str)
            Such as ``[(-1.0, "Z_0 Z_1"), (0.5, "X_0")]``; no factors at all (``""``) is the identity.
        qubits : int, optional
            As for the constructor.

        Returns
        -------
        Operator

        Raises
        ------
        TermError
            If factors do not parse or are not Hermitian; the message says which entry.
        OperatorError
            If an entry is no such pair, or a coefficient is not a finite real number.

        Examples
        --------
        >>> print(Operator.gather([(-1.0, "Z_0 Z_1"), (0.5, "X_0"), (2, "")]))
        -1.0 Z_0 Z_1 + 0.5 X_0 + 2.0
        """
        qubits = _arguments.qubit_count(qubits)
        x: list[int] = []
        z: list[int] = []
        coefficients: list[float] = []
        for number, entry in enumerate(terms):
            name = f"terms[{number}]"
            try:
                coefficient, factors = entry
            except (TypeError, ValueError):
                factors = None
            if not isinstance(factors, str):
                raise OperatorError(f"{name}: not a pair ({entry!r}); give (coefficient, 'X_0 Z_3')", argument="terms")
            value = _arguments.real(coefficient, name)
            try:
                x_mask, z_mask, sign = Terms.parse_factors(factors, qubits)
            except TermError as error:
                raise _renamed(error, name) from None
            x.append(x_mask)
            z.append(z_mask)
            coefficients.append(sign * value)
        return cls._of(Terms.from_masks(x, z, np.array(coefficients, dtype=np.float64), qubits))

    @classmethod
    def from_masks(
        cls,
        x: npt.ArrayLike | Iterable[int],
        z: npt.ArrayLike | Iterable[int],
        coefficients: npt.ArrayLike,
        qubits: int | None = None,
    ) -> Operator:
        """Build an operator from bit masks.

        Parameters
        ----------
        x, z : sequences of int, length m
            Bit q of a mask belongs to qubit q. (x bit, z bit) is I = (0, 0), X = (1, 0), Y = (1, 1), Z =
            (0, 1).
        coefficients : array_like, shape (m,), float
        qubits : int, optional
            As for the constructor.

        Returns
        -------
        Operator

        Raises
        ------
        OperatorError
            If lengths differ, a mask is no integer from 0 to 2**128 - 1 or needs more qubits than given, or
            a coefficient is not a finite real number.

        Examples
        --------
        >>> print(Operator.from_masks([0b01, 0b11], [0b10, 0b10], [0.5, -2.0], qubits=2))
        0.5 X_0 Z_1 - 2.0 X_0 Y_1
        """
        values = _arguments.real_array(coefficients, "coefficients")
        return cls._of(
            Terms.from_masks(_arguments.masks(x, "x"), _arguments.masks(z, "z"), values, _arguments.qubit_count(qubits))
        )

    @classmethod
    def read(cls, path: str | os.PathLike[str]) -> Operator:
        """Read a ``.terms`` file: the written notation, one term a line, with ``#`` comments.

        A comment line ``# qubits: N`` fixes the number of qubits.

        Parameters
        ----------
        path : str or path-like

        Returns
        -------
        Operator

        Raises
        ------
        TermError
            If the file does not parse; the message names file, line and column.
        OperatorError
            If the number of qubits is no number or too small, or the file is not UTF-8 text.
        OSError
            As raised by the system.
        """
        text, qubits = _terms_file.read_text(Path(path))
        try:
            return cls(text, qubits)
        except TermError as error:
            raise _renamed(error, os.fspath(path)) from None

    def write(self, path: str | os.PathLike[str]) -> None:
        """Write a ``.terms`` file that `read` gives back exactly.

        The file is written under a temporary name beside `path` and renamed when complete.

        Parameters
        ----------
        path : str or path-like
            Overwritten if it exists.

        Raises
        ------
        OSError
            As raised by the system; an existing file is then left as it was.
        """
        _terms_file.write_text(Path(path), str(self), self.qubits)

    @property
    def qubits(self) -> int:
        """Number of qubits acted on."""
        return self._terms.qubits

    @property
    def coefficients(self) -> npt.NDArray[np.float64]:
        """Coefficients in the order of the terms: ndarray, shape (len(self),), float64, read-only."""
        if self._coefficients is None:
            self._coefficients = _frozen(self._terms.coefficients())
        return self._coefficients

    @property
    def x_masks(self) -> npt.NDArray[np.object_]:
        """Masks of the qubits that carry X or Y: ndarray of Python integers, shape (len(self),), read-only.

        Masks have up to 128 bits, more than any integer type of numpy, hence the dtype object.
        """
        if self._x_masks is None:
            self._x_masks = _frozen(_objects(self._terms.x_masks()))
        return self._x_masks

    @property
    def z_masks(self) -> npt.NDArray[np.object_]:
        """Masks of the qubits that carry Z or Y, like `x_masks`."""
        if self._z_masks is None:
            self._z_masks = _frozen(_objects(self._terms.z_masks()))
        return self._z_masks

    @property
    def identity_coefficient(self) -> float:
        """Coefficient of the identity term, 0.0 if there is none. Equals the trace over 2**qubits."""
        place = self._identity_place()
        return 0.0 if place is None else float(self.coefficients[place])

    def without_identity(self) -> Operator:
        """Return the traceless part: all terms but the identity, in order."""
        place = self._identity_place()
        if place is None:
            return self
        keep = np.arange(len(self)) != place
        return self._of(
            Terms.from_masks(
                self.x_masks[keep].tolist(), self.z_masks[keep].tolist(), self.coefficients[keep], self.qubits
            )
        )

    def _identity_place(self) -> int | None:
        for place, (x, z) in enumerate(zip(self.x_masks, self.z_masks, strict=True)):
            if x == 0 and z == 0:
                return place
        return None

    def __len__(self) -> int:
        return len(self._terms)

    def __add__(self, other: Operator | float) -> Operator:
        operand = self._operand(other)
        return NotImplemented if operand is None else self._of(self._terms.plus(operand._terms))

    def __radd__(self, other: float) -> Operator:
        operand = self._operand(other)
        return NotImplemented if operand is None else self._of(operand._terms.plus(self._terms))

    def __sub__(self, other: Operator | float) -> Operator:
        operand = self._operand(other)
        return NotImplemented if operand is None else self._of(self._terms.minus(operand._terms))

    def __rsub__(self, other: float) -> Operator:
        operand = self._operand(other)
        return NotImplemented if operand is None else self._of(operand._terms.minus(self._terms))

    def __mul__(self, other: Operator | float) -> Operator:
        """Return a multiple, or the product of two operators that commute.

        A product of operators that do not commute is not Hermitian and is refused; rounding is allowed for,
        see `bracket_vanishes`. The cost is one multiplication for each pair of terms. A result that outgrows
        the memory available raises `MemoryRefusedError`.
        """
        if isinstance(other, Operator):
            return self._of(self._terms.times(other._terms, _memory.allowed_bytes()))
        if not isinstance(other, numbers.Number):
            return NotImplemented
        return self._of(self._terms.scaled(_arguments.real(other, "factor")))

    def __rmul__(self, other: float) -> Operator:
        return self.__mul__(other)

    def __truediv__(self, other: float) -> Operator:
        if not isinstance(other, numbers.Number):
            return NotImplemented
        divisor = _arguments.real(other, "divisor")
        if divisor == 0.0:
            raise OperatorError("divisor: zero (0.0); divide by another number", argument="divisor")
        return self._of(self._terms.divided(divisor))

    def __neg__(self) -> Operator:
        return self._of(self._terms.scaled(-1.0))

    def __pos__(self) -> Operator:
        return self

    def _operand(self, other: object) -> Operator | None:
        """The other side of a sum: an operator, or a number standing for that much identity."""
        if isinstance(other, Operator):
            return other
        if not isinstance(other, numbers.Number):
            return None
        value = np.array([_arguments.real(other, "number")])
        return self._of(Terms.from_masks([0], [0], value, None))

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Operator):
            return NotImplemented
        return self._terms.same_as(other._terms)

    def __hash__(self) -> int:
        if self._hash is None:
            terms = zip(self.x_masks.tolist(), self.z_masks.tolist(), self.coefficients.tolist(), strict=True)
            self._hash = hash(frozenset(terms))
        return self._hash

    def near(self, other: Operator, atol: float) -> bool:
        """Say whether no coefficient differs by more than `atol`.

        Parameters
        ----------
        other : Operator
        atol : float
            Absolute, at least 0; in the units of the coefficients.

        Returns
        -------
        bool

        Raises
        ------
        OperatorError
            If `other` is no operator or `atol` no finite number of at least 0.
        """
        tolerance = _arguments.real(atol, "atol")
        if tolerance < 0:
            raise OperatorError(f"atol: negative ({tolerance}); give at least 0", argument="atol")
        difference = self._terms.minus(_operator(other)._terms)
        return bool(np.all(np.abs(difference.coefficients()) <= tolerance))

    def bracket(self, other: Operator) -> Operator:
        """Return i[A, B] = i(AB - BA), which is Hermitian again.

        Parameters
        ----------
        other : Operator

        Returns
        -------
        Operator
            On the larger number of qubits; coefficients that rounding leaves almost zero are kept.

        Raises
        ------
        OperatorError
            If `other` is no operator or a coefficient overflows.
        MemoryRefusedError
            If the result outgrows the memory available.

        Notes
        -----
        Only terms that meet on some qubit are looked at, so local operators of 10^5 terms take seconds.
        Each coefficient is within m u Σ|contributions| of the exact one, u = 2^-53, for m contributions.

        Examples
        --------
        >>> print(Operator("X_0").bracket(Operator("Y_0")))
        -2.0 Z_0
        """
        return self._of(self._terms.bracket(_operator(other)._terms, _memory.allowed_bytes()))

    def bracket_vanishes(self, other: Operator) -> bool:
        """Say whether the operators commute.

        Parameters
        ----------
        other : Operator

        Returns
        -------
        bool
            True when each coefficient of the bracket is at most (m + 1) u Σ|contributions| for its m
            contributions, u = 2^-53: what rounding alone can leave of an exact zero.

        Raises
        ------
        OperatorError
            If `other` is no operator or a coefficient overflows.
        MemoryRefusedError
            If the result outgrows the memory available.

        References
        ----------
        N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., SIAM (2002), section 4.2.

        Examples
        --------
        >>> bond = Operator("X_0 X_1 + Y_0 Y_1 + Z_0 Z_1")
        >>> bond.bracket_vanishes(Operator("Z_0 + Z_1")), bond.bracket_vanishes(Operator("Z_0"))
        (True, False)
        """
        return self._terms.bracket_vanishes(_operator(other)._terms, _memory.allowed_bytes())

    def support(self) -> tuple[int, ...]:
        """Return the qubits on which some term is not the identity, ascending."""
        mask = 0
        for x, z in zip(self.x_masks, self.z_masks, strict=True):
            mask |= x | z
        return tuple(qubit for qubit in range(self.qubits) if mask >> qubit & 1)

    def relabel(self, names: Mapping[int, int]) -> Operator:
        """Rename qubits.

        Parameters
        ----------
        names : mapping of int to int
            New number of each qubit to rename; the others keep theirs.

        Returns
        -------
        Operator
            On as many qubits as before, or more if a new number asks for it.

        Raises
        ------
        OperatorError
            If an old qubit is out of range, a new one is not within 0 to 127, or two qubits in use get one
            number.

        Examples
        --------
        >>> print(Operator("X_0 Z_1").relabel({0: 1, 1: 0}))
        1.0 Z_0 X_1
        """
        new_names = list(range(self.qubits))
        for old, new in names.items():
            old = _arguments.qubit_number(old, self.qubits, "old qubit", "names")
            new_names[old] = _arguments.qubit_number(new, _arguments.MAX_QUBITS, "new qubit", "names")
        return self._of(self._terms.relabelled(new_names))

    def one_norm(self) -> float:
        """Return Σ|c| over all terms, the identity included, correctly rounded.

        It bounds the spectral norm. Infinite where the sum is beyond double precision.
        """
        try:
            return math.fsum(np.abs(self.coefficients))
        except OverflowError:
            return math.inf

    def spectral_interval(self) -> tuple[float, float]:
        """Return (low, high), proved to enclose every eigenvalue.

        See `trueturn.reference.spectrum.spectral_report` for the method, its cost and the route taken.
        """
        from trueturn.reference.spectrum import spectral_interval

        return spectral_interval(self)

    def dense(self) -> npt.NDArray[np.complex128]:
        """Return the matrix.

        Returns
        -------
        ndarray, shape (2**qubits, 2**qubits), complex128
            Bit q of an index is qubit q.

        Raises
        ------
        MemoryRefusedError
            Above 12 qubits, or if it does not fit; raised before anything is allocated.
        """
        return _matrices.dense(self)

    def sparse(self) -> scipy.sparse.csr_matrix:
        """Return the matrix in compressed rows.

        Returns
        -------
        scipy.sparse.csr_matrix, shape (2**qubits, 2**qubits), complex128
            Indices sorted, exact zeros left out.

        Raises
        ------
        MemoryRefusedError
            If it does not fit; raised before anything is allocated.

        Notes
        -----
        At most one entry in each row for each distinct x mask. While it is made, an entry takes 48 bytes.
        """
        return _matrices.sparse(self)

    def linear_operator(self) -> scipy.sparse.linalg.LinearOperator:
        """Return the operator as something that multiplies vectors, for the solvers of scipy.

        Returns
        -------
        scipy.sparse.linalg.LinearOperator, shape (2**qubits, 2**qubits), complex128

        Raises
        ------
        MemoryRefusedError
            If two state vectors do not fit.
        """
        return _matrices.linear_operator(self)

    def __str__(self) -> str:
        return self._terms.text()

    def __repr__(self) -> str:
        shown = 4
        if len(self) <= shown:
            return f"Operator({str(self)!r}, qubits={self.qubits})"
        first = Terms.from_masks(
            self.x_masks[:shown].tolist(),
            self.z_masks[:shown].tolist(),
            self.coefficients[:shown],
            self.qubits,
        )
        return f"<Operator on {self.qubits} qubits, {len(self)} terms: {first.text()} …>"

    def __reduce__(self) -> tuple[Any, ...]:
        return _rebuild, (
            self.x_masks.tolist(),
            self.z_masks.tolist(),
            np.array(self.coefficients),
            self.qubits,
        )


def _rebuild(x: list[int], z: list[int], coefficients: npt.NDArray[np.float64], qubits: int) -> Operator:
    """Undo `Operator.__reduce__`, which lets operators travel to other processes."""
    return Operator.from_masks(x, z, coefficients, qubits)


def _operator(other: object) -> Operator:
    if not isinstance(other, Operator):
        raise OperatorError(f"other: not an Operator ({type(other).__name__}); give an Operator", argument="other")
    return other


def _objects(values: list[int]) -> npt.NDArray[np.object_]:
    array = np.empty(len(values), dtype=object)
    array[:] = values
    return array


def _frozen(array: npt.NDArray[Any]) -> npt.NDArray[Any]:
    array.flags.writeable = False
    return array


def _renamed(error: TermError, name: str) -> TermError:
    """The same error about another argument than `text`."""
    return TermError(name + str(error).removeprefix("text"), text=error.text, position=error.position)
