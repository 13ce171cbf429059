"""The class Operator: construction, files, matrices, equality, and refusal of bad input."""

from __future__ import annotations

import copy
import fractions
import math
import pickle

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
from strategies import any_finite, operators, states
from trueturn import Operator, _memory
from trueturn.errors import MemoryRefusedError, OperatorError, TermError

UNIT_ROUNDOFF = 2.0**-53

ISING = Operator("-1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1 - 0.25")


# Construction


def test_number_of_qubits_is_inferred_or_stated():
    assert Operator("Z_3").qubits == 4
    assert Operator("2.5").qubits == 1
    assert Operator("Z_3", qubits=9).qubits == 9
    assert Operator("Z_127").qubits == 128


def test_gather_takes_pairs():
    operator = Operator.gather([(-1, "Z_0 Z_1"), (np.float32(0.5), "X_0"), (fractions.Fraction(1, 4), "")], qubits=3)
    assert str(operator) == "-1.0 Z_0 Z_1 + 0.5 X_0 + 0.25"
    assert operator.qubits == 3
    assert str(Operator.gather((c, s) for c, s in [(2.0, "X_0 Y_0 X_0")])) == "-2.0 Y_0"
    assert len(Operator.gather([])) == 0


def test_masks_go_in_and_come_out():
    operator = Operator.from_masks([0b01, 1 << 100], np.array([0b11, 0]), [0.5, -2], qubits=101)
    assert operator.x_masks.tolist() == [1, 1 << 100]
    assert operator.z_masks.tolist() == [3, 0]
    assert operator.x_masks.dtype == operator.z_masks.dtype == object
    assert operator.coefficients.dtype == np.float64
    assert str(operator) == "0.5 Y_0 Z_1 - 2.0 X_100"
    assert Operator.from_masks(operator.x_masks, operator.z_masks, operator.coefficients) == operator


def test_operators_cannot_be_changed():
    for array in (ISING.coefficients, ISING.x_masks, ISING.z_masks):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 1


@pytest.mark.parametrize("count", [0, 129, -1, 1.5, True, "3"])
def test_impossible_numbers_of_qubits_are_refused(count):
    with pytest.raises(OperatorError, match=r"qubits: out of range \(.*give an integer from 1 to 128"):
        Operator("1.0", qubits=count)


