"""Certified reference evolution: exp(-iHt) applied to a state with a stated error bound."""

from __future__ import annotations

import math
import os
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import nullcontext
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn

import numpy as np
import numpy.typing as npt

from trueturn import _threads
from trueturn._observables import named_operators
from trueturn.errors import ArgumentError, OperatorError, ToleranceError
from trueturn.operator import Operator
from trueturn.reference import chebyshev, dense, folder, krylov
from trueturn.reference.certificate import (
    Certificate,
    expectation_rounding,
    expectation_shift,
    norm_bound,
)
from trueturn.reference.inputs import Inputs, inputs_of
from trueturn.state import State, require_normalised, require_same_qubits

__all__ = ["Certificate", "Reference", "reference"]

Progress = Callable[[str, float, float], object]
METHODS = ("chebyshev", "krylov", "dense")
DENSE_LIMIT = 12


@dataclass(frozen=True)
class Reference:
    """An evolution with a stated error bound.

    Attributes
    ----------
    times : tuple of float
        As asked, in the order asked.
    states : list of State
        With ``keep="all"`` one a time, in the order of `times`; with ``keep="last"`` only the state at the time
        furthest from 0.
    expectations : mapping of str to ndarray, shape (len(times),), float64
    expectation_bounds : mapping of str to ndarray, shape (len(times),), float64
        How far each expectation can be from the exact one: ‖O‖ (2δ + δ²) plus rounding, δ the state's error
        bound and O without its identity term, whose share is that of the start exactly.
    certificate : Certificate
    inputs : Inputs or None
        What it was computed from; None where it was put together by hand.
    """

    times: tuple[float, ...]
    states: list[State]
    expectations: Mapping[str, npt.NDArray[np.float64]]
    expectation_bounds: Mapping[str, npt.NDArray[np.float64]]
    certificate: Certificate
    inputs: Inputs | None = None

    def write(self, into: str | os.PathLike[str], *, title: str = "", start: str = "") -> Path:
        """Write a reference folder: manifest.json, expectations.csv and one state_*.npy for each state kept.

        Parameters
        ----------
        into : str or path-like
            An existing reference folder is replaced; any other folder that is not empty is refused.
        title, start : str
            Labels for the manifest: of the whole, and of the start state.

        Returns
        -------
        Path
            The folder, which `trueturn.verify` checks.

        Raises
        ------
        ArgumentError
            The place is taken by something else, has no room for the states, or a name of an observable cannot head a
            column.
        OSError
            As raised by the system, such as a full disk; an existing folder is then as it was.

        Notes
        -----
        Written beside the target under a temporary name and renamed when complete. States go out in pieces of 16 MiB, so a
        state costs no second vector.
        """
        if self.inputs is None:
            raise ArgumentError(
                "reference: does not know what it was computed from (None); compute it by trueturn.reference",
                argument="reference",
                value=None,
            )
        place = Path(into)
        last = max(self.times, key=abs)
        kept = dict(zip(self.times if len(self.states) == len(self.times) else [last], self.states, strict=True))
        folder.require_replaceable(place)
        folder.require_room(place, len(kept), self.inputs.operator.qubits)
        with folder.opened(place, self.times, list(self.expectations)) as writer:
            for time, state in kept.items():
                writer.add_state(time, state.amplitudes)
            writer.finish(self, title, start)
        return place


