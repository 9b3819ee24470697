"""How a probe sees the spline: the flux as a few weighted values of F or of B.

========================  =====================================================
wire                      gain * F(s), averaged over the width of the bundle
rectangular coil          gain / window * (F(s + window/2) - F(s - window/2))
round coil                gain * mean of B over the window's chords
========================  =====================================================

The chords of a round window weigh B with ``2/(π r²)·√(r² - u²)``: Gauss-Chebyshev quadrature
of the second kind (Abramowitz & Stegun 1964, 25.4.40).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from fieldmap.readings.probe import Probe, Wire

__all__ = ["Response", "response"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Response:
    """Flux of a probe = sum of ``weight * f(s + offset)``, f being F or B.

    Parameters
    ----------
    offsets : (k,) array
        m.
    weights : (k,) array
        m where f is F, m^2 where f is B.
    of_integral : bool
        Whether f is the running integral F.
    """

    offsets: Floats
    weights: Floats
    of_integral: bool


def response(probe: Probe, spacing: float, widened: float = 0.0) -> Response:
    """Nodes and weights with which a probe reads a spline.

    Parameters
    ----------
    probe : Wire or Coil
        The probe.
    spacing : float
        Knot spacing, m: it sets how many nodes a round window needs.
    widened : float
        How much longer the window of a coil is than stated, relative; its area stays.

    Returns
    -------
    Response
        Exact for rectangular coils, to 1e-7 of the field or better otherwise.

    Examples
    --------
    >>> from fieldmap.readings.probe import Coil
    >>> r = response(Coil("c", "rectangular", 0.3, window=0.01), 0.002)
    >>> r.offsets.tolist(), r.weights.tolist()
    ([-0.005, 0.005], [-30.0, 30.0])
    """
    half = probe.extent / 2
    if isinstance(probe, Wire):
        if half == 0:
            return Response(np.zeros(1), np.array([probe.gain]), of_integral=True)
        node = half / np.sqrt(3)  # two Gauss-Legendre nodes: a bundle is thin
        return Response(np.array([-node, node]), np.full(2, probe.gain / 2), of_integral=True)
    if half == 0:
        return Response(np.zeros(1), np.array([probe.gain]), of_integral=False)
    half *= 1 + widened
    if probe.shape == "rectangular":
        weight = probe.gain / (2 * half)
        return Response(np.array([-half, half]), np.array([-weight, weight]), of_integral=True)
    count = int(np.clip(np.ceil(2 * probe.window / spacing), 8, 64))
    angle = np.arange(1, count + 1) * np.pi / (count + 1)
    weights = 2 / (count + 1) * np.sin(angle) ** 2
    return Response(half * np.cos(angle), probe.gain * weights, of_integral=False)
