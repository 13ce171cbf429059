"""Averages over an ensemble: the same from every executor, honest about what they are, complete when it dies."""

from __future__ import annotations

import copy
import dataclasses
import math
import multiprocessing
import re
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor

import numpy as np
import pytest
import scipy.stats

import channels
import circuits
import doomed
import oracle
import trueturn as tt
from trueturn import randomised
from trueturn.randomised.estimates import CONFIDENCE, estimated, sampling_width

SPIN = tt.Operator("0.6 X_0 + 0.4 Z_0")
DRIFT = randomised.qdrift(SPIN, 1.0, 20, seed=3)
Z = {"z": tt.Operator("Z_0")}
START = tt.State.product("0")
P3_START = tt.State.product("0+1")
P3_WATCHED = {"z": tt.Operator("Z_0", qubits=3), "bond": tt.Operator("2 X_0 X_1 + 5", qubits=3)}


def spin_reference(observables=Z):
    return tt.reference(SPIN, START, [1.0], observables=observables)


def same(first, second):
    """Bit for bit."""
    return (
        first.indices == second.indices
        and first.observables == second.observables
        and first.infidelity == second.infidelity
        and all(np.array_equal(first.values[name], second.values[name]) for name in first.values)
    )


def every_kind():
    partition = circuits.P3
    circuit = tt.formula("strang").rotations(partition, 1.0, 3)
    tail = tt.Operator("0.1 X_0 + 0.05 Y_1 Z_2", qubits=3)
    return [
        randomised.permuted("lie", partition, 1.0, 4, seed=1),
        randomised.directed("strang", partition, 1.0, 4, seed=2),
        randomised.qdrift(partition.operator(), 1.0, 30, seed=3),
        randomised.partly("strang", partition, tail, 1.0, 3, 4, seed=4),
        randomised.framed(circuit, seed=5),
    ]


def test_threads_and_processes_give_the_same_bits():
    context = multiprocessing.get_context("spawn")
    with ThreadPoolExecutor(3) as threads, ProcessPoolExecutor(2, mp_context=context) as processes:
        for ensemble in every_kind():
            here = ensemble.average(P3_START, P3_WATCHED, 150)
            assert here.indices == tuple(range(150))
            for executor in (threads, processes):
                assert same(ensemble.average(P3_START, P3_WATCHED, 150, executor=executor), here)
            with tt.threads(1):
                assert same(ensemble.average(P3_START, P3_WATCHED, 150, threads=2), here)


def test_values_are_those_of_the_samples_one_by_one():
    ensemble = every_kind()[2]
    found = ensemble.average(P3_START, P3_WATCHED, 12)
    for index in found.indices:
        state = P3_START.copy()
        state.apply(ensemble.sample(index))
        for name, operator in P3_WATCHED.items():
            assert found.values[name][index] == state.expectation(operator)
    for name, estimate in found.observables.items():
        values = found.values[name]
        # Exactly rounded sums against NumPy's: a few roundings of numbers up to 7.
        assert estimate.mean == pytest.approx(values.mean(), rel=1e-14)
        assert estimate.spread == pytest.approx(values.std(ddof=1), rel=1e-12)
        assert estimate.standard_error == pytest.approx(estimate.spread / math.sqrt(12), rel=1e-15)


def test_errors_of_the_averaged_channel_and_bounds_stand_beside_each_other():
    count = 1500
    found = DRIFT.average(START, Z, count, reference=spin_reference())
    estimate, limit = found.observables["z"], DRIFT.channel_bound()
    channel = channels.drift(SPIN, 1.0, 20)
    exact = channels.expectation(channels.ideal(SPIN, 1.0), START.amplitudes, oracle.dense(Z["z"]))
    off = abs(channels.expectation(channel, START.amplitudes, oracle.dense(Z["z"])) - exact)
    # The reference's own bound is 1e-10.
    assert estimate.exact == pytest.approx(exact, abs=1e-9)
    assert estimate.error[0] <= off <= estimate.error[1] <= estimate.bound
    # ‖Z‖ · diamond norm; the norm is a spectral interval, padded by 1e-9.
    assert estimate.bound == pytest.approx(limit.diamond, rel=1e-8) and found.channel_bound == limit
    target = oracle.evolution(SPIN, 1.0) @ START.amplitudes
    projector = np.outer(target, target.conj())
    infidelity = 1 - channels.expectation(channel, START.amplitudes, projector)
    assert found.infidelity.error[0] <= infidelity <= found.infidelity.error[1] <= found.infidelity.bound
    assert found.infidelity.error[0] > 0
    assert found.infidelity.bound == limit.half_diamond


