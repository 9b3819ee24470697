"""Faults that were found, in sentences: what, where, by how much, what to do."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from fieldmap.estimate.findings.finding import Finding
from fieldmap.readings.corrections import Correction

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.findings.scan.suspects import Suspect
    from fieldmap.readings.passes import Pass

__all__ = ["suspect_finding"]

TEN_FOLD = 0.1  # how far the logarithm of a factor may be from a whole number
TURNED = 0.3  # how far a factor may be from -1
ROOM = 0.5  # of a correction, as its standard uncertainty: the passes then find it


def suspect_finding(suspect: Suspect, passes: Sequence[Pass]) -> Finding:
    """The finding of one fault.

    Parameters
    ----------
    suspect : Suspect
        What was found.
    passes : sequence of Pass
        Of the line.

    Returns
    -------
    Finding
    """
    one = passes[suspect.passes[0]]
    match suspect.kind:
        case "factor":
            return _factor(suspect, one)
        case "shift":
            return _shift(suspect, one)
        case "step":
            return _step(suspect, one)
        case "lag" | "backlash":
            return _directions(suspect)
        case "window" | "gain":
            return _probe(suspect, one)
    return _within(suspect, one)


def _warn(
    code: str, where: str, suspect: Suspect, text: str, correction: Correction | None = None
) -> Finding:
    """A warning with the number that triggered it."""
    found, remedy = text.split(" | ")
    return Finding(code, "warn", where, f"{found} ({suspect.rareness}); {remedy}.", correction)


def _factor(suspect: Suspect, one: Pass) -> Finding:
    """A reversed polarity, a power of ten, or some other factor."""
    factor = 1 + suspect.amount
    size = abs(factor) or 1.0
    tens = round(math.log10(size))
    near_ten = tens != 0 and abs(math.log10(size) - tens) < TEN_FOLD
    if near_ten:
        turned = "reversed and " if factor < 0 else ""
        text = (
            f"its flux is {turned}10^{tens} times what the other passes and references give "
            f"(factor {factor:.4g}) | check the unit of its flux column and its polarity"
        )
        undone = Correction("factor", one.name, math.copysign(10.0**-tens, factor))
        return _warn("power-of-ten", one.name, suspect, text, undone)
    if abs(factor + 1) < TURNED:
        text = (
            "its flux has the opposite sign of what the other passes and references give "
            f"(factor {factor:.4g}) | check how the probe was connected and mounted, and "
            "polarity in its [probes] entry"
        )
        return _warn("polarity-reversed", one.name, suspect, text, Correction("polarity", one.name))
    text = (
        f"its flux is {factor:.6g} times (u = {suspect.u:.2g}) what the other passes and "
        "references give | check that the right probe is named, its turns or area, the "
        "temperature, and that the magnet stood at the same current"
    )
    value = 1 / factor if abs(factor) > 1e-3 else 1.0
    undone = Correction("factor", one.name, _short(value), _short(ROOM * abs(value - 1)))
    return _warn("pass-factor", one.name, suspect, text, undone)


def _shift(suspect: Suspect, one: Pass) -> Finding:
    text = (
        f"it lies as if its positions were {suspect.amount * 1e3:.3g} mm too small "
        f"(u = {suspect.u * 1e3:.2g} mm) beside the other passes | check its start position, lost "
        "encoder counts, the trigger's lag and the play of the stage"
    )
    size = suspect.amount
    undone = Correction("shift", one.name, _short(size), _short(ROOM * abs(size)))
    return _warn("pass-shifted", one.name, suspect, text, undone)


def _step(suspect: Suspect, one: Pass) -> Finding:
    text = (
        f"the flux jumps by {suspect.amount:.3g} V s (u = {suspect.u:.2g} V s) {_at(suspect, one)} "
        "| check cables, the integrator's range and lost increments there"
    )
    start = 0.5 * float(one.time[suspect.reading - 1] + one.time[suspect.reading])
    return _warn("flux-step", one.name, suspect, text, Correction("step", one.name, start=start))


def _directions(suspect: Suspect) -> Finding:
    """Forward and backward passes that disagree."""
    size, unit = (
        (1e3 * suspect.amount, "ms")
        if suspect.kind == "lag"
        else (
            1e3 * suspect.amount,
            "mm",
        )
    )
    key = "u_lag" if suspect.kind == "lag" else "u_backlash"
    text = (
        f"passes of different speed or direction disagree as with a {suspect.kind} of {size:.3g} "
        f"{unit} | state {key} in [stage] with at least that, so that the passes may find it"
    )
    return _warn("directions-disagree", "[stage]", suspect, text)


def _probe(suspect: Suspect, one: Pass) -> Finding:
    name = one.probe.name
    if suspect.kind == "window":
        text = (
            f"its passes ask for a window {1 + suspect.amount:.5g} times the stated one "
            f"(u = {suspect.u:.2g}) | check window and shape, or state u_window"
        )
        return _warn("window-contradicted", name, suspect, text)
    text = (
        f"its passes read {1 + suspect.amount:.6g} times (u = {suspect.u:.2g}) what other probes "
        "and references give | check its turns, area or length, or state their uncertainty"
    )
    return _warn("probes-disagree", name, suspect, text)


def _within(suspect: Suspect, one: Pass) -> Finding:
    """What changes or goes wrong in the course of a pass."""
    amount, u, at = suspect.amount, suspect.u, _at(suspect, one)
    match suspect.kind:
        case "stretch":
            code = "pass-stretched"
            text = (
                f"its positions are {amount * 1e6:.4g} parts in 1e6 (u = {u * 1e6:.2g}) too short "
                "beside the other passes | check its encoder's counts per length"
            )
        case "factor drifts":
            code = "gain-drifts"
            text = (
                f"its flux grows by {2 * amount:.3g} of itself (u = {2 * u:.2g}) from start to end "
                "beside the other passes | check the probe's temperature and the magnet's current"
            )
        case "factor changes":
            code = "range-changed"
            text = (
                f"from {at[3:]} on, its flux changes {1 + amount:.5g} times (u = {u:.2g}) as much "
                "as the other passes say | check the integrator's range and the magnet's current "
                "there"
            )
        case "position slips":
            code = "position-slips"
            text = (
                f"from {at[3:]} on, its positions are {amount * 1e3:.3g} mm (u = {u * 1e3:.2g} mm) "
                "too small | look for lost encoder counts or a slipping coupling; take the pass "
                "again"
            )
        case "drift bends":
            code = "drift-bends"
            text = (
                f"the integrator's drift bends by {amount:.3g} V s (u = {u:.2g} V s) within the "
                "pass | let it warm up, adjust it, and take shorter passes there and back"
            )
        case _:
            code = "drift-follows-temperature"
            text = (
                f"the flux follows the recorded temperature by {amount:.3g} V s/K (u = {u:.2g}) | "
                "keep the integrator at an even temperature"
            )
    return _warn(code, one.name, suspect, text)


def _at(suspect: Suspect, one: Pass) -> str:
    """Time and position of the first wrong reading."""
    time, place = float(one.time[suspect.reading]), float(one.position[suspect.reading])
    return f"at {time:.6g} s, {place * 1e3:.6g} mm"


def _short(value: float) -> float:
    """Enough digits to start from."""
    return float(f"{abs(value):.4g}") * (1 if value >= 0 else -1)
