"""Single exponentials of the driven reference: their proven bound holds, and is not idle."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st

import oracle
import trueturn as tt
from driven_problems import PT
from strategies import operators, states
from trueturn.driven import Driven
from trueturn.driven.stepper import Stepper

UNIT = 2.0**-53


@settings(max_examples=40)
@given(st.data(), st.floats(-3, 3), st.floats(-3, 3), st.floats(-2, 2), st.sampled_from([1e-3, 1e-8, 1e-14]))
def test_the_bound_holds(data, first, second, length, allowed):
    terms = [data.draw(operators(qubits=3, max_terms=5)) for _ in range(2)]
    start = data.draw(states(3))
    stepper = Stepper(Driven([(1.0, term) for term in terms]), start, 1)
    stepper.apply([first, second], length, allowed)
    matrix = first * oracle.dense(terms[0]) + second * oracle.dense(terms[1])
    exact = scipy.linalg.expm(-1j * length * matrix) @ start
    # expm of scaling and squaring: some 50 u times the norm of its argument
    own = 50 * UNIT * (1 + abs(length) * np.linalg.norm(matrix, 2))
    assert np.linalg.norm(stepper.vector - exact) <= stepper.bound + own
    assert stepper.bound <= allowed * 1.01 + 1e-11


@pytest.mark.parametrize("allowed", [1e-2, 1e-4, 1e-6])
def test_the_bound_is_near_what_cutting_costs(allowed):
    start = tt.State.random(3, 2).amplitudes
    stepper = Stepper(PT, start, 1)
    stepper.apply([1.0, 1.0, 1.0], 1.0, allowed)
    exact = scipy.linalg.expm(-1j * sum(oracle.dense(operator) for _, operator in PT.terms)) @ start
    # the first dropped term is a fraction of the sum of all, and more terms than needed would show
    assert 1e-3 * stepper.bound <= np.linalg.norm(stepper.vector - exact) <= stepper.bound <= 1.01 * allowed


def test_bounds_add_up_and_begin_anew():
    start = tt.State.random(3, 2).amplitudes
    stepper = Stepper(PT, start, 1)
    bounds = [0.0]
    for _ in range(3):
        stepper.apply([1.0, -0.5, 2.0], 0.3, 1e-6)
        bounds.append(stepper.bound)
    assert np.all(np.diff(bounds) > 0) and stepper.applications > 0
    stepper.restart(start)
    assert stepper.bound == 0.0 and np.array_equal(stepper.vector, start)
