"""Blocks of a circuit written anew: other strings, other angles, the same unitary, as compilers leave them.

A block is a run of rotations on one or two qubits. It is replaced by another word of Pauli rotations whose angles are
solved for by damped Gauss-Newton steps, to rounding. Totals of chosen strings can be asked for
besides: then the first moment of the new word is what an adversary wants it to be, and the unitary is still right.
"""

from __future__ import annotations

from functools import cache

import numpy as np

from circuit_variants import anticommute, listed, made
from oracle import string

EXACT = 1e-12
"""Largest entry by which a new word may differ from the block, a phase apart; up to 30 rotations at 4u each are 3e-14."""
TRIES = 3
ITERATIONS = 50
STYLES = ("euler", "canonical", "own", "own and one", "any", "totals kept", "one total off")


def resynthesised(draw, circuit, share=None, style=None):
    """Write some of the blocks of a circuit anew.

    Parameters
    ----------
    share : float, optional
        Chance of each block; drawn where it is not given.
    style : str, optional
        One of `STYLES` for all blocks; drawn for each block where it is not given.

    Returns
    -------
    Rotations
    int
        How many blocks are other words now.
    """
    share = float(draw.choice([0.1, 0.4, 1.0])) if share is None else share
    out, changed = [], 0
    for block in blocks(listed(circuit)):
        new = None
        if len(block) > 1 and draw.random() < share:
            new = another_word(draw, block, style or str(draw.choice(STYLES)))
        changed += new is not None
        out += new or block
    return made(out, circuit), changed


def blocks(rotations):
    """Gather rotations on at most two qubits into blocks, each as long as others on its qubits allow."""
    done, waiting = [], []  # waiting: (support, rotations), of disjoint supports
    for mask, angle in rotations:
        support = mask[0] | mask[1]
        near = [one for one in waiting if one[0] & support]
        joined = support
        for one in near:
            joined |= one[0]
        waiting = [one for one in waiting if not one[0] & support]
        if joined.bit_count() <= 2:
            waiting.append((joined, [rotation for one in near for rotation in one[1]] + [(mask, angle)]))
            continue
        kept = [one for one in near if (one[0] | support).bit_count() <= 2 and one[0].bit_count() == 1]
        done += [one[1] for one in near if one not in kept]
        waiting.append((support, [rotation for one in kept for rotation in one[1]] + [(mask, angle)]))
    return done + [one[1] for one in waiting]


def another_word(draw, block, style):
    """Find another word for a block; None where the style does not reach it."""
    qubits = sorted({qubit for (x, z), _ in block for qubit in range((x | z).bit_length()) if (x | z) >> qubit & 1})
    if len(qubits) > 2:
        return None
    local = [(packed(mask, qubits), angle) for mask, angle in block]
    for _ in range(TRIES):
        word, wanted = a_word(draw, local, len(qubits), style)
        if word is None:
            return None
        angles = solved(draw, word, product(local, len(qubits)), wanted, len(qubits))
        if angles is not None:
            return [(unpacked(mask, qubits), float(angle)) for mask, angle in zip(word, angles, strict=True)]
    return None


def a_word(draw, local, qubits, style):
    """Draw strings for the new word, and the totals that it must have."""
    own = sorted({mask for mask, _ in local})
    every = [(x, z) for x in range(2**qubits) for z in range(2**qubits) if x or z]
    others = [mask for mask in every if mask not in own]
    totals = {mask: sum(angle for one, angle in local if one == mask) for mask in own}
    if style in ("euler", "canonical"):
        if (style == "euler") != (qubits == 1):
            style = "any"
        elif qubits == 1:
            return euler(draw, 1), {}
        else:
            middle = [(3, 0), (3, 3), (0, 3)]
            draw.shuffle(middle)
            ends = [euler(draw, bit) for bit in (1, 2, 1, 2)]
            return ends[0] + ends[1] + [tuple(mask) for mask in middle] + ends[2] + ends[3], {}
    if len(own) < 2 and style.startswith(("own", "one")):
        return None, {}
    alphabet, wanted = list(own), {}
    if style == "any":
        alphabet = every
    elif style == "own and one" and others:
        alphabet.append(others[int(draw.integers(len(others)))])
    elif style == "totals kept" and others:
        wanted = dict(totals)
        alphabet.append(others[int(draw.integers(len(others)))])
    elif style == "one total off":
        wanted = dict(totals)
        changed = own[int(draw.integers(len(own)))]
        wanted[changed] *= float(draw.choice([-1.0, 2.0, 0.5]))
        partners = [mask for mask in own if anticommute(mask, changed)]
        if not partners:
            return None, {}
    length = 6 if qubits == 1 else 20
    letters = [alphabet[int(k)] for k in draw.integers(0, len(alphabet), length + len(wanted))]
    word = [letters[0]]
    for letter in letters[1:]:
        if letter != word[-1]:
            word.append(letter)
    return word, wanted


