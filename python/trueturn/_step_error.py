"""The error of one real short step, from dense matrices: what a better order of the parts is worth in truth.

The sum of |coefficients| of the leading error bounds its spectral norm, and may fall where the norm rises. So on few
qubits one step of length τ, with τ Σ|c| = 0.1, is multiplied out and compared with exp(-iτH).
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from trueturn.formulas.merging import ANGLE_ROUNDINGS
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.state import State

if TYPE_CHECKING:
    from trueturn.formulas import Formula

__all__ = ["STATES", "StepError"]

STATES = 32
"""Random states in which an observable's error is measured."""

_REACH = 0.1  # τ Σ|c|: short enough for the leading term to rule, long enough to stand far above rounding
_TERMS = 12  # of the series of exp: 0.1^13 / 13! is below 1e-22
_UNIT = 2.0**-53

Matrix = npt.NDArray[np.complex128]


class StepError:
    """The error of one step of a formula on the parts of a partition in any order.

    Parameters
    ----------
    partition : Partition
        On few qubits: matrices are dense.
    formula : Formula
    name : {"norm", "rms", "observable"}
        Spectral norm of S - exp(-iτH); its Frobenius norm over 2^(n/2); or the root mean square of
        <S† O S> - <exp(iτH) O exp(-iτH)> in `STATES` random states.
    observable : Operator or None
    seed : int
        Draws the states.

    Attributes
    ----------
    step : float
        τ.
    possible : bool
        False where the parts have no terms, or coefficients so small or large that τ is no ordinary number; such
        an instance cannot be called.
    """

    def __init__(self, partition: Partition, formula: Formula, name: str, observable: Operator | None, seed: int):
        import scipy.sparse  # slow to import, and few need it

        self._formula = formula
        self._name = name
        self._qubits = partition.qubits
        reach = math.fsum(part.one_norm() for part in partition.parts)
        self.step = _REACH / reach if reach else math.inf
        self.possible = 1e-100 < self.step < 1e100
        if not self.possible:
            return
        size = 2**self._qubits
        if observable is None:
            self._start: Matrix = np.eye(size, dtype=np.complex128)
        else:
            columns = [State.random(self._qubits, seed + k).amplitudes for k in range(STATES)]
            self._start = np.stack(columns, axis=1)
            terms = observable.x_masks.tolist(), observable.z_masks.tolist(), observable.coefficients
            self._watched = Operator.from_masks(*terms, self._qubits).dense()
        h = partition.operator().without_identity()
        generator = scipy.sparse.csr_matrix(-1j * self.step * h.dense())
        term, total = self._start, self._start.copy()
        for degree in range(1, _TERMS + 1):
            term = generator @ term / degree
            total += term
        self._exact = total

    def __call__(self, partition: Partition) -> float:
        """Return the error for the parts in this order; 0 where it is all rounding."""
        circuit = self._formula.rotations(Partition(partition.parts), self.step, 1)  # without the identity
        made = np.empty_like(self._start)
        for column in range(made.shape[1]):
            state = State.from_array(np.ascontiguousarray(self._start[:, column]))
            state.apply(circuit, threads=1)
            made[:, column] = state.amplitudes
        # A column is off by the rounding of its rotations and, in the series, some 20 more roundings.
        column_rounding = circuit.rounding_bound(ANGLE_ROUNDINGS, _UNIT) + 20 * _UNIT
        if self._name == "observable":
            gaps = self._values(made) - self._values(self._exact)
            found = math.sqrt(float(np.mean(np.square(gaps))))
            floor = 2 * np.linalg.norm(self._watched, "fro") * (column_rounding + len(made) * _UNIT)
            return found if found > floor else 0.0
        gap = made - self._exact
        if self._name == "rms":
            found = float(np.linalg.norm(gap)) / 2 ** (self._qubits / 2)
            return found if found > column_rounding else 0.0
        found = math.sqrt(max(float(np.linalg.eigvalsh(gap.conj().T @ gap)[-1]), 0.0))
        return found if found > column_rounding * math.sqrt(len(made)) else 0.0

    def _values(self, columns: Matrix) -> npt.NDArray[np.float64]:
        found: npt.NDArray[np.float64] = np.einsum("ij,ij->j", columns.conj(), self._watched @ columns).real
        return found
