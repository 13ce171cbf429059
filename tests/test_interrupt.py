"""Ctrl-C: once stops after the pass with a valid state, twice stops at once and spoils it."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys

import numpy as np
import pytest

import trueturn as tt

# A long run; the child reports what became of its state.
CHILD = """
import json, sys, threading, time
import numpy as np
import trueturn as tt

qubits = int(sys.argv[1])
state = tt.State.product("+" * qubits)
bonds = [(1 << (7 * q + 3) % qubits) | (1 << q) for q in range(qubits)]
circuit = tt.Rotations(bonds * 2, [0] * qubits + bonds, [0.1] * 2 * qubits, qubits).times(10**6)
started = []
def progress(done, total):
    if not started:
        started.append(time.monotonic())
        print("running", flush=True)
out = {}
try:
    state.apply(circuit, threads=2, progress=progress)
    out["ended"] = "finished"
except KeyboardInterrupt:
    out["ended"] = "interrupted"
try:
    out["norm"] = state.norm()
except tt.errors.StateSpoiledError as error:
    out["spoiled"] = str(error)
print(json.dumps(out), flush=True)
"""


def _interrupted(qubits, signals):
    child = subprocess.Popen(
        [sys.executable, "-c", CHILD, str(qubits)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    assert child.stdout.readline().strip() == "running"
    child.send_signal(signal.SIGINT)
    # A second signal must find the first one heard: the acknowledgement says so.
    while "stopping after the current pass" not in (line := child.stderr.readline()):
        assert child.poll() is None or line, "the child ended without an acknowledgement"
    if signals == 2:
        child.send_signal(signal.SIGINT)
    out, _ = child.communicate(timeout=120)
    return json.loads(out)


def test_one_interrupt_stops_after_the_pass_and_leaves_a_unit_vector():
    found = _interrupted(18, 1)
    assert found["ended"] == "interrupted"
    # 40 rotations a step, at most some 10^5 of them before the signal, 5 u each.
    assert abs(found["norm"] - 1.0) < 1e5 * 5 * 1.2e-16


@pytest.mark.heavy
def test_two_interrupts_stop_inside_the_pass_and_spoil_the_state():
    # At 26 qubits one pass lasts a second or more, so that the second signal usually finds it running; where the first one
    # came at its very end, the run has stopped in good order, and another try is due.
    for _ in range(4):
        found = _interrupted(26, 2)
        assert found["ended"] == "interrupted"
        if "spoiled" in found:
            assert "make it again" in found["spoiled"]
            return
        assert abs(found["norm"] - 1.0) < 1e-9
    pytest.fail("four times in a row the second signal found no pass running")


def test_an_exception_in_the_progress_callback_stops_the_run_and_passes_through():
    state = tt.State.product("+" * 18)
    circuit = tt.Rotations([3 << q for q in range(17)], [0] * 17, [0.1] * 17, 18).times(10**6)

    class Enough(Exception):
        pass

    def progress(done, total):
        raise Enough

    with pytest.raises(Enough):
        state.apply(circuit, progress=progress)
    assert np.isfinite(state.norm())
    state.rotate("X_0", 0.1)


def test_progress_counts_up_to_the_passes_of_the_run():
    seen = []
    state = tt.State.product("+" * 18)
    circuit = tt.Rotations([3 << q for q in range(17)], [0] * 17, [0.1] * 17, 18).times(200)
    state.apply(circuit, progress=lambda done, total: seen.append((done, total)))
    assert seen and all(0 < done <= total == state.last_run.passes for done, total in seen)
    assert [done for done, _ in seen] == sorted(done for done, _ in seen)


def test_an_interrupted_command_line_exits_with_130(tmp_path):
    job = tmp_path / "job.toml"
    job.write_text(
        '[system]\nmodel = "heisenberg"\nlattice = "ring"\nsites = 20\ncoupling = 1.0\n'
        '[start]\nproduct = "' + "01" * 10 + '"\n'
        '[target]\ntimes = [50.0]\ntolerance = 0.001\n[target.observables]\nm = "Z_0"\n'
        '[[candidate]]\nformula = "strang"\n'
    )
    child = subprocess.Popen(
        [sys.executable, "-m", "trueturn", "audit", str(job), "--json"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, "PYTHONUNBUFFERED": "1"},
    )
    try:
        child.wait(timeout=6)
        pytest.fail("the job ended before it could be interrupted: " + child.stderr.read())
    except subprocess.TimeoutExpired:
        child.send_signal(signal.SIGINT)
    out, err = child.communicate(timeout=60)
    assert child.returncode == 130
    assert out == "" and "Traceback" not in err
