"""What is uncertain on a bench, with the values it truly has there."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from fieldmap.errors import InputError
from fieldmap.readings.passes import FlipReference

if TYPE_CHECKING:
    from collections.abc import Mapping

    import numpy as np

    from fieldmap.readings.passes import Campaign, PlannedPass
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
    drift: tuple[float, ...] = ()
    noise: Mapping[str, Noise] = field(default_factory=dict)


def draw_errors(
    plan: Campaign, rng: np.random.Generator, noise: Mapping[str, Noise] | None = None
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
    probes = [planned.probe for planned in plan.planned]
    probes += [ref.probe for ref in plan.references if isinstance(ref, FlipReference)]
    by_name = {probe.name: probe for probe in probes}
    stage = plan.stage
    return Errors(
        gain={name: by_name[name].u_gain * rng.standard_normal() for name in sorted(by_name)},
        scale=stage.u_scale * rng.standard_normal(),
        offset=stage.u_offset * rng.standard_normal(),
        lag=stage.u_lag * rng.standard_normal(),
        backlash=stage.u_backlash * rng.standard_normal(),
        drift=tuple(_drift(planned.integrator, rng) for planned in plan.planned),
        noise=dict(noise or {}),
    )


def noise_of(planned: PlannedPass, errors: Errors) -> Noise:
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
