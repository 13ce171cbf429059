"""What an ensemble does on average to one state, beside what is proven about its channel."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from trueturn import _threads
from trueturn.errors import ArgumentError, EnsembleError, StateShapeError
from trueturn.operator import Operator
from trueturn.randomised.channel import ChannelBound
from trueturn.randomised.checks import as_int, checked_operator, whole
from trueturn.randomised.ensemble import Ensemble
from trueturn.randomised.estimates import CONFIDENCE, Estimate, estimated
from trueturn.randomised.origin import Origin, origin_of
from trueturn.randomised.truth import Truth, truth_of
from trueturn.randomised.work import FIXED_COLUMNS, Row, Task, run
from trueturn.reference import Reference
from trueturn.reference.certificate import UNIT, expectation_rounding, expectation_shift, norm_bound
from trueturn.state import State, require_normalised, require_same_qubits

__all__ = ["Average", "Progress", "averaged"]

Progress = Callable[[int, int], object]


@dataclass(frozen=True, repr=False)
class Average:
    """Samples of an ensemble on one state, and what they say about the averaged channel.

    Attributes
    ----------
    ensemble : Ensemble
    indices : tuple of int
        Samples that went in, ascending.
    values : mapping of str to ndarray, shape (len(indices),), float64
        Expectation of each observable in each sample.
    observables : mapping of str to Estimate
        Of the averaged channel.
    infidelity : Estimate or None
        1 - <ψ|ρ|ψ> of the averaged output ρ, given a reference state ψ. It is at most the trace distance, hence at
        most half the diamond norm.
    single_sample_state_error : Estimate or None
        ‖ψ_k - ψ‖ of single samples, phase kept: mean, and so on, without a bound, since the channel bound does not
        apply to it.
    single_sample_state_errors : ndarray, shape (len(indices),), or None
        The same, sample by sample.
    channel_bound : ChannelBound or None
        Of the averaged channel.
    """

    ensemble: Ensemble
    indices: tuple[int, ...]
    values: Mapping[str, npt.NDArray[np.float64]]
    observables: Mapping[str, Estimate]
    infidelity: Estimate | None
    single_sample_state_error: Estimate | None
    single_sample_state_errors: npt.NDArray[np.float64] | None
    channel_bound: ChannelBound | None
    _rows: Mapping[int, Row] = field(repr=False, compare=False)
    _origin: Origin = field(repr=False, compare=False)

    @property
    def count(self) -> int:
        """Number of samples."""
        return len(self.indices)

    def __repr__(self) -> str:
        lines = [f"<Average of {self.count} samples of {type(self.ensemble).__name__}, seed {self.ensemble.seed}"]
        figures = dict(self.observables)
        if self.infidelity is not None:
            figures["infidelity"] = self.infidelity
        for name, found in figures.items():
            lines.append(
                f"  {name}: mean {found.mean:.6g} ± {found.standard_error:.2g} (standard error); "
                f"single samples spread by {found.spread:.2g}"
            )
            if found.error is not None:
                low, high = found.error
                limit = "" if found.bound is None else f"; proven ≤ {found.bound:.3g}"
                lines.append(
                    f"    averaged channel off by {low:.2g} … {high:.2g} "
                    f"({CONFIDENCE:.1%} confidence in the sampling, all bounds included){limit}"
                )
        if self.channel_bound is not None:
            lines.append(f"  {self.channel_bound}")
        if self.single_sample_state_error is not None and self.single_sample_state_errors is not None:
            least, most = self.single_sample_state_errors.min(), self.single_sample_state_errors.max()
            caution = "" if self.channel_bound is None else "; the channel bound does not apply to single samples"
            lines.append(
                f"  state error of single samples: mean {self.single_sample_state_error.mean:.3g}, "
                f"from {least:.3g} to {most:.3g}{caution}"
            )
        return "\n".join(lines) + ">"


def averaged(
    ensemble: Ensemble,
    state: State,
    observables: Mapping[str, Operator],
    count: int,
    reference: Reference | None,
    executor: Executor | None,
    progress: Progress | None,
    threads: int | None,
    done: Average | None,
) -> Average:
    """Measure the averaged channel; see `Ensemble.average`."""
    total = whole("count", count, 1, "give how many samples to draw")
    if not isinstance(observables, Mapping):
        raise ArgumentError(
            f"observables: is no mapping ({observables!r}); give one of names to operators, {{}} for none",
            argument="observables",
            value=observables,
        )
    watched = {name: checked_operator(f"observables[{name!r}]", operator) for name, operator in observables.items()}
    _check(ensemble, state, watched, executor)
    truth = truth_of(ensemble, reference)
    origin = origin_of(ensemble, state, watched, truth)
    rows = _kept(origin, done)
    if threads is None and executor is not None:
        threads = 1
    if threads is not None:
        threads = _threads.resolve(as_int(threads))
    exact = truth.state
    task = Task(
        ensemble,
        state.amplitudes,
        tuple(watched.values()),
        None if exact is None else exact.amplitudes,
        threads,
    )
    rows = {index: row for index, row in rows.items() if index < total}
    already = len(rows)

    def report(finished: int) -> None:
        if progress is not None:
            progress(already + finished, total)

    fresh, failure = run(task, [index for index in range(total) if index not in rows], executor, report)
    rows.update(fresh)
    if failure is not None:
        missing = tuple(index for index in range(total) if index not in rows)
        raise EnsembleError(
            f"executor: stopped after {len(rows)} of {total} samples "
            f"({type(failure).__name__}: {failure}); samples {_ranges(missing)} are missing: run them with "
            "done=error.partial and a working executor, or none",
            partial=_result(origin, state, truth, rows) if rows else None,
            missing=missing,
        ) from failure
    return _result(origin, state, truth, rows)


def _check(ensemble: Ensemble, state: State, observables: Mapping[str, Operator], executor: object) -> None:
    if not isinstance(state, State):
        raise ArgumentError(
            f"state: is no State ({type(state).__name__}); use State.product or another of its constructors",
            argument="state",
            value=state,
        )
    if state.qubits != ensemble.qubits:
        raise StateShapeError(
            f"state: has {state.qubits} qubits, the ensemble {ensemble.qubits}; give a start on {ensemble.qubits}",
            shape=state.qubits,
            expected=ensemble.qubits,
        )
    for name, operator in observables.items():
        require_same_qubits(state, operator, f"observables[{name!r}]")
    require_normalised(state)
    if executor is not None and not callable(getattr(executor, "submit", None)):
        raise ArgumentError(
            f"executor: has no submit ({executor!r}); give a concurrent.futures.Executor, or None",
            argument="executor",
            value=executor,
        )


def _kept(origin: Origin, done: Average | None) -> dict[int, Row]:
    if done is None:
        return {}

    def refused(wrong: str) -> ArgumentError:
        return ArgumentError(
            f"done: {wrong}; give the partial result of the same call, or None", argument="done", value=done
        )

    if not isinstance(done, Average):
        raise refused(f"is no Average of this ensemble ({type(done).__name__})")
    other = origin.difference(done._origin)
    if other == "ensemble":
        raise refused(f"is no Average of this ensemble (but of {done.ensemble!r})")
    if other == "observables":
        raise refused(f"has other observables ({dict(done._origin.observables)!r})")
    if other == "start":
        raise refused(f"has another start (amplitudes with SHA-256 {done._origin.start[:16]}…)")
    if other == "reference":
        held = done._origin.truth
        raise refused("has another reference " + ("(none)" if held is None else f"(of time {held[0]!r})"))
    return dict(done._rows)


def _result(origin: Origin, state: State, truth: Truth, rows: Mapping[int, Row]) -> Average:
    ensemble, observables = origin.ensemble, dict(origin.observables)
    indices = tuple(sorted(rows))
    table = np.array([rows[index] for index in indices], dtype=np.float64)
    limit = ensemble.channel_bound()
    length = max(1.0, state.norm())
    own = float(table[:, 0].max())
    unit = 2.0**-24 if state.dtype == np.dtype(np.complex64) else UNIT
    figures = {}
    for place, (name, operator) in enumerate(observables.items()):
        norm = norm_bound(operator)
        rounding = expectation_shift(norm, own, length) + expectation_rounding(operator, state.qubits) * (unit / UNIT)
        exact, slack = truth.expectation(name)
        figures[name] = estimated(
            table[:, FIXED_COLUMNS + place],
            2.0 * norm * length**2,
            exact,
            slack + rounding,
            None if limit is None else norm * length**2 * limit.diamond,
        )
    infidelity = single = errors = None
    if truth.state is not None:
        errors = table[:, 1].copy()
        # The norm of a difference is summed in blocks: 128 additions in a row, 3 levels, then a tree.
        slack = own + truth.state_bound + UNIT * float(errors.max()) * (136.0 + state.qubits)
        single = estimated(errors, 2.0 * length, 0.0, slack, None)
        # The infidelity is the expectation of a projector, of norm 1.
        infidelity = estimated(
            table[:, 2], 1.0, 0.0, expectation_shift(1.0, slack, length), None if limit is None else limit.half_diamond
        )
    return Average(
        ensemble=ensemble,
        indices=indices,
        values={name: table[:, FIXED_COLUMNS + place].copy() for place, name in enumerate(observables)},
        observables=figures,
        infidelity=infidelity,
        single_sample_state_error=single,
        single_sample_state_errors=errors,
        channel_bound=limit,
        _rows=dict(rows),
        _origin=origin,
    )


def _ranges(indices: Sequence[int]) -> str:
    """Write 0, 1, 2, 5 as "0-2, 5", the first few of many."""
    spans: list[list[int]] = []
    for index in indices:
        if spans and spans[-1][1] == index - 1:
            spans[-1][1] = index
        else:
            spans.append([index, index])
    shown = [str(low) if low == high else f"{low}-{high}" for low, high in spans[:8]]
    return ", ".join(shown) + (", …" if len(spans) > 8 else "")
