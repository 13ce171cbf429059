"""Averaged channels as dense superoperators, enumerated outcome by outcome, and distances between channels.

A superoperator acts on row-major vectorised matrices: vec(A ρ B) = (A ⊗ Bᵀ) vec(ρ).
"""

from __future__ import annotations

import itertools

import numpy as np
import scipy.optimize

import oracle
import trueturn as tt


def superoperator(unitary):
    return np.kron(unitary, unitary.conj())


def ideal(operator, time):
    return superoperator(oracle.evolution(operator, time))


def run(formula, parts, time, lift=superoperator):
    """One step of a formula over parts in this order, as a lifted unitary; parts may be anything."""
    total = None
    for stage in formula.stages:
        for part in parts if stage.direction == "forward" else parts[::-1]:
            one = lift(oracle.evolution(part, stage.weight * time))
            total = one if total is None else one @ total
    return total


def directed(formula, partition, time, steps, lift=superoperator):
    orders = (partition.parts, partition.parts[::-1])
    one = sum(run(formula, order, time / steps, lift) for order in orders) / 2
    return np.linalg.matrix_power(one, steps)


def permuted(formula, partition, time, steps, lift=superoperator):
    orders = list(itertools.permutations(partition.parts))
    one = sum(run(formula, order, time / steps, lift) for order in orders) / len(orders)
    return np.linalg.matrix_power(one, steps)


def drift_step(operator, time, draws, probabilities=None, lift=superoperator):
    bare = operator.without_identity()
    if probabilities is None:
        probabilities = np.abs(bare.coefficients) / bare.one_norm()
    total = 0.0
    for x, z, c, p in zip(bare.x_masks, bare.z_masks, bare.coefficients, probabilities, strict=True):
        total = total + p * lift(oracle.rotation(x, z, c * time / (draws * p), operator.qubits))
    return total


def drift(operator, time, draws, probabilities=None, lift=superoperator):
    return np.linalg.matrix_power(drift_step(operator, time, draws, probabilities, lift), draws)


def partly(formula, partition, tail, time, steps, draws, lift=superoperator):
    """The tail is the last part; where its two runs meet inside a step they are one place."""
    parts = [*partition.parts, tail]
    runs = []
    for stage in formula.stages:
        places = range(len(parts)) if stage.direction == "forward" else reversed(range(len(parts)))
        for place in places:
            if runs and runs[-1][0] == place:
                runs[-1][1] += stage.weight
            else:
                runs.append([place, stage.weight])
    one = None
    for place, weight in runs:
        length = weight * time / steps
        drawn = place == len(parts) - 1
        now = drift(tail, length, draws, lift=lift) if drawn else lift(oracle.evolution(parts[place], length))
        one = now if one is None else now @ one
    return np.linalg.matrix_power(one, steps)


def twice(unitary):
    """What U does to two copies of a state: its average gives second moments of expectations."""
    pair = np.kron(unitary, unitary)
    return np.kron(pair, pair.conj())


def expectation(channel, amplitudes, observable):
    density = np.outer(amplitudes, amplitudes.conj())
    return float((observable.reshape(-1).conj() @ channel @ density.reshape(-1)).real)


def choi(channel):
    """Choi matrix with the output first: J[(i,k),(j,l)] = S[(i,j),(k,l)]."""
    size = round(channel.shape[0] ** 0.5)
    return channel.reshape(size, size, size, size).transpose(0, 2, 1, 3).reshape(size**2, size**2)


def trace_norm_at(difference, root):
    """Trace norm of (Δ ⊗ 1) on the purification of ρ = root root†: one lower bound on ‖Δ‖_⋄."""
    size = root.shape[0]
    local = np.kron(np.eye(size), root)
    return float(np.abs(np.linalg.eigvalsh(local @ choi(difference) @ local.conj().T)).sum())


def diamond_from_below(difference):
    """The maximally entangled input."""
    size = round(difference.shape[0] ** 0.5)
    return trace_norm_at(difference, np.eye(size) / size**0.5)


def diamond_from_above(difference):
    """‖Tr_out |J|‖, feasible in the dual of Watrous's semidefinite programme (Theory Comput. 5, 217 (2009), from
    memory): J = P - N with P, N ≥ 0 gives ‖Δ‖_⋄ ≤ ‖Tr_out(P + N)‖."""
    size = round(difference.shape[0] ** 0.5)
    values, vectors = np.linalg.eigh(choi(difference))
    absolute = (vectors * np.abs(values)) @ vectors.conj().T
    return float(np.linalg.eigvalsh(np.einsum("ikil->kl", absolute.reshape((size,) * 4)))[-1])


def one_qubit_diamond(difference):
    """Diamond norm by maximising over ρ in the Bloch ball; the function is concave in ρ, so one maximum is all."""

    def minus(angles):
        radius, theta, phi = np.sin(angles[0]), angles[1], angles[2]
        x, y, z = np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi), np.cos(theta)
        density = (np.eye(2) + radius * np.array([[z, x - 1j * y], [x + 1j * y, -z]])) / 2
        values, vectors = np.linalg.eigh(density)
        root = (vectors * np.sqrt(np.clip(values, 0, None))) @ vectors.conj().T
        return -trace_norm_at(difference, root) * 1e3  # of order one for the optimiser's tolerances

    starts = [(0.0, 0.0, 0.0), (0.7, 1.2, 0.4), (-0.7, 0.3, 2.0)]
    options = {"xatol": 1e-9, "fatol": 1e-9, "maxiter": 4000}
    best = min(scipy.optimize.minimize(minus, start, method="Nelder-Mead", options=options).fun for start in starts)
    return -best / 1e3


def bernstein(variance, norm, count, chance=1e-9):
    """Half-width that the mean of `count` independent values within ±norm exceeds with probability `chance` at most.

    Bernstein: P ≤ 2 exp(-N ε² / (2 σ² + 2 M ε / 3)) with M = 2 norm the largest deviation from the mean; solved for ε.
    S. Bernstein (1924); from memory, as in S. Boucheron, G. Lugosi, P. Massart, Concentration Inequalities (2013),
    section 2.8.
    """
    log = np.log(2 / chance)
    linear = 2 * norm * log / (3 * count)
    return linear + np.sqrt(linear**2 + 2 * variance * log / count)


def random_hamiltonian(generator, qubits, terms):
    masks = generator.choice(4**qubits - 1, size=terms, replace=False) + 1
    x, z = [int(m) & (2**qubits - 1) for m in masks], [int(m) >> qubits for m in masks]
    return tt.Operator.from_masks(x, z, generator.normal(size=terms), qubits)
