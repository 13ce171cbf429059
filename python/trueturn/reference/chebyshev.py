"""Evolution by Chebyshev expansion, with every part of its error proven."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn import _allocation, _memory, _native
from trueturn.operator import Operator
from trueturn.reference._extremes import down, up
from trueturn.reference.certificate import Certificate
from trueturn.reference.conserved import conserved_field
from trueturn.reference.schedule import Schedule, schedule
from trueturn.reference.spectrum import CLUSTER_COST, spectral_report
from trueturn.state import State

__all__ = ["bare_interval", "carry_out", "evolve", "planned"]

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

    ψ(t) = e^{-i(c+B)t} Σ_k (2-δ_k0) (-i)^k J_k(λt) T_k((H-B-c)/λ) ψ(0), with a field B that H conserves (see `conserved`),
    centre c and half-width λ of a proven interval of H - B.

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
        What `bare_interval` gives, where it is at hand.

    Raises
    ------
    ToleranceError, MemoryRefusedError
        As for `evolve`.
    """
    size = 16 << qubits
    kept = len(times) if keep_all else 1
    room = _memory.require((2 + kept) * size, "reference", lambda n: (2 + kept) * (16 << n))
    spare = 0 if room is None else max(0, room // 2 - (2 + kept) * size) // size
    # The same grouping wherever memory is not scarce, so that results keep their bits from machine to machine.
    group = max(1, min(len(times), _GROUP, 1 + spare))
    conserved = conserved_field(operator)
    bare = conserved.taken_from(operator)
    low, high, route = _interval(bare, times[-1]) if interval is None else interval
    plan = schedule(bare, (low, high), times, tolerance, group, conserved)
    if conserved.strengths:
        # The whole operator's; the blur is what rounding has moved the bare one by.
        reach = conserved.norm + conserved.blur
        low, high, route = down(low - reach), up(high + reach), f"{route}, widened by the conserved field"
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


def bare_interval(operator: Operator, time: float) -> tuple[float, float, str]:
    """Enclose the spectrum of an operator without the field that it conserves, and say how it was found.

    As tightly as an evolution to this time is worth; that of the operator times -1 is the mirror image.
    """
    return _interval(conserved_field(operator).taken_from(operator), time)


def _interval(bare: Operator, time: float) -> tuple[float, float, str]:
    terms = tuple(bare.x_masks.tolist()), tuple(bare.z_masks.tolist()), bare.coefficients.tobytes()
    return _known_interval(_Content(bare, (bare.qubits, *terms)), _effort(bare, bare.qubits, time))


@dataclass(frozen=True)
class _Content:
    """An operator that equals others with the same terms in the same order: these have the same interval to the last bit."""

    operator: Operator = field(compare=False)
    terms: tuple[object, ...]


@lru_cache(maxsize=16)
def _known_interval(bare: _Content, effort: float) -> tuple[float, float, str]:
    report = spectral_report(bare.operator, effort)
    return report.low, report.high, report.route


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
    """Carry a plan out, giving (time, vector) at each wanted time; the vectors change with the next step.

    From a real start under a real operator the first expansion takes half the work and one vector less.
    """
    current: Vector = _allocation.amplitudes(start.size, np.complex128)
    np.copyto(current, start)
    previous: Vector | None = None
    sums: list[Vector] = []
    terms = plan.field.taken_from(operator)._terms
    scale = 2.0 / plan.half_width
    shift = -scale * plan.centre
    done = 0
    for expansion in plan.expansions:
        missing = range(len(expansion.targets) - len(sums))
        sums.extend(_allocation.amplitudes(start.size, np.complex128) for _ in missing)
        used = sums[: len(expansion.targets)]
        coefficients = expansion.coefficients(plan.half_width)

        def tick(passes: int, total: int, done: int = done, degree: int = expansion.degree) -> None:
            if progress is not None:
                progress(done + degree * passes // max(total, 1), plan.applications)

        hook = None if progress is None else tick
        if _native.real_chebyshev_sums(terms, scale, shift, current, used, coefficients, threads, hook):
            results, free = [current, *used[:-1]], used[-1]
        else:
            if previous is None:
                previous = _allocation.amplitudes(start.size, np.complex128)
            _native.chebyshev_sums(terms, scale, shift, current, previous, used, coefficients, threads, hook)
            results, free = used, current
        done += expansion.degree
        for target, vector in zip(expansion.targets, results, strict=True):
            turn = plan.field.evolution(target - expansion.start, plan.centre, operator.qubits)
            State._over(vector).apply(turn, threads=threads)
            if target in wanted:
                yield target, vector
        current, sums[: len(used)] = results[-1], [*results[:-1], free]
