"""A campaign over again: the map's own field measured by the same passes, with other errors.

Every pass keeps its time stamps and recorded positions. Sizes, positions, drifts, noise and
references are drawn afresh from what the campaign states of them; where it states nothing of a
drift or a noise level, the fitted one stands in. Corrections that are switched on stay made: a
pass is measured as it stands after them, with what is uncertain of them drawn afresh, and steps
as large as they were found.
"""

from __future__ import annotations

import json
import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final, NamedTuple

import numpy as np

from fieldmap.bench.bench_errors import Errors, Noise, draw_errors
from fieldmap.bench.mapped import MappedField
from fieldmap.bench.reading import shown, true_gain, true_position, true_probe, warmed, whole_steps
from fieldmap.bench.response import flux
from fieldmap.bench.twin import read_flip, read_point
from fieldmap.errors import InputError
from fieldmap.estimate.checks import prepared
from fieldmap.estimate.corrected import integrator_scale, reached, step_times
from fieldmap.estimate.map import map_lines, map_passes
from fieldmap.readings.passes import PointReference, ZeroReference
from fieldmap.readings.probe import Coil
from fieldmap.readings.records import cumulative_flux, integrate_voltage

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray as xr

    from fieldmap.bench.sources import Source
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.estimate.parameters import Kind
    from fieldmap.readings.passes import Campaign, Floats, Pass, Reference

__all__ = ["Replayed", "replay"]

Place = tuple[float, float]
Key = tuple[str, str, float, float]

_PLAY: Final = 10.0  # a turn of the stage is larger than this many u of its jitter …
_TURN: Final = 0.005  # … and than this share of the travel
_UNCERTAIN: Final = ("factor", "lag", "shift")


@dataclass(frozen=True, eq=False)
class Replayed:
    """A campaign measured again.

    Parameters
    ----------
    campaign : Campaign
        The new readings and references.
    truth : xarray.Dataset
        The map whose field was measured: the one given, unless a zero reference moved its level.
    errors : Errors
        What was drawn.
    """

    campaign: Campaign
    truth: xr.Dataset
    errors: Errors


def replay(campaign: Campaign, fmap: xr.Dataset, rng: np.random.Generator) -> Replayed:
    """Measure the field of a map by the passes it was made from.

    Parameters
    ----------
    campaign : Campaign
        What was measured.
    fmap : xarray.Dataset
        From `stitch`, of this campaign.
    rng : numpy.random.Generator
        Source of chance.

    Returns
    -------
    Replayed

    Raises
    ------
    InputError
        A map of another campaign.

    Notes
    -----
    A reading at time t shows the flux at the position that the stage reached at t + lag, by its
    recorded positions, through scale, offset, backlash and jitter: the model of
    `fieldmap.bench.twin.record`. Of voltage samples the integral is drawn, white noise of the
    samples included; what an interpolation misses between them is no error of chance.

    "The field vanishes within u" tells of the field, not of a reading: so in each replay the field
    itself gets a level, and where there are several such stretches a piecewise linear one, whose
    means over the stretches are normal with standard uncertainty u.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> campaign = fieldmap.load(demo_folder() / "foreign_tables")
    >>> again = replay(campaign, fieldmap.stitch(campaign), np.random.default_rng(1))
    >>> [one.name for one in again.campaign.passes]
    ['pass_01.csv', 'pass_02.csv', 'pass_03.csv']
    """
    campaign = prepared(campaign)
    levels = _noise_levels(fmap)
    errors = _drawn(campaign, fmap, rng)
    lines = {(line.x, line.y): line for line in map_lines(fmap)}
    truth = {at: _levelled(line, _zeros(campaign, at), rng) for at, line in lines.items()}
    sources = {at: MappedField(line) for at, line in truth.items()}
    steps = _fitted(fmap, "step")
    passes = tuple(
        _again(
            campaign,
            one,
            _of_line(sources, one),
            errors,
            drift,
            _stepped(one, steps),
            _noise(one, levels),
            rng,
        )
        for one, drift in zip(campaign.passes, errors.drift, strict=True)
    )
    references = tuple(_reread(ref, sources, errors, rng) for ref in campaign.references)
    moved = any(truth[at] is not line for at, line in lines.items())
    return Replayed(
        replace(campaign, passes=passes, references=references),
        _with_coefficients(fmap, truth) if moved else fmap,
        errors,
    )


def _drawn(campaign: Campaign, fmap: xr.Dataset, rng: np.random.Generator) -> Errors:
    """Errors by what the campaign states; a drift of which it says nothing keeps its fit."""
    errors = draw_errors(campaign, rng, passes=campaign.passes)
    fitted = _fitted(fmap, "drift")
    drifts = [
        fitted[one.name] / integrator_scale(one)
        if one.integrator.u_drift is None and one.name in fitted
        else drift
        for one, drift in zip(campaign.passes, errors.drift, strict=True)
    ]
    return replace(errors, drift=tuple(drifts))


