"""States: making them, refusing what cannot be evolved, reading figures off them."""

from __future__ import annotations

import math
import threading

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
from strategies import operators, states
from trueturn import Operator, errors
from trueturn.errors import (
    ArgumentError,
    MemoryRefusedError,
    RotationError,
    StateBusyError,
    StateLayoutError,
    StateShapeError,
    StateTypeError,
    TermError,
)
from trueturn.rotations import Rotations
from trueturn.state import State

UNIT_ROUNDOFF = 2.0**-53


# Making states


def test_product_states_are_kronecker_products_with_qubit_zero_last():
    half = math.sqrt(0.5)
    factors = {
        "0": [1, 0],
        "1": [0, 1],
        "+": [half, half],
        "-": [half, -half],
        "+i": [half, 1j * half],
        "-i": [half, -1j * half],
    }
    sites = ["1", "+", "-i", (0.7, 2.1), "-", "+i", "0"]
    factors[sites[3]] = [math.cos(0.35), np.exp(2.1j) * math.sin(0.35)]
    expected = np.eye(1)[0]
    for site in sites:
        expected = np.kron(factors[site], expected)
    # Each amplitude is a product of seven rounded factors.
    assert np.abs(State.product(sites).amplitudes - expected).max() < 20 * UNIT_ROUNDOFF
    assert np.array_equal(State.product("01+-").amplitudes, State.product(list("01+-")).amplitudes)
    assert State.product("").qubits == 0


def test_computational_states_count_qubits_as_bits():
    state = State.computational(0b0110, 4)
    assert np.array_equal(np.flatnonzero(state.amplitudes), [0b0110])
    assert np.array_equal(state.amplitudes, State.product("0110").amplitudes)
    assert state.expectation(Operator("Z_1", qubits=4)) == -1


def test_random_states_are_unit_vectors_fixed_by_their_seed():
    for kind, unit in ((np.complex128, 2.0**-53), (np.complex64, 2.0**-24)):
        state = State.random(10, 3, dtype=kind)
        # The factor 1 / norm is rounded, and every product.
        assert abs(state.norm() - 1) < 8 * unit
        assert np.array_equal(state.amplitudes, State.random(10, 3, dtype=kind).amplitudes)
        assert not np.array_equal(state.amplitudes, State.random(10, 4, dtype=kind).amplitudes)


@pytest.mark.parametrize("kind", [np.complex128, np.complex64])
def test_an_array_is_evolved_itself(kind):
    array = np.zeros(8, kind)
    array[0] = 1
    state = State.from_array(array)
    assert state.amplitudes is array
    state.rotate("X_1", math.pi / 2)
    assert abs(array[2] + 1j) < 1e-6
    assert state.dtype == array.dtype
    copy = state.copy()
    copy.rotate("X_0", 0.3)
    assert array[3] == 0


def misaligned():
    return np.frombuffer(bytearray(4 * 16 + 1), dtype=np.uint8)[1:].view(np.complex128)


def read_only():
    array = np.zeros(4, complex)
    array.flags.writeable = False
    return array


@pytest.mark.parametrize(
    ("array", "kind", "words"),
    [
        ([1, 0], StateTypeError, r"wrong type \(list\); give a numpy.ndarray of complex128"),
        (None, StateTypeError, r"wrong type \(NoneType\)"),
        (np.zeros(4), StateTypeError, r"wrong type \(float64\); give complex128 or complex64"),
        (np.zeros(4, int), StateTypeError, r"wrong type \(int64\)"),
        (np.zeros(4, np.clongdouble), StateTypeError, r"wrong type \(complex256\)"),
        (np.zeros(4, object), StateTypeError, r"wrong type \(object\)"),
        (
            np.zeros(4, np.dtype(complex).newbyteorder()),
            StateTypeError,
            r"wrong type \(>c16\); .*native byte order",
        ),
        (np.zeros((2, 2), complex), StateShapeError, r"wrong shape \(\[2, 2\]\); give one dimension"),
        (np.zeros((), complex), StateShapeError, r"wrong shape \(\[\]\)"),
        (
            np.zeros(6, complex),
            StateShapeError,
            r"wrong shape \(\[6\]\); give one dimension of length 2\*\*qubits",
        ),
        (np.zeros(0, complex), StateShapeError, r"wrong shape \(\[0\]\)"),
        (np.zeros(8, complex)[::2], StateLayoutError, r"strided; give numpy.ascontiguousarray"),
        (np.zeros(8, complex)[::-1], StateLayoutError, r"strided"),
        (misaligned(), StateLayoutError, r"misaligned; give state.copy"),
        (read_only(), StateLayoutError, r"read-only; give a copy"),
        (np.array([1, math.nan], complex), ArgumentError, r"array: not finite .*; give finite ones"),
        (np.array([1, 1j * math.inf], complex), ArgumentError, r"array: not finite"),
        (np.full(2**17, math.nan, np.complex64), ArgumentError, r"array: not finite"),
    ],
)
def test_arrays_that_cannot_be_evolved_are_refused(array, kind, words):
    before = array.copy() if isinstance(array, np.ndarray) else array
    with pytest.raises(kind, match=words):
        State.from_array(array)
    if isinstance(array, np.ndarray):
        assert array.tobytes() == before.tobytes()


