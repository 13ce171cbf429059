"""The written notation and the algebra of Pauli sums, against the dense oracle."""

from __future__ import annotations

import itertools
import signal
import threading
import time

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import oracle
from strategies import any_finite, commuting_operators, operators, pauli_strings
from trueturn import Operator
from trueturn.errors import OperatorError, TermError, TrueturnError

UNIT_ROUNDOFF = 2.0**-53


def tolerance(*operands, terms_per_entry=64):
    """Rounding of dense algebra on both sides: an entry sums so many products, of sizes below Π Σ|c|."""
    size = 1.0
    for operand in operands:
        size *= 1 + operand.one_norm()
    return terms_per_entry * UNIT_ROUNDOFF * size * 2 ** max(operand.qubits for operand in operands)


def lifted(operator, qubits):
    """The same operator on more qubits."""
    return Operator.from_masks(operator.x_masks, operator.z_masks, operator.coefficients, qubits)


def dense_pair(left, right):
    qubits = max(left.qubits, right.qubits)
    return oracle.dense(lifted(left, qubits)), oracle.dense(lifted(right, qubits))


def test_oracle_follows_the_multiplication_table():
    x, y, z = (oracle.pauli(f"{letter}_0", 1) for letter in "XYZ")
    assert np.array_equal(x @ y, 1j * z)
    assert np.array_equal(y @ z, 1j * x)
    assert np.array_equal(oracle.pauli("Z_0", 2), np.diag([1, -1, 1, -1]))
    assert np.array_equal(oracle.pauli("X_0 Y_2", 3) @ np.eye(8)[:, 0], 1j * np.eye(8)[:, 5])
    assert np.array_equal(oracle.string(0b01, 0b11, 2), oracle.pauli("Y_0 Z_1", 2))


# Text


@pytest.mark.parametrize(
    ("text", "printed"),
    [
        ("-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25", "-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25"),
        ("Z_1 X_0", "1.0 X_0 Z_1"),
        ("2Z_{10}X_3-.5", "2.0 X_3 Z_10 - 0.5"),
        ("+1e-3 Y_0 + 1E3", "0.001 Y_0 + 1000.0"),
        ("0.0", "0.0"),
        ("1 X_0 - X_0", "0.0"),
        ("X_0 X_0", "1.0"),
        ("X_0 Y_0 X_0", "-1.0 Y_0"),
        ("X_0 Y_0 X_1 Y_1", "-1.0 Z_0 Z_1"),
        ("# title\n-1.0 Z_0 Z_1\n0.5 X_0  # field\n\n-0.25\n", "-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25"),
        ("X_0 +\n  Z_1", "1.0 X_0 + 1.0 Z_1"),
        ("X_0\tZ_1\r\nY_0\r\n", "1.0 X_0 Z_1 + 1.0 Y_0"),
        ("Z_127", "1.0 Z_127"),
        ("5e-324 X_0", "5e-324 X_0"),
    ],
)
def test_text_is_read_and_printed(text, printed):
    assert str(Operator(text)) == printed


def test_text_means_what_it_says():
    expected = -1.5 * oracle.pauli("Z_0 Z_1", 3) + 0.5 * oracle.pauli("Y_2", 3) - 0.25 * np.eye(8)
    assert np.array_equal(oracle.dense(Operator("-1.5 Z_0 Z_1 + 0.5 Y_2 - 0.25")), expected)


@given(operators(max_qubits=128, values=any_finite, distinct=True))
def test_printing_parses_back_exactly(operator):
    again = Operator(str(operator), operator.qubits)
    assert again.x_masks.tolist() == operator.x_masks.tolist()
    assert again.z_masks.tolist() == operator.z_masks.tolist()
    assert again.coefficients.tobytes() == operator.coefficients.tobytes()