class _OwnErrors(NamedTuple):
    """What the corrections of one pass leave wrong in a trial."""

    factor: float
    lag: float
    shift: float


def _own_errors(one: Pass, rng: np.random.Generator) -> _OwnErrors:
    """Draw the rest of a factor (relative), of a lag (s) and of a shift (m)."""
    u = {each.kind: each.u for each in one.corrections}
    return _OwnErrors(*(u[k] * rng.standard_normal() if u.get(k) else 0.0 for k in _UNCERTAIN))


def _stepped(one: Pass, steps: Mapping[str, float]) -> Floats:
    """Flux of the steps in a pass, as large as they were found, V s."""
    flux = np.zeros(len(one.time))
    for where, at in step_times(one).items():
        flux += steps.get(where, 0.0) * (one.time >= at)
    return flux


def _fitted(fmap: xr.Dataset, kind: Kind) -> dict[str, float]:
    """Fitted value of each nuisance of a kind, by its place, SI."""
    found = {}
    for facts in json.loads(fmap.attrs["lines"]):
        values = fmap["nuisance"].sel(x=facts["x"], y=facts["y"]).values
        for unknown, value in zip(facts["unknowns"], values.tolist(), strict=False):
            if unknown["kind"] == kind:
                found[unknown["where"]] = value * unknown["sd"]  # kept in units of its sd
    return found


def _noise_levels(fmap: xr.Dataset) -> dict[Key, Noise]:
    """Fitted noise of each pass."""
    return {
        (one["name"], one["record"], one["x"], one["y"]): Noise(
            one["walk_noise"], one["read_noise"]
        )
        for one in map_passes(fmap)
    }


def _noise(one: Pass, levels: Mapping[Key, Noise]) -> Noise:
    """Noise of a pass, without the steps of the display: stated, else fitted."""
    stated, steps = one.integrator, one.integrator.resolution / math.sqrt(12)
    fitted = levels.get((one.name, one.record, one.x, one.y))
    if fitted is None:
        found = f"pass '{one.name}', which is not in the map"
        remedy = "stitch this campaign, and give that map"
        raise InputError("argument 'fmap'", found, "a map of the same passes", remedy)
    read = math.sqrt(max(fitted.read**2 - steps**2, 0.0))
    if one.record == "voltage":
        read = 0.0  # its noise is white voltage: a walk of the integral
    elif stated.read_noise is not None:
        read = stated.read_noise
    return Noise(fitted.walk if stated.walk_noise is None else stated.walk_noise, read)


def _of_line(sources: Mapping[Place, Source], one: Pass) -> Source:
    """Field along the line of a pass."""
    source = sources.get((one.x, one.y))
    if source is None:
        found = f"no line at x = {one.x:g} m, y = {one.y:g} m"
        raise InputError("argument 'fmap'", found, "a map of the same passes", "stitch them first")
    return source


def _again(
    campaign: Campaign,
    one: Pass,
    source: Source,
    errors: Errors,
    drift: float,
    stepped: Floats,
    noise: Noise,
    rng: np.random.Generator,
) -> Pass:
    """One pass over again."""
    u_jitter = campaign.stage.u_position
    own = _own_errors(one, rng)
    late = reached(one.time, one.position, errors.lag + own.lag) + own.shift
    sense = _sense(one.position, max(_PLAY * u_jitter, _TURN * float(np.ptp(one.position))))
    place = true_position(late, sense, errors)
    jitter = u_jitter * rng.standard_normal(one.time.size)
    freely = one.record == "voltage"  # a voltmeter is not triggered by the position it notes
    linked = _linked(campaign, one, source, place if freely else place + jitter, errors)
    # what the integrator adds comes before the corrections of its flux
    scale = integrator_scale(one)
    linked *= (1 + own.factor) / scale
    linked += drift * (one.time - one.time[0])
    if freely:
        linked += _integrated_noise(one, noise, rng)
        flux = scale * (linked - linked[0])
        return replace(one, position=one.position - jitter, flux=flux + stepped)
    shown_before = replace(one, flux=one.flux / scale)
    flux = scale * _cumulated(shown_before, linked + _walk(one, noise, rng), noise, rng)
    return replace(one, flux=flux + stepped)


def _linked(campaign: Campaign, one: Pass, source: Source, place: Floats, errors: Errors) -> Floats:
    """Flux through the probe at its true positions, V s."""
    probe = true_probe(one.probe, errors)
    linked = true_gain(probe, errors) * flux(source, probe, place)
    nominal = campaign.magnet.current
    if one.current is not None and nominal:
        linked = linked * one.current / nominal
    if one.temperature is not None:
        linked = linked * warmed(probe, one.temperature)
    return np.asarray(linked)


