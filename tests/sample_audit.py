"""A small audit built by hand: the report and the table are tested on it without running anything."""

from __future__ import annotations

import math
from types import SimpleNamespace
from typing import Any

from trueturn.audit.candidate import Candidate
from trueturn.audit.result import Audit, PointError, Row, Trial
from trueturn.operator import Operator

TIMES = (0.5, 1.0, 2.0)
OBSERVABLES = {
    "middle_rung_zz": Operator("Z_2 Z_3", 6),
    "edge <order> & more": Operator("0.5 Z_0 - 0.5 Z_1", 6),
}
OPERATOR = Operator(" + ".join(f"1.0 {axis}_{q} {axis}_{q + 1}" for q in range(5) for axis in "XYZ") + " + 0.25 Z_0")


def interval(error: float, half_width: float) -> tuple[float, float]:
    return max(0.0, error - half_width), error + half_width


def row(
    formula: str,
    rule: str,
    asked: int | str,
    constant: float,
    order: int,
    gates: int,
    counts: tuple[int, ...],
    chosen: int,
    *,
    width: float = 2e-10,
    bound: float | None = None,
    tolerance: float = 0.01,
    **more: Any,
) -> Row:
    def verdict(error: tuple[float, float]) -> str:
        return "meets" if error[1] <= tolerance else "misses" if error[0] > tolerance else "undecided"

    def trial(steps: int) -> Trial:
        error = interval(constant / steps**order, width)
        return Trial(steps, error, verdict(error), gates * steps)

    largest = constant / chosen**order
    points = []
    for name in OBSERVABLES:
        for index, time in enumerate(TIMES):
            share = (0.3, 0.6, 1.0)[index] * (1.0 if name.startswith("middle") else 0.4)
            exact = math.cos(time)
            points.append(PointError(time, name, exact + share * largest, exact, interval(share * largest, width)))
    error = interval(largest, width)
    return Row(
        candidate=Candidate(formula, rule, asked),
        label=f"{formula}, {rule}",
        steps=chosen,
        error=error,
        bound=bound,
        bound_source="commutator bound, theorem 1" if bound else "no theorem covers this formula",
        rotations=gates * chosen // 2,
        two_qubit_gates=gates * chosen,
        depth=gates * chosen // 6,
        verdict=verdict(error),
        rounding=3e-14,
        points=tuple(points),
        trials=tuple(trial(steps) for steps in counts),
        **more,
    )


def sample_audit(**changes: Any) -> Audit:
    """Build an audit with four candidates: misses, meets, meets, undecided."""
    rows = (
        row("lie", "commuting", 50, 1.2, 1, 150, (50,), 50, bound=0.4),
        row("strang", "commuting", "least", 1.7, 2, 155, (4, 8, 13, 14, 16, 20, 26, 28), 14, bound=0.094),
        row(
            "suzuki-4",
            "bond",
            "least",
            0.9,
            4,
            760,
            (2, 4, 5, 6, 8),
            4,
            accidental=(2,),
            note="met by accident at 2: a larger tested step count misses",
        ),
        row("strang", "axis", 12, 1.44, 2, 155, (12,), 12, width=4e-4, note="single precision"),
    )
    certificate = SimpleNamespace(
        error_bound={0.5: 3e-11, 1.0: 5e-11, 2.0: 9.1e-11},
        truncation={0.5: 3e-11, 1.0: 5e-11, 2.0: 9e-11},
        rounding={0.5: 2e-13, 1.0: 4e-13, 2.0: 8e-13},
        spectral_interval=(-9.5, 5.25),
        applications=1234,
        proven=True,
        method="chebyshev",
        notes=("Two segments.",),
        spectral_route="clusters of the lattice",
    )
    reference = SimpleNamespace(
        times=TIMES,
        expectations={name: [math.cos(time) for time in TIMES] for name in OBSERVABLES},
        expectation_bounds={name: [6e-11, 1e-10, 2e-10] for name in OBSERVABLES},
        certificate=certificate,
    )
    facts: dict[str, Any] = {
        "rows": rows,
        "recommended": rows[1],
        "reason": "strang, commuting with 14 steps meets 0.01 with 2170 two-qubit gates, the fewest here.",
        "verdict": "meets",
        "reference": reference,
        "quantity": "observables",
        "tolerance": 0.01,
        "relative_to": None,
        "times": TIMES,
        "readout": "along",
        "observables": OBSERVABLES,
        "operator": OPERATOR,
        "start": "product state 011001, qubit 0 first",
        "title": "A <small> chain & its quench",
        "energy_unit": "J",
        "assumptions": ("The Hamiltonian is the one given.",),
        "proven": ("The reference's error bound.",),
        "measured": ("The error of each candidate at the requested times.",),
        "cautions": ("Other times and observables were not looked at.",),
        "seconds": {"reference": 0.8, "candidates": 2.4},
    }
    return Audit(**(facts | changes))
