"""All that was evaluated from a map: results of its lines, findings, verdicts."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from fieldmap.estimate.findings import Finding
    from fieldmap.magnet.fringe.fitted import Fringe
    from fieldmap.magnet.quantity import Quantity
    from fieldmap.magnet.verdict import Verdict

__all__ = ["LineResults", "Results"]


@dataclass(frozen=True)
class LineResults:
    """Results of one line.

    Parameters
    ----------
    x, y : float
        Transverse position, m.
    results : dict of str to Quantity
        By the keys of the design: ``integrated_field``, ``central_field``, …
    fringes : dict of str to Fringe
        ``fringe_in``, ``fringe_out``, where they could be fitted.
    """

    x: float
    y: float
    results: dict[str, Quantity]
    fringes: dict[str, Fringe] = field(default_factory=dict)


@dataclass(frozen=True)
class Results:
    """All that was evaluated from a map.

    Parameters
    ----------
    campaign : str
        Name of the campaign.
    sha256 : str
        Hash of the campaign file.
    lines : tuple of LineResults
        One entry a line.
    findings : tuple of Finding
        Remarks.
    verdicts : tuple of Verdict
        Decisions against the limits.

    Notes
    -----
    ``results["magnetic_length"]`` is a short cut to the first line.
    """

    campaign: str
    sha256: str
    lines: tuple[LineResults, ...]
    findings: tuple[Finding, ...] = ()
    verdicts: tuple[Verdict, ...] = ()

    def __getitem__(self, key: str) -> Quantity:
        return self.lines[0].results[key]

    def as_dict(self) -> dict[str, Any]:
        """The content of results.json."""
        return {
            "format": "fieldmap-results/1",
            "campaign": {"name": self.campaign, "sha256": self.sha256},
            "lines": [
                {
                    "x": line.x,
                    "y": line.y,
                    "results": {
                        key: one.as_dict() for key, one in (line.results | line.fringes).items()
                    },
                }
                for line in self.lines
            ],
            "findings": [finding.as_dict() for finding in self.findings],
            "verdicts": [verdict.as_dict() for verdict in self.verdicts],
        }
