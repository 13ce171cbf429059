"""The search for the least step count."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from trueturn.audit.grid import grid_unit, steps_at
from trueturn.audit.result import Trial
from trueturn.audit.search import least_steps
from trueturn.errors import AuditError


class Runs:
    """A made-up error law; counts what was run."""

    def __init__(self, error, tolerance, width=0.0):
        self.error, self.tolerance, self.width, self.steps = error, tolerance, width, []

    def __call__(self, steps):
        assert steps not in self.steps, "no step count is run twice"
        self.steps.append(steps)
        value = self.error(steps)
        low, high = max(0.0, value - self.width), value + self.width
        verdict = "meets" if high <= self.tolerance else "misses" if low > self.tolerance else "undecided"
        return Trial(steps, (low, high), verdict, steps)


@given(
    order=st.sampled_from([1, 2, 4, 6]),
    constant=st.floats(1e-3, 1e3),
    tolerance=st.sampled_from([1e-2, 1e-3]),
    unit=st.sampled_from([1, 3, 10]),
)
def test_a_power_law_gives_the_exact_answer_with_few_runs(order, constant, tolerance, unit):
    runs = Runs(lambda steps: constant / steps**order, tolerance)
    found = least_steps(runs, tolerance, order, unit=unit, most_steps=10**9)
    exact = next(
        r
        for r in range(max(unit, int((constant / tolerance) ** (1 / order)) // unit * unit - unit), 10**9, unit)
        if r > 0 and r % unit == 0 and constant / r**order <= tolerance
    )
    assert (found.steps, found.found, found.accidental) == (exact, True, ())
    # Cost in units of one run at the answer: two beside it, about 1 + √2 + 2 for the probes, growth and interpolation.
    assert sum(runs.steps) <= 10 * found.steps + 40 * unit


def test_the_answer_its_neighbours_and_its_double_were_run():
    runs = Runs(lambda steps: 5.0 / steps, 0.01)
    found = least_steps(runs, 0.01, 1)
    assert found.steps == 500
    assert {499, 500, 501, 707, 1000} <= set(runs.steps)
    assert [trial.steps for trial in found.trials] == sorted(runs.steps)


def test_a_dip_below_the_tolerance_is_listed_as_accidental():
    # One step meets by luck; the look at two steps finds it out, and the search goes on from there.
    found = least_steps(Runs(lambda steps: 1e-4 if steps == 1 else 1.0 / steps, 0.01), 0.01, 1)
    assert (found.steps, found.accidental) == (100, (1,))


def test_a_dip_just_past_the_answer_is_no_answer():
    # 100 steps would do, but 141 miss: the answer lies beyond them.
    found = least_steps(Runs(lambda steps: 0.02 if steps == 141 else 1.0 / steps, 0.01), 0.01, 1)
    assert found.steps == 142 and 100 in found.accidental


def test_one_step_may_be_enough():
    found = least_steps(Runs(lambda steps: 0.0, 0.01), 0.01, 2)
    assert (found.steps, found.found) == (1, True)


def test_a_search_gives_up_at_its_limit_and_says_what_it_tried():
    found = least_steps(Runs(lambda steps: 1.0 / steps, 1e-9), 1e-9, 1, most_steps=10_000)
    assert (found.steps, found.found) == (10_000, False)
    assert found.trials[-1].verdict == "misses"


def test_a_search_stops_where_rounding_alone_exceeds_the_tolerance():
    runs = Runs(lambda steps: 1.0 / steps**2, 1e-12, width=1e-11)
    found = least_steps(runs, 1e-12, 2, most_steps=10**12)
    assert not found.found and max(runs.steps) < 10**8


@pytest.mark.parametrize(
    ("times", "unit"), [([1.0], 1), ([0.5, 1.0], 2), ([0.1, 0.2, 0.3], 3), ([1.0, 1.5, 2.5], 5), ([0.3, 0.9], 3)]
)
def test_the_grid_is_the_coarsest_that_meets_every_time(times, unit):
    assert grid_unit(times) == unit
    assert steps_at(times, 4 * unit)[-1] == 4 * unit


def test_steps_off_the_grid_are_refused_with_counts_that_fit():
    with pytest.raises(AuditError, match=r"multiples of 3 do, such as 6, 9, 12, 15") as refusal:
        steps_at([0.1, 0.2, 0.3], 10)
    assert refusal.value.limit == 3


def test_times_without_a_common_grid_are_refused():
    with pytest.raises(AuditError, match=r"no common grid.*separate"):
        grid_unit([0.1, 0.31415926535])
