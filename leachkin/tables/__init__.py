"""Numbers from print, as CSV files with a source and a status in every row, and their one reader.

This part may hold data and its reader only: no formula.
"""

from leachkin.tables.reader import STATUSES, Row, Table, read_table, source_citation, sources

__all__ = ["STATUSES", "Row", "Table", "read_table", "source_citation", "sources"]
