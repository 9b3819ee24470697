"""What the results of a campaign truly are, from the closed form of the field."""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.sources.quadrature import RunningQuadrature
from fieldmap.readings.sections import RESULT_UNITS

if TYPE_CHECKING:
    from fieldmap.bench.sources import Source
    from fieldmap.readings.passes import Axis, Floats

__all__ = ["true_results", "truth_text"]

_FORMAT: Final = "fieldmap-truth/1"
_DIGITS: Final = 12  # significant; the last ones differ between machines
_DECIMALS: Final = 15  # of a tail in T m: further ones are rounding of the whole
_FAR: Final = 1e8  # m: nothing is left beyond
_CELLS: Final = 200  # first cells of a fringe
_POINTS: Final = 20_001  # first look for the peak


def true_results(source: Source, axis: Axis, gap: float | None = None) -> dict[str, float]:
    """Give the true results along a line.

    Parameters
    ----------
    source : Source
        The true field.
    axis : Axis
        Limits of the integral and flat window.
    gap : float, optional
        Full gap or bore, m: the unit of the fringe integrals, which are left out without it.

    Returns
    -------
    dict of str to float
        By the names of a reduction's results, SI: integrated and central field, magnetic
        length, boundaries, magnetic centre, the field of largest size within the limits, tails
        and total where the total is finite, fringe integrals.

    Examples
    --------
    >>> from fieldmap.bench.sources import TanhMagnet
    >>> from fieldmap.readings.passes import Axis
    >>> axis = Axis("z", (-1, 1), (-0.05, 0.05))
    >>> results = true_results(TanhMagnet(0.5, 0.4, 0.02), axis, gap=0.03)
    >>> round(results["magnetic_length"], 6), round(results["boundary_out"], 6)
    (0.4, 0.2)
    """
    (start, stop), (left, right) = axis.integrate, axis.flat
    middle = (left + right) / 2
    central = source.between(left, right) / (right - left)
    boundary_in = middle - source.between(start, middle) / central
    boundary_out = middle + source.between(middle, stop) / central
    results = {
        "integrated_field": source.between(start, stop),
        "central_field": central,
        "magnetic_length": source.between(start, stop) / central,
        "boundary_in": boundary_in,
        "boundary_out": boundary_out,
        "magnetic_centre": (boundary_in + boundary_out) / 2,
        "peak_field": _peak(source, start, stop),
        **_tails(source, start, stop),
    }
    if gap is not None:
        for side, span in (("in", (start, middle)), ("out", (middle, stop))):
            results[f"fringe_integral_{side}"] = _fringe_integral(source, *span, central, gap)
    return results


def truth_text(source: Source, axis: Axis, about: str, gap: float | None = None) -> str:
    """Write the true results as the text of a ``truth.json``.

    Parameters
    ----------
    source : Source
        The true field.
    axis : Axis
        Limits of the integral and flat window.
    about : str
        What the numbers belong to.
    gap : float, optional
        Full gap or bore, m.

    Returns
    -------
    str
        JSON, values in SI with 12 significant digits.

    Examples
    --------
    >>> from fieldmap.bench.sources import TanhMagnet
    >>> from fieldmap.readings.passes import Axis
    >>> axis = Axis("z", (-1, 1), (0, 0.1))
    >>> text = truth_text(TanhMagnet(0.5, 0.4, 0.02), axis, "a trial", gap=0.03)
    >>> json.loads(text)["results"]["integrated_field"]
    {'value': 0.2, 'unit': 'T m'}
    """
    results = {
        name: {"value": float(f"{value:.{_DIGITS}g}"), "unit": RESULT_UNITS[name]}
        for name, value in true_results(source, axis, gap).items()
    }
    content = {"format": _FORMAT, "about": about, "results": results}
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def _tails(source: Source, start: float, stop: float) -> dict[str, float]:
    """Integrals beyond the limits and over the whole line, where that one is finite."""
    if not math.isfinite(source.total):
        return {}
    return {
        "tail_in": round(source.between(-_FAR, start), _DECIMALS) + 0.0,  # no minus zero
        "tail_out": round(source.between(stop, _FAR), _DECIMALS) + 0.0,
        "integrated_field_total": source.total,
    }


def _fringe_integral(source: Source, low: float, high: float, central: float, gap: float) -> float:
    """Return the integral of ``B (B0 - B) / (g B0^2)``."""

    def integrand(s: Floats) -> Floats:
        share = source.field(s) / central
        return np.asarray(share * (1.0 - share))

    running = RunningQuadrature(integrand, np.linspace(low, high, _CELLS + 1))
    return round(running.total / gap, _DIGITS)


def _peak(source: Source, start: float, stop: float) -> float:
    """Field of largest size: a grid, then a finer one around its highest point."""
    for _ in range(2):
        s = np.linspace(start, stop, _POINTS)
        size = np.abs(source.field(s))
        highest = int(np.argmax(size))
        step = s[1] - s[0]
        start, stop = max(start, s[highest] - step), min(stop, s[highest] + step)
    return float(source.field(s[highest]))
