"""What is no operator, state or mapping is refused by name at every door that takes one."""

from __future__ import annotations

import numpy as np
import pytest

import trueturn as tt
from trueturn import errors, randomised
from trueturn.adaptive import adaptive
from trueturn.comparison import compare
from trueturn.driven import Driven, Ramp, driven_reference
from trueturn.extrapolation import extrapolate

CHAIN = tt.model.ising(tt.lattice.chain(3), zz=-1.0, x=-0.7)
PARTS = tt.Partition.of(CHAIN, "axis")
START = tt.State.product("000")
WATCHED = {"m": tt.Operator("Z_1", qubits=3)}
SWEEP = Driven([(Ramp(0.0, rate=1.0), CHAIN)])


def door_of(call):
    return lambda operator=CHAIN, state=START, observables=WATCHED: call(operator, state, observables)


DOORS = {
    "audit": door_of(lambda h, start, seen: tt.audit(h, start, 1.0, [tt.Candidate("strang")], 1e-3, observables=seen)),
    "compare": door_of(lambda h, start, seen: compare(h, start, 1.0, ["strang"], observables=seen)),
    "extrapolate": door_of(lambda h, start, seen: extrapolate(h, start, 1.0, observables=seen)),
    "reference": door_of(lambda h, start, seen: tt.reference(h, start, 1.0, observables=seen)),
    "driven_reference": door_of(lambda _, start, seen: driven_reference(SWEEP, start, 1.0, observables=seen)),
}
FROZEN = {name: door for name, door in DOORS.items() if name != "driven_reference"}


@pytest.mark.parametrize("door", FROZEN.values(), ids=FROZEN)
@pytest.mark.parametrize("wrong", ["Z_0", [CHAIN], None], ids=["text", "list", "none"])
def test_what_is_no_operator_is_refused(door, wrong):
    with pytest.raises(errors.ArgumentError, match=rf"operator: no Operator \({type(wrong).__name__}\); make one"):
        door(operator=wrong)


@pytest.mark.parametrize("door", DOORS.values(), ids=DOORS)
@pytest.mark.parametrize("wrong", ["000", [1.0, 0.0], np.ones(8)], ids=["text", "list", "array"])
def test_what_is_no_state_is_refused(door, wrong):
    with pytest.raises(errors.ArgumentError, match=rf"state: no State \({type(wrong).__name__}\); make one"):
        door(state=wrong)


@pytest.mark.parametrize("door", DOORS.values(), ids=DOORS)
@pytest.mark.parametrize(
    ("wrong", "message"),
    [
        ("Z_0", r"observables: is no mapping \('Z_0'\); give a mapping of names to operators"),
        ([WATCHED["m"]], "observables: is no mapping"),
        (WATCHED["m"], "observables: is no mapping"),
        ("", r"observables: is no mapping \(''\)"),
        ({"m": "Z_0"}, r"observables\['m'\]: no Operator \(str\); give a mapping"),
        ({1: WATCHED["m"]}, r"observables: has a name that is no text \(1\); give a mapping"),
    ],
    ids=["text", "list", "operator", "empty text", "text inside", "number for a name"],
)
def test_observables_that_are_no_mapping_of_names_to_operators_are_refused(door, wrong, message):
    with pytest.raises(errors.ArgumentError, match=message):
        door(observables=wrong)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({"state": "000"}, r"state: no State \(str\)"),
        ({"observable": "Z_0"}, r"observable: no Operator \(str\)"),
        ({"observable": WATCHED}, r"observable: no Operator \(dict\)"),
        ({"state": tt.State.from_array(np.ones(8, complex))}, r"state: is not normalised \(norm 2\.82842712\); divide"),
    ],
    ids=["state", "observable", "mapping", "norm"],
)
def test_adaptive_steps_refuse_what_they_cannot_judge(given, message):
    with pytest.raises(errors.ArgumentError, match=message):
        adaptive(tt.formula("strang"), PARTS, **({"state": START, "time": 1.0, "tolerance": 1e-2} | given))


@pytest.mark.parametrize("wrong", [None, "Z_0", [WATCHED["m"]]], ids=["none", "text", "list"])
def test_averages_refuse_observables_that_are_no_mapping(wrong):
    drawn = randomised.qdrift(CHAIN, 1.0, 5, seed=0)
    with pytest.raises(errors.ArgumentError, match=r"observables: is no mapping .*\{\} for none"):
        drawn.average(START, wrong, 2)
