"""Hermitian operators as real combinations of Pauli strings."""

from __future__ import annotations

import math
import numbers
import operator as _builtin
import os
import re
import tempfile
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any, final

import numpy as np
import numpy.typing as npt
import scipy.sparse
import scipy.sparse.linalg

from trueturn import _apply, _memory
from trueturn._native import Terms
from trueturn.errors import MemoryRefusedError, OperatorError, TermError

__all__ = ["Operator"]

MAX_QUBITS = 128
DENSE_QUBITS = 12
_QUBITS_COMMENT = re.compile(r"^[ \t]*#[ \t]*qubits:[ \t]*(\S*)[ \t]*$", re.MULTILINE)


@final
class Operator:
    """A real combination of Pauli strings, hence Hermitian: Hamiltonians and observables alike.

    Parameters
    ----------
    text : str
        The written notation, such as ``"-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25"``. A bare number is the identity term. Letters are
        X, Y, Z; the qubit number may stand in braces (``Z_{10}``). A missing coefficient is 1. A line break ends a term
        (unless it follows a sign) and ``#`` starts a comment. Factors on one qubit multiply out: ``X_0 X_0`` is 1.
    qubits : int, optional
        Number of qubits acted on, 1 to 128. By default just enough for the qubits named, at least 1.

    Raises
    ------
    TermError
        If the text does not parse or a term is not Hermitian (``X_0 Y_0``, complex coefficients); carries `text`, the
        offending piece, and `position`, its (line, column).
    OperatorError
        If `qubits` is out of range or repeated terms add up beyond double precision; carries `argument`.

    Notes
    -----
    Immutable. Terms keep their order; repeated strings merge at their first occurrence, and sums that are exactly zero are
    dropped while almost-zero ones are kept. Binary operations act on the larger number of qubits of the two.

    Two operators are equal when they have the same strings with exactly the same coefficients, in any order; the number of
    qubits is not compared, since ``Z_0`` names the same operator however many idle qubits stand beside it. For equality up
    to rounding there is `near`.

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

    def __init__(self, text: str, qubits: int | None = None) -> None:
        if not isinstance(text, str):
            raise OperatorError(
                f"text: not a string ({type(text).__name__}); give terms such as '0.5 X_0', or use gather or from_masks",
                argument="text",
            )
        self._terms = Terms.parse(text, _checked_qubits(qubits))

    @classmethod
    def _of(cls, terms: Terms) -> Operator:
        made = cls.__new__(cls)
        made._terms = terms
        return made

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
        qubits = _checked_qubits(qubits)
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
            value = _real(coefficient, name)
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
            Bit q of a mask belongs to qubit q. (x bit, z bit) is I = (0, 0), X = (1, 0), Y = (1, 1), Z = (0, 1).
        coefficients : array_like, shape (m,), float
        qubits : int, optional
            As for the constructor.

        Returns
        -------
        Operator

        Raises
        ------
        OperatorError
            If lengths differ, a mask is no integer from 0 to 2**128 - 1 or needs more qubits than given, or a coefficient
            is not a finite real number.

        Examples
        --------
        >>> print(Operator.from_masks([0b01, 0b11], [0b10, 0b10], [0.5, -2.0], qubits=2))
        0.5 X_0 Z_1 - 2.0 X_0 Y_1
        """
        values = _real_array(coefficients)
        return cls._of(Terms.from_masks(_masks(x, "x"), _masks(z, "z"), values, _checked_qubits(qubits)))

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
        name = os.fspath(path)
        try:
            text = Path(path).read_text(encoding="utf-8")
        except UnicodeDecodeError as error:
            raise OperatorError(f"{name}: not UTF-8 text (byte {error.start}); give a .terms file", argument="path") from None
        stated = _QUBITS_COMMENT.search(text)
        qubits = None
        if stated is not None:
            if not stated[1].isascii() or not stated[1].isdigit():
                raise OperatorError(
                    f"{name}: the qubits comment holds no number ({stated[1]!r}); write '# qubits: 4'", argument="path"
                )
            qubits = int(stated[1])
        try:
            return cls(text, qubits)
        except TermError as error:
            raise _renamed(error, name) from None

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
        target = Path(path)
        lines = str(self).replace(" + ", "\n").replace(" - ", "\n-")
        handle, temporary = tempfile.mkstemp(dir=target.parent, prefix=f".{target.name}.", suffix=".part")
        try:
            with os.fdopen(handle, "w", encoding="utf-8", newline="\n") as file:
                file.write(f"# qubits: {self.qubits}\n{lines}\n")
            os.chmod(temporary, 0o666 & ~_umask())
            os.replace(temporary, target)
        except BaseException:
            Path(temporary).unlink(missing_ok=True)
            raise

    @property
    def qubits(self) -> int:
        """Number of qubits acted on."""
        return self._terms.qubits

    @property
    def coefficients(self) -> npt.NDArray[np.float64]:
        """Coefficients in the order of the terms: ndarray, shape (len(self),), float64, read-only."""
        try:
            return self._coefficients
        except AttributeError:
            self._coefficients: npt.NDArray[np.float64] = _frozen(self._terms.coefficients())
            return self._coefficients

    @property
    def x_masks(self) -> npt.NDArray[np.object_]:
        """Masks of the qubits that carry X or Y: ndarray of Python integers (dtype object), shape (len(self),), read-only.

        Masks have up to 128 bits, more than any integer type of numpy.
        """
        try:
            return self._x_masks
        except AttributeError:
            self._x_masks: npt.NDArray[np.object_] = _frozen(_objects(self._terms.x_masks()))
            return self._x_masks

    @property
    def z_masks(self) -> npt.NDArray[np.object_]:
        """Masks of the qubits that carry Z or Y, like `x_masks`."""
        try:
            return self._z_masks
        except AttributeError:
            self._z_masks: npt.NDArray[np.object_] = _frozen(_objects(self._terms.z_masks()))
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

        A product of operators that do not commute is not Hermitian and is refused; rounding is allowed for, see
        `bracket_vanishes`. The cost is one multiplication for each pair of terms.
        """
        if isinstance(other, Operator):
            return self._of(self._terms.times(other._terms))
        if not isinstance(other, numbers.Number):
            return NotImplemented
        return self._of(self._terms.scaled(_real(other, "factor")))

    def __rmul__(self, other: float) -> Operator:
        return self.__mul__(other)

    def __truediv__(self, other: float) -> Operator:
        if not isinstance(other, numbers.Number):
            return NotImplemented
        divisor = _real(other, "divisor")
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
        value = np.array([_real(other, "number")])
        return self._of(Terms.from_masks([0], [0], value, None))

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Operator):
            return NotImplemented
        return self._terms.same_as(other._terms)

    def __hash__(self) -> int:
        try:
            return self._hash
        except AttributeError:
            terms = zip(self.x_masks.tolist(), self.z_masks.tolist(), self.coefficients.tolist(), strict=True)
            self._hash: int = hash(frozenset(terms))
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
        tolerance = _real(atol, "atol")
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

        Notes
        -----
        Only terms that meet on some qubit are looked at, so local operators of 10^5 terms take seconds. Each coefficient is
        within m u Σ|contributions| of the exact one, u = 2^-53, for m contributions.

        Examples
        --------
        >>> print(Operator("X_0").bracket(Operator("Y_0")))
        -2.0 Z_0
        """
        return self._of(self._terms.bracket(_operator(other)._terms))

    def bracket_vanishes(self, other: Operator) -> bool:
        """Say whether the operators commute.

        Parameters
        ----------
        other : Operator

        Returns
        -------
        bool
            True when each coefficient of the bracket is at most (m + 1) u Σ|contributions| for its m contributions,
            u = 2^-53: what rounding alone can leave of an exact zero.

        Raises
        ------
        OperatorError
            If `other` is no operator or a coefficient overflows.

        References
        ----------
        N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., SIAM (2002), section 4.2.

        Examples
        --------
        >>> bond = Operator("X_0 X_1 + Y_0 Y_1 + Z_0 Z_1")
        >>> bond.bracket_vanishes(Operator("Z_0 + Z_1")), bond.bracket_vanishes(Operator("Z_0"))
        (True, False)
        """
        return self._terms.bracket_vanishes(_operator(other)._terms)

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
            If an old qubit is out of range, a new one is not within 0 to 127, or two qubits in use get one number.

        Examples
        --------
        >>> print(Operator("X_0 Z_1").relabel({0: 1, 1: 0}))
        1.0 Z_0 X_1
        """
        new_names = list(range(self.qubits))
        for old, new in names.items():
            for role, qubit, limit in (("old", old, self.qubits), ("new", new, MAX_QUBITS)):
                if isinstance(qubit, bool) or not isinstance(qubit, numbers.Integral) or not 0 <= qubit < limit:
                    raise OperatorError(
                        f"names: {role} qubit out of range ({qubit!r}); give integers from 0 to {limit - 1}",
                        argument="names",
                    )
            new_names[int(old)] = int(new)
        return self._of(self._terms.relabelled(new_names))

    def one_norm(self) -> float:
        """Return Σ|c| over all terms, the identity included, correctly rounded. It bounds the spectral norm."""
        return math.fsum(np.abs(self.coefficients))

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
        size = 1 << self.qubits
        needed = 16 * size * size
        if self.qubits > DENSE_QUBITS:
            raise MemoryRefusedError(
                f"dense: too many qubits ({self.qubits}, which need {_memory.readable(needed)}); at most {DENSE_QUBITS} "
                "are allowed, use sparse() or linear_operator()",
                needed=needed,
                available=_memory.available_bytes(),
                largest_qubits=DENSE_QUBITS,
            )
        _memory.require(needed + 64 * size, "dense", lambda qubits: (16 << 2 * qubits) + (64 << qubits))
        matrix = np.zeros((size, size), dtype=np.complex128)
        columns = np.arange(size)
        for x, entries in self._diagonals():
            matrix[columns ^ x, columns] += entries
        return matrix

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
        masks = sorted(set(self.x_masks.tolist()))
        count = max(1, len(masks))
        _memory.require(
            48 * (count + 2) << self.qubits, "sparse", lambda qubits: 48 * (count + 2) << qubits
        )
        size = 1 << self.qubits
        index_type = np.int32 if size * count < 2**31 else np.int64
        rows = np.arange(size, dtype=index_type)
        data = np.zeros((size, len(masks)), dtype=np.complex128)
        columns = np.empty((size, len(masks)), dtype=index_type)
        for x, entries in self._diagonals():
            place = masks.index(x)
            columns[:, place] = rows ^ x
            data[:, place] = entries[columns[:, place]]
        starts = np.arange(size + 1, dtype=index_type) * len(masks)
        matrix = scipy.sparse.csr_matrix((data.ravel(), columns.ravel(), starts), shape=(size, size))
        matrix.eliminate_zeros()
        matrix.sort_indices()
        return matrix

    def _diagonals(self) -> Iterable[tuple[int, npt.NDArray[np.complex128]]]:
        """For each distinct x mask, the entries at row k ^ x of each column k."""
        by_mask: dict[int, list[int]] = {}
        for place, x in enumerate(self.x_masks):
            by_mask.setdefault(x, []).append(place)
        for x, places in by_mask.items():
            entries = np.zeros(1 << self.qubits, dtype=np.complex128)
            for place in places:
                z = self.z_masks[place]
                factor = self.coefficients[place] * 1j ** ((x & z).bit_count() % 4)
                entries += factor * _apply.parity_signs(z, self.qubits)
            yield x, entries

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
        _memory.require(2 * 16 << self.qubits, "linear_operator", 2)
        size = 1 << self.qubits

        def times(vector: npt.NDArray[Any]) -> npt.NDArray[np.complex128]:
            return _apply.operator_times(self, np.ascontiguousarray(vector.reshape(size), dtype=np.complex128))

        return scipy.sparse.linalg.LinearOperator((size, size), matvec=times, rmatvec=times, dtype=np.complex128)

    def __str__(self) -> str:
        return self._terms.text()

    def __repr__(self) -> str:
        shown = 4
        if len(self) <= shown:
            return f"Operator({str(self)!r}, qubits={self.qubits})"
        first = Terms.from_masks(
            self.x_masks[:shown].tolist(), self.z_masks[:shown].tolist(), self.coefficients[:shown], self.qubits
        )
        return f"<Operator on {self.qubits} qubits, {len(self)} terms: {first.text()} …>"

    def __reduce__(self) -> tuple[Any, ...]:
        return _rebuild, (self.x_masks.tolist(), self.z_masks.tolist(), np.array(self.coefficients), self.qubits)


def _rebuild(x: list[int], z: list[int], coefficients: npt.NDArray[np.float64], qubits: int) -> Operator:
    """Undo `Operator.__reduce__`, which lets operators travel to other processes."""
    return Operator.from_masks(x, z, coefficients, qubits)


def _operator(other: object) -> Operator:
    if not isinstance(other, Operator):
        raise OperatorError(f"other: not an Operator ({type(other).__name__}); give an Operator", argument="other")
    return other


def _checked_qubits(qubits: object) -> int | None:
    if qubits is None:
        return None
    if isinstance(qubits, bool) or not isinstance(qubits, numbers.Integral) or not 1 <= qubits <= MAX_QUBITS:
        raise OperatorError(f"qubits: out of range ({qubits!r}); give an integer from 1 to {MAX_QUBITS}", argument="qubits")
    return int(qubits)


def _real(value: object, name: str) -> float:
    """A finite float, or an error that names the argument."""
    argument = name.partition("[")[0]
    if isinstance(value, bool) or not isinstance(value, numbers.Real):
        raise OperatorError(f"{name}: not a real number ({value!r}); give a finite real number", argument=argument)
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise OperatorError(f"{name}: not finite ({value!r}); give a finite real number", argument=argument)
    return number


def _real_array(coefficients: npt.ArrayLike) -> npt.NDArray[np.float64]:
    values = np.asarray(coefficients if hasattr(coefficients, "__len__") else list(coefficients))  # type: ignore[arg-type]
    if values.ndim != 1:
        raise OperatorError(
            f"coefficients: not one-dimensional (shape {values.shape}); give one number for each term",
            argument="coefficients",
        )
    if values.size == 0:
        return np.zeros(0)
    if values.dtype.kind in "fiu":
        with np.errstate(over="ignore"):
            return np.ascontiguousarray(values, dtype=np.float64)
    return np.array([_real(value, f"coefficients[{number}]") for number, value in enumerate(values.tolist())])


def _masks(values: npt.ArrayLike | Iterable[int], name: str) -> list[int]:
    entries = values.tolist() if isinstance(values, np.ndarray) else values
    try:
        masks = [_builtin.index(mask) for mask in entries]  # type: ignore[union-attr]
    except TypeError:
        raise OperatorError(f"{name}: not a sequence of integers ({values!r}); give bit masks", argument=name) from None
    for number, mask in enumerate(masks):
        if not 0 <= mask < 1 << MAX_QUBITS:
            raise OperatorError(
                f"{name}[{number}]: out of range ({mask}); give a bit mask of at most {MAX_QUBITS} qubits", argument=name
            )
    return masks


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


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