@pytest.mark.parametrize(
    ("make", "kind", "words"),
    [
        (lambda: State(), StateTypeError, "use State.product"),
        (lambda: State.product("02"), ArgumentError, r"^sites: unknown state of qubit 1 \('2'\)"),
        (lambda: State.product(5), ArgumentError, r"^sites: not a text or a list \(5\)"),
        (lambda: State.product([(0.1,)]), ArgumentError, r"^sites: no state of qubit 0"),
        (
            lambda: State.product([(0.1, math.nan)]),
            ArgumentError,
            r"^sites: angles of qubit 0 are not finite",
        ),
        (lambda: State.product("0", dtype=float), StateTypeError, r"^dtype: wrong type \(float64\)"),
        (lambda: State.computational(4, 2), ArgumentError, r"^index: no basis state of 2 qubits \(4\)"),
        (lambda: State.computational(-1, 2), ArgumentError, r"^index: "),
        (lambda: State.computational(0.0, 2), ArgumentError, r"^index: "),
        (lambda: State.computational(0, -1), ArgumentError, r"^qubits: not a whole number from 0 \(-1\)"),
        (lambda: State.random(2, -1), ArgumentError, r"^seed: not a whole number from 0 \(-1\)"),
        (lambda: State.random(2.5, 1), ArgumentError, r"^qubits: "),
    ],
)
def test_descriptions_that_make_no_state_are_refused(make, kind, words):
    with pytest.raises(kind, match=words):
        make()


@pytest.mark.parametrize(
    "make",
    [
        lambda: State.product("0" * 60),
        lambda: State.computational(0, 60),
        lambda: State.random(60, 0),
        lambda: State.computational(0, 128, dtype=np.complex64),
    ],
)
def test_states_beyond_memory_are_refused_before_anything_is_allocated(make):
    with pytest.raises(MemoryRefusedError, match=r"does not fit in memory .* at most \d+ qubits fit") as refusal:
        make()
    assert isinstance(refusal.value, MemoryError)
    largest = refusal.value.largest_qubits
    assert 0 < largest < 60
    assert 8 << largest <= refusal.value.available < refusal.value.needed


# Refusals of what is asked of a state


@pytest.mark.parametrize(
    ("ask", "kind", "words"),
    [
        (lambda s: s.apply(Rotations([1], [0], [0.1], 3)), StateShapeError, "4 amplitudes for 3 qubits"),
        (lambda s: s.expectation(Operator("X_2")), StateShapeError, "4 amplitudes for 3 qubits"),
        (lambda s: s.variance(Operator("X_2")), StateShapeError, "4 amplitudes for 3 qubits"),
        (lambda s: s.overlap(State.product("000")), StateShapeError, "4 and 8 amplitudes"),
        (lambda s: s.distance(State.product("000")), StateShapeError, "4 and 8 amplitudes"),
        (lambda s: s.distance(State.product("000"), "free"), StateShapeError, "8 and 4 amplitudes"),
        (
            lambda s: s.overlap(State.product("00", dtype=np.complex64)),
            StateTypeError,
            "complex128 beside complex64",
        ),
        (
            lambda s: s.distance(s, "lost"),
            ArgumentError,
            r"^phase: unknown \('lost'\); give \"kept\" or \"free\"",
        ),
        (lambda s: s.rotate("X_2", 0.1), TermError, "X_2"),
        (lambda s: s.rotate("W_0", 0.1), TermError, "W_0"),
        (lambda s: s.rotate("X_0 Y_0", 0.1), TermError, "Hermitian|Y_0"),
        (lambda s: s.rotate("X_0", math.nan), RotationError, r"^angles: not finite \(angle 0 is NaN\)"),
        (lambda s: s.rotate("X_0", math.inf), RotationError, r"^angles: not finite"),
        (lambda s: s.rotate("X_0", "much"), RotationError, r"^angles: not real numbers"),
        (lambda s: s.sample(-1, 0), ArgumentError, r"^shots: not a whole number from 0 \(-1\)"),
        (lambda s: s.sample(1, 0.5), ArgumentError, r"^seed: not a whole number from 0 \(0.5\)"),
        (lambda s: s.norm(threads=0), ArgumentError, r"^threads: not a thread count \(0\)"),
        (lambda s: s.apply(Rotations([], [], [], 2), threads=True), ArgumentError, r"^threads: "),
    ],
)
def test_requests_that_do_not_fit_are_refused_and_leave_the_state(ask, kind, words):
    state = State.random(2, 1)
    before = state.amplitudes.copy()
    with pytest.raises(kind, match=words):
        ask(state)
    assert np.array_equal(state.amplitudes, before)


