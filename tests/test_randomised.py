"""Randomised formulas: what a sample is, and that the mean over samples is that of the enumerated channel."""

from __future__ import annotations

import itertools
import pickle
from collections import Counter
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import channels
import circuits
import oracle
import strategies
import trueturn as tt
from trueturn import randomised

SPIN = tt.Operator("0.6 X_0 - 0.4 Z_0 + 0.3")
AXES = tt.Partition.of(tt.Operator("0.7 X_0 + 0.5 Y_0 + 0.4 Z_0"), "single")
LARGE, TAIL = tt.Partition.of(tt.Operator("0.9 Z_0 + 0.8 X_0"), "single"), tt.Operator("0.4 Y_0 - 0.3 X_0")


def families():
    """One of each, on one qubit, with few enough outcomes to enumerate and errors large enough to see."""
    lie, strang = tt.formula("lie"), tt.formula("strang")
    return {
        "permuted lie": (
            randomised.permuted(lie, AXES, 2.0, 2, seed=11),
            lambda lift: channels.permuted(lie, AXES, 2.0, 2, lift),
        ),
        "permuted strang": (
            randomised.permuted(strang, AXES, 2.5, 1, seed=12),
            lambda lift: channels.permuted(strang, AXES, 2.5, 1, lift),
        ),
        "directed lie": (
            randomised.directed(lie, AXES, 2.0, 2, seed=13),
            lambda lift: channels.directed(lie, AXES, 2.0, 2, lift),
        ),
        "qdrift": (
            randomised.qdrift(SPIN, 1.5, 5, seed=14),
            lambda lift: channels.drift(SPIN, 1.5, 5, lift=lift),
        ),
        "qdrift with given probabilities": (
            randomised.qdrift(SPIN, 1.5, 5, seed=15, probabilities=[0.3, 0.7]),
            lambda lift: channels.drift(SPIN, 1.5, 5, [0.3, 0.7], lift),
        ),
        "partly lie": (
            randomised.partly(lie, LARGE, TAIL, 1.5, 2, 2, seed=16),
            lambda lift: channels.partly(lie, LARGE, TAIL, 1.5, 2, 2, lift),
        ),
        "partly strang": (
            randomised.partly(strang, LARGE, TAIL, 2.0, 2, 1, seed=17),
            lambda lift: channels.partly(strang, LARGE, TAIL, 2.0, 2, 1, lift),
        ),
    }


FAMILIES = families()


@pytest.mark.parametrize("name", FAMILIES)
def test_the_mean_over_samples_is_that_of_the_averaged_channel(name):
    """Half-width by Bernstein's inequality with the exact variance of one sample, which the channel on two copies
    gives; missed with probability 1e-9 for a seed taken at random."""
    ensemble, exact = FAMILIES[name]
    count = 1200
    watched = {"x": tt.Operator("X_0"), "y": tt.Operator("Y_0"), "z": tt.Operator("Z_0")}
    start = tt.State.product([(0.8, 0.3)])
    found = ensemble.average(start, watched, count)
    channel, second = exact(channels.superoperator), exact(channels.twice)
    ideal = channels.ideal(ensemble.operator, ensemble.time)
    farthest = 0.0
    for key, observable in watched.items():
        matrix = oracle.dense(observable)
        mean = channels.expectation(channel, start.amplitudes, matrix)
        square = channels.expectation(second, np.kron(start.amplitudes, start.amplitudes), np.kron(matrix, matrix))
        variance = max(0.0, square - mean**2)
        width = channels.bernstein(variance, 1.0, count)
        assert abs(found.observables[key].mean - mean) <= width
        # The sample variance is a mean of numbers within [0, 4], of variance below 4 σ², less the mean's own square.
        slack = channels.bernstein(4 * variance, 2.0, count) + width**2 + variance / count
        assert abs(found.observables[key].spread ** 2 - variance) <= slack
        farthest = max(farthest, abs(channels.expectation(ideal, start.amplitudes, matrix) - mean) / width)
    # The check can fail: taking exp(-iHt) for the mean would.
    assert farthest > 2.0


def outcomes(ensemble, count=400):
    """The distinct circuits among many samples, multiplied out."""
    found = {}
    for circuit in ensemble.samples(count):
        key = tuple(zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True))
        found.setdefault(key, circuits.matrix(circuit))
    return found


