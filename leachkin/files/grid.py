"""The cells of a file as they stand, before it is known where headings are."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
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
        titles = _title_rows(self.rows)
        problems = list(self.problems)
        if titles:
            text = next(cell for cell in self.rows[0].cells if cell)
            rows = ", ".join(str(row.number) for row in self.rows[:titles])
            found = f"row {rows} ({text!r}) above the headings is left out, as a title"
            problems.append(Problem(self.file, self.rows[0].number, "", "note", found))
        rows_left = self.rows[titles:]
        sheet = build_sheet(self.file, rows_left, self.content, problems, self.whole_rows)
        return replace(sheet, decimal=self.decimal)

    def with_cells(self, names: Mapping[str, str]) -> Grid:
        """Return the grid with cells that are one of these texts written as another.

        Parameters
        ----------
        names : mapping of folded text to text
            Folded as :func:`fold_cell` does.
        """
        if not names:
            return self
        rows = tuple(
            SheetRow(row.number, tuple(names.get(fold_cell(cell), cell) for cell in row.cells))
            for row in self.rows
        )
        return replace(self, rows=rows)


def fold_cell(text: str) -> str:
    """Return a text without case and with single spaces.

    Examples
    --------
    >>> fold_cell(" Cu_ICP  (ppm)")
    'cu_icp (ppm)'
    """
    return " ".join(text.casefold().split())


_MOST_TITLES = 8
_FEWEST_HEADINGS = 3


def _title_rows(rows: Sequence[SheetRow]) -> int:
    """How many rows with one filled cell stand above a row of headings."""
    for count, row in enumerate(rows[: _MOST_TITLES + 1]):
        filled = sum(1 for cell in row.cells if cell)
        if filled >= _FEWEST_HEADINGS:
            return count
        if filled != 1:
            return 0
    return 0


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
