"""Stated error bounds are never below the true errors, and not far above them.

Truth comes from arithmetic with far more digits than doubles: whole numbers over 2**320 (`fixed_point`),
mpmath at 40 digits or more, and extended precision (``longdouble``) where states are large.
"""

from __future__ import annotations

import functools

import mpmath
import numpy as np
import pytest

import fixed_point
import oracle
from trueturn import Operator, _native
from trueturn.reference import reference
from trueturn.reference.bessel import bessel_values, least_degree, tail_bound, truncation
from trueturn.rotations import Rotations
from trueturn.state import State

UNIT_ROUNDOFF = 2.0**-53

if np.finfo(np.longdouble).nmant < 60:
    pytest.skip("extended precision is needed as an oracle", allow_module_level=True)


# The certificate of a reference


def random_operator(generator, qubits, terms):
    x, z = generator.integers(0, 2**qubits, (2, terms)).tolist()
    sizes = 10 ** generator.uniform(-2, 1)
    return Operator.from_masks(x, z, (sizes * generator.normal(size=terms)).tolist(), qubits)


@functools.cache
def measured(seed):
    """(certificate, true error, tolerance) of one random evolution: up to 5 qubits, λt up to 40."""
    generator = np.random.default_rng(seed)
    qubits = int(generator.choice([1, 2, 3, 4, 5], p=[0.15, 0.3, 0.3, 0.2, 0.05]))
    operator = random_operator(generator, qubits, int(generator.integers(1, 9)))
    low, high = operator.spectral_interval()
    turn = 10 ** generator.uniform(-2, np.log10(40))
    time = turn / max((high - low) / 2, 0.05 * operator.one_norm()) * generator.choice([-1, 1])
    tolerance = 10 ** generator.uniform(-12, -6)
    start = State.random(qubits, seed)
    found = reference(operator, start, time, tolerance)
    exact = fixed_point.evolved(operator, start.amplitudes, time)
    error = fixed_point.distance(found.states[0].amplitudes, exact)
    return found.certificate.error_bound[time], error, tolerance


def assert_certificates_hold(seeds, divisor=1.0):
    for seed in seeds:
        bound, error, tolerance = measured(seed)
        assert error <= bound / divisor, seed
        assert bound <= tolerance, seed


def assert_certificates_are_useful(seeds):
    slacks = np.array([bound / max(error, 1e-300) for bound, error, _ in map(measured, seeds)])
    assert np.median(slacks) < 100
    assert slacks.max() < 1e4
    # The check is able to fail: against bounds cut down by the largest slack it does.
    with pytest.raises(AssertionError):
        assert_certificates_hold(seeds, divisor=slacks.max() * (1 + 1e-9))


SEEDS = range(320)


def test_true_errors_stay_below_certificates_that_are_useful():
    assert_certificates_hold(SEEDS)
    assert_certificates_are_useful(SEEDS)


@pytest.mark.parametrize("seed", range(4))
def test_the_fixed_point_oracle_agrees_with_mpmath(seed):
    """Against mpmath's own matrix exponential at 40 digits."""
    generator = np.random.default_rng(seed)
    operator = random_operator(generator, 2, 4)
    start = State.random(2, seed).amplitudes
    time = 3.0 / operator.one_norm()
    with mpmath.workdps(40):
        power = mpmath.expm(mpmath.matrix((-1j * oracle.dense(operator)).tolist()) * mpmath.mpf(time))
        expected = power * mpmath.matrix(start.tolist())
        real, imaginary = fixed_point.evolved(operator, start, time)
        found = [
            mpmath.mpc(mpmath.mpf(int(a)) / fixed_point.ONE, mpmath.mpf(int(b)) / fixed_point.ONE)
            for a, b in zip(real, imaginary, strict=True)
        ]
        # Sums of coefficients are rounded to doubles in the dense matrix where strings share an entry; 2 u
        # |H| t.
        assert mpmath.norm(mpmath.matrix(found) - expected) < 2 * UNIT_ROUNDOFF * 3.0


def test_the_fixed_point_oracle_is_exact_on_one_spin():
    """exp(-i t X)|0> = cos t |0> - i sin t |1>, to 40 digits."""
    start = State.product("0").amplitudes
    found = fixed_point.evolved(Operator("X_0"), start, 37.5)
    with mpmath.workdps(60):
        cosine, sine = (fixed_point.fixed(f(mpmath.mpf(37.5))) for f in (mpmath.cos, mpmath.sin))
    # 2^-320 for each of some 200 terms, enlarged by exp(37.5) at most: below 1e-70. Two digits of mpmath's 60
    # are spare.
    assert abs(found[0, 0] - cosine) < fixed_point.ONE // 10**58
    assert abs(found[1, 1] + sine) < fixed_point.ONE // 10**58
    assert found[0, 1] == found[1, 0] == 0


