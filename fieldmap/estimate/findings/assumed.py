"""What a campaign takes on trust: faults that none of its data could reveal, whatever was read."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.estimate.findings.finding import Finding
from fieldmap.readings.passes import FlipReference, PointReference

if TYPE_CHECKING:
    from fieldmap.readings.passes import Campaign, Pass, PlannedPass

__all__ = ["ASSUMED", "assumed_findings", "assumptions"]

ASSUMED = "assumed"


def assumptions(campaign: Campaign) -> tuple[str, ...]:
    """Sentences on what no reading of a campaign can check, each with what would check it.

    Parameters
    ----------
    campaign : Campaign
        Measured or planned.

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> from fieldmap.readings import Axis, Campaign, Magnet, Wire, make_pass
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> one = make_pass([0.0, 0.1, 0.2], [0.0, 1.0, 3.0], rate=1.0, probe=wire)
    >>> axis, magnet = Axis("z", (0.0, 0.2), (0.05, 0.1)), Magnet("other", "B", 0.05)
    >>> for sentence in assumptions(Campaign("trial", magnet, axis, passes=(one,))):
    ...     print(sentence.partition(":")[0])
    all positions are in the right unit and to the right scale
    the size and angle of 'wire' are as stated
    flux is in the right unit and of the right sign
    the one pass ran without a fault that a smooth field could explain
    """
    scale = (
        "all positions are in the right unit and to the right scale: every pass stretches alike; "
        "only another length standard tells."
    )
    said = [scale]
    passes: list[Pass | PlannedPass] = [*campaign.passes, *campaign.planned]
    names = list(dict.fromkeys(one.probe.name for one in passes))
    absolute = any(isinstance(ref, PointReference) for ref in campaign.references)
    flipped = any(isinstance(ref, FlipReference) for ref in campaign.references)
    if len(names) == 1 and not absolute:
        said.append(
            f"the size and angle of '{names[0]}' are as stated: every field of the map is off by "
            "the same share if not; a second probe or a reading of another magnetometer tells."
        )
    if not (absolute or flipped):
        said.append(
            "flux is in the right unit and of the right sign: a factor common to all passes is a "
            "factor of the field; a reading of another magnetometer, or a flip, tells."
        )
    if len(passes) == 1:
        said.append(
            "the one pass ran without a fault that a smooth field could explain: its gain, its "
            "drift and its positions; a pass back tells."
        )
    return tuple(said)


def assumed_findings(campaign: Campaign) -> list[Finding]:
    """The same as notes, so that they stand in the map, in results.json and in the report."""
    return [
        Finding(ASSUMED, "note", "", f"Assumed: {sentence}") for sentence in assumptions(campaign)
    ]
