"""What a circuit costs: the figures that plans are ranked by."""

from __future__ import annotations

import difflib
import math
from collections.abc import Callable, Iterable, Mapping
from contextlib import suppress
from dataclasses import replace
from numbers import Real
from typing import NamedTuple

import numpy as np

from trueturn.errors import ArgumentError
from trueturn.export.cost import cost_of
from trueturn.export.hardware import Hardware
from trueturn.rotations import Rotations

__all__ = ["COSTS", "Prices", "chosen_costs", "cost_words", "short_words"]

COSTS: Mapping[str, str] = {
    "two_qubit_gates": "two-qubit gates",
    "depth": "layers of two-qubit gates",
    "rotations": "rotations",
    "t_count": "T gates",
    "wall_time": "seconds of simulation",
}
SHORT: Mapping[str, str] = {
    "two_qubit_gates": "2-qubit gates",
    "t_count": "T gates",
    "wall_time": "seconds",
}
OwnCost = Callable[[Rotations], float]


def cost_words(name: str) -> str:
    """Name what a cost counts."""
    return COSTS.get(name, name)


def short_words(name: str) -> str:
    """Name a cost over a column."""
    return SHORT.get(name, name)


class Prices(NamedTuple):
    """Which costs a plan is ranked by, the first of them before the others, and what they need.

    `synthesis` is the spectral-norm error that all synthesised rotations share; without it no T gates are counted. With
    `hardware` gates are those of the circuit as it is written for it, else 2(w-1) for each rotation of weight w.
    """

    names: tuple[str, ...]
    own: Mapping[str, OwnCost]
    synthesis: float | None
    hardware: Hardware | None = None

    @property
    def compared(self) -> tuple[str, ...]:
        """The costs by which one way beats another: those that are named, or of a single one all that are reproducible."""
        if len(self.names) > 1:
            return self.names
        t_gates = ("t_count",) if self.synthesis is not None else ()
        return ("two_qubit_gates", "depth", "rotations", *t_gates, *self.own)

    def of(self, circuit: Rotations, seconds: float) -> dict[str, float]:
        """Return every cost of a circuit; `seconds` is what its run took."""
        found: dict[str, float]
        written = None
        if self.hardware is not None or self.synthesis is not None:
            hardware = self.hardware or Hardware()
            written = cost_of(circuit, replace(hardware, synthesis_error=self.synthesis or hardware.synthesis_error))
        if self.hardware is not None and written is not None:
            assert written.two_qubit_depth is not None  # only the depth of a file that was read may be unknown
            found = {
                "two_qubit_gates": written.two_qubit_gates,
                "depth": written.two_qubit_depth,
                "rotations": written.rotations,
            }
        else:
            found = {
                "two_qubit_gates": circuit.two_qubit_gates(),
                "depth": circuit.depth(),
                "rotations": circuit.count,
            }
        if self.synthesis is not None and written is not None:
            found["t_count"] = written.t_count
        found["wall_time"] = seconds
        return found | {name: _own_cost(name, price(circuit)) for name, price in self.own.items()}


def _own_cost(name: str, value: object) -> float:
    """Return what a function of the user made of a circuit as a float; ranks need a finite number."""
    if isinstance(value, (Real, np.bool_)):
        with suppress(OverflowError):
            number = float(value)
            if math.isfinite(number):
                return number
    raise ArgumentError(
        f"cost: gives no finite number ({name}: {value!r}); return one for every circuit", argument="cost", value=value
    )


def chosen_costs(cost: object) -> tuple[tuple[str, ...], dict[str, OwnCost]]:
    """Return the names that a plan is ranked by, and the user's own functions by name.

    Raises
    ------
    ArgumentError
        A name is unknown, or nothing is named.
    """
    given = [cost] if isinstance(cost, str) or callable(cost) else list(cost) if isinstance(cost, Iterable) else [cost]
    names: list[str] = []
    own: dict[str, OwnCost] = {}
    for entry in given:
        if callable(entry):
            name = "own cost" if not own else f"own cost {len(own) + 1}"
            own[name] = entry
        elif isinstance(entry, str) and entry in COSTS:
            name = entry
        else:
            close = difflib.get_close_matches(str(entry), COSTS, n=1)
            remedy = f"did you mean {close[0]!r}?" if close else f"give some of {', '.join(map(repr, COSTS))}"
            raise ArgumentError(
                f"cost: unknown ({entry!r}); {remedy}, or a function of Rotations", argument="cost", value=entry
            )
        if name not in names:
            names.append(name)
    if not names:
        raise ArgumentError("cost: empty; name at least one, such as 'two_qubit_gates'", argument="cost", value=cost)
    return tuple(names), own
