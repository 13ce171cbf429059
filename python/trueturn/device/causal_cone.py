"""The rotations that a local observable sees, found without writing repeats out.

Read the circuit backwards and keep the observable as it has become by then. A rotation that commutes with it leaves it
alone and can be left out: S†OS stays the same operator, exactly. What the observable has become is not computed, only
enclosed, in one of two ways:

- ``by="support"``: some operator on a set of qubits. A rotation that touches none of them is left out, and takes them
  all in otherwise. Left-out rotations act on other qubits altogether, so that noise on them is not seen either.
- ``by="commutation"``: a sum of strings that have, on each qubit, only I, or only I and one letter, or any letter. A
  rotation that agrees with the known letter wherever it meets the sum commutes with every string in it. One that does not
  multiplies strings by its own, so its letters are added qubit by qubit. Fewer rotations are kept, but those left out
  may act on qubits of the cone: on a device this holds only where they are really not run.

Both enclosures only grow. So a repeated block is gone through until one passage changes nothing; from there on all
earlier repeats keep the same rotations. That takes at most 2n + 1 passages on n qubits, for any number of repeats.

References
----------
E. H. Lieb, D. W. Robinson, The finite group velocity of quantum spin systems, Commun. Math. Phys. 28, 251 (1972), is the
continuous-time counterpart; for circuits the cone is exact and elementary.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from trueturn.errors import ArgumentError, OperatorError
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["CausalCone", "causal_cone"]

KINDS = ("commutation", "support")


@dataclass(frozen=True)
class CausalCone:
    """A circuit and an observable reduced to the qubits that matter; made by `causal_cone`.

    Attributes
    ----------
    rotations : Rotations
        What is left, on ``len(qubits)`` qubits.
    observable : Operator
        The observable on these qubits.
    qubits : tuple of int
        The qubits kept, ascending: qubit k of `rotations` and `observable` was ``qubits[k]``.
    left_out : int
        Rotations that the observable does not see, repeats included.
    """

    rotations: Rotations
    observable: Operator
    qubits: tuple[int, ...]
    left_out: int

    def start(self, sites: str | Sequence[object]) -> str | list[object]:
        """Pick the kept qubits' entries from a product state as `State.product` takes it.

        Raises
        ------
        ArgumentError
            There are fewer entries than the last kept qubit asks for.
        """
        if len(sites) <= self.qubits[-1]:
            raise ArgumentError(
                f"sites: too few ({len(sites)}); give one for each qubit, {self.qubits[-1] + 1} or more",
                argument="sites",
                value=sites,
            )
        picked = [sites[qubit] for qubit in self.qubits]
        return "".join(map(str, picked)) if isinstance(sites, str) else picked


def causal_cone(rotations: Rotations, observable: Operator, by: str = "commutation") -> CausalCone:
    """Reduce a circuit to what an observable measured at its end can depend on.

    Parameters
    ----------
    rotations : Rotations
    observable : Operator
        On as many qubits.
    by : "commutation" or "support"
        ``"commutation"`` keeps the fewest rotations: for simulation, or for a device that then runs the reduced circuit.
        ``"support"`` keeps every rotation that touches the cone: for counting the gates whose noise reaches the
        observable when the whole circuit runs.

    Returns
    -------
    CausalCone

    Raises
    ------
    ArgumentError
        `rotations` is no Rotations, or `by` is neither word.
    OperatorError
        `observable` is no Operator, is on another number of qubits, or acts on none.

    Notes
    -----
    Exact for the circuit, whatever the angles: for every state, the expectation of the observable after the reduced
    circuit in the state reduced to the kept qubits is that after the whole one. Time: at most 2n + 1 times the rotations
    of the blocks; repeats cost nothing. A Clifford frame of the circuit becomes rotations of the reduced one, and a
    relabelling renames the observable, so that `CausalCone.qubits` are named as at the start.

    Examples
    --------
    >>> import trueturn as tt
    >>> chain = tt.model.ising(tt.lattice.chain(60), zz=1.0, x=0.5)
    >>> circuit = tt.formula("strang").rotations(tt.Partition.of(chain, "commuting"), time=0.5, steps=3)
    >>> cone = causal_cone(circuit, tt.Operator("Z_30", qubits=60))
    >>> cone.qubits
    (27, 28, 29, 30, 31, 32, 33)
    >>> state = tt.State.product(cone.start("01" * 30))
    >>> state.apply(cone.rotations)
    >>> round(state.expectation(cone.observable), 6)
    0.908976
    """
    if not isinstance(rotations, Rotations):
        raise ArgumentError(
            f"rotations: no Rotations ({type(rotations).__name__}); make them by Formula.rotations",
            argument="rotations",
            value=rotations,
        )
    if by not in KINDS:
        raise ArgumentError(f"by: unknown ({by!r}); give one of {', '.join(map(repr, KINDS))}", argument="by", value=by)
    if not isinstance(observable, Operator) or observable.qubits != rotations.qubits:
        what = f"on {observable.qubits} qubits" if isinstance(observable, Operator) else type(observable).__name__
        raise OperatorError(
            f"observable: no Operator on the {rotations.qubits} qubits of the circuit ({what}); give one that is",
            argument="observable",
        )
    # A relabelling moves the observable, not the state; a Clifford frame is a few more rotations at the end.
    observable = observable.relabel({now: before for before, now in enumerate(rotations.relabelling)})
    seen = _Seen(by == "support")
    strings = list(zip(observable.x_masks.tolist(), observable.z_masks.tolist(), strict=True))
    for x, z in strings:
        seen.add(x, z)
    if not seen.qubits:
        raise OperatorError(
            "observable: acts on no qubit; give one that is more than a number",
            argument="observable",
        )
    parts = [(_tree(body), repeat) for body, repeat in (*rotations.blocks, *rotations.frame.blocks)]
    kept = seen.backwards(_Blocks(parts))
    places = tuple(qubit for qubit in range(rotations.qubits) if seen.qubits >> qubit & 1)
    squeeze = _Squeeze(places)
    reduced = _circuit(kept, squeeze) + Rotations([], [], [], len(places), phase=rotations.phase)
    watched = Operator.from_masks(
        [squeeze(x) for x, _ in strings], [squeeze(z) for _, z in strings], observable.coefficients, len(places)
    )
    return CausalCone(reduced, watched, places, rotations.count + rotations.frame.count - reduced.count)


Rotation = tuple[int, int, float]


@dataclass
class _Blocks:
    """Repeated parts of a circuit in order of time."""

    parts: list[tuple[_Blocks | list[Rotation], int]]


def _tree(circuit: Rotations) -> _Blocks | list[Rotation]:
    """Turn a circuit into nested lists; every list of rotations is read out once."""
    blocks = circuit.blocks
    if len(blocks) == 1 and blocks[0].repeat == 1:
        columns = (circuit.x_masks.tolist(), circuit.z_masks.tolist(), circuit.angles.tolist())
        return list(zip(*columns, strict=True))
    return _Blocks([(_tree(body), repeat) for body, repeat in blocks])


class _Seen:
    """Encloses what the observable has become: one known letter on the qubits of x and z, any on those of `full`."""

    def __init__(self, by_support: bool) -> None:
        self.by_support = by_support
        self.x = self.z = self.full = 0

    @property
    def qubits(self) -> int:
        return self.x | self.z | self.full

    def add(self, x: int, z: int) -> None:
        """Take the letters of a string in."""
        lone = self.x | self.z
        new = (x | z) & ~(lone | self.full)
        mixed = (x | z) & lone & ((self.x ^ x) | (self.z ^ z))
        self.full |= mixed
        self.x = (self.x | x & new) & ~mixed
        self.z = (self.z | z & new) & ~mixed

    def misses(self, x: int, z: int) -> bool:
        """Whether a rotation about this string surely changes nothing."""
        support = x | z
        if self.by_support:
            return not support & self.qubits
        return not support & (self.full | (self.x | self.z) & ((self.x ^ x) | (self.z ^ z)))

    def backwards(self, tree: _Blocks | list[Rotation]) -> _Blocks | list[Rotation]:
        """Go through a part of the circuit from its end; return what is seen of it."""
        if not isinstance(tree, _Blocks):
            kept = []
            for x, z, angle in reversed(tree):
                if not self.misses(x, z):
                    self.add(x, z)
                    kept.append((x, z, angle))
            return kept[::-1]
        parts: list[tuple[_Blocks | list[Rotation], int]] = []
        for body, repeat in reversed(tree.parts):
            left = repeat
            while left:
                before = self.x, self.z, self.full
                found = self.backwards(body)
                times = left if before == (self.x, self.z, self.full) else 1
                parts.append((found, times))
                left -= times
        return _Blocks(parts[::-1])


class _Squeeze:
    """Moves the bits of kept qubits together."""

    def __init__(self, places: Iterable[int]) -> None:
        self.places = tuple(places)
        self.known: dict[int, int] = {}

    def __call__(self, mask: int) -> int:
        if mask not in self.known:
            self.known[mask] = sum((mask >> old & 1) << new for new, old in enumerate(self.places))
        return self.known[mask]


def _circuit(tree: _Blocks | list[Rotation], squeeze: _Squeeze) -> Rotations:
    qubits = len(squeeze.places)
    if not isinstance(tree, _Blocks):
        x, z = [squeeze(x) for x, _, _ in tree], [squeeze(z) for _, z, _ in tree]
        return Rotations(x, z, [angle for _, _, angle in tree], qubits)
    made = Rotations([], [], [], qubits)
    for body, repeat in tree.parts:
        made = made + _circuit(body, squeeze).times(repeat)
    return made
