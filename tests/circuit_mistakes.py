"""Circuits with one seeded mistake beside the right ones, and right ones written in unusual ways; all invented."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

import trueturn as tt
from trueturn.formulas.merging import merged_runs

RULES = ("commuting", "bond", "axis", "single", "magnitude")
FORMULAS = ("lie", "strang", "strang", "suzuki-4", "blanes-moan-4", "omelyan-2", "ruth-3")


@dataclass(frozen=True)
class Right:
    """A circuit that is right, and what it was made from."""

    operator: tt.Operator
    partition: tt.Partition
    formula: tt.Formula
    time: float
    steps: int
    periodic: bool

    def circuit(self, partition=None, time=None, steps=None):
        return self.formula.rotations(
            partition or self.partition, self.time if time is None else time, steps or self.steps
        )


def unitary(rotations):
    """Multiply a circuit out, index by index, phase included; a block that repeats is raised to its power."""
    size = 2**rotations.qubits
    index = np.arange(size)
    total = np.exp(1j * rotations.phase) * np.eye(size)
    for block in rotations.blocks:
        inner = block.rotations.blocks
        if len(inner) > 1 or (inner and inner[0].repeat > 1):
            once = unitary(block.rotations)
        else:
            once = np.eye(size, dtype=complex)
            triples = zip(block.rotations.x_masks, block.rotations.z_masks, block.rotations.angles, strict=True)
            for x, z, angle in triples:
                source = index ^ x
                signs = (-1.0) ** np.bitwise_count(source & z)
                factor = (1, 1j, -1, -1j)[(x & z).bit_count() % 4] * signs
                once = np.cos(angle) * once - 1j * np.sin(angle) * (factor[:, None] * once[source])
        total = np.linalg.matrix_power(once, block.repeat) @ total
    return total


def distance(one, two):
    return float(np.linalg.norm(unitary(one) - unitary(two), 2))


def up_to_phase(one, two):
    """Distance in spectral norm, a global phase apart."""
    left, right = unitary(one), unitary(two)
    phase = np.vdot(left, right)
    return float(np.linalg.norm(left * phase / abs(phase) - right, 2))


def strang(operator, time=1.0, steps=4, rule="commuting"):
    return tt.formula("strang").rotations(tt.Partition.of(operator, rule), time, steps)


def one_mistake(circuit, operator, time):
    """Give the mistake that a diagnosis names, if it is one."""
    found = tt.diagnose(circuit, operator, time)
    assert found.matches is False
    (mistake,) = found.mistakes
    return mistake


def a_model(draw):
    """One of: Ising, Heisenberg, exchange in fields, long-range Ising, Hubbard, random strings."""
    kind = draw.choice(["ising", "heisenberg", "exchange", "long-range", "hubbard", "random"])
    n = int(draw.integers(3, 6))
    periodic = bool(draw.random() < 0.4)
    lattice = tt.lattice.ring(n) if periodic else tt.lattice.chain(n)
    uniform = draw.random() < 0.4

    def numbers(count, low=0.3, high=1.2):
        return float(draw.uniform(low, high)) if uniform else draw.uniform(low, high, count)

    bonds = len(lattice.bonds)
    if kind == "ising":
        z = 0 if draw.random() < 0.5 else numbers(n)
        return tt.model.ising(lattice, zz=numbers(bonds), x=numbers(n), z=z), periodic
    if kind == "heisenberg":
        return tt.model.heisenberg(lattice, numbers(bonds), z=draw.uniform(-1, 1, n)), periodic
    if kind == "exchange":
        fields = {axis: draw.uniform(0.2, 1, n) for axis in "xz" if draw.random() < 0.7}
        strengths = {axis: numbers(bonds) for axis in ("xx", "yy", "zz")}
        return tt.model.exchange(lattice, **strengths, **fields), periodic
    if kind == "long-range":
        lattice = tt.lattice.complete(n)
        strengths = [1.1 / abs(i - j) ** 1.5 for i, j in lattice.bonds]
        return tt.model.ising(lattice, zz=strengths, x=draw.uniform(0.3, 1, n)), False
    if kind == "hubbard":
        return tt.model.hubbard(tt.lattice.chain(2), float(draw.uniform(0.5, 1)), draw.uniform(1, 3, 2), 0.4), False
    strings = {(int(x), int(z)) for x, z in draw.integers(0, 2**n, (2 * n + 2, 2))} - {(0, 0)}
    chosen = sorted(strings)
    draw.shuffle(chosen)
    return (
        tt.Operator.from_masks([x for x, _ in chosen], [z for _, z in chosen], draw.uniform(-1, 1, len(chosen)), n),
        False,
    )


def a_right_circuit(draw, shuffled=0.15):
    """Model, partition rule (sometimes with its parts in another order), formula, time and steps at random."""
    while True:
        operator, periodic = a_model(draw)
        try:
            partition = tt.Partition.of(operator, str(draw.choice(RULES)))
        except tt.errors.PartitionError:
            continue
        if len(partition.parts) < 2:
            continue
        if draw.random() < shuffled:
            partition = partition.shuffled(int(draw.integers(1000)))
        formula = tt.formula(str(draw.choice(FORMULAS)))
        steps = int(draw.integers(1, 6))
        return Right(operator, partition, formula, float(draw.uniform(0.3, 1.5)), steps, periodic)


def written_out(rotations):
    return tt.Rotations(rotations.x_masks, rotations.z_masks, rotations.angles, rotations.qubits, rotations.phase)


def columns(rotations):
    return rotations.x_masks.tolist(), rotations.z_masks.tolist(), rotations.angles.copy()


def changed(rotations, change):
    """Rewrite each rotation, written out; None drops it."""
    triples = [change(x, z, angle) for x, z, angle in zip(*columns(rotations), strict=True)]
    kept = [triple for triple in triples if triple is not None]
    x, z, angles = ([triple[k] for triple in kept] for k in range(3))
    return tt.Rotations(x, z, angles, rotations.qubits, rotations.phase)


def a_term(draw, operator):
    terms = operator.without_identity()
    place = int(draw.integers(len(terms)))
    return int(terms.x_masks[place]), int(terms.z_masks[place]), float(terms.coefficients[place])


def scaled(factor):
    return lambda draw, right: changed(right.circuit(), lambda x, z, angle: (x, z, factor * angle))


def wrong_time(draw, right):
    return right.circuit(time=right.time * float(draw.uniform(0.3, 3)))


def renamed(rotations, names):
    def move(mask):
        return sum(1 << names[q] for q in range(rotations.qubits) if mask >> q & 1)

    return changed(rotations, lambda x, z, angle: (move(x), move(z), angle))


def qubits_reversed(draw, right):
    return renamed(right.circuit(), list(range(right.operator.qubits))[::-1])


def qubits_permuted(draw, right):
    return renamed(right.circuit(), draw.permutation(right.operator.qubits).tolist())


def letters(x, z, qubit, new):
    bit = 1 << qubit
    return (x & ~bit) | (bit if new in "XY" else 0), (z & ~bit) | (bit if new in "ZY" else 0)


def term_letters(draw, right):
    """One string written with another letter on one of its qubits, or with X and Y exchanged on all."""
    x, z, _ = a_term(draw, right.operator)
    if draw.random() < 0.5:
        new_x, new_z = x, z ^ x
        if (new_x, new_z) == (x, z):
            new_x, new_z = x | z, z
    else:
        qubit = int(draw.choice([q for q in range(right.operator.qubits) if (x | z) >> q & 1]))
        old = "IXZY"[(x >> qubit & 1) + 2 * (z >> qubit & 1)]
        new_x, new_z = letters(x, z, qubit, str(draw.choice([letter for letter in "XYZ" if letter != old])))
    return changed(right.circuit(), lambda a, b, angle: (new_x, new_z, angle) if (a, b) == (x, z) else (a, b, angle))


def letters_exchanged(draw, right):
    """X and Y, or Y and Z, or X and Z exchanged on one qubit or on all."""
    n = right.operator.qubits
    where = (1 << n) - 1 if draw.random() < 0.5 else 1 << int(draw.integers(n))
    pair = str(draw.choice(["XY", "YZ", "XZ"]))

    def change(x, z, angle):
        new = {"XY": (x, z ^ x), "YZ": (x ^ z, z), "XZ": (z, x)}[pair]
        return (x & ~where) | (new[0] & where), (z & ~where) | (new[1] & where), angle

    return changed(right.circuit(), change)


def without_strings(right, strings):
    return changed(right.circuit(), lambda x, z, angle: None if (x, z) in strings else (x, z, angle))


def term_missing(draw, right):
    x, z, _ = a_term(draw, right.operator)
    return without_strings(right, {(x, z)})


def bond_lost(draw, right):
    """The bond that closes a ring; for other models None."""
    if not right.periodic:
        return None
    n = right.operator.qubits
    closing = 1 | 1 << (n - 1)
    strings = zip(right.operator.x_masks.tolist(), right.operator.z_masks.tolist(), strict=True)
    return without_strings(right, {(x, z) for x, z in strings if x | z == closing})


def with_part(right, part, place):
    parts = list(right.partition.parts)
    parts.insert(place, part)
    return right.circuit(tt.Partition([*parts, phase_part(right)]))


def phase_part(right):
    return tt.Operator.from_masks([0], [0], [right.partition.identity], right.operator.qubits)


def term_extra(draw, right):
    n = right.operator.qubits
    known = set(zip(right.operator.x_masks.tolist(), right.operator.z_masks.tolist(), strict=True)) | {(0, 0)}
    while True:
        x, z = (int(mask) for mask in draw.integers(0, 2**n, 2))
        if (x, z) not in known:
            part = tt.Operator.from_masks([x], [z], [float(draw.uniform(0.2, 1))], n)
            return with_part(right, part, int(draw.integers(len(right.partition.parts) + 1)))


def term_repeated(draw, right):
    """A second copy of a term, beside the first or elsewhere in the step."""
    x, z, coefficient = a_term(draw, right.operator)
    part = tt.Operator.from_masks([x], [z], [coefficient], right.operator.qubits)
    home = next(
        number
        for number, one in enumerate(right.partition.parts)
        if (x, z) in set(zip(one.x_masks.tolist(), one.z_masks.tolist(), strict=True))
    )
    return with_part(right, part, home if draw.random() < 0.5 else int(draw.integers(len(right.partition.parts) + 1)))


def term_strength(draw, right):
    x, z, _ = a_term(draw, right.operator)
    factor = float(draw.choice([draw.uniform(0.2, 3), 0.5, -1.0]))
    return changed(right.circuit(), lambda a, b, angle: (a, b, factor * angle if (a, b) == (x, z) else angle))


def runs_of(right):
    """(part, weight) of all steps, merged; weights are shares of the whole time."""
    runs = merged_runs(right.formula.exact_stages() * right.steps, len(right.partition.parts))
    return [(part, float(weight) / right.steps) for part, weight in runs]


def of_runs(right, runs):
    x, z, angles = [], [], []
    for part, weight in runs:
        operator = right.partition.parts[part]
        x += operator.x_masks.tolist()
        z += operator.z_masks.tolist()
        angles += (weight * right.time * operator.coefficients).tolist()
    return tt.Rotations(x, z, angles, right.operator.qubits, 0.0 - right.partition.identity * right.time)


def merged_wrongly(draw, right):
    """Half-steps lost or counted twice where stages meet; only formulas of forward and reverse stages in turn."""
    runs = runs_of(right)
    last = len(right.partition.parts) - 1
    if not right.formula.symmetric or runs[0][0] != runs[-1][0]:
        return None
    inner = range(1, len(runs) - 1)
    mistake = draw.choice(["seams half", "ends full", "ends lost", "turns half", "one end full"])
    change = {}
    if mistake == "seams half":
        change = {k: 0.5 for k in inner if runs[k][0] == 0}
    elif mistake == "ends full":
        change = {0: 2.0, len(runs) - 1: 2.0}
    elif mistake == "ends lost":
        change = {0: 0.0, len(runs) - 1: 0.0}
    elif mistake == "turns half":
        change = {k: 0.5 for k in inner if runs[k][0] == last}
    else:
        change = {0: 2.0}
    wrong = [(part, weight * change.get(k, 1.0)) for k, (part, weight) in enumerate(runs)]
    return of_runs(right, [run for run in wrong if run[1]])


def wrong_steps(draw, right):
    """Steps of the right size, but one or two too many or too few; factors of two read as angles and are left out."""
    steps = right.steps + int(draw.choice([-2, -1, 1, 2, 3]))
    if steps < 1 or steps in (right.steps, 2 * right.steps) or 2 * steps == right.steps:
        return None
    return right.circuit(time=right.time * steps / right.steps, steps=steps)


def one_place(draw, right):
    """A single rotation lost, or turned by another angle."""
    circuit = right.circuit()
    place = int(draw.integers(circuit.count))
    x, z, angles = columns(circuit)
    if draw.random() < 0.5:
        angles[place] *= float(draw.choice([-1.0, 2.0, 0.5]))
    else:
        x, z, angles = x[:place] + x[place + 1 :], z[:place] + z[place + 1 :], np.delete(angles, place)
    return tt.Rotations(x, z, angles, circuit.qubits, circuit.phase)


MISTAKES = {
    "angles doubled": scaled(2.0),
    "angles halved": scaled(0.5),
    "time reversed": scaled(-1.0),
    "wrong time": wrong_time,
    "qubits reversed": qubits_reversed,
    "qubits permuted": qubits_permuted,
    "term letters": term_letters,
    "letters exchanged": letters_exchanged,
    "term missing": term_missing,
    "boundary bond lost": bond_lost,
    "term extra": term_extra,
    "term repeated": term_repeated,
    "term strength": term_strength,
    "half-steps merged wrongly": merged_wrongly,
    "steps": wrong_steps,
    "one place": one_place,
}


def same_totals(circuit, operator, time):
    """Whether a circuit is a consistent product formula of the operator in spite of its mistake."""
    return circuit.angle_totals().near(operator.without_identity() * time, atol=1e-9)


def seeded(kind, seed, base=0):
    """Give (right, right circuit, broken circuit), or None where the mistake does nothing or cannot be made.

    Left out are broken circuits whose unitary is the right one, and those that are right product formulas of the
    same Hamiltonian all the same (a symmetry carried one into another): nobody can call these broken. Other bases give
    other instances.
    """
    draw = np.random.default_rng([sum(map(ord, kind)), seed, base])
    right = a_right_circuit(draw)
    broken = MISTAKES[kind](draw, right)
    if broken is None or same_totals(broken, right.operator, right.time):
        return None
    circuit = right.circuit()
    if distance(circuit, broken) < 1e-9:
        return None
    return right, circuit, broken