def test_an_array_in_use_by_another_thread_is_refused():
    class Enough(Exception):
        pass

    state = State.random(16, 0)
    running, done, ended = threading.Event(), threading.Event(), []

    def report(*_):
        running.set()
        if done.is_set():
            raise Enough

    def work():
        try:
            state.apply(Rotations([1], [1 << 15], [0.1], 16).times(10**12), threads=1, progress=report)
        except Enough as end:
            ended.append(end)

    worker = threading.Thread(target=work)
    worker.start()
    try:
        assert running.wait(60)
        for ask in (lambda: state.rotate("X_0", 0.1), state.norm, lambda: state.overlap(State.random(16, 1))):
            with pytest.raises(StateBusyError, match="in use by another call; wait for it or evolve a copy"):
                ask()
        with pytest.raises(StateBusyError):
            State.from_array(state.amplitudes[: 1 << 15])
    finally:
        done.set()
        worker.join()
    assert len(ended) == 1
    # The array is free again, and the state that of whole passes.
    assert abs(state.norm() - 1) < 1e-9


# Figures


@given(st.data())
def test_expectations_and_variances_follow_dense_matrices(data):
    operator = data.draw(operators(max_qubits=5))
    vector = data.draw(states(operator.qubits))
    matrix = oracle.dense(operator)
    state = State.from_array(vector.copy())
    mean = np.vdot(vector, matrix @ vector).real
    # Sums over 2^n entries and up to 12 terms on both sides.
    rounding = 4 * (12 + 2**operator.qubits) * UNIT_ROUNDOFF * (1 + operator.one_norm())
    assert abs(state.expectation(operator) - mean) <= rounding
    spread = np.linalg.norm(matrix @ vector - mean * vector) ** 2
    assert abs(state.variance(operator) - spread) <= 4 * rounding * (1 + operator.one_norm())


def test_variance_of_an_eigenstate_keeps_its_digits():
    """<H²> - <H>² would leave 1e-10 of a level of 1000."""
    state, operator = State.product("0110"), Operator("1000 + Z_0 Z_1 + 0.3 Z_2 + Z_3")
    assert state.variance(operator) <= (1000 * 32 * UNIT_ROUNDOFF) ** 2


@given(st.data())
def test_overlap_norm_and_distance_follow_numpy(data):
    qubits = data.draw(st.integers(0, 7))
    left, right = data.draw(states(qubits)), data.draw(states(qubits))
    one, other = State.from_array(left.copy()), State.from_array(right.copy())
    rounding = 4 * (8 + 2**qubits) * UNIT_ROUNDOFF
    assert abs(one.overlap(other) - np.vdot(left, right)) <= rounding
    assert abs(one.norm() - 1) <= rounding
    assert abs(one.distance(other) - np.linalg.norm(left - right)) <= rounding
    # A difference of unit vectors close to each other is the one place where cancellation costs: none here by
    # the seed.
    free = math.sqrt(max(0.0, 2 - 2 * abs(np.vdot(left, right))))
    assert abs(one.distance(other, "free") ** 2 - free**2) <= 8 * rounding
    assert one.distance(one) == 0
    assert one.overlap(one).imag == 0


