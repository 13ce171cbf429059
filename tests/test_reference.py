"""References do what they say: right states, whatever the method, grouping of times, threads and precision of
the start."""

from __future__ import annotations

import math

import numpy as np
import pytest
import scipy.linalg
import scipy.sparse.linalg
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
from strategies import operators, states
from trueturn import Operator
from trueturn.errors import ArgumentError, OperatorError, StateShapeError, ToleranceError
from trueturn.reference import reference, schedule
from trueturn.state import State

UNIT_ROUNDOFF = 2.0**-53
METHODS = ("chebyshev", "krylov", "dense")

moments = st.floats(-8, 8, allow_subnormal=False).filter(lambda t: t == 0 or abs(t) > 1e-3)


def expm_rounding(operator, time):
    """Rounding of scipy's exponentials: scaling and squaring is backward stable up to a modest factor, here
    20 N u (1 + ‖Ht‖)."""
    return 20 * 2**operator.qubits * UNIT_ROUNDOFF * (1 + abs(time) * operator.one_norm())


def gap(state, expected):
    return np.linalg.norm(state.amplitudes - expected)


def chain(qubits):
    """An Ising chain in a tilted field: nothing commutes, nothing is conserved but the energy."""
    bonds = [(1.0, f"Z_{k} Z_{k + 1}") for k in range(qubits - 1)]
    return Operator.gather(bonds + [(0.9, f"X_{k}") for k in range(qubits)] + [(0.4, f"Z_{k}") for k in range(qubits)])


# Against scipy


@given(st.data())
def test_references_agree_with_matrix_exponentials(data):
    operator = data.draw(operators(max_qubits=5, min_terms=1).filter(len))
    start = data.draw(states(operator.qubits))
    time = data.draw(moments)
    found = reference(operator, State.from_array(start.copy()), time)
    expected = scipy.linalg.expm(-1j * time * oracle.dense(operator)) @ start
    assert gap(found.states[0], expected) <= found.certificate.largest + expm_rounding(operator, time)


@given(st.data())
def test_references_agree_with_scipy_on_sparse_matrices(data):
    operator = data.draw(operators(min_terms=1, qubits=7).filter(len))
    start = data.draw(states(7))
    time = data.draw(moments)
    found = reference(operator, State.from_array(start.copy()), time)
    matrix = operator.sparse()
    expected = scipy.sparse.linalg.expm_multiply(-1j * time * matrix, start, traceA=-1j * time * matrix.trace())
    # expm_multiply aims at unit roundoff with truncated Taylor series: as many products as ‖Ht‖ and 55 terms
    # more, each rounding some u (terms + 2), on 128 entries.
    products = abs(time) * operator.one_norm() + 55
    assert gap(found.states[0], expected) <= found.certificate.largest + UNIT_ROUNDOFF * products * (len(operator) + 20)


@given(st.data())
def test_methods_agree_within_the_sum_of_their_certificates(data):
    operator = data.draw(operators(max_qubits=5, min_terms=1).filter(len))
    start = State.from_array(data.draw(states(operator.qubits)))
    time = data.draw(moments)
    found = [reference(operator, start, time, 1e-9, method=method) for method in METHODS]
    for one in found:
        assert one.certificate.largest <= 1e-9
        for other in found:
            both = one.certificate.largest + other.certificate.largest
            assert one.states[0].distance(other.states[0]) <= both
    assert found[0].certificate.proven
    assert all(one.certificate.proven == (time == 0) for one in found[1:])


@pytest.mark.parametrize("qubits", [1, 2])
@pytest.mark.parametrize("method", METHODS)
def test_the_smallest_systems_evolve(qubits, method):
    operator = Operator("0.3 X_0 - 0.8 Y_0 + 0.25", qubits=qubits) + Operator(f"0.5 Z_{qubits - 1}", qubits=qubits)
    start = State.random(qubits, 4)
    found = reference(operator, start, 3.0, method=method)
    expected = oracle.evolution(operator, 3.0) @ start.amplitudes
    assert gap(found.states[0], expected) <= found.certificate.largest + expm_rounding(operator, 3.0)


# Times


@settings(max_examples=25)
@given(st.data())
def test_times_in_one_run_equal_separate_runs_within_their_certificates(data):
    operator = data.draw(operators(max_qubits=4, min_terms=1).filter(len))
    start = State.from_array(data.draw(states(operator.qubits)))
    sign = data.draw(st.sampled_from([-1, 1]))
    times = data.draw(st.lists(moments.map(lambda t: sign * abs(t)), min_size=2, max_size=4, unique=True))
    together = reference(operator, start, times, keep="all")
    assert together.times == tuple(times)
    assert len(together.states) == len(times)
    for time, state in zip(times, together.states, strict=True):
        alone = reference(operator, start, time)
        both = together.certificate.error_bound[time] + alone.certificate.error_bound[time]
        assert state.distance(alone.states[0]) <= both


