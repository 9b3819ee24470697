"""The report of a map: one page that needs nothing else."""

from fieldmap.show.report.page import report_html, report_of, save_report

__all__ = ["report_html", "report_of", "save_report"]
