"""Equal bits for any number of threads and any instruction set, and proof that the threads ran."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import threading
from pathlib import Path

import numpy as np
import pytest

import fixed_circuit
import trueturn as tt
from trueturn import _native

# SHA-256 of the little-endian amplitudes after each circuit of `fixed_circuit` on the product state 01+-01+-…
COMMITTED = {
    ("mixed", "complex128"): "5f442f4cfc0fafdc26a86d84b2396014119c5ff6add600c6e3a0dafb3a8564a7",
    ("mixed", "complex64"): "0214e39cabb98197cb0a97388367c201e70e613d04c44576965e90f171092e99",
    ("ladder", "complex128"): "0b1558833b35528cafcd583573939f6c608856f688a9d5a9e98d4e46532b9641",
    ("ladder", "complex64"): "c59735051a9a9d236a691e4c8fa778202a18dcb8eea92803fab39bb5c2ec5535",
    ("long", "complex128"): "2af6d8f73bfcde63f28b418644116cf4fc3efbe247d9a46295a63828c2dbdbb8",
    ("long", "complex64"): "c6d689e6105b9a05e4b2c7b2712eba1f11f4cb3adf4175f441d9a34cab5e66a9",
    ("random", "complex128"): "eb0d3c1da2c3456138a557ad2ca780e59a0dbd3016e38f59068ba11cf9f3f863",
    ("random", "complex64"): "ff7b6b2416f6055a6a99ef63a0f91016764806432afab5bd3d450dab2b1dabfd",
}


@pytest.mark.parametrize("threads", [1, 2, 3, 5, 7])
@pytest.mark.parametrize(("name", "dtype"), COMMITTED)
def test_amplitudes_have_the_committed_bits_for_any_number_of_threads(name, dtype, threads):
    found, run = fixed_circuit.digest(threads, dtype, name)
    assert found == COMMITTED[name, dtype]
    # Every worker meets the others at the end of each pass, so this many really took part in all of them.
    assert run.workers == threads
    assert run.passes >= 3


def test_workers_are_threads_of_the_process():
    state = tt.State.random(20, 1)
    seen = []

    def watch(_done, _total):
        seen.append(len(os.listdir("/proc/self/task")))

    before = len(os.listdir("/proc/self/task"))
    state.apply(fixed_circuit.circuit(), threads=5, progress=watch)
    # Four workers join the one that carries the run, which is itself apart from the watching caller.
    assert max(seen) >= before + 5


@pytest.mark.parametrize("name", _native.instruction_sets()[0])
def test_every_instruction_set_gives_the_committed_bits(name):
    script = Path(fixed_circuit.__file__)
    run = subprocess.run(
        [sys.executable, str(script), "2"],
        env={**os.environ, "TRUETURN_ISA": name},
        capture_output=True,
        text=True,
        check=True,
    )
    found = {(name, dtype): digest for name, dtype, digest, *_ in map(str.split, run.stdout.splitlines())}
    assert found == COMMITTED


def test_an_unknown_instruction_set_is_refused_by_name():
    code = "import trueturn as tt; tt.State.product('0' * 3).rotate('X_0', 0.1)"
    run = subprocess.run(
        [sys.executable, "-c", code], env={**os.environ, "TRUETURN_ISA": "abacus"}, capture_output=True, text=True
    )
    assert run.returncode != 0
    assert "ArgumentError: TRUETURN_ISA" in run.stderr and "abacus" in run.stderr and "baseline" in run.stderr


def test_sums_have_equal_bits_for_any_number_of_threads():
    state, other = tt.State.random(17, 3), tt.State.random(17, 4)
    observable = tt.Operator("0.3 X_0 X_16 + 0.7 Z_3 Y_9 - 1.1 Z_15 + 0.2 Y_2", qubits=17)
    found = {
        (
            state.norm(threads=n),
            state.overlap(other, threads=n),
            state.distance(other, threads=n),
            state.expectation(observable, threads=n),
            state.variance(observable, threads=n),
        )
        for n in (1, 2, 3, 5, 7)
    }
    assert len(found) == 1


def test_references_have_equal_bits_for_any_number_of_threads():
    chain = tt.model.heisenberg(tt.lattice.chain(16), 1.0, z=0.3)
    start = tt.State.product("01" * 7 + "++")
    hashes = set()
    for threads in (1, 2, 3):
        kept = tt.reference(chain, start, [0.4], threads=threads).states[0]
        hashes.add(hashlib.sha256(kept.amplitudes.tobytes()).hexdigest())
    assert len(hashes) == 1


def test_the_lock_is_released_while_the_engine_works():
    state = tt.State.random(20, 2)
    ticks = []
    done = threading.Event()

    def count():
        while not done.is_set():
            ticks.append(1)
            done.wait(0.001)

    other = threading.Thread(target=count)
    other.start()
    state.apply(fixed_circuit.circuit(), threads=1)
    done.set()
    other.join()
    # With the lock held throughout, the other thread would tick once or twice before and after.
    assert len(ticks) > 10


def test_thread_counts_come_from_the_call_then_the_block_then_the_environment(monkeypatch):
    state = tt.State.random(16, 2)
    circuit = tt.Rotations([1], [0], [0.1], 16)
    monkeypatch.setenv("TRUETURN_NUM_THREADS", "3")
    state.apply(circuit)
    assert state.last_run.workers == 3
    with tt.threads(2):
        state.apply(circuit)
        assert state.last_run.workers == 2
        state.apply(circuit, threads=5)
        assert state.last_run.workers == 5


def test_small_states_run_on_one_thread_whatever_is_asked():
    state = tt.State.random(6, 2)
    state.apply(tt.Rotations([1], [0], [0.1], 6), threads=7)
    assert state.last_run.workers == 1


@pytest.mark.parametrize("count", [0, -1, 1.5, True, 5000, "two"])
def test_impossible_thread_counts_are_refused(count):
    with pytest.raises(tt.errors.ArgumentError, match=r"threads: not a thread count .* whole number"):
        tt.State.random(3, 1).apply(tt.Rotations([1], [0], [0.1], 3), threads=count)


def test_an_impossible_environment_variable_is_named(monkeypatch):
    monkeypatch.setenv("TRUETURN_NUM_THREADS", "many")
    with pytest.raises(tt.errors.ArgumentError, match=r"TRUETURN_NUM_THREADS.*'many'"):
        tt.State.random(3, 1).norm()


@pytest.mark.skipif(not hasattr(os, "fork"), reason="the system has no fork")
def test_a_forked_child_evolves_on_threads_of_its_own():
    state = tt.State.random(16, 5)
    circuit = tt.Rotations([3, 1 << 15], [0, 5], [0.1, 0.2], 16)
    expected = state.copy()
    expected.apply(circuit, threads=2)
    state_in_parent = state.copy()
    state_in_parent.apply(circuit, threads=2)
    child = os.fork()
    if child == 0:
        code = 1
        try:
            state.apply(circuit, threads=2)
            code = 0 if np.array_equal(state.amplitudes, expected.amplitudes) else 2
        finally:
            os._exit(code)
    _, status = os.waitpid(child, 0)
    assert os.waitstatus_to_exitcode(status) == 0
