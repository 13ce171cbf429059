"""Ladders of two-qubit gates: which of them cancel between neighbouring rotations, and orders that make many cancel.

The convention: exp(-i θ P) is a change of basis on each qubit of P (none for Z, one gate and its inverse
for X, another for Y), controlled-NOTs down the ladder of P's qubits, q_1 → q_2, q_2 → q_3, …, a z rotation on
the last qubit, and the same controlled-NOTs and changes of basis backwards: 2(w-1) two-qubit gates for weight
w. The ladder takes the qubits in one of the orders of `LADDERS`:

- ``ascending``: by qubit number.
- ``z-first``: the qubits with Z, then those with X, then those with Y, each ascending. Strings that share
  a run of Z between other ends, as the Jordan-Wigner transformation makes them, then share rungs.

Between neighbours P, Q the gates that close P meet those that open Q: basis and controlled-NOT annihilate
step by step as long as the ladders start with the same qubits in the same bases. With a common start of k
qubits exactly 2(k-1) two-qubit gates go (k ≥ 1): each rung blocks the next one until it is gone itself.

To sort strings by ladder is best among all orders of a list: at most (members - 1) neighbours can share a
given start of a ladder, and sorting puts all of its members in one run.

References
----------
M. A. Nielsen and I. L. Chuang, "Quantum Computation and Quantum Information" (2000), section 4.7.3, for the
ladder; M. B. Hastings, D. Wecker, B. Bauer, M. Troyer, "Improving quantum algorithms for quantum chemistry",
Quantum Inf. Comput. 15, 1 (2015), for the idea of cancelling ladders of ordered terms. From memory.
"""

from __future__ import annotations

import difflib
from collections.abc import Sequence

from trueturn.errors import ArgumentError, RotationError
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["LADDERS", "gate_saving_order", "is_list", "ladder_of", "saved_gates"]

LADDERS = ("ascending", "z-first")
"""Orders in which a ladder takes the qubits of a string."""

Ladder = tuple[tuple[int, int, int], ...]
Arrangement = list[tuple[int, list[int]]]


def ladder_of(x: int, z: int, order: str) -> Ladder:
    """Return the rungs of a string, (rank, qubit, letter), in the order of the ladder.

    Equal entries are the same qubit in the same basis. Letters are 0 for Z, 1 for X, 2 for Y.
    """
    rungs = []
    for qubit in range((x | z).bit_length()):
        if (x | z) >> qubit & 1:
            letter = (x >> qubit & 1) + ((x & z) >> qubit & 1)
            rungs.append((letter if order == "z-first" else 0, qubit, letter))
    return tuple(sorted(rungs))


def saved_gates(circuit: Rotations, ladder: str = "ascending") -> int:
    """Count the two-qubit gates that cancel between neighbouring ladders of a circuit.

    Parameters
    ----------
    circuit : Rotations
    ladder : {"ascending", "z-first"}
        The order in which a ladder takes the qubits of its string; see the notes.

    Returns
    -------
    int
        To be taken off `Rotations.two_qubit_gates`, which counts 2(w-1) for each rotation of weight w.

    Raises
    ------
    RotationError
        `circuit` is not a Rotations.
    ArgumentError
        Unknown ladder; `choices` lists all.

    Notes
    -----
    A rotation is a ladder of controlled-NOTs q_1 → q_2 → … on its qubits, changed to the basis of its letters,
    a z rotation on the last, and the ladder undone. Between neighbours whose ladders start with the same k
    qubits and letters, 2(k-1) gates cancel exactly. Only neighbours in the list count: a rotation between them
    hides what could cancel, even where it acts on other qubits. Neighbours with equal strings save a whole ladder
    down and up. Repeats are counted without writing them out.

    References
    ----------
    M. A. Nielsen and I. L. Chuang, "Quantum Computation and Quantum Information" (2000), section 4.7.3.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.ladders import saved_gates
    >>> circuit = tt.Rotations(x=[0b0001, 0b0001], z=[0b0110, 0b1010], angles=[0.1, 0.2], qubits=4)
    >>> circuit.two_qubit_gates(), saved_gates(circuit)  # X_0 Z_1 Z_2, then X_0 Z_1 Z_3: one rung up, one down
    (8, 2)
    """
    if not isinstance(circuit, Rotations):
        raise RotationError(
            f"circuit: is not a Rotations ({circuit!r}); make one with formula.rotations(partition, time, steps)",
            argument="circuit",
        )
    return _walk(circuit, known_ladder(ladder))[0]


