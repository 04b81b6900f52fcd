"""The report: tables as text, figures, the page, and the folder that holds them.

The only part that knows matplotlib and HTML.
"""

from __future__ import annotations

from leachkin.report.first_page import worst_assumptions
from leachkin.report.fit_tables import arrhenius_table, straightened_table
from leachkin.report.numbers import format_number
from leachkin.report.read import read_results
from leachkin.report.render import render_table
from leachkin.report.sections import for_people, stage_tables
from leachkin.report.write import check_out, write_report

__all__ = [
    "arrhenius_table",
    "check_out",
    "for_people",
    "format_number",
    "read_results",
    "render_table",
    "stage_tables",
    "straightened_table",
    "worst_assumptions",
    "write_report",
]
