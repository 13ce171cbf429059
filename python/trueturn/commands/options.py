"""Arguments that several commands share."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import click

from trueturn.errors import ArgumentError

__all__ = ["AS_JSON", "JOB", "THREADS", "circuit_options", "is_circuit", "require_readable"]

JOB = click.Path(path_type=Path)
THREADS = click.option(
    "--threads", type=click.IntRange(min=1), metavar="N", help="Threads to use; results do not depend on it."
)
AS_JSON = click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")


class _Layout(click.ParamType[tuple[int, ...]]):
    """A list of physical qubits: ``2,0,1``, brackets and spaces allowed as in a file's comment."""

    name = "layout"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[int, ...]:
        if isinstance(value, tuple):
            return value
        numbers = re.fullmatch(r"\s*\[?((?:\s*\d{1,6}\s*,)*\s*\d{1,6}\s*)\]?\s*", value)
        if numbers is None:
            self.fail(f"no list of qubits ({value}); give for instance 2,0,1", param, ctx)
        return tuple(int(number) for number in numbers[1].split(","))


class _Names(click.ParamType[tuple[str, ...]]):
    """Names of gates with commas between them; none where the text is empty."""

    name = "names"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[str, ...]:
        return value if isinstance(value, tuple) else tuple(name.strip() for name in value.split(",") if name.strip())


_CIRCUIT_OPTIONS = (
    click.option(
        "--prepare", metavar="RANGE", help='Gates of a circuit that prepare the start: "0:120" or "lines 4-9".'
    ),
    click.option("--basis", metavar="RANGE", help="Gates that change the basis before measurement, likewise."),
    click.option(
        "--start-layout",
        type=_Layout(),
        metavar="2,0,1",
        help="Physical qubits that hold qubits 0, 1, ... before the first gate; by default as the file's comments say.",
    ),
    click.option("--end-layout", type=_Layout(), metavar="2,0,1", help="The same after the last gate."),
    click.option(
        "--native-gates",
        type=_Names(),
        metavar="NAME,NAME",
        help="Gates that the file defines and that count as one gate each; by default rzz,swap.",
    ),
)


def circuit_options(command: Callable[..., int]) -> Callable[..., int]:
    """Give a command what says how a circuit's file is read: prepare, basis, start_layout, end_layout, native_gates."""
    for option in reversed(_CIRCUIT_OPTIONS):
        command = option(command)
    return command


def require_readable(path: Path) -> None:
    """Check that a circuit's file can be opened.

    Raises
    ------
    ArgumentError
        It cannot.
    """
    try:
        path.open("rb").close()
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        message = f"CIRCUIT: cannot be read ({path}: {reason}); give an OpenQASM file"
        raise ArgumentError(message, argument="CIRCUIT", value=str(path)) from error


def is_circuit(files: Sequence[Path]) -> bool:
    """Whether a lone file looks like a circuit: by its suffix, or because it states a version of OpenQASM."""
    if len(files) != 1:
        return False
    if files[0].suffix.lower() == ".qasm":
        return True
    try:
        with files[0].open("rb") as file:
            return re.search(rb"^\s*OPENQASM\s+\d", file.read(1 << 12), re.MULTILINE) is not None
    except (OSError, ValueError):
        return False
