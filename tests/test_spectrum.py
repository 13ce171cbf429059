"""The spectral interval encloses every eigenvalue, and does so tightly."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest
import scipy.sparse.linalg
from hypothesis import given

import oracle
from strategies import any_finite, commuting_operators, operators
from trueturn import Operator
from trueturn.errors import OperatorError
from trueturn.reference import _clusters, spectrum
from trueturn.reference._extremes import commuting_extremes, dense_extremes, triangle
from trueturn.reference.spectrum import spectral_interval, spectral_report

UNIT_ROUNDOFF = 2.0**-53


def exact_extremes(operator):
    """Extreme eigenvalues by dense algebra, and its rounding: some 10 N u times the norm."""
    eigenvalues = np.linalg.eigvalsh(oracle.dense(operator))
    return eigenvalues[0], eigenvalues[-1], 10 * eigenvalues.size * UNIT_ROUNDOFF * operator.one_norm()


def ring(qubits, letters="XYZ", coupling=1.0):
    return Operator.gather([(coupling, f"{p}_{k} {p}_{(k + 1) % qubits}") for k in range(qubits) for p in letters])


def plain_terms(operator):
    return list(zip(operator.x_masks, operator.z_masks, operator.coefficients.tolist(), strict=True))


@given(operators(max_qubits=7, max_terms=24))
def test_small_operators_are_enclosed_tightly(operator):
    low, high, rounding = exact_extremes(operator)
    report = spectral_report(operator)
    assert report.low <= low + rounding
    assert report.high >= high - rounding
    # The proof costs 4 N^2 u Σ|c| and the grid 2^-31 Σ|c| at each end (see dense_extremes), N <= 128.
    slack = (2.0**-31 + 8 * 128**2 * UNIT_ROUNDOFF) * operator.one_norm() + rounding
    assert report.low >= low - slack
    assert report.high <= high + slack


@given(operators(max_qubits=7, max_terms=24))
def test_every_route_encloses(operator):
    low, high, rounding = exact_extremes(operator.without_identity())
    terms = plain_terms(operator.without_identity())
    if not terms:
        return
    for route_low, route_high in (
        (-triangle(terms), triangle(terms)),
        spectrum._by_groups(terms),
        spectrum._by_clusters(terms, operator.qubits),
        spectrum._by_clusters([*terms], 20),
    ):
        assert route_low <= low + rounding
        assert route_high >= high - rounding


@given(commuting_operators())
def test_joint_eigenvalues_of_commuting_terms_are_exact(operator):
    bare = operator.without_identity()
    if not len(bare):
        return
    low, high, rounding = exact_extremes(bare)
    found_low, found_high, _ = commuting_extremes(plain_terms(bare), 20)
    assert found_low == pytest.approx(low, abs=2 * rounding)
    assert found_high == pytest.approx(high, abs=2 * rounding)
    assert found_low <= low + rounding
    assert found_high >= high - rounding


def test_signs_of_dependent_strings_are_tracked():
    # XX, YY and ZZ on a bond multiply to -1, so (1, 1, 1) is no joint eigenvalue.
    assert spectral_interval(ring(9, coupling=0.0) + Operator("X_0 X_1 + Y_0 Y_1 + Z_0 Z_1"))[1] < 1.0001
    low, high, listed = commuting_extremes(plain_terms(Operator("X_0 X_1 + Y_0 Y_1 + Z_0 Z_1")), 20)
    assert (round(low, 9), round(high, 9), listed) == (-3.0, 1.0, 4)


def test_published_spectra_are_enclosed(published):
    values = published("exact.json")
    cases = [(case["terms"], [level for level, _ in case["levels"]]) for case in values["spectra"]]
    cases.append((values["h2"]["pauli_terms"], values["h2"]["spectrum"]))
    assert len(cases) >= 5
    for terms, levels in cases:
        low, high = spectral_interval(Operator.gather(terms))
        # Published to 10 digits.
        assert low <= min(levels) + 1e-10
        assert high >= max(levels) - 1e-10
        # The interval is tight: shrunk by a millionth it would lose an eigenvalue.
        assert low > min(levels) - 1e-6
        assert high < max(levels) + 1e-6
        assert not (low + 1e-6 <= min(levels) and max(levels) <= high - 1e-6)


def test_the_twenty_site_ring_is_enclosed_tightly():
    report = spectral_report(ring(20))
    # The ground state is at -1.7809 per bond (20 sites); two chains of 10 and one of 3 give -38.064.
    assert -38.07 < report.low < -35.61
    assert 20 <= report.high < 20.001
    assert report.route == "clusters and commuting groups"


@pytest.mark.parametrize("qubits", [10, 12])
def test_larger_rings_are_enclosed(qubits):
    operator = ring(qubits, coupling=0.7) + Operator.gather([(0.3, f"Z_{k}") for k in range(qubits)]) - 2.0
    matrix = operator.sparse().real
    start = np.ones(2**qubits) + np.arange(2**qubits) / 2**qubits
    least, most = (scipy.sparse.linalg.eigsh(matrix, 1, which=end, v0=start)[0][0] for end in ("SA", "LA"))
    low, high = spectral_interval(operator)
    # Lanczos values lie inside the spectrum, up to its own tolerance of 1e-12 relative.
    assert low <= least + 1e-10
    assert high >= most - 1e-10
    assert high - low < 1.4 * (most - least)


def test_a_shrunk_interval_loses_an_eigenvalue():
    operator = Operator("0.3 X_0 Y_1 + 0.7 Z_1 Z_2 - 1.1 Y_2 + 0.2 X_0")
    eigenvalues = np.linalg.eigvalsh(oracle.dense(operator))
    low, high = spectral_interval(operator)
    assert np.all((low <= eigenvalues) & (eigenvalues <= high))
    shrink = 1e-8 * (high - low)
    assert eigenvalues[0] < low + shrink
    assert eigenvalues[-1] > high - shrink


def test_only_qubits_in_use_count():
    assert spectral_report(Operator("X_3 + Z_3 + Y_90", qubits=128)).route == "dense"
    low, high = spectral_interval(Operator("X_3 + Z_3", qubits=128))
    assert high == -low == pytest.approx(math.sqrt(2), rel=1e-8)


def test_identity_shifts_the_interval():
    assert spectral_interval(Operator("-2.5")) == (-2.5, -2.5)
    assert spectral_interval(Operator("0.0")) == (0.0, 0.0)
    low, high = spectral_interval(Operator("Z_0 + 10"))
    assert 8.99999 < low <= 9 <= 11 <= high < 11.00001


@given(operators(max_qubits=3, max_terms=4, values=any_finite, distinct=True))
def test_any_scale_is_enclosed_or_refused(operator):
    try:
        low, high = spectral_interval(operator)
    except OperatorError as error:
        assert "scale the operator down" in str(error)
        return
    assert low <= high
    assert math.isfinite(low)
    assert math.isfinite(high)
    bare = operator.without_identity()
    if len(bare):
        # Tr (H - c_0) P = 2^n c, so some eigenvalue is at least |c| away from c_0.
        assert high - low >= np.max(np.abs(bare.coefficients))
        assert high - operator.identity_coefficient <= 1.0001 * bare.one_norm() + math.ulp(high)


def test_tiny_terms_beside_huge_ones_are_enclosed():
    for text in (
        "1e300 + 1e-300 X_0",
        "1e300 Z_0 Z_1 + 1e-300 X_0",
        "1e300 Z_0 + 5e-324 X_9 + 5e-324 Z_9 + Z_5",
    ):
        low, high = spectral_interval(Operator(text))
        assert low < high
        assert high >= 1e300
    assert spectral_interval(Operator("5e-324 X_0 + 5e-324 Z_0"))[1] >= 1e-323 * 0.7


def test_overflowing_spectra_are_refused():
    with pytest.raises(OperatorError, match=r"operator: spectrum beyond double precision .*; scale the operator down"):
        spectral_interval(Operator("1.7e308 Z_0 + 1.7e308 Z_1"))


def test_strangers_are_refused():
    with pytest.raises(OperatorError, match=r"operator: not an Operator \(str\); give"):
        spectral_report("Z_0")


def test_centre_and_half_width_enclose_the_interval():
    report = spectral_report(ring(5, coupling=0.1) + 0.3)
    assert report.centre - report.half_width <= report.low
    assert report.high <= report.centre + report.half_width
    with pytest.raises(dataclasses.FrozenInstanceError):
        report.low = 0.0


def test_clusters_cover_every_term_once():
    terms = plain_terms(ring(23) + Operator("0.5 " + " ".join(f"Z_{k}" for k in range(15))))
    clusters, left_over = _clusters.plan(terms, 6)
    assert all(cluster.qubits <= 6 for cluster in clusters)
    assert [coefficient for _, _, coefficient in left_over] == [0.5]
    assert sum(len(cluster.terms) for cluster in clusters) + len(left_over) == len(terms)
    # Windows of the ring are equal, so they are solved once.
    assert len(set(clusters)) <= 3


def test_complex_and_real_matrices_agree():
    # A quarter turn about Z takes X to Y and Y to -X: odd numbers of Y appear, the spectrum stays.
    real = Operator("0.4 X_0 Z_1 + 0.9 X_1 + 0.2 Z_0")
    turned = Operator("0.4 Y_0 Z_1 + 0.9 X_1 + 0.2 Z_0")
    assert spectral_interval(turned) == pytest.approx(spectral_interval(real), abs=1e-8)


def test_dense_extremes_fall_back_when_no_proof_is_found(monkeypatch):
    def fails(matrix):
        raise np.linalg.LinAlgError

    monkeypatch.setattr(np.linalg, "cholesky", fails)
    terms = plain_terms(Operator("X_0 + Z_0"))
    assert dense_extremes(terms, 1) == (-triangle(terms), triangle(terms))


def test_work_beyond_the_caps_is_still_enclosed(monkeypatch):
    monkeypatch.setattr(spectrum, "RANK_CAP", 3)
    monkeypatch.setattr(spectrum, "GROUP_ENTRIES", 64)
    monkeypatch.setattr(_clusters, "STEPS_ALLOWED", 20)
    operator = ring(10, "ZX")
    low, high = spectral_interval(operator)
    eigenvalues = np.linalg.eigvalsh(operator.dense())
    assert low <= eigenvalues[0] + 1e-10
    assert high >= eigenvalues[-1] - 1e-10


def test_many_dense_strings_are_bounded():
    generator = np.random.default_rng(3)
    x_masks, z_masks = ([int.from_bytes(generator.bytes(16), "little") for _ in range(3000)] for _ in range(2))
    operator = Operator.from_masks(x_masks, z_masks, generator.normal(size=3000), 128)
    low, high = spectral_interval(operator)
    assert -operator.one_norm() * 1.001 < low < high < operator.one_norm() * 1.001


def test_operators_of_a_hundred_thousand_terms_are_enclosed():
    masks = list(range(1, 100_001))
    operator = Operator.from_masks(masks, [mask << 17 for mask in masks], np.ones(len(masks)), 34)
    low, high = spectral_interval(operator)
    assert -1.0001e5 < low < high < 1.0001e5
