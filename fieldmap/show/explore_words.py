"""What the figures of the passes and dwells show, in sentences with their main numbers."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.show.captions import field_words
from fieldmap.show.explore import mains_words
from fieldmap.show.look import MM
from fieldmap.show.numbers import plain, rounded, scale_for
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.agreement import Agreement
    from fieldmap.estimate.dwell_noise import Line
    from fieldmap.estimate.spectrum import AllanCurve, Spectrum
    from fieldmap.readings.passes import Pass
    from fieldmap.show.explore import Heard, Level

__all__ = [
    "agreement_words",
    "allan_words",
    "dwell_words",
    "level_words",
    "line_words",
    "readings_words",
    "spectrum_words",
    "verdict_of",
    "with_u",
]

K: Final = 2.0
MOST_NAMED: Final = 6


def with_u(value: float, u: float, unit: str) -> str:
    """A number with its expanded uncertainty (k = 2) in a handy unit.

    Examples
    --------
    >>> with_u(2.04e-7, 1.1e-8, "V s s^-0.5")
    '0.204 ± 0.022 µV·s/√s'
    """
    scale = scale_for(unit, [value, K * u])
    shown, half = rounded(value * scale.factor, K * u * scale.factor)
    return f"{shown} ± {half} {scale.unit}"


def level_words(level: Level) -> str:
    """A noise level in a few words."""
    walk, read = scale_for("V s s^-0.5", [level.walk]), scale_for("V s", [level.read])
    return (
        f"{level.name}: walk {plain(level.walk * walk.factor, 3)} {walk.unit}, "
        f"read noise {plain(level.read * read.factor, 3)} {read.unit}"
    )


def line_words(line: Line, rate: float, width: float) -> str:
    """A line of a spectrum in a few words.

    Examples
    --------
    >>> from fieldmap.estimate.dwell_noise import Line
    >>> line_words(Line(50.0, 2e-6), 1000.0, 0.2)
    '50 Hz (mains, 50 Hz), 2 µV rms'
    """
    scale = scale_for("V", [line.voltage])
    mains = mains_words(line.frequency, rate, width)
    told = f" ({mains})" if mains else ""
    rms = f"{plain(line.voltage * scale.factor, 3)} {scale.unit} rms"
    return f"{plain(line.frequency, 4)} Hz{told}, {rms}"


def dwell_words(heard: Heard) -> str:
    """Which dwell it is."""
    dwell = heard.dwell
    return (
        f"{one_line(heard.one.name)}, dwell {dwell.number} at {_mm(dwell.at)}: "
        f"{len(dwell.time)} readings in {plain(dwell.duration, 4)} s"
    )


def readings_words(
    passes: Sequence[Pass], values: Sequence[Sequence[float]], quantity: str, unit: str
) -> str:
    """What the figure of the readings shows."""
    told = [
        f"{one_line(one.name)} ({one_line(one.probe.name)}, {len(one.time)} readings, "
        f"{_mm(float(one.position[0]))} to {_mm(float(one.position[-1]))}) "
        f"from {plain(min(v), 4)} to {plain(max(v), 4)} {unit}"
        for one, v in zip(passes[:MOST_NAMED], values, strict=False)
    ]
    more = f"; and {len(passes) - MOST_NAMED} more" if len(passes) > MOST_NAMED else ""
    return f"{quantity.capitalize()}: {'; '.join(told)}{more}."


def agreement_words(found: Agreement) -> str:
    """What the figure of two passes shows."""
    i = int(np.argmax(np.abs(found.difference) / found.u))
    largest = field_words(float(found.difference[i]), float(found.u[i]))
    level = "" if found.level_known else "; its mean is not told by a coil and was set to zero"
    return (
        f"{one_line(found.first)} less {one_line(found.second)} from {_mm(found.position[0])} to "
        f"{_mm(found.position[-1])}, best offset and drift removed: most against its uncertainty "
        f"{largest} at {_mm(found.position[i])} (k = 2){level}. {verdict_of(found)}"
    )


def verdict_of(found: Agreement) -> str:
    """Whether the passes agree, with the numbers of the test."""
    test = (
        f"χ² {plain(found.chi_square, 3)} for {plain(found.freedom, 3)} degrees of freedom, "
        f"probability {_share(found.probability)}"
    )
    if found.agree:
        return f"They agree: chance explains the difference ({test})."
    return (
        f"They do not agree: noise, drift, gain and position within their stated uncertainties do "
        f"not explain the difference ({test}); look where it leaves its band."
    )


def spectrum_words(heard: Heard, found: Spectrum) -> str:
    """What the figure of the spectrum shows."""
    middle = float(np.sqrt(np.median(found.density)))
    scale = scale_for("V", [middle])
    rate = 1 / heard.dwell.step
    lines = [line_words(one, rate, found.width) for one in heard.noise.lines[:MOST_NAMED]]
    told = f"Lines at {'; '.join(lines)}." if lines else "No line stands out."
    levels = "; ".join(level_words(level) for level in heard.levels)
    return (
        f"Power spectral density of the voltage, {dwell_words(heard)}, {found.segments} segments: "
        f"{plain(found.frequency[0], 3)} to {plain(found.frequency[-1], 3)} Hz, median "
        f"{plain(middle * scale.factor, 3)} {scale.unit}/√Hz. {told} Curves: {levels}."
    )


def allan_words(heard: Heard, found: AllanCurve) -> str:
    """What the figure of the Allan deviation shows."""
    i = int(np.argmin(found.deviation))
    scale = scale_for("V", [float(found.deviation.max())])
    first, last = (plain(found.deviation[j] * scale.factor, 3) for j in (0, -1))
    return (
        f"Allan deviation of the voltage, {dwell_words(heard)}: {first} {scale.unit} at "
        f"{plain(found.time[0], 3)} s, {last} {scale.unit} at {plain(found.time[-1], 3)} s, least "
        f"{plain(found.deviation[i] * scale.factor, 3)} {scale.unit} at {plain(found.time[i], 3)} "
        f"s. Curves: {'; '.join(level_words(level) for level in heard.levels)}."
    )


def _share(probability: float) -> str:
    return f"{plain(100 * probability, 2)} %" if probability >= 1e-4 else "below 0.01 %"


def _mm(position: float) -> str:
    return f"{plain(float(position) * MM, 5)} mm"