@pytest.mark.parametrize("formula", ["lie", "strang"])
def test_all_outcomes_of_random_orders_average_to_the_channel_on_three_qubits(formula):
    rule = tt.formula(formula)
    every = [
        (randomised.directed(rule, circuits.P3, 1.0, 3, seed=21), channels.directed(rule, circuits.P3, 1.0, 3), 2**3),
        (randomised.permuted(rule, circuits.P3, 1.0, 1, seed=22), channels.permuted(rule, circuits.P3, 1.0, 1), 6),
    ]
    for ensemble, channel, count in every:
        # Each outcome is missed by 400 samples with probability (1 - 1/8)^400 < 1e-23.
        found = outcomes(ensemble)
        assert len(found) == count
        mean = sum(map(channels.superoperator, found.values())) / count
        # Products of some 40 matrices with 8 x 8 entries on both sides, squared: 1e3 roundings of numbers below 1.
        assert np.abs(mean - channel).max() <= 1e-12


def test_all_outcomes_of_single_draws_average_to_the_channel_on_three_qubits():
    operator = circuits.P3.operator()
    found = outcomes(randomised.qdrift(operator, 0.3, 1, seed=23))
    chances = {
        (x, z): abs(c) / operator.one_norm()
        for x, z, c in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True)
    }
    # The rarest term, 0.3 of 4.3, is missed by 400 samples with probability 4e-13.
    assert len(found) == 7
    mean = sum(chances[key[0][:2]] * channels.superoperator(matrix) for key, matrix in found.items())
    assert np.abs(mean - channels.drift(operator, 0.3, 1)).max() <= 1e-13
    tail = tt.Operator("0.2 X_0 Z_2 - 0.2 Y_1", qubits=3)
    for formula in ("lie", "strang"):
        found = outcomes(randomised.partly(formula, circuits.P3, tail, 0.5, 1, 1, seed=24))
        mean = sum(map(channels.superoperator, found.values())) / 2
        assert len(found) == 2
        exact = channels.partly(tt.formula(formula), circuits.P3, tail, 0.5, 1, 1)
        assert np.abs(mean - exact).max() <= 1e-13


@pytest.mark.parametrize("name", FAMILIES)
def test_samples_depend_on_seed_and_number_alone(name):
    ensemble, _ = FAMILIES[name]
    in_order = ensemble.samples(12)
    assert [ensemble.sample(k) for k in reversed(range(12))][::-1] == list(in_order)
    with ThreadPoolExecutor(4) as pool:
        assert list(pool.map(ensemble.sample, range(12))) == list(in_order)
    copy = pickle.loads(pickle.dumps(ensemble))
    assert copy == ensemble and copy.samples(12) == in_order
    assert len({(sample.angles.tobytes(), tuple(sample.x_masks), tuple(sample.z_masks)) for sample in in_order}) > 1


def test_children_of_the_seed_are_those_of_numpy():
    children = np.random.SeedSequence(9).spawn(5)
    expected = np.random.Generator(np.random.PCG64(children[4])).random(6) < 0.5
    ensemble = randomised.directed("lie", AXES, 1.0, 6, seed=9)
    sample, order = ensemble.sample(4), []
    for backward in expected:
        order += [4, 6, 2][::-1] if backward else [4, 6, 2]
    letters = [4 if x and not z else 6 if x else 2 for x, z in zip(sample.x_masks, sample.z_masks, strict=True)]
    merged = [letter for place, letter in enumerate(order) if place == 0 or order[place - 1] != letter]
    assert letters == merged


@given(
    operator=strategies.operators(max_qubits=3, max_terms=5, min_terms=1),
    formula=st.sampled_from(["lie", "strang", "suzuki-4"]),
    time=st.floats(-2, 2),
    steps=st.integers(1, 4),
    seed=st.integers(0, 1000),
)
def test_ordered_samples_are_products_of_steps_in_some_order(operator, formula, time, steps, seed):
    """One step equals the formula on the parts as permuted; more equal the product of their steps."""
    partition = tt.Partition.of(operator, "commuting")
    rule = tt.formula(formula)
    ensemble = randomised.permuted(rule, partition, time, steps, seed)
    orders = ensemble._orders(np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=(2,)))))
    plain = np.eye(2**partition.qubits)
    for order in orders:
        plain = circuits.plain(rule, partition.reordered(order), time / steps, 1) @ plain
    # Norms up to 20 in exponentials, and at most 200 of them: some 1e-12 in all.
    assert circuits.distance(circuits.matrix(ensemble.sample(2)), plain) <= 1e-11


