"""Strengths: closed forms, tables and callables; refusals of what is no number."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

import trueturn as tt
from trueturn import errors
from trueturn.driven import Call, Constant, Driven, Ramp, Samples, Sinusoid, Strength

X = tt.Operator("X_0")


def test_closed_forms_are_what_they_say():
    for time in (-1.5, 0.0, 0.7):
        assert Constant(2)(time) == 2.0
        assert Ramp(0.5, 3.0)(time) == 0.5 + 3.0 * time
        assert Sinusoid(2.0, 3.0, 0.4, 1.0)(time) == 1.0 + 2.0 * math.cos(3.0 * time + 0.4)
    assert Ramp(1, 2) == Ramp(1.0, 2.0) and hash(Constant(1)) == hash(Constant(1.0))


def test_samples_are_met_at_the_grid_times():
    times, values = [0.0, 0.3, 1.0, 1.4, 2.0], [1.0, -1.0, 0.5, 2.0, 0.0]
    for interpolation in ("linear", "cubic", "hold"):
        table = Samples(times, values, interpolation)
        assert [table(time) for time in times] == pytest.approx(values, abs=1e-15)
        assert table.domain == (0.0, 2.0) and table.kinks == (0.3, 1.0, 1.4)
    assert Samples(times, values)(0.15) == pytest.approx(0.0, abs=1e-15)
    assert Samples(times, values, "hold")(0.299) == 1.0
    assert Samples(times, values, "cubic")(0.6) == float(CubicSpline(times, values)(0.6))


def test_cubic_samples_reproduce_a_cubic():
    # de Boor, A Practical Guide to Splines (1978), chapter IV: not-a-knot splines reproduce cubics; from memory
    times = np.array([0.0, 0.4, 1.0, 1.7, 2.0])
    table = Samples(times, times**3 - 2 * times, "cubic")
    for time in (0.2, 0.9, 1.8):
        # values up to 4; a solve of size five costs some tens of u
        assert table(time) == pytest.approx(time**3 - 2 * time, abs=1e-14)


def test_samples_own_their_numbers():
    times = np.array([0.0, 1.0])
    table = Samples(times, [0.0, 1.0])
    times[1] = 5.0
    assert table(0.5) == 0.5
    with pytest.raises(ValueError):
        table.values[0] = 3.0


def test_any_class_with_the_three_members_serves():
    class Pulse:
        domain = (0.0, 2.0)
        kinks = (1.0,)

        def __call__(self, time):
            return 1.0 if time < 1.0 else 0.0

    assert isinstance(Pulse(), Strength)
    h = Driven([(Pulse(), X)])
    assert h.domain == (0.0, 2.0) and h.kinks == (1.0,) and h.at(0.5) == X


@pytest.mark.parametrize(
    ("result", "pieces"),
    [
        (math.nan, ["strength:", "not finite at time 0.5", "(nan)"]),
        (math.inf, ["strength:", "not finite at time 0.5"]),
        (np.array([1.0, 2.0]), ["strength:", "shape (2,)", "one float"]),
        (np.array([1.0]), ["strength:", "shape (1,)"]),
        (1j, ["strength:", "no real number", "1j"]),
        (None, ["strength:", "no real number", "None"]),
        ("1", ["strength:", "no real number"]),
        (True, ["strength:", "no real number"]),
    ],
)
def test_results_that_are_no_number_are_refused(result, pieces):
    h = Driven([(lambda time: result, X)])
    for ask in (lambda: h.at(0.5), lambda: h.rotations(tt.formula("strang"), "terms", time=1.0, steps=1)):
        with pytest.raises(errors.ArgumentError) as caught:
            ask()
        for piece in pieces:
            assert piece in str(caught.value)


def test_scalars_of_numpy_are_numbers():
    assert Driven([(lambda time: np.float32(0.5), X)]).at(0.0) == 0.5 * X
    assert Driven([(lambda time: np.array(0.5), X)]).at(0.0) == 0.5 * X
    assert Driven([(np.float64(0.5), X)]).constant


def test_errors_of_a_callable_pass_through():
    with pytest.raises(ZeroDivisionError):
        Driven([(lambda time: 1 / time, X)]).at(0.0)


@pytest.mark.parametrize(
    ("make", "argument"),
    [
        (lambda: Constant(math.nan), "value"),
        (lambda: Constant("1"), "value"),
        (lambda: Constant(10**400), "value"),
        (lambda: Ramp(0.0, math.inf), "rate"),
        (lambda: Sinusoid(1.0, True), "frequency"),
        (lambda: Call(3.0), "function"),
        (lambda: Call(math.cos, domain=(1.0, 1.0)), "domain"),
        (lambda: Call(math.cos, domain=(0.0, math.nan)), "domain"),
        (lambda: Call(math.cos, domain=3), "domain"),
        (lambda: Call(math.cos, kinks=(math.inf,)), "kinks"),
        (lambda: Samples([0.0], [1.0]), "times"),
        (lambda: Samples([0.0, 1.0, 2.0], [1.0, 1.0, 1.0], "cubic"), "times"),
        (lambda: Samples([0.0, 0.0], [1.0, 1.0]), "times"),
        (lambda: Samples([0.0, 1.0], [1.0]), "values"),
        (lambda: Samples([0.0, 1.0], [1.0, math.nan]), "values"),
        (lambda: Samples([0.0, 1.0], [1.0, 1.0], "quintic"), "interpolation"),
        (lambda: Samples([0.0, 1.0], [1.0, 1.0])(1.5), "time"),
        (lambda: Driven([("cos", X)]), "terms"),
        (lambda: Driven([(math.inf, X)]), "terms"),
    ],
)
def test_bad_strengths_are_refused_with_their_argument(make, argument):
    with pytest.raises(errors.ArgumentError) as caught:
        make()
    assert caught.value.argument == argument
    assert str(caught.value).startswith(argument)
