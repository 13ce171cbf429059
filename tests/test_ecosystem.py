"""Meeting other libraries: scipy's solvers, DLPack, the array interface, plain NPY."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest
import scipy.sparse.linalg
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
import strategies
import trueturn as tt
from trueturn import errors

CHAIN = tt.model.heisenberg(tt.lattice.ring(8), 1.0, z=[0.1 * q for q in range(8)])


def test_eigsh_finds_the_levels_of_dense_algebra():
    exact = np.linalg.eigvalsh(oracle.dense(CHAIN))
    start = np.random.default_rng(1).normal(size=256)
    low = scipy.sparse.linalg.eigsh(CHAIN.linear_operator(), k=3, which="SA", v0=start, return_eigenvectors=False)
    # eigsh stops at machine precision; levels up to 10, so 1e-12 is some hundred roundings.
    assert np.sort(low) == pytest.approx(exact[:3], abs=1e-12)


@pytest.mark.parametrize("columns", [1, 3])
def test_expm_multiply_evolves_as_a_dense_exponential(columns):
    start = np.random.default_rng(2).normal(size=(256, columns)) + 0j
    start = start[:, 0] if columns == 1 else start
    trace = 256 * CHAIN.identity_coefficient
    found = scipy.sparse.linalg.expm_multiply(-0.7j * CHAIN.linear_operator(), start, traceA=-0.7j * trace)
    expected = oracle.evolution(CHAIN, 0.7) @ start
    # Vectors of length up to 30; some 100 products, each rounding a few u.
    assert np.abs(found - expected).max() < 1e-11


@settings(max_examples=25)
@given(st.data())
def test_the_linear_operator_its_adjoint_and_the_sparse_matrix_agree(data):
    operator = data.draw(strategies.operators(max_qubits=4))
    vector = data.draw(strategies.states(operator.qubits))
    matrix, wrapped = operator.sparse(), operator.linear_operator()
    # At most twelve terms of size 4.
    for product in (wrapped @ vector, wrapped.rmatvec(vector), wrapped.adjoint() @ vector):
        assert np.abs(product - matrix @ vector).max() < 1e-13


class ByDlpack:
    def __init__(self, array):
        self.array = array

    def __dlpack__(self, **options):
        return self.array.__dlpack__(**options)

    def __dlpack_device__(self):
        return self.array.__dlpack_device__()


class ByInterface:
    def __init__(self, array):
        self.array = array

    @property
    def __array_interface__(self):
        return self.array.__array_interface__


WRAPPERS = [ByDlpack, ByInterface, memoryview]


@pytest.mark.parametrize("wrap", WRAPPERS)
@pytest.mark.parametrize("dtype", [np.complex128, np.complex64])
def test_an_array_of_another_library_is_evolved_in_place(wrap, dtype):
    array = np.zeros(8, dtype)
    array[0] = 1.0
    state = tt.State.from_array(wrap(array))
    state.rotate("X_1", np.pi / 2)
    assert abs(array[2] + 1j) < 1e-6 and state.dtype == dtype
    assert np.shares_memory(state.amplitudes, array)


@pytest.mark.parametrize("wrap", [ByDlpack, ByInterface])
def test_an_array_of_another_library_is_checked_like_one_of_numpy(wrap):
    with pytest.raises(errors.StateShapeError):
        tt.State.from_array(wrap(np.zeros(3, complex)))
    with pytest.raises(errors.StateTypeError):
        tt.State.from_array(wrap(np.zeros(4)))
    frozen = np.ones(2, complex)
    frozen.flags.writeable = False
    with pytest.raises((errors.StateLayoutError, errors.StateTypeError)):
        tt.State.from_array(wrap(frozen))
    with pytest.raises(errors.StateLayoutError):
        tt.State.from_array(wrap(np.zeros(8, complex)[::2]))


@pytest.mark.parametrize("wrong", [[1.0, 0.0], (1.0, 0.0), "01", None, object()])
def test_what_shares_no_memory_is_refused(wrong):
    with pytest.raises(errors.StateTypeError):
        tt.State.from_array(wrong)


class OnAnotherDevice(ByDlpack):
    def __dlpack__(self, **options):
        raise BufferError("on another device")


def test_memory_that_cannot_be_shared_is_refused_with_the_reason():
    with pytest.raises(errors.StateTypeError, match=r"memory that cannot be shared: on another device .*move it"):
        tt.State.from_array(OnAnotherDevice(np.ones(2, complex)))


def test_a_state_goes_out_without_a_copy():
    state = tt.State.random(5, seed=3)
    for view in (np.from_dlpack(state), np.asarray(state)):
        assert np.shares_memory(view, state.amplitudes) and np.array_equal(view, state.amplitudes)
    assert state.__dlpack_device__() == (1, 0)  # the processor, by the DLPack standard
    assert np.array_equal(np.from_dlpack(state, copy=True), state.amplitudes)


def test_a_state_of_another_state_is_the_same_memory():
    state = tt.State.product("00")
    tt.State.from_array(state).rotate("X_0", np.pi / 2)
    assert abs(state.amplitudes[1] + 1j) < 1e-15


def test_npy_files_go_both_ways(tmp_path):
    state = tt.State.random(6, seed=1)
    state.save(tmp_path / "ours.npy")
    assert np.array_equal(np.load(tmp_path / "ours.npy", allow_pickle=False), state.amplitudes)
    np.save(tmp_path / "theirs.npy", state.amplitudes)
    assert tt.State.load(tmp_path / "theirs.npy").distance(state) == 0.0


def test_the_page_on_other_libraries_runs_as_written():
    text = (Path(__file__).parent.parent / "docs" / "other-libraries.md").read_text(encoding="utf-8")
    scope = {}
    for code in re.findall(r"```python\n(.*?)```", text, re.DOTALL):
        exec(compile(code, "other-libraries.md", "exec"), scope)
    exact = np.linalg.eigvalsh(oracle.dense(scope["ring"]))[0]
    assert scope["ground"] == pytest.approx(exact, abs=1e-12)
    assert abs(np.linalg.norm(scope["later"]) - 1.0) < 1e-12
    own, ours = scope["found"].rows
    # The same circuit, run twice; some 500 products of vectors of length 1 round below 1e-12.
    assert [p.value for p in own.points] == pytest.approx([p.value for p in ours.points], abs=1e-12)
    assert own.two_qubit_gates is None and ours.two_qubit_gates > 0
