"""Which field explains the readings: Campaign to map."""

from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.map import map_axis, map_findings, map_lines, map_passes
from fieldmap.estimate.stitch import reconstruct, stitch

__all__ = [
    "FieldLine",
    "Finding",
    "map_axis",
    "map_findings",
    "map_lines",
    "map_passes",
    "reconstruct",
    "stitch",
]
