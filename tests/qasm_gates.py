"""OpenQASM text as our writer makes it, taken apart by independent plain lines: gates, unitaries, rotations.

Matrices are those of the standard's library file (phases included); nothing of trueturn is used. Only what the writer
uses is understood: one register, one gate a line, one-line gate definitions, loops over [1:r].
"""

from __future__ import annotations

import re

import numpy as np

from oracle import MATRICES, string

_X, _Y, _Z = (MATRICES[letter] for letter in "XYZ")
FIXED = {
    "h": (_X + _Z) / np.sqrt(2),
    "s": np.diag([1, 1j]),
    "sdg": np.diag([1, -1j]),
    "cx": np.array([[1, 0, 0, 0], [0, 0, 0, 1], [0, 0, 1, 0], [0, 1, 0, 0]], dtype=complex),
    "cz": np.diag([1, 1, 1, -1]).astype(complex),
    "swap": np.eye(4, dtype=complex)[[0, 2, 1, 3]],
}
"""First argument of a gate is the low bit of its matrix index."""

GENERATORS = {"rx": _X, "ry": _Y, "rz": _Z, "rzz": np.kron(_Z, _Z)}
COMMON = {"cx", "h", "s", "sdg", "rx", "ry", "rz", "cz"}
LIBRARY = {2: COMMON, 3: COMMON | {"swap"}}
GATE = re.compile(r"(\w+)(?:\((.*)\))? (q\[\d+\](?:, q\[\d+\])*);")


def statements(text):
    """The gates of a text in order, loops written out: (name, angle or None, qubits); the version, the qubits, the phase."""
    lines = [line.split("//")[0].strip() for line in text.splitlines()]
    version = {"OPENQASM 3.0;": 3, "OPENQASM 2.0;": 2}[lines[0]]
    known = set(LIBRARY[version])
    assert lines[1] == ('include "stdgates.inc";' if version == 3 else 'include "qelib1.inc";')
    qubits, phase = 0, 0.0
    stack = [(1, [])]
    for line in lines[2:]:
        if not line:
            continue
        if definition := re.fullmatch(r"gate (\w+)(?:\(theta\))? a, b \{.*\}", line):
            known.add(definition[1])
        elif register := re.fullmatch(r"qubit\[(\d+)\] q;|qreg q\[(\d+)\];", line):
            assert (version == 3) == (register[1] is not None)
            qubits = int(register[1] or register[2])
        elif given := re.fullmatch(r"gphase\((.*)\);", line):
            assert version == 3
            phase += number(given[1])
        elif loop := re.fullmatch(r"for (?:int|uint\[64\]) \w+ in \[1:(\d+)\] \{", line):
            assert version == 3
            stack.append((int(loop[1]), []))
        elif line == "}":
            repeat, body = stack.pop()
            stack[-1][1].extend(body * repeat)
        else:
            found = GATE.fullmatch(line)
            assert found, line
            assert found[1] in known, line
            places = tuple(int(place) for place in re.findall(r"\[(\d+)\]", found[3]))
            assert len(set(places)) == len(places)
            assert all(place < qubits for place in places)
            stack[-1][1].append((found[1], None if found[2] is None else number(found[2]), places))
    assert len(stack) == 1
    return version, qubits, phase, stack[0][1]


def number(text):
    """An angle: a decimal, which must have a point."""
    assert re.fullmatch(r"-?\d+\.\d+(e-?\d+)?", text), text
    return float(text)


def matrix(name, angle):
    """The matrix of a gate."""
    if name in FIXED:
        return FIXED[name]
    generator = GENERATORS[name]
    return np.cos(angle / 2) * np.eye(len(generator)) - 1j * np.sin(angle / 2) * generator


def apply(columns, gate, places, qubits):
    """A gate on the first index of a matrix with 2**qubits rows."""
    axes = [qubits - 1 - place for place in reversed(places)]
    tensor = columns.reshape((2,) * qubits + (-1,))
    tensor = np.moveaxis(tensor, axes, range(len(axes)))
    shape = tensor.shape
    tensor = (gate @ tensor.reshape(len(gate), -1)).reshape(shape)
    return np.moveaxis(tensor, range(len(axes)), axes).reshape(columns.shape)


def unitary(text):
    """The matrix that a text stands for, phase included."""
    _, qubits, phase, gates = statements(text)
    made = np.eye(2**qubits, dtype=complex)
    for name, angle, places in gates:
        made = apply(made, matrix(name, angle), places, qubits)
    return np.exp(1j * phase) * made


def rotations(text):
    """The rotations of a text as (x, z, θ), each conjugated by the Clifford gates before it, and those gates' product."""
    _, qubits, _, gates = statements(text)
    clifford = np.eye(2**qubits, dtype=complex)
    strings = {(x, z): string(x, z, qubits) for x in range(2**qubits) for z in range(2**qubits)}
    found = []
    for name, angle, places in gates:
        if angle is None:
            clifford = apply(clifford, matrix(name, angle), places, qubits)
            continue
        conjugated = clifford.conj().T @ apply(clifford, GENERATORS[name], places, qubits)
        (masks, sign) = next(
            (masks, round(np.vdot(pauli, conjugated).real) // 2**qubits)
            for masks, pauli in strings.items()
            if abs(np.vdot(pauli, conjugated)) > 2 ** (qubits - 1)
        )
        found.append((*masks, sign * angle / 2))
    return found, clifford


def depths(text):
    """Depth in all gates and in two-qubit gates, a swap being three."""
    _, qubits, _, gates = statements(text)
    free = np.zeros((2, max(qubits, 1)), dtype=int)
    for name, _, places in gates:
        own = 3 if name == "swap" else 1
        for row, length in enumerate((own, own if len(places) == 2 else 0)):
            if length:
                free[row, list(places)] = free[row, list(places)].max() + length
    return int(free[0].max()), int(free[1].max())


def counts(text):
    """Two-qubit gates (a swap being three), swaps, one-qubit gates."""
    _, _, _, gates = statements(text)
    names = [name for name, _, _ in gates]
    swaps = names.count("swap")
    two = sum(len(places) == 2 for _, _, places in gates)
    return two + 2 * swaps, swaps, len(gates) - two
