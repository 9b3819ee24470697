"""From a map to results, findings and verdicts."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.errors import InputError
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.map import (
    map_axis,
    map_findings,
    map_limits,
    map_lines,
    map_magnet,
    map_title,
)
from fieldmap.magnet.length import length_results
from fieldmap.magnet.results import LineResults, Results
from fieldmap.magnet.shape import shape_results
from fieldmap.magnet.verdict import decide

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.readings.passes import Axis, Campaign, Limit, Magnet

__all__ = ["evaluate"]


def evaluate(
    fmap: xr.Dataset, campaign: Campaign | None = None, *, axis: Axis | None = None, k: float = 2.0
) -> Results:
    """Evaluate a map: results with uncertainties, findings, verdicts.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    campaign : Campaign, optional
        Names limits of the integral, flat window and tolerances; those kept in the map if not
        given.
    axis : Axis, optional
        Other limits and flat window than the campaign's.
    k : float
        Coverage factor of the verdicts' interval.

    Returns
    -------
    Results

    Raises
    ------
    RefusedError
        Limits or flat window outside the mapped range.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> campaign = fieldmap.load(demo_folder() / "slot" / "campaign.toml")
    >>> results = fieldmap.evaluate(fieldmap.stitch(campaign), campaign)
    >>> results["integrated_field"].unit
    'T m'
    """
    axis = axis or (campaign.axis if campaign else map_axis(fmap))
    limits = campaign.limits if campaign else map_limits(fmap)
    lines = tuple(
        LineResults(line.x, line.y, {**length_results(line, axis), **shape_results(line, axis)})
        for line in map_lines(fmap)
    )
    name, sha256 = map_title(fmap)
    return Results(
        campaign=name,
        sha256=sha256,
        lines=lines,
        findings=(*map_findings(fmap), *_remarks(lines, map_magnet(fmap))),
        verdicts=tuple(
            decide(limit, line.results[limit.result], index, k)
            for limit in _known(limits, lines)
            for index, line in enumerate(lines)
        ),
    )


def _known(limits: Sequence[Limit], lines: Sequence[LineResults]) -> Sequence[Limit]:
    """Refuse a limit on a result that this map does not give."""
    for i, limit in enumerate(limits, start=1):
        for line in lines:
            if limit.result not in line.results:
                raise InputError(
                    f"[[limits]] {i}",
                    f"result '{limit.result}', which this map does not give",
                    f"one of {', '.join(line.results)}",
                    "judge another result",
                )
    return limits


def _remarks(lines: Sequence[LineResults], magnet: Magnet) -> list[Finding]:
    """Plausibility of the results; never a verdict."""
    found = []
    for line in lines:
        length = line.results.get("magnetic_length")
        if length is None:
            found.append(
                Finding(
                    "no-central-field",
                    "warn",
                    "[axis] flat",
                    "the mean field in the flat window is not distinct from zero, so no magnetic "
                    "length is given; move the window to where the field is flat.",
                )
            )
        elif magnet.kind == "dipole" and magnet.iron_length is not None:
            excess = (length.value - magnet.iron_length) / magnet.gap
            if not 0 < excess < 2:
                found.append(
                    Finding(
                        "length-implausible",
                        "warn",
                        "[magnet] iron_length",
                        f"the magnetic length is the iron length {excess:+.2f} gaps, where about "
                        "+1 gap is usual for a gap dipole; check units, window and iron length.",
                    )
                )
    return found
