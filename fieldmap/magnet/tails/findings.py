"""Remarks on the tails: cut off too early for what is asked, or without an integral at all."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

from fieldmap.estimate.findings import Finding
from fieldmap.magnet.tails.tail import SIDES, MapEnd, map_end

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis, Limit

__all__ = ["required_uncertainty", "tail_findings"]

COVERAGE: Final = 2.0
SHARE_OF_TOLERANCE: Final = 0.25  # of its half width: what a tail may take of a tolerance
WHERE: Final = "[axis] integrate"
NAMES: Final = {"in": "lower", "out": "upper"}


def tail_findings(
    line: FieldLine,
    axis: Axis,
    gap: float,
    results: Mapping[str, Quantity],
    limits: Sequence[Limit] = (),
) -> list[Finding]:
    """Remarks on the two ends of one line.

    Parameters
    ----------
    line : FieldLine
        The line.
    axis : Axis
        Limits of the integral and flat window.
    gap : float
        Full gap or bore, m.
    results : mapping of str to Quantity
        Results of the line.
    limits : sequence of Limit
        Tolerances: they say how much of a tail matters.

    Returns
    -------
    list of Finding
        ``tail-not-converging`` for an end that has no tail, ``tail-cut-off`` for one whose tail
        matters; none where there is no central field.
    """
    if "magnetic_length" not in results:
        return []
    found = []
    for side in SIDES:
        tail = results.get(f"tail_{side}")
        if tail is None:
            found.append(_not_converging(map_end(line, axis, gap, side)))
        elif abs(tail.value) > COVERAGE * tail.u:
            required, asked = required_uncertainty(results, limits)
            if abs(tail.value) > required:
                end = map_end(line, axis, gap, side)
                found.append(_cut_off(end, tail, results, required, asked=asked))
    return found


def required_uncertainty(
    results: Mapping[str, Quantity], limits: Sequence[Limit]
) -> tuple[float, bool]:
    """Expanded uncertainty that the integral should have, T m, and whether a tolerance asks it.

    Parameters
    ----------
    results : mapping of str to Quantity
        Results of the line.
    limits : sequence of Limit
        Two-sided limits of the integrated field, of the total and of the magnetic length count.

    Returns
    -------
    required : float
        A quarter of the narrowest half width; the expanded uncertainty of the integrated field
        where no limit tells.
    asked : bool
        Whether a limit tells.

    Examples
    --------
    >>> from fieldmap.magnet.quantity import Quantity
    >>> from fieldmap.readings.passes import Limit
    >>> results = {"integrated_field": Quantity(0.2, 1e-5, "T m")}
    >>> required_uncertainty(results, [Limit("integrated_field", 0.1996, 0.2004)])
    (0.0001, True)
    """
    integral = results["integrated_field"]
    asked = []
    for limit in limits:
        if limit.lower is None or limit.upper is None:
            continue
        half = (limit.upper - limit.lower) / 2
        if limit.result in ("integrated_field", "integrated_field_total"):
            asked.append(half)
        elif limit.result == "magnetic_length":
            asked.append(abs(integral.value) * half / abs(results["magnetic_length"].value))
    if asked:
        return round(SHARE_OF_TOLERANCE * min(asked), 15), True
    return COVERAGE * integral.u, False


def _cut_off(
    end: MapEnd,
    tail: Quantity,
    results: Mapping[str, Quantity],
    required: float,
    *,
    asked: bool,
) -> Finding:
    integral = results["integrated_field"].value
    measure = "a quarter of the tolerance" if asked else "the integral's own U"
    text = (
        f"beyond the {NAMES[end.side]} limit lie about {tail.value:.3g} T m (U = "
        f"{COVERAGE * tail.u:.2g} T m), {abs(tail.value / integral):.2%} of the integral, more "
        f"than {measure} ({required:.2g} T m); integrated_field leaves this tail out, "
        "integrated_field_total includes it where both tails are known; "
        f"{_remedy(end, tail, required)}."
    )
    return Finding("tail-cut-off", "warn" if asked else "note", WHERE, text)


def _remedy(end: MapEnd, tail: Quantity, required: float) -> str:
    if COVERAGE * tail.u <= required:
        return "its uncertainty is small enough, so use the total"
    reach = end.decay.reach(required / COVERAGE)
    if reach <= end.decay.distance:
        return "its uncertainty comes from noise: measure this end longer, or nearer to zero field"
    at = end.middle + end.direction * reach
    return f"scan to about {at * 1e3:.0f} mm to have its uncertainty below that, too"


def _not_converging(end: MapEnd) -> Finding:
    decay = end.decay
    how = f"falls only as the power {decay.boundary_power:.1f} of the distance from the boundary"
    if decay.power <= 0:
        how = "does not fall any more" if abs(decay.field) < 1 / 3 else "is that of the inside yet"
    text = (
        f"at {end.position * 1e3:.0f} mm, where the map ends, the field is {decay.field:.2%} of "
        f"the central field and {how}, so the integral beyond the {NAMES[end.side]} limit cannot "
        f"be estimated: tail_{end.side} and integrated_field_total are not given, the integral "
        "between the limits is; scan further out until the field falls off, subtract a background "
        f"field, or name the tail as tail_{end.side} under [axis]."
    )
    return Finding("tail-not-converging", "warn", WHERE, text)
