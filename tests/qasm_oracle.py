"""A second reader of OpenQASM: the reference parser of the standard, and dense matrices straight from the definitions.

It shares nothing with the reader under test: no rotations, no conjugation, no tables of gates in Pauli form. Gate
definitions are those that `published/qasm_facts.md` took from `stdgates.inc`, `qelib1.inc` and the built-in gates.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
import openqasm3
import scipy.linalg
from openqasm3 import ast

I2 = np.eye(2)
X = np.array([[0, 1], [1, 0]], dtype=complex)
Y = np.array([[0, -1j], [1j, 0]])
Z = np.diag([1, -1]).astype(complex)
H = (X + Z) / math.sqrt(2)


def turn(axis, angle):
    """exp(-i angle axis / 2)."""
    return math.cos(angle / 2) * I2 - 1j * math.sin(angle / 2) * axis


def phase(angle):
    return np.diag([1, np.exp(1j * angle)])


def u_version_3(theta, phi, lam):
    """The matrix of the 3.0 text."""
    e = np.exp
    return 0.5 * np.array(
        [
            [1 + e(1j * theta), -1j * e(1j * lam) * (1 - e(1j * theta))],
            [1j * e(1j * phi) * (1 - e(1j * theta)), e(1j * (phi + lam)) * (1 + e(1j * theta))],
        ]
    )


def u_version_2(theta, phi, lam):
    return turn(Z, phi) @ turn(Y, theta) @ turn(Z, lam)


def controlled(matrix, on=1):
    """Put a control in front: the control is the lowest bit, as the first argument."""
    size = len(matrix)
    one = np.diag([0, 1]) if on else np.diag([1, 0])
    return np.kron(np.eye(size), np.eye(2) - one) + np.kron(matrix, one)


SWAP = np.eye(4)[[0, 2, 1, 3]].astype(complex)

ONE_QUBIT = {
    "id": lambda: I2,
    "x": lambda: X,
    "y": lambda: Y,
    "z": lambda: Z,
    "h": lambda: H,
    "s": lambda: phase(math.pi / 2),
    "sdg": lambda: phase(-math.pi / 2),
    "t": lambda: phase(math.pi / 4),
    "tdg": lambda: phase(-math.pi / 4),
    "rx": lambda a: turn(X, a),
    "ry": lambda a: turn(Y, a),
    "rz": lambda a: turn(Z, a),
    "u1": phase,
    "u2": lambda phi, lam: u_version_2(math.pi / 2, phi, lam),
    "u3": u_version_2,
}
BOTH = ONE_QUBIT | {
    "cx": lambda: controlled(X),
    "cy": lambda: controlled(Y),
    "cz": lambda: controlled(Z),
    "ch": lambda: controlled(H),
    "crz": lambda a: controlled(turn(Z, a)),
    "ccx": lambda: controlled(controlled(X)),
}
STDGATES = BOTH | {
    "CX": lambda: controlled(X),
    "sx": lambda: 0.5 * np.array([[1 + 1j, 1 - 1j], [1 - 1j, 1 + 1j]]),
    "p": phase,
    "phase": phase,
    "cp": lambda a: controlled(phase(a)),
    "cphase": lambda a: controlled(phase(a)),
    "crx": lambda a: controlled(turn(X, a)),
    "cry": lambda a: controlled(turn(Y, a)),
    "swap": lambda: SWAP,
    "cswap": lambda: controlled(SWAP),
    # gate cu(θ, φ, λ, γ) c, t { p(γ - θ/2) c; ctrl @ U(θ, φ, λ) c, t; }
    "cu": lambda a, b, c, g: controlled(np.exp(1j * (g - a / 2)) * u_version_3(a, b, c)),
}


def cu3(theta, phi, lam):
    """The body in qelib1.inc, gate by gate; arXiv:1707.03429, the listing of the header (from memory)."""
    target = lambda matrix: np.kron(matrix, I2)  # noqa: E731
    cx = controlled(X)
    first = target(phase((lam - phi) / 2))
    second = target(u_version_2(-theta / 2, 0, -(phi + lam) / 2))
    third = target(u_version_2(theta / 2, phi, 0))
    return third @ cx @ second @ cx @ first


QELIB1 = BOTH | {"cu1": lambda a: controlled(phase(a)), "cu3": cu3}
BUILT_IN = {
    2: {"U": u_version_2, "CX": lambda: controlled(X)},
    3: {"U": u_version_3, "gphase": lambda a: np.array([[np.exp(1j * a)]])},
}
CONSTANTS = {"pi": math.pi, "π": math.pi, "tau": math.tau, "τ": math.tau, "euler": math.e, "ℇ": math.e}
FUNCTIONS = {
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "arcsin": math.asin,
    "arccos": math.acos,
    "arctan": math.atan,
    "exp": math.exp,
    "log": math.log,
    "ln": math.log,
    "sqrt": math.sqrt,
    "floor": math.floor,
    "ceiling": math.ceil,
    "mod": lambda a, b: math.fmod(a, b),
    "pow": lambda a, b: a**b,
}
OPERATIONS = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
    "%": lambda a, b: math.fmod(a, b) if isinstance(a, float) or isinstance(b, float) else int(math.fmod(a, b)),
    "**": lambda a, b: a**b,
    "<": lambda a, b: a < b,
    ">=": lambda a, b: a >= b,
    "==": lambda a, b: a == b,
    "!=": lambda a, b: a != b,
    "&&": lambda a, b: bool(a and b),
    "||": lambda a, b: bool(a or b),
}


def applied(matrix, qubits, count):
    """Spread a matrix over qubits of a register; bit k of its index is `qubits[k]`."""
    size = 2**count
    index = np.arange(size)
    local = sum((index >> qubit & 1) << bit for bit, qubit in enumerate(qubits))
    rest = index & ~sum(1 << qubit for qubit in qubits)
    spread = np.zeros((size, size), dtype=complex)
    for row in range(len(matrix)):
        to = rest | sum((row >> bit & 1) << qubit for bit, qubit in enumerate(qubits))
        spread[to, index] += matrix[row, local]
    return spread


def principal_power(matrix, exponent):
    """Powers of the eigenvalues e^{iφ}, -π < φ ≤ π; the Schur form of a unitary is diagonal."""
    form, vectors = scipy.linalg.schur(matrix, output="complex")
    angles = np.angle(np.diag(form))
    angles[angles < -math.pi + 1e-9] += math.tau
    return vectors @ np.diag(np.exp(1j * exponent * angles)) @ vectors.conj().T


@dataclass
class Program:
    """What was read so far."""

    version: int = 3
    qubits: dict = field(default_factory=dict)
    count: int = 0
    gates: dict = field(default_factory=dict)
    matrix: np.ndarray = field(default_factory=lambda: np.eye(1, dtype=complex))

    def run(self, statements, names):
        for statement in statements:
            self.step(statement, names)

    def step(self, statement, names):
        match statement:
            case ast.Include(filename="stdgates.inc"):
                self.gates |= STDGATES
            case ast.Include(filename="qelib1.inc"):
                self.gates |= QELIB1
            case ast.QubitDeclaration(qubit=name, size=size):
                size = 1 if size is None else self.value(size, names)
                self.qubits[name.name] = list(range(self.count, self.count + size))
                self.count += size
                self.matrix = np.kron(np.eye(2**size), self.matrix)
            case ast.ConstantDeclaration(identifier=name, init_expression=value):
                names[name.name] = self.value(value, names)
            case ast.AliasStatement(target=target, value=value):
                self.qubits[target.name] = self.many(value, names)
            case ast.QuantumGateDefinition(name=name):
                self.gates[name.name] = statement
            case ast.ForInLoop(identifier=name, set_declaration=values, block=block):
                for value in self.range(values, names):
                    self.run(block, names | {name.name: value})
            case ast.BranchingStatement(condition=condition, if_block=taken, else_block=other):
                self.run(taken if self.value(condition, names) else other, names)
            case ast.QuantumGate() | ast.QuantumPhase():
                lists = [self.many(qubit, names) for qubit in statement.qubits]
                width = max([len(one) for one in lists if len(one) > 1], default=1)
                matrix = self.gate(statement, names)
                for copy in range(width):
                    on = [one[copy] if len(one) > 1 else one[0] for one in lists]
                    self.matrix = applied(matrix, on, self.count) @ self.matrix
            case ast.QuantumBarrier() | ast.ClassicalDeclaration() | ast.QuantumMeasurementStatement():
                pass
            case _:
                raise NotImplementedError(type(statement))

    def gate(self, call, names):
        """The matrix of a call on its own arguments, modifiers included."""
        if isinstance(call, ast.QuantumPhase):
            matrix = np.array([[np.exp(1j * self.value(call.argument, names))]])
        else:
            arguments = [self.value(argument, names) for argument in call.arguments]
            matrix = self.named(call.name.name, arguments)
        for modifier in reversed(call.modifiers):
            argument = None if modifier.argument is None else self.value(modifier.argument, names)
            match modifier.modifier.name:
                case "inv":
                    matrix = matrix.conj().T
                case "pow":
                    whole = argument == int(argument)
                    power = np.linalg.matrix_power if whole else principal_power
                    matrix = power(matrix, int(argument) if whole else argument)
                case kind:
                    for _ in range(argument or 1):
                        matrix = controlled(matrix, on=kind == "ctrl")
        return matrix

    def named(self, name, arguments):
        own = self.gates.get(name) or BUILT_IN[self.version][name]
        if callable(own):
            return own(*arguments)
        inner = Program(self.version, gates=self.gates)
        inner.count = len(own.qubits)
        inner.qubits = {qubit.name: [place] for place, qubit in enumerate(own.qubits)}
        inner.matrix = np.eye(2**inner.count, dtype=complex)
        inner.run(own.body, {name.name: value for name, value in zip(own.arguments, arguments, strict=True)})
        return inner.matrix

    def many(self, operand, names):
        match operand:
            case ast.Identifier(name=name):
                return self.qubits[name]
            case ast.Concatenation(lhs=left, rhs=right):
                return self.many(left, names) + self.many(right, names)
            case ast.IndexedIdentifier(name=name, indices=[index]):
                return self.entries(self.qubits[name.name], index, names)
            case ast.IndexExpression(collection=name, index=index):
                return self.entries(self.qubits[name.name], index, names)
        raise NotImplementedError(type(operand))

    def entries(self, qubits, index, names):
        if isinstance(index, ast.DiscreteSet):
            return [qubits[self.value(value, names)] for value in index.values]
        (index,) = index
        if isinstance(index, ast.RangeDefinition):
            return [qubits[at] for at in self.range(index, names, len(qubits))]
        return [qubits[self.value(index, names)]]

    def range(self, values, names, size=None):
        if isinstance(values, ast.DiscreteSet):
            return [self.value(value, names) for value in values.values]
        or_else = lambda value, default: default if value is None else self.value(value, names)  # noqa: E731
        start, stop, step = or_else(values.start, 0), or_else(values.end, -1), or_else(values.step, 1)
        if size is not None:
            start, stop = start % size, stop % size
        return range(start, stop + (1 if step > 0 else -1), step)

    def value(self, expression, names):
        match expression:
            case ast.IntegerLiteral(value=value) | ast.FloatLiteral(value=value) | ast.BooleanLiteral(value=value):
                return value
            case ast.Identifier(name=name):
                return names[name] if name in names else CONSTANTS[name]
            case ast.UnaryExpression(op=op, expression=inner) if op.name == "-":
                return -self.value(inner, names)
            case ast.UnaryExpression(op=op, expression=inner) if op.name == "!":
                return not self.value(inner, names)
            case ast.BinaryExpression(op=op, lhs=left, rhs=right):
                return OPERATIONS[op.name](self.value(left, names), self.value(right, names))
            case ast.FunctionCall(name=name, arguments=arguments):
                return FUNCTIONS[name.name](*(self.value(argument, names) for argument in arguments))
        raise NotImplementedError(type(expression))


def unitary(text):
    """Return the unitary of a text, bit q of the index being qubit q in order of declaration."""
    parsed = openqasm3.parse(text)
    program = Program(version=2 if parsed.version and parsed.version.startswith("2") else 3)
    program.run(parsed.statements, {})
    return program.matrix
