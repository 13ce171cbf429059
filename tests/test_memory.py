"""Requests that do not fit are refused before allocation, and what is needed is what was said."""

from __future__ import annotations

import subprocess
import sys

import pytest

import trueturn as tt
from trueturn import _memory


@pytest.mark.parametrize(
    "make",
    [
        lambda: tt.State.product("0" * 70),
        lambda: tt.State.computational(0, 60),
        lambda: tt.State.random(50, seed=1),
    ],
    ids=["product", "computational", "random"],
)
def test_states_beyond_memory_are_refused_with_the_largest_size_that_fits(make):
    with pytest.raises(tt.errors.MemoryRefusedError, match=r"does not fit in memory.*at most") as refusal:
        make()
    error = refusal.value
    assert isinstance(error, MemoryError)
    assert 16 << error.largest_qubits <= error.available < 16 << (error.largest_qubits + 1)
    assert error.needed > error.available


def test_a_reference_and_an_audit_that_do_not_fit_are_refused_before_they_start(monkeypatch):
    chain = tt.model.ising(tt.lattice.chain(12), zz=1.0, x=1.0)
    start = tt.State.product("0" * 12)
    monkeypatch.setattr(_memory, "available_bytes", lambda: 2 * (16 << 12))
    with pytest.raises(tt.errors.MemoryRefusedError, match=r"reference: .*at most \d+ qubits fit"):
        tt.reference(chain, start, [1.0])
    with pytest.raises(tt.errors.MemoryRefusedError, match=r"audit: .*at most \d+ qubits fit"):
        tt.audit(chain, start, [1.0], [tt.Candidate("lie")], 1e-2, observables={"m": tt.Operator("Z_0", qubits=12)})


PEAK = """
import resource, sys
import trueturn as tt

qubits = int(sys.argv[1])
chain = tt.model.heisenberg(tt.lattice.ring(qubits), 1.0)
start = tt.State.product("01" * (qubits // 2))
tt.reference(chain, start, [0.5], observables={"m": tt.Operator("Z_0", qubits=qubits)})
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024)
"""


@pytest.mark.heavy
def test_a_reference_at_one_time_peaks_at_four_state_vectors_and_200_megabytes():
    qubits = 24
    run = subprocess.run([sys.executable, "-c", PEAK, str(qubits)], capture_output=True, text=True, check=True)
    assert int(run.stdout) <= 4 * (16 << qubits) + 200_000_000