def test_neighbouring_runs_of_one_part_merge_across_steps():
    ensemble = randomised.directed("strang", AXES, 1.0, 5, seed=3)
    for sample in ensemble.samples(10):
        strings = list(zip(sample.x_masks, sample.z_masks, strict=True))
        assert all(first != second for first, second in itertools.pairwise(strings))
    # A Strang step runs 0 1 2 1 0 forward and 2 1 0 1 2 backward; equal ends meet where directions agree.
    assert {sample.count for sample in ensemble.samples(30)} <= set(range(21, 26))


def test_qdrift_draws_terms_in_proportion_to_their_size():
    operator = tt.Operator("0.5 X_0 - 0.3 Y_0 + 0.2 Z_0 + 7")
    draws, repeats = 4000, 25
    unit = 1.0 * 2.0 / draws
    drawn = Counter()
    for circuit in randomised.qdrift(operator, 2.0, draws, seed=5).samples(repeats):
        for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
            times = angle / unit
            assert abs(times - round(times)) <= 1e-9 and (times < 0) == ((x, z) == (1, 1))
            drawn[x, z] += abs(round(times))
        assert circuit.phase == -14.0
    total = draws * repeats
    assert sum(drawn.values()) == total
    for string, chance in {(1, 0): 0.5, (1, 1): 0.3, (0, 1): 0.2}.items():
        # A mean of `total` values 0 or 1.
        assert abs(drawn[string] / total - chance) <= channels.bernstein(chance * (1 - chance), 0.5, total)


def test_first_moments_of_qdrift_are_the_hamiltonian():
    operator = tt.Operator("0.5 X_0 - 0.3 Y_0 + 0.2 Z_0")
    count, draws = 400, 200
    for chances in ([0.5, 0.3, 0.2], [0.2, 0.3, 0.5]):
        given_ones = None if chances[0] == 0.5 else chances
        total = 0.0 * operator
        for circuit in randomised.qdrift(operator, 1.0, draws, seed=8, probabilities=given_ones).samples(count):
            total = total + circuit.angle_totals()
        # A coefficient is the mean of count · draws independent values c/p, taken with probability p, or 0.
        widest = max(
            channels.bernstein(c**2 / p, abs(c) / p, count * draws)
            for c, p in zip(operator.coefficients, chances, strict=True)
        )
        assert widest < 0.03
        assert (total / count).near(operator, widest)


def test_partly_draws_the_tail_once_a_step_and_leaves_the_rest_in_place():
    operator = tt.Operator("1.0 Z_0 Z_1 + 0.9 X_0 + 0.8 X_1 + 0.01 Y_0 + 0.02 Z_0 + 0.5", qubits=2)
    large, tail = randomised.divided(operator, 0.1)
    assert large + tail == operator and len(tail) == 2
    ensemble = randomised.partly("strang", tt.Partition.of(large, "commuting"), tail, 1.0, 4, 3, seed=1)
    assert ensemble.places == 4 and ensemble.operator == operator
    assert randomised.partly("suzuki-4", AXES, TAIL, 1.0, 4, 3, seed=1).places == 20
    circuit = ensemble.sample(0)
    assert circuit.phase == -0.5
    totals = circuit.angle_totals()
    for x, z, c in zip(large.x_masks, large.z_masks, large.coefficients, strict=True):
        if (x, z) != (0, 0):
            held = {(u, v): a for u, v, a in zip(totals.x_masks, totals.z_masks, totals.coefficients, strict=True)}
            assert held[x, z] == pytest.approx(c, rel=1e-14)


@pytest.mark.parametrize(("formula", "places"), [("lie", 4), ("strang", 4), ("suzuki-4", 20)])
def test_without_large_terms_the_tail_has_as_many_places_as_with_them(formula, places):
    nothing, tail = randomised.divided(TAIL + 0.5 * tt.Operator("1", qubits=1), 10.0)
    alone = randomised.partly(formula, tt.Partition.of(nothing, "single"), tail, 2.0, 4, 3, seed=1)
    assert alone.places == randomised.partly(formula, AXES, tail, 2.0, 4, 3, seed=1).places == places
    circuit = alone.sample(0)
    assert circuit.phase == -1.0
    if places == 4:
        # One place a step: 3 rotations by λ t / (4 · 3) = 0.7 · 2 / 12 each, none split, joined in equal neighbours.
        turns = np.abs(circuit.angles) / (0.7 * 2.0 / 12)
        assert np.abs(turns - np.round(turns)).max() <= 1e-12 and round(turns.sum()) == 12 and turns.max() < 3.5


