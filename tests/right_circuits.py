"""Right circuits in every form that keeps their unitary: models, formulas and rewrites at random, all invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

import circuit_variants as variants
import trueturn as tt
from circuit_mistakes import a_right_circuit, phase_part, written_out
from resynthesis import blocks, resynthesised

__all__ = ["FORMS", "right_circuit"]


def right_circuit(seed):
    """Give (form, Right, its circuit in another form).

    Every seed takes the next form of `FORMS`; every fifth has angles among its own that are Clifford gates.
    """
    draw = np.random.default_rng([20261207, seed])
    right = a_right_circuit(draw, shuffled=0.5)
    form = list(FORMS)[seed % len(FORMS)]
    if seed // len(FORMS) % 5 == 4:
        right = kicked(draw, right)
    return form, *FORMS[form](draw, right)


def kicked(draw, right):
    """Change the strengths of one part so that each of its strings turns by a multiple of π/4 in a step, or in all."""
    parts = list(right.partition.parts)
    place = int(draw.integers(len(parts)))
    old = parts[place]
    size = variants.QUARTER / right.time * (right.steps if draw.random() < 0.5 else 1)
    turns = draw.integers(1, 4, len(old)) * draw.choice([-1, 1], len(old)) * size
    parts[place] = tt.Operator.from_masks(old.x_masks, old.z_masks, turns, old.qubits)
    partition = tt.Partition([*parts, phase_part(right)])
    return replace(right, operator=partition.operator(), partition=partition)


def kept(change):
    """Make a form of a change of the whole circuit."""
    return lambda draw, right: (right, change(draw, right.circuit()))


def anew(style=None):
    return kept(lambda draw, circuit: resynthesised(draw, circuit, style=style)[0])


def body_anew(draw, right):
    """One step written anew, then repeated: every step is alike."""
    once = right.circuit(time=right.time / right.steps, steps=1)
    share = 1.0 if draw.random() < 0.5 else None
    return right, resynthesised(draw, once, share=share)[0].times(right.steps)


def bonds_alike(draw, right):
    """A uniform Ising chain or ring, bond by bond with its share of the fields; bonds are written anew all alike."""
    n = int(draw.integers(3, 7))
    lattice = tt.lattice.ring(n) if draw.random() < 0.5 else tt.lattice.chain(n)
    zz, x = (float(number) for number in draw.uniform(0.3, 1.2, 2))
    bonds = list(lattice.bonds)
    shares = [x / sum(q in bond for bond in bonds) for q in range(n)]

    def bond_parts(a, b):
        strings = [(0, 1 << a | 1 << b, zz), (1 << a, 0, shares[a]), (1 << b, 0, shares[b])]
        return [tt.Operator.from_masks([x], [z], [strength], n) for x, z, strength in strings]

    parts = [part for bond in bonds for part in bond_parts(*bond)]
    right = replace(
        right,
        operator=tt.model.ising(lattice, zz=zz, x=x),
        partition=tt.Partition(parts),
        formula=tt.formula("lie"),
    )
    step = variants.listed(written_out(right.circuit(time=right.time / right.steps, steps=1)))
    return right, resynthesised_alike(draw, step, n).times(right.steps)


def resynthesised_alike(draw, step, n):
    """Write every block of two qubits that has the angles of one of them anew, all in the same way."""
    like = tt.Rotations([], [], [], n)
    every = blocks(step)
    sample = every[int(draw.integers(len(every)))]
    here = support(sample)
    new = variants.listed(resynthesised(draw, variants.made(sample, like), share=1.0)[0])
    out = []
    for block in every:
        names = dict(zip(here, support(block), strict=False))
        moved = [(renamed_mask(mask, names), angle) for mask, angle in sample] if len(names) == len(here) else []
        alike = moved == block
        out += [(renamed_mask(mask, names), angle) for mask, angle in new] if alike else block
    return variants.made(out, like)


def support(block):
    """List the qubits of a block in ascending order."""
    both = 0
    for (x, z), _ in block:
        both |= x | z
    return [qubit for qubit in range(both.bit_length()) if both >> qubit & 1]


def renamed_mask(mask, names):
    return tuple(sum(1 << to for qubit, to in names.items() if bits >> qubit & 1) for bits in mask)


def in_pieces(draw, right):
    """Some terms cut into two parts that stand elsewhere in the step: another product formula of the same Hamiltonian."""
    parts = list(right.partition.parts)
    for _ in range(int(draw.integers(1, 4))):
        place = int(draw.integers(len(parts)))
        share = float(draw.uniform(0.1, 0.9))
        part = parts[place]
        parts[place] = share * part
        parts.insert(int(draw.integers(len(parts) + 1)), (1 - share) * part)
    right = replace(right, partition=tt.Partition([*parts, phase_part(right)]))
    return right, variants.merged(draw, right.circuit())


def by_periods(draw, circuit):
    """Shift angles by full periods: 2π, or π, which turns the global phase."""
    rotations = variants.listed(circuit)
    shift = draw.integers(-2, 3, len(rotations)) * (draw.random(len(rotations)) < 0.3)
    return variants.made(
        [(mask, angle + np.pi * int(k)) for (mask, angle), k in zip(rotations, shift, strict=True)], circuit
    )


def by_half_turns(draw, circuit):
    """Take a string's half turn out of one rotation, past others, into a later one: angles of π/2 more, signs changed."""
    rotations = variants.listed(circuit)
    for _ in range(int(draw.integers(1, 4))):
        gate = rotations[int(draw.integers(len(rotations)))][0]
        own = [place for place, (mask, _) in enumerate(rotations) if mask == gate]
        first = int(draw.choice(own))
        last = int(draw.choice([place for place in own if place >= first]))
        for place in range(first + 1, last):
            mask, angle = rotations[place]
            rotations[place] = mask, -angle if variants.anticommute(gate, mask) else angle
        rotations[first] = gate, rotations[first][1] + np.pi / 2
        rotations[last] = gate, rotations[last][1] - np.pi / 2
        if draw.random() < 0.3:  # the second half turn as a rotation of its own, at the end
            rest = rotations[last + 1 :]
            rotations[last + 1 :] = [(m, -a if variants.anticommute(gate, m) else a) for m, a in rest]
            rotations[last] = gate, rotations[last][1] + np.pi / 2
            rotations.append((gate, -np.pi / 2))
    return variants.made(rotations, circuit)


