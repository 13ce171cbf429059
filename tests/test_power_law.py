"""Power laws: the fit against an independent one, bands that hold as often as they say, checks that can fail."""

from __future__ import annotations

import math

import numpy as np
import pytest
import scipy.stats
from hypothesis import given
from hypothesis import strategies as st

import trueturn as tt
from trueturn.errors import ArgumentError
from trueturn.scaling import PowerLaw, fit_steps

SIZES = (4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0, 11.0, 12.0)


@given(
    st.floats(1e-3, 1e3),
    st.floats(-4.0, 4.0),
    st.lists(st.floats(0.1, 100.0), min_size=3, max_size=12, unique_by=lambda size: round(math.log(size), 1)),
)
def test_an_exact_law_is_found(prefactor, exponent, sizes):
    law = PowerLaw.fit(sizes, [prefactor * size**exponent for size in sizes])
    # Logarithms are at most 26 and off by some 1e-15 each; sizes are apart by a factor exp(0.05) at least.
    assert law.exponent == pytest.approx(exponent, abs=1e-12 / 0.05)
    assert law(7.0) == pytest.approx(prefactor * 7.0**exponent, rel=1e-10)
    assert law.spread < 1e-12
    low, high = law.interval()
    assert low - 1e-9 <= exponent <= high + 1e-9


@given(st.lists(st.floats(-2.0, 2.0), min_size=9, max_size=9).filter(lambda noise: np.ptp(noise) > 1e-3))
def test_slope_and_intervals_are_those_of_a_linear_regression(noise):
    values = [3.0 * size**1.5 * math.exp(error) for size, error in zip(SIZES, noise, strict=True)]
    law = PowerLaw.fit(SIZES, values)
    other = scipy.stats.linregress(np.log(SIZES), np.log(values))
    quantile = scipy.stats.t.ppf(0.95, len(SIZES) - 2)
    assert law.exponent == pytest.approx(other.slope, abs=1e-10)
    assert law.interval(0.9)[1] - law.exponent == pytest.approx(quantile * other.stderr, rel=1e-9)
    high = math.log(law.prefactor_interval(0.9)[1] / law.prefactor)
    assert high == pytest.approx(quantile * other.intercept_stderr, rel=1e-9)


def test_bands_hold_as_often_as_they_say():
    # 2000 draws: the share of an event of probability 0.95 has a deviation of 0.0049; five of them are allowed.
    generator = np.random.default_rng(5)
    hits = np.zeros(3)
    for _ in range(2000):
        noise = generator.normal(scale=0.2, size=len(SIZES) + 1)
        values = [2.0 * size**1.7 * math.exp(error) for size, error in zip(SIZES, noise, strict=False)]
        law = PowerLaw.fit(SIZES, values)
        said = law.predict(40.0)
        truth = 2.0 * 40.0**1.7
        low, high = law.interval()
        hits += [
            low <= 1.7 <= high,
            said.band[0] <= truth <= said.band[1],
            said.interval[0] <= truth * math.exp(noise[-1]) <= said.interval[1],
        ]
    assert np.all(np.abs(hits / 2000 - 0.95) < 5 * 0.0049)


@given(st.floats(1.5, 60.0), st.floats(0.5, 3.0))
def test_rounding_up_never_hides_the_law(prefactor, exponent):
    counts = [math.ceil(prefactor * size**exponent) for size in SIZES]
    law = fit_steps(SIZES, counts)
    # Rounding raises each logarithm by 0 to 1/count; the slope moves by at most Σ|x - x̄|/S times the largest of that,
    # and the spread is never below what rounding causes.
    x = np.log(SIZES) - np.mean(np.log(SIZES))
    most = np.abs(x).sum() / (x @ x) * math.log1p(1.0 / min(counts)) + 1e-9
    assert abs(law.exponent - exponent) <= most
    assert law.spread >= math.sqrt(np.mean(1.0 / (12.0 * np.square(counts)))) * (1 - 1e-12)
    assert law.interval()[0] < law.exponent < law.interval()[1]


def test_a_bent_line_is_noticed_and_a_straight_one_is_not():
    bent = PowerLaw.fit(SIZES, [size + 0.05 * size**3 for size in SIZES])
    assert bent.bends() is True and "bend" in " ".join(bent.cautions())
    assert PowerLaw.fit(SIZES, [5.0 * size**2 for size in SIZES]).bends() is False
    assert fit_steps(SIZES, [math.ceil(0.7 * size**1.4) for size in SIZES]).bends() is False


