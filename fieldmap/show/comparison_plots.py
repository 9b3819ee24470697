"""Figure of a comparison: both profiles above, their difference with its bands below."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.show.look import (
    BLUE,
    INK,
    MM,
    ORANGE,
    SKY,
    VERMILION,
    dress,
    legend_above,
    position_words,
    short,
)
from fieldmap.show.numbers import plain, scale_for
from fieldmap.show.picture import Picture, blank_figure, paint
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from fieldmap.magnet.comparison.outcome import Comparison, Stretch

__all__ = ["comparison_figure", "comparison_picture", "comparison_words"]

DASHED: Final = (0, (5, 2))
DOTTED: Final = (0, (1.5, 1.5))
K: Final = 2.0
MOST_NAMED: Final = 4
HEIGHT: Final = 5.2  # inches: two axes of nearly the same height
LEFT, RIGHT, BOTTOM, LEGEND = 0.82, 0.12, 0.52, 0.36  # inches around the axes


def comparison_figure(figure: Figure, comparison: Comparison) -> str:
    """Draw a comparison on a figure that is emptied first.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Where to draw.
    comparison : Comparison
        From `compare`.

    Returns
    -------
    str
        The text alternative.
    """
    figure.clear()
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(1, 1.1))
    width, height = figure.get_size_inches()
    figure.subplots_adjust(
        left=LEFT / width,
        right=1 - RIGHT / width,
        bottom=BOTTOM / height,
        top=1 - LEGEND / height,
        hspace=0.24,
    )
    _draw_profiles(upper, comparison)
    _draw_difference(lower, comparison)
    upper.set_xlabel("")
    upper.tick_params(labelbottom=False)
    s = comparison.before.s
    air = 0.015 * (s[-1] - s[0])
    lower.set_xlim((s[0] - air) * MM, (s[-1] + air) * MM)
    return comparison_words(comparison)


def comparison_picture(comparison: Comparison) -> Picture:
    """A comparison as a picture with its text alternative.

    Parameters
    ----------
    comparison : Comparison
        From `compare`.

    Returns
    -------
    Picture
        Shown by a notebook cell that ends with it.

    Examples
    --------
    >>> from fieldmap.magnet.comparison.outcome import Comparison, DifferenceProfile
    >>> s = np.linspace(-0.1, 0.1, 21)
    >>> band = DifferenceProfile(s, 1e-5 * s, np.full(21, 1e-5), 3.0)
    >>> found = Comparison(
    ...     ("May", "June"), "By", "z", False, s, s, None, None, 0.0, band, None, {}, ()
    ... )
    >>> comparison_picture(found)
    By of May and of June, z from -100 to 100 mm, and their difference as they stand: largest \
-1.000 µT at -100 mm, where the simultaneous 95 % band is ±30.000 µT; it leaves the band nowhere.
    """
    figure = blank_figure()
    figure.set_size_inches(figure.get_size_inches()[0], HEIGHT)
    return paint(figure, comparison_figure(figure, comparison))


def comparison_words(comparison: Comparison) -> str:
    """What the figure of a comparison shows."""
    judged = comparison.judged
    first, second = (one_line(name) for name in comparison.names)
    i = int(np.abs(judged.difference).argmax())
    scale = scale_for("T", [float(judged.difference[i]), float(judged.half_width[i])])
    largest, band = (
        f"{value * scale.factor:z.3f} {scale.unit}"
        for value in (float(judged.difference[i]), float(judged.half_width[i]))
    )
    state = "as they stand" if comparison.after is None else "after alignment"
    low, high = comparison.before.s[0] * MM, comparison.before.s[-1] * MM
    return (
        f"{one_line(comparison.component)} of {first} and of {second}, {comparison.travel} from "
        f"{plain(low, 5)} to {plain(high, 5)} mm, and their difference {state}: largest {largest} "
        f"at {plain(judged.s[i] * MM, 5)} mm, where the simultaneous 95 % band is ±{band}; "
        f"it leaves the band {_places(comparison.stretches)}."
    )


def _places(stretches: tuple[Stretch, ...]) -> str:
    if not stretches:
        return "nowhere"
    named = [
        f"from {plain(one.start * MM, 5)} to {plain(one.stop * MM, 5)} mm"
        for one in stretches[:MOST_NAMED]
    ]
    more = len(stretches) - MOST_NAMED
    return ", ".join(named) + (f" and on {more} more stretches" if more > 0 else "")


def _draw_profiles(ax: Axes, comparison: Comparison) -> None:
    """Both profiles as they stand."""
    s = comparison.before.s * MM
    scale = scale_for("T", [float(np.abs(comparison.first).max())])
    (one,) = ax.plot(s, comparison.first * scale.factor, color=BLUE, linewidth=1.8)
    (two,) = ax.plot(
        s, comparison.second * scale.factor, color=ORANGE, linewidth=1.8, linestyle=DASHED
    )
    dress(ax, position_words(comparison.travel), f"{short(comparison.component)} ({scale.unit})")
    legend_above(ax, [one, two], [short(name) for name in comparison.names])


def _draw_difference(ax: Axes, comparison: Comparison) -> None:
    """The judged difference in its bands, and the one before alignment where it fits in."""
    judged, before = comparison.judged, comparison.before
    scale = scale_for("T", [float(np.abs(judged.difference).max()), float(judged.half_width.max())])
    factor, s = scale.factor, judged.s * MM
    wide, narrow = judged.half_width * factor, K * judged.u * factor
    band = ax.fill_between(s, -wide, wide, color=SKY, alpha=0.25, linewidth=0)
    edges = [
        ax.plot(s, side * narrow, color=INK, linewidth=0.9, linestyle=DOTTED) for side in (1, -1)
    ]
    (line,) = ax.plot(s, judged.difference * factor, color=BLUE, linewidth=1.6)
    named: list[tuple[Artist, str]] = [
        (line, "difference" if comparison.after is None else "aligned"),
        (band, "95 % band"),
        (edges[0][0], "±2u"),
    ]
    reach = 1.15 * max(float(np.abs(judged.difference).max()) * factor, float(wide.max()), 1e-300)
    if comparison.after is not None:
        (faint,) = ax.plot(
            before.s * MM, before.difference * factor, color=ORANGE, linewidth=1.2, linestyle=DASHED
        )
        named.append((faint, "as they stand"))
    named += _mark(ax, comparison.stretches, float(np.median(np.diff(judged.s))))
    ax.axhline(0, color=INK, linewidth=0.7)
    ax.set_ylim(-reach, reach)
    dress(ax, position_words(comparison.travel), f"first − second ({scale.unit})")
    legend_above(ax, [one for one, _ in named], [name for _, name in named], columns=5)


def _mark(ax: Axes, stretches: tuple[Stretch, ...], spacing: float) -> list[tuple[Artist, str]]:
    """Bars at the foot, hatched so that they do not depend on colour."""
    marks = [
        ax.axvspan(
            (one.start - spacing / 2) * MM,
            (one.stop + spacing / 2) * MM,
            ymax=0.05,
            facecolor=VERMILION,
            edgecolor=INK,
            hatch="////",
            linewidth=0.5,
        )
        for one in stretches
    ]
    return [(marks[0], "significant")] if marks else []
