"""A fitted line on its way into a map."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from fieldmap.estimate.findings import Finding
    from fieldmap.estimate.fit import LineFit

__all__ = ["MappedLine"]


@dataclass(frozen=True, eq=False)
class MappedLine:
    """One fitted line with its place (m), its remarks, and the numbers of its references."""

    x: float
    y: float
    low: float
    high: float
    fit: LineFit
    findings: tuple[Finding, ...]
    references: tuple[int, ...] = ()