def test_the_largest_size_is_held_out_and_compared():
    exact = PowerLaw.fit(SIZES, [5.0 * size**2 for size in SIZES])
    held = exact.held_out()
    assert held is not None and held.inside and held.forecast.size == 12.0
    assert held.forecast.value == pytest.approx(720.0, rel=1e-12) and held.measured == pytest.approx(720.0)
    jump = PowerLaw.fit(SIZES, [5.0 * size**2 * (1.0 if size < 12 else 2.0) for size in SIZES])
    held = jump.held_out()
    assert held is not None and not held.inside and "Without it" in " ".join(jump.cautions())


def test_three_points_are_fitted_with_a_caution_and_test_nothing():
    law = fit_steps([2, 3, 4], [10, 22, 41])
    assert law.bends() is None and law.held_out() is None
    assert "nothing tests the law" in " ".join(law.cautions())


def test_the_bootstrap_agrees_where_residuals_are_normal():
    generator = np.random.default_rng(2)
    sizes = np.geomspace(1.0, 50.0, 60)
    law = PowerLaw.fit(sizes, 3.0 * sizes**1.2 * np.exp(generator.normal(scale=0.1, size=60)))
    student, resampled = law.interval(), law.bootstrap_interval(draws=4000, seed=1)
    # 4000 draws place a 2.5 % quantile to about 0.04 deviations, an interval is 4 deviations wide; 15 % is generous.
    width = student[1] - student[0]
    assert np.allclose(student, resampled, atol=0.15 * width)
    assert law.bootstrap_interval(seed=1) == law.bootstrap_interval(seed=1)


def test_extrapolation_is_marked_and_widens():
    law = fit_steps(SIZES, [40, 60, 88, 121, 157, 200, 246, 299, 354])
    inside, near, far = law.predict(8), law.predict(24), law.predict(120)
    assert not inside.extrapolated and inside.reach == 1.0
    assert near.extrapolated and near.reach == 2.0 and law.predict(2).reach == 2.0
    spans = [math.log(said.interval[1] / said.interval[0]) for said in (inside, near, far)]
    assert spans == sorted(spans) and "extrapolated 10 times" in repr(far)
    assert all(said.interval[0] < said.band[0] < said.value < said.band[1] < said.interval[1] for said in (inside, far))


def test_repeated_sizes_count_as_points():
    law = fit_steps([4, 4, 8, 8, 16, 16], [30, 34, 120, 130, 500, 490], "n")
    assert len(law.sizes) == 6 and law.sizes == (4, 4, 8, 8, 16, 16) and "n^" in repr(law)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: fit_steps([4, 5], [1, 2]), r"sizes: too few points for a fit \(2 different ones\); give at least 3"),
        (lambda: fit_steps([4, 4, 5], [1, 2, 3]), r"sizes: too few points"),
        (lambda: fit_steps([4, 5, 6], [1, 2]), r"values: 2 for 3 sizes"),
        (lambda: fit_steps([4, 5, 6], [1, 2, 2.5]), r"steps: not a step count \(2.5\)"),
        (lambda: fit_steps([4, 5, 6], [1, 2, 0]), r"steps: not above zero"),
        (lambda: fit_steps([4, 5, -6], [1, 2, 3]), r"sizes: not above zero \(-6\)"),
        (lambda: fit_steps([4, 5, math.nan], [1, 2, 3]), r"sizes: not a finite number \(nan\)"),
        (lambda: fit_steps([4, 5, True], [1, 2, 3]), r"sizes: not a finite number \(True\)"),
        (lambda: fit_steps(4, [1, 2, 3]), r"sizes: no list of numbers"),
        (lambda: fit_steps([4, 5, 6], "123"), r"steps: no list of numbers"),
        (lambda: PowerLaw.fit([4, 5, 6], [1, 2, 3], unit=-1.0), r"unit: negative"),
        (lambda: fit_steps(SIZES, range(1, 10)).interval(1.0), r"level: not between 0 and 1"),
        (lambda: fit_steps(SIZES, range(1, 10)).predict(0), r"size: not above zero"),
        (lambda: PowerLaw.fit([1, 2, 4], [1, 16, 256]).predict(1e300), r"size: the law is too large .* \(1e\+300\)"),
        (lambda: PowerLaw.fit([1, 2, 4], [1, 16, 256])(1e300), r"size: the law is too large"),
        (lambda: fit_steps(SIZES, range(1, 10)).bootstrap_interval(draws=3), r"draws: too few"),
    ],
)
def test_what_cannot_be_fitted_is_refused(call, message):
    with pytest.raises(ArgumentError, match=message):
        call()


def test_the_names_are_exported():
    assert tt.fit_steps is fit_steps and tt.PowerLaw is PowerLaw
