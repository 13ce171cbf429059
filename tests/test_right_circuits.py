"""Right circuits are never accused, however they are written: the answer is right, or that nothing can be told.

Each instance is checked against the dense unitary of the circuit as its formula has it, so that it is right indeed.
"""

from __future__ import annotations

import numpy as np
import pytest

import trueturn as tt
from circuit_mistakes import up_to_phase
from circuit_variants import listed
from resynthesis import STYLES, blocks, resynthesised
from right_circuits import FORMS, right_circuit

CLOSE = 1e-9
"""Spectral norm: at most 1e4 rotations at 4u each, and 200 blocks exact to 1e-12 in each of 15 numbers."""


def judged(seed):
    """Diagnose one instance; give its form and the answer."""
    form, right, circuit = right_circuit(seed)
    assert up_to_phase(circuit, right.circuit()) < CLOSE, form
    found = tt.diagnose(circuit, right.operator, right.time)
    assert found.matches is not False, f"{form}, seed {seed}: {found}"
    assert found.matches or found.reason
    return form, found.matches


@pytest.mark.parametrize("seed", range(2 * len(FORMS)))
def test_a_right_circuit_is_not_accused(seed):
    judged(seed)


@pytest.mark.heavy
def test_hundreds_of_right_circuits_are_not_accused(capsys):
    answers = {form: [0, 0] for form in FORMS}
    for seed in range(10_000, 10_000 + 22 * len(FORMS)):
        form, matches = judged(seed)
        answers[form][matches is None] += 1
    with capsys.disabled():
        for form, (right, unknown) in answers.items():
            print(f"\n{form:24} {right} match, {unknown} cannot be told, 0 accused", end="")
    assert sum(map(sum, answers.values())) >= 400
    # What is only written down otherwise, with its own strings and angles, must not be answered by silence.
    for form in ("written out", "reordered", "merged", "split", "in pieces"):
        assert answers[form][1] == 0, form


@pytest.mark.parametrize("style", STYLES)
def test_blocks_are_other_words_of_the_same_unitary(style):
    """The generator itself: the strings or angles change, the unitary and the totals asked for do not."""
    ising = tt.model.ising(tt.lattice.chain(4), zz=[-1.0, 0.7, 0.4], x=[0.5, 0.6, 0.7, 0.8])
    circuit = tt.formula("strang").rotations(tt.Partition.of(ising, "commuting"), 0.8, 2)
    new, changed = resynthesised(np.random.default_rng(5), circuit, share=1.0, style=style)
    assert changed >= 1
    assert listed(new) != listed(circuit)
    assert up_to_phase(new, circuit) < CLOSE
    if style == "totals kept":
        kept, wanted = ({mask: 0.0 for mask, _ in listed(circuit)} for _ in range(2))
        for totals, one in ((kept, new), (wanted, circuit)):
            for mask, angle in listed(one):
                if mask in totals:
                    totals[mask] += angle
        # at most 40 rotations of a string, each sum exact to 1e-12 a block
        assert all(abs(kept[mask] - wanted[mask]) < 1e-10 for mask in wanted)


def test_blocks_hold_all_rotations_in_an_order_that_changes_nothing():
    ising = tt.model.ising(tt.lattice.ring(5), zz=0.9, x=0.4)
    circuit = tt.formula("suzuki-4").rotations(tt.Partition.of(ising, "bond"), 0.5, 2)
    rotations = [rotation for block in blocks(listed(circuit)) for rotation in block]
    assert sorted(rotations) == sorted(listed(circuit))
    masks = [mask for mask, _ in rotations]
    same = tt.Rotations(
        [x for x, _ in masks], [z for _, z in masks], [angle for _, angle in rotations], 5, circuit.phase
    )
    assert up_to_phase(same, circuit) < CLOSE


def test_a_block_rewritten_in_one_step_does_not_make_a_term_too_many():
    """The case that was accused once: all totals of the Hamiltonian right, one string more in a single step."""
    accused = 0
    for seed in range(40):
        draw = np.random.default_rng([41, seed])
        ising = tt.model.ising(tt.lattice.chain(4), zz=draw.uniform(0.3, 1.2, 3), x=draw.uniform(0.3, 1.2, 4))
        circuit = tt.formula("strang").rotations(tt.Partition.of(ising, "commuting"), 1.0, 1)
        new, changed = resynthesised(draw, circuit, share=1.0, style="totals kept")
        if not changed:
            continue
        found = tt.diagnose(new, ising, 1.0)
        assert found.matches is not False, str(found)
        accused += found.matches is None
    assert accused >= 10  # the rewrite does reach circuits whose totals say otherwise
