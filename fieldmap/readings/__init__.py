"""What was measured: campaign files and pass tables to a Campaign, all in SI units."""

from fieldmap.readings.campaign import load
from fieldmap.readings.corrections import Correction, corrected
from fieldmap.readings.layout import ColumnSpec, TableLayout
from fieldmap.readings.passes import (
    Axis,
    Campaign,
    FlipReference,
    Floats,
    Limit,
    Magnet,
    Pass,
    PlannedPass,
    PointReference,
    Record,
    Reference,
    ZeroReference,
)
from fieldmap.readings.probe import Coil, Integrator, Probe, Stage, Wire
from fieldmap.readings.records import make_pass
from fieldmap.readings.sections import RESULT_UNITS
from fieldmap.readings.tables import Table, TablePreview, preview_table, read_table

__all__ = [
    "RESULT_UNITS",
    "Axis",
    "Campaign",
    "Coil",
    "ColumnSpec",
    "Correction",
    "FlipReference",
    "Floats",
    "Integrator",
    "Limit",
    "Magnet",
    "Pass",
    "PlannedPass",
    "PointReference",
    "Probe",
    "Record",
    "Reference",
    "Stage",
    "Table",
    "TableLayout",
    "TablePreview",
    "Wire",
    "ZeroReference",
    "corrected",
    "load",
    "make_pass",
    "preview_table",
    "read_table",
]
