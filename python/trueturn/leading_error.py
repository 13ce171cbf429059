"""The leading error of Lie and Strang steps as an operator, for any order of the parts.

A step of length τ is exp(-iτ(H + τ^p D + O(τ^(p+1)))). With B(A, B') = i[A, B'] and G_k the sum of the parts
that come after A_k in time order,

    Lie:     p = 1,  D = -1/2 Σ_k B(G_k, A_k),
    Strang:  p = 2,  D = Σ_k ( 1/12 B(G_k, B(G_k, A_k)) - 1/24 B(A_k, B(A_k, G_k)) ).

Both are sums of brackets of two or three parts whose factors depend on nothing but which part comes first. So
the brackets are computed once, as columns of a sparse matrix over strings, and an order of the parts is a
vector of factors: D = matrix · factors.

References
----------
A. M. Childs, Y. Su, M. C. Tran, N. Wiebe, S. Zhu, "Theory of Trotter error with commutator scaling", Phys.
Rev. X 11, 011020 (2021), whose second-order bound has the norms of these brackets; the series is that of
Baker, Campbell and Hausdorff. From memory; the tests compare D with exact steps.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from trueturn import _memory
from trueturn.errors import PartitionError
from trueturn.operator import Operator

if TYPE_CHECKING:
    import scipy.sparse

__all__ = ["KINDS", "MOST_ENTRIES", "LeadingError"]

KINDS = ("lie", "strang")
MOST_ENTRIES = 2 * 10**6
"""Strings in all brackets together above which the table is refused: half a gigabyte while it is made."""

Order = npt.NDArray[np.intp]


class LeadingError:
    """The operator D of the module's text for every order of some parts.

    Parameters
    ----------
    parts : sequence of Operator
        Each with commuting terms; at least one part.
    kind : str
        ``"lie"`` or ``"strang"``.
    reverse : bool
        True where the first stage runs the parts from last to first.
    observable : Operator, optional
        With it, every D is replaced by i[D, O]: the leading error of the observable in one step.

    Raises
    ------
    PartitionError
        The brackets have more than `MOST_ENTRIES` strings in all.
    """

    def __init__(
        self, parts: Sequence[Operator], kind: str, *, reverse: bool = False, observable: Operator | None = None
    ) -> None:
        self._parts = parts
        self._reverse = reverse
        self._observable = observable
        self._names: list[tuple[int, int, int]] = []  # i, j, k of B(A_i, B(A_j, A_k)); i = -1 for B(A_j, A_k)
        self._rows: dict[tuple[int, int], int] = {}
        self._entries: list[tuple[list[int], npt.NDArray[np.float64]]] = []
        self._count = 0
        self._allowed = _memory.allowed_bytes()
        supports = [_support(part) for part in parts]
        for j in range(len(parts)):
            for k in range(j + 1, len(parts)):
                if supports[j] & supports[k]:
                    self._add_brackets(j, k, kind, supports)
        self._matrix = self._assembled()
        self._i, self._j, self._k = np.array(self._names, dtype=np.intp).reshape(-1, 3).T
        self._factors: Callable[[Order], npt.NDArray[np.float64]] = self._lie if kind == "lie" else self._strang

    def _add_brackets(self, j: int, k: int, kind: str, supports: list[int]) -> None:
        once = self._bracket(self._parts[j], self._parts[k])
        if len(once) == 0:
            return
        if kind == "lie":
            self._add(once, (-1, j, k))
            return
        support = _support(once)
        for i, part in enumerate(self._parts):
            if supports[i] & support:
                self._add(self._bracket(part, once), (i, j, k))

    def _bracket(self, left: Operator, right: Operator) -> Operator:
        """`Operator.bracket`, asking the system for its memory once instead of each time."""
        return Operator._of(left._terms.bracket(right._terms, self._allowed))

    def _add(self, column: Operator, name: tuple[int, int, int]) -> None:
        if self._observable is not None:
            column = self._bracket(column, self._observable)
        if len(column) == 0:
            return
        strings = zip(column.x_masks.tolist(), column.z_masks.tolist(), strict=True)
        rows = [self._rows.setdefault(string, len(self._rows)) for string in strings]
        self._count += len(rows)
        if self._count > MOST_ENTRIES:
            raise PartitionError(
                f"parts: have too many nested brackets ({len(self._parts)} parts, more than {MOST_ENTRIES} strings); "
                "group the terms into fewer parts, or improve the order for 'lie'",
                argument="parts",
            )
        self._names.append(name)
        self._entries.append((rows, column.coefficients))

    def _assembled(self) -> scipy.sparse.csr_matrix:
        import scipy.sparse  # slow to import, and few need it

        shape = (len(self._rows), len(self._entries))
        if not self._entries:
            return scipy.sparse.csr_matrix(shape)
        rows = np.concatenate([np.array(rows, dtype=np.intp) for rows, _ in self._entries])
        columns = np.repeat(np.arange(len(self._entries)), [len(rows) for rows, _ in self._entries])
        values = np.concatenate([values for _, values in self._entries])
        self._entries = []
        made = scipy.sparse.csr_matrix((values, (rows, columns)), shape=shape)
        made.sort_indices()
        return made

    def coefficients(self, order: Sequence[int]) -> npt.NDArray[np.float64]:
        """Return the coefficients of D for an order of the parts.

        Parameters
        ----------
        order : sequence of int
            ``order[place]`` is the part that stands there.

        Returns
        -------
        ndarray, shape (strings,), float64
        """
        place = np.empty(len(self._parts), dtype=np.intp)
        place[np.asarray(order, dtype=np.intp)] = np.arange(len(self._parts))
        if self._reverse:
            place = len(self._parts) - 1 - place
        found: npt.NDArray[np.float64] = self._matrix @ self._factors(place)
        return found

    def operator(self, order: Sequence[int]) -> Operator:
        """Return D (or i[D, O]) for an order of the parts."""
        x, z = [x for x, _ in self._rows], [z for _, z in self._rows]
        return Operator.from_masks(x, z, self.coefficients(order), self._parts[0].qubits)

    def one_norm(self, order: Sequence[int]) -> float:
        """Return Σ|c| of D, which bounds its spectral norm."""
        return float(np.abs(self.coefficients(order)).sum())

    def root_mean_square(self, order: Sequence[int]) -> float:
        """Return √Σc² of D: its Frobenius norm over 2^(n/2), the error averaged over input states."""
        return math.sqrt(float(np.square(self.coefficients(order)).sum()))

    def _lie(self, place: Order) -> npt.NDArray[np.float64]:
        return np.where(place[self._j] > place[self._k], -0.5, 0.5)

    def _strang(self, place: Order) -> npt.NDArray[np.float64]:
        i, j, k = place[self._i], place[self._j], place[self._k]
        outer = (k < np.minimum(i, j)).astype(np.float64) - (j < np.minimum(i, k))
        inner = ((i == k) & (k < j)).astype(np.float64) - ((i == j) & (j < k))
        factors: npt.NDArray[np.float64] = outer / 12.0 + inner / 24.0
        return factors


def _support(operator: Operator) -> int:
    mask = 0
    for x, z in zip(operator.x_masks, operator.z_masks, strict=True):
        mask |= int(x) | int(z)
    return mask