def test_state_errors_of_single_samples_are_told_apart_from_the_channel():
    found = DRIFT.average(START, Z, 60, reference=spin_reference())
    target = oracle.evolution(SPIN, 1.0) @ START.amplitudes
    for index in found.indices:
        ours = circuits.matrix(DRIFT.sample(index)) @ START.amplitudes
        error = found.single_sample_state_errors[index]
        assert error == pytest.approx(np.linalg.norm(ours - target), abs=1e-9)  # the reference's 1e-10 and rounding
    overlaps = [abs(np.vdot(target, circuits.matrix(DRIFT.sample(k)) @ START.amplitudes)) ** 2 for k in found.indices]
    # Infidelities are some 0.02; taking d² without its correction would be off by 1e-4.
    assert found.infidelity.mean == pytest.approx(1 - np.mean(overlaps), abs=1e-9)
    assert found.single_sample_state_error.mean == pytest.approx(found.single_sample_state_errors.mean(), rel=1e-14)
    assert found.single_sample_state_error.bound is None
    # A sample may be further off than the bound on the average, which is why the two are told apart.
    assert found.single_sample_state_errors.max() > DRIFT.channel_bound().diamond
    text = repr(found)
    assert "averaged channel (not one sample): half diamond norm" in text
    assert "state error of single samples" in text and "the channel bound does not apply to single samples" in text


def test_framed_circuits_are_compared_at_the_furthest_time_and_have_no_bound():
    circuit = tt.formula("strang").rotations(tt.Partition.of(SPIN, "single"), 1.0, 50)
    found = randomised.framed(circuit, seed=1).average(START, Z, 10, reference=spin_reference())
    assert found.channel_bound is None and found.observables["z"].bound is None
    # All samples are one unitary: their spread is rounding, some 500 rotations of 5 u each.
    z = found.observables["z"]
    assert z.spread <= 1e-12
    # Without sampling error the interval still holds the reference's bound and the rounding of the circuits.
    assert z.error[1] >= abs(z.mean - z.exact) + spin_reference().expectation_bounds["z"][0] + 1e-14
    assert "does not apply" not in repr(found) and "state error of single samples" in repr(found)


def test_a_reference_at_several_times_is_read_at_the_ensembles_own():
    several = tt.reference(SPIN, START, [2.0, 1.0], observables=Z, keep="all")
    first = DRIFT.average(START, Z, 5, reference=several)
    second = DRIFT.average(START, Z, 5, reference=spin_reference())
    # Both references are good to 1e-10.
    assert first.observables["z"].exact == pytest.approx(second.observables["z"].exact, abs=1e-9)
    assert first.single_sample_state_errors == pytest.approx(second.single_sample_state_errors, abs=1e-9)


def test_one_sample_has_no_standard_error():
    found = DRIFT.average(START, Z, 1, reference=spin_reference())
    assert found.observables["z"].standard_error == math.inf
    # All that is certain is the range of <Z>, 2, and the bounds on norm, reference and rounding, 1e-8 in all.
    z = found.observables["z"]
    assert z.error[0] == 0.0 and 2.0 <= z.error[1] - abs(z.mean - z.exact) <= 2.0 + 1e-8


