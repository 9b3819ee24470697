"""All that the raw readings say before anything is fitted."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.estimate.findings.clipping import clipping_findings
from fieldmap.estimate.findings.clock import clock_findings
from fieldmap.estimate.findings.copies import copy_findings
from fieldmap.estimate.findings.encoder import encoder_findings
from fieldmap.estimate.findings.pickup import pickup_findings
from fieldmap.estimate.findings.quantised import quantised_findings
from fieldmap.estimate.findings.ranges import range_findings
from fieldmap.estimate.findings.rows import row_findings
from fieldmap.estimate.findings.spikes import spike_findings
from fieldmap.estimate.findings.surroundings import surroundings_findings

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.findings.finding import Finding
    from fieldmap.readings.passes import Pass

__all__ = ["pass_findings"]


def pass_findings(passes: Sequence[Pass], nominal_current: float | None = None) -> list[Finding]:
    """Remarks that need no fit.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes, with all their readings.
    nominal_current : float, optional
        Current of the magnet that readings are referred to, A.

    Returns
    -------
    list of Finding
        Each once. What a correction that is switched on has mended is not offered again.

    Notes
    -----
    Tests that rest on chance (spikes, jumps in position, pick-up) raise a false alarm in one clean
    campaign of 20 000 each; the others rest on exact equality or on what is stated.
    """
    found = _found(passes, nominal_current)
    mended = {done.place for one in passes for done in one.corrections}
    told: list[Finding] = []
    for finding in dict.fromkeys(found):
        if finding.correction is not None:
            if finding.correction.place in mended:
                continue
            mended.add(finding.correction.place)  # one fault is told once, by who names it first
        told.append(finding)
    return told


def _found(passes: Sequence[Pass], nominal_current: float | None) -> list[Finding]:
    found = range_findings(passes)
    for one in passes:
        found += clipping_findings(one)
        found += clock_findings(one)
        found += row_findings(one)
    found += spike_findings(passes)
    found += encoder_findings(passes)
    found += quantised_findings(passes)
    found += copy_findings(passes)
    found += pickup_findings(passes)
    found += surroundings_findings(passes, nominal_current)
    return found