@pytest.mark.parametrize(
    ("build", "message"),
    [
        (lambda: Operator(3), r"text: not a string \(int\); give terms"),
        (lambda: Operator.gather([(1.0, "X_0"), 2.0]), r"terms\[1\]: not a pair \(2\.0\); give"),
        (lambda: Operator.gather([(1.0, "X_0"), ("Z_0", 1.0)]), r"terms\[1\]: not a pair"),
        (lambda: Operator.gather([(1j, "X_0")]), r"terms\[0\]: not a real number \(1j\); give a finite"),
        (lambda: Operator.gather([(math.nan, "X_0")]), r"terms\[0\]: not finite \(nan\)"),
        (lambda: Operator.gather([(10**400, "X_0")]), r"terms\[0\]: not finite"),
        (lambda: Operator.gather([(True, "X_0")]), r"terms\[0\]: not a real number \(True\)"),
        (
            lambda: Operator.from_masks([1], [0, 0], [1.0]),
            r"coefficients: lengths differ \(1 x masks, 2 z masks",
        ),
        (lambda: Operator.from_masks([1], [0], [1.0, 2.0]), r"coefficients: lengths differ"),
        (lambda: Operator.from_masks([1], [0], 1.0), r"coefficients: not a sequence"),
        (
            lambda: Operator.from_masks([1], [0], [[1.0]]),
            r"coefficients: not one-dimensional \(shape \(1, 1\)\)",
        ),
        (lambda: Operator.from_masks([1], [0], [1j]), r"coefficients\[0\]: not a real number"),
        (lambda: Operator.from_masks([1], [0], ["a"]), r"coefficients\[0\]: not a real number"),
        (
            lambda: Operator.from_masks([1], [0], np.array([math.inf])),
            r"coefficients: entry 0 is not finite \(inf\)",
        ),
        (lambda: Operator.from_masks([-1], [0], [1.0]), r"x\[0\]: out of range \(-1\)"),
        (lambda: Operator.from_masks([1], [1 << 128], [1.0]), r"z\[0\]: out of range"),
        (lambda: Operator.from_masks([0.5], [0], [1.0]), r"x: not a sequence of integers"),
        (lambda: Operator.from_masks(7, [0], [1.0]), r"x: not a sequence of integers"),
        (
            lambda: Operator.from_masks([8], [0], [1.0], 3),
            r"qubits: too few \(3\) for a term on qubit 3; give at least 4",
        ),
        (
            lambda: Operator("1e308 X_0 + 1e308 X_0"),
            r"coefficients: the coefficient of X_0 overflows \(inf\)",
        ),
        (lambda: ISING * 1e400, r"factor: not finite"),
        (lambda: ISING * 1j, r"factor: not a real number \(1j\)"),
        (lambda: ISING / 0, r"divisor: zero \(0\.0\)"),
        (lambda: Operator("1e308 X_0") * 10, r"coefficient of X_0 overflows"),
        (lambda: ISING + math.nan, r"number: not finite"),
        (lambda: ISING.near("Z_0", 1.0), r"other: not an Operator \(str\)"),
        (lambda: ISING.near(ISING, -1.0), r"atol: negative \(-1\.0\)"),
        (lambda: ISING.bracket(2), r"other: not an Operator \(int\)"),
        (lambda: ISING.bracket_vanishes(None), r"other: not an Operator \(NoneType\)"),
        (lambda: ISING.relabel({0: 1}), r"names: two qubits become 1"),
        (lambda: ISING.relabel({5: 1}), r"names: old qubit out of range \(5\); give an integer from 0 to 1"),
        (
            lambda: ISING.relabel({0: 128}),
            r"names: new qubit out of range \(128\); give an integer from 0 to 127",
        ),
        (lambda: ISING.relabel({0: 1.5}), r"names: new qubit out of range \(1\.5\)"),
    ],
)
def test_bad_input_is_refused_with_argument_value_and_remedy(build, message):
    with pytest.raises(OperatorError, match=message) as caught:
        build()
    assert "; " in str(caught.value)
    assert str(caught.value).startswith(caught.value.argument)
    assert isinstance(caught.value, ValueError)


def test_bad_factors_are_located_in_the_list():
    with pytest.raises(TermError, match=r"terms\[1\]: refused at line 1, column 5") as caught:
        Operator.gather([(1.0, "X_0"), (2.0, "Z_0 Q_1")])
    assert caught.value.text == "Q_1"
    assert caught.value.position == (1, 5)
    with pytest.raises(TermError, match="the coefficient stands apart"):
        Operator.gather([(1.0, "2 X_0")])


# Arithmetic


def test_numbers_are_multiples_of_the_identity():
    assert str(ISING + 1) == "-1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1 + 0.75"
    assert 1 + ISING == ISING + 1
    assert 1 - ISING == -(ISING - 1)
    assert sum([ISING, ISING]) == 2 * ISING
    assert np.float64(2) * ISING == ISING * 2 == ISING / 0.5
    assert +ISING is ISING
    assert Operator("0.0") == ISING * 0


def test_binary_operations_act_on_the_larger_number_of_qubits():
    wide = Operator("X_0", qubits=6)
    for result in (ISING + wide, wide - ISING, ISING.bracket(wide), wide * 2, Operator("X_0") * wide):
        assert result.qubits == 6


def test_operators_do_not_combine_with_strangers():
    for other in ("X_0", None, [1], np.eye(2)):
        with pytest.raises(TypeError):
            ISING + other
        with pytest.raises(TypeError):
            other * ISING


# Equality


@given(operators(max_terms=6), st.randoms(use_true_random=False))
def test_equality_and_hash_ignore_order(operator, random):
    places = list(range(len(operator)))
    random.shuffle(places)
    shuffled = Operator.from_masks(
        operator.x_masks[places], operator.z_masks[places], operator.coefficients[places], operator.qubits + 1
    )
    assert shuffled == operator
    assert hash(shuffled) == hash(operator)
    assert (operator + 0.5) != operator
    assert operator != str(operator)