def _cumulated(one: Pass, integral: Floats, noise: Noise, rng: np.random.Generator) -> Floats:
    """What the integrator shows, turned into cumulative flux as the reader of tables does."""
    started = integral - integral[0] + one.flux[0]
    read = noise.read * rng.standard_normal(one.time.size)
    samples = shown(started, one.time, one.integrator, read)
    if one.record == "increments":
        samples = np.diff(samples, prepend=samples[0])
        samples = whole_steps(samples, one.integrator.resolution)
    return cumulative_flux(samples, one.time, one.record, one.integrator)


def _walk(one: Pass, noise: Noise, rng: np.random.Generator) -> Floats:
    """Random walk of the integral, V s."""
    steps = rng.standard_normal(one.time.size - 1) * np.sqrt(np.diff(one.time))
    return np.asarray(noise.walk * np.concatenate([[0.0], np.cumsum(steps)]))


def _integrated_noise(one: Pass, noise: Noise, rng: np.random.Generator) -> Floats:
    """Integral of white voltage samples, by the rule that the samples were integrated with."""
    spacing = np.gradient(one.time)
    voltage = noise.walk / np.sqrt(spacing) * rng.standard_normal(one.time.size)
    return integrate_voltage(voltage, one.time)


def _sense(position: Floats, play: float) -> Floats:
    """Direction of travel of each reading; a turn smaller than the play is none."""
    sense, turned = np.empty(len(position)), 0
    low = high = 0  # readings of the extremes since the last turn
    now = 0.0
    for i, place in enumerate(position.tolist()):
        low = i if place < position[low] else low
        high = i if place > position[high] else high
        if now <= 0 and place - position[low] > play:
            sense[turned:low], turned, now, high = now or 1.0, low, 1.0, i
        elif now >= 0 and position[high] - place > play:
            sense[turned:high], turned, now, low = now or -1.0, high, -1.0, i
    sense[turned:] = now or 1.0
    return sense


def _zeros(campaign: Campaign, at: Place) -> list[ZeroReference]:
    """Stretches of one line on which the field is said to vanish."""
    return [
        ref
        for ref in campaign.references
        if isinstance(ref, ZeroReference)
        and ((ref.x is None and ref.y is None) or (ref.x or 0.0, ref.y or 0.0) == at)
    ]


def _levelled(
    line: FieldLine, zeros: Sequence[ZeroReference], rng: np.random.Generator
) -> FieldLine:
    """The line with its mean over each field-free stretch drawn afresh."""
    if not zeros:
        return line
    stretches = [(max(ref.start, line.low), min(ref.stop, line.high)) for ref in zeros]
    rows = np.array([line.spline.integral_row(*ends) / (ends[1] - ends[0]) for ends in stretches])
    middles = np.array([sum(ends) / 2 for ends in stretches])
    order = np.argsort(middles)
    at = line.spline.middles()
    hats = np.array([np.interp(at, middles[order], unit) for unit in np.eye(len(zeros))[:, order]])
    wanted = np.array([ref.u for ref in zeros]) * rng.standard_normal(len(zeros))
    change = np.linalg.lstsq(rows @ hats.T, wanted - rows @ line.b, rcond=None)[0]
    return replace(line, b=line.b + change @ hats)


def _reread(
    ref: Reference, sources: Mapping[Place, Source], errors: Errors, rng: np.random.Generator
) -> Reference:
    """A reference read again."""
    if isinstance(ref, ZeroReference):
        return ref
    given = ref.x is not None or ref.y is not None
    source = sources[(ref.x or 0.0, ref.y or 0.0)] if given else next(iter(sources.values()))
    if isinstance(ref, PointReference):
        return replace(ref, field=read_point(source, ref.at, ref.u, rng).field)
    if not isinstance(ref.probe, Coil):  # a record built by hand
        found = f"a flip of '{ref.probe.name}', which is no coil"
        raise InputError("[[references]]", found, "a flip of a coil", "name a coil")
    flip = read_flip(source, ref.probe, ref.at, ref.u_flux_change, rng, errors)
    return replace(ref, flux_change=flip.flux_change)


def _with_coefficients(fmap: xr.Dataset, lines: Mapping[Place, FieldLine]) -> xr.Dataset:
    """The map with the coefficients of other lines."""
    b = fmap["coefficient"].copy(deep=True)
    for (x, y), line in lines.items():
        b.loc[{"x": x, "y": y}] = np.pad(
            line.b, (0, b.sizes["basis"] - len(line.b)), constant_values=np.nan
        )
    return fmap.assign(coefficient=b)
