"""Passes that hold the same readings: noise never repeats, so they were counted twice."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import combinations
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.places import place
from fieldmap.estimate.findings.thresholds import FAMILY_SHARE
from fieldmap.estimate.resolution import flux_step

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["copy_findings"]

Floats = npt.NDArray[np.float64]
Codes = npt.NDArray[np.complex128]
Ints = npt.NDArray[np.intp]

SAMPLES: Final = 256  # readings of a pass that are looked for in another
FEWEST: Final = 8  # readings in a row that must agree
LIKELIEST: Final = 0.995  # chance of agreement beyond which rounding hides the noise
ROUND: Final = 1e-9  # of the largest increment: sums that start elsewhere differ by rounding


@dataclass(frozen=True, eq=False)
class _Readings:
    """A pass as one complex number a reading, and the same sorted."""

    one: Pass
    code: Codes
    order: Ints
    likely: float  # chance that two readings of the same flux agree

    @property
    def sorted(self) -> Codes:
        return self.code[self.order]


def copy_findings(passes: Sequence[Pass]) -> list[Finding]:
    """Name pairs of passes that share readings to the last digit.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes.

    Returns
    -------
    list of Finding
    """
    pairs = max(len(passes) * (len(passes) - 1) // 2, 1)
    looks = pairs * max((len(one.time) for one in passes), default=1)
    readings = [_readings(one) for one in passes] if len(passes) > 1 else []
    found = []
    for a, b in combinations(readings, 2):
        if a.one is b.one:
            continue
        finding = _same_file(a.one, b.one) or _shared(a, b, FAMILY_SHARE / looks)
        if finding is not None:
            found.append(finding)
    return found


def _same_file(a: Pass, b: Pass) -> Finding | None:
    if not a.sha256 or a.sha256 != b.sha256:
        return None
    text = (
        f"the same file as {b.name} (sha256 {a.sha256[:12]}, {len(a.time)} readings): it counts "
        "twice and makes uncertainties too small; leave one of the two passes out."
    )
    return Finding("same-readings", "warn", a.name, text)


def _readings(one: Pass) -> _Readings:
    """Readings as numbers that are equal only where position and sample both are."""
    flux = one.flux if one.record == "cumulative" else np.diff(one.flux, prepend=one.flux[0])
    if one.record != "cumulative":
        grain = ROUND * (float(np.abs(flux).max()) or 1.0)
        flux = np.round(flux / grain)
    code = one.position + 1j * flux
    return _Readings(one, code, np.argsort(code, kind="stable"), _likely(one))


def _likely(one: Pass) -> float:
    """Chance that noise and rounding let two readings of one flux agree; at most one."""
    step = flux_step(one)
    if step == 0 or len(one.flux) < FEWEST:
        return 1e-3
    bends = np.abs(np.diff(one.flux, 3))
    noise = 1.4826 * float(np.median(bends)) / math.sqrt(20)
    # the densest value of the difference of two readings, each with this noise
    dense = step / (2 * math.sqrt(math.pi) * noise) if noise > 0 else 1.0
    return float(np.clip(dense, 1e-3, 1.0))


def _shared(a: _Readings, b: _Readings, chance: float) -> Finding | None:
    """A stretch of one pass that stands in the other, forwards or backwards."""
    likely = max(a.likely, b.likely)
    if likely > LIKELIEST or min(len(a.code), len(b.code)) < FEWEST:
        return None
    length = max(FEWEST, math.ceil(math.log(chance) / math.log(likely)))
    best = (0, 0, 0)
    for start, other in _met(a, b):
        for sense in (1, -1):
            count, first = _run(a.code, b.code, start, other, sense)
            if count > best[0]:
                best = (count, first, other)
    count, first, _ = best
    stretch = a.code[first : first + count]
    if count < length or len(np.unique(stretch.real)) < max(length // 2, FEWEST):
        return None
    if len(np.unique(stretch.imag)) < max(length // 2, FEWEST):
        return None
    text = (
        f"{count} readings in a row, from {place(a.one, first)} on, stand in {b.one.name} too, "
        "equal to the last digit in position and flux, which noise never repeats: the same pass "
        "counts twice and makes uncertainties too small; leave one of the two out."
    )
    return Finding("same-readings", "warn", a.one.name, text)


def _met(a: _Readings, b: _Readings) -> list[tuple[int, int]]:
    """Readings here and there that are equal, among some that are spread over the pass."""
    rows = np.unique(np.linspace(0, len(a.code) - 1, SAMPLES).astype(int))
    there = b.sorted
    slot = np.minimum(np.searchsorted(there, a.code[rows]), len(there) - 1)
    equal = there[slot] == a.code[rows]
    return list(zip(rows[equal].tolist(), b.order[slot[equal]].tolist(), strict=True))


def _run(a: Codes, b: Codes, start: int, other: int, sense: int) -> tuple[int, int]:
    """Number of equal readings around a meeting point, and the first of them."""
    ahead = b[other:] if sense > 0 else b[other::-1]
    behind = b[other::-1] if sense > 0 else b[other:]
    forward = _equal(a[start:], ahead)
    backward = _equal(a[start::-1], behind)
    return forward + backward - 1, start - backward + 1


def _equal(a: Codes, b: Codes) -> int:
    """How many values agree from the start on."""
    n = min(len(a), len(b))
    differs = np.flatnonzero(a[:n] != b[:n])
    return int(differs[0]) if len(differs) else n
