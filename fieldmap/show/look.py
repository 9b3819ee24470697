"""How all figures look: colours that colour-blind readers tell apart, line styles, axes.

The colours are those of Okabe and Ito (2008, "Color Universal Design"), without the yellow and
the black, in an order in which neighbours differ in lightness too. Colour never stands alone:
passes also differ by line style and by marker.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.legend import Legend

__all__ = [
    "BLUE",
    "GREEN",
    "INK",
    "MM",
    "ORANGE",
    "PAPER",
    "PINK",
    "RULE",
    "SKY",
    "SOFT",
    "VERMILION",
    "PassStyle",
    "dress",
    "legend_above",
    "pass_style",
    "position_words",
    "short",
]

BLUE: Final = "#0072B2"
VERMILION: Final = "#D55E00"
GREEN: Final = "#009E73"
ORANGE: Final = "#E69F00"
PINK: Final = "#CC79A7"
SKY: Final = "#56B4E9"

INK: Final = "#1c2126"
SOFT: Final = "#59636d"
RULE: Final = "#d3d9de"
PAPER: Final = "#ffffff"

MM: Final = 1e3  # figures show positions in mm

_COLOURS: Final = (BLUE, ORANGE, GREEN, VERMILION, SKY, PINK)
_DASHES: Final = ("-", (0, (5, 1.5)), (0, (5, 1.5, 1, 1.5)), (0, (1.5, 1.2)))
_MARKERS: Final = ("o", "s", "^", "D", "v", "P", "X", "<")
_LONGEST: Final = 24


@dataclass(frozen=True)
class PassStyle:
    """How one pass is drawn, everywhere."""

    colour: str
    dash: str | tuple[int, tuple[float, ...]]
    marker: str


def pass_style(index: int) -> PassStyle:
    """Style of the pass with this index in its campaign: 24 are distinct.

    Examples
    --------
    >>> pass_style(0).colour, pass_style(0).marker
    ('#0072B2', 'o')
    """
    dash = (index + index // 12) % len(_DASHES)
    return PassStyle(
        _COLOURS[index % len(_COLOURS)], _DASHES[dash], _MARKERS[index % len(_MARKERS)]
    )


def short(name: str) -> str:
    """A name that fits a legend.

    Examples
    --------
    >>> short("a_rather_long_name_of_a_table.csv")
    'a_rather_lo…_a_table.csv'
    """
    printable = "".join(c if c.isprintable() else " " for c in name)
    if len(printable) <= _LONGEST:
        return printable
    half = _LONGEST // 2
    return f"{printable[: half - 1]}…{printable[-half:]}"


def position_words(travel: str) -> str:
    """Label of the position axis."""
    return f"position {travel} (mm)"


def dress(ax: Axes, x_label: str, y_label: str) -> None:
    """Frame, grid, ticks and labels of one axes.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        The axes, before or after drawing on it.
    x_label, y_label : str
        Labels with units; texts from files are printed as they are, not as formulas.
    """
    ax.set_facecolor(PAPER)
    ax.grid(visible=True, color=RULE, linewidth=0.6)
    ax.set_axisbelow(True)
    ax.tick_params(direction="in", top=True, right=True, colors=INK, labelsize=9)
    ax.set_xlabel(x_label, color=INK, fontsize=9.5, parse_math=False)
    ax.set_ylabel(y_label, color=INK, fontsize=9.5, parse_math=False)
    for spine in ax.spines.values():
        spine.set_color(SOFT)
        spine.set_linewidth(0.8)
    if ax.get_yscale() == "linear":
        ax.ticklabel_format(useOffset=False)
    else:  # whole decades in plain figures; the ticks between them are slow to draw
        ax.minorticks_off()
        ax.yaxis.set_major_formatter("{x:g}")


def legend_above(
    ax: Axes, handles: Sequence[Artist], names: Sequence[str], columns: int = 4, most: int = 12
) -> Legend | None:
    """A legend above the frame, where it hides no reading.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        The axes.
    handles, names : sequence
        What is named; beyond `most` only the first ones are. Names from files go through
        `short` before.
    columns : int
        Entries side by side.
    most : int
        Entries at most.

    Returns
    -------
    matplotlib.legend.Legend or None
        None where there is nothing to name.
    """
    if not handles:
        return None
    shown = list(names[:most])
    if len(names) > most:
        shown[-1] = f"… and {len(names) - most + 1} more"
    legend = ax.legend(
        list(handles[:most]),
        shown,
        loc="lower left",
        bbox_to_anchor=(0.0, 1.0),
        ncols=columns,
        frameon=False,
        fontsize=8.5,
        handlelength=2.6,
        columnspacing=1.4,
        borderaxespad=0.3,
    )
    for text in legend.get_texts():
        text.set_parse_math(False)  # a dollar sign in a file name starts no formula
        text.set_color(INK)
    return legend
