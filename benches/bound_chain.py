"""How long does a proven bound of order 4 take on a chain of 100 qubits, without a state?

A Heisenberg chain in a random field (invented), even and odd bonds and the field as parts, Suzuki's formula of order 4.
``python benches/bound_chain.py [QUBITS] [FORMULA]`` prints seconds, the bound, and the steps it proves for an error of 1e-3 at
a time of one tenth of the number of qubits.
"""

from __future__ import annotations

import sys
import time

import numpy as np

import trueturn as tt


def main() -> None:
    """Bound, then search the step count; the second costs nothing beside the first."""
    qubits = int(sys.argv[1]) if len(sys.argv) > 1 else 100
    formula = sys.argv[2] if len(sys.argv) > 2 else "suzuki-4"
    field = np.random.default_rng(1).uniform(-1.0, 1.0, qubits)
    chain = tt.model.heisenberg(tt.lattice.chain(qubits), 1.0, z=field)
    partition = tt.Partition.of(chain, "bond")
    for inputs in ("random", "worst"):
        start, used = time.perf_counter(), time.process_time()
        found = tt.bound(formula, partition, qubits / 10.0, 1000, inputs=inputs)
        steps = tt.steps_by_bound(formula, partition, qubits / 10.0, 1e-3, inputs=inputs)
        print(
            f"{formula}, {qubits} qubits, {inputs:<6} inputs: {time.perf_counter() - start:6.2f} s "
            f"({time.process_time() - used:.2f} s of processor), bound at 1000 steps {found.value:.3e}, "
            f"{steps} steps proven for 1e-3; {found.theorem}; norms: {found.route}"
        )


if __name__ == "__main__":
    main()
