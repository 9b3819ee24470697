"""From a map to results, findings and verdicts."""

from __future__ import annotations

from itertools import chain
from types import MappingProxyType
from typing import TYPE_CHECKING, Final

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
from fieldmap.magnet.fringe.findings import line_fringes
from fieldmap.magnet.functionals import line_functionals
from fieldmap.magnet.results import LineResults, Results
from fieldmap.magnet.tails.findings import tail_findings
from fieldmap.magnet.verdict import decide

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Axis, Campaign, Limit, Magnet

__all__ = ["evaluate"]

WITHHELD: Final[Mapping[str, tuple[str, ...]]] = MappingProxyType(
    {
        "magnetic_length": ("no-central-field",),
        "boundary_in": ("no-central-field",),
        "boundary_out": ("no-central-field",),
        "magnetic_centre": ("no-central-field",),
        "tail_in": ("no-central-field", "tail-not-converging"),
        "tail_out": ("no-central-field", "tail-not-converging"),
        "integrated_field_total": ("no-central-field", "tail-not-converging"),
        "fringe_integral_in": ("no-central-field",),
        "fringe_integral_out": ("no-central-field",),
    }
)
"""Results that are not always given, and the findings that say why they are not."""


def evaluate(
    fmap: xr.Dataset,
    campaign: Campaign | None = None,
    *,
    axis: Axis | None = None,
    k: float = 2.0,
    fringe: bool = True,
    profiles: Sequence[FieldLine] | None = None,
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
        Coverage factor of the verdicts' interval, where a limit names none of its own.
    fringe : bool
        Whether to fit the fringes as well: some tenths of a second a line.
    profiles : sequence of FieldLine, optional
        The lines of this very map from `map_lines`, to evaluate it again and again.

    Returns
    -------
    Results

    Raises
    ------
    RefusedError
        Limits or flat window outside the mapped range.
    InputError
        A limit on a result that the map does not give; the sentence says why, where a finding
        does.

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
    magnet = map_magnet(fmap)
    profiles = map_lines(fmap) if profiles is None else profiles
    shapes = [line_fringes(fmap, axis, i) if fringe else ({}, []) for i in range(len(profiles))]
    lines = tuple(
        LineResults(line.x, line.y, {**line_functionals(line, axis, magnet.gap)}, fringes)
        for line, (fringes, _) in zip(profiles, shapes, strict=True)
    )
    tails = (
        tail_findings(profile, axis, magnet.gap, line.results, limits)
        for profile, line in zip(profiles, lines, strict=True)
    )
    name, sha256 = map_title(fmap)
    remarks = chain(*tails, *(remarks for _, remarks in shapes))
    findings = (*map_findings(fmap), *_remarks(lines, magnet), *remarks)
    return Results(
        campaign=name,
        sha256=sha256,
        lines=lines,
        findings=findings,
        verdicts=tuple(
            decide(limit, line.results[limit.result], index, k)
            for limit in _known(limits, lines, findings)
            for index, line in enumerate(lines)
        ),
    )


def _known(
    limits: Sequence[Limit], lines: Sequence[LineResults], findings: Sequence[Finding]
) -> Sequence[Limit]:
    """Refuse a limit on a result that this map does not give, with the reason if one is known."""
    for i, limit in enumerate(limits, start=1):
        for line in lines:
            if limit.result not in line.results:
                raise InputError(
                    f"[[limits]] {i}",
                    f"result '{limit.result}', which {_why_not(limit.result, findings)}",
                    f"one of {', '.join(line.results)}",
                    "judge another result",
                )
    return limits


def _why_not(result: str, findings: Sequence[Finding]) -> str:
    """Why a result is not given, as the end of a sentence."""
    codes = WITHHELD.get(result, ())
    reasons = [one.text.rstrip(".") for one in findings if one.code in codes]
    if not reasons:
        return "this map does not give"
    return f"is withheld here ({reasons[0]})"


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