@given(st.text(alphabet="XYZ_0123{} +-.eE#\n*ij", max_size=30))
def test_any_text_is_read_or_refused(text):
    try:
        operator = Operator(text)
    except TermError as error:
        line, column = error.position
        lines = text.split("\n")
        assert lines[line - 1][column - 1 :].startswith(error.text.split("\n")[0])
        assert str(error).startswith("text: ")
    except OperatorError:
        pass
    else:
        assert Operator(str(operator)) == operator


@pytest.mark.parametrize(
    ("text", "position", "found", "says"),
    [
        ("", (1, 1), "", "at least one term"),
        ("X_0 Y_0", (1, 1), "X_0 Y_0", "i Z_0, which is not Hermitian"),
        ("Z_1 + 2 Y_3 X_3", (1, 9), "Y_3 X_3", "-i Z_3, which is not Hermitian"),
        ("1j X_0", (1, 1), "1j", "complex"),
        ("(1+2j) X_0", (1, 1), "(1+2j)", "real numbers"),
        ("2 * X_0", (1, 3), "*", "without '*'"),
        ("X_0\n+ nan Z_1", (2, 3), "nan", "finite"),
        ("-inf", (1, 2), "inf", "finite"),
        ("1e999 X_0", (1, 1), "1e999", "double precision"),
        ("1e-999 X_0", (1, 1), "1e-999", "double precision"),
        ("1e X_0", (1, 1), "1e", "exponent"),
        (". X_0", (1, 1), ".", "number"),
        ("X", (1, 1), "X", "underscore"),
        ("X_", (1, 1), "X_", "qubit number"),
        ("X_{3", (1, 1), "X_{3", "qubit number"),
        ("X_0 X_128", (1, 5), "X_128", "0 to 127"),
        ("X_99999999999999999999", (1, 1), "X_99999999999999999999", "0 to 127"),
        ("x_0", (1, 1), "x_0", "capitals"),
        ("I_0", (1, 1), "I_0", "carry the identity"),
        ("Q_0", (1, 1), "Q_0", "expected a term"),
        ("X_0 + - Z_0", (1, 7), "-", "one sign"),
        ("X_0 -", (1, 6), "", "expected a term"),
        ("X_0 2", (1, 5), "2", "a sign"),
        ("1.0 Z_0 é", (1, 9), "é", "a sign"),
    ],
)
def test_bad_text_is_located(text, position, found, says):
    with pytest.raises(TermError, match="text: refused at line") as caught:
        Operator(text)
    assert caught.value.position == position
    assert caught.value.text == found
    assert says in str(caught.value)
    assert isinstance(caught.value, ValueError)


def test_text_beyond_the_stated_qubits_is_refused():
    with pytest.raises(TermError, match="from 0 to 2"):
        Operator("Z_0 + X_3", qubits=3)


# Merging


@given(st.lists(st.tuples(pauli_strings(2), st.integers(-3, 3))))
def test_repeated_strings_merge_at_their_first_occurrence(terms):
    sums: dict[tuple[int, int], int] = {}
    for string, value in terms:
        sums[string] = sums.get(string, 0) + value
    expected = [(string, value) for string, value in sums.items() if value]
    operator = Operator.from_masks([x for (x, _), _ in terms], [z for (_, z), _ in terms], [c for _, c in terms], 2)
    assert list(zip(operator.x_masks, operator.z_masks, strict=True)) == [string for string, _ in expected]
    assert operator.coefficients.tolist() == [value for _, value in expected]


def test_almost_zero_sums_are_kept():
    operator = Operator("0.1 X_0 + 0.2 X_0 - 0.3 X_0")
    assert operator.coefficients.tolist() == [0.1 + 0.2 - 0.3]


# Algebra


@given(operators(), operators())
def test_sums_match_dense_matrices(left, right):
    a, b = dense_pair(left, right)
    # Each entry is one rounded sum of numbers below Σ|c|, on both sides.
    assert np.allclose(oracle.dense(left + right), a + b, rtol=0, atol=tolerance(left + right))
    assert np.allclose(oracle.dense(left - right), a - b, rtol=0, atol=tolerance(left, right))


