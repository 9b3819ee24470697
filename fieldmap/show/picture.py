"""A figure as a picture with its text alternative, for a notebook cell or a panel."""

from __future__ import annotations

import base64
import io
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any, Final

from fieldmap.show.look import PAPER
from fieldmap.show.stylesheet import with_style

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["Picture", "blank_figure", "paint"]

SIZE: Final = (7.4, 3.7)  # inches
DPI: Final = 140


@dataclass(frozen=True)
class Picture:
    """A picture in PNG format that says what it shows.

    Parameters
    ----------
    png : bytes
        The file.
    words : str
        Its text alternative.
    """

    png: bytes
    words: str

    def __repr__(self) -> str:
        return self.words

    @property
    def html(self) -> str:
        """The picture inside its HTML; the caption is its text alternative too."""
        data = base64.b64encode(self.png).decode("ascii")
        return (
            f'<figure class="fm-picture"><img alt="{escape(self.words)}" '
            f'src="data:image/png;base64,{data}">'
            f'<figcaption aria-hidden="true">{escape(self.words)}</figcaption></figure>'
        )

    def _repr_html_(self) -> str:
        return with_style(self.html)


def blank_figure() -> Figure:
    """An empty figure of the kit's size that no list of open figures knows."""
    from matplotlib.figure import Figure

    return Figure(figsize=SIZE, dpi=DPI, facecolor=PAPER)


def paint(figure: Figure, words: str) -> Picture:
    """Render a figure.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        From `blank_figure`, drawn on.
    words : str
        Text alternative.

    Returns
    -------
    Picture
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg

    stream = io.BytesIO()
    # not savefig, which draws everything twice
    canvas: Any = FigureCanvasAgg(figure)
    canvas.print_png(stream, pil_kwargs={"compress_level": 3})
    return Picture(stream.getvalue(), words)