@pytest.mark.parametrize("qubits", [1, 6, 14])
def test_the_free_distance_keeps_its_digits_near_zero(qubits):
    """√(2 - 2 |overlap|) would give 1e-8."""
    state = State.random(qubits, 5)
    turned = State.from_array(np.exp(0.3j) * state.amplitudes)
    assert state.distance(turned) > 0.29
    # A phase rounded to 2 u, one complex product on either side.
    assert state.distance(turned, "free") < 8 * UNIT_ROUNDOFF
    moved = turned.copy()
    moved.rotate("X_0", 1e-9)
    # The part of X|ψ> along |ψ> is phase, the rest distance: 1e-9 times the spread of X, rounded as above.
    spread = math.sqrt(turned.variance(Operator("X_0", qubits=qubits)))
    assert abs(state.distance(moved, "free") - 1e-9 * spread) < 16 * UNIT_ROUNDOFF + 1e-18


def test_sampling_follows_probabilities():
    state, shots = State.random(4, 2), 40000
    counts = np.bincount(state.sample(shots, 7), minlength=16)
    chances = np.abs(state.amplitudes) ** 2
    # Six standard deviations of a binomial for each of 16 outcomes: missed once in 10^7 seeds, and the seed
    # is fixed.
    assert (np.abs(counts - shots * chances) <= 6 * np.sqrt(shots * chances * (1 - chances)) + 1).all()


@pytest.mark.parametrize("kind", [np.complex128, np.complex64])
def test_sampling_never_draws_what_has_no_probability(kind):
    generator = np.random.default_rng(0)
    for qubits, kept in ((1, 1), (4, 3), (12, 5), (13, 2)):
        array = np.zeros(1 << qubits, kind)
        places = generator.choice(1 << qubits, kept, replace=False)
        array[places] = 3 * generator.normal(size=kept) + 1j
        drawn = State.from_array(array).sample(3000, 1)
        assert set(drawn.tolist()) == set(places.tolist())


def test_sampling_is_fixed_by_its_seed_and_shots_may_be_none():
    state = State.random(11, 2)
    assert np.array_equal(state.sample(100, 3), state.sample(100, 3))
    assert not np.array_equal(state.sample(100, 3), state.sample(100, 4))
    assert state.sample(0, 0).shape == (0,)
    with pytest.raises(ArgumentError, match=r"^state: nothing to draw from"):
        State.from_array(np.zeros(4, complex)).sample(1, 0)


# Files


@pytest.mark.parametrize("kind", [np.complex128, np.complex64])
def test_saved_states_come_back_bit_for_bit(tmp_path, kind):
    state = State.random(6, 2, dtype=kind)
    state.save(tmp_path / "state.npy")
    assert [entry.name for entry in tmp_path.iterdir()] == ["state.npy"]
    assert np.array_equal(np.load(tmp_path / "state.npy"), state.amplitudes)
    back = State.load(str(tmp_path / "state.npy"))
    assert back.dtype == state.dtype
    assert np.array_equal(back.amplitudes, state.amplitudes)
    back.rotate("X_0", 0.1)


def test_files_that_hold_no_state_are_refused(tmp_path):
    path = tmp_path / "other.npy"
    for content, kind in (
        (np.zeros(4), StateTypeError),
        (np.zeros(6, complex), StateShapeError),
        (np.zeros((2, 2), complex), StateShapeError),
    ):
        np.save(path, content)
        with pytest.raises(kind):
            State.load(path)
    path.write_bytes(b"no array")
    for wrong in (path, tmp_path / "missing.npy"):
        with pytest.raises(ArgumentError, match=r"^path: cannot be read as an NPY file"):
            State.load(wrong)
    np.save(path, np.array([{}], dtype=object), allow_pickle=True)
    with pytest.raises(ArgumentError, match=r"^path: "):
        State.load(path)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda s: s.apply(Operator("Z_0", qubits=3)), r"rotations: no Rotations \(Operator\); make one"),
        (lambda s: s.expectation("Z_0"), r"operator: no Operator \(str\); make one from text"),
        (lambda s: s.overlap(None), r"other: no State \(NoneType\); make one"),
        (lambda s: s.distance(s.amplitudes), r"other: no State \(ndarray\); make one"),
    ],
)
def test_other_things_than_circuits_operators_and_states_are_refused(call, message):
    with pytest.raises(errors.ArgumentError, match=message):
        call(State.product("0+1"))


def test_absurd_sizes_and_types_are_refused_by_class():
    with pytest.raises(errors.MemoryRefusedError, match="does not fit in memory"):
        State.computational(0, 5000)
    with pytest.raises(errors.StateTypeError, match=r"dtype: wrong type \(nonsense\); give complex128"):
        State.product("0", dtype="nonsense")
