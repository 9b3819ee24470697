"""Figures of the readings: passes as recorded, and what the fit leaves of them.

Each function draws on the axes it is given and returns what it drew. Nothing here opens a
window, keeps a figure or changes a setting of matplotlib.
"""

from __future__ import annotations

import itertools
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.map import map_passes
from fieldmap.show.look import INK, MM, SOFT, dress, legend_above, pass_style, position_words, short
from fieldmap.show.numbers import scale_for

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D

    from fieldmap.readings.passes import Pass
    from fieldmap.show.overlaps import Overlap

__all__ = ["draw_curves", "draw_overlaps", "draw_passes", "draw_residuals", "thinned"]

Floats = npt.NDArray[np.float64]

MOST_POINTS = 3000  # drawn of one pass
NORMAL = 2.0  # about 95 % of sound residuals lie within


def thinned(position: Floats, flux: Floats, most: int = MOST_POINTS) -> tuple[Floats, Floats]:
    """Readings thinned for drawing: of each stretch its highest and its lowest are kept.

    Parameters
    ----------
    position, flux : (n,) array
        Readings in the order of time.
    most : int
        Points to keep, about.

    Returns
    -------
    tuple of arrays
        In the order of time; a spike or a jump stays in sight.

    Examples
    --------
    >>> spiky = np.zeros(100_000)
    >>> spiky[77_777] = 1.0
    >>> kept = thinned(np.arange(100_000.0), spiky, 100)
    >>> len(kept[0]) <= 100, float(kept[1].max())
    (True, 1.0)
    """
    if len(flux) <= most:
        return position, flux
    starts = np.linspace(0, len(flux), max(most // 2, 1) + 1).astype(int)
    kept = set()
    for low, high in itertools.pairwise(starts):
        part = flux[low:high]
        kept |= {low + int(part.argmin()), low + int(part.argmax())}
    index = np.array(sorted(kept))
    return position[index], flux[index]


def draw_passes(
    ax: Axes, passes: Sequence[Pass], travel: str = "z", marks: Sequence[int] | None = None
) -> list[Line2D]:
    """The readings as they were recorded: flux against position.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    passes : sequence of Pass
        What was measured.
    travel : str
        Name of the position axis.
    marks : sequence of int, optional
        Index of each pass in its campaign, which decides its style; counted from 0 if not
        given.

    Returns
    -------
    list of matplotlib.lines.Line2D
        One a pass, labelled with its name.

    Examples
    --------
    >>> from matplotlib.figure import Figure
    >>> from fieldmap.readings import Wire, make_pass
    >>> one = make_pass([0, 0.1, 0.2], [0, 1, 2], rate=1.0, probe=Wire("w", 1, 0.05), name="a")
    >>> (line,) = draw_passes(Figure().subplots(), [one])
    >>> line.get_xdata().tolist()
    [0.0, 100.0, 200.0]
    """
    scale = scale_for("V s", [float(np.abs(one.flux).max()) for one in passes])
    curves = [thinned(one.position, one.flux) for one in passes]
    scaled = [(position * MM, flux * scale.factor) for position, flux in curves]
    drawn = draw_curves(ax, [one.name for one in passes], scaled, marks, width=1.5)
    dress(ax, position_words(travel), f"flux as recorded ({scale.unit})")
    return drawn


def draw_curves(
    ax: Axes,
    names: Sequence[str],
    curves: Sequence[tuple[Floats, Floats]],
    marks: Sequence[int] | None = None,
    width: float = 1.4,
) -> list[Line2D]:
    """One curve a pass, each in its own style, with a legend above.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    names : sequence of str
        Of the passes.
    curves : sequence of (x, y)
        As drawn.
    marks : sequence of int, optional
        Index of each pass in its campaign, which decides its style; counted from 0 if not given.
    width : float
        Of the curves, points.

    Returns
    -------
    list of matplotlib.lines.Line2D
        One a pass.
    """
    drawn = []
    for index, name, (x, y) in zip(marks or range(len(names)), names, curves, strict=True):
        style = pass_style(index)
        (line,) = ax.plot(
            x,
            y,
            color=style.colour,
            linestyle=style.dash,
            linewidth=width,
            marker=style.marker,
            markersize=4.5,
            markevery=(len(y) // 20, max(len(y) // 10, 1)),
            label=name,
        )
        drawn.append(line)
    legend_above(ax, drawn, [short(name) for name in names])
    return drawn


def draw_residuals(
    ax: Axes, fmap: xr.Dataset, travel: str = "z", marks: Sequence[int] | None = None
) -> list[Line2D]:
    """Normalised residuals against position, pass by pass, with lines at ±2.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    fmap : xarray.Dataset
        From `stitch`.
    travel : str
        Name of the position axis.
    marks : sequence of int, optional
        Index of each pass of the map in its campaign; counted from 0 if not given.

    Returns
    -------
    list of matplotlib.lines.Line2D
        One a pass; about 95 % of the points of a sound pass lie between the lines.
    """
    names = [facts["name"] for facts in map_passes(fmap)]
    owner = fmap["residual_pass"].values
    drawn = []
    for i, index in enumerate(marks or range(len(names))):
        style, own = pass_style(index), owner == i
        (line,) = ax.plot(
            fmap["residual_position"].values[own] * MM,
            fmap["residual"].values[own],
            linestyle="none",
            color=style.colour,
            marker=style.marker,
            markersize=3,
            markeredgewidth=0,
            label=names[i],
        )
        drawn.append(line)
    for level in (-NORMAL, NORMAL):
        ax.axhline(level, color=INK, linewidth=1.1, linestyle=(0, (6, 2)))
    ax.axhline(0, color=SOFT, linewidth=0.8)
    dress(ax, position_words(travel), "residual / its standard deviation")
    reach = float(np.abs(fmap["residual"].values).max(initial=0))
    ax.set_ylim(-1.1 * max(reach, 3.0), 1.1 * max(reach, 3.0))
    legend_above(ax, drawn, [short(name) for name in names])
    return drawn


def draw_overlaps(
    ax: Axes, overlaps: Sequence[Overlap], travel: str = "z", marks: Sequence[int] | None = None
) -> list[Line2D]:
    """Recorded less predicted flux of each pass, against position.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    overlaps : sequence of Overlap
        From `overlaps_of`.
    travel : str
        Name of the position axis.
    marks : sequence of int, optional
        Index of each pass of the map in its campaign; counted from 0 if not given.

    Returns
    -------
    list of matplotlib.lines.Line2D
        One a pass; where passes overlap, one that disagrees departs from the others.
    """
    scale = scale_for("V s", [float(np.abs(one.difference).max(initial=0)) for one in overlaps])
    ax.axhline(0, color=SOFT, linewidth=0.8)
    curves = [(one.position * MM, one.difference * scale.factor) for one in overlaps]
    drawn = draw_curves(ax, [one.name for one in overlaps], curves, marks, width=1.2)
    dress(ax, position_words(travel), f"recorded − predicted ({scale.unit})")
    return drawn