# Bessel functions and the tail of the series


@pytest.mark.parametrize("x", [1e-8, 3e-4, 0.7, 1.0, 2.404825557695773, 9.5, 33.0, 101.7, 256.0, 499.99])
def test_bessel_values_are_rounded_correctly(x):
    values = bessel_values(x)
    generator = np.random.default_rng(int(100 * x))
    degrees = {0, 1, 2, len(values) - 1, *generator.integers(0, len(values), 30).tolist()}
    with mpmath.workdps(60):
        for degree in degrees:
            exact = mpmath.besselj(degree, mpmath.mpf(x))
            # The bound stated by the function.
            assert abs(mpmath.mpf(float(values[degree])) - exact) <= UNIT_ROUNDOFF * abs(exact) + mpmath.mpf("1e-40")


def test_bessel_values_of_negative_arguments_alternate():
    assert np.array_equal(bessel_values(-5.0), bessel_values(5.0) * (-1.0) ** np.arange(len(bessel_values(5.0))))
    assert np.array_equal(bessel_values(0.0), [1.0])


@functools.cache
def true_tails(x):
    """Σ_{k > K} 2 |J_k(x)| for each K, by mpmath."""
    degrees = len(bessel_values(x)) + 10
    with mpmath.workdps(60):
        values = [2 * abs(mpmath.besselj(k, mpmath.mpf(x))) for k in range(1, degrees)]
        tails = [mpmath.mpf(0)]
        for value in reversed(values):
            tails.append(tails[-1] + value)
    return tails[::-1]


XS = (1e-8, 0.01, 0.5, 3.0, 17.0, 60.0, 140.0)


@pytest.mark.parametrize("x", XS)
def test_tails_never_exceed_their_bounds(x):
    for degree, exact in enumerate(true_tails(x)[:-2]):
        assert truncation(x, degree) >= exact
        assert tail_bound(x, degree) >= exact


@pytest.mark.parametrize("x", XS)
def test_truncation_is_as_tight_as_it_says(x):
    for degree, exact in enumerate(true_tails(x)[:-2]):
        # Padding of 1e-12, and 1e-39 for each value, as the code states.
        assert truncation(x, degree) <= exact * (1 + 3e-12) + 1e-36


@pytest.mark.parametrize("x", [3.0, 17.0, 60.0, 140.0])
@pytest.mark.parametrize("allowed", [1e-6, 1e-10, 1e-14])
def test_bounds_of_the_tail_ask_for_hardly_more_terms_than_needed(x, allowed):
    needed = next(degree for degree, tail in enumerate(true_tails(x)) if tail <= allowed)
    assert needed <= least_degree(x, allowed) <= 1.01 * needed
    by_radius = next(degree for degree in range(10**4) if tail_bound(x, degree) <= allowed)
    # The closed form ignores that the J_k oscillate near k = x: some terms more, a share that falls with x.
    assert needed <= by_radius <= 1.015 * needed + 3


# Rounding of one application of an operator


def twin_application(operator, amplitudes):
    """The operator times a vector in extended precision, index by index."""
    total = np.zeros(amplitudes.size, dtype=np.clongdouble)
    for x, z, c in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True):
        total += np.longdouble(c) * oracle.string_times(int(x), int(z), amplitudes.astype(np.clongdouble))
    return total


def local_operator(generator, qubits, terms):
    """Strings that share x masks and low masks often, so that the engine joins many."""
    x = [int(generator.choice([0, 3, 5])) << int(generator.integers(0, max(1, qubits - 2))) for _ in range(terms)]
    z = [int(generator.integers(0, 8)) << int(generator.integers(0, qubits)) for _ in range(terms)]
    mask = 2**qubits - 1
    return Operator.from_masks(
        [v & mask for v in x], [v & mask for v in z], generator.normal(size=terms).tolist(), qubits
    )


