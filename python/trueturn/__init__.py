"""Prove product-formula circuits against a certified reference."""

from trueturn import chemistry, driven, errors, lattice, model, randomised
from trueturn._build import build_info
from trueturn._threads import threads
from trueturn.accuracy import Bound, bound
from trueturn.adaptive import AdaptiveRun, adaptive
from trueturn.audit import Audit, Candidate, audit
from trueturn.chemistry import read_fcidump
from trueturn.comparison import Comparison, compare
from trueturn.driven import Driven, DrivenReference, driven_reference
from trueturn.error_saving import Improved
from trueturn.extrapolation import Extrapolation, extrapolate, multiproduct_weights, well_conditioned_steps
from trueturn.formulas import Formula, formula, formulas, read_formulas
from trueturn.formulas.processed import Processed
from trueturn.formulas.search import FoundFormula
from trueturn.formulas.search_target import Instance, Target
from trueturn.ladders import saved_gates
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference import Certificate, Reference, reference
from trueturn.reference.verification import Verification, verify
from trueturn.rotations import Rotations
from trueturn.state import State
from trueturn.symmetry import Symmetries, Symmetry, symmetries

__all__ = [
    "AdaptiveRun",
    "Audit",
    "Bound",
    "Candidate",
    "Certificate",
    "Comparison",
    "Driven",
    "DrivenReference",
    "Extrapolation",
    "Formula",
    "FoundFormula",
    "Improved",
    "Instance",
    "Operator",
    "Partition",
    "Processed",
    "Reference",
    "Rotations",
    "State",
    "Symmetries",
    "Symmetry",
    "Target",
    "Verification",
    "adaptive",
    "audit",
    "bound",
    "build_info",
    "chemistry",
    "compare",
    "driven",
    "driven_reference",
    "errors",
    "extrapolate",
    "formula",
    "formulas",
    "lattice",
    "model",
    "multiproduct_weights",
    "randomised",
    "read_fcidump",
    "read_formulas",
    "reference",
    "saved_gates",
    "symmetries",
    "threads",
    "verify",
    "well_conditioned_steps",
]
