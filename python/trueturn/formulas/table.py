"""The table of formulas in the README, made from the data.

python -m trueturn.formulas.table            print it
python -m trueturn.formulas.table README.md  write it between the two markers of that file
"""

from __future__ import annotations

import sys
from pathlib import Path

from trueturn.errors import ArgumentError
from trueturn.formulas import formula, formulas
from trueturn.formulas.comparison import best_for, span, three_digits

__all__ = ["BEGIN", "END", "markdown", "replaced"]

BEGIN = "<!-- formulas: begin; made by: python -m trueturn.formulas.table README.md -->"
END = "<!-- formulas: end -->"
ESCAPED = r"\|"
HEADINGS = ("name", "order", "stages", "symmetric", "leading error", "best for errors", "source")


def markdown() -> str:
    """Render every formula as a row of a Markdown table.

    Returns
    -------
    str
        Lines without the markers. Takes some seconds, for the leading errors of formulas of many stages.

    Examples
    --------
    >>> markdown().splitlines()[2][:21]
    '| `lie` | 1 | 1 | no '
    """
    known = [formula(name) for name in formulas(special=True)]
    best = best_for(known)
    lines = [f"| {' | '.join(HEADINGS)} |", "| --- | ---: | ---: | --- | ---: | --- | --- |"]
    for one in known:
        source = one.source
        if one.requires:
            source += f". Requires {one.requires}; order {one.special_order} there"
        cells = (
            f"`{one.name}`",
            str(one.order),
            str(len(one.stages)),
            "yes" if one.symmetric else "no",
            three_digits(one.leading_error),
            span(best.get(one.name, ())) or "–",
            source,
        )
        lines.append(f"| {' | '.join(cell.replace('|', ESCAPED) for cell in cells)} |")
    return "\n".join(lines)


def replaced(text: str) -> str:
    """Put the table between the markers of a text.

    Raises
    ------
    ArgumentError
        The text lacks a marker.
    """
    before, begin, rest = text.partition(BEGIN)
    _, end, after = rest.partition(END)
    if not begin or not end:
        raise ArgumentError(
            f"text: lacks the markers of the table; add the lines {BEGIN} and {END}", argument="text", value=text
        )
    return f"{before}{BEGIN}\n{markdown()}\n{END}{after}"


def main() -> None:
    """Print the table, or write it into the file named."""
    if len(sys.argv) == 1:
        print(markdown())
    for name in sys.argv[1:]:
        path = Path(name)
        path.write_text(replaced(path.read_text(encoding="utf-8")), encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main()