def test_an_operator_of_the_identity_alone_is_a_phase():
    circuit = randomised.qdrift(tt.Operator("2.0", qubits=1), 1.5, 10, seed=0).sample(0)
    assert (circuit.count, circuit.phase) == (0, -3.0)
    nothing = randomised.qdrift(tt.Operator("2.0", qubits=1), 1.5, 10, seed=0).channel_bound()
    assert nothing.half_diamond == 0.0


def takers():
    """Everything that takes a whole number, by the number's name."""
    lie, start = tt.formula("lie"), tt.State.product("0")
    drift = randomised.qdrift(SPIN, 1.0, 3, seed=0)
    circuit = lie.rotations(AXES, 1.0, 2)
    return {
        "permuted seed": lambda n: randomised.permuted(lie, AXES, 1.0, 3, seed=n),
        "permuted steps": lambda n: randomised.permuted(lie, AXES, 1.0, n, seed=0),
        "directed seed": lambda n: randomised.directed(lie, AXES, 1.0, 3, seed=n),
        "directed steps": lambda n: randomised.directed(lie, AXES, 1.0, n, seed=0),
        "qdrift seed": lambda n: randomised.qdrift(SPIN, 1.0, 3, seed=n),
        "qdrift draws": lambda n: randomised.qdrift(SPIN, 1.0, n, seed=0),
        "partly seed": lambda n: randomised.partly(lie, LARGE, TAIL, 1.0, 3, 2, seed=n),
        "partly steps": lambda n: randomised.partly(lie, LARGE, TAIL, 1.0, n, 2, seed=0),
        "partly draws": lambda n: randomised.partly(lie, LARGE, TAIL, 1.0, 3, n, seed=0),
        "framed seed": lambda n: randomised.framed(circuit, seed=n),
        "framed every": lambda n: randomised.framed(circuit, seed=0, every=n),
        "sample index": drift.sample,
        "samples count": drift.samples,
        "average count": lambda n: drift.average(start, {}, n).single_sample_state_errors,
        "average threads": lambda n: drift.average(start, {}, 2, threads=n).single_sample_state_errors,
        "qdrift_bound draws": lambda n: randomised.qdrift_bound(1.0, 1.0, n),
        "random_direction_bound parts": lambda n: randomised.random_direction_bound(n, 1.0, 1.0, 3),
        "random_direction_bound steps": lambda n: randomised.random_direction_bound(3, 1.0, 1.0, n),
    }


@pytest.mark.parametrize("name", takers())
def test_whole_numbers_are_the_same_everywhere(name):
    take = takers()[name]
    for number in (np.int64(2), np.int8(2), np.uint64(2), np.array(2)):
        assert take(number) == take(2)
    for number in (
        2.0,
        np.float64(2.0),
        "2",
        True,
        np.True_,
        np.array([2]),
        np.array([2, 2]),
        2 + 0j,
        -1,
        np.int64(-1),
    ):
        with pytest.raises(tt.errors.ArgumentError, match=f"{name.split()[1]}: "):
            take(number)


def bad(**changed):
    return {"formula": "lie", "partition": AXES, "time": 1.0, "steps": 3, "seed": 0} | changed


