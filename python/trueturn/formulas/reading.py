"""Formulas of the user's own, from a TOML file.

    [[formula]]
    name = "my-4"
    order = 4                                        # optional; measured either way
    source = "my notebook"                           # optional
    symmetric = true                                 # optional; checked against the stages
    weights = ["1.3512071919596576", "-1.7024143839193153", "1.3512071919596576"]

Instead of `weights` (a composition of Strang steps) a formula may give `a` and `b` (a splitting method for two
operators) or `stages` (pairs of a weight and "forward" or "reverse"). Digits are best given as text, which is
rounded once. A file with a single formula may leave out the line [[formula]].
"""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Mapping
from fractions import Fraction
from os import PathLike, fspath
from pathlib import Path
from typing import Any

from trueturn.errors import ArgumentError, FormulaError, JobError
from trueturn.formulas import suzuki
from trueturn.formulas.base import Formula, Stage
from trueturn.formulas.order import measured_order
from trueturn.formulas.weights import DIRECTIONS, exact_weights

__all__ = ["read_formula", "read_formulas"]

KEYS = ("name", "order", "source", "weights", "a", "b", "stages", "symmetric")
SHAPES = ({"weights"}, {"a", "b"}, {"stages"})


def read_formulas(path: str | PathLike[str]) -> tuple[Formula, ...]:
    """Read formulas from a TOML file and check them.

    Parameters
    ----------
    path : str or path
        The file; `trueturn.formulas.reading` shows the format.

    Returns
    -------
    tuple of Formula
        In the order of the file. They are not registered: pass them on as they are.

    Raises
    ------
    JobError
        The file is missing or not TOML; a key is unknown, missing or of the wrong type; a name is empty, taken
        by a registered formula or given twice; weights do not sum to 1; a claimed order or symmetry is not the true
        one. `path` and `key` say where, and an error of the formula itself is attached as its cause.
    ArgumentError
        `path` is no path.
    """
    try:
        path = Path(fspath(path))
    except TypeError:
        raise ArgumentError(
            f"path: is no path ({path!r}); give the name of a TOML file", argument="path", value=path
        ) from None
    document = _document(path)
    entries = document.get("formula", [document])
    if "formula" in document:
        for key in document:
            if key != "formula":
                raise _error(path, key, "stands outside of a formula", "move it below a line [[formula]]")
        if not isinstance(entries, list) or not entries or not all(isinstance(entry, dict) for entry in entries):
            raise _error(path, "formula", "is no list of formulas", "begin each with a line [[formula]]")
    elif not document:
        raise _error(path, "formula", "is missing", "begin a formula with a line [[formula]]")
    found: list[Formula] = []
    for number, entry in enumerate(entries, start=1):
        one = _read_one(path, f"formula[{number}]." if "formula" in document else "", entry)
        if any(one.name == other.name for other in found):
            key = f"formula[{number}].name"
            raise _error(path, key, f"is given twice ({one.name!r})", "give each formula a name of its own")
        found.append(one)
    return tuple(found)


def read_formula(path: str | PathLike[str]) -> Formula:
    """Read the formula of a file that holds just one; see `read_formulas`."""
    found = read_formulas(path)
    if len(found) > 1:
        names = ", ".join(one.name for one in found)
        what = f"holds {len(found)} formulas ({names})"
        raise _error(Path(fspath(path)), "formula", what, "read them with trueturn.read_formulas")
    return found[0]


def _document(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_bytes().decode("utf-8"))
    except UnicodeDecodeError as error:
        what, remedy, cause = f"is not UTF-8 text (byte {error.start})", "save it as UTF-8", error
    except tomllib.TOMLDecodeError as error:
        what, remedy, cause = f"is not valid TOML ({error})", "mend that place", error  # type: ignore[assignment]
    except (ValueError, RecursionError) as error:
        # integers of thousands of digits, and brackets nested a thousand deep
        what, remedy = f"cannot be read ({str(error)[:60]})", "write shorter numbers and fewer nested brackets"
        cause = error  # type: ignore[assignment]
    except OSError as error:
        what, remedy = f"cannot be read ({error.strerror or error})", "check the path and its permissions"
        cause = error  # type: ignore[assignment]
    raise JobError(f"formula file: {what}: {path}; {remedy}", path=str(path), key="") from cause


