"""A figure as lines and shapes inside an HTML page: sharp on paper, the same bytes every time."""

from __future__ import annotations

import io
import re
from html import escape
from typing import TYPE_CHECKING, Any, Final

import numpy as np

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["inline_svg"]

MOST_POINTS: Final = 4000  # separate marks of one figure that are kept as shapes
MARK_DPI: Final = 200

_LEFT_OUT: Final = re.compile(
    r"<metadata>.*?</metadata>|<style.*?</style>|<!--.*?-->|(?<=\n) +", re.DOTALL
)
_INHERITED: Final = "stroke-linejoin:round;stroke-linecap:butt"  # in place of a style sheet
_NAMED: Final = re.compile(r'\bid="([^"]*)"')
_USED: Final = re.compile(r'(href="#|url\(#)([^")]*)')
_NAMESPACE: Final = re.compile(r'\sxmlns(?::\w+)?="[^"]*"')
_SIZE: Final = re.compile(r'\s(?:width|height|version)="[^"]*"')


def inline_svg(figure: Figure, words: str, name: str) -> str:
    """Render a figure as an SVG element for an HTML page.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Drawn on.
    words : str
        Text alternative.
    name : str
        Letters and digits; begins every id inside, so that several figures of one page do not
        meddle with each other. Differs from figure to figure.

    Returns
    -------
    str
        Without date, comments, links or scripts; letters are shapes. Thousands of separate marks
        become one picture inside, to keep the page small.

    Examples
    --------
    >>> from matplotlib.figure import Figure
    >>> drawn = inline_svg(Figure(), "an empty sheet", "f1")
    >>> drawn.startswith('<svg role="img" aria-label="an empty sheet"')
    True
    """
    _thin_out(figure)
    text = _ids_of_its_own(_bare(_rendered(figure)), name)
    return f'<svg role="img" aria-label="{escape(words)}" style="{_INHERITED}"{text[len("<svg") :]}'


def _rendered(figure: Figure) -> str:
    from matplotlib.backends.backend_svg import FigureCanvasSVG

    stream = io.BytesIO()
    dpi = figure.dpi
    canvas: Any = FigureCanvasSVG(figure)
    figure.set_dpi(MARK_DPI)
    canvas.print_svg(stream, metadata={"Date": None})
    figure.set_dpi(dpi)
    return stream.getvalue().decode("utf-8")


def _thin_out(figure: Figure) -> None:
    """Turn marks into a picture where there are too many to keep each as a shape."""
    marked = [
        line
        for ax in figure.axes
        for line in ax.lines
        if line.get_linestyle() == "None" and line.get_marker() not in {"None", None}
    ]
    many = sum(np.size(line.get_xdata(orig=False)) for line in marked) > MOST_POINTS
    for line in marked:
        line.set_rasterized(many)


def _bare(text: str) -> str:
    """The element alone: no prologue, no names of other documents, as wide as its place."""
    text = _LEFT_OUT.sub("", text[text.index("<svg") :])
    head, rest = text.split(">", 1)
    head = _SIZE.sub("", _NAMESPACE.sub("", head))
    return f"{head}>{rest}".replace("xlink:href=", "href=").strip()


def _ids_of_its_own(text: str, name: str) -> str:
    """Ids by their order, in place of the random ones; those that nothing uses are dropped."""
    used = {found[2] for found in _USED.finditer(text)}
    names = [one for one in dict.fromkeys(_NAMED.findall(text)) if one in used]
    new = {one: f"{name}-{i}" for i, one in enumerate(names)}
    text = re.sub(r'\s?\bid="([^"]*)"', lambda m: f' id="{new[m[1]]}"' if m[1] in new else "", text)
    return _USED.sub(lambda m: f"{m[1]}{new[m[2]]}", text)
