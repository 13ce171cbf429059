"""The fixed circuit whose amplitudes are committed as a hash, and a script that prints it.

``python fixed_circuit.py THREADS`` prints the SHA-256 of the amplitudes, the workers that ran and the passes; the
instruction set is chosen by TRUETURN_ISA.
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


def digest(threads, dtype="complex128"):
    """Evolve a product state and return (hash, run)."""
    state = tt.State.product("01+-" * (QUBITS // 4), dtype=dtype)
    state.apply(circuit(), threads=threads)
    little = state.amplitudes.astype(state.dtype.newbyteorder("<"), copy=False)
    return hashlib.sha256(little.tobytes()).hexdigest(), state.last_run


if __name__ == "__main__":
    found, run = digest(int(sys.argv[1]))
    print(found, run.workers, run.passes)
