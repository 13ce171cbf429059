"""Errors over time: one circuit, read on the way, against one certified evolution."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from trueturn import _threads
from trueturn._observables import named_operators
from trueturn.accuracy.finest import finest_reference
from trueturn.errors import ArgumentError
from trueturn.formulas import Formula
from trueturn.formulas.arguments import checked_steps
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.randomised.checks import checked_partition
from trueturn.state import State

__all__ = ["ErrorCurve", "error_curves"]

Values = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ErrorCurve:
    """The error of one figure over time, as a band.

    Attributes
    ----------
    name : str
        An observable, or ``"state"``.
    times : ndarray, shape (count,), float64
        Ascending.
    low, high : ndarray, shape (count,), float64
        The true error lies between: measured ∓ (reference error bound + rounding), clipped at 0.
    values, exact : ndarray, shape (count,), float64
        What circuit and reference give; NaN for the state, which has no single value.
    """

    name: str
    times: Values
    low: Values
    high: Values
    values: Values
    exact: Values


def error_curves(
    formula: Formula | Processed | str,
    partition: Partition,
    state: State,
    times: float | Iterable[float],
    steps: int,
    observables: Mapping[str, Operator] | None = None,
    *,
    threads: int | None = None,
) -> dict[str, ErrorCurve]:
    """Measure state and observable errors at several times along one circuit of equal steps.

    Parameters
    ----------
    formula : Formula, Processed or str
    partition : Partition
    state : State
        Start; not written.
    times : float or iterable of float
        Positive; on the grid of `steps` equal steps to the last of them.
    steps : int
        To the last time.
    observables : mapping of str to Operator, optional
        None may be named ``"state"``.

    Returns
    -------
    dict of str to ErrorCurve
        ``"state"`` first, then the observables.

    Raises
    ------
    ArgumentError
        Something is out of range, or an observable is named ``"state"``.
    AuditError
        A time falls between steps; the message lists counts that fit.
    StateShapeError
        State, parts and observables differ in qubits.
    ToleranceError
        Double precision cannot certify an evolution of this length.
    MemoryRefusedError
        Three state vectors and one for each time do not fit.

    Notes
    -----
    One reference evolution, and the circuit twice where there are observables.

    Examples
    --------
    >>> import trueturn as tt
    >>> chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7)
    >>> parts = tt.Partition.of(chain, "commuting")
    >>> curve = tt.error_curves("strang", parts, tt.State.product("0000"), [0.5, 1.0], 20)["state"]
    >>> bool((curve.low <= curve.high).all()), curve.times.tolist()
    (True, [0.5, 1.0])
    """
    # The audit measures with the same bench and imports this package for its bounds.
    from trueturn.audit.candidate import Candidate
    from trueturn.audit.measure import Bench
    from trueturn.audit.truth import positive_times

    watched = named_operators(observables)
    if "state" in watched:
        raise ArgumentError(
            "observables: one is named 'state', which names the state error; rename it",
            argument="observables",
            value="state",
        )
    candidate = Candidate(formula, checked_partition(partition), checked_steps(steps))  # type: ignore[arg-type]
    asked = sorted(set(positive_times(times)))
    workers = _threads.resolve(threads)
    truth = finest_reference(partition.operator(), state, asked, watched, keep="all", threads=workers)
    found: dict[str, ErrorCurve] = {}
    for quantity in ("state", *(("observables",) if watched else ())):
        bench = Bench(state, asked, truth, truth.certificate.largest, quantity, watched, None, "along", workers)
        points = bench.measure(candidate, partition, checked_steps(steps)).points
        for name in ("state",) if quantity == "state" else watched:
            here = [point for point in points if point.name == name]
            found[name] = ErrorCurve(
                name,
                times=np.array([point.time for point in here]),
                low=np.array([point.error[0] for point in here]),
                high=np.array([point.error[1] for point in here]),
                values=np.array([point.value for point in here]),
                exact=np.array([point.reference for point in here]),
            )
    return found