@given(operators(), operators())
def test_the_bracket_matches_dense_matrices(left, right):
    a, b = dense_pair(left, right)
    bracket = left.bracket(right)
    assert np.allclose(oracle.dense(bracket), 1j * (a @ b - b @ a), rtol=0, atol=tolerance(left, right))
    # The same contributions in another order.
    assert right.bracket(left).near(-bracket, tolerance(left, right))
    assert bracket.bracket_vanishes(bracket)


@given(operators(max_qubits=3), operators(max_qubits=3))
def test_vanishing_brackets_are_recognised(left, right):
    a, b = dense_pair(left, right)
    commutator = np.abs(a @ b - b @ a).max()
    if left.bracket_vanishes(right):
        assert commutator <= tolerance(left, right)
    else:
        assert commutator > 0


@given(operators(max_qubits=4))
def test_powers_of_an_operator_are_products(operator):
    square = operator * operator
    matrix = oracle.dense(operator)
    assert np.allclose(oracle.dense(square), matrix @ matrix, rtol=0, atol=tolerance(operator, operator))
    cube = square * operator
    assert np.allclose(
        oracle.dense(cube), matrix @ matrix @ matrix, rtol=0, atol=tolerance(operator, operator, operator)
    )


@given(commuting_operators())
def test_commuting_terms_form_one_group_and_multiply(operator):
    assert operator._terms.first_anticommuting_pair() is None
    assert set(operator._terms.commuting_groups().tolist()) <= {0}


def test_underflow_does_not_make_operators_commute():
    tiny = Operator("1e-200 X_0 + X_1"), Operator("1e-200 Z_0 + X_1")
    assert not tiny[0].bracket_vanishes(tiny[1])
    bond = Operator("1e-200 X_0 X_1 + 1e-200 Y_0 Y_1")
    assert bond.bracket_vanishes(Operator("1e-200 Z_0 + 1e-200 Z_1"))


def test_products_that_are_not_hermitian_point_to_the_bracket():
    with pytest.raises(OperatorError, match="bracket"):
        Operator("X_0") * Operator("Z_0")


def test_total_spin_is_conserved_by_an_exchange_ring():
    ring = Operator.gather([(0.1 * (k + 1), f"{p}_{k} {p}_{(k + 1) % 7}") for k in range(7) for p in "XYZ"])
    for letter in "XYZ":
        total = Operator.gather([(0.3, f"{letter}_{k}") for k in range(7)])
        assert ring.bracket_vanishes(total)
        assert not ring.bracket_vanishes(total + Operator(f"0.0001 {letter}_3"))


@given(operators(max_qubits=5, max_terms=25))
def test_commuting_groups_are_first_fit(operator):
    """A plain restatement: each term goes to the first group with whose members it commutes."""
    strings = list(zip(operator.x_masks, operator.z_masks, strict=True))

    def commute(one, two):
        return ((one[0] & two[1]).bit_count() + (one[1] & two[0]).bit_count()) % 2 == 0

    groups: list[list[tuple[int, int]]] = []
    expected = []
    for string in strings:
        fitting = (number for number, group in enumerate(groups) if all(commute(string, other) for other in group))
        number = next(fitting, len(groups))
        if number == len(groups):
            groups.append([])
        groups[number].append(string)
        expected.append(number)
    assert operator._terms.commuting_groups().tolist() == expected
    pairs = ((j, k) for k in range(len(strings)) for j in range(k) if not commute(strings[j], strings[k]))
    assert operator._terms.first_anticommuting_pair() == next(pairs, None)


@given(operators(max_qubits=3), st.permutations(range(5)))
def test_relabelling_permutes_index_bits(operator, names):
    moved = lifted(operator, 5).relabel(dict(enumerate(names)))
    index = np.arange(32)
    image = sum((index >> old & 1) << new for old, new in enumerate(names))
    matrix = oracle.dense(moved)
    assert np.array_equal(matrix[np.ix_(image, image)], oracle.dense(lifted(operator, 5)))


