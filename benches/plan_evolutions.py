"""How many circuits does a plan run for each answer, and how much work is that?

Plans of a Heisenberg ring in a random field (invented, seeded), four formulas by three rules, for a range of tolerances.
``python benches/plan_evolutions.py [QUBITS]`` prints a line for each tolerance: answers, circuits that were run, circuits for
each answer, and steps that were run in units of the answer. Five circuits, r - 1, r, r + 1, √2 r and 2r, 6.4 answers of
work, are what the definition of the least step count asks for; brute force runs all 2r circuits up to 2r.
"""

from __future__ import annotations

import random
import sys
import time

import trueturn as tt

FORMULAS = ("lie", "strang", "suzuki-4", "blanes-moan-6")
RULES = ("bond", "axis", "commuting")


def main() -> None:
    """Make the plans and print what they took."""
    qubits = int(sys.argv[1]) if len(sys.argv) > 1 else 8
    draw = random.Random(1)
    field = [draw.uniform(-1.0, 1.0) for _ in range(qubits)]
    ring = tt.model.heisenberg(tt.lattice.ring(qubits), 1.0, z=field)
    start = tt.State.product("01" * (qubits // 2) + "0" * (qubits % 2))
    print(
        f"Heisenberg ring of {qubits} in a random field, t = 2, state error, {len(FORMULAS)} formulas by {len(RULES)} rules"
    )
    print("tolerance  rows  answers  circuits  per answer  work per answer  brute force   seconds")
    for tolerance in (1e-1, 1e-2, 1e-3, 1e-4):
        began = time.perf_counter()
        found = tt.plan(ring, start, 2.0, FORMULAS, RULES, tolerance, "state", bounds=False)
        taken = time.perf_counter() - began
        own = [row for row in found.rows if not row.same_as]
        work = sum(trial.steps for row in own for trial in row.trials) / sum(row.steps for row in own)
        brute = sum(2 * row.steps for row in own)
        print(
            f"{tolerance:9.0e}  {len(found.rows):4d}  {len(own):7d}  {found.evolutions:8d}  "
            f"{found.evolutions / len(own):10.1f}  {work:15.1f}  {brute:11d}  {taken:8.1f}"
        )


if __name__ == "__main__":
    main()
