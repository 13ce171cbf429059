"""What a circuit costs: the figures that plans are ranked by."""

from __future__ import annotations

import difflib
import math
from collections.abc import Callable, Iterable, Mapping
from typing import NamedTuple

import numpy as np

from trueturn.errors import ArgumentError
from trueturn.rotations import Rotations

__all__ = ["COSTS", "Prices", "chosen_costs", "cost_words", "short_words", "t_count"]

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
GATES_PER_HALVING = 3.0
"""T gates for each halving of the error of one synthesised rotation [1]."""

# An angle counts as a multiple of π/8 where rounding alone could have moved it there: some roundings of an angle near it.
_SAME_ANGLE = 8.0 * 2.0**-53


def cost_words(name: str) -> str:
    """Name what a cost counts."""
    return COSTS.get(name, name)


def short_words(name: str) -> str:
    """Name a cost over a column."""
    return SHORT.get(name, name)


def t_count(circuit: Rotations, error: float) -> int:
    """Return the number of T gates when every rotation is synthesised from Clifford and T gates.

    Parameters
    ----------
    circuit : Rotations
    error : float
        Bound on the spectral-norm error of all synthesised rotations together; each gets an equal share.

    Notes
    -----
    exp(-i θ P) is a Clifford gate for θ a multiple of π/4 and takes one T gate for an odd multiple of π/8. Any other takes
    3 log₂(1/ε) T gates at error ε [1]: the leading term, what grows as log log(1/ε) is left out. Errors of R rotations add
    up to at most their sum, so each gets error/R.

    References
    ----------
    .. [1] N. J. Ross, P. Selinger, Optimal ancilla-free Clifford+T approximation of z-rotations,
       Quantum Inf. Comput. 16, 901 (2016), abstract.
    """
    single = synthesised = 0
    for body, repeat in circuit.blocks:
        eighths = body.angles / (math.pi / 8.0)
        whole = np.rint(eighths)
        exact = np.abs(eighths - whole) <= _SAME_ANGLE * np.maximum(1.0, np.abs(whole))
        acts = np.array([x | z != 0 for x, z in zip(body.x_masks, body.z_masks, strict=True)], dtype=bool)
        single += repeat * int(np.count_nonzero(acts & exact & (whole % 2 == 1)))
        synthesised += repeat * int(np.count_nonzero(acts & ~exact))
    if synthesised == 0:
        return single
    each = max(1, math.ceil(GATES_PER_HALVING * math.log2(max(1.0, synthesised / error))))
    return single + synthesised * each


class Prices(NamedTuple):
    """Which costs a plan is ranked by, the first of them before the others, and what they need.

    `synthesis` is the spectral-norm error that all synthesised rotations share; without it no T gates are counted.
    """

    names: tuple[str, ...]
    own: Mapping[str, OwnCost]
    synthesis: float | None

    @property
    def compared(self) -> tuple[str, ...]:
        """The costs by which one way beats another: those that are named, or of a single one all that are reproducible."""
        if len(self.names) > 1:
            return self.names
        t_gates = ("t_count",) if self.synthesis is not None else ()
        return ("two_qubit_gates", "depth", "rotations", *t_gates, *self.own)

    def of(self, circuit: Rotations, seconds: float) -> dict[str, float]:
        """Return every cost of a circuit; `seconds` is what its run took."""
        found: dict[str, float] = {
            "two_qubit_gates": circuit.two_qubit_gates(),
            "depth": circuit.depth(),
            "rotations": circuit.count,
        }
        if self.synthesis is not None:
            found["t_count"] = t_count(circuit, self.synthesis)
        found["wall_time"] = seconds
        return found | {name: float(price(circuit)) for name, price in self.own.items()}


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