# Scale


def windows(qubits=128, width=4):
    """Every string on each window of the chain, with a letter on the window's first qubit."""
    x_masks, z_masks = [], []
    letters = [(0, 0), (1, 0), (1, 1), (0, 1)]
    for start, (first, *rest) in itertools.product(
        range(qubits - width + 1), itertools.product(letters[1:], *[letters] * (width - 1))
    ):
        factors = [first, *rest]
        x_masks.append(sum(x << start + place for place, (x, _) in enumerate(factors)))
        z_masks.append(sum(z << start + place for place, (_, z) in enumerate(factors)))
    return Operator.from_masks(x_masks, z_masks, np.linspace(1, 2, len(x_masks)), qubits)


@pytest.fixture(scope="module")
def large():
    operator = windows(width=5)
    assert len(operator) > 9e4
    return operator


def test_large_local_operators_are_combined(large):
    chain = Operator.gather([(1.0, f"Z_{k} Z_{k + 1}") for k in range(127)])
    assert len(large + chain) == len(large) + 3  # the last bonds start behind the last window
    assert large - large == Operator("0.0")
    assert len(large.bracket(chain)) > len(large)
    assert not large.bracket_vanishes(chain)
    assert large.bracket_vanishes(Operator("3.0"))


def test_large_local_operators_are_grouped(large):
    groups = large._terms.commuting_groups()
    assert groups.shape == (len(large),)
    assert large._terms.first_anticommuting_pair() is not None


def test_large_diagonal_operators_commute_and_multiply():
    generator = np.random.default_rng(5)
    masks = list({int.from_bytes(generator.bytes(16), "little") for _ in range(100_000)})
    dense_strings = Operator.from_masks([0] * len(masks), masks, generator.normal(size=len(masks)), 128)
    assert dense_strings._terms.first_anticommuting_pair() is None
    assert dense_strings.bracket_vanishes(dense_strings)
    assert len(dense_strings * Operator("Z_0 + 2 Z_1")) > len(masks)


def test_dense_random_strings_are_grouped():
    generator = np.random.default_rng(6)
    x_masks, z_masks = ([int.from_bytes(generator.bytes(16), "little") for _ in range(20_000)] for _ in range(2))
    operator = Operator.from_masks(x_masks, z_masks, np.ones(20_000), 128)
    assert operator._terms.commuting_groups().max() > 100


def test_long_algebra_stops_on_an_interrupt():
    """Strings of Y alone commute but share every qubit, so 10^10 pairs have to be looked at."""
    generator = np.random.default_rng(7)
    masks = [int.from_bytes(generator.bytes(16), "little") for _ in range(100_000)]
    operator = Operator.from_masks(masks, masks, np.ones(len(masks)), 128)
    timer = threading.Timer(0.2, signal.raise_signal, [signal.SIGINT])
    timer.start()
    started = time.monotonic()
    with pytest.raises(KeyboardInterrupt):
        operator.bracket_vanishes(operator)
    # Checked every 40 ms; the bound leaves room for a loaded machine.
    assert time.monotonic() - started < 10
    timer.join()


def test_the_order_of_results_is_that_of_first_occurrence():
    left, right = windows(9, 2), windows(9, 3)
    expected = {}
    for x1, z1 in zip(left.x_masks, left.z_masks, strict=True):
        for x2, z2 in zip(right.x_masks, right.z_masks, strict=True):
            if ((x1 & z2).bit_count() + (z1 & x2).bit_count()) % 2:
                expected[x1 ^ x2, z1 ^ z2] = None
    bracket = left.bracket(right)
    strings = dict.fromkeys(zip(bracket.x_masks, bracket.z_masks, strict=True))
    assert list(strings) == [string for string in expected if string in strings]
    assert len(strings) > 0.9 * len(expected)


def test_errors_share_one_base():
    for error in (TermError, OperatorError):
        assert issubclass(error, TrueturnError)
