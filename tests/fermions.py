"""Electrons by dense matrices alone: an oracle for Hamiltonians from integrals.

Mode j is qubit j, |1> is filled, and a_j = Z_0 … Z_{j-1} (X_j + i Y_j)/2, written out as Kronecker products.
"""

from __future__ import annotations

import numpy as np

import oracle


def lowering(mode, modes):
    """Return the matrix of a_mode."""
    line = " ".join(f"Z_{q}" for q in range(mode))
    return (oracle.pauli(f"{line} X_{mode}", modes) + 1j * oracle.pauli(f"{line} Y_{mode}", modes)) / 2


def spin_orbital(orbital, spin, orbitals, order):
    return 2 * orbital + spin if order == "interleaved" else spin * orbitals + orbital


def hamiltonian(constant, one, two, order="interleaved"):
    """Return constant + Σ h a†a + ½ Σ (ij|kl) a†_iσ a†_kτ a_lτ a_jσ.

    `one[spin]` has shape (n, n); `two[spin, spin']` has shape (n, n, n, n), chemists' order.
    """
    n = len(one[0])
    down = {(p, s): lowering(spin_orbital(p, s, n, order), 2 * n) for p in range(n) for s in (0, 1)}
    up = {key: matrix.conj().T for key, matrix in down.items()}
    total = constant * np.eye(4**n, dtype=complex)
    for s in (0, 1):
        for i, j in np.ndindex(n, n):
            total += one[s][i, j] * up[i, s] @ down[j, s]
    for s, t in np.ndindex(2, 2):
        for i, j, k, m in zip(*np.nonzero(two[s, t]), strict=True):
            total += 0.5 * two[s, t][i, j, k, m] * up[i, s] @ up[k, t] @ down[m, t] @ down[j, s]
    return total


def random_integrals(n, seed, spins=1):
    """Invented integrals with the symmetries of real orbitals: (constant, one, two) as `hamiltonian` takes them."""
    draw = np.random.default_rng(seed)
    shapes = [draw.normal(size=(3, n, n)) for _ in range(spins)]
    shapes = [shape + shape.transpose(0, 2, 1) for shape in shapes] * (3 - spins)
    one = [draw.normal(size=(n, n)) for _ in range(spins)]
    one = [h + h.T for h in one] * (3 - spins)
    two = {(s, t): np.einsum("aij,akl->ijkl", shapes[s], shapes[t]) for s in (0, 1) for t in (0, 1)}
    return float(draw.normal()), one, two


def write_spin_orbitals(path, constant, one, two, electrons=(1, 1)):
    """Write spin-dependent integrals over spin orbitals, odd numbers up and even ones down."""
    n = len(one[0])
    lines = [f"&FCI NORB={2 * n}, NELEC={sum(electrons)}, MS2={electrons[0] - electrons[1]}, UHF=.TRUE. &END"]
    for s, t in np.ndindex(2, 2):
        for i, j, k, m in np.ndindex(n, n, n, n):
            places = 2 * i + s + 1, 2 * j + s + 1, 2 * k + t + 1, 2 * m + t + 1
            lines.append(" ".join(map(str, (float(two[s, t][i, j, k, m]), *places))))
    for s in (0, 1):
        for i, j in np.ndindex(n, n):
            lines.append(f"{float(one[s][i, j])!r} {2 * i + s + 1} {2 * j + s + 1} 0 0")
    path.write_text("\n".join([*lines, f"{constant!r} 0 0 0 0"]) + "\n")
    return path


def write_fcidump(path, constant, one, two, electrons=(1, 1), unrestricted=False):
    """Write integrals as text, every digit, all images of each (so the reader sees symmetric ones repeated)."""
    n = len(one[0])
    lines = [f"&FCI NORB={n}, NELEC={sum(electrons)}, MS2={electrons[0] - electrons[1]},"]
    lines += [" UHF=.TRUE.," if unrestricted else "", " ORBSYM=" + "1," * n, " ISYM=1,", "&END"]

    def doubles(g):
        return [f" {g[i, j, k, m]!r} {i + 1} {j + 1} {k + 1} {m + 1}" for i, j, k, m in np.ndindex(*g.shape)]

    def singles(h):
        return [f" {h[i, j]!r} {i + 1} {j + 1} 0 0" for i, j in np.ndindex(*h.shape)]

    end = ["0.0 0 0 0 0"]
    if unrestricted:
        for block in (doubles(two[0, 0]), doubles(two[1, 1]), doubles(two[0, 1]), singles(one[0]), singles(one[1])):
            lines += block + end
    else:
        lines += doubles(two[0, 0]) + singles(one[0])
    lines.append(f" {constant!r} 0 0 0 0")
    path.write_text("\n".join(line for line in lines if line).replace("np.float64(", "").replace(")", "") + "\n")
    return path