def reference(
    operator: Operator,
    state: State,
    times: float | Iterable[float],
    tolerance: float = 1e-10,
    observables: Mapping[str, Operator] | None = None,
    method: str = "chebyshev",
    keep: str = "last",
    progress: Progress | None = None,
    *,
    threads: int | None = None,
    into: str | os.PathLike[str] | None = None,
    title: str = "",
    start: str = "",
) -> Reference:
    """Evolve a state by exp(-i operator t) to each time, with a certificate.

    Parameters
    ----------
    operator : Operator
        The Hamiltonian, on as many qubits as the state; ħ = 1.
    state : State
        Start; not written. Its norm must be 1 within 1e-6 (1e-3 for complex64).
    times : float or iterable of float
        In inverse units of the coefficients; finite, of one sign, any order.
    tolerance : float
        Largest 2-norm error bound at any time.
    observables : mapping of str to Operator
        Recorded at each time.
    method : "chebyshev", "krylov" or "dense"
        Chebyshev is proven in every part. Krylov and dense (12 qubits at most) serve to cross-check it; the rounding
        part of their bound is estimated.
    keep : "last" or "all"
        Which states to keep.
    progress : callable, optional
        Called with ("reference", done, total); an exception of its own stops the run and passes through.
    threads : int, optional
    into : str or path-like, optional
        Write a reference folder there (see `Reference.write`). With ``keep="all"`` each state then goes to disk when it is
        reached, and only the last one is kept in memory.
    title, start : str
        Labels for the manifest of that folder.

    Returns
    -------
    Reference

    Raises
    ------
    ArgumentError
        Times, method, keep or the norm of the state are out of range; or `into` is a place that cannot be written to.
    OperatorError
        The operator has no terms.
    StateShapeError
        Operator or observables act on other qubits than the state.
    ToleranceError
        The tolerance is not positive, or below what double precision can certify.
    MemoryRefusedError
        Three state vectors beside the start (and one more for each further state that is kept) do not fit.

    Notes
    -----
    Chebyshev expansion: H. Tal-Ezer, R. Kosloff, J. Chem. Phys. 81, 3967 (1984); the bounds are derived in the modules
    `bessel` and `schedule`. Applications of H: about λ t plus 20 to 30, λ half the width of the spectral interval.

    Examples
    --------
    >>> import trueturn as tt
    >>> spin = tt.Operator("0.6 X_0 + 0.8 Z_0")
    >>> found = tt.reference(spin, tt.State.product("0"), [1.0], observables={"z": tt.Operator("Z_0")})
    >>> print(f"{found.expectations['z'][0]:.8f}")
    0.49018714
    """
    watched = named_operators(observables)
    asked = _times(times)
    _check(operator, state, tolerance, watched, method, keep)
    workers = _threads.resolve(threads)
    if asked and min(asked) < 0.0:
        mirrored, sign = -1.0 * operator, -1.0
    else:
        mirrored, sign = operator, 1.0
    ascending = sorted({sign * time for time in asked if time != 0.0})

    def tick(done: int, total: int) -> None:
        if progress is not None:
            progress("reference", done, total)

    hook = None if progress is None else tick
    place = None if into is None else Path(into)
    if place is not None:
        folder.require_names(list(watched))
        folder.require_replaceable(place)
        folder.require_room(place, len(set(asked)) if keep == "all" else 1, state.qubits)
    in_memory = "last" if into is not None else keep
    certificate, steps = _run(mirrored, state, ascending, tolerance, method, in_memory, workers, hook)
    if certificate.largest > tolerance:
        _refuse_tolerance(certificate, tolerance)
    inputs = inputs_of(operator, state, watched, tolerance, workers)
    length = inputs.start_norm
    records = {name: _Record(observable, length, state.qubits) for name, observable in watched.items()}
    last = sign * ascending[-1] if ascending else 0.0
    kept: dict[float, State] = {}
    with nullcontext() if place is None else folder.opened(place, asked, list(watched)) as writer:
        for time, vector in _with_start(state, 0.0 in asked, ((sign * time, vector) for time, vector in steps)):
            now = State.from_array(vector)
            values = now.expectations([record.bare for record in records.values()], threads=workers)
            for record, value in zip(records.values(), values, strict=True):
                record.take(time, float(value))
            if writer is not None and (keep == "all" or time == last):
                writer.add_state(time, vector)
            if time == last:
                kept[time] = now
            elif in_memory == "all":
                kept[time] = State.from_array(vector if time == 0.0 else vector.copy())
            del now, vector  # the start's own vector is not to outlive its turn
        certificate = _resigned(certificate, sign, asked)
        order = asked if in_memory == "all" else [last]
        found = Reference(
            times=tuple(asked),
            states=[kept[time] for time in order],
            expectations={name: np.array([record.values[time] for time in asked]) for name, record in records.items()},
            expectation_bounds={
                name: np.array([record.bound(certificate.error_bound[time]) for time in asked])
                for name, record in records.items()
            },
            certificate=certificate,
            inputs=inputs,
        )
        if writer is not None:
            writer.finish(found, title, start)
    return found


def _with_start(
    state: State, wanted: bool, steps: Iterator[tuple[float, npt.NDArray[np.complex128]]]
) -> Iterator[tuple[float, npt.NDArray[np.complex128]]]:
    """Put the start, as a vector of its own, before the steps where time 0 is wanted too."""
    if wanted:
        yield 0.0, state.amplitudes.astype(np.complex128)
    yield from steps


def _run(
    operator: Operator,
    state: State,
    times: Sequence[float],
    tolerance: float,
    method: str,
    keep: str,
    threads: int,
    progress: Callable[[int, int], object] | None,
) -> tuple[Certificate, Any]:
    start = state.amplitudes
    if not times:
        low, high = operator.spectral_interval()
        return Certificate(method, {}, {}, {}, (low, high), "not used", 0, True), iter(())
    if method == "krylov":
        return krylov.evolve(operator, start, times, tolerance, threads=threads, progress=progress)
    if method == "dense":
        return dense.evolve(operator, start, times)
    return chebyshev.evolve(
        operator, start, times, tolerance, keep_all=keep == "all", threads=threads, progress=progress
    )


