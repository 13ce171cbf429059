"""Driven Hamiltonians: strengths that depend on time, their circuits and their reference.

Time counts as one more operator whose flow advances a clock, so every product formula keeps its order; see
`Driven.rotations`.
"""

from __future__ import annotations

from trueturn.driven.hamiltonian import Driven
from trueturn.driven.reference import DrivenReference, driven_reference
from trueturn.driven.strengths import Call, Constant, Ramp, Samples, Sinusoid, Strength

__all__ = [
    "Call",
    "Constant",
    "Driven",
    "DrivenReference",
    "Ramp",
    "Samples",
    "Sinusoid",
    "Strength",
    "driven_reference",
]
