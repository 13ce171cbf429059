"""The transverse-field Ising chain after a quench, by free fermions: an oracle for long chains and long
times.

H = -Σ Z_j Z_{j+1} - h Σ X_j, start |+>^n.

Open chain: the Majorana operators a_j = (Π_{l<j} X_l) Z_j and b_j = (Π_{l<j} X_l) Y_j square to 1 and
anticommute. From Z Y = -i X follows a_j b_j = -i X_j, so X_j = i a_j b_j, and from Y_j X_j = -i Z_j follows
b_j a_{j+1} = -i Z_j Z_{j+1}, so Z_j Z_{j+1} = i b_j a_{j+1}. H is a quadratic form (i/2) Σ M_pq w_p w_q with
M antisymmetric, hence dw/dt = 2 M w, and the matrix G_pq = <i w_p w_q> (p ≠ q) turns as O G O^T with O =
exp(2 M t).

Periodic chain of even length: one pair of fermions for each momentum, in closed form.

Sources, from memory, the formulas as in ``published/exact.md`` section 2: E. Lieb, T. Schultz, D. Mattis, Two
soluble models of an antiferromagnetic chain, Ann. Phys. 16, 407 (1961); P. Pfeuty, The one-dimensional Ising
model with a transverse field, Ann. Phys. 57, 79 (1970); E. Barouch, B. M. McCoy, M. Dresden, Statistical
mechanics of the XY model. I, Phys. Rev. A 2, 1075 (1970).
"""

from __future__ import annotations

import numpy as np


def open_chain(qubits, field, time):
    """Return <X_j> for each site and <Z_j Z_{j+1}> for each bond of an open chain."""
    site, bond = 2 * np.arange(qubits), 2 * np.arange(qubits - 1) + 1
    form = np.zeros((2 * qubits, 2 * qubits))
    form[site, site + 1] = -field
    form[bond, bond + 1] = -1.0
    form -= form.T
    start = np.zeros_like(form)
    start[site, site + 1] = 1.0
    start -= start.T
    frequencies, modes = np.linalg.eigh(1j * form)
    turn = ((modes * np.exp(-2j * frequencies * time)) @ modes.conj().T).real
    now = turn @ start @ turn.T
    return now[site, site + 1], now[bond, bond + 1]


def periodic_chain(qubits, field, time):
    """Return the mean of <X_j> over a ring of even length."""
    momentum = np.pi * (2 * np.arange(1, qubits + 1) - 1 - qubits) / qubits
    energy = 2 * np.sqrt(1 + field**2 - 2 * field * np.cos(momentum))
    cosine, sine = 2 * (field - np.cos(momentum)) / energy, 2 * np.sin(momentum) / energy
    return np.mean(cosine**2 + sine**2 * np.cos(2 * energy * time))