def _refuse_tolerance(certificate: Certificate, tolerance: float) -> NoReturn:
    """Refuse what a cross-checking method reaches only above the tolerance; Chebyshev plans refuse themselves."""
    rounding = max(certificate.rounding.values())
    achievable = 2.0 * rounding / (1.0 - krylov.TRUNCATION_SHARE)
    raise ToleranceError(
        f"tolerance: below what the {certificate.method} method reaches ({tolerance:g}); "
        f"ask for {achievable:.2g} or more, or a shorter time",
        tolerance=tolerance,
        achievable=achievable,
    )


class _Record:
    """Expectations of one observable along the way.

    The identity term counts with the norm of the start, which exact evolution keeps: the truncated one keeps it
    only within its error bound, and that would have to be paid for with the size of the term.
    """

    def __init__(self, observable: Operator, length: float, qubits: int) -> None:
        self.values: dict[float, float] = {}
        self.bare = observable.without_identity()
        self._length = length
        self._constant = observable.identity_coefficient * self._length**2
        self._norm = norm_bound(observable)
        self._rounding = expectation_rounding(observable, qubits) * max(1.0, self._length) ** 2

    def take(self, time: float, value: float) -> None:
        """Take down the expectation of the observable without its identity."""
        self.values[time] = self._constant + value

    def bound(self, distance: float) -> float:
        return expectation_shift(self._norm, distance, max(1.0, self._length)) + self._rounding


def _resigned(certificate: Certificate, sign: float, asked: Sequence[float]) -> Certificate:
    """Give the certificate the times as asked; time 0 is exact."""

    def by_time(bounds: Mapping[float, float]) -> dict[float, float]:
        return {time: bounds[sign * time] if time else 0.0 for time in asked}

    low, high = certificate.spectral_interval
    return Certificate(
        method=certificate.method,
        error_bound=by_time(certificate.error_bound),
        truncation=by_time(certificate.truncation),
        rounding=by_time(certificate.rounding),
        spectral_interval=(low, high) if sign > 0 else (-high, -low),
        spectral_route=certificate.spectral_route,
        applications=certificate.applications,
        proven=certificate.proven,
        notes=certificate.notes,
    )


def _times(times: float | Iterable[float]) -> list[float]:
    try:
        if isinstance(times, str):
            raise TypeError
        single = not isinstance(times, Iterable) or getattr(times, "ndim", None) == 0
        many: list[Any] = [times] if single else list(times)  # type: ignore[arg-type]
        found = [float(time) for time in many]
    except (TypeError, ValueError):
        raise ArgumentError(
            f"times: not numbers ({times!r}); give finite numbers", argument="times", value=times
        ) from None
    if not found:
        raise ArgumentError("times: empty; give at least one time", argument="times", value=times)
    for time in found:
        if not math.isfinite(time):
            raise ArgumentError(f"times: not finite ({time}); give finite times", argument="times", value=time)
    if min(found) < 0.0 < max(found):
        raise ArgumentError(
            f"times: of both signs ({min(found):g} and {max(found):g}); ask for one sign at a time",
            argument="times",
            value=times,
        )
    return found


def _check(
    operator: Operator,
    state: State,
    tolerance: float,
    observables: Mapping[str, Operator],
    method: str,
    keep: str,
) -> None:
    require_same_qubits(state, operator, "operator")
    if len(operator) == 0:
        raise OperatorError("operator: has no terms (0.0); give a Hamiltonian with at least one", argument="operator")
    for name, observable in observables.items():
        require_same_qubits(state, observable, f"observables[{name!r}]")
    if method not in METHODS:
        raise ArgumentError(
            f"method: unknown ({method!r}); give one of {', '.join(METHODS)}", argument="method", value=method
        )
    if method == "dense" and state.qubits > DENSE_LIMIT:
        raise ArgumentError(
            f"method: dense is for at most {DENSE_LIMIT} qubits ({state.qubits} given); use chebyshev",
            argument="method",
            value=method,
        )
    if keep not in ("last", "all"):
        raise ArgumentError(f'keep: unknown ({keep!r}); give "last" or "all"', argument="keep", value=keep)
    if isinstance(tolerance, bool) or not isinstance(tolerance, (int, float)) or not 0.0 < tolerance < math.inf:
        raise ToleranceError(
            f"tolerance: not a positive number ({tolerance!r}); 1e-10 can usually be certified",
            tolerance=tolerance,
            achievable=1e-10,
        )
    require_normalised(state)
