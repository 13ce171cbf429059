"""The same unitary written in other ways: as compilers, routers and careful people leave circuits."""

from __future__ import annotations

import numpy as np

import trueturn as tt

QUARTER = np.pi / 4


def listed(circuit):
    """Give [((x, z), angle), …], written out."""
    masks = zip(circuit.x_masks.tolist(), circuit.z_masks.tolist(), strict=True)
    return list(zip(masks, circuit.angles.tolist(), strict=True))


def made(rotations, like):
    """Make a circuit of such a list, with qubits and phase of another."""
    x, z = [mask[0] for mask, _ in rotations], [mask[1] for mask, _ in rotations]
    return tt.Rotations(x, z, [angle for _, angle in rotations], like.qubits, like.phase)


def anticommute(one, two):
    return ((one[0] & two[1]).bit_count() + (one[1] & two[0]).bit_count()) % 2 == 1


def reordered(draw, circuit):
    """Exchange neighbours that commute, many times."""
    rotations = listed(circuit)
    for place in draw.integers(0, max(len(rotations) - 1, 1), 20 * len(rotations)).tolist():
        if place + 1 < len(rotations) and not anticommute(rotations[place][0], rotations[place + 1][0]):
            rotations[place], rotations[place + 1] = rotations[place + 1], rotations[place]
    return made(rotations, circuit)


def merged(draw, circuit):
    """Exchange, then merge equal neighbours."""
    out = []
    for mask, angle in listed(reordered(draw, circuit)):
        if out and out[-1][0] == mask:
            out[-1] = (mask, out[-1][1] + angle)
        else:
            out.append((mask, angle))
    return made(out, circuit)


def split(draw, circuit):
    """Cut some rotations in two, then exchange."""
    out = []
    for mask, angle in listed(circuit):
        share = draw.random() if draw.random() < 0.2 else 1.0
        out += [(mask, share * angle)] + [(mask, (1 - share) * angle)] * (share < 1)
    return reordered(draw, made(out, circuit))


def turned(gate, mask, angle, qubits):
    """The rotation C P C† for C = exp(-i π/4 gate), by the bracket: -i gate P where they anticommute."""
    if not anticommute(gate, mask):
        return mask, angle
    half = tt.Operator.from_masks([mask[0]], [mask[1]], [-0.5], qubits)
    image = tt.Operator.from_masks([gate[0]], [gate[1]], [1.0], qubits).bracket(half)
    return (int(image.x_masks[0]), int(image.z_masks[0])), angle * float(image.coefficients[0])


def conjugated(draw, circuit):
    """Wrap runs of rotations in random basis changes that are undone behind them."""
    out, rest = [], listed(circuit)
    while rest:
        size = int(draw.integers(1, 8))
        run, rest = rest[:size], rest[size:]
        gates = [
            (int(x), int(z)) for x, z in draw.integers(0, 2**circuit.qubits, (int(draw.integers(1, 4)), 2)) if x or z
        ]
        out += [(gate, QUARTER) for gate in gates]
        for mask, angle in run:
            for gate in gates:
                mask, angle = turned(gate, mask, angle, circuit.qubits)
            out.append((mask, angle))
        out += [(gate, -QUARTER) for gate in reversed(gates)]
    return made(out, circuit)


def routed(draw, circuit, undone=True):
    """Put swaps between the rotations, each XX, YY, ZZ by π/4, and let the rotations follow their qubits."""
    where = list(range(circuit.qubits))
    out, swaps = [], []

    def swap(a, b):
        pair = 1 << a | 1 << b
        out.extend((mask, QUARTER) for mask in ((pair, 0), (pair, pair), (0, pair)))
        where[:] = [{a: b, b: a}.get(place, place) for place in where]

    def moved(mask):
        return sum(1 << where[qubit] for qubit in range(circuit.qubits) if mask >> qubit & 1)

    for (x, z), angle in listed(circuit):
        if draw.random() < 0.2:
            a, b = (int(qubit) for qubit in draw.choice(circuit.qubits, 2, replace=False))
            swap(a, b)
            swaps.append((a, b))
        out.append(((moved(x), moved(z)), angle))
    if undone:
        for a, b in reversed(swaps):
            swap(a, b)
    return made(out, circuit), tuple(where)


def fused(circuit):
    """Fuse neighbouring one-qubit rotations and write each as z, quarter turn x, z, quarter turn x, z."""
    waiting, out = {}, []

    def flush(qubit):
        if qubit in waiting:
            unitary = waiting.pop(qubit)
            first, middle, last = euler_angles(unitary)
            bit = 1 << qubit
            out.extend(
                [
                    ((0, bit), first),
                    ((bit, 0), QUARTER),
                    ((0, bit), middle + np.pi / 2),
                    ((bit, 0), QUARTER),
                    ((0, bit), last + np.pi / 2),
                ]
            )

    for (x, z), angle in listed(circuit):
        support = x | z
        if support.bit_count() == 1:
            qubit = support.bit_length() - 1
            waiting[qubit] = one_qubit(x >> qubit, z >> qubit, angle) @ waiting.get(qubit, np.eye(2))
            continue
        for qubit in range(circuit.qubits):
            if support >> qubit & 1:
                flush(qubit)
        out.append(((x, z), angle))
    for qubit in list(waiting):
        flush(qubit)
    return made(out, circuit)


def one_qubit(x, z, angle):
    string = {(1, 0): [[0, 1], [1, 0]], (1, 1): [[0, -1j], [1j, 0]], (0, 1): [[1, 0], [0, -1]]}[x, z]
    return np.cos(angle) * np.eye(2) - 1j * np.sin(angle) * np.array(string)


def euler_angles(unitary):
    """Angles θ of z, y, z in order of time, up to a phase."""
    unitary = unitary / np.sqrt(np.linalg.det(unitary) + 0j)
    total, difference = np.angle(unitary[1, 1]), np.angle(unitary[1, 0])
    return (total - difference) / 2, np.arctan2(abs(unitary[1, 0]), abs(unitary[0, 0])), (total + difference) / 2