@pytest.mark.parametrize("count", [2, 3, 5, 20])
def test_intervals_hold_the_exact_error_of_the_averaged_channel_as_often_as_stated(count):
    """Each is missed with probability 0.003 at most, so that 300 seeds miss m or more with that of a binomial tail."""
    reference = spin_reference()
    target = oracle.evolution(SPIN, 1.0) @ START.amplitudes
    for draws in (4, 20):
        channel = channels.drift(SPIN, 1.0, draws)
        z = channels.expectation(channel, START.amplitudes, oracle.dense(Z["z"]))
        off = abs(z - channels.expectation(channels.ideal(SPIN, 1.0), START.amplitudes, oracle.dense(Z["z"])))
        infidelity = 1 - channels.expectation(channel, START.amplitudes, np.outer(target, target.conj()))
        missed = {"z": 0, "infidelity": 0}
        for seed in range(300):
            found = randomised.qdrift(SPIN, 1.0, draws, seed).average(START, Z, count, reference=reference)
            low, high = found.observables["z"].error
            missed["z"] += not low <= off <= high
            low, high = found.infidelity.error
            missed["infidelity"] += not low <= infidelity <= high
        allowed = scipy.stats.binom.ppf(1 - 1e-9, 300, 1 - CONFIDENCE)
        assert allowed <= 11 and max(missed.values()) <= allowed


def test_intervals_hold_where_rare_samples_matter_and_narrow_with_their_number():
    """Values 0 and, one in 50, 1: few samples see no spread at all, which multiples of it take for certainty."""
    generator = np.random.default_rng(8)
    for count in (2, 3, 5, 20, 100):
        values = (generator.random((2000, count)) < 0.02).astype(float)
        missed = sum(not low <= 0.02 <= high for low, high in (estimated(v, 1.0, 0.0, 0.0, None).error for v in values))
        assert missed <= scipy.stats.binom.ppf(1 - 1e-9, 2000, 1 - CONFIDENCE)
    log = math.log(5 / 0.003)
    assert sampling_width(2, 0.0, 3.0) == 3.0
    assert sampling_width(20, 0.5, 1.0) == pytest.approx(math.sqrt(log / 40), rel=1e-12)
    # With many samples the spread is what counts: 3.9 standard errors.
    assert sampling_width(10**8, 0.1, 1.0) == pytest.approx(0.1 * math.sqrt(2 * log / 10**8), rel=1e-2)


def test_single_precision_widens_the_interval():
    single = tt.State.product("0", dtype=np.complex64)
    found = DRIFT.average(single, Z, 50, reference=spin_reference())
    double = DRIFT.average(START, Z, 50, reference=spin_reference())
    # Some 20 rotations of 5 · 2^-24 each, twice for the expectation.
    assert found.observables["z"].mean == pytest.approx(double.observables["z"].mean, abs=2e-5)
    widths = [high - low for low, high in (found.observables["z"].error, double.observables["z"].error)]
    assert widths[0] > widths[1]


@pytest.mark.parametrize("refuse", [True, False])
def test_an_executor_that_dies_leaves_what_is_finished_and_names_the_rest(refuse):
    whole = DRIFT.average(START, Z, 200, reference=spin_reference())
    with pytest.raises(tt.errors.EnsembleError, match=r"stopped after 40 of 200 samples \(ConnectionError") as stopped:
        DRIFT.average(START, Z, 200, reference=spin_reference(), executor=doomed.Dying(10, refuse))
    assert stopped.value.missing == tuple(range(40, 200))
    assert "samples 40-199 are missing" in str(stopped.value)
    assert isinstance(stopped.value.__cause__, ConnectionError)
    partial = stopped.value.partial
    assert partial.indices == tuple(range(40))
    assert np.array_equal(partial.values["z"], whole.values["z"][:40])
    seen = []
    finished = DRIFT.average(
        START, Z, 200, reference=spin_reference(), done=partial, progress=lambda *now: seen.append(now)
    )
    assert same(finished, whole)
    assert seen[0] == (41, 200) and seen[-1] == (200, 200)


