"""What circuits are written for: gates, joined qubits, error rates."""

from __future__ import annotations

import dataclasses
import difflib
import math
import operator
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from numbers import Real
from typing import Any

from trueturn import _native
from trueturn.errors import ArgumentError
from trueturn.export.connectivity import Edges, edges_of, first_apart, require_connected
from trueturn.ladders import LADDERS as ORDERS
from trueturn.lattice import Lattice
from trueturn.rotations import Rotations

__all__ = ["NATIVES", "ROUTINGS", "SHAPES", "Hardware", "Placed"]

SHAPES = ("staircase", "balanced", "hub")
NATIVES = ("cx", "cz", "zz")
ROUTINGS = ("fewest", "bridges", "swaps")
RATES = ("two_qubit_error", "one_qubit_error", "readout_error")


@dataclass(frozen=True)
class Hardware:
    """How circuits become gates, and how often gates fail.

    Parameters
    ----------
    ladder : {"staircase", "balanced", "hub"}
        How the parity of a string is gathered: from each qubit to the next, in pairs (depth log2 w), or from each
        qubit to the last. On a device with a connectivity it says where on the tree the rotation sits: at the last
        qubit, where the tree is shallow, or at the qubit with most neighbours.
    order : {"ascending", "z-first"}
        In which order a ladder takes its qubits, as in `trueturn.saved_gates`.
    join_pairs : bool
        Two or three commuting strings on one pair of qubits share their gates: XX + YY takes 2, XX + YY + ZZ takes 3.
    native : {"cx", "cz", "zz"}
        The two-qubit gate. With ``"zz"``, exp(-i θ Z Z) for any θ is one gate beside cx.
    connectivity : None, {"all", "line", "ring", "grid"}, Lattice, or iterable of (int, int), optional
        Which physical qubits are joined. None and ``"all"``: all of them.
    layout : sequence of int or "search", optional
        Entry q is the physical qubit that holds qubit q at the start; default q itself. ``"search"`` looks for a layout
        that keeps interacting qubits close, and takes it where the circuit then needs fewer two-qubit gates.
    routing : {"fewest", "bridges", "swaps"}
        For strings on qubits that are not joined: ladders over the qubits between, which moves nothing, or swaps,
        or whichever of the two takes fewer two-qubit gates for the circuit.
    two_qubit_error, one_qubit_error, readout_error : float, optional
        Probability that a gate, or the readout of a qubit, fails; from 0 up to but not including 1.
    synthesis_error : float
        Error in the operator norm allowed for all rotations of the circuit together when they are made from
        Clifford and T gates.

    Raises
    ------
    ArgumentError
        An unknown word, a rate out of range, a connectivity that is none.
    """

    ladder: str = "staircase"
    order: str = "ascending"
    join_pairs: bool = True
    native: str = "cx"
    connectivity: str | Lattice | Sequence[tuple[int, int]] | None = None
    layout: Sequence[int] | str | None = None
    routing: str = "fewest"
    two_qubit_error: float | None = None
    one_qubit_error: float | None = None
    readout_error: float | None = None
    synthesis_error: float = 1e-3

    def __post_init__(self) -> None:
        for name, choices in (("ladder", SHAPES), ("order", ORDERS), ("native", NATIVES), ("routing", ROUTINGS)):
            _require_choice(name, getattr(self, name), choices)
        if isinstance(self.layout, str):
            _require_choice("layout", self.layout, ("search",))
        if not isinstance(self.join_pairs, bool):
            raise _refuse("join_pairs", "not True or False", self.join_pairs, "give one of the two")
        for name in RATES:
            rate = getattr(self, name)
            if rate is not None and not 0.0 <= _real(name, rate) < 1.0:
                raise _refuse(name, "no probability below 1", rate, "give a rate such as 0.003")
        if not 0.0 < _real("synthesis_error", self.synthesis_error) < math.inf:
            raise _refuse("synthesis_error", "not above zero", self.synthesis_error, "give an error such as 1e-3")
        if not isinstance(self.connectivity, (str, Lattice)) and isinstance(self.connectivity, Iterable):
            object.__setattr__(self, "connectivity", tuple(self.connectivity))

    @classmethod
    def of(cls, options: dict[str, Any]) -> Hardware:
        """Make a device from keywords; an unknown one is refused with the nearest that is known."""
        names = [entry.name for entry in dataclasses.fields(cls)]
        for name in options:
            if name not in names:
                near = difflib.get_close_matches(name, names, n=1, cutoff=0.5)
                hint = f"did you mean {near[0]!r}?" if near else f"known: {', '.join(names)}"
                raise ArgumentError(f"{name}: unknown option ({options[name]!r}); {hint}", argument=name, value=name)
        return cls(**options)

    def placed(self, qubits: int) -> Placed:
        """Resolve connectivity and layout for circuits on `qubits` qubits.

        Raises
        ------
        ArgumentError
            Too few physical qubits, qubits that cannot meet, a layout that does not fit.
        """
        count, edges = edges_of(self.connectivity, qubits)
        layout = tuple(range(qubits))
        if self.layout is not None and self.layout != "search":
            layout = _layout(self.layout, qubits)
            if edges is None:
                count = max((*layout, qubits - 1)) + 1
        if any(place >= count for place in layout):
            raise _refuse("layout", f"leaves the device of {count} qubits", max(layout), f"use 0 to {count - 1}")
        if edges is not None and self.layout != "search":
            require_connected(count, edges, layout)
        return Placed(self, count, edges, layout)