def test_the_last_state_is_the_one_furthest_from_zero():
    operator, start = chain(4), State.random(4, 0)
    for times in ([0.5, 2.0, 1.0], [-0.5, 0.0, -2.0]):
        found = reference(operator, start, times)
        furthest = max(times, key=abs)
        assert len(found.states) == 1
        alone = reference(operator, start, furthest).states[0]
        assert found.states[0].distance(alone) <= 2e-10


def test_a_time_asked_twice_is_answered_twice():
    found = reference(
        chain(3),
        State.random(3, 0),
        [1.0, 0.5, 1.0],
        observables={"z": Operator("Z_0", qubits=3)},
        keep="all",
    )
    assert len(found.states) == 3
    assert found.expectations["z"][0] == found.expectations["z"][2]
    assert found.states[0].distance(found.states[2]) == 0


def test_kept_states_are_independent_arrays():
    start = State.random(3, 0)
    found = reference(chain(3), start, [0.0, 0.5, 1.0], keep="all")
    arrays = [start.amplitudes, *(state.amplitudes for state in found.states)]
    assert not any(np.shares_memory(a, b) for i, a in enumerate(arrays) for b in arrays[:i])


def test_time_zero_is_the_start_exactly():
    operator, start = chain(5), State.random(5, 9)
    found = reference(operator, start, [0.0], observables={"h": operator})
    assert np.array_equal(found.states[0].amplitudes, start.amplitudes)
    assert found.certificate.error_bound == {0.0: 0.0}
    assert abs(found.expectations["h"][0] - start.expectation(operator)) <= found.expectation_bounds["h"][0]
    along = reference(operator, start, [0.0, 1.0], keep="all")
    assert np.array_equal(along.states[0].amplitudes, start.amplitudes)
    assert along.certificate.error_bound[0.0] == 0.0


@given(st.data())
def test_negative_times_undo_positive_ones(data):
    operator = data.draw(operators(max_qubits=5, min_terms=1).filter(len))
    start = State.from_array(data.draw(states(operator.qubits)))
    time = abs(data.draw(moments))
    there = reference(operator, start, time)
    back = reference(operator, there.states[0], -time)
    assert back.states[0].distance(start) <= there.certificate.largest + back.certificate.largest
    low, high = there.certificate.spectral_interval
    assert back.certificate.spectral_interval == (low, high)


@pytest.mark.parametrize("method", ["chebyshev", "krylov"])
def test_long_times_are_cut_into_segments_and_stay_inside_the_certificate(method):
    operator, start, time = chain(4), State.random(4, 1), 200.0
    found = reference(operator, start, time, 2e-10, method=method)
    assert found.certificate.largest <= 2e-10
    levels, vectors = np.linalg.eigh(oracle.dense(operator))
    expected = vectors @ (np.exp(-1j * levels * time) * (vectors.conj().T @ start.amplitudes))
    # Diagonalisation is off by 10 N u ‖H‖ in the levels, which acts for the whole time.
    rounding = 10 * 16 * UNIT_ROUNDOFF * operator.one_norm() * time
    assert gap(found.states[0], expected) <= found.certificate.largest + rounding
    plan = schedule.schedule(operator, operator.spectral_interval(), [time], 2e-10, 1)
    assert len(plan.expansions) > 1
    assert plan.expansions[-1].targets == (time,)


def test_few_places_for_sums_do_not_change_what_is_certified():
    """As where memory allows one sum only: consecutive expansions instead of shared ones."""
    operator, times = chain(4), [0.3, 0.9, 1.0, 4.0]
    for group in (1, 2, 4):
        plan = schedule.schedule(operator, operator.spectral_interval(), times, 1e-10, group)
        assert all(len(expansion.targets) <= group for expansion in plan.expansions)
        bounds = plan.bounds()
        assert all(sum(bounds[time]) <= 1e-10 for time in times)


@pytest.mark.parametrize("time", [1e5, 1e6, 1e12, 1e300])
def test_times_beyond_certification_are_refused_with_what_can_be_had(time):
    spin = Operator("0.7 X_0 + 0.3 Z_0")
    with pytest.raises(ToleranceError, match="shorter time") as refusal:
        reference(spin, State.product("0"), time)
    assert refusal.value.tolerance == 1e-10
    if time == 1e5:
        allowed = refusal.value.achievable
        assert reference(spin, State.product("0"), time, allowed).certificate.largest <= allowed


