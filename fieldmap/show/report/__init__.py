"""The report of a map: one page that needs nothing else."""

from fieldmap.show.report.besides import (
    comparison_section,
    confirmation_section,
    faults_section,
)
from fieldmap.show.report.page import report_html, report_of, save_report

__all__ = [
    "comparison_section",
    "confirmation_section",
    "faults_section",
    "report_html",
    "report_of",
    "save_report",
]
