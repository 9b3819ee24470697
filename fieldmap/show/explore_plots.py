"""Figures for looking at passes freely: readings, two passes, the noise of a dwell.

Each ``draw_…`` function draws on the axes it is given, each ``…_figure`` function on a figure that
it empties first, and gives the text alternative; each ``…_picture`` function makes the figure too.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.agreement import pass_agreement
from fieldmap.estimate.map import map_axis
from fieldmap.estimate.spectrum import (
    allan_curve,
    noise_allan,
    noise_density,
    voltage_spectrum,
)
from fieldmap.show.explore import hear
from fieldmap.show.explore_words import (
    agreement_words,
    allan_words,
    readings_words,
    spectrum_words,
)
from fieldmap.show.figures import BOTTOM, LEFT, LEGEND_ROW, RIGHT
from fieldmap.show.look import (
    BLUE,
    GREEN,
    INK,
    MM,
    PINK,
    SOFT,
    VERMILION,
    dress,
    legend_above,
    position_words,
    short,
)
from fieldmap.show.numbers import scale_for
from fieldmap.show.picture import blank_figure, paint
from fieldmap.show.plots import draw_curves, thinned

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.collections import PolyCollection
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D

    from fieldmap.estimate.agreement import Agreement
    from fieldmap.estimate.spectrum import AllanCurve, Spectrum
    from fieldmap.readings.passes import Pass
    from fieldmap.show.explore import Heard
    from fieldmap.show.picture import Picture

__all__ = [
    "Against",
    "Quantity",
    "agreement_figure",
    "agreement_picture",
    "allan_figure",
    "allan_picture",
    "draw_agreement",
    "draw_allan",
    "draw_readings",
    "draw_spectrum",
    "readings_figure",
    "readings_picture",
    "spectrum_figure",
    "spectrum_picture",
]

Floats = npt.NDArray[np.float64]
Quantity = Literal["flux", "increments", "voltage", "speed"]
Against = Literal["position", "time"]

K: Final = 2.0
FEW_DECADES: Final = 2.5
_NAMES: Final[dict[Quantity, tuple[str, str]]] = {
    "flux": ("flux, reset at the start", "V s"),
    "increments": ("increments of the flux", "V s"),
    "voltage": ("voltage", "V"),
    "speed": ("speed", "mm/s"),
}
# curves of the noise levels: that of the dwell, then what is stated or was used
_LEVELS: Final = ((VERMILION, "-"), (INK, (0, (6, 2))), (GREEN, (0, (1.5, 1.2))))


def draw_readings(
    ax: Axes,
    passes: Sequence[Pass],
    quantity: Quantity = "flux",
    against: Against = "position",
    travel: str = "z",
    marks: Sequence[int] | None = None,
) -> list[Line2D]:
    """Readings of some passes.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    passes : sequence of Pass
        What was measured.
    quantity : {"flux", "increments", "voltage", "speed"}
        Flux counted from the first reading; its steps; these over the time between readings; or
        the speed of the probe.
    against : {"position", "time"}
        Abscissa.
    travel : str
        Name of the position axis.
    marks : sequence of int, optional
        Index of each pass in its campaign, which decides its style.

    Returns
    -------
    list of matplotlib.lines.Line2D
        One a pass.

    Examples
    --------
    >>> from matplotlib.figure import Figure
    >>> from fieldmap.readings import Wire, make_pass
    >>> one = make_pass([0, 0.125, 0.375], [5, 6, 8], rate=1.0, probe=Wire("w", 1, 0.05), name="a")
    >>> (line,) = draw_readings(Figure().subplots(), [one], "speed", "time")
    >>> line.get_ydata().tolist()
    [125.0, 250.0]
    """
    curves = [_readings(one, quantity, against) for one in passes]
    name, unit = _NAMES[quantity]
    scale = scale_for(unit, [float(np.abs(y).max(initial=0.0)) for _, y in curves])
    scaled = [(x, y * scale.factor) for x, y in (thinned(*curve) for curve in curves)]
    drawn = draw_curves(ax, [one.name for one in passes], scaled, marks)
    x_label = "time since the first reading (s)" if against == "time" else position_words(travel)
    dress(ax, x_label, f"{name} ({scale.unit})")
    return drawn


def draw_agreement(ax: Axes, found: Agreement, travel: str = "z") -> tuple[Line2D, PolyCollection]:
    """The difference of two passes with its ±2u band.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    found : Agreement
        From `pass_agreement`.
    travel : str
        Name of the position axis.

    Returns
    -------
    tuple
        The curve and the band around zero: where the curve leaves it, the passes differ.
    """
    scale = scale_for("T", [float(np.abs(found.difference).max()), float(K * found.u.max())])
    x, half = found.position * MM, K * found.u * scale.factor
    band = ax.fill_between(
        x, -half, half, color=BLUE, alpha=0.22, linewidth=0, hatch="///", edgecolor=BLUE
    )
    (edge,) = ax.plot(x, half, color=BLUE, linewidth=0.9, linestyle=(0, (6, 2)))
    ax.plot(x, -half, color=BLUE, linewidth=0.9, linestyle=(0, (6, 2)))
    ax.axhline(0, color=SOFT, linewidth=0.8)
    (line,) = ax.plot(x, found.difference * scale.factor, color=VERMILION, linewidth=1.6)
    dress(ax, position_words(travel), f"difference of B ({scale.unit})")
    name = f"{short(found.first)} less {short(found.second)}"
    legend_above(ax, [line, edge], [name, "±2u of it"])
    return line, band


def draw_spectrum(ax: Axes, heard: Heard, found: Spectrum) -> list[Line2D]:
    """Spectrum of a dwell with the densities that the noise levels make, on logarithmic scales.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    heard : Heard
        From `hear`.
    found : Spectrum
        From `voltage_spectrum`.

    Returns
    -------
    list of matplotlib.lines.Line2D
        The spectrum, then a curve a level; lines that stand out are marked besides.
    """
    drawn = ax.loglog(
        found.frequency, found.density, color=BLUE, linewidth=1.2, marker="o", markersize=2.5
    )
    names = ["spectrum of the dwell"]
    for level, (colour, dash) in zip(heard.levels, _LEVELS, strict=False):
        density = noise_density(found.frequency, level.walk, level.read, heard.dwell.step)
        drawn += ax.loglog(found.frequency, density, color=colour, linestyle=dash, linewidth=1.5)
        names.append(f"noise: {level.name}")
    for line in heard.noise.lines:
        ax.axvline(line.frequency, color=PINK, linewidth=1.1, linestyle=":")
    _dress_decades(ax, "frequency (Hz)", "density of the voltage (V²/Hz)")
    legend_above(ax, drawn, names)
    return list(drawn)


def draw_allan(ax: Axes, heard: Heard, found: AllanCurve) -> list[Line2D]:
    """Allan deviation of a dwell with what the noise levels make, on logarithmic scales.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    heard : Heard
        From `hear`.
    found : AllanCurve
        From `allan_curve`.

    Returns
    -------
    list of matplotlib.lines.Line2D
        The deviation, then a curve a level: the walk falls with the root of the averaging time,
        the read noise with the time itself.
    """
    ax.set_xscale("log")
    ax.set_yscale("log")
    bars = ax.errorbar(
        found.time,
        found.deviation,
        yerr=np.minimum(found.u, 0.9 * found.deviation),
        color=BLUE,
        marker="o",
        markersize=4,
        linewidth=1.2,
        capsize=2,
    )
    drawn, names = [bars.lines[0]], ["deviation of the dwell"]
    for level, (colour, dash) in zip(heard.levels, _LEVELS, strict=False):
        made = noise_allan(found.time, level.walk, level.read)
        drawn += ax.plot(found.time, made, color=colour, linestyle=dash, linewidth=1.5)
        names.append(f"noise: {level.name}")
    _dress_decades(ax, "averaging time (s)", "Allan deviation of the voltage (V)")
    legend_above(ax, drawn, names)
    return drawn


def readings_figure(
    figure: Figure,
    passes: Sequence[Pass],
    quantity: Quantity = "flux",
    against: Against = "position",
    travel: str = "z",
    marks: Sequence[int] | None = None,
) -> str:
    """Draw readings on a figure; parameters as for `draw_readings`."""
    draw_readings(_blank(figure, len(passes)), passes, quantity, against, travel, marks)
    values = [_readings(one, quantity, against)[1] for one in passes]
    name, unit = _NAMES[quantity]
    scale = scale_for(unit, [float(np.abs(y).max(initial=0.0)) for y in values])
    scaled = [(y * scale.factor).tolist() for y in values]
    return readings_words(passes, scaled, f"{name} against {against}", scale.unit)


def agreement_figure(figure: Figure, found: Agreement, travel: str = "z") -> str:
    """Draw two passes against each other; parameters as for `draw_agreement`."""
    draw_agreement(_blank(figure, 2), found, travel)
    return agreement_words(found)


def spectrum_figure(figure: Figure, heard: Heard) -> str:
    """Draw the spectrum of a dwell."""
    found = voltage_spectrum(heard.dwell)
    draw_spectrum(_blank(figure, 1 + len(heard.levels)), heard, found)
    return spectrum_words(heard, found)


def allan_figure(figure: Figure, heard: Heard) -> str:
    """Draw the Allan deviation of a dwell."""
    found = allan_curve(heard.dwell)
    draw_allan(_blank(figure, 1 + len(heard.levels)), heard, found)
    return allan_words(heard, found)


def readings_picture(
    passes: Sequence[Pass], quantity: Quantity = "flux", against: Against = "position"
) -> Picture:
    """Readings of some passes, for a notebook cell; parameters as for `draw_readings`."""
    figure = blank_figure()
    return paint(figure, readings_figure(figure, passes, quantity, against))


def agreement_picture(fmap: xr.Dataset, first: int, second: int) -> Picture:
    """Two passes of a map against each other, by their indices in it, for a notebook cell.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "foreign_tables"))
    >>> "They agree" in agreement_picture(fmap, 0, 2).words
    True
    """
    figure, found = blank_figure(), pass_agreement(fmap, first, second)
    return paint(figure, agreement_figure(figure, found, map_axis(fmap).travel))


def spectrum_picture(one: Pass, dwell: int = 1, fmap: xr.Dataset | None = None) -> Picture:
    """Spectrum of a dwell of a pass, for a notebook cell; parameters as for `hear`."""
    figure = blank_figure()
    return paint(figure, spectrum_figure(figure, hear(one, dwell, fmap)))


def allan_picture(one: Pass, dwell: int = 1, fmap: xr.Dataset | None = None) -> Picture:
    """Allan deviation of a dwell of a pass, for a notebook cell; parameters as for `hear`."""
    figure = blank_figure()
    return paint(figure, allan_figure(figure, hear(one, dwell, fmap)))


def _readings(one: Pass, quantity: Quantity, against: Against) -> tuple[Floats, Floats]:
    """Abscissa in mm or s, values in SI (speed in mm/s)."""
    base = one.time - one.time[0] if against == "time" else one.position * MM
    if quantity == "flux":
        return base, one.flux - one.flux[0]
    middle, steps = 0.5 * (base[1:] + base[:-1]), np.diff(one.flux)
    if quantity == "increments":
        return middle, steps
    if quantity == "speed":
        steps = np.diff(one.position) * MM
    lasting = np.diff(one.time)
    apart = lasting > 0  # two readings of one time stamp have no rate
    return middle[apart], steps[apart] / lasting[apart]


def _blank(figure: Figure, entries: int) -> Axes:
    """One axes with room for a legend of so many entries above it."""
    figure.clear()
    width, height = figure.get_size_inches()
    rows = min(-(-entries // 4), 3)
    ax = figure.subplots()
    figure.subplots_adjust(
        left=(LEFT + 0.1) / width,
        right=1 - RIGHT / width,
        bottom=BOTTOM / height,
        top=1 - (0.12 + LEGEND_ROW * rows) / height,
    )
    return ax


def _dress_decades(ax: Axes, x_label: str, y_label: str) -> None:
    """Both scales logarithmic, with enough numbers on them to read a value."""
    from matplotlib.ticker import LogLocator

    dress(ax, x_label, y_label)
    for axis, (low, high) in ((ax.xaxis, ax.get_xlim()), (ax.yaxis, ax.get_ylim())):
        decades = math.log10(high / low)
        subs = (1.0, 2.0, 5.0) if decades < FEW_DECADES else (1.0,)
        axis.set_major_locator(LogLocator(subs=subs, numticks=20))
        axis.set_major_formatter("{x:g}")
    ax.minorticks_off()