def known_ladder(ladder: object) -> str:
    """Return the name of a ladder order, or refuse it."""
    if not isinstance(ladder, str) or ladder not in LADDERS:
        near = difflib.get_close_matches(ladder, LADDERS, n=1, cutoff=0.5) if isinstance(ladder, str) else []
        hint = f"did you mean {near[0]!r}? " if near else ""
        raise ArgumentError(
            f"ladder: is unknown ({ladder!r}); {hint}choose one of {', '.join(map(repr, LADDERS))}",
            argument="ladder",
            value=ladder,
            choices=LADDERS,
        )
    return ladder


def _walk(circuit: Rotations, order: str) -> tuple[int, Ladder | None, Ladder | None]:
    """Saved gates of a circuit, and its first and last ladder (None when it has no rotation)."""
    blocks = circuit.blocks
    if is_list(circuit):
        strings = zip(circuit.x_masks, circuit.z_masks, strict=True)
        ladders = [ladder_of(int(x), int(z), order) for x, z in strings]
        if not ladders:
            return 0, None, None
        return sum(map(_saved, ladders, ladders[1:])), ladders[0], ladders[-1]
    saved = 0
    first: Ladder | None = None
    last: Ladder | None = None
    for block in blocks:
        inside, begins, ends = _walk(block.rotations, order)
        if begins is None or ends is None or block.repeat == 0:
            continue
        saved += block.repeat * inside + (block.repeat - 1) * _saved(ends, begins)
        if last is not None:
            saved += _saved(last, begins)
        first = begins if first is None else first
        last = ends
    return saved, first, last


def is_list(circuit: Rotations) -> bool:
    """Whether a circuit is a plain list: its only block is a list again, itself without the phase."""
    blocks = circuit.blocks
    if len(blocks) != 1 or blocks[0].repeat != 1:
        return False
    inner = blocks[0].rotations.blocks
    return len(inner) == 1 and inner[0].repeat == 1 and inner[0].rotations == blocks[0].rotations


def _common(one: Ladder, other: Ladder) -> int:
    count = 0
    for mine, theirs in zip(one, other, strict=False):
        if mine != theirs:
            break
        count += 1
    return count


def _saved(one: Ladder, other: Ladder) -> int:
    return 2 * max(_common(one, other) - 1, 0)


def gate_saving_order(parts: Sequence[Operator], ladder: str) -> Arrangement:
    """Order parts, and the terms inside each, so that neighbours share much of their ladders.

    Parameters
    ----------
    parts : sequence of Operator
        Each with at least one term.
    ladder : str
        One of `LADDERS`.

    Returns
    -------
    list of (part number, term numbers)
        The first part stays first. Of the others the next is always the one that shares most with the last
        string; inside a part the terms are sorted by ladder, starting with the one that shares most.

    Notes
    -----
    Inside each part, and for parts of one term each all in all, no order of the list saves more. The choice
    of seams between longer parts is greedy. About terms × parts comparisons.
    """
    ladders = [[ladder_of(int(x), int(z), ladder) for x, z in zip(p.x_masks, p.z_masks, strict=True)] for p in parts]
    if all(len(members) == 1 for members in ladders):
        return [(number, [0]) for number in _sharing([members[0] for members in ladders], 0)]
    left = list(range(len(parts)))
    made: Arrangement = []
    last: Ladder = ()
    while left:
        shared = [max(_common(last, rungs) for rungs in ladders[number]) for number in left]
        number = left.pop(shared.index(max(shared)))
        members = ladders[number]
        first = min(range(len(members)), key=lambda k: (-_common(last, members[k]), members[k]))
        inside = _sharing(members, first)
        made.append((number, inside))
        last = members[inside[-1]]
    return made


def _sharing(ladders: list[Ladder], first: int) -> list[int]:
    """An order that begins with one ladder and saves as much as any order of the list.

    What is shared with the first ladder comes before the ladder itself: the members of every start stay together.
    """
    if not ladders:
        return []
    return sorted(
        range(len(ladders)), key=lambda k: (-_common(ladders[first], ladders[k]), ladders[k] if k != first else (), k)
    )
