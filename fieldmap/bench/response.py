"""What an ideal probe reads in a known field: the noise-free flux linkage.

Written apart from the estimator, on purpose: a simulated bench that shared its code could
not find its mistakes.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.errors import RefusedError
from fieldmap.readings.probe import Probe, Wire

if TYPE_CHECKING:
    from collections.abc import Callable

    from fieldmap.bench.sources import Source
    from fieldmap.readings.passes import Floats

__all__ = ["flux"]

_FIRST_ORDER = 8
_LAST_ORDER = 4096
_SETTLED = 1e-11  # relative change by the last doubling that needs no other
_MOVING = 1e-6  # relative change by the last doubling that cannot be rounding
_CHUNK = 4096  # positions averaged at a time, to bound the memory


def flux(source: Source, probe: Probe, s: npt.ArrayLike) -> Floats:
    """Flux linkage of a probe at its true positions, without noise.

    Parameters
    ----------
    source : Source
        The field.
    probe : Wire or Coil
        A wire collects ``turns * active_length * F(s)``, averaged over its bundle; a coil
        reads its effective area times the field averaged over its window.
    s : array_like
        Positions of the probe's middle, m; any shape.

    Returns
    -------
    array of the same shape
        V s; for a wire up to the constant of the source's running integral.

    Raises
    ------
    RefusedError
        If the field is too sharp to be averaged over the probe.

    Examples
    --------
    >>> from fieldmap.bench.sources import Uniform
    >>> from fieldmap.readings.probe import Coil
    >>> coil = Coil("coil", "round", effective_area=0.3, window=0.01)
    >>> [round(float(reading), 12) for reading in flux(Uniform(0.5), coil, [0.0, 0.1])]
    [0.15, 0.15]
    """
    s = np.asarray(s, dtype=np.float64)
    half = probe.extent / 2
    if isinstance(probe, Wire):
        return probe.gain * _mean(source.integral, s, half, _flat_weights)
    if half == 0:
        return probe.gain * source.field(s)
    if probe.shape == "round":
        return probe.gain * _mean(source.field, s, half, _round_weights)
    return probe.gain / probe.window * (source.integral(s + half) - source.integral(s - half))


def _mean(
    function: Callable[[Floats], Floats],
    s: Floats,
    half: float,
    weights: Callable[[Floats], Floats],
) -> Floats:
    """Weighted mean of a function over s - half ... s + half."""
    if half == 0:
        return function(s)
    flat = s.ravel()
    pieces = [flat[i : i + _CHUNK] for i in range(0, max(flat.size, 1), _CHUNK)]
    means = [_settled_mean(function, piece, half, weights) for piece in pieces]
    return np.concatenate(means).reshape(s.shape)


def _settled_mean(
    function: Callable[[Floats], Floats],
    s: Floats,
    half: float,
    weights: Callable[[Floats], Floats],
) -> Floats:
    """Weighted mean with as many nodes as it takes.

    The nodes ``cos(i pi / order)`` nest: doubling the order keeps the values already there.
    A mean that doubling hardly changes is far closer to the truth than the change.
    """
    order = _FIRST_ORDER
    angles = np.arange(1, order) * np.pi / order
    values = _at_nodes(function, s, half, angles)
    mean = np.tensordot(weights(angles), values, axes=1)
    while True:
        between = (np.arange(order) + 0.5) * np.pi / order
        angles = np.concatenate([angles, between])
        values = np.concatenate([values, _at_nodes(function, s, half, between)])
        order *= 2
        previous, mean = mean, np.tensordot(weights(angles), values, axes=1)
        change = np.max(np.abs(mean - previous), initial=0.0)
        scale = np.max(np.abs(values), initial=0.0)
        if not change > _SETTLED * scale:
            return mean
        if order >= _LAST_ORDER:
            return _accepted(mean, change / scale, half)


def _accepted(mean: Floats, change: float, half: float) -> Floats:
    """Let rounding pass, refuse a mean that is still moving."""
    if change > _MOVING:
        raise RefusedError(
            "field-too-sharp",
            "probe",
            f"the field varies too sharply within the probe's {2 * half:g} m to be averaged "
            "over it; use a smoother source or a smaller probe.",
        )
    return mean


def _at_nodes(
    function: Callable[[Floats], Floats], s: Floats, half: float, angles: Floats
) -> Floats:
    """Values at the nodes around each position: one row for each node."""
    return np.stack([function(s + half * np.cos(angle)) for angle in angles])


def _round_weights(angles: Floats) -> Floats:
    """Gauss-Chebyshev weights (2nd kind) for the chord of a disc; they sum to one."""
    return 2.0 / (len(angles) + 1) * np.sin(angles) ** 2


def _flat_weights(angles: Floats) -> Floats:
    """Weights of Fejer's second rule for a plain mean; they sum to one."""
    odd = np.arange(1, len(angles) + 1, 2)
    series = (np.sin(np.outer(angles, odd)) / odd).sum(axis=1)
    return np.asarray(2.0 / (len(angles) + 1) * np.sin(angles) * series)
