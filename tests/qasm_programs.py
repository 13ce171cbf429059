"""Drawn OpenQASM 3 programs: registers, aliases, gate definitions, loops, modifiers, constant expressions."""

from __future__ import annotations

from hypothesis import strategies as st

FIXED = {
    1: ["x", "y", "z", "h", "s", "sdg", "t", "tdg", "sx", "id"],
    2: ["cx", "cy", "cz", "ch", "swap"],
    3: ["ccx", "cswap"],
}
TURNED = {
    ("rx", 1): 1,
    ("ry", 1): 1,
    ("rz", 1): 1,
    ("p", 1): 1,
    ("u1", 1): 1,
    ("u2", 1): 2,
    ("u3", 1): 3,
    ("U", 1): 3,
    ("cp", 2): 1,
    ("crx", 2): 1,
    ("cry", 2): 1,
    ("crz", 2): 1,
    ("cu", 2): 4,
}
QUBITS = ["a[0]", "a[1]", "a[-1]", "b", "both[1]", "both[0]"]
PLACES = {"a[0]": 0, "a[1]": 1, "a[-1]": 1, "b": 2, "both[1]": 0, "both[0]": 2}
HEAD = """OPENQASM 3.0;
include "stdgates.inc";
const float c = pi / 7;
gate ladder(t) u, v { cx u, v; rz(t) v; cx u, v; }
gate mixed(s, t) u, v { h u; ladder(s + t / 2) v, u; inv @ s v; ctrl @ ry(-t) u, v; pow(2) @ h u; }
gate looped(t) u, v {
  for int k in [0:3] { rz(t + k / 4.0) u; h u; if (k % 2 == 0) { cx u, v; } else s v; }
  for int k in [1:7] { rx(t) v; cx v, u; }
  for uint m in {2, 5} for int k in [m:-1:1] if (t < 0 || k == m) ladder(t * k) u, v;
}
qubit[2] a;
qubit b;
let both = b ++ a[0:0];
"""

numbers = st.sampled_from(
    [
        "0.3",
        "-1.25",
        "pi/2",
        "-pi/4",
        "c",
        "2*c - 0.5",
        "sqrt(2.0)**3",
        "sin(c)*tau",
        "-0.5**2",
        "1e-3",
        "3*pi/2",
        "0.0",
    ]
)


@st.composite
def calls(draw, variable=None, depth=0):
    """One gate with its modifiers on different qubits."""
    angle = numbers if variable is None else numbers | st.just(f"0.1*{variable} + c")
    kind = draw(st.integers(0, 3))
    if kind == 0:
        size = draw(st.sampled_from([1, 1, 2, 2, 3]))
        name, parameters = draw(st.sampled_from(FIXED[size])), 0
    elif kind == 1:
        (name, size), parameters = draw(st.sampled_from(sorted(TURNED.items())))
    else:
        name, size, parameters = draw(
            st.sampled_from([("ladder", 2, 1), ("mixed", 2, 2), ("looped", 2, 1), ("rx", 1, 1), ("rz", 1, 1)])
        )
    modifiers = []
    for _ in range(draw(st.sampled_from([0, 0, 0, 1, 2]))):
        choice = draw(st.sampled_from(["inv", "pow(2)", "pow(-3)", "pow(0)", "ctrl", "negctrl", "root"]))
        if choice == "root":
            # Roots of gates whose rotations commute, or that are diagonal on all qubits but one, are what is promised.
            if not modifiers and (
                size == 1 or name in ("cx", "cz", "cy", "swap", "ladder", "crz", "cp", "ccx", "ch", "cu")
            ):
                modifiers.append(f"pow({draw(st.sampled_from(['0.5', '-0.3', '1.7']))})")
        elif choice in ("ctrl", "negctrl"):
            if size < 3:
                modifiers.insert(0, choice)
                size += 1
        else:
            modifiers.insert(0, choice)
    names = draw(st.permutations(QUBITS))
    chosen, used = [], set()
    for qubit in names:
        if PLACES[qubit] not in used and len(chosen) < size:
            chosen.append(qubit)
            used.add(PLACES[qubit])
    angles = "(" + ", ".join(draw(angle) for _ in range(parameters)) + ")" if parameters else ""
    return "".join(f"{modifier} @ " for modifier in modifiers) + f"{name}{angles} {', '.join(chosen)};"


@st.composite
def statements(draw, variable=None, depth=0):
    """Gates, broadcast ones, global phases, barriers, and loops of them."""
    kind = draw(st.integers(0, 9))
    if kind == 0 and depth < 2:
        body = draw(st.lists(statements(depth=depth + 1), max_size=4))
        inner = f"k{depth}"
        span = draw(st.sampled_from(["[0:2]", "[1:2:6]", "[3:-1:1]", "{0, 4, 4}", "[0:12]"]))
        body += draw(st.lists(calls(variable=inner), max_size=1))
        return f"for int {inner} in {span} {{ {' '.join(body)} }}"
    if kind == 3 and depth < 2:
        counted = [] if variable is None else [f"{variable} % 3 == 1", f"{variable} >= 2 && c < 1"]
        condition = draw(st.sampled_from(["true", "c < 0.3", "!(2 != 2)", *counted]))
        bodies = [" ".join(draw(st.lists(statements(variable, depth + 1), max_size=3))) for _ in range(2)]
        other = f" else {{ {bodies[1]} }}" if draw(st.booleans()) else ""
        return f"if ({condition}) {{ {bodies[0]} }}{other}"
    if kind == 1:
        return draw(st.sampled_from(["h a;", "rx(c) a;", "cx a, b;", "swap both, a[1];", "barrier a;", "h b; sdg a;"]))
    if kind == 2:
        return f"gphase({draw(numbers)});"
    return draw(calls(variable=variable))


@st.composite
def programs(draw, max_size=10):
    return HEAD + "\n".join(draw(st.lists(statements(), max_size=max_size))) + "\n"
