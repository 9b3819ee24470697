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

_STEP: Final = 0.01  # of the window, for the difference quotient
_LEAST_STEP: Final = 1e-5  # m, for a coil without extent
# Central difference quotient of fourth order.
_STENCIL: Final = ((-2, 1.0 / 12.0), (-1, -2.0 / 3.0), (1, 2.0 / 3.0), (2, -1.0 / 12.0))


def flux_slope(source: Source, probe: Probe, s: npt.ArrayLike) -> Floats:
    """Derivative of a probe's flux along the travel, without noise.

    Parameters
    ----------
    source : Source
        The field.
    probe : Wire or Coil
        Exact for wires and rectangular coils; a round coil takes a difference quotient of
        fourth order over a hundredth of its window.
    s : array_like
        Positions of the probe's middle, m; any shape.

    Returns
    -------
    array of the same shape
        V s/m.

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
        return np.sign(probe.gain) * flux(source, window, s)
    if probe.shape == "rectangular" and probe.window > 0:
        ends = source.field(s + probe.window / 2) - source.field(s - probe.window / 2)
        return probe.gain / probe.window * ends
    step = _STEP * probe.window or _LEAST_STEP
    quotient = sum(weight * flux(source, probe, s + shift * step) for shift, weight in _STENCIL)
    return np.asarray(quotient / step)
