"""Problem PT, and dense oracles for driven Hamiltonians that share nothing with the code under test."""

from __future__ import annotations

import math
from functools import cache

import numpy as np
import scipy.linalg

import oracle
import trueturn as tt
from circuits import P3_PARTS
from trueturn.driven import Driven, Sinusoid

SINE = -math.pi / 2
PT = Driven(
    [(Sinusoid(1.0, 2.0), P3_PARTS[0]), (Sinusoid(0.5, 3.0, phase=SINE, offset=1.0), P3_PARTS[1]), (1.0, P3_PARTS[2])]
)
"""cos(2s) F1 + (1 + 0.5 sin(3s)) F2 + F3: three parts, no two of which commute."""

MATRICES = tuple(oracle.dense(part) for part in P3_PARTS)


def pt_strengths(time):
    return math.cos(2 * time), 1 + 0.5 * math.sin(3 * time), 1.0


def pt(time):
    return sum(f * m for f, m in zip(pt_strengths(time), MATRICES, strict=True))


@cache
def gauss_rule(count):
    """Nodes on [0, 1] and the matrix of ∫_0^{c_i} l_j, exact for polynomials; its last row is the integral to 1."""
    nodes = (np.polynomial.legendre.leggauss(count)[0] + 1) / 2
    basis = np.polynomial.legendre.legvander(2 * nodes - 1, count - 1)
    ends = np.append(nodes, 1.0)
    legendre = np.eye(count)
    integrals = np.array(
        [
            np.polynomial.legendre.legval(2 * ends - 1, np.polynomial.legendre.legint(row, lbnd=-1)) / 2
            for row in legendre
        ]
    ).T
    return nodes, integrals @ np.linalg.inv(basis)


def evolution(hamiltonian, start, end, pieces=1, count=16):
    """Solve U' = -i H(t) U by Gauss collocation, of order 2·16: rounding is all that is left on short pieces."""
    nodes, integrals = gauss_rule(count)
    total = np.eye(len(hamiltonian(start)), dtype=complex)
    length = (end - start) / pieces
    for piece in range(pieces):
        begin = start + piece * length
        rates = np.array([-1j * length * hamiltonian(begin + c * length) for c in nodes])
        size = len(total)
        # K_i = R_i (1 + Σ_j a_ij K_j)
        system = np.eye(count * size, dtype=complex)
        for i in range(count):
            for j in range(count):
                system[i * size : (i + 1) * size, j * size : (j + 1) * size] -= integrals[i, j] * rates[i]
        slopes = np.linalg.solve(system, rates.reshape(count * size, size)).reshape(count, size, size)
        total = (np.eye(size) + np.tensordot(integrals[-1], slopes, 1)) @ total
    return total


@cache
def _string(x, z, qubits):
    return oracle.string(x, z, qubits)


def multiplied(rotations):
    """Multiply a plain list of rotations out, first in time rightmost."""
    total = np.exp(1j * rotations.phase) * np.eye(2**rotations.qubits)
    for x, z, angle in zip(rotations.x_masks, rotations.z_masks, rotations.angles, strict=True):
        total = np.cos(angle) * total - 1j * np.sin(angle) * (_string(x, z, rotations.qubits) @ total)
    return total


def plain(formula, time, steps, start=0.0, early=False):
    """PT by the clock rule, stage after stage with exponentials of whole parts; `early` freezes at the wrong time."""
    total = np.eye(8)
    step = time / steps
    for number in range(steps):
        clock = start + number * step
        for stage in formula.stages:
            forward = stage.direction == "forward"
            after = clock + stage.weight * step
            strengths = pt_strengths(clock if early or not forward else after)
            order = range(3) if forward else (2, 1, 0)
            for part in order:
                total = scipy.linalg.expm(-1j * stage.weight * step * strengths[part] * MATRICES[part]) @ total
            clock = after
    return total


def distance(a, b):
    return np.linalg.norm(a - b, 2)


def triple_jump(name="triple jump"):
    outer = 1 / (2 - 2 ** (1 / 3))
    return tt.Formula.composition([outer, 1 - 2 * outer, outer], name=name)