def test_near_compares_each_coefficient():
    moved = Operator("-1.0 Z_0 Z_1 + 0.501 X_0 + 0.5 X_1 - 0.25 + 0.0005 Y_1")
    assert ISING.near(moved, 0.0011)
    assert not ISING.near(moved, 0.0009)
    assert ISING.near(ISING, 0)


@given(operators(values=any_finite, distinct=True))
def test_operators_survive_copying_and_pickling(operator):
    for twin in (copy.deepcopy(operator), pickle.loads(pickle.dumps(operator))):
        assert str(twin) == str(operator)
        assert twin.qubits == operator.qubits


# Facts


@given(operators())
def test_identity_and_traceless_part_add_up(operator):
    bare = operator.without_identity()
    assert bare + operator.identity_coefficient == operator
    assert bare.identity_coefficient == 0.0
    trace = np.trace(oracle.dense(operator)).real / 2**operator.qubits
    # 2^n diagonal entries, each a sum of at most 12 terms.
    assert trace == pytest.approx(operator.identity_coefficient, abs=28 * UNIT_ROUNDOFF * operator.one_norm())


def test_support_and_one_norm():
    operator = Operator("0.5 X_1 Z_4 - 2.0 Y_4 + 3", qubits=7)
    assert operator.support() == (1, 4)
    assert operator.one_norm() == 5.5
    assert Operator("1.7e308 X_0 + 1.7e308 Z_0").one_norm() == math.inf


def test_repr_is_short_and_evaluates_when_it_can():
    assert eval(repr(ISING)) == ISING
    long = Operator.gather([(1.0, f"X_{k}") for k in range(100)])
    assert repr(long) == "<Operator on 100 qubits, 100 terms: 1.0 X_0 + 1.0 X_1 + 1.0 X_2 + 1.0 X_3 …>"


# Files


@given(operators(max_qubits=128, values=any_finite, distinct=True))
def test_files_give_back_the_same_operator(tmp_path_factory, operator):
    path = tmp_path_factory.mktemp("terms") / "model.terms"
    operator.write(path)
    again = Operator.read(path)
    assert str(again) == str(operator)
    assert again.qubits == operator.qubits
    assert [entry.name for entry in path.parent.iterdir()] == ["model.terms"]


def test_file_layout(tmp_path):
    path = tmp_path / "ising.terms"
    Operator("-1.0 Z_0 Z_1 + 0.5 X_0 - 1e-07", qubits=5).write(path)
    assert path.read_text() == "# qubits: 5\n-1.0 Z_0 Z_1\n0.5 X_0\n-1e-07\n"[:-6] + "1e-7\n"
    Operator("0.0").write(str(path))
    assert len(Operator.read(str(path))) == 0


def test_handwritten_files_are_read(tmp_path):
    path = tmp_path / "hand.terms"
    path.write_text("# my model\nZ_0 Z_1\n  - .5 X_0 # field\n\n+ 2\n#qubits: 3\n")
    operator = Operator.read(path)
    assert str(operator) == "1.0 Z_0 Z_1 - 0.5 X_0 + 2.0"
    assert operator.qubits == 3


@pytest.mark.parametrize(
    ("content", "error", "message"),
    [
        (b"Z_0\n2 * X_0\n", TermError, r"bad\.terms: refused at line 2, column 3"),
        (b"# qubits: 2\nZ_4\n", TermError, r"bad\.terms: refused at line 2, column 1 .* from 0 to 1"),
        (
            b"# qubits: many\nZ_4\n",
            OperatorError,
            r"bad\.terms: the qubits comment holds no number \('many'\)",
        ),
        (b"# qubits: 400\nZ_4\n", OperatorError, r"qubits: out of range \(400\)"),
        (b"Z_0 \xff\n", OperatorError, r"bad\.terms: not UTF-8 text \(byte 4\)"),
        (b"# only a comment\n", TermError, r"bad\.terms: .* at least one term"),
    ],
)
def test_bad_files_are_refused(tmp_path, content, error, message):
    path = tmp_path / "bad.terms"
    path.write_bytes(content)
    with pytest.raises(error, match=message):
        Operator.read(path)


def test_failed_writing_leaves_nothing_behind(tmp_path):
    with pytest.raises(FileNotFoundError):
        ISING.write(tmp_path / "missing" / "model.terms")
    folder = tmp_path / "taken.terms"
    folder.mkdir()
    with pytest.raises(OSError, match=r"taken\.terms"):
        ISING.write(folder)
    assert [entry.name for entry in tmp_path.iterdir()] == ["taken.terms"]


