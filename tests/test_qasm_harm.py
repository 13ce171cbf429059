"""Texts that are meant to do harm: refused at once and in little memory; large ones are read in linear time."""

from __future__ import annotations

import json
import subprocess
import sys
import time

import pytest

import trueturn as tt
from trueturn.errors import QasmError

V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'


NESTED = 20_000
HOSTILE = {
    "brackets": f"{V3}qubit q; rz({'(' * NESTED}1{')' * NESTED}) q;",
    "signs": f"{V3}qubit q; rz({'-' * NESTED}1) q;",
    "blocks": f"{V3}qubit q; {'for int i in [0:1] {' * NESTED}",
    "sums": f"{V3}qubit q; rz({'1+' * NESTED}1) q;",
    "whole exponent": f"{V3}qubit q; rz(2**2**2**2**2**2) q;",
    "exponent": f"{V3}qubit q; rz(1e999999999) q;",
    "power": f"{V3}qubit[2] q; pow(1000000000000) @ ch q[0], q[1];",
    "loop": f"{V3}qubit q; for int i in [0:1000000000] {{ rz(0.1*i) q; }}",
    "nested loops": f"{V3}qubit q; for int i in [0:9999] {{ for int j in [0:9999] {{ rz(0.1*i + j) q; }} }}",
    "longest loop": f"{V3}qubit q; for int i in [-9223372036854775807:9223372036854775807] {{ rx(i) q; }}",
    "register": f"{V3}qubit[1000000000] q;",
    "registers": V3 + "".join(f"qubit q{k};" for k in range(NESTED)),
    "gates that double": f"{V3}gate g0 a {{ h a; }}\n"
    + "".join(f"gate g{k} a {{ g{k - 1} a; g{k - 1} a; }}\n" for k in range(1, 60))
    + "qubit q; g59 q;",
    "gates in gates": f"{V3}gate g0 a {{ h a; }}\n"
    + "".join(f"gate g{k} a {{ g{k - 1} a; }}\n" for k in range(1, 5000))
    + "qubit q; g4999 q;",
    "controls": f"{V3}qubit[128] q; ctrl(127) @ x {','.join(f'q[{k}]' for k in range(128))};",
    "aliases": f"{V3}qubit[99] q; let a0 = q ++ q;" + "".join(f"let a{k + 1} = a{k} ++ a{k};" for k in range(60)),
    "open body": f"{V3}gate g a {{ {'h a;' * NESTED}",
    "modifiers": f"{V3}qubit q; {'inv @ ' * NESTED} x q;",
    "digits": f"{V3}qubit q; rz({'1' * NESTED}) q;",
    "operands": f"{V3}qubit q; cx {'q,' * NESTED} q;",
    "open text": f'{V3}include "{"a" * NESTED}',
    "branches": f"{V3}qubit q; {'if (true) ' * NESTED} x q;",
    "loop in a gate": f"{V3}gate g(t) a {{ for int i in [0:1000000000] {{ rz(t*i) a; }} }} qubit q; g(0.1) q;",
    "loops in gates": f"{V3}gate g0(t) a {{ rz(t) a; }}\n"
    + "".join(f"gate g{k}(t) a {{ for int i in [0:9] {{ g{k - 1}(t*i) a; }} }}\n" for k in range(1, 60))
    + "qubit q; g59(0.1) q;",
    "powers of a loop": f"{V3}gate g a {{ for int i in [1:99] {{ h a; t a; }} }} qubit[2] q; "
    "ctrl @ pow(9007199254740991) @ g q[0], q[1];",
    "empty loop in a gate": f"{V3}gate g a {{ for int i in [0:9000000000] {{ if (i < 0) {{ x a; }} }} }} qubit q; g q;",
    "surrogate": f"{V3}qubit \ud800;",
}


# A text is refused within a second of an idle machine. Of a loaded one it may get a fifth: the wall clock has that margin, the
# processor's time has none. A reader that hangs is ended by the subprocess's own limit.
PROMISED, LOADED = 1.0, 5.0
ROOM = 200 << 20

HARM = """
import json, resource, sys, time
sys.path[:0] = json.loads(sys.argv[1])
import test_qasm_harm as harmful, trueturn as tt
texts = harmful.HOSTILE
tt.read_qasm(harmful.V3 + "qubit q; h q;")  # what is set up once is no text's
with open("/proc/self/statm") as file:
    base = int(file.read().split()[0]) * resource.getpagesize()
resource.setrlimit(resource.RLIMIT_AS, (base + harmful.ROOM, base + harmful.ROOM))
found = {}
for name, text in texts.items():
    wall, spent = time.perf_counter(), time.process_time()
    try:
        tt.read_qasm(text)
        how = "read"
    except tt.errors.QasmError as error:
        how = f"line {error.line}"
    except BaseException as error:
        how = type(error).__name__
    found[name] = how, time.perf_counter() - wall, time.process_time() - spent
print(json.dumps(found))
"""


@pytest.fixture(scope="module")
def harm():
    """How each harmful text ends in an interpreter that may take 200 MB of addresses beyond what it has."""
    command = [sys.executable, "-c", HARM, json.dumps(sys.path)]
    run = subprocess.run(command, capture_output=True, text=True, check=False, timeout=30 + LOADED * len(HOSTILE))
    assert run.returncode == 0, run.stderr[-2000:]
    return json.loads(run.stdout)


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="address space is read from /proc")
@pytest.mark.parametrize("name", HOSTILE)
def test_harmful_texts_are_refused_at_once_and_in_little_memory(harm, name):
    how, wall, spent = harm[name]
    assert how.startswith("line ")
    assert wall < LOADED * PROMISED
    assert spent < PROMISED


def test_the_deepest_gates_that_are_read_do_not_overflow_the_stack():
    loops = "".join(f"for int i{k} in [0:0] {{ " for k in range(50))
    text = f"gate g0(t) a {{ {loops} rz(t + i0) a; {'} ' * 50} }}\n"
    text += "".join(f"gate g{k}(t) a {{ inv @ pow(1) @ g{k - 1}(t) a; }}\n" for k in range(1, 12))
    text += "".join(f"gate g{k}(t) a {{ if (t > 0) {{ inv @ g{k - 1}(t) a; }} }}\n" for k in range(12, 81))
    assert tt.read_qasm(f"{V3}{text} qubit q; g80(0.5) q;").angle_totals().one_norm() == 0.25
    with pytest.raises(QasmError, match="gates call each other more than 200 deep"):
        tt.read_qasm(
            f"{V3}gate g0 a {{ {'if (true) { ' * 90} x a; {'} ' * 90} }}"
            + "".join(f"gate g{k} a {{ if (true) {{ g{k - 1} a; }} }}\n" for k in range(1, 70))
        )


@pytest.mark.heavy
def test_time_and_memory_are_linear():
    step = "cx q[{0}], q[{1}]; rz({2}) q[{1}]; cx q[{0}], q[{1}];\n"
    lines = [step.format(k % 19, k % 19 + 1, 0.001 * k + 0.1) for k in range(100_000)]
    seconds = []
    for count in (25_000, 100_000):
        text = f"{V3}qubit[20] q;" + "".join(lines[:count])
        before = time.process_time()
        assert tt.read_qasm(text).count == count
        seconds.append(time.process_time() - before)
    # 300,000 gates; 10^6 in 30 s allows 9 s. Four times the text may take six times as long, caches included.
    assert seconds[1] < 9.0
    assert seconds[1] < 6.0 * seconds[0] + 0.5
