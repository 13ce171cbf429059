"""Diagnosis without a state vector: what circuits are, what is wrong with them, and when nothing can be said."""

from __future__ import annotations

import io
import json
import re
import time
from contextlib import redirect_stdout
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import circuit_variants as variants
import trueturn as tt
from circuit_mistakes import (
    a_right_circuit,
    changed,
    columns,
    distance,
    one_mistake,
    scaled,
    strang,
    unitary,
    up_to_phase,
    written_out,
)
from strategies import circuits
from trueturn import cli, randomised
from trueturn.diagnosis.frames import SLACK, moved_to_the_end
from trueturn.diagnosis.ordering import clashes, order_moments, settle
from trueturn.diagnosis.relabelling import permutations, permuted
from trueturn.diagnosis.unfolding import edited, unfold

RING = tt.model.ising(tt.lattice.ring(6), zz=-1.0, x=np.linspace(0.5, 0.9, 6))
CHAIN = tt.model.ising(tt.lattice.chain(6), zz=-1.0, x=np.linspace(0.5, 0.9, 6))


# --- right circuits are never accused


@pytest.mark.parametrize("seed", range(6))
def test_right_circuits_in_unusual_form_are_not_accused(seed):
    draw = np.random.default_rng([7, seed])
    right = a_right_circuit(draw, shuffled=0.5)
    circuit = right.circuit()
    forms = {
        "blocks": circuit,
        "written out": written_out(circuit),
        "reordered": variants.reordered(draw, circuit),
        "merged": variants.merged(draw, circuit),
        "split": variants.split(draw, circuit),
        "conjugated": variants.conjugated(draw, circuit),
        "routed": variants.routed(draw, circuit)[0],
    }
    for name, form in forms.items():
        assert up_to_phase(form, circuit) < 1e-9, name  # the variant itself: at most 1e4 rotations by 4u each
        found = tt.diagnose(form, right.operator, right.time)
        assert found.matches is True and not found.mistakes, name
        assert (found.character.formula, found.character.steps) == (right.formula.name, right.steps), name


@pytest.mark.heavy
def test_many_right_circuits_are_not_accused():
    for seed in range(100, 150):
        test_right_circuits_in_unusual_form_are_not_accused(seed)


def test_a_routed_circuit_whose_qubits_stay_moved_is_told_where_they_are():
    circuit, where = variants.routed(np.random.default_rng(3), strang(CHAIN), undone=False)
    found = tt.diagnose(circuit, CHAIN, 1.0)
    assert found.matches is True
    (remark,) = found.findings
    assert remark.kind == "qubits relabelled" and not remark.mistake
    moves = [f"{qubit} on {place}" for qubit, place in enumerate(where) if qubit != place]
    assert all(move in remark.evidence[0] for move in moves) and remark.evidence[0].count(" on ") == len(moves)


def test_angles_printed_with_ten_digits_match_at_a_tolerance_that_fits():
    circuit = changed(strang(CHAIN), lambda x, z, angle: (x, z, round(angle, 10)))
    assert tt.diagnose(circuit, CHAIN, 1.0, tolerance=1e-7).matches is True


def test_half_steps_that_are_not_merged_are_a_remark_with_the_shorter_circuit():
    once = tt.formula("strang").rotations(tt.Partition.of(CHAIN, "commuting"), 0.25, 1)
    found = tt.diagnose(once.times(4), CHAIN, 1.0)
    assert found.matches is True and found.fixed is None
    (remark,) = found.findings
    assert remark.kind == "half-steps not merged" and not remark.mistake
    assert remark.fixed.count == strang(CHAIN).count
    assert distance(remark.fixed, once.times(4)) < 1e-12  # 100 rotations by 4u each


def test_random_orders_and_pauli_frames_match():
    partition = tt.Partition.of(CHAIN, "commuting")
    for ensemble in (
        randomised.permuted("strang", partition, 1.0, 3, seed=1),
        randomised.directed("lie", partition, 1.0, 3, seed=1),
        randomised.framed(strang(CHAIN), seed=1),
    ):
        assert tt.diagnose(ensemble.sample(0), CHAIN, 1.0).matches is True


