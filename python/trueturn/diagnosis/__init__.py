"""Diagnosis: does a circuit implement exp(-iHt), and if not, what is the mistake? No state vector is needed.

The first moment (the angle total of each string) says whether it does; the second moment and the order of the
rotations say which formula it is and in how many steps. See docs/broken-circuit.md.
"""

from __future__ import annotations

import math
from numbers import Real

from trueturn.diagnosis.result import Character, Diagnosis, Finding
from trueturn.errors import ArgumentError, OperatorError, RotationError
from trueturn.formulas.arguments import checked_time
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["Character", "Diagnosis", "Finding", "diagnose"]


def diagnose(rotations: Rotations, operator: Operator, time: float, *, tolerance: float = 1e-8) -> Diagnosis:
    """Compare a circuit with exp(-iHt), and name the mistake where it differs.

    Parameters
    ----------
    rotations : Rotations
    operator : Operator
        The Hamiltonian H, on as many qubits as the circuit, or fewer.
    time : float
        Evolution time t in inverse units of the coefficients; may be negative, not zero.
    tolerance : float
        Share of c·t by which an angle total may be off and count as rounded, from 0 to 0.1; what rounding of the
        angles themselves can contribute is allowed for besides. Raise it for angles printed with few digits.

    Returns
    -------
    Diagnosis

    Raises
    ------
    ArgumentError
        `time` is zero or not finite, or `tolerance` out of range.
    RotationError
        `rotations` is no Rotations.
    OperatorError
        `operator` is no Operator, has no term but the identity, acts on more qubits than the circuit, or `time` makes
        c·t overflow.

    Notes
    -----
    Every product formula turns each string P of H by c·t in all. Totals that differ are called a mistake only where
    the order of the rotations leaves one number to explain; what a right circuit with resynthesised blocks could look
    like as well is not accused: the answer is None. Totals that agree prove the circuit consistent (first order at
    least), not accurate: that is what an audit is for.

    Time and memory grow with what the circuit stores, not with its repeats: 10^6 stored rotations on 128 qubits take
    seconds. Nothing depends on 2**qubits.

    Examples
    --------
    >>> import trueturn as tt
    >>> chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=0.7)
    >>> strang = tt.formula("strang").rotations(tt.Partition.of(chain, "commuting"), time=1.0, steps=10)
    >>> tt.diagnose(strang, chain, 1.0).character.text
    "The rotations run as strang (order 2) in 10 equal steps, strings in the order of 'commuting'."
    >>> found = tt.diagnose(strang, chain, -1.0)
    >>> found.matches, found.findings[0].kind
    (False, 'time reversed')
    >>> tt.diagnose(found.fixed, chain, -1.0).matches
    True
    """
    if not isinstance(rotations, Rotations):
        raise RotationError(
            f"rotations: is not a circuit ({type(rotations).__name__}); give Rotations, such as tt.read_qasm returns",
            argument="rotations",
        )
    if not isinstance(operator, Operator):
        raise OperatorError(f"operator: not an Operator ({type(operator).__name__}); give one", argument="operator")
    length = checked_time(time)
    if length == 0.0:
        raise ArgumentError(
            "time: is zero (0.0); give the time that the circuit is to reach", argument="time", value=time
        )
    if not isinstance(tolerance, Real) or isinstance(tolerance, bool) or not 0.0 <= float(tolerance) <= 0.1:
        raise ArgumentError(
            f"tolerance: is not a number from 0 to 0.1 ({tolerance!r}); give a share of c·t, such as 1e-8",
            argument="tolerance",
            value=tolerance,
        )
    if operator.support() and operator.support()[-1] >= rotations.qubits:
        raise OperatorError(
            f"operator: acts on qubit {operator.support()[-1]} and the circuit has {rotations.qubits} qubits; "
            "give the Hamiltonian of this circuit",
            argument="operator",
        )
    if not len(operator.without_identity()):
        raise OperatorError("operator: has no term but the identity; give a Hamiltonian", argument="operator")
    if not math.isfinite(operator.one_norm() * abs(length)):
        raise OperatorError(
            f"operator: c·t is too large for a float (t = {length!r}); use a shorter time", argument="operator"
        )
    from trueturn.diagnosis.examine import examine

    if operator.qubits != rotations.qubits:
        operator = Operator.from_masks(operator.x_masks, operator.z_masks, operator.coefficients, rotations.qubits)
    return examine(rotations, operator, length, float(tolerance))
