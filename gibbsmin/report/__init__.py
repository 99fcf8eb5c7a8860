"""The report of a run: one HTML page that opens from disk, to explore the results and to review them.

A function from an outcome to a string. Nothing is loaded from a network; the same outcome gives the same
bytes; every text from outside is escaped.
"""

from __future__ import annotations

from gibbsmin.report.page import REPORT_FILE, report_html, write_report
from gibbsmin.report.study_page import StudyCase, study_report_html, study_results_html

__all__ = [
    "REPORT_FILE",
    "StudyCase",
    "report_html",
    "study_report_html",
    "study_results_html",
    "write_report",
]
