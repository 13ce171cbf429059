"""The leading law of the error, predicted from the effective Hamiltonian.

A circuit of r steps simulates H + τ^p E + …, τ = t/r. To leading order its state is off by τ^p D with

    D = d/dε exp(-i(H + εE)t) ψ  at  ε = 0,

and ⟨O⟩ by τ^p times the derivative of ⟨O⟩ under H + εE. Both derivatives are taken as central differences of two
certified evolutions. What that costs is bounded: with N ≥ ‖E‖ the third derivative in ε has norm at most (N|t|)³
for the state (three ordered insertions of E) and ‖O‖ (2N|t|)³ for ⟨O⟩ (three nested commutators), so

    |difference - derivative| ≤ ε² (N|t|)³ / 6 + δ/ε,    and with ‖O‖ (2N|t|)³ for the observable,

δ being the error bound of either evolution. ε is chosen to make the first line least. So the prefactor is an interval
around a proven value; that real errors follow the leading law holds only in the asymptotic window, small τ.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from trueturn import _threads
from trueturn._observables import named_operators
from trueturn.accuracy.finest import FINEST, finest_reference
from trueturn.errors import ArgumentError
from trueturn.formulas.arguments import checked_steps, checked_time
from trueturn.operator import Operator
from trueturn.reference.certificate import norm_bound
from trueturn.state import State, require_same_qubits

if TYPE_CHECKING:
    from trueturn.accuracy.simulated import SimulatedSeries

__all__ = ["Prediction", "predict"]


@dataclass(frozen=True)
class Prediction:
    """The leading law of one error: prefactor / steps^order.

    Attributes
    ----------
    name : str
        An observable, or ``"state"``.
    time : float
    order : int
        The power p of the step time; an observable whose prefactor vanishes falls faster.
    prefactor : float
    interval : (float, float)
        Holds the exact prefactor of the leading law, clipped at 0.
    """

    name: str
    time: float
    order: int
    prefactor: float
    interval: tuple[float, float]

    def at(self, steps: int) -> float:
        """Return the predicted error of `steps` steps: the leading law alone, neither a bound nor a measurement.

        Raises
        ------
        ArgumentError
            `steps` is not an integer from 1 to 2**53.
        """
        return float(self.prefactor / float(checked_steps(steps)) ** self.order)


def predict(
    series: SimulatedSeries,
    state: State,
    time: float,
    observables: Mapping[str, Operator] | None = None,
    *,
    threads: int | None = None,
) -> dict[str, Prediction]:
    """Predict error ≈ prefactor / steps^p for the state and for observables.

    Parameters
    ----------
    series : SimulatedSeries
        Of an order that reaches the leading error.
    state : State
        Start; not written.
    time : float
        Not 0.
    observables : mapping of str to Operator, optional
        None may be named ``"state"``.

    Returns
    -------
    dict of str to Prediction
        ``"state"`` first, then the observables.

    Raises
    ------
    ArgumentError
        `time` is 0 or not finite, or an observable has the name ``"state"``.
    AuditError
        The series holds no error term.
    StateShapeError
        State, Hamiltonian and observables differ in qubits.
    ToleranceError
        Double precision cannot certify an evolution of this length at all.

    Notes
    -----
    Two certified evolutions, of H + εE and H - εE.

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    >>> law = tt.simulated_series("strang", parts, 3).predict(tt.State.product("0"), 1.0)["state"]
    >>> law.order, f"{law.prefactor:.4f}"
    (2, '0.2736')
    """
    span = checked_time(time)
    if span == 0.0:
        raise ArgumentError("time: is 0, where nothing errs (0.0); give another", argument="time", value=time)
    watched = named_operators(observables)
    if "state" in watched:
        raise ArgumentError(
            "observables: one is named 'state', which names the state error; rename it",
            argument="observables",
            value="state",
        )
    error, hamiltonian = series.leading, series.terms[0]
    require_same_qubits(state, hamiltonian, "partition")
    for name, observable in watched.items():
        require_same_qubits(state, observable, f"observables[{name!r}]")
    power = (series.leading_degree or 1) - 1
    workers = _threads.resolve(threads)
    reach = error.one_norm() * abs(span)
    shift = (3.0 * FINEST) ** (1.0 / 3.0) / reach
    ahead, behind = (
        finest_reference(hamiltonian + error * (sign * shift), state, span, watched, threads=workers)
        for sign in (1.0, -1.0)
    )
    scale = abs(span) ** power
    cut = shift**2 * reach**3 / 6.0
    bounds = [found.certificate.largest for found in (ahead, behind)]
    distance = ahead.states[-1].distance(behind.states[-1], threads=workers)
    found = {
        "state": _prediction("state", span, power, scale, distance / (2 * shift), cut + sum(bounds) / (2 * shift)),
    }
    for name, observable in watched.items():
        gap = abs(float(ahead.expectations[name][0] - behind.expectations[name][0]))
        doubt = float(ahead.expectation_bounds[name][0] + behind.expectation_bounds[name][0])
        slack = 8.0 * cut * norm_bound(observable) + doubt / (2 * shift)
        found[name] = _prediction(name, span, power, scale, gap / (2 * shift), slack)
    return found


def _prediction(name: str, time: float, power: int, scale: float, value: float, slack: float) -> Prediction:
    low, high = scale * max(0.0, value - slack), scale * (value + slack)
    return Prediction(name, time, power, scale * value, (low, high if math.isfinite(high) else math.inf))
