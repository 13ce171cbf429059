"""Reading one table of a job file: every value is checked for its type, and every key must be known.

`Table` wraps a mapping that came from TOML together with its place in the file, so that each complaint names
the key in full (``target.tolerance``) and says what to do. It knows nothing about the meaning of the keys.
"""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from typing import Any

from trueturn.errors import JobError, MemoryRefusedError, TrueturnError

__all__ = ["Table", "clip", "nearest"]


def clip(value: object, length: int = 60) -> str:
    """Write a value for an error message, shortened in the middle of nothing: the head, then an ellipsis."""
    text = repr(value) if isinstance(value, str) else str(value)
    return text if len(text) <= length else text[: length - 1] + "…"


def nearest(word: str, choices: Sequence[str]) -> str:
    """Say which known word was probably meant, or list them all."""
    close = difflib.get_close_matches(word, choices, n=1, cutoff=0.6)
    if close:
        return f"did you mean {close[0]}?"
    return "known: " + ", ".join(choices)


class Table:
    """A table of a job file with its name and the path of the file, for complaints.

    Parameters
    ----------
    values : mapping
        As `tomllib` gives it.
    name : str
        Where the table stands: ``""`` for the file itself, ``"target"``, ``"candidate[2]"``.
    path : str
        The job file, for the `path` attribute of errors.
    """

    def __init__(self, values: Mapping[str, Any], name: str, path: str) -> None:
        self.values = values
        self.name = name
        self.path = path

    def __contains__(self, key: str) -> bool:
        return key in self.values

    def full(self, key: str) -> str:
        """Write the key with the table it stands in."""
        return f"{self.name}.{key}" if self.name else key

    def error(self, key: str, wrong: str, remedy: str, value: object = None) -> JobError:
        """Make the error for a key: ``key: what is wrong (value); what to do``."""
        shown = "" if value is None else f" ({clip(value)})"
        full = self.full(key) if key else self.name
        return JobError(f"{full}: {wrong}{shown}; {remedy}", path=self.path, key=full)

    @contextmanager
    def blame(self, key: str, fallback: str = "") -> Iterator[None]:
        """Turn an error of the layers below into a `JobError` that names the key, with the cause attached.

        Without a key it is the one that the error itself names, or `fallback` where the table has none of that name.
        """
        try:
            yield
        except (JobError, MemoryRefusedError):  # a refusal for memory has an exit status of its own
            raise
        except TrueturnError as error:
            name, text = split_name(str(error))
            if not key:
                key = name if name in self.values else fallback
            full = self.full(key) if key else self.name
            raise JobError(f"{full}: {text}", path=self.path, key=full) from error
        except OSError as error:
            raise self.error(key or fallback, "cannot be read", "check the file", error.strerror or error) from error

    def only(self, known: Sequence[str], foreign: Mapping[str, str] | None = None) -> None:
        """Refuse a key that is not known, with the nearest that is.

        `foreign` maps keys that exist elsewhere to the reason why they do not belong here.
        """
        for key in self.values:
            if key in known:
                continue
            if foreign is not None and key in foreign:
                raise self.error(key, foreign[key], "take it out")
            kind = "key" if self.name else "section"
            raise self.error(key, f"unknown {kind}", nearest(key, known))

    def require(self, key: str, example: str) -> Any:
        """Give the value of a key that must be there."""
        if key not in self.values:
            raise self.error(key, "missing", f"add {example}")
        return self.values[key]

    def table(self, key: str) -> Table:
        """Give the table under a key."""
        value = self.values[key]
        if not isinstance(value, Mapping):
            raise self.error(key, f"not a section but {kind_of(value)}", f"write [{self.full(key)}]", value)
        return Table(value, self.full(key), self.path)

    def text(self, key: str, example: str) -> str:
        """Give a text that is not empty."""
        value = self.require(key, example)
        if not isinstance(value, str):
            raise self.error(key, f"not a text but {kind_of(value)}", f"write {example}", value)
        if not value.strip():
            raise self.error(key, "empty", f"write {example}")
        return value

    def choice(self, key: str, choices: Sequence[str], default: str | None = None) -> str:
        """Give one of a few words."""
        if default is not None and key not in self.values:
            return default
        value = self.require(key, f'one of: {key} = "' + f'", {key} = "'.join(choices) + '"')
        if not isinstance(value, str):
            raise self.error(key, f"not a text but {kind_of(value)}", "known: " + ", ".join(choices), value)
        if value not in choices:
            raise self.error(key, "unknown", nearest(value, choices), value)
        return value

    def number(self, key: str, example: str) -> float:
        """Give a finite number."""
        return self.checked_number(key, self.require(key, example), example)

    def positive(self, key: str, example: str) -> float:
        """Give a finite number above zero."""
        value = self.number(key, example)
        if value <= 0:
            raise self.error(key, "not above zero", f"write {example}", value)
        return value

    def whole(self, key: str, example: str, least: int = 1) -> int:
        """Give a whole number that is not below `least`."""
        value = self.require(key, example)
        if isinstance(value, bool) or not isinstance(value, int):
            raise self.error(key, f"not a whole number but {kind_of(value)}", f"write {example}", value)
        if value < least:
            raise self.error(key, f"below {least}", f"write {example}", value)
        return value

    def flag(self, key: str, default: bool) -> bool:
        """Give true or false."""
        value = self.values.get(key, default)
        if not isinstance(value, bool):
            raise self.error(key, f"not true or false but {kind_of(value)}", "write true or false", value)
        return value

    def strength(self, key: str, example: str) -> float | list[float]:
        """Give a number, or a list of numbers (one a bond or a site)."""
        value = self.require(key, example)
        if isinstance(value, list):
            return [self.checked_number(key, entry, example, index) for index, entry in enumerate(value)]
        return self.checked_number(key, value, example)

    def checked_number(self, key: str, value: Any, example: str, index: int | None = None) -> float:
        """Check one number; `index` says where it stands in a list."""
        where = "" if index is None else f"entry {index} is "
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise self.error(key, f"{where}not a number but {kind_of(value)}", f"write {example}", value)
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if not math.isfinite(number):
            raise self.error(key, f"{where}not finite", f"write {example}", number)
        return number


def split_name(message: str) -> tuple[str, str]:
    """Split ``argument: what is wrong`` into the argument, which the job calls by its key, and the rest."""
    found = re.match(r"([A-Za-z_]+)(?:\[\d+\])?: ", message)
    return (found[1], message[found.end() :]) if found else ("", message)


def kind_of(value: object) -> str:
    """Name the type of a TOML value in words."""
    names = {
        bool: "true/false",
        str: "a text",
        int: "a whole number",
        float: "a number",
        list: "a list",
        dict: "a table",
    }
    return names.get(type(value), "a date or time")
