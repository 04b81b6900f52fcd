"""The cells of a file as they stand, before it is known where headings are."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace

from leachkin.files.numerals import DecimalMark
from leachkin.files.sheet import Sheet, SheetRow, build_sheet
from leachkin.problems import Problem


@dataclass(frozen=True)
class Grid:
    """The cells of a CSV file or of one sheet of a workbook.

    Attributes
    ----------
    file : str
        Name to show, with ``#Sheet`` for a workbook.
    rows : tuple of SheetRow
        Rows that hold anything, with their numbers in the file; they may differ in length.
    decimal : "." or ","
        Decimal mark of the numbers in the cells.
    problems : tuple of Problem
        What was noticed while reading.
    content : bytes
        The file as it was, for its SHA-256.
    whole_rows : bool
        True where a row with fewer cells than headings is worth a question.
    """

    file: str
    rows: tuple[SheetRow, ...]
    decimal: DecimalMark = "."
    problems: tuple[Problem, ...] = ()
    content: bytes = field(default=b"", repr=False)
    whole_rows: bool = False

    @property
    def tab(self) -> str:
        """Name of the sheet in its workbook, "" for a CSV file."""
        return self.file.partition("#")[2]

    def as_sheet(self) -> Sheet:
        """Return the table that these cells are, the first row that holds anything on top."""
        sheet = build_sheet(self.file, self.rows, self.content, self.problems, self.whole_rows)
        return replace(sheet, decimal=self.decimal)


def grid_of(
    file: str,
    records: Iterable[tuple[int, Sequence[str]]],
    content: bytes,
    problems: Sequence[Problem] = (),
    *,
    decimal: DecimalMark = ".",
    whole_rows: bool = False,
) -> Grid:
    """Return the grid of numbered records, empty rows left out and spaces trimmed."""
    rows = []
    for number, cells in records:
        stripped = tuple([cell.strip() for cell in cells])
        if any(stripped):
            rows.append(SheetRow(number, stripped))
    return Grid(file, tuple(rows), decimal, tuple(problems), content, whole_rows)
