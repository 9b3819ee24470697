"""Lines in the spectrum of the readings: mains pick-up, motors, anything periodic.

What the quintic through its six neighbours does not explain of a reading is divided by the local
scale; stretches where it is loud, which are fringes and jitter, are left out. In the periodogram,
a line stands out against the median of the frequencies around it, and it lasts.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.thresholds import FAMILY_SHARE

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["pickup_findings"]

Floats = npt.NDArray[np.float64]

FEWEST: Final = 256  # readings
EVEN: Final = 0.02  # of a step: how far time stamps may be off a regular grid
AROUND: Final = 48  # frequencies on either side that a line is held against
BESIDE: Final = 4  # frequencies next to it that belong to a line
BLOCK: Final = 16  # readings that a local scale comes from
LOUD: Final = 2.0  # usual scales: blocks of jitter or of features, which are left out
KEPT: Final = 0.5  # of the readings that must be left
ROUNDING: Final = 1e-8  # of the range: quieter readings were computed, not measured
PARTS: Final = 6  # of a pass, in each of which a line should be about as strong
STEADY: Final = 0.15  # of the strongest part
OUTLYING: Final = 4.0  # local scales beyond which a reading is feature, not noise
LOWEST: Final = 0.35  # of half the sampling rate: below, the shape of the field is in the way
SHAPES: Final = 12  # parts of the spectrum that its course is found from
MAINS: Final = (50.0, 60.0)  # Hz
HARMONICS: Final = 9
WANDERS: Final = 0.002  # of the mains frequency
NORM: Final = math.sqrt(924) / 20  # of sixth differences over 20, for white noise
TELLS: Final = 1.0  # rms of a line over the noise of a reading from which it is warned of


@dataclass(frozen=True)
class _Line:
    """A spectral line: Hz, V s, and how far it stands out, over what chance allows."""

    frequency: float
    amplitude: float
    noise: float
    excess: float
    allowed: float


def pickup_findings(passes: Sequence[Pass]) -> list[Finding]:
    """Name lines in the spectrum of the readings.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes; those not sampled regularly are passed over.

    Returns
    -------
    list of Finding
        A warning where a line is louder than the noise of the readings, else a note.

    Notes
    -----
    R. A. Fisher, Proc. R. Soc. A 125, 54 (1929), for one line against white noise. The noise here
    is coloured, so a line is held against the median of m frequencies around it; the ratio of an
    exponential deviate to its scale known from those exceeds x with chance (1 + x/d)^-d, with
    d = 0.48 m (variance of the median of exponential deviates).
    """
    looks = max(sum(len(one.time) // 2 for one in passes), 1)
    found = []
    for one in passes:
        line = _line(one, FAMILY_SHARE / looks)
        if line is not None:
            found.append(_told(one, line))
    return found


def _line(one: Pass, chance: float) -> _Line | None:
    """The strongest line of a pass, if there is one."""
    step = np.diff(one.time)
    if len(one.time) < FEWEST:
        return None
    pace = float(np.median(step))
    if pace <= 0 or np.abs(step - pace).max() > EVEN * pace:
        return None
    rest, scale = _rest(one.flux)
    if rest is None:
        return None
    window = np.hanning(len(rest) + 2)[1:-1]
    window /= math.sqrt(float(window @ window))
    spectrum = np.abs(np.fft.rfft(rest * window)) ** 2
    frequency = np.fft.rfftfreq(len(rest), pace)
    shape = _shape(spectrum, np.asarray(frequency * 2 * np.pi * pace, dtype=np.float64))
    floor = _floor(spectrum / shape) * shape
    searched = (frequency > LOWEST / (2 * pace)) & (floor > 0)
    searched[-2:] = False
    ratio = np.divide(spectrum, floor, out=np.zeros_like(spectrum), where=searched)
    k = int(np.argmax(ratio))
    allowed = _allowed(chance)
    if ratio[k] <= allowed or not _lasts(rest, 2 * np.pi * frequency[k] * pace):
        return None
    angle = np.asarray(frequency[k : k + 1] * 2 * np.pi * pace, dtype=np.float64)
    gain = float(_gain(angle)[0])
    power = float(np.sum(spectrum[max(k - 2, 0) : k + 3]))
    # what was left out lowers the line in proportion
    kept = float(np.sum(window[rest != 0]) / np.sum(window))
    amplitude = 2 * math.sqrt(power / len(rest)) / kept * scale / gain
    return _Line(float(frequency[k]), amplitude, scale / NORM, float(ratio[k]), allowed)


def _rest(flux: Floats) -> tuple[Floats | None, float]:
    """What neighbours do not explain, over its local scale, features left out; and that scale."""
    rest = np.diff(flux, 6) / 20
    blocks = len(rest) // BLOCK
    shaped = np.abs(rest[: blocks * BLOCK]).reshape(blocks, BLOCK)
    typical = 1.4826 * np.median(shaped, axis=1)
    usual = float(np.median(typical))
    block = np.minimum(np.arange(len(rest)) // BLOCK, blocks - 1)
    quiet = typical[block] < LOUD * usual
    least = max(ROUNDING * float(np.ptp(flux)), 1e-15)
    if not np.all(typical > 0) or usual < least or np.count_nonzero(quiet) < KEPT * len(rest):
        return None, 0.0
    local = np.interp(np.arange(len(rest)), (np.arange(blocks) + 0.5) * BLOCK, typical)
    scaled = np.where(quiet, rest / local, 0.0)
    scaled[np.abs(scaled) > OUTLYING] = 0.0
    return scaled, usual


def _lasts(rest: Floats, cycle: float) -> bool:
    """Whether a line of so many radians a reading is there all along, not in a burst of noise."""
    parts = np.array_split(rest * np.exp(-1j * cycle * np.arange(len(rest))), PARTS)
    power = np.array([abs(part.sum()) ** 2 for part in parts])
    filled = np.array([np.count_nonzero(part) for part in parts]) ** 2
    strength = power[filled > 0] / filled[filled > 0]
    return bool(np.median(strength) > STEADY * strength.max())


def _gain(angle: Floats) -> Floats:
    """What is left of a line of so many radians a reading by the polynomial of the neighbours."""
    return np.asarray((2 - 2 * np.cos(angle)) ** 3 / 20)


def _shape(spectrum: Floats, angle: Floats) -> Floats:
    """Course of the spectrum for read noise and walk noise, in the shares that fit it best.

    Both are seen through the polynomial of the neighbours.
    """
    power = _gain(angle) ** 2
    read = np.maximum(power, 1e-12)
    walk = np.maximum(power / np.maximum(2 - 2 * np.cos(angle), 1e-12), 1e-12)
    start = int(LOWEST * len(spectrum))
    blocks = np.array_split(np.arange(start, len(spectrum)), SHAPES)
    level = np.array([np.median(spectrum[block]) for block in blocks])
    if not np.all(level > 0):
        return read
    shares = np.array([[np.median(one[block]) for one in (read, walk)] for block in blocks])
    from scipy.optimize import nnls

    (a, b), _ = nnls(shares / level[:, None], np.ones(len(level)))
    return np.asarray(a * read + b * walk) if a + b > 0 else read


def _floor(spectrum: Floats) -> Floats:
    """Mean power around each frequency, by the median of those not next to it."""
    n = len(spectrum)
    width = 2 * AROUND + 1
    if n < width + 1:
        return np.full(n, float(np.median(spectrum[1:])) / math.log(2))
    # block medians at a quarter of the width, the larger of two, are steady enough and cheap
    hop = AROUND // 4
    starts = np.arange(1, n - width + 1, hop)
    views = np.lib.stride_tricks.sliding_window_view(spectrum, width)[starts]
    centres = starts + AROUND
    medians = np.median(views, axis=1) / math.log(2)
    return np.asarray(np.interp(np.arange(n), centres, medians))


def _allowed(chance: float) -> float:
    """Power over that of the frequencies around that chance exceeds that rarely."""
    freedom = 0.48 * 2 * (AROUND - BESIDE)
    return float(freedom * (chance ** (-1 / freedom) - 1))


def _told(one: Pass, line: _Line) -> Finding:
    rate = (len(one.time) - 1) / float(one.time[-1] - one.time[0])
    source = _source(line.frequency, rate, float(one.time[-1] - one.time[0]))
    loud = line.amplitude / math.sqrt(2) > TELLS * line.noise
    harm = (
        "louder than the noise of the readings, so that stated uncertainties do not cover it"
        if loud
        else "lower than the noise of the readings, so that results hardly feel it"
    )
    text = (
        f"a line at {line.frequency:.4g} Hz in the readings{source}, amplitude "
        f"{line.amplitude:.2g} V s, {line.excess:.0f} times the power around it, where chance "
        f"allows {line.allowed:.0f}: {harm}; integrate over whole mains periods, choose a sampling "
        "rate that divides the mains frequency, and twist and shield the leads."
    )
    return Finding("mains-pickup", "warn" if loud else "note", one.name, text)


def _source(frequency: float, rate: float, duration: float) -> str:
    """Which harmonic of the mains shows at a frequency when sampled at a rate, in words."""
    for order in range(1, HARMONICS + 1):
        for mains in MAINS:
            true = order * mains
            shown = abs(true - rate * round(true / rate))
            if abs(shown - frequency) < 2 / duration + WANDERS * true:
                fold = "" if math.isclose(shown, true) else f" sampled at {rate:.4g} Hz"
                return f" ({true:.0f} Hz of the mains{fold})"
    return ""
