"""Prove product-formula circuits against a certified reference."""

from trueturn import chemistry, driven, errors, lattice, model, randomised
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
    steps_by_bound,
)
from trueturn.adaptive import AdaptiveRun, adaptive
from trueturn.audit import Audit, Candidate, audit
from trueturn.chemistry import read_fcidump
from trueturn.circuits.counts import GateCounts
from trueturn.circuits.reading import Circuit, read_circuit, read_qasm
from trueturn.comparison import Comparison, compare
from trueturn.device import Budget, CausalCone, causal_cone, device_budget
from trueturn.diagnosis import Diagnosis, Finding, diagnose
from trueturn.driven import Driven, DrivenReference, driven_reference
from trueturn.error_saving import Improved
from trueturn.export import Cost, CostTable, compare_costs
from trueturn.extrapolation import Extrapolation, extrapolate, multiproduct_weights, well_conditioned_steps
from trueturn.formulas import Formula, formula, formulas, read_formulas
from trueturn.formulas.processed import Processed
from trueturn.formulas.search import FoundFormula
from trueturn.formulas.search_target import Instance, Target
from trueturn.ladders import saved_gates
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.pass_plan import MemoryPass, PassPlan
from trueturn.planning import Plan, PlanRow, plan
from trueturn.reference import Certificate, Reference, reference
from trueturn.reference.verification import Verification, verify
from trueturn.rotations import Rotations
from trueturn.scaling import Case, PowerLaw, Scaling, fit_steps, step_scaling
from trueturn.state import State
from trueturn.symmetry import Symmetries, Symmetry, symmetries

__all__ = [
    "AdaptiveRun",
    "Audit",
    "Bound",
    "Budget",
    "Candidate",
    "Case",
    "CausalCone",
    "Certificate",
    "Circuit",
    "Comparison",
    "Cost",
    "CostTable",
    "Diagnosis",
    "Driven",
    "DrivenReference",
    "ErrorCurve",
    "ErrorInterval",
    "ErrorSplit",
    "Extrapolation",
    "Finding",
    "Formula",
    "FoundFormula",
    "GateCounts",
    "Improved",
    "Instance",
    "MemoryPass",
    "Operator",
    "Partition",
    "PassPlan",
    "Plan",
    "PlanRow",
    "PowerLaw",
    "Prediction",
    "Processed",
    "ProductErrors",
    "Reference",
    "Rotations",
    "Scaling",
    "SimulatedSeries",
    "State",
    "Symmetries",
    "Symmetry",
    "Target",
    "Verification",
    "adaptive",
    "audit",
    "bound",
    "build_info",
    "causal_cone",
    "chemistry",
    "compare",
    "compare_costs",
    "device_budget",
    "diagnose",
    "driven",
    "driven_reference",
    "error_curves",
    "errors",
    "extrapolate",
    "fit_steps",
    "formula",
    "formulas",
    "lattice",
    "model",
    "multiproduct_weights",
    "operator_error",
    "plan",
    "product_errors",
    "randomised",
    "read_circuit",
    "read_fcidump",
    "read_formulas",
    "read_qasm",
    "reference",
    "rms_error",
    "saved_gates",
    "simulated_hamiltonian",
    "simulated_series",
    "split_error",
    "step_scaling",
    "steps_by_bound",
    "symmetries",
    "threads",
    "verify",
    "well_conditioned_steps",
]
