"""Causal cones: exact for any circuit, the same with and without written-out repeats, and no larger than needed."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import strategies
import trueturn as tt
from trueturn.audit.candidate import Candidate
from trueturn.device.counting import Counting
from trueturn.device.counts import Counts
from trueturn.device.shares import synthesised
from trueturn.errors import ArgumentError, OperatorError
from trueturn.rotations import Rotations

QUBITS = 5


@st.composite
def repeated_circuits(draw):
    """Circuits with nested repeats on five qubits, mostly of light strings so that cones stay small."""

    def piece():
        pairs = st.tuples(st.sampled_from(range(QUBITS)), st.sampled_from(range(QUBITS)))
        listed = draw(
            st.lists(st.tuples(pairs, st.sampled_from("XYZ"), st.sampled_from("XYZ"), st.floats(-2, 2)), max_size=4)
        )
        x, z, angles = [], [], []
        for (first, second), one, other, angle in listed:
            masks = [0, 0]
            for qubit, letter in ((first, one), (second, other)):
                masks[0] = masks[0] & ~(1 << qubit) | (letter != "Z") << qubit
                masks[1] = masks[1] & ~(1 << qubit) | (letter != "X") << qubit
            x.append(masks[0])
            z.append(masks[1])
            angles.append(angle)
        return Rotations(x, z, angles, QUBITS)

    made = piece()
    for _ in range(draw(st.integers(0, 3))):
        made = made.times(draw(st.integers(1, 4))) + piece().times(draw(st.integers(0, 5)))
    return made + Rotations([], [], [], QUBITS, phase=draw(st.floats(-1, 1)))


def written_out(circuit):
    return Rotations(circuit.x_masks.tolist(), circuit.z_masks.tolist(), circuit.angles, circuit.qubits, circuit.phase)


def expectation(circuit, observable, sites):
    state = tt.State.product(sites)
    state.apply(circuit)
    return state.expectation(observable)


watched = strategies.operators(qubits=QUBITS, max_terms=2, min_terms=1).filter(lambda o: o.support())
starts = st.lists(st.sampled_from(["0", "1", "+", "-", "+i", "-i"]), min_size=QUBITS, max_size=QUBITS)


@given(repeated_circuits(), watched, starts, st.sampled_from(["commutation", "support"]))
def test_the_reduced_circuit_gives_the_same_expectation(circuit, observable, sites, by):
    cone = tt.causal_cone(circuit, observable, by)
    whole = expectation(circuit, observable, sites)
    reduced = expectation(cone.rotations, cone.observable, cone.start(sites))
    # Each rotation is off by at most 5 u in the 2-norm, an expectation by twice that times the norm, and its own sum.
    slack = 2**-53 * observable.one_norm() * (10 * (circuit.count + 1) + 300)
    assert abs(whole - reduced) <= 2 * slack
    assert cone.left_out == circuit.count - cone.rotations.count
    assert len(cone.qubits) == cone.rotations.qubits == cone.observable.qubits


@given(repeated_circuits(), watched, st.sampled_from(["commutation", "support"]))
def test_repeats_keep_the_same_rotations_as_if_written_out(circuit, observable, by):
    cone = tt.causal_cone(circuit, observable, by)
    plain = tt.causal_cone(written_out(circuit), observable, by)
    assert cone.qubits == plain.qubits and cone.observable == plain.observable
    assert written_out(cone.rotations) == written_out(plain.rotations)


@given(repeated_circuits(), watched)
def test_by_support_is_the_plain_backwards_walk(circuit, observable):
    reached = sum(1 << qubit for qubit in observable.support())
    kept = 0
    for x, z in zip(circuit.x_masks.tolist()[::-1], circuit.z_masks.tolist()[::-1], strict=True):
        if (x | z) & reached:
            reached |= x | z
            kept += 1
    cone = tt.causal_cone(circuit, observable, "support")
    assert cone.rotations.count == kept
    assert sum(1 << qubit for qubit in cone.qubits) == reached
    finer = tt.causal_cone(circuit, observable)
    assert finer.rotations.count <= kept and set(finer.qubits) <= set(cone.qubits)


def test_a_rotation_that_commutes_is_left_out_and_its_neighbour_is_not():
    #  Z_0 commutes with Z_0 Z_1; after X_0 it does not.
    last = Rotations([0b00], [0b11], [0.3], 2)
    before = Rotations([0b01], [0b00], [0.2], 2)
    cone = tt.causal_cone(last + before + last, tt.Operator("Z_0", qubits=2))
    assert cone.qubits == (0, 1) and cone.rotations.count == 2 and cone.left_out == 1
    assert tt.causal_cone(last, tt.Operator("Z_0", qubits=2)).qubits == (0,)
    assert tt.causal_cone(last, tt.Operator("Z_0", qubits=2), "support").qubits == (0, 1)


@pytest.mark.parametrize("steps", [1, 2, 5, 40])
def test_each_step_widens_the_cone_of_a_chain_by_one_bond(steps):
    chain = tt.model.ising(tt.lattice.chain(100), zz=1.0, x=0.5)
    circuit = tt.formula("lie").rotations(tt.Partition.of(chain, "commuting"), 1.0, steps)
    # A step is all ZZ, then all X. The last X layer turns Z_50, so every step's ZZ layer reaches one bond further.
    assert tt.causal_cone(circuit, tt.Operator("Z_50", qubits=100)).qubits == tuple(range(50 - steps, 51 + steps))


def test_a_million_steps_cost_what_a_few_do():
    chain = tt.model.heisenberg(tt.lattice.chain(128), 1.0, z=0.2)
    parts = tt.Partition.of(chain, "bond")
    few, many = (tt.formula("suzuki-4").rotations(parts, 1.0, steps) for steps in (100, 1_000_000))
    watched = tt.Operator("Z_64", qubits=128)
    cones = [tt.causal_cone(circuit, watched, "support") for circuit in (few, many)]
    assert cones[0].left_out == cones[1].left_out > 0
    assert cones[1].qubits == tuple(range(128)) and len(cones[1].rotations.blocks) < 40


@pytest.mark.parametrize("name", ["lie", "strang", "suzuki-4", "ruth-3", "blanes-moan-4"])
@pytest.mark.parametrize("rule", ["bond", "single", "axis"])
def test_counts_at_any_step_count_are_those_of_the_circuit(name, rule):
    chain = tt.model.heisenberg(tt.lattice.chain(9), 0.7, z=0.2)
    watched = tt.Operator("Z_4", qubits=9)
    candidate = Candidate(name, rule)
    partition = candidate.partition(chain)
    counts = Counts(candidate, partition, 1.0, watched, Counting(Rotations.two_qubit_gates, None, "plain"))
    for steps in (1, 2, 3, 8, 5, 30, 13, 31, 200):  # 8 and 30 may settle the rule for what follows
        kept = tt.causal_cone(candidate.formula.rotations(partition, 1.0, steps), watched, "support").rotations
        found = counts(steps)
        assert (found.gates, (found.general, found.tees)) == (kept.two_qubit_gates(), synthesised(kept)), steps


def test_processed_formulas_are_counted_too():
    from trueturn.formulas.processed import PROCESSED

    chain = tt.model.ising(tt.lattice.chain(6), zz=-1.0, x=0.4)
    watched = tt.Operator("Z_0", qubits=6)
    candidate = Candidate(PROCESSED[0], "commuting")
    partition = candidate.partition(chain)
    counts = Counts(candidate, partition, 1.0, watched, Counting(Rotations.two_qubit_gates, None, "plain"))
    for steps in (1, 2, 6, 7, 50):
        kept = tt.causal_cone(candidate.formula.rotations(partition, 1.0, steps), watched, "support").rotations
        assert counts(steps).gates == kept.two_qubit_gates()


def test_start_picks_the_kept_sites():
    circuit = Rotations([0b00110], [0], [0.3], 5)
    cone = tt.causal_cone(circuit, tt.Operator("Z_2", qubits=5))
    assert cone.qubits == (1, 2)
    assert cone.start("01+-0") == "1+" and cone.start(["0", (0.1, 0.2), "+i", "1", "1"]) == [(0.1, 0.2), "+i"]
    with pytest.raises(ArgumentError, match=r"sites: too few \(2\)"):
        cone.start("01")


@pytest.mark.parametrize(
    ("arguments", "error", "message"),
    [
        (("no", tt.Operator("Z_0")), ArgumentError, r"rotations: no Rotations \(str\)"),
        ((Rotations([1], [0], [0.1], 1), "Z_0"), OperatorError, r"observable: no Operator on the 1 qubits .*\(str\)"),
        ((Rotations([1], [0], [0.1], 1), tt.Operator("Z_1")), OperatorError, r"\(on 2 qubits\)"),
        ((Rotations([1], [0], [0.1], 1), tt.Operator("2.0", qubits=1)), OperatorError, r"observable: acts on no qubit"),
        ((Rotations([1], [0], [0.1], 1), tt.Operator("Z_0"), "sight"), ArgumentError, r"by: unknown \('sight'\)"),
    ],
)
def test_what_has_no_cone_is_refused(arguments, error, message):
    with pytest.raises(error, match=message):
        tt.causal_cone(*arguments)


@given(
    repeated_circuits(), watched, starts, st.permutations(range(QUBITS)), st.sampled_from(["commutation", "support"])
)
def test_frames_and_relabellings_are_followed(circuit, observable, sites, moves, by):
    clifford = Rotations([0b00011, 0b00100], [0b00001, 0b01100], [np.pi / 4, -np.pi / 4], QUBITS)
    framed = circuit.with_frame(clifford, moves)
    cone = tt.causal_cone(framed, observable, by)
    whole = expectation(framed, observable, sites)
    reduced = expectation(cone.rotations, cone.observable, cone.start(sites))
    # As above; the frame is exact in one and four rotations about rounded π/4 at most in the other.
    slack = 2**-53 * observable.one_norm() * (10 * (circuit.count + 30) + 300)
    assert abs(whole - reduced) <= 2 * slack


def test_noise_outside_of_the_cone_is_not_seen():
    """Failures of gates that the cone leaves out change nothing, failures inside do: density matrices of four qubits."""
    import oracle

    watched = tt.Operator("Z_0", qubits=4)
    parts = tt.Partition.of(tt.model.heisenberg(tt.lattice.chain(4), 0.7, z=0.1), "bond")
    circuit = written_out(tt.formula("lie").rotations(parts, 0.6, 1))
    kept = tt.causal_cone(circuit, watched, "support").rotations.count
    assert 0 < kept < circuit.count
    reached, inside = 1, []
    for x, z in zip(circuit.x_masks.tolist()[::-1], circuit.z_masks.tolist()[::-1], strict=True):
        inside.append(bool((x | z) & reached))
        reached |= (x | z) if inside[-1] else 0
    inside.reverse()
    assert sum(inside) == kept

    def expectation_with_failures(failing):
        state = tt.State.product(["0", "+", "1", (0.7, 0.3)]).amplitudes
        density = np.outer(state, state.conj())
        for place, (x, z, angle) in enumerate(zip(circuit.x_masks, circuit.z_masks, circuit.angles, strict=True)):
            turn = oracle.rotation(x, z, angle, 4)
            density = turn @ density @ turn.conj().T
            if place in failing:  # a strong failure of the rotation's qubits: white noise on all of them
                for qubit in range(4):
                    if (x | z) >> qubit & 1:
                        density = (
                            sum(
                                oracle.pauli(text, 4) @ density @ oracle.pauli(text, 4)
                                for text in ("", f"X_{qubit}", f"Y_{qubit}", f"Z_{qubit}")
                            )
                            / 4
                        )
        return float(np.trace(oracle.dense(watched) @ density).real)

    ideal = expectation_with_failures(())
    outside = {place for place, seen in enumerate(inside) if not seen}
    # 4x4 products of a few dozen matrices of 16 rows: rounding below 1e-13.
    assert expectation_with_failures(outside) == pytest.approx(ideal, abs=1e-13)
    assert abs(expectation_with_failures({place for place, seen in enumerate(inside) if seen}) - ideal) > 1e-3
