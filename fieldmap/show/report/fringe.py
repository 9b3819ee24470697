"""Fringes in a report: coefficients of the curves at both ends, and how far they are off."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.errors import RefusedError
from fieldmap.magnet.fringe import compare_ends
from fieldmap.show.look import BLUE, INK, SOFT, dress, legend_above
from fieldmap.show.numbers import plain, rounded
from fieldmap.show.report.parts import Column, paragraph, table
from fieldmap.show.report.results import quantity_words

if TYPE_CHECKING:
    from collections.abc import Mapping

    from matplotlib.figure import Figure

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.magnet.fringe.fitted import Fringe

__all__ = ["fringe_figure", "fringe_part"]

ENDS: Final = {"fringe_in": "Entrance", "fringe_out": "Exit"}
K: Final = 2.0
POINTS: Final = 300


def fringe_part(fringes: Mapping[str, Fringe], k: float) -> str:
    """The curves of the ends side by side.

    Parameters
    ----------
    fringes : mapping of str to Fringe
        ``LineResults.fringes``, not empty.
    k : float
        Coverage factor.

    Returns
    -------
    str
        HTML.
    """
    ends = [end for end in ENDS if end in fringes]
    columns = [Column("Coefficient")]
    for end in ends:
        columns += [Column(ENDS[end], "number"), Column("± U", "number")]
    most = max(len(fringes[end].coefficients) for end in ends)
    rows = [
        (f"c{i}", *(text for end in ends for text in _coefficient(fringes[end], i, k)))
        for i in range(most)
    ]
    facts = [Column("Of the curve"), *(Column(ENDS[end]) for end in ends)]
    told = [_facts(fringes[end], k) for end in ends]
    about = [(name, *(one[name] for one in told)) for name in told[0]]
    gap = f"{fringes[ends[0]].gap * 1e3:.9g} mm"
    note = (
        "B = B0 / (1 + exp Σ ci·ξ^i), with ξ the distance outwards from the boundary in units of "
        f"the full gap, {gap}; fitted to the readings themselves. The coefficients are correlated: "
        "their covariance stands in results.json."
    )
    return (
        table("Coefficients of the fringe field", columns, rows, css="fringe")
        + table("Curves of the fringe field", facts, about, css="fringe-facts")
        + paragraph(note, "remark")
        + _compared(fringes)
    )


def _compared(fringes: Mapping[str, Fringe]) -> str:
    """Whether entrance and exit are alike; nothing where one of them is missing."""
    if set(ENDS) - set(fringes):
        return ""
    try:
        text = compare_ends(fringes["fringe_in"], fringes["fringe_out"]).text
    except RefusedError as refused:
        text = refused.text
    return paragraph(text[0].upper() + text[1:])


def _coefficient(one: Fringe, i: int, k: float) -> tuple[str, str]:
    if i >= len(one.coefficients):
        return "", ""
    return rounded(float(one.coefficients[i]), k * float(one.u[i]))


def _facts(one: Fringe, k: float) -> dict[str, str]:
    low, high = one.stretch
    return {
        "Model": "tanh edge" if one.model == "tanh" else f"Enge, order {one.order}",
        "Boundary": quantity_words(one.boundary, k),
        "Field well inside, B0": quantity_words(one.level, k),
        "Fringe integral": quantity_words(one.integral, k),
        "Stands for the profile": f"{low * 1e3:.5g} to {high * 1e3:.5g} mm",
        "χ² in excess, degrees of freedom": f"{plain(one.chi_square, 4)}, {one.freedom}",
        "Largest distance to the profile": f"{100 * one.departure:.2g} % of B0",
    }


def fringe_figure(figure: Figure, line: FieldLine, fringes: Mapping[str, Fringe]) -> str:
    """Draw the distance of each curve to the free profile, beside the band of the latter.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Emptied first.
    line : FieldLine
        The line.
    fringes : mapping of str to Fringe
        ``LineResults.fringes``, not empty.

    Returns
    -------
    str
        The text alternative.
    """
    figure.clear()
    ends = [end for end in ENDS if end in fringes]
    axes = figure.subplots(1, len(ends), squeeze=False, sharey=True)[0]
    words = []
    for ax, end in zip(axes, ends, strict=True):
        one = fringes[end]
        s = np.linspace(max(one.stretch[0], line.low), min(one.stretch[1], line.high), POINTS)
        level = one.level.value
        off = 1e4 * (one.field(s) - line.field(s)) / level
        half = 1e4 * K * line.u_field(s) / abs(level)
        band = ax.fill_between(s * 1e3, -half, half, color=BLUE, alpha=0.25, linewidth=0)
        (drawn,) = ax.plot(s * 1e3, off, color=INK, linewidth=1.4)
        ax.axhline(0, color=SOFT, linewidth=0.8)
        first = end == ends[0]
        dress(ax, f"{ENDS[end].lower()}, position (mm)", "share of B0 (1e-4)" if first else "")
        if first:
            legend_above(ax, [drawn, band], ["curve less profile", "±2u of the profile"])
        words.append(f"{ENDS[end].lower()} at most {100 * one.departure:.2g} % of B0")
    width, height = figure.get_size_inches()
    figure.subplots_adjust(
        left=0.85 / width,
        right=1 - 0.12 / width,
        bottom=0.48 / height,
        top=1 - 0.32 / height,
        wspace=0.08,
    )
    return f"Distance of the fringe curve to the free profile: {'; '.join(words)}."