def _read_one(path: Path, place: str, entry: Mapping[str, Any]) -> Formula:
    for key in entry:
        if key not in KEYS:
            near = difflib.get_close_matches(key, KEYS, n=1, cutoff=0.6)
            remedy = f"did you mean {near[0]}?" if near else "known: " + ", ".join(KEYS)
            raise _error(path, place + key, "is an unknown key", remedy)
    for key, kind, example in (("name", str, '"my-4"'), ("order", int, "4"), ("source", str, '"my notebook"')):
        value = entry.get(key, "my-4" if key != "order" else 4)
        if key == "name" and key not in entry:
            raise _error(path, place + key, "is missing", f"add {key} = {example}")
        if not isinstance(value, kind) or isinstance(value, bool):
            raise _error(path, place + key, f"is of the wrong type ({value!r})", f"write {key} = {example}")
    if not isinstance(entry.get("symmetric", True), bool):
        wrong = f"is of the wrong type ({entry['symmetric']!r})"
        raise _error(path, place + "symmetric", wrong, "write symmetric = true or symmetric = false")
    given = set(entry) & set().union(*SHAPES)
    if given not in SHAPES:
        what = f"has {' and '.join(sorted(given))}" if given else "has no weights"
        remedy = "give exactly one of: weights; a and b; stages"
        raise _error(path, place + (sorted(given)[0] if given else "weights"), what, remedy)
    from trueturn.formulas import formulas

    family = suzuki.NAME.fullmatch(entry["name"])
    if entry["name"] in formulas(special=True) or (family and suzuki.entry(int(family[1])) is not None):
        raise _error(path, place + "name", f"is the name of a known formula ({entry['name']!r})", "choose another")
    if family:
        raise _error(path, place + "name", f"is kept for Suzuki's family ({entry['name']!r})", "choose another")
    try:
        made = _made(path, place, entry)
    except FormulaError as error:
        argument, _, text = str(error).partition(": ")
        key = place + argument.split(",")[0]
        raise JobError(f"{key}: {text}", path=str(path), key=key) from error
    if "symmetric" in entry and entry["symmetric"] != made.symmetric:
        wrong, remedy = _asymmetry(made)
        raise _error(path, place + "symmetric", wrong, remedy)
    return made


def _asymmetry(formula: Formula) -> tuple[str, str]:
    """Say why the claim about symmetry is false, and what to do."""
    if formula.symmetric:
        return "is false (false claimed; the stages are a palindrome)", "write symmetric = true, or take the key out"
    pairs = list(zip(formula.stages, reversed(formula.stages), strict=True))
    for number, (stage, mirror) in enumerate(pairs, start=1):
        if stage.weight != mirror.weight:
            where = (
                f"stages {number} and {len(pairs) + 1 - number} have the weights {stage.weight!r}, {mirror.weight!r}"
            )
            return f"is false (true claimed; {where})", "give mirrored weights the same digits, or take the key out"
    what = "is false (true claimed; a stage and its mirror image have the same direction)"
    return what, "make one forward and the other reverse, or take the key out"


def _made(path: Path, place: str, entry: Mapping[str, Any]) -> Formula:
    name, order, source = entry["name"], entry.get("order"), entry.get("source", f"read from {path.name}")
    if "weights" in entry:
        return Formula.composition(entry["weights"], name=name, order=order, source=source)
    if "a" in entry:
        return Formula.splitting(entry["a"], entry["b"], name=name, order=order, source=source)
    stages = entry["stages"]
    for stage in stages if isinstance(stages, list) else [stages]:
        if not isinstance(stage, list) or len(stage) != 2 or stage[1] not in DIRECTIONS:
            example = 'stages = [["0.5", "forward"], ["0.5", "reverse"]]'
            raise _error(path, place + "stages", f"holds what is no stage ({stage!r})", f"write {example}")
    weights = exact_weights("stages", [stage[0] for stage in stages], name)
    listed = tuple(Stage(float(weight), stage[1]) for weight, stage in zip(weights, stages, strict=True))
    if order is None:
        reached, _ = measured_order([(Fraction(stage.weight), stage.direction == "reverse") for stage in listed])
        order = max(reached, 1)
    return Formula(name, order, listed, source)


def _error(path: Path, key: str, wrong: str, remedy: str) -> JobError:
    return JobError(f"{key}: {wrong}; {remedy}", path=str(path), key=key)
