"""The uncertainty budget as a chart: bars of the share of the variance, by cause.

Type A and type B differ by colour and by hatch; every bar carries its number.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

from fieldmap.magnet.budget import budget
from fieldmap.show.budget_rows import NOTHING, budget_rows, chosen, result_words, with_unit
from fieldmap.show.look import BLUE, INK, ORANGE, PAPER, SOFT, legend_above
from fieldmap.show.picture import blank_figure, paint
from fieldmap.show.rows import label

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.patches import Rectangle

    from fieldmap.magnet.budget import Budget
    from fieldmap.readings.passes import Axis as MapAxis
    from fieldmap.show.budget_rows import BudgetRow, BudgetRows
    from fieldmap.show.picture import Picture

__all__ = ["budget_figure", "budget_picture", "budget_words", "draw_budget"]

MOST_BARS: Final = 9
_LOOKS: Final = {
    "B": (BLUE, None, "type B: stated"),
    "A": (ORANGE, "////", "type A: from readings"),
}
_MIXED: Final = (PAPER, "xx", "types A and B")
_ROOM: Final = 1.42  # of the largest bar: the number stands beside it


def draw_budget(ax: Axes, one: Budget) -> list[Rectangle]:
    """Bars of the share of the variance of one result, by cause, largest on top.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    one : Budget
        From `fieldmap.magnet.budget.budget`.

    Returns
    -------
    list of matplotlib.patches.Rectangle
        One a cause; what is too small for a bar of its own is in the last one.

    Examples
    --------
    >>> from matplotlib.figure import Figure
    >>> from fieldmap.magnet.budget import Budget, Contribution
    >>> parts = (Contribution("read noise", "", "A", 3e-6), Contribution("scale", "", "B", 4e-6))
    >>> bars = draw_budget(Figure().subplots(), Budget("magnetic_length", 0.4, "m", parts))
    >>> [round(float(bar.get_width()), 1) for bar in bars]
    [64.0, 36.0]
    """
    rows = budget_rows(one, most=MOST_BARS)
    bars: list[Rectangle] = []
    named: dict[str, Rectangle] = {}
    for i, row in enumerate(rows.rows):
        colour, hatch, name = _LOOKS.get(row.evaluation, _MIXED)
        (bar,) = ax.barh(
            [i],
            [100 * row.share],
            height=0.62,
            color=colour,
            hatch=hatch,
            edgecolor=INK,
            linewidth=0.8,
        )
        bars.append(bar)
        named.setdefault(name, bar)
        ax.annotate(
            f"{row.percent} %   u = {with_unit(row.u, rows.unit)}",
            (100 * row.share, i),
            xytext=(5, 0),
            textcoords="offset points",
            va="center",
            fontsize=8.5,
            color=INK,
            parse_math=False,
        )
    _dress(ax, rows)
    legend_above(ax, list(named.values()), list(named))
    return bars


def budget_words(one: Budget) -> str:
    """What the chart shows, in a sentence with its main numbers.

    Examples
    --------
    >>> from fieldmap.magnet.budget import Budget, Contribution
    >>> one = Budget("magnetic_length", 0.4, "m", (Contribution("read noise", "", "A", 5e-6),))
    >>> budget_words(one).split(" (k = 2): ")[1]
    'read noise 100.0 % of the variance, type A.'
    """
    rows = budget_rows(one, most=MOST_BARS)
    head = f"Uncertainty of {label(rows.result).lower()} {result_words(one)}"
    if not rows.rows:
        return f"{head}: {NOTHING}"
    first, *others = (f"{row.cause} {row.percent} %" for row in rows.rows)
    told = "; ".join(
        [
            f"{first} of the variance, {_type(rows.rows[0])}",
            *(f"{words}, {_type(row)}" for words, row in zip(others, rows.rows[1:], strict=True)),
        ]
    )
    return f"{head}: {told}."


def budget_figure(
    figure: Figure,
    fmap: xr.Dataset,
    result: str = "magnetic_length",
    axis: MapAxis | None = None,
    line: int = 0,
) -> str:
    """Draw where the uncertainty of a result comes from.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Emptied first.
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    result : str
        Key of the result.
    axis : Axis, optional
        Limits and flat window; those kept in the map if not given.
    line : int
        Index of the line.

    Returns
    -------
    str
        The text alternative.

    Raises
    ------
    InputError
        The map gives no such result.
    """
    one = chosen(budget(fmap, axis=axis, line=line), result)
    figure.clear()
    ax = figure.subplots(subplot_kw={"label": "budget"})
    draw_budget(ax, one)
    width, height = figure.get_size_inches()
    figure.subplots_adjust(
        left=2.1 / width, right=1 - 0.12 / width, bottom=0.48 / height, top=1 - 0.32 / height
    )
    return budget_words(one)


def budget_picture(
    fmap: xr.Dataset,
    result: str = "magnetic_length",
    axis: MapAxis | None = None,
    line: int = 0,
) -> Picture:
    """Where the uncertainty of a result of a map comes from.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    result : str
        Key of the result.
    axis : Axis, optional
        Limits and flat window; those kept in the map if not given.
    line : int
        Index of the line.

    Returns
    -------
    Picture
        Shown by a notebook cell that ends with it.

    Raises
    ------
    InputError
        The map gives no such result.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> budget_picture(fmap).words.startswith("Uncertainty of magnetic length")
    True
    """
    figure = blank_figure()
    return paint(figure, budget_figure(figure, fmap, result, axis, line))


def _dress(ax: Axes, rows: BudgetRows) -> None:
    """Names of the causes, a scale below, no frame."""
    ax.set_facecolor(PAPER)
    names = [row.cause for row in rows.rows]
    ax.set_yticks(range(len(names)), names)
    for text in ax.get_yticklabels():
        text.set_parse_math(False)
    ax.tick_params(axis="y", length=0, labelsize=9, colors=INK)
    ax.tick_params(axis="x", direction="out", labelsize=9, colors=INK)
    ax.set_ylim(max(len(names), 3) - 0.5, -0.5)
    largest = max((100 * row.share for row in rows.rows), default=100.0)
    ax.set_xlim(0, _ROOM * largest)
    ax.set_xticks([tick for tick in ax.get_xticks() if tick <= min(100.0, _ROOM * largest)])
    ax.set_xlabel(
        f"share of the variance of the {label(rows.result).lower()} (%)",
        color=INK,
        fontsize=9.5,
        parse_math=False,
    )
    for side, spine in ax.spines.items():
        spine.set_visible(side in {"left", "bottom"})
        spine.set_color(SOFT)
        spine.set_linewidth(0.8)


def _type(row: BudgetRow) -> str:
    return f"types {row.evaluation}" if "," in row.evaluation else f"type {row.evaluation}"