def application_slacks():
    for seed in range(60):
        generator = np.random.default_rng(seed)
        qubits = int(generator.integers(1, 13))
        terms = int(generator.integers(1, 80))
        operator = (random_operator if seed % 2 else local_operator)(generator, qubits, terms)
        amplitudes = State.random(qubits, seed).amplitudes
        scale, shift = (1.0, 0.0) if seed % 3 else (float(generator.uniform(0.1, 3)), float(generator.normal()))
        image, room = amplitudes.copy(), np.empty_like(amplitudes)
        # The recurrence's first step gives half the image, times -i and the coefficient 2: no rounding on the
        # way.
        _native.chebyshev_sums(operator._terms, scale, shift, amplitudes.copy(), room, [image], [[0.0, 2.0]], 1, None)
        exact = np.longdouble(scale) * twin_application(operator, amplitudes) + np.longdouble(shift) * amplitudes
        error = float(np.linalg.norm(1j * image.astype(np.clongdouble) - exact))
        counted = _native.application_rounding(operator._terms, scale, shift)
        # Extended precision itself rounds 2^11 times finer, some 2 + terms times.
        size = scale * operator.one_norm() + abs(shift)
        oracle_rounding = 2.0**-64 * (3 + terms) * size
        # Products of errors stay below 1 % of the sum.
        yield 1.01 * UNIT_ROUNDOFF * counted, error - oracle_rounding


def test_one_application_rounds_less_than_counted():
    slacks = []
    for bound, error in application_slacks():
        assert error <= bound
        slacks.append(bound / max(error, 1e-300))
    # A worst case over all states against random signs: a factor of the order of ten is due, a thousand is
    # not.
    assert np.median(slacks) < 100


def test_one_folded_application_rounds_less_than_counted():
    slacks = []
    for seed in range(60):
        generator = np.random.default_rng(seed)
        qubits, terms = int(generator.integers(7, 13)), int(generator.integers(4, 80))
        mixed = (random_operator if seed % 2 else local_operator)(generator, qubits, terms)
        both = (int(x) & int(z) for x, z in zip(mixed.x_masks, mixed.z_masks, strict=True))
        real = np.array([mask.bit_count() % 2 == 0 for mask in both])
        operator = Operator.from_masks(mixed.x_masks[real], mixed.z_masks[real], mixed.coefficients[real], qubits)
        values = State.random(qubits, seed).amplitudes.real
        amplitudes = (values / np.linalg.norm(values)).astype(np.complex128)
        scale, shift = float(generator.uniform(0.1, 3)), float(generator.normal())
        image, spare = amplitudes.copy(), np.empty_like(amplitudes)
        done = _native.real_chebyshev_sums(operator._terms, scale, shift, image, [spare], [[0.0, 2.0]], 1, None)
        assert done
        exact = np.longdouble(scale) * twin_application(operator, amplitudes) + np.longdouble(shift) * amplitudes
        error = float(np.linalg.norm(1j * image.astype(np.clongdouble) - exact))
        counted = _native.application_rounding(operator._terms, scale, shift)
        # As in `application_slacks`.
        size = scale * operator.one_norm() + abs(shift)
        bound = 1.01 * UNIT_ROUNDOFF * counted
        assert error - 2.0**-64 * (3 + terms) * size <= bound
        slacks.append(bound / max(error, 1e-300))
    assert np.median(slacks) < 100


def test_what_is_not_real_is_not_folded():
    def folded(text, amplitudes):
        operator, before = Operator(text, qubits=8), amplitudes.copy()
        arrays = [operator._terms, 1.0, 0.0, amplitudes, [np.empty_like(amplitudes)], [[1.0]]]
        done = _native.real_chebyshev_sums(*arrays, 1, None)
        assert done or np.array_equal(amplitudes, before)
        return done

    real = State.product("0" * 8).amplitudes.copy()
    late = real.copy()
    late[-1] = 1e-300j
    assert folded("X_0 + Y_1 Y_2", real.copy())
    assert not folded("X_0 + Y_1 Y_2", late)
    assert not folded("X_0 + Y_1 Z_2", real)


def test_applying_terms_equals_the_first_step_of_the_recurrence():
    """So that what is measured above holds for both entry points."""
    operator = local_operator(np.random.default_rng(1), 11, 40)
    amplitudes = State.random(11, 1).amplitudes
    image, room, out = amplitudes.copy(), np.empty_like(amplitudes), np.empty_like(amplitudes)
    _native.apply_terms(operator._terms, amplitudes, out, 1)
    _native.chebyshev_sums(operator._terms, 1.0, 0.0, amplitudes.copy(), room, [image], [[0.0, 2.0]], 1, None)
    assert np.array_equal(1j * image, out)


# Rounding of an evolved circuit


