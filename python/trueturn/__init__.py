"""Prove product-formula circuits against a certified reference."""

from trueturn import errors, lattice, model
from trueturn._build import build_info
from trueturn._threads import threads
from trueturn.accuracy import Bound, bound
from trueturn.audit import Audit, Candidate, audit
from trueturn.formulas import Formula, formula, formulas
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference import Certificate, Reference, reference
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = [
    "Audit",
    "Bound",
    "Candidate",
    "Certificate",
    "Formula",
    "Operator",
    "Partition",
    "Reference",
    "Rotations",
    "State",
    "audit",
    "bound",
    "build_info",
    "errors",
    "formula",
    "formulas",
    "lattice",
    "model",
    "reference",
    "threads",
]
