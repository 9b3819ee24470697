"""What is said of the readings, in sentences with numbers."""

from fieldmap.estimate.findings.assumed import ASSUMED, assumed_findings
from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.line import line_findings
from fieldmap.estimate.findings.measured import pass_findings
from fieldmap.estimate.findings.switched import switched_findings

__all__ = [
    "ASSUMED",
    "Finding",
    "assumed_findings",
    "line_findings",
    "pass_findings",
    "switched_findings",
]
