"""What a dwell sounds like: the spectrum of its voltage, and its stability over time.

Densities are one-sided: a walk of σ_w (V s per root second) is white input voltage of density
σ_w² over positive and negative frequencies, hence 2σ_w² in V²/Hz over the positive ones alone.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.estimate.noise import allan_deviation

if TYPE_CHECKING:
    from fieldmap.estimate.dwell import Dwell

__all__ = [
    "AllanCurve",
    "Spectrum",
    "allan_curve",
    "noise_allan",
    "noise_density",
    "voltage_spectrum",
]

Floats = npt.NDArray[np.float64]

SEGMENTS: Final = 8  # of a dwell, unless told: half of each overlaps the next
FEWEST: Final = 16  # voltages in a segment
PER_OCTAVE: Final = 2
LONGEST: Final = 3  # averaging times up to this part of a dwell


@dataclass(frozen=True, eq=False)
class Spectrum:
    """Power spectral density of a voltage.

    Parameters
    ----------
    frequency : (n,) array
        Hz, above zero.
    density : (n,) array
        One-sided, V²/Hz.
    segments : int
        Periodograms that were averaged.
    width : float
        Distance of the frequencies, Hz.
    """

    frequency: Floats
    density: Floats
    segments: int
    width: float


@dataclass(frozen=True, eq=False)
class AllanCurve:
    """Allan deviation of a voltage.

    Parameters
    ----------
    time : (n,) array
        Averaging times, s.
    deviation : (n,) array
        V.
    u : (n,) array
        Standard uncertainties, V.
    """

    time: Floats
    deviation: Floats
    u: Floats


def voltage_spectrum(dwell: Dwell, segments: int = SEGMENTS) -> Spectrum:
    """Spectrum of the voltage in a dwell by Welch's method.

    Parameters
    ----------
    dwell : Dwell
        From `find_dwells`.
    segments : int
        Segments of half overlap, each under a Hann window; more of them make the curve smoother
        and its lines wider. A short dwell gives fewer.

    Returns
    -------
    Spectrum
        Of the voltage less its mean.

    Raises
    ------
    InputError
        Readings that are not evenly spaced.

    Examples
    --------
    >>> from fieldmap.estimate.dwell import find_dwells
    >>> from fieldmap.readings import Wire, make_pass
    >>> time = np.arange(2000) / 1000
    >>> hum = np.sin(2 * np.pi * 50 * time)
    >>> (dwell,) = find_dwells(make_pass(0 * time, hum, time, probe=Wire("w", 1, 1)))
    >>> found = voltage_spectrum(dwell)
    >>> bool(abs(found.frequency[found.density.argmax()] - 50) <= found.width / 2)
    True

    Notes
    -----
    Source: P. D. Welch, IEEE Trans. Audio Electroacoust. 15, 70 (1967).
    """
    from scipy.signal import welch

    if segments < 1:
        raise InputError("segments", f"{segments}", "a whole number above zero")
    dwell.check_even()
    voltage = dwell.voltage - dwell.voltage.mean()
    n = len(voltage)
    length = min(max(2 * n // (segments + 1), FEWEST), n)
    frequency, density = welch(
        voltage, fs=1 / dwell.step, window="hann", nperseg=length, detrend="constant"
    )
    count = 1 + (n - length) // (length - length // 2)
    return Spectrum(frequency[1:], density[1:], int(count), float(frequency[1]))


def noise_density(frequency: Floats, walk: float, read: float, step: float) -> Floats:
    """Density of the voltage that noise of these levels shows.

    Parameters
    ----------
    frequency : (n,) array
        Hz.
    walk : float
        V s per root second.
    read : float
        V s.
    step : float
        Time between readings, s.

    Returns
    -------
    (n,) array
        One-sided, V²/Hz: flat for the walk, growing with the square of the frequency for the
        read noise, which is differenced.

    Examples
    --------
    >>> noise_density(np.array([10.0]), 0.5, 0.0, 0.01).tolist()
    [0.5]
    """
    differenced = 2 - 2 * np.cos(2 * np.pi * np.asarray(frequency) * step)
    return np.asarray(2 * walk**2 + 2 * read**2 * differenced / step)


def allan_curve(dwell: Dwell) -> AllanCurve:
    """Overlapping Allan deviation of the voltage, for averaging times up to a third of the dwell.

    Parameters
    ----------
    dwell : Dwell
        From `find_dwells`.

    Returns
    -------
    AllanCurve
        The uncertainties hold for white voltage; for read noise they are somewhat too large.

    Raises
    ------
    InputError
        Readings that are not evenly spaced.

    Examples
    --------
    >>> from fieldmap.estimate.dwell import find_dwells
    >>> from fieldmap.readings import Wire, make_pass
    >>> flux = np.cumsum(np.tile([1.0, 2.0], 50))
    >>> (dwell,) = find_dwells(make_pass(np.zeros(100), flux, rate=1.0, probe=Wire("w", 1, 1)))
    >>> curve = allan_curve(dwell)
    >>> curve.time[:3].tolist(), round(float(curve.deviation[0]), 6)
    ([1.0, 2.0, 3.0], 0.707107)

    Notes
    -----
    Source: W. J. Riley, *Handbook of Frequency Stability Analysis*, NIST SP 1065 (2008), 5.2 and
    5.4 (degrees of freedom for white noise; from memory).
    """
    dwell.check_even()
    voltage = dwell.voltage
    n = len(voltage)
    most = max(n // LONGEST, 1)
    octaves = np.arange(0, PER_OCTAVE * np.log2(most) + 1e-9) / PER_OCTAVE
    sizes = np.unique(np.round(2**octaves).astype(int))
    deviation = np.array([allan_deviation(voltage, int(size)) for size in sizes])
    freedom = np.maximum(_freedom(n + 1, sizes), 1.0)
    return AllanCurve(sizes * dwell.step, deviation, deviation / np.sqrt(2 * freedom))


def _freedom(readings: int, size: npt.NDArray[np.int_]) -> Floats:
    """Degrees of freedom of the overlapping estimate for white noise of the voltage."""
    whole = 3 * (readings - 1) / (2 * size) - 2 * (readings - 2) / readings
    return np.asarray(whole * 4 * size**2 / (4 * size**2 + 5))


def noise_allan(time: Floats, walk: float, read: float) -> Floats:
    """Allan deviation of the voltage that noise of these levels shows.

    Parameters
    ----------
    time : (n,) array
        Averaging times, s.
    walk : float
        V s per root second: falls with the root of the time.
    read : float
        V s: falls with the time.

    Returns
    -------
    (n,) array
        V.

    Examples
    --------
    >>> noise_allan(np.array([4.0]), 2e-7, 0.0).tolist()
    [1e-07]
    """
    time = np.asarray(time)
    return np.asarray(np.sqrt(walk**2 / time + 3 * read**2 / time**2))