@pytest.mark.parametrize(
    ("size", "time"), [(1.0, 5e-324), (1e-310, 1.0), (5e-324, 1e300), (1e-300, 1e300), (1e300, 1e-300)]
)
def test_extreme_scales_of_time_and_coefficients_evolve(size, time):
    found = reference(Operator.gather([(size, "X_0")]), State.product("0"), time)
    angle = size * time
    assert (
        gap(found.states[0], [math.cos(angle), -1j * math.sin(angle)]) <= found.certificate.largest + 4 * UNIT_ROUNDOFF
    )


# What comes with the states


def test_the_start_is_not_written():
    for method in METHODS:
        start = State.random(4, 3)
        before = start.amplitudes.copy()
        reference(chain(4), start, [0.0, 1.0], method=method, keep="all")
        assert np.array_equal(start.amplitudes, before)


@given(st.data())
def test_observables_norm_and_energy_stay_inside_their_bounds(data):
    operator = data.draw(operators(max_qubits=4, min_terms=1).filter(len))
    observable = data.draw(operators(qubits=operator.qubits, min_terms=1))
    start = State.from_array(data.draw(states(operator.qubits)))
    time = data.draw(moments)
    found = reference(operator, start, [time], 1e-8, {"energy": operator, "other": observable})
    energy = start.expectation(operator)
    own_rounding = found.expectation_bounds["energy"][0]
    assert abs(found.expectations["energy"][0] - energy) <= own_rounding + 300 * UNIT_ROUNDOFF * operator.one_norm()
    # A unit start is one within 4 u here, and the norm's own sum of 32 squares rounds by 32 u.
    assert abs(found.states[0].norm() - 1) <= found.certificate.largest + 40 * UNIT_ROUNDOFF
    exact = oracle.evolution(operator, time) @ start.amplitudes
    expected = np.vdot(exact, oracle.dense(observable) @ exact).real
    oracle_rounding = (2 * expm_rounding(operator, time) + 64 * UNIT_ROUNDOFF) * (1 + observable.one_norm())
    assert abs(found.expectations["other"][0] - expected) <= found.expectation_bounds["other"][0] + oracle_rounding


def test_the_identity_of_an_observable_does_not_spoil_its_bound():
    """The truncated state is not exactly of unit length; 1e6 times that must not show."""
    operator, start = Operator("0.7 X_0 + 0.3 Z_0 + X_0 X_1 + 0.2 Z_1"), State.random(2, 0)
    small, large = Operator("1e-3 Z_0", qubits=2), Operator("1e6 + 1e-3 Z_0", qubits=2)
    found = reference(operator, start, 5.0, 1e-6, {"small": small, "large": large, "one": Operator("1", qubits=2)})
    both = found.expectation_bounds["small"][0] + found.expectation_bounds["large"][0]
    # The start is a unit vector within 8 u, which the identity multiplies by 1e6.
    excess = found.expectations["large"][0] - 1e6 - found.expectations["small"][0]
    assert abs(excess) <= both + 1e6 * 16 * UNIT_ROUNDOFF
    assert abs(found.expectations["one"][0] - 1) <= 16 * UNIT_ROUNDOFF


def test_identity_terms_turn_the_phase_exactly():
    start = State.random(3, 2)
    for time in (0.7, -31.0):
        found = reference(Operator("-2.5", qubits=3), start, time)
        assert gap(found.states[0], np.exp(2.5j * time) * start.amplitudes) <= found.certificate.largest
        plain, shifted = chain(3), chain(3) + Operator("1.75", qubits=3)
        one, other = reference(plain, start, time), reference(shifted, start, time)
        both = one.certificate.largest + other.certificate.largest
        # An angle of 55 rounded to u of itself, and one complex product.
        turned = np.exp(-1.75j * time) * one.states[0].amplitudes
        assert gap(other.states[0], turned) <= both + UNIT_ROUNDOFF * (4 + 1.75 * abs(time))


@pytest.mark.parametrize("method", METHODS)
def test_single_precision_starts_evolve_in_double_precision(method):
    single = State.random(5, 8, dtype=np.complex64)
    double = State.from_array(single.amplitudes.astype(np.complex128))
    watched = {"h": chain(5)}
    found = reference(chain(5), single, [0.0, 2.0], observables=watched, keep="all", method=method)
    expected = reference(chain(5), double, [0.0, 2.0], observables=watched, keep="all", method=method)
    assert [state.dtype for state in found.states] == [np.complex128, np.complex128]
    for one, other in zip(found.states, expected.states, strict=True):
        assert np.array_equal(one.amplitudes, other.amplitudes)
    assert np.array_equal(found.expectations["h"], expected.expectations["h"])
    assert abs(found.expectations["h"][0] - double.expectation(chain(5))) <= 2 * found.expectation_bounds["h"][0]