def test_a_worker_process_that_is_killed_costs_its_samples_only():
    doomed_one = doomed.Killer(SPIN, 1.0, 20, 3)
    context = multiprocessing.get_context("spawn")
    with (
        ProcessPoolExecutor(1, mp_context=context) as executor,
        pytest.raises(tt.errors.EnsembleError, match="BrokenProcessPool") as stopped,
    ):
        doomed_one.average(START, Z, 40, executor=executor)
    # One worker takes the chunks in order, so all before sample 20 had come back or were lost with it.
    assert set(range(20, 40)) <= set(stopped.value.missing)
    kept = stopped.value.partial
    indices = () if kept is None else kept.indices
    assert sorted((*indices, *stopped.value.missing)) == list(range(40))


def test_an_executor_dead_from_the_start_leaves_nothing():
    executor = ThreadPoolExecutor(1)
    executor.shutdown()
    with pytest.raises(tt.errors.EnsembleError, match="stopped after 0 of 5 samples") as stopped:
        DRIFT.average(START, Z, 5, executor=executor)
    assert stopped.value.partial is None and stopped.value.missing == (0, 1, 2, 3, 4)


def test_samples_that_fail_are_named_and_the_others_kept():
    failing = doomed.Failing(SPIN, 1.0, 20, 3)
    with (
        ThreadPoolExecutor(2) as executor,
        pytest.raises(tt.errors.EnsembleError, match="RuntimeError: no sample") as stopped,
    ):
        failing.average(START, Z, 12, executor=executor)
    assert stopped.value.missing == (5, 8)
    with pytest.raises(tt.errors.EnsembleError) as stopped:
        failing.average(START, Z, 12)
    assert stopped.value.partial.indices == (0, 1, 2, 3, 4)


def test_a_sample_that_fails_costs_none_of_its_chunk():
    """200 samples go out in chunks of 4, with threads as with processes, whatever the exception.

    The message quotes the first fault to come back, which is that of any failing sample."""
    context, seen = multiprocessing.get_context("spawn"), []
    for kind, names, wrong in (
        (doomed.Failing, (5, 8), "RuntimeError: no sample (5|8)"),
        (doomed.Stubborn, (7, 100, 199), r"Unpicklable: no sample (7|100|199)"),
    ):
        failing = kind(SPIN, 1.0, 20, 3)
        with ThreadPoolExecutor(2) as threads, ProcessPoolExecutor(1, mp_context=context) as processes:
            for executor in (threads, processes):
                with pytest.raises(tt.errors.EnsembleError, match=wrong) as stopped:
                    failing.average(START, Z, 200, executor=executor, progress=lambda *now: seen.append(now))
                assert stopped.value.missing == names and seen[-1] == (200 - len(names), 200)
                kept = stopped.value.partial
                assert kept.indices == tuple(k for k in range(200) if k not in names)
                plain = DRIFT.average(START, Z, 200)
                assert np.array_equal(kept.values["z"], plain.values["z"][list(kept.indices)])


def test_an_exception_of_the_progress_callback_passes_through():
    def stop(finished, total):
        raise KeyError(f"{finished} of {total}")

    with ThreadPoolExecutor(1) as executor:
        for chosen in (None, executor):
            with pytest.raises(KeyError, match="1 of 3"):
                DRIFT.average(START, Z, 3, executor=chosen, progress=stop)


def test_the_start_is_not_written():
    before = START.amplitudes.copy()
    DRIFT.average(START, Z, 3)
    assert np.array_equal(START.amplitudes, before)


def halved():
    state = START.copy()
    state.amplitudes[:] *= 0.5
    return state


