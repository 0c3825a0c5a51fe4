"""Turn figures into SVG that sits in a page: its colours follow the page's, its text is text, its names are its own."""

import io
import re
from collections.abc import Callable
from html import escape
from typing import Any

import matplotlib as mpl
from matplotlib.figure import Figure

from perpend.dressing import ALARM, GRID, INK, LIMIT, TRACE

COLOURS = {INK: "--ink", GRID: "--grid", TRACE: "--trace", LIMIT: "--limit", ALARM: "--alarm"}

# Inches at 72 points: a wide drawing for screens and print, a narrow one for a phone. Text keeps its size in both.
WIDE, NARROW = 11.0, 4.6

STYLE: dict[Any, Any] = {
    "svg.fonttype": "none",
    "font.family": "sans-serif",
    "font.size": 10.5,
    "axes.linewidth": 0.8,
    "hatch.linewidth": 0.6,
    "hatch.color": ALARM,
    "path.simplify": True,
}

# Digits of a point beyond the second: a hundredth of a point is not seen, and half of a page.
FINE = re.compile(r"(\.\d\d)\d+")

Draw = Callable[[Figure], object]


def drawing(draw: Draw, name: str, alt: str, *, height: float, wide: float = WIDE, narrow: float = NARROW) -> str:
    """Draw a figure twice, for wide and for narrow pages, and set both into a ``<figure>``.

    Parameters
    ----------
    draw : callable
        Draws into the figure it is given.
    name : str
        Of the drawing, unique in the page.
    alt : str
        What it shows, in words: for whoever cannot see it, and as its caption.
    height : float
        In inches.
    wide, narrow : float
        Widths in inches.

    Returns
    -------
    str
        HTML.
    """
    sizes = (("wide", wide), ("narrow", narrow))
    with mpl.rc_context(STYLE):
        pictures = [_svg(draw, f"{name}-{kind}", alt, width, height, kind) for kind, width in sizes]
    return f'<figure id="{name}">{"".join(pictures)}<figcaption>{escape(alt)}</figcaption></figure>'


def _svg(draw: Draw, name: str, alt: str, width: float, height: float, kind: str) -> str:
    figure = Figure(figsize=(width, height), layout="constrained")
    figure.patch.set_visible(False)
    draw(figure)
    for axes in figure.get_axes():
        axes.patch.set_visible(False)
    out = io.StringIO()
    with mpl.rc_context({"svg.hashsalt": name}):
        figure.savefig(out, format="svg", metadata={"Date": None})
    text = out.getvalue()
    text = text[text.index("<svg") :]
    text = re.sub(r"<metadata>.*?</metadata>", "", text, flags=re.DOTALL)
    text = re.sub(r' d="[^"]*"', lambda path: FINE.sub(r"\1", path[0]), text)
    for colour, variable in COLOURS.items():
        text = text.replace(colour, f"var({variable})")
    text = _keep_used_ids(text)
    head = f'<svg class="{kind}" role="img" aria-label="{escape(alt, quote=True)}"'
    return text.replace("<svg", head, 1)


def _keep_used_ids(text: str) -> str:
    """Drop names that nothing refers to: two drawings in one page must not share them."""
    used = set(re.findall(r'(?:url\(#|href="#)([^)"]+)', text))
    return re.sub(r' id="([^"]+)"', lambda match: match[0] if match[1] in used else "", text)