# --- what is wrong


def test_doubled_and_halved_angles_and_the_sign_of_time():
    draw = np.random.default_rng(0)
    right = a_right_circuit(draw)
    for factor, kind in ((2.0, "angles doubled"), (0.5, "angles halved"), (-1.0, "time reversed")):
        mistake = one_mistake(scaled(factor)(draw, right), right.operator, right.time)
        assert mistake.kind == kind
        assert distance(mistake.fixed, right.circuit()) < 1e-10


def test_twice_as_many_steps_are_named_beside_doubled_angles():
    circuit = strang(CHAIN, time=2.0, steps=8)
    mistake = one_mistake(circuit, CHAIN, 1.0)
    assert mistake.kind == "angles doubled" and not mistake.certain
    (text, other), *_ = mistake.alternatives
    assert "4 steps" in text and distance(other, strang(CHAIN)) < 1e-11


def test_a_wrong_number_of_steps():
    mistake = one_mistake(strang(CHAIN, time=1.25, steps=5), CHAIN, 1.0)
    assert mistake.kind == "steps" and "5 steps" in mistake.text and "4" in mistake.change
    assert distance(mistake.fixed, strang(CHAIN)) < 1e-11


def test_a_million_steps_are_counted_without_writing_them_out():
    circuit = strang(CHAIN, time=1e3, steps=10**6)
    found = tt.diagnose(circuit, CHAIN, 1e3)
    assert found.matches is True and found.character.steps == 10**6
    mistake = one_mistake(circuit, CHAIN, 1e3 * (10**6 - 1) / 10**6)
    assert mistake.kind == "steps" and len(mistake.fixed.blocks) <= 3


def test_a_lost_boundary_bond():
    mistake = one_mistake(strang(CHAIN), RING, 1.0)
    assert mistake.kind == "boundary bond lost" and mistake.strings == ("Z_0 Z_5",)
    assert distance(mistake.fixed, strang(RING)) < 1e-11


def test_a_residual_clifford_is_named():
    turned = strang(CHAIN) + tt.Rotations([0b11], [0], [np.pi / 4], 6)
    mistake = one_mistake(turned, CHAIN, 1.0)
    assert mistake.kind in ("residual Clifford", "term extra")
    assert distance(mistake.fixed, strang(CHAIN)) < 1e-11


def test_two_mistakes_are_both_found():
    def both(x, z, angle):
        return None if (x, z) == (4, 0) else (x, z, (1.5 if (x, z) == (0, 3) else 1.0) * angle)

    found = tt.diagnose(changed(strang(CHAIN), both), CHAIN, 1.0)
    assert sorted(mistake.kind for mistake in found.mistakes) == ["term missing", "term strength"]
    assert distance(found.fixed, strang(CHAIN)) < 1e-11


def test_a_formula_that_is_not_in_the_library_is_still_mended_where_it_stands():
    own = tt.Formula.composition([0.3, 0.4, 0.3], name="ours")
    circuit = own.rotations(tt.Partition.of(CHAIN, "commuting"), 1.0, 2)
    found = tt.diagnose(circuit, CHAIN, 1.0)
    assert found.matches is True and found.character.formula is None and found.character.symmetric is True
    doubled = changed(circuit, lambda x, z, angle: (x, z, 2 * angle))
    assert distance(one_mistake(doubled, CHAIN, 1.0).fixed, circuit) < 1e-11
    lost = changed(circuit, lambda x, z, angle: None if (x, z) == (4, 0) else (x, z, angle))
    assert one_mistake(lost, CHAIN, 1.0).fixed is None


def test_a_phase_that_is_off_is_only_a_remark():
    circuit = strang(CHAIN)
    other = tt.Rotations(*columns(circuit), 6, 0.5)
    found = tt.diagnose(other, CHAIN, 1.0)
    assert found.matches is True and [remark.kind for remark in found.findings] == ["global phase"]


