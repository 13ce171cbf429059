"""How much faster, and smaller, is a certified reference than scipy's expm_multiply?

``python benches/reference.py [QUBITS ...]`` evolves a product state of a Heisenberg ring with fields to t = 1 in a fresh
process for each way, and prints the times, their quotient, and the memory beyond the interpreter's with its quotient.
Times are the best of three; the first one, which finds nothing at hand that was computed before, is printed too.
Building scipy's matrix is not counted in its time. The tolerance of the reference is 1e-10, proven; expm_multiply aims at
2^-53, without a bound.
"""

from __future__ import annotations

import json
import resource
import subprocess
import sys
import time

import numpy as np
import scipy.sparse.linalg

import trueturn as tt


def problem(qubits: int) -> tuple[tt.Operator, tt.State]:
    """Return the ring and its start."""
    fields = [0.3 * (1.0 + q / qubits) for q in range(qubits)]
    ring = tt.model.heisenberg(tt.lattice.ring(qubits), 1.0, z=fields)
    return ring, tt.State.product("01+-" * (qubits // 4) + "0" * (qubits % 4))


def run(way: str, qubits: int, threads: int) -> dict[str, float]:
    """Evolve in this process; times are the best of three, memory is the peak."""
    ring, start = problem(qubits)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    times = []
    if way == "scipy":
        matrix = -1j * ring.sparse()
        for _ in range(3):
            began = time.perf_counter()
            final = scipy.sparse.linalg.expm_multiply(matrix, start.amplitudes)
            times.append(time.perf_counter() - began)
        applications = 0
    else:
        with tt.threads(threads):
            for _ in range(3):
                began = time.perf_counter()
                found = tt.reference(ring, start, [1.0], 1e-10)
                times.append(time.perf_counter() - began)
        final, applications = found.states[0].amplitudes, found.certificate.applications
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    digest = [float(np.vdot(start.amplitudes, final).real), float(np.vdot(start.amplitudes, final).imag)]
    return {
        "seconds": min(times),
        "first": times[0],
        "memory": (peak - before) / 1024,
        "applications": applications,
        "digest": digest,
    }


def main(sizes: list[int]) -> None:
    """Compare for each size, two threads and one."""
    for qubits in sizes:
        found = {}
        for way, threads in (("scipy", 1), ("ours", 1), ("ours", 2)):
            command = [sys.executable, __file__, "--one", way, str(qubits), str(threads)]
            answer = subprocess.run(command, capture_output=True, text=True, check=True)
            found[way, threads] = json.loads(answer.stdout)
        theirs = found["scipy", 1]
        print(f"{qubits} qubits: expm_multiply {theirs['seconds']:.3f} s, {theirs['memory']:.0f} MiB")
        for threads in (1, 2):
            ours = found["ours", threads]
            assert np.allclose(ours["digest"], theirs["digest"], atol=1e-9)
            print(
                f"  reference, {threads} threads: {ours['seconds']:.4f} s (first {ours['first']:.4f} s), "
                f"{ours['applications']} applications of H, "
                f"{theirs['seconds'] / ours['seconds']:.1f} x faster; {ours['memory']:.0f} MiB, "
                f"1/{theirs['memory'] / ours['memory']:.1f} of the memory"
            )


if __name__ == "__main__":
    if "--one" in sys.argv:
        _, _, way, qubits, threads = sys.argv
        print(json.dumps(run(way, int(qubits), int(threads))))
    else:
        main([int(text) for text in sys.argv[1:]] or [18, 20])
