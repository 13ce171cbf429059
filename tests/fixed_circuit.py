"""Fixed circuits whose amplitudes are committed as hashes, and a script that prints them.

``python fixed_circuit.py THREADS`` prints, for each circuit, its name, the SHA-256 of the amplitudes, the workers that ran
and the passes; the instruction set is chosen by TRUETURN_ISA.
"""

from __future__ import annotations

import hashlib
import sys

import trueturn as tt

QUBITS = 20


def circuit():
    """Return three steps of mixed strings: one-qubit, bonds across the register, long strings, diagonal ones."""
    x, z, angles = [], [], []
    for q in range(QUBITS):
        partner = 1 << (q + 1) % QUBITS | 1 << q
        far = 1 << (7 * q + 3) % QUBITS | 1 << q
        for xs, zs in (
            (partner, 0),
            (partner, partner),
            (0, partner),
            (1 << q, 0),
            (0, 1 << q),
            (far, partner & ~far),
            (partner, (1 << QUBITS) - 1 & ~partner),
        ):
            x.append(xs)
            z.append(zs)
            angles.append(0.01 * (len(x) % 37 + 1) * (-1) ** q)
    return tt.Rotations(x, z, angles, QUBITS, phase=0.125).times(3)


def spin_ladder():
    """Return two second-order steps of a ladder with equal strengths on its rungs and unequal ones on its legs."""
    rungs = [(q, q + 1, (0.31, 0.31, 0.31)) for q in range(0, QUBITS, 2)]
    legs = [(q, q + 2, (0.11, 0.13, 0.17)) for q in range(QUBITS - 2)]
    half = []
    for a, b, (xx, yy, zz) in rungs + legs:
        bond = 1 << a | 1 << b
        half += [(bond, 0, xx), (bond, bond, yy), (0, bond, zz)]
    fields = [(0, 1 << q, 0.05 * (q + 1)) for q in range(QUBITS)]
    step = half + fields + half[::-1]
    return _listed(step * 2)


def long_strings():
    """Return strings of weight 12 and more, eight of them at a time on one x mask."""
    every = (1 << QUBITS) - 1
    rotations = []
    for k in range(24):
        x = 0b1111 << (k % 17)
        chain = every & ~(0b111 << (k % 11)) & ~x
        rotations += [(x, chain | z << (k % 17), 0.02 * (k + j + 1)) for j, z in enumerate((1, 2, 4, 8, 7, 11, 13, 14))]
    return _listed(rotations)


def random_list():
    """Return 200 strings of a linear congruential generator (Knuth's MMIX constants)."""
    number, rotations = 20, []
    for _ in range(200):
        masks = []
        for _ in range(2):
            number = (number * 6364136223846793005 + 1442695040888963407) % 2**64
            masks.append(number >> 30 & (1 << QUBITS) - 1)
        rotations.append((*masks, 0.1 + masks[0] % 1000 / 500.0))
    return _listed(rotations)


def _listed(rotations):
    x, z, angles = zip(*rotations, strict=True)
    return tt.Rotations(x, z, angles, QUBITS)


CIRCUITS = {"mixed": circuit, "ladder": spin_ladder, "long": long_strings, "random": random_list}


def digest(threads, dtype="complex128", name="mixed"):
    """Evolve a product state and return (hash, run)."""
    state = tt.State.product("01+-" * (QUBITS // 4), dtype=dtype)
    state.apply(CIRCUITS[name](), threads=threads)
    little = state.amplitudes.astype(state.dtype.newbyteorder("<"), copy=False)
    return hashlib.sha256(little.tobytes()).hexdigest(), state.last_run


if __name__ == "__main__":
    for name in CIRCUITS:
        for dtype in ("complex128", "complex64"):
            found, run = digest(int(sys.argv[1]), dtype, name)
            print(name, dtype, found, run.workers, run.passes)
