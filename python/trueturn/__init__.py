"""Prove product-formula circuits against a certified reference."""

from trueturn import driven, errors, lattice, model, randomised
from trueturn._build import build_info
from trueturn._threads import threads
from trueturn.accuracy import (
    Bound,
    ErrorCurve,
    ErrorInterval,
    ErrorSplit,
    Prediction,
    ProductErrors,
    SimulatedSeries,
    bound,
    error_curves,
    operator_error,
    product_errors,
    rms_error,
    simulated_hamiltonian,
    simulated_series,
    split_error,
)
from trueturn.adaptive import AdaptiveRun, adaptive
from trueturn.audit import Audit, Candidate, audit
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
from trueturn.planning import Plan, PlanRow, plan
from trueturn.reference import Certificate, Reference, reference
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
    "ErrorCurve",
    "ErrorInterval",
    "ErrorSplit",
    "Extrapolation",
    "Formula",
    "FoundFormula",
    "Improved",
    "Instance",
    "Operator",
    "Partition",
    "Plan",
    "PlanRow",
    "Prediction",
    "Processed",
    "ProductErrors",
    "Reference",
    "Rotations",
    "SimulatedSeries",
    "State",
    "Symmetries",
    "Symmetry",
    "Target",
    "adaptive",
    "audit",
    "bound",
    "build_info",
    "compare",
    "driven",
    "driven_reference",
    "error_curves",
    "errors",
    "extrapolate",
    "formula",
    "formulas",
    "lattice",
    "model",
    "multiproduct_weights",
    "operator_error",
    "plan",
    "product_errors",
    "randomised",
    "read_formulas",
    "reference",
    "rms_error",
    "saved_gates",
    "simulated_hamiltonian",
    "simulated_series",
    "split_error",
    "symmetries",
    "threads",
    "well_conditioned_steps",
]
