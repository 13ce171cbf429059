"""The shares of a budget: what gates, shots and synthesis add to the error of one expectation.

W is the distance between the largest and the smallest eigenvalue of the observable O: no two expectations differ by more.

**Gates.** Model: each two-qubit gate in the causal cone fails with probability p, independently; a failure may do
anything to the gate's qubits. With probability (1-p)^G none of G gates fails, so the state is
ρ = (1-p)^G ρ_0 + (1 - (1-p)^G) σ with some density matrix σ, and the expectation moves by
(1 - (1-p)^G) |tr O(σ - ρ_0)| ≤ (1 - (1-p)^G) W: proven under the model. Depolarising noise is the special case in which
a failure replaces the two qubits by white noise. Errors that are not stochastic (a calibration that is always off by the
same angle) add up coherently; they are covered, by the triangle inequality, by G p W where p is half the diamond distance
of a gate from its ideal, and that is at most (1 - (1-p)^G) W + G² p² W/2.

**Synthesis.** R rotations, each approximated to ε/R in operator norm, make a circuit within ε of the wanted one (triangle
inequality), and |⟨O⟩ - ⟨O⟩'| ≤ W ε: shift O by a number to have norm W/2, then 2 (W/2) ε. Each costs about
3 log₂(R/ε) T gates (Ross and Selinger 2016, leading term, typical and not a bound); Clifford angles cost none, odd
multiples of a T gate's angle one.

**Shots.** N shots spread over the strings of O = Σ c_k P_k at random in proportion to |c_k|, each giving
±Σ|c|: an unbiased mean of values in [-Σ|c|, Σ|c|]. Except with probability δ it is off by at most
Σ|c| √(2 ln(2/δ)/N) (Hoeffding 1963, theorem 2), for any N and any state.
Where the variance v of one shot is given instead, the normal law is taken, z √(v/N): an estimate.

References
----------
.. [1] N. J. Ross, P. Selinger, Optimal ancilla-free Clifford+T approximation of z-rotations, Quantum Inf. Comput. 16, 901
   (2016), abstract.
.. [2] W. Hoeffding, Probability inequalities for sums of bounded random variables, J. Am. Stat. Assoc. 58, 13 (1963),
   theorem 2; from memory.
"""

from __future__ import annotations

import math
from statistics import NormalDist

from trueturn.rotations import Rotations

__all__ = ["fitting_shots", "gate_share", "largest_gate_error", "shot_scale", "synthesised", "t_gates"]

# Angles count as multiples of π/8 where rounding of a few operations can have moved them.
_ANGLE_ROUNDING = 16.0 * 2.0**-53


def gate_share(gates: int, error: float) -> float:
    """Return 1 - (1 - error)^gates: the probability that some gate fails."""
    return -math.expm1(gates * math.log1p(-error))


def largest_gate_error(gates: int, share: float) -> float:
    """Return the error for which `gate_share` is `share`."""
    return -math.expm1(math.log1p(-share) / gates) if gates and share < 1.0 else 1.0


def shot_scale(one_norm: float, variance: float | None, confidence: float) -> float:
    """Return K, with K/√N how far the mean of N shots is off: from Σ|c|, or from a variance by the normal law."""
    if variance is None:
        return one_norm * math.sqrt(2.0 * math.log(2.0 / (1.0 - confidence)))
    return NormalDist().inv_cdf(0.5 + confidence / 2.0) * math.sqrt(variance)


def fitting_shots(scale: float, slack: float) -> int | None:
    """Return the fewest shots N with scale/√N ≤ slack; None where no number is enough."""
    if slack <= 0.0:
        return None
    count = (scale / slack) ** 2
    return max(1, math.ceil(count * (1.0 - 1e-12))) if math.isfinite(count) else None


def synthesised(rotations: Rotations) -> tuple[int, int]:
    """Count the rotations that need an approximation, and those that are a T gate up to Clifford gates.

    exp(-iθP) is a Clifford gate where θ is a multiple of π/4, and a T gate with Clifford gates at odd multiples of π/8.
    """
    general = tees = 0
    pending = [(rotations, 1)]
    while pending:
        circuit, times = pending.pop()
        blocks = circuit.blocks
        if len(blocks) == 1 and blocks[0].repeat == 1:
            for angle in circuit.angles.tolist():
                eighths = angle / (math.pi / 8.0)
                nearest = round(eighths)
                if abs(eighths - nearest) > _ANGLE_ROUNDING * abs(eighths):
                    general += times
                elif nearest % 2:
                    tees += times
        else:
            pending += [(body, times * repeat) for body, repeat in blocks]
    return general, tees


def t_gates(general: int, tees: int, error: float) -> int:
    """Return the T count where the rotations counted by `synthesised` share `error`."""
    if general == 0:
        return tees
    return tees + general * math.ceil(3.0 * math.log2(max(2.0, general / error)))
