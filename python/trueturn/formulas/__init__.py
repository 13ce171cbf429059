"""Product formulas: data with a source, checked order, and the circuits they make.

To add a formula, put an `Entry` with its digits and its source into the file of its family, or start a file
and list it in `FAMILIES`. Its order is measured when it is made, and the test of every order finds it by
itself.
"""

from __future__ import annotations

import difflib
from functools import cache

from trueturn.errors import FormulaError
from trueturn.formulas import elementary, suzuki
from trueturn.formulas.base import Formula, Stage
from trueturn.formulas.entry import Entry
from trueturn.formulas.merging import ANGLE_ROUNDINGS

__all__ = ["ANGLE_ROUNDINGS", "Formula", "Stage", "formula", "formulas"]

FAMILIES = (elementary, suzuki)

_ENTRIES: dict[str, Entry] = {entry.name: entry for family in FAMILIES for entry in family.ENTRIES}


def formulas() -> tuple[str, ...]:
    """List the names of the known formulas.

    Returns
    -------
    tuple of str
        Family by family, in increasing order.

    Examples
    --------
    >>> import trueturn as tt
    >>> tt.formulas()[:3]
    ('lie', 'strang', 'suzuki-4')
    """
    return tuple(_ENTRIES)


def formula(name: str) -> Formula:
    """Look up a formula.

    Parameters
    ----------
    name : str
        One of `formulas()`.

    Returns
    -------
    Formula

    Raises
    ------
    FormulaError
        Unknown name; the message names the nearest known one, and `choices` lists all.

    Examples
    --------
    >>> import trueturn as tt
    >>> tt.formula("suzuki-4")
    <Formula 'suzuki-4' of order 4: 10 stages, symmetric>
    """
    if not isinstance(name, str) or name not in _ENTRIES:
        hint = _nearest(name) if isinstance(name, str) else ""
        raise FormulaError(
            f"name: is no known formula ({name!r}); {hint}choose one of {', '.join(formulas())}",
            name=str(name),
            choices=formulas(),
        )
    return _made(name)


def _nearest(name: str) -> str:
    """Word a suggestion for a misspelt name, empty if nothing is near."""
    plain = name.strip().lower().replace("_", "-").replace(" ", "-")
    near = difflib.get_close_matches(plain, formulas(), n=1, cutoff=0.5)
    return f"did you mean {near[0]!r}? " if near else ""


@cache
def _made(name: str) -> Formula:
    return _ENTRIES[name].formula()
