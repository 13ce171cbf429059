"""What a reference was computed from: enough to check it without computing it again."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from trueturn.operator import Operator
from trueturn.reference.certificate import UNIT, expectation_rounding
from trueturn.state import State

__all__ = ["Inputs", "inputs_of"]


@dataclass(frozen=True)
class Inputs:
    """What a reference was computed from.

    Attributes
    ----------
    operator : Operator
    observables : mapping of str to Operator
    tolerance : float
    start_norm : float
    start_energy : float
        Expectation of the Hamiltonian without its identity term in the start state.
    energy_rounding : float
        Bound on the rounding of `start_energy`.
    """

    operator: Operator
    observables: Mapping[str, Operator]
    tolerance: float
    start_norm: float
    start_energy: float
    energy_rounding: float


def inputs_of(
    operator: Operator, state: State, observables: Mapping[str, Operator], tolerance: float, threads: int
) -> Inputs:
    """Record what a reference is computed from; costs one application of the Hamiltonian."""
    bare = operator.without_identity()
    norm = state.norm(threads=threads)
    coarse = 2.0**29 if state.dtype == np.dtype(np.complex64) else 1.0
    return Inputs(
        operator=operator,
        observables=dict(observables),
        tolerance=float(tolerance),
        start_norm=norm,
        start_energy=state.expectation(bare, threads=threads),
        energy_rounding=coarse * expectation_rounding(bare, state.qubits) * max(1.0, norm) ** 2
        + UNIT * operator.one_norm(),
    )