def euler(draw, bit):
    """Three rotations about two axes of one qubit."""
    axes = [(bit, 0), (bit, bit), (0, bit)]
    first, second = draw.choice(3, 2, replace=False)
    return [axes[first], axes[second], axes[first]]


def solved(draw, word, target, wanted, qubits):
    """Solve for angles that make the word the target but for a phase, with the totals wanted; None where it fails.

    Levenberg-Marquardt: the residual is tr(Q W T†)/2^n for every string Q but the identity, which vanishes only where
    the word W is the target T but for a phase (or another multiple of the identity, which unitaries have not).
    """
    count, size = len(word), 2**qubits
    strings = np.array([matrix(*mask, qubits) for mask in word])
    basis = np.array([matrix(x, z, qubits) for x in range(size) for z in range(size) if x or z])
    flat = basis.transpose(0, 2, 1).reshape(len(basis), -1) / size
    back = target.conj().T
    rows = np.array([[float(mask == one) for mask in word] for one in wanted]).reshape(len(wanted), count)
    aims = np.array(list(wanted.values()))

    def residual(angles):
        """The residual, W T†, and the product of the rotations behind each."""
        turns = turn(strings, angles[:, None, None])
        after, products = np.eye(size, dtype=complex), np.empty_like(turns)
        for place in range(count - 1, -1, -1):
            products[place] = after
            after = after @ turns[place]
        off = after @ back
        parts = flat @ off.ravel()
        return off, products, np.concatenate([parts.real, parts.imag, rows @ angles - aims])

    angles = draw.normal(size=count) * float(draw.choice([0.3, 1.0]))
    off, products, left = residual(angles)
    damping = 1e-2
    for _ in range(ITERATIONS):
        if np.max(np.abs(left)) < EXACT:
            return angles
        moved = -1j * (products @ strings @ products.conj().transpose(0, 2, 1)) @ off
        slopes = flat @ moved.reshape(count, -1).T
        jacobian = np.concatenate([slopes.real, slopes.imag, rows])
        move = np.linalg.solve(jacobian.T @ jacobian + damping * np.eye(count), -jacobian.T @ left)
        trial = residual(angles + move)
        if np.linalg.norm(trial[2]) < np.linalg.norm(left):
            angles = angles + move
            off, products, left = trial
            damping = max(damping / 10, 1e-14)
        else:
            damping = min(damping * 5, 10.0)
    return None


def turn(one, angle):
    """Rotations about strings as matrices; both may be stacked."""
    return np.cos(angle) * np.eye(one.shape[-1]) - 1j * np.sin(angle) * one


def product(local, qubits):
    """Multiply a block out."""
    total = np.eye(2**qubits, dtype=complex)
    for mask, angle in local:
        total = turn(matrix(*mask, qubits), angle) @ total
    return total


@cache
def matrix(x, z, qubits):
    return string(x, z, qubits)


def packed(mask, qubits):
    return tuple(sum((bits >> qubit & 1) << place for place, qubit in enumerate(qubits)) for bits in mask)


def unpacked(mask, qubits):
    return tuple(sum((bits >> place & 1) << qubit for place, qubit in enumerate(qubits)) for bits in mask)
