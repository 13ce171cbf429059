"""The section `[target]` of a job file: what is asked, and how well."""

from __future__ import annotations

from itertools import pairwise
from typing import NamedTuple

from trueturn.audit.job_table import Table
from trueturn.operator import Operator

__all__ = ["Target", "read_target"]

NORMED = {"state": "states", "operator": "circuits"}


class Target(NamedTuple):
    """What a job asks of its circuits; the fields are those of `Job`."""

    times: tuple[float, ...]
    tolerance: float
    quantity: str
    readout: str
    relative_to: str | None
    observables: dict[str, Operator]


def read_target(target: Table, qubits: int) -> Target:
    """Read the section; observables act on the qubits of the system."""
    target.only(("times", "time", "tolerance", "quantity", "readout", "relative_to", "observables"))
    times = read_times(target)
    tolerance = target.positive("tolerance", "tolerance = 0.01")
    quantity = target.choice("quantity", ("observables", "state", "operator"), default="observables")
    readout = target.choice("readout", ("along", "separate"), default="along")
    relative_to = target.choice("relative_to", ("norm",)) if "relative_to" in target else None
    if relative_to is not None and quantity != "observables":
        raise target.error("relative_to", f"has no meaning for {NORMED[quantity]}, whose norm is 1", "take it out")
    observables = read_observables(target, qubits)
    if quantity == "observables" and not observables:
        remedy = 'add [target.observables] with a line such as edge = "Z_0", or set quantity = "state"'
        raise target.error("observables", "missing", remedy)
    return Target(times, tolerance, quantity, readout, relative_to, observables)


def read_times(target: Table) -> tuple[float, ...]:
    """Read `times`, or `time` for a single one; ascending and above zero."""
    if ("times" in target) == ("time" in target):
        wrong = "given together with time" if "times" in target else "missing"
        raise target.error("times", wrong, "write times = [0.5, 1.0], or time = 1.0 for a single one")
    if "time" in target:
        return (target.positive("time", "time = 1.0"),)
    example = "times = [0.5, 1.0]"
    values = target.values["times"]
    if not isinstance(values, list):
        raise target.error("times", "not a list", f"write {example}, or time = 1.0", values)
    if not values:
        raise target.error("times", "empty", f"write {example}")
    times = [target.checked_number("times", value, example, index) for index, value in enumerate(values)]
    if times[0] <= 0 or any(later <= earlier for earlier, later in pairwise(times)):
        raise target.error("times", "not ascending from above zero", f"write for instance {example}", times)
    return tuple(times)


def read_observables(target: Table, qubits: int) -> dict[str, Operator]:
    """Read `[target.observables]`: names with operator text on the qubits of the system."""
    if "observables" not in target:
        return {}
    section = target.table("observables")
    observables = {}
    for name in section.values:
        text = section.text(name, f'{name} = "Z_0 Z_1"')
        with section.blame(name):
            observables[name] = Operator(text, qubits=qubits)
    return observables
