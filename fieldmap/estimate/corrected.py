"""Passes with their corrections made: what is exact goes into the arrays, before any fit.

What is uncertain of a correction (how far a factor, a lag or a shift is known, the size of a
step) is an unknown of the pass; see `fieldmap.estimate.parameters`.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from fieldmap.readings.corrections import check_correction, check_once, left_in

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.corrections import Correction
    from fieldmap.readings.passes import Floats, Pass

__all__ = ["corrected_passes", "integrator_scale", "reached", "scale_of", "step_name", "step_times"]

ENDING = 5  # readings that the speed beyond the ends of a pass is taken from
UNIT_SLIP = 1e-9  # how near to a whole power of ten a factor lies that is one


def corrected_passes(passes: Sequence[Pass], corrections: Sequence[Correction]) -> tuple[Pass, ...]:
    """Make corrections in the arrays of the passes they name.

    Parameters
    ----------
    passes : sequence of Pass
        Of different names.
    corrections : sequence of Correction
        One of a kind for each pass; any number of steps and spikes.

    Returns
    -------
    tuple of Pass
        Each with the corrections that its arrays contain. A correction that a pass has already is
        not made twice.

    Raises
    ------
    InputError
        A correction that fits no pass.
    """
    named = {one.name: one for one in passes}
    for number, one in enumerate(corrections):
        where = f"correction '{one.kind}' of {one.where}"
        check_once(one, corrections[:number], where)
        if one.where not in named or one not in named[one.where].corrections:
            check_correction(one, named.get(one.where), where, tuple(named))
    return tuple(_corrected(one, [c for c in corrections if c.where == one.name]) for one in passes)


def _corrected(one: Pass, corrections: Sequence[Correction]) -> Pass:
    """One pass with its own corrections made: positions first, which need every reading."""
    corrections = [each for each in corrections if each not in one.corrections]
    if not corrections:
        return one
    position, flux = one.position, one.flux
    for each in corrections:
        if each.kind == "lag":
            position = reached(one.time, position, each.value)
        elif each.kind == "shift":
            position = position + each.value
        elif each.kind == "factor":
            flux = flux * each.value
        elif each.kind == "polarity":
            flux = -flux
    made = (*one.corrections, *corrections)
    moved = replace(one, position=position, flux=flux, corrections=made)
    return moved.only(left_in(one, corrections))


def reached(time: Floats, position: Floats, lag: float) -> Floats:
    """Recorded position a lag later, at the last speed beyond the ends, m.

    Parameters
    ----------
    time, position : (n,) arrays
        s and m.
    lag : float
        s.

    Returns
    -------
    (n,) array
    """
    late = np.interp(time + lag, time, position)
    for end, near in ((0, slice(0, ENDING)), (-1, slice(-ENDING, None))):
        lasted = time[near][-1] - time[near][0]
        speed = (position[near][-1] - position[near][0]) / lasted if lasted > 0 else 0.0
        over = time + lag - time[end]
        beyond = over < 0 if end == 0 else over > 0
        late = np.where(beyond, position[end] + speed * over, late)
    return np.asarray(late)


def integrator_scale(one: Pass) -> float:
    """Corrected flux of a pass over what its integrator integrated.

    A power of ten is a slip of units or range: what the campaign states of the integrator's noise
    and drift holds for the flux as corrected. Any other factor (turns, area) and a turned probe
    tell of the probe, and what the integrator added is multiplied with the rest.
    """
    return scale_of(one.corrections, one.name)


def scale_of(corrections: Sequence[Correction], where: str) -> float:
    """The same for the pass of a name, from the corrections that were made."""
    scale = 1.0
    for each in corrections:
        if each.where == where and each.kind == "polarity":
            scale = -scale
        elif each.where == where and each.kind == "factor":
            tens = math.log10(abs(each.value))
            slip = abs(tens - round(tens)) < UNIT_SLIP
            scale *= math.copysign(1.0, each.value) if slip else each.value
    return scale


def step_name(one: Correction, record: str) -> str | None:
    """Where the step of unknown size is that a correction leaves in the flux; None without one.

    Readings left out of increments or of voltages take their share of the flux with them, so what
    follows is displaced; a cumulative reading stands for itself.
    """
    steps = one.kind == "step" or (one.kind == "spikes" and record != "cumulative")
    return f"{one.where} at {one.start:.12g} s" if steps else None


def step_times(one: Pass) -> dict[str, float]:
    """Steps of unknown size in the flux of a pass: where each is, in words, and its time, s."""
    names = {step_name(each, one.record): each.start for each in one.corrections}
    return {name: at for name, at in names.items() if name is not None}
