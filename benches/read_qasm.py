"""How long does reading 10^6 gates take, and how long the reference parser of the standard for a part of them?

Run on an otherwise idle machine: ``python benches/read_qasm.py [GATES]``. The circuit is invented: random gates on 20
qubits, a third each of cx, rz and h, and then ladders of cx, rz, cx.
"""

from __future__ import annotations

import random
import resource
import sys
import time

import trueturn as tt

HEAD = 'OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit[20] q;\n'


def random_gates(count: int) -> str:
    rng = random.Random(1)
    lines = []
    for place in range(count):
        qubit = rng.randrange(19)
        kinds = (f"cx q[{qubit}], q[{qubit + 1}];", f"rz({rng.random()!r}) q[{qubit}];", f"h q[{qubit}];")
        lines.append(kinds[place % 3])
    return HEAD + "\n".join(lines)


def ladders(count: int) -> str:
    rng = random.Random(2)
    step = "cx q[{0}], q[{1}];\nrz({2!r}) q[{1}];\ncx q[{0}], q[{1}];\n"
    return HEAD + "".join(step.format(place % 19, place % 19 + 1, rng.random()) for place in range(count // 3))


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000
    for name, text in (("random gates", random_gates(count)), ("ladders", ladders(count))):
        before = time.perf_counter(), time.process_time()
        rotations = tt.read_qasm(text)
        wall, own = time.perf_counter() - before[0], time.process_time() - before[1]
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
        print(
            f"{name:13} {count} gates, {len(text) / 1e6:.0f} MB: {wall:.2f} s ({own:.2f} s of processor time), "
            f"{rotations.count} rotations, peak {peak:.0f} MiB"
        )
    try:
        import openqasm3
    except ImportError:
        print("reference parser not installed: pip install 'trueturn[qasm]'")
        return
    part = max(1, count // 100)
    text = random_gates(part)
    before = time.perf_counter()
    openqasm3.parse(text)
    print(f"reference parser, {part} gates: {time.perf_counter() - before:.2f} s")


if __name__ == "__main__":
    main()
