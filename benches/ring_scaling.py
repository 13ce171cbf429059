"""How many steps does the Heisenberg ring in a random field need for t = n and an error of 1e-3 in spectral norm?

H = Σ (X X + Y Y + Z Z) on the bonds of a ring of n spins + Σ h_j Z_j, h_j drawn evenly from [-1, 1], three draws
for each n up to 10 and one beyond; parts XX, YY, ZZ-and-fields in that order. This is the benchmark of A. M. Childs,
D. Maslov, Y. Nam, N. J. Ross, Y. Su, PNAS 115, 9456 (2018). ``python benches/ring_scaling.py [LARGEST]`` prints the
least step counts for n = 4 to LARGEST (12) and the laws fitted to all draws. Time grows eightfold with each spin.

The error is ‖S - exp(-iHt)‖₂ of the whole circuit as the library builds it, from dense matrices. All parts conserve
the parity Π Z_j, so each matrix is two blocks, and a column that is a sum of one even and one odd basis state fills both at
once. Repeated blocks are raised to their power by squaring, so that 300 000 steps cost 18 products.
"""

from __future__ import annotations

import platform
import sys
import time
from functools import reduce

import numpy as np
import scipy.linalg
import scipy.sparse.linalg

import trueturn as tt
from trueturn.audit.measure import judge
from trueturn.audit.result import Trial
from trueturn.audit.search import Search, least_steps

TOLERANCE = 1e-3
FORMULAS = ("lie", "strang", "suzuki-4", "suzuki-6")
DRAWS = 3
ALL_DRAWS_UP_TO = 10
EXACT_UP_TO = 1024  # a block larger than this takes Lanczos iteration for its norm instead of all singular values


def ring(n: int, draw: int) -> tt.Operator:
    """Make the Hamiltonian of one draw of fields."""
    fields = np.random.default_rng([n, draw]).uniform(-1.0, 1.0, n)
    return tt.model.heisenberg(tt.lattice.ring(n), 1.0, z=fields.tolist())


class Sectors:
    """Dense matrices in the sectors of even and odd Π Z."""

    def __init__(self, operator: tt.Operator, moment: float) -> None:
        self.qubits = operator.qubits
        odd = np.array([int(index).bit_count() & 1 for index in range(2**self.qubits)], dtype=bool)
        self.places = np.flatnonzero(~odd), np.flatnonzero(odd)
        matrix = operator.sparse()
        self.exact = []
        for places in self.places:
            block = matrix[places][:, places].toarray()
            assert not np.any(block.imag)
            energies, vectors = scipy.linalg.eigh(block.real)
            self.exact.append((vectors * np.exp(-1j * moment * energies)) @ vectors.T)

    def matrices(self, circuit: tt.Rotations) -> list[np.ndarray]:
        """Return both blocks of a circuit."""
        factors = [self._block(body, repeat) for body, repeat in circuit.blocks]
        phase = np.exp(1j * circuit.phase)
        return [phase * reduce(lambda done, then: then @ done, pair) for pair in zip(*factors, strict=True)]

    def _block(self, body: tt.Rotations, repeat: int) -> list[np.ndarray]:
        half = len(self.places[0])
        made = [np.empty((half, half), dtype=complex) for _ in self.places]
        amplitudes = np.empty(2**self.qubits, dtype=complex)
        for column in range(half):
            amplitudes[:] = 0.0
            for places in self.places:
                amplitudes[places[column]] = 1.0
            tt.State.from_array(amplitudes).apply(body, threads=1)
            for matrix, places in zip(made, self.places, strict=True):
                matrix[:, column] = amplitudes[places]
        return [np.linalg.matrix_power(matrix, repeat) for matrix in made]

    def error(self, circuit: tt.Rotations) -> float:
        """Return ‖S - exp(-iHt)‖₂."""
        pairs = zip(self.matrices(circuit), self.exact, strict=True)
        return max(largest_singular_value(ours - exact) for ours, exact in pairs)


def largest_singular_value(matrix: np.ndarray) -> float:
    """Return the spectral norm, for large matrices by Lanczos iteration to nine digits."""
    if len(matrix) <= EXACT_UP_TO:
        return float(scipy.linalg.svdvals(matrix)[0])
    start = np.random.default_rng(1).normal(size=len(matrix))
    return float(scipy.sparse.linalg.svds(matrix, 1, ncv=40, tol=1e-9, v0=start, return_singular_vectors=False)[0])


def least(sectors: Sectors, name: str, partition: tt.Partition, moment: float, first: int) -> Search:
    """Find the least step count of a formula."""
    formula = tt.formula(name)

    def run(steps: int) -> Trial:
        circuit = formula.rotations(partition, moment, steps)
        error = sectors.error(circuit)
        return Trial(steps, (error, error), judge((error, error), TOLERANCE), circuit.two_qubit_gates())

    return least_steps(run, TOLERANCE, formula.order, first=first)


def main() -> None:
    """Measure, fit and print."""
    largest = int(sys.argv[1]) if len(sys.argv) > 1 else 12
    sizes: dict[str, list[int]] = {name: [] for name in FORMULAS}
    counts: dict[str, list[int]] = {name: [] for name in FORMULAS}
    print(f"Python {platform.python_version()}, numpy {np.__version__}, scipy {scipy.__version__}")
    print(f"{'n':>3} {'draw':>4} {'formula':<10} {'steps':>8} {'error':>12} {'runs':>5} {'seconds':>9}")
    cases = [(n, draw) for n in range(4, largest + 1) for draw in range(DRAWS if n <= ALL_DRAWS_UP_TO else 1)]
    for n, draw in cases:
        operator = ring(n, draw)
        partition = tt.Partition.of(operator, "axis")
        sectors = Sectors(operator, float(n))
        for name in FORMULAS:
            first = int(0.9 * tt.fit_steps(sizes[name], counts[name])(n)) if n > 6 else 1
            began = time.perf_counter()
            found = least(sectors, name, partition, float(n), first)
            seconds = time.perf_counter() - began
            error = next(trial.error[1] for trial in found.trials if trial.steps == found.steps)
            sizes[name].append(n)
            counts[name].append(found.steps)
            note = f"  accidental {found.accidental}" if found.accidental else ""
            print(
                f"{n:>3} {draw:>4} {name:<10} {found.steps:>8} {error:>12.6e} {len(found.trials):>5} {seconds:>9.1f}{note}",
                flush=True,
            )
    for name in FORMULAS:
        law = tt.fit_steps(sizes[name], counts[name], "n")
        print(f"\n{name}: {law}\n  at n = 50: {law.predict(50)}")
        for caution in law.cautions():
            print(f"  {caution}")


if __name__ == "__main__":
    main()
