"""Layouts: which physical qubit of a routed circuit holds which logical one."""

from __future__ import annotations

import difflib
import operator
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from trueturn.errors import ArgumentError, QasmError
from trueturn.rotations import Rotations

__all__ = ["Layouts", "given_layout", "marked_layouts"]

NAMES = ("start_layout", "end_layout")
Layout = tuple[int, ...]


def given_layout(argument: str, layout: Sequence[int] | None) -> Layout | None:
    """Return a layout that the user gave."""
    if layout is None:
        return None
    try:
        found = tuple(operator.index(qubit) for qubit in layout)
    except TypeError:
        found = ()
    if not found or min(found) < 0 or len(set(found)) != len(found):
        raise ArgumentError(
            f"{argument}: no list of different qubits ({layout!r}); entry q is the physical qubit that holds logical qubit q",
            argument=argument,
            value=layout,
        )
    return found


def marked_layouts(
    marks: Iterable[tuple[int, int, str]],
) -> tuple[tuple[Layout | None, Layout | None], list[tuple[int, str]]]:
    """Return the layouts in the comments ``// trueturn: start_layout = [2, 0, 1]`` of a file, and lines of other comments.

    Raises
    ------
    QasmError
        A comment that starts so and is no list of different qubits, says it twice, or is nearly one of the names.
    """
    found: dict[str, Layout] = {}
    unknown: list[tuple[int, str]] = []
    for line, column, text in marks:
        name, equals, value = (part.strip() for part in text.partition("="))
        if name not in NAMES:
            word = name.lower().replace("-", "_").replace(" ", "_")
            near = difflib.get_close_matches(word, NAMES, n=1, cutoff=0.75)
            if near:
                message = f"circuit: line {line}, column {column}: unknown ({name}); did you mean {near[0]}?"
                raise QasmError(message, path="", line=line, column=column)
            unknown.append((line, text.strip()))
            continue
        numbers = re.fullmatch(r"\[((?:\s*\d{1,6}\s*,)*\s*\d{1,6}\s*)\]", value)
        layout = tuple(int(number) for number in numbers[1].split(",")) if numbers is not None else ()
        if not equals or not layout or len(set(layout)) != len(layout):
            message = (
                f"circuit: line {line}, column {column}: no list of different qubits ({text}); write {name} = [2, 0, 1]"
            )
            raise QasmError(message, path="", line=line, column=column)
        if name in found:
            message = f"circuit: line {line}, column {column}: {name} is said twice; keep one of them"
            raise QasmError(message, path="", line=line, column=column)
        found[name] = layout
    return (found.get(NAMES[0]), found.get(NAMES[1])), unknown


@dataclass(frozen=True)
class Layouts:
    """The layouts of a circuit on `qubits` physical qubits; None where nothing was said.

    With L the operator that moves logical qubit q to physical qubit L(q), a circuit U on physical qubits does
    L_end† U L_start on logical ones. Where the file has parts, qubits may move in each: a part starts where the one before
    left them.
    """

    start: Layout | None
    end: Layout | None
    qubits: int

    def logical(self, *parts: Rotations) -> tuple[Rotations, ...]:
        """Return the preparation, the evolution and the change of basis on logical qubits.

        Raises
        ------
        ArgumentError
            A layout names a qubit that the circuit does not have, the layouts differ in length, or a qubit that the start
            layout does not list is used.
        """
        if (
            self.start is None
            and self.end is None
            and not any(part.relabelling != tuple(range(self.qubits)) for part in parts)
        ):
            return parts
        for name, layout in zip(NAMES, (self.start, self.end), strict=True):
            if layout is not None and max(layout) >= self.qubits:
                raise ArgumentError(
                    f"{name}: names qubit {max(layout)} of a circuit on {self.qubits} qubits; give 0 to {self.qubits - 1}",
                    argument=name,
                    value=layout,
                )
        if self.start is not None and self.end is not None and len(self.start) != len(self.end):
            raise ArgumentError(
                f"end_layout: lists {len(self.end)} qubits where start_layout lists {len(self.start)}; list the same qubits",
                argument="end_layout",
                value=self.end,
            )
        listed = self.start if self.start is not None else tuple(range(len(self.end or range(self.qubits))))
        start = _extended(listed, (), self.qubits)
        preparation, evolution, basis = parts
        entering = _moved(start, preparation)
        leaving = _moved(_moved(entering, evolution), basis)
        end = start if self.end is None else _extended(self.end, leaving, self.qubits)
        before_basis = tuple(_inverse(basis.relabelling)[place] for place in end)
        bounds = ((start, entering), (entering, before_basis), (before_basis, end))
        made = [_between(part, *ends) for part, ends in zip(parts, bounds, strict=True)]
        if len(listed) == self.qubits:
            return tuple(made)
        return tuple(_narrowed(part, len(listed)) for part in made)


def _moved(layout: Layout, part: Rotations) -> Layout:
    return tuple(part.relabelling[place] for place in layout)


def _inverse(moves: Sequence[int]) -> Layout:
    back = [0] * len(moves)
    for place, target in enumerate(moves):
        back[target] = place
    return tuple(back)


def _extended(layout: Layout, preferred: Layout, qubits: int) -> Layout:
    """Give a place to the qubits that a layout does not list: where they are, if that is free."""
    used = set(layout)
    places: list[int | None] = list(layout)
    for place in preferred[len(layout) :]:
        places.append(None if place in used else place)
        used.add(place)
    places += [None] * (qubits - len(places))
    free = iter(sorted(set(range(qubits)) - {place for place in places if place is not None}))
    return tuple(next(free) if place is None else place for place in places)


def _between(part: Rotations, start: Layout, end: Layout) -> Rotations:
    nothing = Rotations([], [], [], part.qubits)
    return nothing.with_frame(relabelling=start) + part + nothing.with_frame(relabelling=_inverse(end))


def _narrowed(part: Rotations, logical: int) -> Rotations:
    narrow = part._circuit.narrowed(logical)
    if narrow is None:
        raise ArgumentError(
            f"start_layout: lists {logical} qubits, and gates act on others too (or qubits end elsewhere than end_layout "
            "says); list every qubit that is used",
            argument="start_layout",
            value=logical,
        )
    return Rotations._wrap(narrow)
