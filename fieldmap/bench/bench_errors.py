"""What is uncertain on a bench, with the values it truly has there."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from fieldmap.errors import InputError
from fieldmap.readings.passes import FlipReference
from fieldmap.readings.probe import Coil

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import numpy as np

    from fieldmap.readings.passes import Campaign, Pass, PlannedPass
    from fieldmap.readings.probe import Integrator

__all__ = ["Errors", "Noise", "draw_errors", "noise_of"]


@dataclass(frozen=True)
class Noise:
    """True noise of an integrator.

    Parameters
    ----------
    walk : float
        Random walk of the integral: V s per root second.
    read : float
        Independent noise of each reading, V s.
    """

    walk: float
    read: float


@dataclass(frozen=True)
class Errors:
    """True values of what a campaign file states as uncertain; the defaults are an ideal bench.

    Parameters
    ----------
    gain : mapping of str to float
        Relative error of each probe's gain, by the probe's name: the probe collects
        ``1 + gain`` times what its stated size says.
    scale : float
        Relative error of the position readings, 1.
    offset : float
        Where the stage's zero truly is, m.
    lag : float
        Trigger to reading, s.
    backlash : float
        Difference between the two directions of travel, m.
    window : mapping of str to float
        Error of the window of each coil, by its name, m.
    tilt : mapping of str to float
        Angle of each probe to the field, by its name, rad: it reads the cosine of it.
    warmth : mapping of str to float
        Error of the temperature of each probe, by its name, K.
    drift : tuple of float
        Drift rate of each planned pass, in their order, V s/s; the expected rates if empty.
    noise : mapping of str to Noise
        True noise by the integrator's name; needed where the campaign file states none, and
        taken before what it states elsewhere.

    Examples
    --------
    >>> Errors(lag=2e-3).offset
    0.0
    """

    gain: Mapping[str, float] = field(default_factory=dict)
    scale: float = 0.0
    offset: float = 0.0
    lag: float = 0.0
    backlash: float = 0.0
    window: Mapping[str, float] = field(default_factory=dict)
    tilt: Mapping[str, float] = field(default_factory=dict)
    warmth: Mapping[str, float] = field(default_factory=dict)
    drift: tuple[float, ...] = ()
    noise: Mapping[str, Noise] = field(default_factory=dict)


def draw_errors(
    plan: Campaign,
    rng: np.random.Generator,
    noise: Mapping[str, Noise] | None = None,
    *,
    passes: Sequence[Pass | PlannedPass] | None = None,
) -> Errors:
    """Draw what is uncertain from normal distributions of the stated standard uncertainties.

    Parameters
    ----------
    plan : Campaign
        Its planned passes, stage and flip references.
    rng : numpy.random.Generator
        Source of chance.
    noise : mapping of str to Noise, optional
        Passed on: true noise by the integrator's name.
    passes : sequence of Pass or PlannedPass, optional
        Passes that the drifts are drawn for; the planned ones if left out.

    Returns
    -------
    Errors
        A drift whose uncertainty is not stated keeps its expected rate.

    Examples
    --------
    >>> import numpy as np
    >>> from fieldmap.readings.passes import Axis, Campaign, Magnet
    >>> from fieldmap.readings.probe import Stage
    >>> axis = Axis("z", (-0.5, 0.5), (-0.1, 0.1))
    >>> plan = Campaign("plan", Magnet("dipole", "By", gap=0.03), axis, Stage(u_lag=2e-3))
    >>> errors = draw_errors(plan, np.random.default_rng(1))
    >>> errors.offset, bool(abs(errors.lag) < 1e-2)
    (0.0, True)
    """
    passes = plan.planned if passes is None else passes
    probes = [one.probe for one in passes]
    probes += [ref.probe for ref in plan.references if isinstance(ref, FlipReference)]
    by_name = {probe.name: probe for probe in probes}
    stage = plan.stage
    probes = [by_name[name] for name in sorted(by_name)]
    errors = Errors(
        gain={probe.name: probe.u_gain * rng.standard_normal() for probe in probes},
        scale=stage.u_scale * rng.standard_normal(),
        offset=stage.u_offset * rng.standard_normal(),
        lag=stage.u_lag * rng.standard_normal(),
        backlash=stage.u_backlash * rng.standard_normal(),
        drift=tuple(_drift(one.integrator, rng) for one in passes),
        noise=dict(noise or {}),
    )
    # drawn last and only where stated, so that a seed keeps what it drew of all the others
    return replace(
        errors,
        window=_drawn({p.name: p.u_window for p in probes if isinstance(p, Coil)}, rng),
        tilt=_drawn({p.name: p.u_tilt for p in probes}, rng),
        warmth=_drawn({p.name: p.u_temperature for p in probes}, rng),
    )


def _drawn(stated: Mapping[str, float], rng: np.random.Generator) -> dict[str, float]:
    """A normal deviate for every standard uncertainty that is not zero."""
    return {name: u * rng.standard_normal() for name, u in stated.items() if u > 0}


def noise_of(planned: Pass | PlannedPass, errors: Errors) -> Noise:
    """True noise of a pass: that of the errors, else what its integrator states.

    Raises
    ------
    InputError
        If neither says.
    """
    integrator = planned.integrator
    if integrator.name in errors.noise:
        return errors.noise[integrator.name]
    if integrator.walk_noise is None or (
        integrator.read_noise is None and planned.record != "voltage"
    ):
        raise InputError(
            f"{planned.name}, integrator {integrator.name!r}",
            "no walk_noise or no read_noise",
            "a true noise to simulate with",
            f"give the errors noise={{{integrator.name!r}: Noise(walk, read)}}",
        )
    return Noise(integrator.walk_noise, integrator.read_noise or 0.0)


def _drift(integrator: Integrator, rng: np.random.Generator) -> float:
    """Drift rate of one pass, V s/s."""
    return integrator.drift + (integrator.u_drift or 0.0) * rng.standard_normal()
