"""Costs of several circuits side by side."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from textwrap import wrap
from typing import Any

from trueturn.audit.figures import count
from trueturn.errors import ArgumentError
from trueturn.export.cost import Cost, cost_of
from trueturn.export.hardware import Hardware
from trueturn.rotations import Rotations

__all__ = ["CostTable", "compare_costs"]

WIDTH = 100
HEADINGS = (
    "two-qubit gates",
    "larger gates",
    "unsaved",
    "swaps",
    "two-qubit depth",
    "depth",
    "rotations",
    "T count",
    "success",
)


@dataclass(frozen=True)
class CostTable:
    """Costs by the name of the circuit, in the order given, or why there is none; prints as a table."""

    rows: Mapping[str, Cost | str]

    @property
    def counted(self) -> dict[str, Cost]:
        """The rows that have a cost."""
        return {name: cost for name, cost in self.rows.items() if isinstance(cost, Cost)}

    def to_dict(self) -> list[dict[str, Any]]:
        """Give the rows as plain data, each with its ``name``; one that is not counted has a ``note`` instead."""
        return [
            {"name": name, **({"note": cost} if isinstance(cost, str) else asdict(cost))}
            for name, cost in self.rows.items()
        ]

    def __repr__(self) -> str:
        lines = [["", *HEADINGS]]
        for name, cost in self.counted.items():
            figures = (
                cost.two_qubit_gates,
                cost.larger_gates or None,
                cost.unsaved_two_qubit_gates,
                cost.swaps,
                cost.two_qubit_depth,
                cost.depth,
                cost.rotations,
                cost.t_count,
            )
            success = "" if cost.success is None else f"{cost.success:.3g}"
            lines.append([name, *("" if figure is None else count(figure) for figure in figures), success])
        kept = [place for place in range(len(lines[0])) if any(line[place] for line in lines[1:])]
        widths = [max(len(line[place]) for line in lines) for place in kept]
        widths[0] = max(widths[0], *map(len, self.rows))
        laid_out = {}
        for line in lines:
            cells = [line[place] for place in kept]
            laid_out[line[0]] = "  ".join([cells[0].ljust(widths[0]), *map(str.rjust, cells[1:], widths[1:])]).rstrip()
        laid_out |= {name: f"{name.ljust(widths[0])}  {why}" for name, why in self.rows.items() if isinstance(why, str)}
        rows = [laid_out[""], *(laid_out[name] for name in self.rows)]
        said = dict.fromkeys(sentence for cost in self.counted.values() for sentence in cost.assumptions)
        return "\n".join([*rows, *(line for sentence in said for line in wrap(sentence, WIDTH))])


def compare_costs(circuits: Mapping[str, Rotations], **device: Any) -> CostTable:
    """Count the gates of several circuits on one device.

    Parameters
    ----------
    circuits : mapping of str to Rotations
    **device
        As for `Rotations.cost`.

    Returns
    -------
    CostTable

    Raises
    ------
    ArgumentError
        `circuits` is no mapping of names to circuits; otherwise as for `Rotations.cost`.

    Examples
    --------
    >>> import trueturn as tt
    >>> ring = tt.model.heisenberg(tt.lattice.ring(10), coupling=1.0)
    >>> found = {rule: tt.formula("lie").rotations(tt.Partition.of(ring, rule), 1.0, 4) for rule in ("bond", "axis")}
    >>> table = tt.compare_costs(found)
    >>> [cost.two_qubit_gates for cost in table.rows.values()]
    [120, 240]
    """
    if not isinstance(circuits, Mapping) or not all(isinstance(one, Rotations) for one in circuits.values()):
        raise ArgumentError(
            f"circuits: no mapping of names to Rotations ({type(circuits).__name__}); "
            'give for instance {"strang": circuit}',
            argument="circuits",
            value=circuits,
        )
    target = Hardware.of(device)
    return CostTable({name: cost_of(circuit, target) for name, circuit in circuits.items()})
