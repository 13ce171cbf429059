"""Drawing with matplotlib into SVG that belongs to the page: it follows its colours and has its own ids.

Figures are made without pyplot, so nobody's current figure changes. matplotlib still reads its settings from
one global table while it draws; they are set aside for that time, under a lock, and put back.
"""

from __future__ import annotations

import io
import re
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from trueturn.errors import ArgumentError

__all__ = ["GRID", "INK", "MARKERS", "MUTED", "PAPER", "SERIES", "draw", "logarithmic", "written"]

INK, MUTED, GRID, PAPER = "#1d2530", "#5f6b79", "#d5dae0", "#fdfdfb"
# Dark and light in turn besides apart in hue, so that neighbours differ in grey too.
SERIES = ("#1f4e79", "#c47f17", "#17756b", "#96305f", "#7a8794", "#b5502f", "#5a3fa0", "#77792a")
MARKERS = ("o", "s", "^", "D", "v", "P", "X", "p")
VARIABLES = {INK: "--ink", MUTED: "--muted", GRID: "--grid", PAPER: "--paper"} | {
    colour: f"--series-{index}" for index, colour in enumerate(SERIES)
}
SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
SETTINGS: Any = {
    "svg.fonttype": "none",
    "svg.hashsalt": "trueturn",
    "text.parse_math": False,  # a dollar sign in a name is a dollar sign
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 10.5,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": MUTED,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.8,
    "axes.titlesize": 10.5,
    "axes.titlelocation": "left",
    "axes.titlecolor": INK,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "text.color": INK,
    "legend.frameon": False,
    "figure.facecolor": "none",
    "axes.facecolor": "none",
}
ENDINGS = (".svg", ".png", ".pdf")
LOCK = threading.Lock()


@contextmanager
def own_settings() -> Iterator[None]:
    """Draw with matplotlib's defaults and our few changes, whatever the user's style is."""
    import matplotlib

    with LOCK, matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(SETTINGS)
        yield


def draw(name: str, size: tuple[float, float], label: str, paint: Callable[[Any], None]) -> str:
    """Draw a figure and give it as an SVG element to put into a page.

    Parameters
    ----------
    name : str
        Prefix of every id in the element.
    size : (float, float)
        Width and height in inches; only their ratio matters on the page.
    label : str
        What the picture shows, for readers who cannot see it.
    paint : callable
        Receives the matplotlib `Figure`.

    Returns
    -------
    str
        The same text for the same input.
    """
    with own_settings():
        from matplotlib.backends.backend_svg import FigureCanvasSVG
        from matplotlib.figure import Figure

        figure = Figure(figsize=size, layout="constrained")
        FigureCanvasSVG(figure)
        paint(figure)
        page = io.StringIO()
        figure.savefig(page, format="svg", metadata={"Date": None, "Creator": None}, transparent=True)
    return embedded(page.getvalue(), name, label)


def written(path: Path, size: tuple[float, float], paint: Callable[[Any], None]) -> Path:
    """Draw a figure into a file: the same bytes for the same input as SVG.

    Parameters
    ----------
    path : Path
        Ends in ``.svg``, ``.png`` or ``.pdf``.
    size : (float, float)
        Width and height in inches.
    paint : callable
        Receives the matplotlib `Figure`.

    Raises
    ------
    ArgumentError
        Another ending.
    """
    ending = path.suffix.lower()
    if ending not in ENDINGS:
        raise ArgumentError(
            f"path: no ending of a picture ({path.name!r}); use {', '.join(ENDINGS)}", argument="path", value=path
        )
    with own_settings():
        from matplotlib.figure import Figure

        figure = Figure(figsize=size, layout="constrained", facecolor=PAPER)
        paint(figure)
        undated: Any = {"Date": None} if ending == ".svg" else {"CreationDate": None} if ending == ".pdf" else None
        figure.savefig(path, format=ending[1:], dpi=160, facecolor=PAPER, metadata=undated)
    return path


def embedded(text: str, name: str, label: str) -> str:
    """Cut a stand-alone SVG down to an element, with its own ids and the page's colours and font."""
    from html import escape

    text = text[text.index("<svg") :].rstrip()
    text = re.sub(r"<metadata>.*?</metadata>\s*", "", text, flags=re.DOTALL)
    opening = text[: text.index(">") + 1]
    box = re.search(r'viewBox="([^"]+)"', opening)
    assert box is not None
    head = (
        f'<svg class="picture" viewBox="{box[1]}" role="img" aria-label="{escape(label)}" '
        'xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink">'
    )
    body = text[len(opening) :]
    body = re.sub(r'\bid="([^"]+)"', rf'id="{name}-\1"', body)
    body = re.sub(r'(href="#|url\(#)', rf"\g<1>{name}-", body)
    body = re.sub(r"font(?:-family)?: [^;\"]*'DejaVu Sans'[^;\"]*", keep_size, body)
    for colour, variable in VARIABLES.items():
        body = body.replace(colour, f"var({variable})")
    return head + body


def keep_size(found: re.Match[str]) -> str:
    """Drop the font's name from a style and keep its size: the page has a font of its own."""
    size = re.search(r"[\d.]+px", found[0])
    return f"font-size: {size[0]}" if size else "font-family: inherit"


def logarithmic(axis: Any, whole: bool = False) -> None:
    """Label a logarithmic axis in plain characters: powers of ten, with `whole` also 2 and 5 times them."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    def power(value: float, _: Any) -> str:
        return "10" + f"{round_log(value)}".translate(SUPERSCRIPTS)

    low, high = sorted(axis.get_view_interval())
    near = whole and high / max(low, 1e-300) < 300
    axis.set_major_locator(LogLocator(base=10, subs=(1.0, 2.0, 5.0) if near else (1.0,), numticks=12))
    axis.set_major_formatter(FuncFormatter((lambda value, _: f"{value:g}") if near else power))
    axis.set_minor_formatter(NullFormatter())


def round_log(value: float) -> int:
    """Give the nearest power of ten."""
    import math

    return round(math.log10(value))
