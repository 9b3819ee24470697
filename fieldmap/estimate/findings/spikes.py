"""Isolated wild readings: left out of cumulative records, remarked in all."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.places import many, place
from fieldmap.estimate.findings.thresholds import FAMILY_SHARE
from fieldmap.estimate.findings.wild import FEWEST, Wild, wild_runs
from fieldmap.estimate.resolution import flux_step, unswung
from fieldmap.readings.checks import FEWEST_READINGS
from fieldmap.readings.corrections import Correction

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["spike_findings", "without_spikes"]

Floats = npt.NDArray[np.float64]

ISOLATED: Final = 2  # readings that are left out unasked
LONGEST: Final = 6  # readings of a burst; a longer one is a step there and a step back
SEVERAL: Final = 8  # bursts of a pass that are named one by one
MOVES: Final = 0.5  # of the usual way between readings: below it the probe all but stands
SUMMED: Final = 16.0  # roundings in the difference of two sums
LOOK: Final = "look for a loose contact or for switching nearby"


@dataclass(frozen=True)
class _Spike:
    """A wild run in readings of the pass; size and what chance allows in V s or V."""

    start: int
    count: int
    size: float
    allowed: float


def spike_findings(passes: Sequence[Pass]) -> list[Finding]:
    """Name the wild readings of all passes.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes, whole.

    Returns
    -------
    list of Finding
    """
    return [one for each, spikes in _searched(passes) for one in _told(each, spikes)]


def without_spikes(passes: Sequence[Pass]) -> tuple[Pass, ...]:
    """Leave the isolated spikes of cumulative records out; `spike_findings` says which.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes.

    Returns
    -------
    tuple of Pass
        The same objects where nothing is left out.

    Notes
    -----
    A reading of a running total that is wild says nothing of those after it, so it gets no
    weight. An increment or a voltage is summed: what a wild one hides is lost for good.

    Examples
    --------
    >>> from fieldmap.readings import Wire, make_pass
    >>> z = np.linspace(-0.1, 0.1, 200)
    >>> flux = 1e-3 * np.tanh(z / 0.02) + 1e-8 * np.random.default_rng(1).normal(size=200)
    >>> flux[70] += 1e-4
    >>> (one,) = without_spikes([make_pass(z, flux, rate=100.0, probe=Wire("w", 1, 0.05))])
    >>> len(one.time)
    199
    """
    return tuple(_without(one, _left_out(one, spikes)) for one, spikes in _searched(passes))


def _left_out(one: Pass, spikes: Sequence[_Spike]) -> list[_Spike]:
    if one.record != "cumulative":
        return []
    return [spike for spike in spikes if spike.count <= ISOLATED]


def _without(one: Pass, spikes: Sequence[_Spike]) -> Pass:
    """A pass without some of its readings."""
    rows = np.ones(len(one.time), dtype=np.bool_)
    for spike in spikes:
        rows[spike.start : spike.start + spike.count] = False
    if rows.all() or np.count_nonzero(rows) < FEWEST_READINGS:
        return one
    return one.only(rows)


def _searched(passes: Sequence[Pass]) -> list[tuple[Pass, list[_Spike]]]:
    """Wild runs of each pass, at a chance that holds for all of them together."""
    looks = max(sum(len(one.time) for one in passes), 1)
    return [(one, _spikes(one, FAMILY_SHARE / looks)) for one in passes]


def _spikes(one: Pass, chance: float) -> list[_Spike]:
    """Wild runs of one pass, in its own readings."""
    if len(one.time) < FEWEST:
        return []
    if one.record == "cumulative":
        grain = flux_step(one)
        runs = wild_runs(
            one.time, one.flux, chance=chance, grain=grain, steep=_slope(one), longest=LONGEST
        )
        return [_Spike(run.start, run.count, run.size, run.allowed) for run in runs]
    step = np.diff(one.time)
    usual = float(np.median(step))
    if usual <= 0:
        return []
    rate = np.divide(np.diff(one.flux), step, out=np.zeros_like(step), where=step > 0)
    middle = (one.time[1:] + one.time[:-1]) / 2
    if one.record == "increments":
        rounding = SUMMED * np.finfo(float).eps * float(np.abs(one.flux).max())
        grain = max(flux_step(one), rounding) / usual
        slope = _slope(one)
        steep = np.maximum(slope[1:], slope[:-1])
        runs = wild_runs(middle, rate, chance=chance, grain=grain, steep=steep, longest=LONGEST)
        return [
            _Spike(run.start + 1, run.count, run.size * usual, run.allowed * usual) for run in runs
        ]
    if np.abs(step - usual).max() > 1e-3 * usual:
        return [
            _Spike(run.start, run.count, run.size, run.allowed)
            for run in wild_runs(middle, rate, chance=chance, longest=LONGEST)
        ]
    runs = wild_runs(middle[1:-1], unswung(rate), chance=chance, longest=LONGEST)
    return [_sample(run) for run in runs]


def _sample(run: Wild) -> _Spike:
    """Wild samples behind a run of `unswung`: one makes two large values."""
    first = run.start + (2 if run.count <= 2 else 3 if run.count == 4 else 2)
    return _Spike(first, max(run.count - 1, 1), run.size * 24 / 11, run.allowed * 24 / 11)


def _slope(one: Pass) -> Floats:
    """Size of dΦ/ds at each reading, carried on through dwells: jitter shows in proportion.

    Each reading takes the milder of the slopes before and after it, so that a wild one or a step
    does not count, and then the steepest of those around it.
    """
    flux, position = one.flux, one.position
    moved, changed = np.abs(position[2:] - position[:-2]), np.abs(flux[2:] - flux[:-2])
    usual = float(np.median(moved[moved > 0])) if np.any(moved > 0) else 0.0
    moves = moved > MOVES * usual
    slope = np.full(len(flux), np.inf)
    sided = np.divide(changed, moved, out=np.full(len(moved), np.inf), where=moves)
    slope[3:] = sided[:-1]
    slope[:-3] = np.minimum(slope[:-3], sided[1:])
    known = np.flatnonzero(np.isfinite(slope))
    if not len(known):
        return np.zeros(len(flux))
    wide = np.interp(np.arange(len(flux)), known, slope[known])
    for shift in (1, 2, 4):
        wider = wide.copy()
        wider[shift:] = np.maximum(wider[shift:], wide[:-shift])
        wider[:-shift] = np.maximum(wider[:-shift], wide[shift:])
        wide = wider
    return np.asarray(wide)


def _told(one: Pass, spikes: Sequence[_Spike]) -> list[Finding]:
    """Findings of one pass."""
    if not spikes:
        return []
    if one.record != "cumulative":
        return _displacing(one, spikes)
    left_out = _left_out(one, spikes)
    bursts = [spike for spike in spikes if spike.count > ISOLATED]
    found = [_isolated(one, left_out)] if left_out else []
    found += [_burst(one, burst) for burst in bursts[:SEVERAL]]
    if len(bursts) > SEVERAL:
        text = (
            f"{len(bursts) - SEVERAL} more bursts of wild readings lie in this pass: "
            "record it again."
        )
        found.append(Finding("spikes", "warn", one.name, text))
    return found


def _isolated(one: Pass, spikes: Sequence[_Spike]) -> Finding:
    count = sum(spike.count for spike in spikes)
    worst = max(spikes, key=lambda spike: abs(spike.size))
    which = "it was" if count == 1 else "they were"
    largest = "" if count == 1 else ", most"
    text = (
        f"{many(count, 'isolated reading')} off the neighbours{largest} by {worst.size:.3g} V s "
        f"at {place(one, worst.start)}, where chance allows {worst.allowed:.2g} V s: "
        f"{which} left out of the map; {LOOK}."
    )
    return Finding("spikes", "warn", one.name, text)


def _burst(one: Pass, spike: _Spike) -> Finding:
    last = spike.start + spike.count - 1
    text = (
        f"{many(spike.count, 'reading')} in a row off the neighbours by {spike.size:.3g} V s, from "
        f"{place(one, spike.start)} to {place(one, last)}, where chance allows "
        f"{spike.allowed:.2g} V s: they are kept unless the correction 'spikes' leaves them "
        f"out; {LOOK}."
    )
    start, stop = float(one.time[spike.start]), float(one.time[last])
    return Finding(
        "spikes", "warn", one.name, text, Correction("spikes", one.name, start=start, stop=stop)
    )


def _displacing(one: Pass, spikes: Sequence[_Spike]) -> list[Finding]:
    """A wild increment or voltage displaces all flux after it, by an amount that nobody knows."""
    what, unit = ("voltage", "V") if one.record == "voltage" else ("increment", "V s")
    found = []
    for spike in sorted(spikes, key=lambda one: -abs(one.size))[:SEVERAL]:
        start = float(one.time[spike.start])
        rest = "" if len(spikes) == 1 else f" (one of {len(spikes)} such places in this pass)"
        text = (
            f"a wild {what} {spike.size:.3g} {unit} off its neighbours at "
            f"{place(one, spike.start)}, where chance allows {spike.allowed:.2g} {unit}{rest}: it "
            "displaces all flux after it; the correction 'step' there frees what follows from it, "
            f"or record the pass again; {LOOK}."
        )
        offered = Correction("step", one.name, start=start)
        found.append(Finding("spikes", "warn", one.name, text, offered))
    return found
