"""Product formulas: data with a source, checked order, and the circuits they make.

To add a formula, put an `Entry` with its digits and its source into the file of its family, or start a file
and list it in `FAMILIES`. Its order is measured when it is made, and the test of every order finds it by
itself.
"""

from __future__ import annotations

import difflib
from functools import cache

from trueturn.errors import FormulaError
from trueturn.formulas import (
    blanes_moan,
    compositions,
    elementary,
    kahan_li,
    laskar_robutel,
    mclachlan,
    omelyan,
    ruth,
    suzuki,
    triple_jump,
    yoshida,
)
from trueturn.formulas.base import Formula, Stage
from trueturn.formulas.entry import Entry
from trueturn.formulas.merging import ANGLE_ROUNDINGS
from trueturn.formulas.order import MOST_ORDER
from trueturn.formulas.reading import read_formulas

__all__ = ["ANGLE_ROUNDINGS", "Formula", "Stage", "formula", "formula_entry", "formulas", "read_formulas"]

FAMILIES = (
    elementary,
    suzuki,
    triple_jump,
    yoshida,
    kahan_li,
    compositions,
    ruth,
    omelyan,
    mclachlan,
    blanes_moan,
    laskar_robutel,
)

_ENTRIES: dict[str, Entry] = {entry.name: entry for family in FAMILIES for entry in family.ENTRIES}


def formulas(*, special: bool = False) -> tuple[str, ...]:
    """List the names of the known formulas.

    Parameters
    ----------
    special : bool
        Whether to list those too that lean on a special structure of the parts and are refused without it
        (`Formula.requires`).

    Returns
    -------
    tuple of str
        Family by family, in increasing order. `formula` makes ``"suzuki-10"`` and ``"suzuki-12"`` besides.

    Examples
    --------
    >>> formulas()[:3]
    ('lie', 'strang', 'suzuki-4')
    """
    return tuple(name for name, entry in _ENTRIES.items() if special or not entry.requires)


def formula(name: str) -> Formula:
    """Look up a formula.

    Parameters
    ----------
    name : str
        One of `formulas(special=True)`, or ``"suzuki-N"`` for an even N from 4 to 12.

    Returns
    -------
    Formula
        Made, and its order measured, when first asked for: milliseconds as a rule, a second for ``"suzuki-12"``.

    Raises
    ------
    FormulaError
        Unknown name; the message names the nearest known one, and `choices` lists all. A name of Suzuki's
        family with an order that is odd, below 4, or above 12, beyond which no order is measured.

    Examples
    --------
    >>> import trueturn as tt
    >>> tt.formula("suzuki-4")
    <Formula 'suzuki-4' of order 4: 10 stages, symmetric>
    >>> tt.formula("suzuki-10").order
    10
    """
    return _made(formula_entry(name).name)


def formula_entry(name: str) -> Entry:
    """Look up a formula as data, with the digits of its source.

    Parameters, errors and names are those of `formula`.

    Examples
    --------
    >>> formula_entry("blanes-moan-4").a[0]
    Fraction(792036964311957, 10000000000000000)
    """
    if isinstance(name, str):
        if name in _ENTRIES:
            return _ENTRIES[name]
        if wanted := suzuki.NAME.fullmatch(name):
            made = suzuki.entry(int(wanted[1]))
            if made is not None:
                return made
            raise FormulaError(
                f"name: asks for an order that Suzuki's family does not have here ({name!r}); take an even order "
                f"from 4 to {MOST_ORDER}, the highest that is measured",
                name=name,
                choices=tuple(f"suzuki-{order}" for order in range(4, MOST_ORDER + 1, 2)),
            )
    known = formulas(special=True)
    hint = _nearest(name) if isinstance(name, str) else ""
    raise FormulaError(
        f"name: is no known formula ({name!r}); {hint}choose one of {', '.join(known)}",
        name=str(name),
        choices=known,
    )


def _nearest(name: str) -> str:
    """Word a suggestion for a misspelt name, empty if nothing is near."""
    plain = name.strip().lower().replace("_", "-").replace(" ", "-")
    near = difflib.get_close_matches(plain, formulas(special=True), n=1, cutoff=0.5)
    return f"did you mean {near[0]!r}? " if near else ""


@cache
def _made(name: str) -> Formula:
    return formula_entry(name).formula()