# Matrices


@given(operators(max_qubits=5, max_terms=20), st.data())
def test_matrices_agree_with_the_oracle(operator, data):
    expected = oracle.dense(operator)
    # An entry sums at most 20 products by 1, i and -1, exact but for the additions: 20 u Σ|c|.
    atol = 20 * UNIT_ROUNDOFF * operator.one_norm()
    matrix = operator.dense()
    assert matrix.dtype == np.complex128
    assert np.array_equal(matrix, matrix.conj().T)
    assert np.allclose(matrix, expected, rtol=0, atol=atol)
    sparse = operator.sparse()
    assert sparse.has_sorted_indices
    assert sparse.nnz == np.count_nonzero(matrix)
    assert np.array_equal(sparse.toarray(), matrix)
    vector = data.draw(states(operator.qubits))
    # Each entry of the product sums at most 2^5 products besides.
    assert np.allclose(operator.linear_operator() @ vector, expected @ vector, rtol=0, atol=4 * atol)


def test_dense_matrices_stop_at_twelve_qubits():
    assert Operator("Z_11").dense().shape == (4096, 4096)
    with pytest.raises(MemoryRefusedError, match=r"dense: too many qubits \(13.*use sparse\(\)") as caught:
        Operator("Z_12").dense()
    assert caught.value.largest_qubits == 12
    assert caught.value.needed >= 16 << 26
    assert isinstance(caught.value, MemoryError)


def test_matrices_that_do_not_fit_are_refused_before_allocation():
    for build in (Operator("Z_0 + X_1", 60).sparse, Operator("Z_0", 60).linear_operator):
        with pytest.raises(
            MemoryRefusedError, match=r"does not fit in memory \(needs .*; at most \d+ qubits fit"
        ) as caught:
            build()
        assert 0 < caught.value.largest_qubits < 60
        assert caught.value.needed > caught.value.available


def test_algebra_that_outgrows_the_memory_is_refused(monkeypatch):
    monkeypatch.setattr(_memory, "available_bytes", lambda: 1_000_000)
    masks = list(range(1, 4000))
    left = Operator.from_masks([0] * 3999, masks, np.ones(3999))
    right = Operator.from_masks([0] * 3999, [mask << 20 for mask in masks], np.ones(3999))
    with pytest.raises(MemoryRefusedError, match="other: the result does not fit in memory") as caught:
        left * right
    assert caught.value.available == 1_000_000


def test_memory_figures():
    assert _memory.available_bytes() > 1 << 20
    assert _memory.readable(512) == "512 B"
    assert _memory.readable(3 << 29) == "1.5 GiB"
    _memory.require(0, "nothing", 1)


def test_largest_size_that_fits_is_named(monkeypatch):
    monkeypatch.setattr(_memory, "available_bytes", lambda: 16 * 3 << 20)
    with pytest.raises(MemoryRefusedError, match="at most 20 qubits fit") as caught:
        _memory.require(16 * 3 << 21, "reference", 3)
    assert caught.value.largest_qubits == 20
    with pytest.raises(MemoryRefusedError, match="ask for less"):
        _memory.require(1 << 40, "reference")


def test_control_groups_bound_the_memory(monkeypatch):
    files = {
        "/proc/meminfo": "MemTotal: 9000000 kB\nMemAvailable: 8000000 kB\n",
        "/proc/self/cgroup": "0::/job/step\n",
        "/sys/fs/cgroup/job/step/memory.max": "max\n",
        "/sys/fs/cgroup/job/step/memory.current": "5\n",
        "/sys/fs/cgroup/job/memory.max": "3000000\n",
        "/sys/fs/cgroup/job/memory.current": "2500000\n",
        "/sys/fs/cgroup/job/memory.stat": "anon 1\ninactive_file 100000\n",
    }
    monkeypatch.setattr(_memory, "_text", lambda path: files.get(str(path), ""))
    assert _memory.available_bytes() == 600_000
    del files["/sys/fs/cgroup/job/memory.max"]
    assert _memory.available_bytes() == 8_000_000 * 1024
