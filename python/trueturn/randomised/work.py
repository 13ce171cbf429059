"""Running samples: one picklable task, any executor, and what is left when the executor dies."""

from __future__ import annotations

import pickle
import traceback
from collections.abc import Callable, Sequence
from concurrent.futures import Executor, Future, as_completed
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn.formulas import ANGLE_ROUNDINGS
from trueturn.operator import Operator
from trueturn.randomised.ensemble import Ensemble
from trueturn.state import State

__all__ = ["FIXED_COLUMNS", "Row", "Task", "run"]

Row = tuple[float, ...]
FIXED_COLUMNS = 3
"""Of a row: bound on the circuit's rounding, state error, infidelity; then one value for each observable."""

# Chunks an executor gets: enough for progress and to lose little, few enough not to send the state too often.
_CHUNKS = 64


class Task:
    """Measures samples by number; carries all that another process needs.

    Parameters
    ----------
    ensemble : Ensemble
    start : ndarray, shape (2**n,)
        Not written.
    observables : sequence of Operator
    exact : ndarray or None
        What the samples' states are compared with.
    threads : int or None
        For each sample.
    """

    def __init__(
        self,
        ensemble: Ensemble,
        start: npt.NDArray[Any],
        observables: Sequence[Operator],
        exact: npt.NDArray[Any] | None,
        threads: int | None,
    ) -> None:
        self.ensemble = ensemble
        self.start = start
        self.observables = tuple(observables)
        self.exact = exact
        self.threads = threads

    def __call__(self, indices: Sequence[int]) -> tuple[dict[int, Row], Exception | None]:
        """Return the rows of the samples that succeed, and what the first of the others raised.

        The fault is returned, not raised, so that a sample that fails costs none of its neighbours.
        """
        work = State.from_array(self.start.copy())
        exact = None if self.exact is None else State.from_array(self.exact)
        length = work.norm(threads=self.threads)
        rows: dict[int, Row] = {}
        failure: Exception | None = None
        for index in indices:
            try:
                rows[index] = self._row(index, work, exact, length)
            except Exception as fault:
                failure = failure or _portable(fault)
        return rows, failure

    def _row(self, index: int, work: State, exact: State | None, length: float) -> Row:
        circuit = self.ensemble.sample(index)
        np.copyto(work.amplitudes, self.start)
        work.apply(circuit, threads=self.threads)
        unit = 2.0**-24 if work.dtype == np.dtype(np.complex64) else 2.0**-53
        error = infidelity = float("nan")
        if exact is not None:
            ours = work if work.dtype == exact.dtype else State.from_array(work.amplitudes.astype(exact.dtype))
            error = ours.distance(exact, threads=self.threads)
            apart = ours.distance(exact, "free", threads=self.threads) / length
            # For unit vectors ‖ψ - e^{iα}φ‖² = 2 - 2|<ψ|φ>|, so 1 - |<ψ|φ>|² = d² (1 - d²/4), without cancellation.
            infidelity = apart**2 * (1.0 - apart**2 / 4.0)
        values = [work.expectation(operator, threads=self.threads) for operator in self.observables]
        return (circuit.rounding_bound(ANGLE_ROUNDINGS, unit), error, infidelity, *values)


def _portable(fault: Exception) -> Exception:
    """Return a fault that reaches another process: itself, or its words where it cannot be pickled.

    The traceback stays behind on the way, so a note keeps its text.
    """
    fault.add_note("".join(traceback.format_exception(fault)))
    try:
        pickle.loads(pickle.dumps(fault))
    except Exception:
        return RuntimeError(f"{type(fault).__name__}: {fault}")
    return fault


def run(
    task: Task,
    indices: Sequence[int],
    executor: Executor | None,
    report: Callable[[int], object],
) -> tuple[dict[int, Row], Exception | None]:
    """Measure samples.

    Parameters
    ----------
    task : Task
    indices : sequence of int
    executor : Executor or None
        None runs them here.
    report : callable
        Called here with the number of samples finished so far; what it raises cancels what has not begun.

    Returns
    -------
    rows : dict of int to Row
        The finished samples.
    failure : exception or None
        The first; of the executor, or of a sample. Without an executor it stops the samples after it.
    """
    rows: dict[int, Row] = {}
    if executor is None:
        for index in indices:
            try:
                found, fault = task([index])
            except Exception as loss:
                return rows, loss
            if fault is not None:
                return rows, fault
            rows.update(found)
            report(len(rows))
        return rows, None
    size = max(1, -(-len(indices) // _CHUNKS))
    failure: Exception | None = None
    pending: list[Future[tuple[dict[int, Row], Exception | None]]] = []
    try:
        for start in range(0, len(indices), size):
            chunk = indices[start : start + size]
            try:
                pending.append(executor.submit(task, chunk))
            except Exception as refusal:  # broken or shut down: an executor of any make raises what it likes
                failure = refusal
                break
        for future in as_completed(pending):
            try:
                found, fault = future.result()
            except Exception as loss:
                failure = failure or loss
                continue
            rows.update(found)
            failure = failure or fault
            report(len(rows))
    except BaseException:
        for future in pending:
            future.cancel()
        raise
    return rows, failure