def by_local_frames(draw, circuit):
    """Turn a qubit forth and back between rotations; blocks that hold both halves are then written anew."""
    out = []
    for rotation in variants.listed(circuit):
        if draw.random() < 0.2:
            qubit = 1 << int(draw.integers(circuit.qubits))
            gate = [(qubit, 0), (qubit, qubit), (0, qubit)][int(draw.integers(3))]
            angle = float(draw.uniform(-1.5, 1.5))
            out += [(gate, angle), (gate, -angle)]
        out.append(rotation)
    return resynthesised(draw, variants.made(out, circuit), share=1.0, style="any")[0]


def one_after_the_other(draw, circuit):
    """Two or three rewrites, each of what the one before left."""
    changes = [
        variants.reordered,
        variants.merged,
        variants.split,
        by_periods,
        by_half_turns,
        lambda draw, circuit: variants.conjugated(draw, circuit),
        lambda draw, circuit: resynthesised(draw, circuit, share=0.3)[0],
        lambda draw, circuit: variants.routed(draw, circuit)[0],
    ]
    for place in draw.choice(len(changes), int(draw.integers(2, 4)), replace=False):
        if circuit.count < 600:
            circuit = changes[place](draw, circuit)
    return circuit


FORMS = {
    "written out": kept(lambda draw, circuit: written_out(circuit)),
    "reordered": kept(variants.reordered),
    "merged": kept(variants.merged),
    "split": kept(variants.split),
    "in pieces": in_pieces,
    "conjugated": kept(variants.conjugated),
    "routed": kept(lambda draw, circuit: variants.routed(draw, circuit)[0]),
    "fused": kept(lambda draw, circuit: variants.fused(circuit)),
    "periods": kept(by_periods),
    "half turns": kept(by_half_turns),
    "local frames": kept(by_local_frames),
    "blocks, any": anew(),
    "blocks, canonical": anew("canonical"),
    "blocks, own strings": anew("own"),
    "blocks, totals kept": anew("totals kept"),
    "blocks, one total off": anew("one total off"),
    "step body": body_anew,
    "bonds alike": bonds_alike,
    "several": kept(one_after_the_other),
}
"""Ways to write a right circuit; each takes and gives one, and how it is written."""
