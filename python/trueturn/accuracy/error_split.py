"""Which part of a leading error can be removed, which only rescales time, and which accumulates.

With a circuit that simulates H + τ^p E, look for a Hermitian G with E = i[H, G] + E_rest. Since

    exp(-iτ^p G) H exp(iτ^p G) = H + τ^p i[H, G] + O(τ^(2p)),

the share i[H, G] is that of a fixed change of basis: the circuit is V exp(-iHt) V† with V = exp(-iτ^p G), so acting
with V† after it and V before it removes the share at leading order, and left alone it errs by at most 2 τ^p ‖G‖
however long the time. E_rest accumulates with time.

G runs over the strings of a stated range, and is found by least squares in the Frobenius norm, in which strings are
orthogonal. Only strings that are linked to E by brackets with terms of H matter: in least squares an unlinked column
meets a zero right-hand side. They are found by search, so that the problem is as small as it can be.

H itself is orthogonal to every i[H, G], since tr(H [H, G]) = 0. So the three shares

    E = i[H, G] + c H + rest,   c = ⟨E, H⟩ / ⟨H, H⟩  (identity removed),

are orthogonal where G is optimal, and their squared sizes are fractions that add up to 1. The share along H runs the
clock at the rate 1 + c τ^p; a user who knows c corrects it by choosing another time. All three are facts of the
Frobenius norm, an average over states: one state can see more or less.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from trueturn.accuracy.pauli_links import Links
from trueturn.errors import ArgumentError, OperatorError
from trueturn.operator import Operator
from trueturn.randomised.checks import as_int, checked_operator

if TYPE_CHECKING:
    import scipy.sparse

__all__ = ["ErrorSplit", "split_error"]

_PRECISION = 1e-13
_MOST_ITERATIONS = 20_000


@dataclass(frozen=True)
class ErrorSplit:
    """A leading error as i[H, G] + c H + rest.

    Attributes
    ----------
    error : Operator
        E, the identity removed.
    generator : Operator
        G.
    removable, along, rest : Operator
        i[H, G], c H and what is left; they sum to E.
    rescaling : float
        c: time runs at the rate 1 + c τ^p.
    removable_share, rescaling_share, rest_share : float
        Squared Frobenius norms of the three over that of E. They add up to 1 within `optimality`; all 0 where E is.
    weight, diameter : int
        The range of G: most qubits in a string, and most bonds between two of its qubits.
    candidates : int
        Strings that G was searched on.
    optimality : float
        |⟨i[H, G], E - i[H, G]⟩| / ‖E‖² in the Frobenius norm: 0 for the exact least-squares solution.
    seen_share : float or None
        With an observable O: the part of Σc² in strings of E that fail to commute with some string of O. The others
        do not move O at first; they do so through later times.
    seen_rest_share : float or None
        The same of c H + rest, still over that of E: what the observable sees of the accumulating part.
    """

    error: Operator
    generator: Operator
    removable: Operator
    along: Operator
    rest: Operator
    rescaling: float
    removable_share: float
    rescaling_share: float
    rest_share: float
    weight: int
    diameter: int
    candidates: int
    optimality: float
    seen_share: float | None
    seen_rest_share: float | None

    def __repr__(self) -> str:
        return (
            f"<ErrorSplit: {self.removable_share:.1%} removable, {self.rescaling_share:.1%} time rescaling, "
            f"{self.rest_share:.1%} rest; G on {self.candidates} strings of weight {self.weight} and diameter "
            f"{self.diameter} at most>"
        )


def split_error(
    error: Operator,
    hamiltonian: Operator,
    *,
    weight: int | None = None,
    diameter: int | None = None,
    observable: Operator | None = None,
) -> ErrorSplit:
    """Split an error as i[H, G] + c H + rest, with G on strings up to a range.

    Parameters
    ----------
    error : Operator
        E, such as ``simulated_series(...).leading``.
    hamiltonian : Operator
        H, on as many qubits.
    weight : int, optional
        Most qubits in a string of G. Default: as in E.
    diameter : int, optional
        Most bonds between two qubits of a string of G, on the graph whose bonds join qubits that share a term of H.
        Default: as in E.
    observable : Operator, optional
        Asks for `seen_share`.

    Returns
    -------
    ErrorSplit

    Raises
    ------
    OperatorError
        An argument is no Operator, they differ in qubits, or H has no terms.
    ArgumentError
        `weight` or `diameter` is not a whole number in range, or the range holds too many strings.

    Notes
    -----
    Sparse least squares [1]_ on a matrix of candidates × (strings they reach); each candidate costs one look at the
    terms of H that meet it. A larger range can only raise the removable share.

    References
    ----------
    .. [1] D. C.-L. Fong, M. Saunders, LSMR: an iterative algorithm for sparse least-squares problems, SIAM J. Sci.
       Comput. 33, 2950 (2011).

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0 + X_1"), tt.Operator("Z_0 Z_1")])
    >>> split = tt.simulated_series("lie", parts, 2).split()  # with two parts, Lie is Strang seen from elsewhere
    >>> round(split.removable_share, 12)
    1.0
    """
    bare, h = _checked(error, hamiltonian, observable)
    links = Links(h)
    strings = [(int(x), int(z)) for x, z in zip(bare.x_masks, bare.z_masks, strict=True)]
    most_weight = _range("weight", weight, max(((x | z).bit_count() for x, z in strings), default=1), 1)
    most_diameter = _range("diameter", diameter, max((links.diameter(x | z) for x, z in strings), default=0), 0)
    found = links.linked(strings, most_weight, most_diameter)
    generator, removable = bare * 0.0, bare * 0.0
    if found.columns:
        values = _least_squares(found.matrix(), found.right_hand_side(bare))
        generator = Operator.from_masks(
            [x for x, _ in found.columns], [z for _, z in found.columns], values, hamiltonian.qubits
        )
        removable = h.bracket(generator)
    left = bare - removable
    squared, size = _inner(bare, bare), _inner(h, h)
    rescaling = _inner(bare, h) / size
    along = h * rescaling
    rest = left - along

    def share(operator: Operator) -> float:
        return _inner(operator, operator) / squared if squared else 0.0

    return ErrorSplit(
        error=bare,
        generator=generator,
        removable=removable,
        along=along,
        rest=rest,
        rescaling=rescaling,
        removable_share=share(removable),
        rescaling_share=share(along),
        rest_share=share(rest),
        weight=most_weight,
        diameter=most_diameter,
        candidates=len(found.columns),
        optimality=abs(_inner(removable, left)) / squared if squared else 0.0,
        seen_share=None if observable is None else share(_seen(bare, observable)),
        seen_rest_share=None if observable is None else share(_seen(left, observable)),
    )


def _least_squares(matrix: scipy.sparse.csr_matrix, target: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
    from scipy.sparse.linalg import lsmr  # slow to import, and few need it

    found: npt.NDArray[np.float64] = lsmr(
        matrix, target, atol=_PRECISION, btol=_PRECISION, conlim=0.0, maxiter=_MOST_ITERATIONS
    )[0]
    return found


def _inner(left: Operator, right: Operator) -> float:
    """tr(AB) / 2^n: the sum of products of coefficients of equal strings."""
    other = dict(zip(zip(right.x_masks, right.z_masks, strict=True), right.coefficients.tolist(), strict=True))
    strings = zip(left.x_masks, left.z_masks, strict=True)
    return math.fsum(c * other.get(s, 0.0) for s, c in zip(strings, left.coefficients.tolist(), strict=True))


def _seen(error: Operator, observable: Operator) -> Operator:
    """The strings of an error that fail to commute with some string of the observable."""
    watched = [(int(x), int(z)) for x, z in zip(observable.x_masks, observable.z_masks, strict=True)]
    keep = [
        any(((x & wz).bit_count() + (z & wx).bit_count()) % 2 for wx, wz in watched)
        for x, z in zip(error.x_masks, error.z_masks, strict=True)
    ]
    places = np.flatnonzero(keep)
    return Operator.from_masks(error.x_masks[places], error.z_masks[places], error.coefficients[places], error.qubits)


def _checked(error: Operator, hamiltonian: Operator, observable: Operator | None) -> tuple[Operator, Operator]:
    bare = checked_operator("error", error).without_identity()
    h = checked_operator("hamiltonian", hamiltonian).without_identity()
    if len(h) == 0:
        raise OperatorError("hamiltonian: has no terms (0.0); give one with at least one", argument="hamiltonian")
    others = {"error": error, **({} if observable is None else {"observable": observable})}
    for name, operator in others.items():
        if checked_operator(name, operator).qubits != hamiltonian.qubits:
            raise OperatorError(
                f"{name}: acts on {operator.qubits} qubits, the hamiltonian on {hamiltonian.qubits}; "
                f"build it with qubits={hamiltonian.qubits}",
                argument=name,
            )
    return bare, h


def _range(argument: str, value: object, default: int, least: int) -> int:
    if value is None:
        return default
    number = as_int(value)
    if not isinstance(number, int) or isinstance(number, bool) or number < least:
        raise ArgumentError(
            f"{argument}: is not a whole number from {least} ({value!r}); give the range of G, or None for that of "
            "the error",
            argument=argument,
            value=value,
        )
    return number