def random_circuit(generator, qubits, count, largest_angle, diagonal=0.3):
    x = np.where(generator.random(count) < diagonal, 0, generator.integers(0, 2**qubits, count))
    z = generator.integers(0, 2**qubits, count)
    angles = generator.uniform(-largest_angle, largest_angle, count)
    return Rotations(x.tolist(), z.tolist(), angles, qubits, phase=float(generator.normal()))


def test_evolved_circuits_round_less_than_their_bound():
    """Up to six qubits and 400 rotations with angles up to 50 rad, against whole numbers."""
    slacks = []
    for seed in range(24):
        generator = np.random.default_rng(seed)
        qubits = int(generator.integers(1, 7))
        circuit = random_circuit(generator, qubits, int(generator.integers(1, 400)), 10 ** generator.uniform(-3, 1.7))
        state = State.random(qubits, seed)
        exact = fixed_point.rotated(circuit, state.amplitudes)
        state.apply(circuit)
        error = fixed_point.distance(state.amplitudes, exact)
        assert error <= circuit.rounding_bound()
        slacks.append(circuit.rounding_bound() / error)
    # Worst case N against random signs √N: a factor of √400 = 20 and the constant.
    assert np.median(slacks) < 200


def extended_rotations(circuit, amplitudes):
    """The circuit in extended precision, index by index; and a bound on its own rounding."""
    now = amplitudes.astype(np.clongdouble)
    for x, z, angle in zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True):
        angle = np.longdouble(angle)
        now = np.cos(angle) * now - 1j * np.sin(angle) * oracle.string_times(int(x), int(z), now)
    phase = np.longdouble(circuit.phase)
    return now * (np.cos(phase) + 1j * np.sin(phase)), 5 * 2.0**-64 * (circuit.count + 1)


@pytest.mark.parametrize("qubits", [11, 13, 15, 16])
@pytest.mark.parametrize("diagonal", [1.0, 0.5])
def test_phase_and_fused_passes_round_less_than_their_bound(qubits, diagonal):
    generator = np.random.default_rng(qubits)
    circuit = random_circuit(generator, qubits, 120, 50.0, diagonal)
    state = State.random(qubits, qubits)
    exact, oracle_rounding = extended_rotations(circuit, state.amplitudes)
    state.apply(circuit)
    error = float(np.linalg.norm(state.amplitudes - exact))
    assert error <= circuit.rounding_bound() + oracle_rounding
    assert circuit.rounding_bound() <= 200 * error


def test_single_precision_rounds_less_than_its_bound():
    for qubits in (4, 11, 15):
        generator = np.random.default_rng(qubits)
        circuit = random_circuit(generator, qubits, 150, 50.0)
        state = State.random(qubits, 3, dtype=np.complex64)
        exact, oracle_rounding = extended_rotations(circuit, state.amplitudes)
        state.apply(circuit)
        error = float(np.linalg.norm(state.amplitudes - exact))
        assert error <= circuit.rounding_bound(unit=2.0**-24) + oracle_rounding


def test_repeats_are_counted_in_the_bound():
    """Four repeats are planned together: they count what the list written out counts, every time that they run."""
    strings, others, angles = [1, 2, 5], [4, 2, 0], [0.1, -0.2, 0.3]
    step = Rotations(strings, others, angles, 3)
    written = Rotations(strings * 4, others * 4, angles * 4, 3)
    assert step.times(4).rounding_bound() == written.rounding_bound()
    assert step.times(1000).rounding_bound() >= 250 * written.rounding_bound() * (1 - 1e-9)
    # A bond that is whole only across the seam: XX, YY of one repeat and ZZ of the next.
    split = Rotations([0, 1, 3, 3], [3, 0, 0, 3], [0.1, 0.2, 0.3, 0.3], 3)
    whole = Rotations([0, 1, 3, 3] * 4, [3, 0, 0, 3] * 4, [0.1, 0.2, 0.3, 0.3] * 4, 3)
    assert split.times(4).rounding_bound() == whole.rounding_bound()


def test_roundings_of_angles_are_counted_in_the_bound():
    """Angles formed with k roundings are off by k u |θ| each."""
    circuit = Rotations([1], [0], [40.0], 1)
    state, exact = State.product("0"), State.product("0")
    state.apply(circuit)
    exact.apply(Rotations([1], [0], [np.nextafter(40.0, 41.0)], 1))
    # One unit in the last place of 40 is 2^-47 ≤ 2 u · 40.
    assert state.distance(exact) <= circuit.rounding_bound(angle_roundings=2) + circuit.rounding_bound()
    assert circuit.rounding_bound(angle_roundings=2) >= 2 * UNIT_ROUNDOFF * 40.0
