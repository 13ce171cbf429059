"""The check of observables that are passed in under names."""

from __future__ import annotations

from collections.abc import Mapping

from trueturn.errors import ArgumentError
from trueturn.operator import Operator

__all__ = ["named_operators"]


def named_operators(observables: object) -> dict[str, Operator]:
    """Return observables by name, none for None; what is no mapping of names to operators is refused."""
    if observables is None:
        return {}
    remedy = "give a mapping of names to operators, such as {'m': Operator('Z_0', qubits=…)}"
    if not isinstance(observables, Mapping):
        raise ArgumentError(
            f"observables: is no mapping ({observables!r}); {remedy}", argument="observables", value=observables
        )
    for name, operator in observables.items():
        if not isinstance(name, str):
            raise ArgumentError(
                f"observables: has a name that is no text ({name!r}); {remedy}", argument="observables", value=name
            )
        if not isinstance(operator, Operator):
            raise ArgumentError(
                f"observables[{name!r}]: no Operator ({type(operator).__name__}); {remedy}",
                argument="observables",
                value=operator,
            )
    return dict(observables)
