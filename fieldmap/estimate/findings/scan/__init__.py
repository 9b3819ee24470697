"""Tests of the readings against the fitted field: single faults first, then what is left."""

from fieldmap.estimate.findings.scan.leftover import colour
from fieldmap.estimate.findings.scan.report import scan_findings
from fieldmap.estimate.findings.scan.suspects import faulty

__all__ = ["colour", "faulty", "scan_findings"]
