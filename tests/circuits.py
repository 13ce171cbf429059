"""Problem P3, and circuits multiplied out as dense matrices."""

from __future__ import annotations

import numpy as np

import oracle
import trueturn as tt

P3_PARTS = (
    tt.Operator("1.0 X_0 X_1 + 0.5 X_1 X_2", qubits=3),
    tt.Operator("0.8 Z_0 + 0.6 Z_1 + 0.4 Z_2", qubits=3),
    tt.Operator("0.3 Y_0 Y_2 + 0.7 Y_1", qubits=3),
)
P3 = tt.Partition(P3_PARTS)


def matrix(rotations):
    """Multiply the rotations out, first in time rightmost, with the phase and the frame."""
    total = np.exp(1j * rotations.phase) * np.eye(2**rotations.qubits)
    for block in rotations.blocks:
        if len(block.rotations.blocks) == 1 and block.rotations.blocks[0].repeat == 1:
            columns = (block.rotations.x_masks, block.rotations.z_masks, block.rotations.angles)
            once = np.eye(2**rotations.qubits)
            for x, z, angle in zip(*columns, strict=True):
                once = oracle.rotation(x, z, angle, rotations.qubits) @ once
        else:
            once = matrix(block.rotations)
        total = np.linalg.matrix_power(once, block.repeat) @ total
    if rotations.frame.count or rotations.frame.phase:
        total = matrix(rotations.frame) @ total
    return relabelling_matrix(rotations.relabelling) @ total


def relabelling_matrix(moves):
    """Send qubit q to `moves[q]`."""
    size = 2 ** len(moves)
    made = np.zeros((size, size))
    for index in range(size):
        made[sum((index >> qubit & 1) << target for qubit, target in enumerate(moves)), index] = 1.0
    return made


def plain(formula, partition, time, steps):
    """Run stage after stage with exponentials of whole parts; nothing merged."""
    one = np.eye(2**partition.qubits)
    for stage in formula.stages:
        parts = partition.parts if stage.direction == "forward" else partition.parts[::-1]
        for part in parts:
            one = oracle.evolution(part, stage.weight * time / steps) @ one
    return np.exp(-1j * partition.identity * time) * np.linalg.matrix_power(one, steps)


def distance(a, b):
    return np.linalg.norm(a - b, 2)


def product(formula, partition, time, steps):
    """The circuit by eigenvectors of each part, stage after stage: no merging, no rotations."""
    known = [np.linalg.eigh(oracle.dense(part)) for part in partition.parts]
    one = np.eye(2**partition.qubits, dtype=complex)
    for weight, reverse in formula.exact_stages():
        for values, vectors in reversed(known) if reverse else known:
            phases = np.exp(-1j * float(weight) * time / steps * values)
            one = (vectors * phases) @ (vectors.conj().T @ one)
    return np.exp(-1j * partition.identity * time) * np.linalg.matrix_power(one, steps)