@pytest.mark.parametrize("place", [0, 7, -1])
def test_a_rotation_off_by_pi_turns_the_global_phase(place):
    circuit = strang(CHAIN)
    x, z, angles = columns(circuit)
    angles = np.array(angles)
    angles[place] += np.pi
    turned = tt.Rotations(x, z, angles, 6)
    assert np.allclose(unitary(turned), -unitary(circuit), atol=1e-12)
    found = tt.diagnose(turned, CHAIN, 1.0)
    assert found.matches is True and [remark.kind for remark in found.findings] == ["global phase"]
    # Another turn back, and a phase of π, both make it right.
    other = angles.copy()
    other[place // 2] -= np.pi
    assert tt.diagnose(tt.Rotations(x, z, other, 6), CHAIN, 1.0).findings == ()
    assert tt.diagnose(tt.Rotations(x, z, angles, 6, np.pi), CHAIN, 1.0).findings == ()


def test_a_diagnosis_is_neither_true_nor_false():
    with pytest.raises(TypeError, match=r"^ask \.matches: True, False or None$"):
        bool(tt.diagnose(strang(CHAIN), CHAIN, 1.0))


@pytest.mark.heavy
def test_a_million_stored_rotations_on_128_qubits_are_diagnosed_in_time():
    chain = tt.model.ising(tt.lattice.chain(128), zz=-1.0, x=np.linspace(0.5, 0.9, 128))
    step = tt.formula("strang").rotations(tt.Partition.of(chain, "commuting"), 0.001, 1)
    copies = -(-(10**6) // step.count)
    x, z, angles = (np.tile(column, copies) for column in columns(step))
    flat = tt.Rotations(x, z, angles, 128)
    assert flat.count >= 10**6 and len(flat.blocks) == 1 and flat.blocks[0].repeat == 1
    begun = time.perf_counter()
    found = tt.diagnose(flat, chain, 0.001 * copies)
    assert time.perf_counter() - begun < 20.0
    assert found.matches is True and found.rotations == flat.count


# --- the second moment, and what stands below


def test_second_moments_count_steps_of_first_order_and_vanish_for_symmetric_formulas():
    for name, steps, expected in (("lie", 1, 1.0), ("lie", 5, 0.2), ("strang", 5, 0.0), ("suzuki-4", 2, 0.0)):
        circuit = tt.formula(name).rotations(tt.Partition.of(CHAIN, "commuting"), 1.0, steps)
        unfolded = unfold(circuit)
        neighbours = clashes(unfolded.masks, 6)
        moments = order_moments(settle(unfolded.word, neighbours), neighbours)
        # sums of at most 100 products of shares, each rounded a few times
        assert np.max(np.abs(moments - expected)) < 1e-13


@given(circuits(max_qubits=4))
@settings(max_examples=60)
def test_second_moments_are_their_definition(circuit):
    unfolded = unfold(circuit)
    neighbours = clashes(unfolded.masks, circuit.qubits)
    settled = settle(unfolded.word, neighbours)
    found = iter(order_moments(settled, neighbours))
    for p, others in enumerate(neighbours):
        for q in (int(other) for other in others if p < other):
            own, other = settled.angles[p], settled.angles[q]
            if any(abs(one.sum()) <= 1e-9 * np.abs(one).sum() for one in (own, other)):
                continue
            pairs = [
                (1 if i < j else -1) * (a / own.sum()) * (b / other.sum())
                for i, a in zip(settled.places[p], own, strict=True)
                for j, b in zip(settled.places[q], other, strict=True)
            ]
            # at most 12 x 12 terms, each rounded a few times and added up: 200u of their absolute sum
            assert abs(next(found) - abs(sum(pairs))) <= 200 * 2.0**-53 * max(1.0, sum(map(abs, pairs)))
    assert next(found, None) is None


@given(circuits(max_qubits=4, max_count=10))
@settings(max_examples=60)
def test_settling_leaves_the_unitary_as_it_is(circuit):
    unfolded = unfold(circuit)
    settled = settle(unfolded.word, clashes(unfolded.masks, circuit.qubits))
    rotations = sorted(
        (int(place), unfolded.masks[string], float(angle))
        for string in range(len(unfolded.masks))
        for place, angle in zip(settled.places[string], settled.angles[string], strict=True)
    )
    short = variants.made([(mask, angle) for _, mask, angle in rotations], circuit)
    # at most 10 rotations: 4u each, and sums of angles up to 500 rad rounded at 500u
    assert up_to_phase(short, circuit) < 1e-11


@given(circuits(max_qubits=4, max_count=10), st.integers(0, 2**32 - 1))
@settings(max_examples=40)
def test_moved_cliffords_leave_the_unitary_as_it_is(circuit, seed):
    wrapped = variants.conjugated(np.random.default_rng(seed), circuit)
    moved = moved_to_the_end(wrapped)
    if moved is None:
        return
    if not moved.residual and not moved.relabelled:
        # a Clifford gate is one up to SLACK, times its quarter turns; besides 4u a rotation and u |θ|
        allowed = SLACK * float(np.maximum(1.0, np.abs(wrapped.angles) / variants.QUARTER).sum()) + 1e-11
        assert up_to_phase(moved.rotations, wrapped) < 2 * allowed * 2 ** (circuit.qubits / 2)  # Frobenius norm
    else:
        rest = unitary(wrapped) @ unitary(moved.rotations).conj().T
        assert np.linalg.norm(rest - rest[0, 0] * np.eye(len(rest))) > 0.1


def test_permutations_are_found_and_carry_one_operator_into_the_other():
    names = (3, 0, 5, 1, 2, 4)
    masks = list(zip(CHAIN.x_masks.tolist(), CHAIN.z_masks.tolist(), strict=True))
    moved = [permuted(mask, names) for mask in masks]
    assert permutations(masks, CHAIN.coefficients, moved, CHAIN.coefficients, 6, 1e-9) == [names]


def test_editing_keeps_repeats():
    circuit = strang(CHAIN, steps=1000)
    same = edited(circuit, lambda mask: (mask, 1.0), circuit.phase)
    assert same == circuit


# --- words, documents, errors


def test_a_diagnosis_reads_well_and_is_plain_data():
    found = tt.diagnose(strang(CHAIN), RING, 1.0)
    text = str(found)
    assert "DOES NOT MATCH" in text and "Z_0 Z_5" in text and "strang" in text
    document = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert document["matches"] is False and document["findings"][0]["kind"] == "boundary bond lost"


@pytest.mark.parametrize(
    ("arguments", "error", "message"),
    [
        (("circuit", CHAIN, 1.0), tt.errors.RotationError, "rotations: is not a circuit (str)"),
        ((strang(CHAIN), "Z_0", 1.0), tt.errors.OperatorError, "operator: not an Operator (str)"),
        ((strang(CHAIN), CHAIN, 0.0), tt.errors.ArgumentError, "time: is zero"),
        ((strang(CHAIN), CHAIN, float("nan")), tt.errors.ArgumentError, "time: is not a finite number"),
        ((strang(CHAIN), tt.Operator("Z_7"), 1.0), tt.errors.OperatorError, "acts on qubit 7"),
        ((strang(CHAIN), tt.Operator("2.0"), 1.0), tt.errors.OperatorError, "no term but the identity"),
        ((strang(CHAIN), CHAIN, 1e308), tt.errors.OperatorError, "too large for a float"),
    ],
)
def test_bad_arguments_are_refused(arguments, error, message):
    with pytest.raises(error) as caught:
        tt.diagnose(*arguments)
    assert message in str(caught.value) and "; " in str(caught.value)


@pytest.mark.parametrize("tolerance", [-1.0, 0.2, "small", True, float("nan")])
def test_a_bad_tolerance_is_refused(tolerance):
    with pytest.raises(tt.errors.ArgumentError, match=r"tolerance: is not a number from 0 to 0\.1"):
        tt.diagnose(strang(CHAIN), CHAIN, 1.0, tolerance=tolerance)


def test_an_empty_circuit_is_no_evolution():
    found = tt.diagnose(tt.Rotations([], [], [], 6), CHAIN, 1.0)
    assert found.matches is not True and found.fixed is None


JOB = """
[system]
terms = "-1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1"
[start]
product = "00"
[target]
time = 1.0
tolerance = 0.01
quantity = "state"
"""


@pytest.mark.parametrize(("time", "status", "matches"), [(1.0, 0, True), (0.5, 1, False)])
def test_the_command_ends_with_the_answer(tmp_path, capsys, time, status, matches):
    operator = tt.Operator("-1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1")
    strang(operator).write_qasm(tmp_path / "circuit.qasm")
    (tmp_path / "job.toml").write_text(JOB, encoding="utf-8")
    command = ["diagnose", str(tmp_path / "circuit.qasm"), "--job", str(tmp_path / "job.toml"), "--time", str(time)]
    assert cli.run(command) == status
    assert capsys.readouterr().out.startswith("✓ MATCHES" if matches else "✗ DOES NOT MATCH")
    assert cli.run([*command, "--json"]) == status
    assert json.loads(capsys.readouterr().out)["matches"] is matches


def test_the_command_takes_layouts_and_named_parts(tmp_path, capsys):
    (tmp_path / "job.toml").write_text(JOB, encoding="utf-8")
    operator = tt.Operator("-1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1")
    text = strang(operator).qasm(2).replace("qreg q[2];", "qreg q[3];\nx q[0];")
    text = text.replace("q[1]", "q[2]") + "h q[0];\n"
    (tmp_path / "routed.qasm").write_text(text, encoding="utf-8")
    gates = tt.read_circuit(text).gates
    command = ["diagnose", str(tmp_path / "routed.qasm"), "--job", str(tmp_path / "job.toml")]
    assert cli.run(command) != 0
    parts = ["--prepare", "0:1", "--basis", f"{gates - 1}:{gates}"]
    layout = ["--start-layout", "0,2", "--end-layout", "[0, 2]"]
    assert cli.run([*command, *parts, *layout]) == 0
    capsys.readouterr()
    assert cli.run(["audit", *command[1:], *parts, *layout, "--json"]) in (0, 1, 4)
    (row,) = json.loads(capsys.readouterr().out)["rows"]
    assert row["rotations"] > 0
    assert cli.run([*command, "--start-layout", "0;2"]) == 2
    assert "no list of qubits (0;2); give for instance 2,0,1" in capsys.readouterr().err
    missing = str(tmp_path / "none.qasm")
    for name in ("diagnose", "audit"):
        assert cli.run([name, missing, "--job", str(tmp_path / "job.toml")]) == 2
        assert f"CIRCUIT: cannot be read ({missing}: No such file" in capsys.readouterr().err


def test_the_page_on_a_broken_circuit_prints_what_it_says():
    page = (Path(__file__).parent.parent / "docs" / "broken-circuit.md").read_text(encoding="utf-8")
    names: dict[str, object] = {}
    blocks = re.findall(r"```python\n(.*?)```\n```\n(.*?)```", page, re.DOTALL)
    assert len(blocks) == page.count("```python")
    for code, printed in blocks:
        out = io.StringIO()
        with redirect_stdout(out):
            exec(compile(code, "broken-circuit.md", "exec"), names)
        assert out.getvalue().rstrip() == printed.rstrip()


@pytest.mark.parametrize("seed", range(12))
def test_a_gate_lost_from_a_basis_change_is_found(seed):
    """One quarter turn of a circuit full of basis changes is dropped, or turned the wrong way."""
    draw = np.random.default_rng([13, seed])
    right = a_right_circuit(draw)
    circuit = right.circuit()
    rotations = variants.listed(variants.conjugated(draw, circuit))
    gates = [place for place, (_, angle) in enumerate(rotations) if abs(angle) == variants.QUARTER]
    place = int(draw.choice(gates))
    if seed % 2:
        rotations[place] = rotations[place][0], -rotations[place][1]
    else:
        del rotations[place]
    broken = variants.made(rotations, circuit)
    if distance(broken, circuit) < 1e-9:
        return
    found = tt.diagnose(broken, right.operator, right.time)
    assert found.matches is False and found.mistakes[0].kind in ("basis change", "residual Clifford", "term letters")
    assert up_to_phase(found.fixed, circuit) < 1e-9
