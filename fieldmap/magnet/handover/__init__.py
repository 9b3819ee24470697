"""A map handed over as a plain table, on or off its axis."""

from fieldmap.magnet.handover.export import export_table
from fieldmap.magnet.handover.exported import ExportedTable

__all__ = ["ExportedTable", "export_table"]
