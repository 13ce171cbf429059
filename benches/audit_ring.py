"""How long does an audit of a 20-qubit Heisenberg ring take?

Three candidates, each a search for the least step count at 1e-3 on three observables at t = 5, against a reference
certified to 1e-10. ``python benches/audit_ring.py [QUBITS]`` prints seconds by stage and the table.
"""

from __future__ import annotations

import sys
import time

import trueturn as tt


def main() -> None:
    """Run the audit and print where the time went."""
    qubits = int(sys.argv[1]) if len(sys.argv) > 1 else 20
    ring = tt.model.heisenberg(tt.lattice.ring(qubits), 1.0)
    observables = {
        "edge": tt.Operator("Z_0", qubits=qubits),
        "bond": tt.Operator("Z_0 Z_1", qubits=qubits),
        "exchange": tt.Operator("X_3 X_4", qubits=qubits),
    }
    start = time.perf_counter()
    found = tt.audit(
        ring,
        tt.State.product("01" * (qubits // 2)),
        [5.0],
        [tt.Candidate(name) for name in ("lie", "strang", "suzuki-4")],
        1e-3,
        observables=observables,
        reference_tolerance=1e-10,
    )
    print(found)
    for stage, seconds in found.seconds.items():
        print(f"{stage:<12} {seconds:7.1f} s")
    print(f"{'in all':<12} {time.perf_counter() - start:7.1f} s")


if __name__ == "__main__":
    main()