def test_states_have_the_same_bits_for_any_number_of_threads():
    operator, start = chain(15), State.random(15, 5)
    found = [
        reference(operator, start, [0.4, 1.0], observables={"h": operator}, keep="all", threads=threads)
        for threads in (1, 2, 3)
    ]
    for other in found[1:]:
        for one, two in zip(found[0].states, other.states, strict=True):
            assert one.amplitudes.tobytes() == two.amplitudes.tobytes()
        assert np.array_equal(found[0].expectations["h"], other.expectations["h"])


# Long enough that the run is looked at before it ends.
@pytest.mark.parametrize(("method", "sites", "time"), [("chebyshev", 16, 20.0), ("krylov", 13, 4.0)])
def test_progress_is_reported(method, sites, time):
    seen = []
    start = State.product("+" * sites)
    reference(chain(sites), start, time, method=method, progress=lambda *news: seen.append(news))
    assert seen
    assert all(name == "reference" and 0 < done <= total for name, done, total in seen)
    assert [done for _, done, _ in seen] == sorted(done for _, done, _ in seen)


@pytest.mark.parametrize("method", ["chebyshev", "krylov"])
def test_an_exception_in_the_callback_passes_through_and_leaves_the_start(method):
    class Enough(Exception):
        pass

    def stop(*_):
        raise Enough

    start = State.random(13, 1)
    before = start.amplitudes.copy()
    with pytest.raises(Enough):
        reference(chain(13), start, 4.0, method=method, progress=stop)
    assert np.array_equal(start.amplitudes, before)


# Refusals


@pytest.mark.parametrize("times", [[], [math.nan], [math.inf], [-1.0, 1.0], None, "12", ["soon"], [1j]])
def test_bad_times_are_refused_by_name(times):
    with pytest.raises(ArgumentError, match=r"^times: .*;") as refusal:
        reference(chain(2), State.product("00"), times)
    assert refusal.value.argument == "times"


@pytest.mark.parametrize("times", [1, np.int64(1), np.float32(1), np.array(1.0), np.array([1.0]), (1.0,), range(1, 2)])
def test_one_time_may_be_any_kind_of_number(times):
    assert reference(chain(2), State.product("00"), times).times == (1.0,)


@pytest.mark.parametrize(
    ("change", "kind", "words"),
    [
        ({"method": "taylor"}, ArgumentError, r"^method: unknown \('taylor'\); give one of chebyshev"),
        ({"keep": "some"}, ArgumentError, r"^keep: unknown \('some'\)"),
        ({"tolerance": 0.0}, ToleranceError, r"^tolerance: not a positive number \(0.0\)"),
        ({"tolerance": math.nan}, ToleranceError, r"^tolerance: not a positive number \(nan\)"),
        ({"tolerance": True}, ToleranceError, r"^tolerance: not a positive number \(True\)"),
        ({"tolerance": 1e-17}, ToleranceError, r"^tolerance: below .*ask for"),
        ({"tolerance": 1e-17, "method": "dense"}, ToleranceError, r"^tolerance: below .*dense.*ask for"),
        ({"tolerance": 1e-17, "method": "krylov"}, ToleranceError, r"^tolerance: "),
        ({"operator": Operator("0.0", qubits=2)}, OperatorError, r"^operator: has no terms"),
        ({"operator": Operator("X_2")}, StateShapeError, r"^operator: acts on 3 qubits, the state on 2"),
        (
            {"observables": {"far": Operator("X_2")}},
            StateShapeError,
            r"^observables\['far'\]: acts on 3 qubits",
        ),
        (
            {"state": State.from_array(np.ones(4, complex))},
            ArgumentError,
            r"^state: is not normalised \(norm 2\)",
        ),
        ({"threads": 0}, ArgumentError, r"^threads: not a thread count \(0\)"),
    ],
)
def test_bad_requests_are_refused_by_name(change, kind, words):
    request = {"operator": chain(2), "state": State.product("00"), "times": 1.0} | change
    with pytest.raises(kind, match=words):
        reference(**request)


def test_what_is_said_to_be_achievable_is_achieved():
    for method in METHODS:
        with pytest.raises(ToleranceError) as refusal:
            reference(chain(4), State.random(4, 0), 6.0, 1e-16, method=method)
        allowed = refusal.value.achievable
        found = reference(chain(4), State.random(4, 0), 6.0, allowed, method=method)
        assert found.certificate.largest <= allowed


def test_dense_references_of_many_qubits_are_refused():
    with pytest.raises(ArgumentError, match="dense is for at most 12 qubits"):
        reference(chain(13), State.product("0" * 13), 1.0, method="dense")