@dataclass(frozen=True)
class Placed:
    """A device with the physical qubits of one circuit settled."""

    hardware: Hardware
    qubits: int
    edges: Edges | None = field(repr=False)
    layout: tuple[int, ...]

    @property
    def is_plain(self) -> bool:
        """Whether every qubit is where its number says and all are joined."""
        return self.edges is None and self.layout == tuple(range(self.qubits))

    def attempts(self, circuit: Rotations) -> Iterator[tuple[str, tuple[int, ...]]]:
        """Yield the routings and start layouts to choose from."""
        layouts = [self.layout]
        if self.edges is not None and self.hardware.layout == "search":
            from trueturn.export.placement import searched_layout

            if first_apart(self.qubits, self.edges, self.layout) is not None:
                layouts.clear()
            layouts.append(searched_layout(circuit, self.qubits, self.edges))
        routing = self.hardware.routing
        routings = (routing,) if routing != "fewest" else ("bridges",) if self.edges is None else ("bridges", "swaps")
        return ((routing, layout) for layout in dict.fromkeys(layouts) for routing in routings)

    def options(self, routing: str, layout: tuple[int, ...]) -> _native.GateOptions:
        """Return the options for the core."""
        hardware = self.hardware
        return _native.GateOptions(
            shape=hardware.ladder,
            order=hardware.order,
            join=hardware.join_pairs,
            native=hardware.native,
            qubits=self.qubits,
            edges=self.edges,
            routing=routing,
            layout=layout,
        )


def _layout(layout: object, qubits: int) -> tuple[int, ...]:
    try:
        found = tuple(operator.index(place) for place in layout)  # type: ignore[attr-defined]
    except TypeError:
        raise _refuse("layout", "not a list of whole numbers", layout, "give a physical qubit for each") from None
    if len(found) != qubits:
        raise _refuse("layout", f"has {len(found)} entries for {qubits} qubits", layout, "give one for each")
    if len(set(found)) < len(found) or any(not 0 <= place < 1 << 14 for place in found):
        raise _refuse("layout", "entries repeat or are out of range", layout, "give distinct qubit numbers")
    return found


def _require_choice(name: str, value: object, choices: Sequence[str]) -> None:
    if isinstance(value, str) and value in choices:
        return
    near = difflib.get_close_matches(value, choices, n=1, cutoff=0.5) if isinstance(value, str) else []
    hint = f"did you mean {near[0]!r}? " if near else ""
    raise _refuse(name, "unknown", value, f"{hint}choose one of {', '.join(map(repr, choices))}")


def _real(name: str, value: object) -> float:
    if isinstance(value, bool) or not isinstance(value, Real):
        raise _refuse(name, "not a number", value, "give a number such as 0.001")
    return float(value)


def _refuse(name: str, wrong: str, value: object, remedy: str) -> ArgumentError:
    shown = repr(value)
    shown = shown if len(shown) <= 80 else shown[:79] + "…"
    return ArgumentError(f"{name}: {wrong} ({shown}); {remedy}", argument=name, value=value)