@pytest.mark.parametrize(
    ("arguments", "kind", "message"),
    [
        ({"count": 0}, tt.errors.ArgumentError, r"count: is not a whole number from 1 \(0\)"),
        ({"count": 2.0}, tt.errors.ArgumentError, r"count: is not a whole number from 1 \(2.0\)"),
        ({"state": np.array([1, 0j])}, tt.errors.ArgumentError, "state: is no State"),
        ({"state": tt.State.product("00")}, tt.errors.StateShapeError, "state: has 2 qubits, the ensemble 1"),
        ({"state": halved()}, tt.errors.ArgumentError, r"state: is not normalised \(norm 0.5\)"),
        ({"observables": {"z": tt.Operator("Z_1")}}, tt.errors.StateShapeError, r"observables\['z'\]: acts on 2"),
        ({"observables": {"z": "Z_0"}}, tt.errors.OperatorError, r"observables\['z'\]: is not an Operator"),
        ({"executor": 4}, tt.errors.ArgumentError, r"executor: has no submit \(4\)"),
        ({"threads": 0}, tt.errors.ArgumentError, "threads: not a thread count"),
        ({"reference": 0.5}, tt.errors.ArgumentError, "reference: is no Reference"),
        (
            {"reference": tt.reference(SPIN, START, [0.5])},
            tt.errors.ArgumentError,
            r"reference: holds no state at the ensemble's time \(1.0\)",
        ),
        (
            {"reference": tt.reference(SPIN, START, [1.0, 2.0])},
            tt.errors.ArgumentError,
            "reference: holds no state at the ensemble's time",
        ),
        (
            {"reference": tt.reference(tt.Operator("X_1"), tt.State.product("00"), [1.0])},
            tt.errors.StateShapeError,
            "reference: has 2 qubits, the ensemble 1",
        ),
        ({"done": "half"}, tt.errors.ArgumentError, "done: is no Average of this ensemble"),
        (
            {"done": randomised.qdrift(SPIN, 1.0, 20, seed=4).average(START, Z, 2)},
            tt.errors.ArgumentError,
            "done: is no Average of this ensemble",
        ),
    ],
)
def test_averages_refuse(arguments, kind, message):
    with pytest.raises(kind, match=message):
        DRIFT.average(**({"state": START, "observables": Z, "count": 3} | arguments))


def shifted(reference):
    """The same up to the last bit of an expectation."""
    values = {"z": np.nextafter(reference.expectations["z"], 2.0)}
    return dataclasses.replace(reference, expectations=values)


def test_samples_of_another_start_observable_or_reference_are_not_mixed_in():
    reference = spin_reference()
    done = DRIFT.average(START, Z, 2, reference=reference)
    given = {"state": START, "observables": Z, "count": 4, "done": done, "reference": reference}
    whole = DRIFT.average(START, Z, 4, reference=reference)
    assert same(DRIFT.average(**given), whole)
    # Copies that went through another process, and a reference made once more, are the same.
    again = {"done": copy.deepcopy(done), "state": START.copy(), "reference": spin_reference()}
    assert same(DRIFT.average(**(given | again)), whole)
    for change, wrong in (
        ({"state": tt.State.product("1")}, "has another start (amplitudes with SHA-256 "),
        ({"state": tt.State.product("0", dtype=np.complex64)}, "has another start"),
        ({"observables": {"z": tt.Operator("X_0")}}, "has other observables ({'z': "),
        ({"observables": {"z": 2.0 * Z["z"]}}, "has other observables"),
        ({"observables": {"y": Z["z"]}}, "has other observables"),
        ({"reference": None}, "has another reference (of time 1.0)"),
        ({"reference": spin_reference(None)}, "has another reference"),
        ({"reference": shifted(reference)}, "has another reference"),
        ({"reference": tt.reference(SPIN, tt.State.product("1"), [1.0], observables=Z)}, "has another reference"),
        ({"done": DRIFT.average(START, Z, 2)}, "has another reference (none)"),
    ):
        with pytest.raises(tt.errors.ArgumentError, match=re.escape(f"done: {wrong}")) as refused:
            DRIFT.average(**(given | change))
        assert "; give the partial result of the same call, or None" in str(refused.value)
    # A circuit in frames has no time of its own: the reference's time tells them apart.
    framed = randomised.framed(tt.formula("lie").rotations(tt.Partition.of(SPIN, "single"), 1.0, 5), seed=1)
    done = framed.average(START, Z, 2, reference=reference)
    with pytest.raises(tt.errors.ArgumentError, match=r"done: has another reference \(of time 1.0\)"):
        framed.average(START, Z, 4, reference=tt.reference(SPIN, START, [2.0], observables=Z), done=done)
