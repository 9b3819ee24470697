"""Changes of a campaign that must not change what is measured: other origins, units and orders."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fieldmap.readings import FlipReference, Wire, ZeroReference
from tests.shop import remade


def reordered(campaign):
    """Passes and references in the opposite order."""
    return replace(campaign, passes=campaign.passes[::-1], references=campaign.references[::-1])


def renamed(campaign):
    """Passes under names that sort the other way."""
    passes = [replace(one, name=f"z{99 - i}") for i, one in enumerate(campaign.passes)]
    return replace(campaign, passes=tuple(passes))


def later(by):
    """Another origin of time, s."""
    return lambda campaign: remade(campaign, lambda one: replace(one, time=one.time + by))


def lifted(by):
    """Another constant of the flux, V s."""
    return lambda campaign: remade(campaign, lambda one: replace(one, flux=one.flux + by))


def moved(by):
    """Another origin of position, m: passes, references and limits alike."""

    def change(campaign):
        axis = campaign.axis
        campaign = replace(
            campaign,
            axis=replace(
                axis,
                integrate=tuple(s + by for s in axis.integrate),
                flat=tuple(s + by for s in axis.flat),
            ),
            references=tuple(_placed(one, lambda s: s + by) for one in campaign.references),
        )
        return remade(campaign, lambda one: replace(one, position=one.position + by))

    return change


def mirrored(campaign):
    """Travel in the opposite direction: s becomes -s, and a wire collects what it lost."""
    axis = campaign.axis
    campaign = replace(
        campaign,
        axis=replace(
            axis,
            integrate=tuple(-s for s in axis.integrate[::-1]),
            flat=tuple(-s for s in axis.flat[::-1]),
        ),
        references=tuple(_placed(one, lambda s: -s) for one in campaign.references),
    )
    return remade(
        campaign,
        lambda one: replace(
            one,
            position=-one.position,
            flux=-one.flux if one.probe.senses_level else one.flux,
        ),
    )


def turned(campaign):
    """The opposite sign of all flux and of every reference."""

    def opposite(one):
        if isinstance(one, ZeroReference):
            return one
        if isinstance(one, FlipReference):
            return replace(one, flux_change=-one.flux_change)
        return replace(one, field=-one.field)

    references = tuple(opposite(one) for one in campaign.references)
    return remade(
        replace(campaign, references=references),
        lambda one: replace(
            one,
            flux=-one.flux,
            integrator=replace(one.integrator, drift=-one.integrator.drift),
        ),
    )


def amplified(by):
    """More turns: flux, gain and all that is stated in V s grow alike."""

    def probe(one):
        if isinstance(one, Wire):
            return replace(one, turns=one.turns * by)
        area, u_area = one.effective_area * by, one.u_effective_area * by
        return replace(one, effective_area=area, u_effective_area=u_area)

    def flip(one):
        if not isinstance(one, FlipReference):
            return one
        change, u_change = one.flux_change * by, one.u_flux_change * by
        return replace(one, probe=probe(one.probe), flux_change=change, u_flux_change=u_change)

    return lambda campaign: remade(
        replace(campaign, references=tuple(flip(one) for one in campaign.references)),
        lambda one: replace(
            one,
            flux=one.flux * by,
            probe=probe(one.probe),
            integrator=_louder(one.integrator, by),
        ),
    )


def stronger(by):
    """A field of another size: flux, noise and references grow, the probes stay."""

    def reference(one):
        if isinstance(one, ZeroReference):
            return replace(one, u=one.u * by)
        if isinstance(one, FlipReference):
            change, u_change = one.flux_change * by, one.u_flux_change * by
            return replace(one, flux_change=change, u_flux_change=u_change)
        return replace(one, field=one.field * by, u=one.u * by)

    return lambda campaign: remade(
        replace(campaign, references=tuple(reference(one) for one in campaign.references)),
        lambda one: replace(one, flux=one.flux * by, integrator=_louder(one.integrator, by)),
    )


def slower(by):
    """Another unit of time."""

    def integrator(one):
        return replace(
            one,
            drift=one.drift / by,
            u_drift=_times(one.u_drift, 1 / by),
            walk_noise=_times(one.walk_noise, 1 / np.sqrt(by)),
            leak_time=_times(one.leak_time, by),
        )

    return lambda campaign: remade(
        replace(campaign, stage=replace(campaign.stage, u_lag=campaign.stage.u_lag * by)),
        lambda one: replace(one, time=one.time * by, integrator=integrator(one.integrator)),
    )


def cut(campaign, number, at, *, shared):
    """One pass in two, cut at a reading that both halves have, or the second alone."""
    one = campaign.passes[number]
    halves = []
    for name, part in (("a", slice(0, at + shared)), ("b", slice(at, None))):
        columns = {key: getattr(one, key)[part] for key in ("time", "position", "flux")}
        halves.append(replace(one, name=f"{one.name} {name}", **columns))
    passes = (*campaign.passes[:number], *halves, *campaign.passes[number + 1 :])
    return replace(campaign, passes=passes)


def _placed(reference, place):
    if isinstance(reference, ZeroReference):
        start, stop = sorted((place(reference.start), place(reference.stop)))
        return replace(reference, start=start, stop=stop)
    return replace(reference, at=place(reference.at))


def _louder(integrator, by):
    names = ("read_noise", "walk_noise", "drift", "u_drift", "resolution", "full_scale")
    return replace(integrator, **{name: _times(getattr(integrator, name), by) for name in names})


def _times(value, by):
    return None if value is None else value * by
