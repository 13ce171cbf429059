"""The reference of driven Hamiltonians, against closed forms, another integrator, and certified static references."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import trueturn as tt
from driven_problems import PT, distance, evolution, pt
from trueturn import errors
from trueturn.driven import Call, Driven, Ramp, Samples, Sinusoid, driven_reference

UNIT = 2.0**-53
X, Y, Z = (tt.Operator(f"{letter}_0") for letter in "XYZ")
START = tt.State.random(3, seed=4)


def gap(state, amplitudes):
    return float(np.linalg.norm(state.amplitudes - amplitudes))


# Against other integrators


@pytest.mark.parametrize("tolerance", [1e-4, 1e-7, 1e-10])
def test_the_estimate_holds_on_problem_pt_and_is_not_idle(tolerance):
    found = driven_reference(PT, START, [0.4, 1.0], tolerance)
    for time, state in zip(found.times, found.states, strict=True):
        off = gap(state, evolution(pt, 0.0, time, pieces=4) @ START.amplitudes)
        assert found.error[time] == found.halving[time] + found.expansion[time] <= tolerance
        # the oracle itself is good to some 20 u; the estimate is twice what is expected in the asymptotic range
        assert off <= found.error[time] + 100 * UNIT
        assert off >= found.error[time] / 8
    assert found.kind == "estimated"


def test_an_independent_integrator_agrees():
    # scipy's DOP853 (E. Hairer, S. P. Nørsett, G. Wanner, Solving Ordinary Differential Equations I, 1993)
    h = Driven([(lambda t: math.exp(-t) * math.sin(5 * t), X + tt.Operator("X_1")), (1.2, tt.Operator("Z_0 Z_1"))])
    start = tt.State.product("0+")

    def rate(time, psi):
        return -1j * (h.at(time).dense() @ psi)

    solved = [
        solve_ivp(rate, (0, 2), start.amplitudes, method="DOP853", rtol=rtol, atol=1e-13).y[:, -1]
        for rtol in (1e-9, 1e-11)
    ]
    other = float(np.linalg.norm(solved[0] - solved[1]))  # an upper estimate for the finer run
    assert other < 1e-7
    found = driven_reference(h, start, 2.0, 1e-9)
    assert gap(found.states[0], solved[1]) <= found.error[2.0] + other


# Against closed forms


@pytest.mark.parametrize(("splitting", "drive", "frequency"), [(1.0, 0.6, 1.0), (1.0, 0.6, 0.4), (0.3, 2.0, -1.5)])
def test_one_spin_in_a_rotating_field_follows_rabi(splitting, drive, frequency):
    # I. I. Rabi, "Space quantization in a gyrating magnetic field", Phys. Rev. 51, 652 (1937), from memory. For
    # H = ω₀/2 Z + Ω/2 (cos ωt X + sin ωt Y) and δ = ω₀ - ω the flip probability is Ω²/W² sin²(W t/2), W² = Ω² + δ².
    h = Driven(
        [
            (0.5 * splitting, Z),
            (Sinusoid(0.5 * drive, frequency), X),
            (Sinusoid(0.5 * drive, frequency, phase=-math.pi / 2), Y),
        ]
    )
    times = [0.7, 3.0, 8.0]
    found = driven_reference(h, tt.State.product("0"), times, 1e-9, {"z": Z})
    width = math.hypot(drive, splitting - frequency)
    for place, time in enumerate(times):
        flipped = (drive / width * math.sin(0.5 * width * time)) ** 2
        # the closed form in doubles is off by some 20 u
        assert abs(found.expectations["z"][place] - (1 - 2 * flipped)) <= found.expectation_errors["z"][place] + 1e-14
    # and so do circuits, to their own order: Strang steps of half the length leave a quarter of the error
    slips = []
    for steps in (256, 512):
        state = tt.State.product("0")
        state.apply(h.rotations(tt.formula("strang"), "terms", time=3.0, steps=steps))
        slips.append(gap(state, found.states[1].amplitudes))
    assert slips[0] < 0.01 and slips[0] / slips[1] == pytest.approx(4, abs=0.05)


@pytest.mark.parametrize(("coupling", "rate", "span"), [(0.5, 2.0, 100.0), (0.3, -1.0, 100.0), (1.0, 4.0, 50.0)])
def test_a_linear_sweep_follows_landau_and_zener(coupling, rate, span):
    # L. D. Landau, Phys. Z. Sowjetunion 2, 46 (1932); C. Zener, Proc. R. Soc. A 137, 696 (1932); from memory. With
    # H = (rate/2) t Z + coupling X the energies cross at the speed `rate`, and the spin stays in its start with
    # probability exp(-2π coupling²/|rate|) for t from -∞ to ∞.
    #
    # From -T to T it is off by at most 4 coupling / (|rate| T): in the interaction picture dp/dt = 2 a Im(e^{iφ} g) with
    # φ' = ± rate t, g = c₁* c₂, |g| ≤ 1/2. By parts ∫_T^∞ e^{iφ} g = [e^{iφ} g / iφ'] - ∫ e^{iφ} (g/iφ')'. The boundary
    # is at most 1/(2 |rate| T), so is the part with (1/φ')', and e^{iφ} g'/iφ' is real, as e^{iφ} g' = ±i a (p₁ - p₂).
    # So 2 a (1/2 + 1/2)/(|rate| T) for each end; |⟨0|U|0⟩|² treats the ends alike.
    sweep = Driven([(Ramp(0.0, 0.5 * rate), Z), (coupling, X)])
    stayed = []
    for steps in (20_000, 40_000):
        state = tt.State.product("0")
        state.apply(sweep.rotations(tt.formula("strang"), "terms", time=2 * span, steps=steps, start=-span))
        stayed.append(0.5 * (1 + state.expectation(Z)))
    halving = abs(stayed[1] - stayed[0])  # order 2: the finer run is off by a third of it
    assert halving < 1e-3
    bound = 4 * coupling / (abs(rate) * span)
    assert abs(stayed[1] - math.exp(-2 * math.pi * coupling**2 / abs(rate))) <= bound + halving
    # the check can fail: half or twice the exponent is outside
    for factor in (0.5, 2.0):
        assert abs(stayed[1] - math.exp(-2 * math.pi * factor * coupling**2 / abs(rate))) > bound + halving


def test_the_reference_and_circuits_agree_on_a_sweep():
    sweep = Driven([(Ramp(-3.0, 1.0), Z), (0.7, X)])
    found = driven_reference(sweep, tt.State.product("0"), 6.0, 1e-9)
    state = tt.State.product("0")
    state.apply(sweep.rotations(tt.formula("suzuki-6"), "terms", time=6.0, steps=200))
    # a sixth-order run of steps 0.03 with norms of 3: (0.1)^6 · 6 / 0.03 is 2e-4 at the very most; measured far below
    assert gap(state, found.states[0].amplitudes) <= found.error[6.0] + 1e-8


# Against certified static references


def test_constant_strengths_meet_the_certified_reference():
    chain = tt.model.ising(tt.lattice.chain(5), zz=1.0, x=0.8) + 0.7
    start = tt.State.product("0+1-0")
    certified = tt.reference(chain, start, [2.0], 1e-11)
    found = driven_reference(Driven([(1.0, chain)]), start, 2.0, 1e-9)
    assert gap(found.states[0], certified.states[0].amplitudes) <= (
        found.expansion[2.0] + certified.certificate.error_bound[2.0]
    )  # no step error at all: every exponential is exact


def test_held_pulses_are_static_evolutions_in_a_row():
    pulse = Samples([0.0, 0.7, 1.5, 2.0], [1.0, -2.0, 0.3, 0.3], "hold")
    h = Driven([(pulse, X), (0.8, Z)])
    state = tt.State.product("+")
    for value, length in [(1.0, 0.7), (-2.0, 0.8), (0.3, 0.5)]:
        state = tt.reference(value * X + 0.8 * Z, state, [length], 1e-12).states[0]
    found = driven_reference(h, tt.State.product("+"), 2.0, 1e-9)
    assert gap(found.states[0], state.amplitudes) <= found.expansion[2.0] + 3e-12
    # steps end at the jumps, so halving changes nothing; a run may cut its expansions at 0.05 of the tolerance
    assert found.halving[2.0] <= 2 * 0.05 * 1e-9


def test_steps_end_at_bends_so_the_order_is_kept():
    times = [0.0, 0.33, 0.71, 1.0]
    values = [0.0, 2.0, -1.0, 1.0]
    bent = Driven([(Samples(times, values), X), (1.0, Z)])
    blind = Driven([(Call(lambda t: float(np.interp(t, times, values))), X), (1.0, Z)])
    start = tt.State.product("0")
    found, lost = (driven_reference(h, start, 1.0, 1e-5) for h in (bent, blind))
    assert found.steps < lost.steps
    assert gap(found.states[0], lost.states[0].amplitudes) <= found.error[1.0] + lost.error[1.0]


# Times, directions, observables


def test_evolution_runs_backwards_and_undoes_itself():
    there = driven_reference(PT, START, 1.3, 1e-9, start=0.2)
    back = driven_reference(PT, there.states[0], [0.2, 0.9], 1e-9, start=1.3)
    assert gap(back.states[0], START.amplitudes) <= there.error[1.3] + back.error[0.2]
    middle = evolution(pt, 0.2, 0.9, pieces=4) @ START.amplitudes
    assert gap(back.states[1], middle) <= there.error[1.3] + back.error[0.9] + 100 * UNIT


def test_the_start_itself_may_be_asked_for():
    found = driven_reference(PT, START, [0.5, 0.0], 1e-6)
    assert found.error[0.0] == 0.0
    assert found.states[1].amplitudes.tolist() == START.amplitudes.tolist()


def test_expectations_come_in_the_order_asked_with_their_errors():
    h = Driven([(Sinusoid(1.0, 2.0), tt.Operator("X_0 X_1")), (0.5, tt.Operator("Z_0 + Z_1"))])
    watched = {"zz": tt.Operator("2 Z_0 Z_1 + 5"), "x": tt.Operator("X_0", qubits=2)}
    found = driven_reference(h, tt.State.product("0+"), [1.5, 0.5], 1e-8, watched)
    exact = [
        evolution(lambda t: h.at(t).dense(), 0.0, time, pieces=4) @ tt.State.product("0+").amplitudes
        for time in (1.5, 0.5)
    ]
    for name, observable in watched.items():
        matrix = observable.dense()
        for place, psi in enumerate(exact):
            off = abs(found.expectations[name][place] - float(np.vdot(psi, matrix @ psi).real))
            assert off <= found.expectation_errors[name][place] + 1000 * UNIT  # the oracle's own, of norm 7
            assert found.expectation_errors[name][place] < 1e-7


def test_progress_is_reported_and_its_errors_pass_through():
    seen = []
    driven_reference(PT, START, 1.0, 1e-3, progress=lambda *report: seen.append(report))
    assert seen[0][0] == "driven reference" and seen[-1][1] == seen[-1][2]

    def stop(*_):
        raise RuntimeError("enough")

    with pytest.raises(RuntimeError, match="enough"):
        driven_reference(PT, START, 1.0, 1e-3, progress=stop)


def test_the_oracle_agrees_with_itself():
    # collocation of order 32 on pieces of half the length, and unitarity, both to rounding
    coarse, fine = (evolution(pt, 0.0, 1.0, pieces=pieces) for pieces in (2, 4))
    assert distance(coarse, fine) <= 100 * UNIT
    assert distance(fine.conj().T @ fine, np.eye(8)) <= 100 * UNIT


# Refusals


@pytest.mark.parametrize(
    ("arguments", "kind", "message"),
    [
        ({"driven": tt.Operator("X_0", qubits=3)}, errors.ArgumentError, "driven: is no Driven"),
        ({"times": []}, errors.ArgumentError, "times: is empty"),
        ({"times": math.nan}, errors.ArgumentError, "times: is not a finite"),
        ({"times": "now"}, errors.ArgumentError, "times: is not a sequence"),
        ({"times": [-1.0, 1.0]}, errors.ArgumentError, "times: lie on both sides"),
        ({"start": math.inf}, errors.ArgumentError, "start: is not a finite"),
        ({"state": tt.State.product("0")}, errors.StateShapeError, "driven: acts on 3 qubits"),
        ({"state": tt.State.from_array(np.ones(8, complex))}, errors.ArgumentError, "state: is not normalised"),
        ({"observables": {"z": Z}}, errors.StateShapeError, r"observables\['z'\]"),
        ({"tolerance": 0.0}, errors.ToleranceError, "tolerance: not a positive number"),
        ({"tolerance": "1"}, errors.ToleranceError, "tolerance: not a positive number"),
        ({"tolerance": 1e-16}, errors.ToleranceError, "tolerance: is met by rounding"),
    ],
)
def test_bad_requests_are_refused(arguments, kind, message):
    with pytest.raises(kind, match=message):
        driven_reference(**{"driven": PT, "state": START, "times": 1.0, **arguments})


def test_a_drive_that_ends_too_early_is_refused():
    h = Driven([(Samples([0.0, 1.0], [0.0, 1.0]), X), (1.0, Z)])
    with pytest.raises(errors.ArgumentError, match=r"time: needs the drive at 0\.0 to 1\.5"):
        driven_reference(h, tt.State.product("0"), 1.5)
    holed = Driven([(lambda t: math.nan if 0.4 < t < 0.6 else 1.0, X)])
    with pytest.raises(errors.ArgumentError, match="strength: is not finite at time"):
        driven_reference(holed, tt.State.product("0"), 1.0)


def test_a_tolerance_out_of_reach_says_what_can_be_had():
    jumping = Driven([(lambda t: 1.0 if t < math.sqrt(0.5) else 2.0, X), (1.0, Z)])  # first order at an unknown jump
    with pytest.raises(errors.ToleranceError) as caught:
        driven_reference(PT, START, 1.0, 1e-15)
    assert caught.value.achievable > 1e-15
    assert driven_reference(jumping, tt.State.product("0"), 1.0, 1e-2).kind == "estimated"