@pytest.mark.parametrize("family", [randomised.permuted, randomised.directed])
@pytest.mark.parametrize(
    ("arguments", "kind", "message"),
    [
        (bad(seed=1.5), tt.errors.ArgumentError, r"seed: is not a whole number from 0 \(1.5\)"),
        (bad(seed=-1), tt.errors.ArgumentError, r"seed: is not a whole number from 0 \(-1\)"),
        (bad(seed=True), tt.errors.ArgumentError, r"seed: is not a whole number from 0 \(True\)"),
        (bad(seed=None), tt.errors.ArgumentError, r"seed: is not a whole number from 0 \(None\)"),
        (bad(steps=0), tt.errors.ArgumentError, r"steps: is not a whole number from 1 \(0\)"),
        (bad(steps=10**7), tt.errors.ArgumentError, r"steps: makes too many rotations"),
        (bad(time=np.nan), tt.errors.ArgumentError, r"time: is not a finite number \(nan\)"),
        (bad(time=1j), tt.errors.ArgumentError, r"time: is not a finite number \(1j\)"),
        (bad(partition=SPIN), tt.errors.ArgumentError, "partition: is not a Partition"),
        (bad(formula="lei"), tt.errors.FormulaError, "is no known formula"),
    ],
)
def test_random_orders_refuse(family, arguments, kind, message):
    with pytest.raises(kind, match=message):
        family(**arguments)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"draws": 0}, r"draws: is not a whole number from 1 \(0\)"),
        ({"draws": 10**8}, "draws: makes too many rotations"),
        ({"seed": "a"}, r"seed: is not a whole number from 0 \('a'\)"),
        ({"time": np.inf}, "time: is not a finite number"),
        ({"time": 1e308, "operator": tt.Operator("3 X_0")}, "time: makes an angle too large"),
        ({"probabilities": [1.5, -0.5]}, r"probabilities: one is negative \(-0.5\)"),
        ({"probabilities": [1.0, 0.0]}, r"probabilities: one is zero, which would leave its term out"),
        ({"probabilities": [0.5, 0.4]}, r"probabilities: do not sum to 1 \(0.9\)"),
        ({"probabilities": [1.0]}, r"probabilities: do not fit the terms \(1\); give 2 positive numbers"),
        ({"probabilities": 0.5}, r"probabilities: is not a sequence \(0.5\)"),
        ({"probabilities": [0.5, np.nan]}, r"probabilities: is not a finite number \(nan\)"),
    ],
)
def test_qdrift_refuses(arguments, message):
    with pytest.raises(tt.errors.ArgumentError, match=message):
        randomised.qdrift(**({"operator": SPIN, "time": 1.0, "draws": 5, "seed": 0} | arguments))


def test_what_is_no_operator_or_on_other_qubits_is_refused():
    with pytest.raises(tt.errors.OperatorError, match="operator: is not an Operator"):
        randomised.qdrift("X_0", 1.0, 5, seed=0)
    with pytest.raises(tt.errors.OperatorError, match="tail: acts on 2 qubits and the partition on 1"):
        randomised.partly("lie", AXES, tt.Operator("X_1"), 1.0, 1, 1, seed=0)
    with pytest.raises(tt.errors.ArgumentError, match="draws: is not a whole number from 1"):
        randomised.partly("lie", AXES, TAIL, 1.0, 1, 0, seed=0)
    with pytest.raises(tt.errors.ArgumentError, match="time: makes an angle too large"):
        randomised.partly("lie", AXES, 10 * TAIL, 1e308, 1, 1, seed=0)
    with pytest.raises(tt.errors.ArgumentError, match="cutoff: is not a finite number"):
        randomised.divided(SPIN, np.nan)


def test_draws_in_a_circuit_and_circuits_have_names_of_their_own():
    """`draws` counts rotations in one circuit, `samples` and `count` circuits."""
    drift = randomised.qdrift(SPIN, time=1.0, draws=7, seed=0)
    assert drift.draws == 7 and not hasattr(drift, "count")
    assert randomised.partly("lie", LARGE, TAIL, time=1.0, steps=1, draws=6, seed=0).draws == 6
    assert (
        randomised.qdrift_bound(one_norm=1.0, time=1.0, draws=randomised.least_qdrift_draws(1.0, 1.0, 0.1)).half_diamond
        <= 0.1
    )
    for make in (randomised.qdrift, randomised.qdrift_bound):
        with pytest.raises(TypeError, match="samples"):
            make(SPIN, time=1.0, samples=7)
    assert len(drift.samples(3)) == drift.average(tt.State.product("0"), {}, 3).count == 3


@pytest.mark.parametrize("index", [-1, 0.5, True])
def test_sample_numbers_that_are_not_whole_are_refused(index):
    with pytest.raises(tt.errors.ArgumentError, match="index: is not a whole number from 0"):
        FAMILIES["qdrift"][0].sample(index)


def test_every_exported_name_and_method_is_documented():
    for name in randomised.__all__:
        thing = getattr(randomised, name)
        assert thing.__doc__, name
        for method, value in vars(thing).items():
            if not method.startswith("_") and (callable(value) or isinstance(value, property)):
                assert value.__doc__, f"{name}.{method}"


def test_no_samples_are_refused():
    with pytest.raises(tt.errors.ArgumentError, match=r"count: is not a whole number from 1 \(0\)"):
        FAMILIES["qdrift"][0].samples(0)
