"""How fast an ideal probe's flux changes along the travel: what times speed is a voltage."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.bench.response import flux
from fieldmap.readings.probe import Coil, Probe, Wire

if TYPE_CHECKING:
    from fieldmap.bench.sources import Source
    from fieldmap.readings.passes import Floats

__all__ = ["flux_slope"]

_FIRST_ORDER: Final = 8
_LAST_ORDER: Final = 4096
_SETTLED: Final = 1e-11  # relative change by the last doubling that needs no other
_LEAST_WINDOW: Final = 1e-5  # m, for the difference over a coil without extent


def flux_slope(source: Source, probe: Probe, s: npt.ArrayLike) -> Floats:
    """Derivative of a probe's flux along the travel, without noise.

    Parameters
    ----------
    source : Source
        The field.
    probe : Wire or Coil
        What moves.
    s : array_like
        Positions of the probe's middle, m; any shape.

    Returns
    -------
    array of the same shape
        V s/m.

    Notes
    -----
    A wire collects the field itself, a rectangular coil the difference between the ends of its
    window, and a round one, by partial integration of its chord-weighted mean, the moment
    ``2/(pi r^2) * integral of u B(s + u) / sqrt(r^2 - u^2) du``: Gauss-Chebyshev quadrature of
    the first kind (Abramowitz & Stegun 25.4.38).

    Examples
    --------
    >>> from fieldmap.bench.sources import Uniform
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> flux_slope(Uniform(0.5), wire, [0.0, 0.1]).tolist()
    [0.5, 0.5]
    """
    s = np.asarray(s, dtype=np.float64)
    if isinstance(probe, Wire):
        # what a bundle collects in a step is the field's mean over it: a coil's reading
        window = Coil(probe.name, "rectangular", abs(probe.gain), window=probe.width)
        return np.asarray(np.sign(probe.gain) * flux(source, window, s))
    half = max(probe.window, _LEAST_WINDOW) / 2
    if probe.shape == "round" and probe.window > 0:
        return probe.gain * _disc_slope(source, s, half)
    return probe.gain / (2 * half) * (source.field(s + half) - source.field(s - half))


def _disc_slope(source: Source, s: Floats, radius: float) -> Floats:
    """Derivative of the field's mean over a disc, with as many nodes as it takes."""
    order = _FIRST_ORDER
    slope = _moment(source, s, radius, order)
    while order < _LAST_ORDER:
        order *= 2
        previous, slope = slope, _moment(source, s, radius, order)
        change = np.max(np.abs(slope - previous), initial=0.0)
        if not change > _SETTLED * np.max(np.abs(slope), initial=0.0):
            break
    return slope


def _moment(source: Source, s: Floats, radius: float, order: int) -> Floats:
    """Quadrature of the moment with a number of nodes; pairs of nodes are taken together."""
    total = np.zeros_like(s)
    for angle in (np.arange(order // 2) + 0.5) * np.pi / order:
        shift = radius * np.cos(angle)
        total += shift * (source.field(s + shift) - source.field(s - shift))
    return 2.0 / (radius**2 * order) * total
