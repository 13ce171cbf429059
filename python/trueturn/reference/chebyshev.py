"""Evolution by Chebyshev expansion, with every part of its error proven."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn import _allocation, _memory, _native
from trueturn.operator import Operator
from trueturn.reference.certificate import Certificate
from trueturn.reference.schedule import Schedule, schedule
from trueturn.reference.spectrum import CLUSTER_COST, spectral_report
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["carry_out", "evolve", "planned"]

Vector = npt.NDArray[np.complex128]
Step = tuple[float, Vector]
Tick = Callable[[int, int], object]

# Times that share an expansion, each at the price of one vector.
_GROUP = 4

_NOTES = (
    "Truncation: the sum of the dropped Bessel coefficients on a proven spectral interval.",
    "Rounding: counted operation by operation from the recurrence, in the worst case.",
)


def evolve(
    operator: Operator,
    start: npt.NDArray[Any],
    times: Sequence[float],
    tolerance: float,
    *,
    keep_all: bool,
    threads: int,
    progress: Tick | None,
) -> tuple[Certificate, Iterator[Step]]:
    """Plan the evolution, and return its certificate with an iterator that carries it out.

    ψ(t) = e^{-ict} Σ_k (2-δ_k0) (-i)^k J_k(λt) T_k((H-c)/λ) ψ(0), with centre c and half-width λ of a proven interval.

    The vectors that the iterator gives are its own and change with the next step.

    Parameters
    ----------
    operator : Operator
    start : ndarray, shape (2**n,), complex
        Not written.
    times : sequence of float
        Ascending, positive.
    tolerance : float
        Largest error bound allowed at any time.

    Raises
    ------
    ToleranceError
        Double precision cannot certify the tolerance.
    MemoryRefusedError
        Three vectors beside the start do not fit.
    """
    certificate, plan = planned(operator, start.size.bit_length() - 1, times, tolerance, keep_all=keep_all)
    return certificate, carry_out(operator, start, set(times), plan, threads, progress)


def planned(
    operator: Operator,
    qubits: int,
    times: Sequence[float],
    tolerance: float,
    *,
    keep_all: bool,
    interval: tuple[float, float, str] | None = None,
) -> tuple[Certificate, Schedule]:
    """Plan an evolution without a start; the plan and its certificate hold for every one.

    Parameters
    ----------
    operator, times, tolerance, keep_all
        As for `evolve`.
    qubits : int
    interval : (float, float, str), optional
        A proven spectral interval and how it was found, where one is at hand.

    Raises
    ------
    ToleranceError, MemoryRefusedError
        As for `evolve`.
    """
    size = 16 << qubits
    kept = len(times) if keep_all else 1
    _memory.require((2 + kept) * size, "reference", lambda n: (2 + kept) * (16 << n))
    room = _memory.available_bytes()
    spare = 0 if room is None else max(0, room // 2 - (2 + kept) * size) // size
    # The same grouping wherever memory is not scarce, so that results keep their bits from machine to machine.
    group = max(1, min(len(times), _GROUP, 1 + spare))
    if interval is None:
        report = spectral_report(operator, _effort(operator, qubits, times[-1]))
        interval = report.low, report.high, report.route
    low, high, route = interval
    plan = schedule(operator, (low, high), times, tolerance, group)
    bounds = {time: pair for time, pair in plan.bounds().items() if time in set(times)}
    certificate = Certificate(
        method="chebyshev",
        error_bound={time: cut + rounded for time, (cut, rounded) in bounds.items()},
        truncation={time: cut for time, (cut, _) in bounds.items()},
        rounding={time: rounded for time, (_, rounded) in bounds.items()},
        spectral_interval=(low, high),
        spectral_route=route,
        applications=plan.applications,
        proven=True,
        notes=_NOTES,
    )
    return certificate, plan


def _effort(operator: Operator, qubits: int, time: float) -> float:
    """Return the share of the usual work on the spectrum that is worth it: a fiftieth of what the evolution takes.

    An evolution takes about Σ|c| t + 30 applications, each about a tenth of a multiplication of a dense solution for each
    term and amplitude. Depends on the question alone, so that results do.
    """
    applications = operator.one_norm() * abs(time) + 30.0
    evolution = 0.1 * max(len(operator), 1) * applications * 2.0**qubits
    return min(1.0, max(0.02 * evolution / CLUSTER_COST, 1e-6))


def carry_out(
    operator: Operator,
    start: npt.NDArray[Any],
    wanted: set[float],
    plan: Schedule,
    threads: int,
    progress: Tick | None,
) -> Iterator[Step]:
    """Carry a plan out, giving (time, vector) at each wanted time; the vectors change with the next step."""
    current: Vector = _allocation.amplitudes(start.size, np.complex128)
    np.copyto(current, start)
    previous = _allocation.amplitudes(start.size, np.complex128)
    sums: list[Vector] = []
    scale = 2.0 / plan.half_width
    done = 0
    for expansion in plan.expansions:
        missing = range(len(expansion.targets) - len(sums))
        sums.extend(_allocation.amplitudes(start.size, np.complex128) for _ in missing)
        used = sums[: len(expansion.targets)]

        def tick(passes: int, total: int, done: int = done, degree: int = expansion.degree) -> None:
            if progress is not None:
                progress(done + degree * passes // max(total, 1), plan.applications)

        _native.chebyshev_sums(
            operator._terms,
            scale,
            -scale * plan.centre,
            current,
            previous,
            used,
            expansion.coefficients(plan.half_width),
            threads,
            None if progress is None else tick,
        )
        done += expansion.degree
        for target, vector in zip(expansion.targets, used, strict=True):
            turn = Rotations([], [], [], operator.qubits, phase=-plan.centre * (target - expansion.start))
            State.from_array(vector).apply(turn, threads=threads)
            if target in wanted:
                yield target, vector
        current, sums[len(used) - 1] = used[-1], current
