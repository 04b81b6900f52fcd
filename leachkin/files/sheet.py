"""A table as it stands in a file: headings, and rows of text with their row numbers."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace

from leachkin.files.numerals import ERROR_CODES, DecimalMark
from leachkin.problems import Problem


@dataclass(frozen=True, slots=True)
class SheetRow:
    """One row: its number in the file (the first is 1) and the text of its cells."""

    number: int
    cells: tuple[str, ...]


@dataclass(frozen=True)
class Sheet:
    """A table as it stands in a file.

    Attributes
    ----------
    file : str
        Name to show, with ``#Sheet`` for a workbook.
    header : tuple of str
        Column headings, spaces trimmed.
    header_row : int
        Row number of the headings.
    rows : tuple of SheetRow
        Rows that hold anything, each with one cell a heading.
    decimal : "." or ","
        Decimal mark of the numbers in the cells.
    problems : tuple of Problem
        What was noticed while reading.
    content : bytes
        The file as it was, for its SHA-256.
    """

    file: str
    header: tuple[str, ...]
    header_row: int
    rows: tuple[SheetRow, ...]
    decimal: DecimalMark = "."
    problems: tuple[Problem, ...] = ()
    content: bytes = field(default=b"", repr=False)

    def column(self, heading: str) -> list[str]:
        """Return the cells of a column as text.

        Raises
        ------
        ValueError
            If there is no such heading.
        """
        position = self.header.index(heading)
        return [row.cells[position] for row in self.rows]


def build_sheet(
    file: str,
    records: Iterable[tuple[int, Sequence[str]]],
    content: bytes,
    problems: Sequence[Problem] = (),
    whole_rows: bool = False,
) -> Sheet:
    """Make a sheet of numbered records: the first that holds anything has the headings.

    Parameters
    ----------
    file : str
    records : iterable of (row number, cells)
    content : bytes
    problems : sequence of Problem
        Problems noticed so far.
    whole_rows : bool
        Ask about rows with fewer cells than headings (a workbook keeps no empty cells, so that
        there they mean nothing).

    Returns
    -------
    Sheet
        Without rows, and with a stop, where there is nothing under the headings.
    """
    listed = list(records)
    filled = [(n, trimmed) for n, cells in listed if (trimmed := _trimmed(cells))]
    found = list(problems)
    if not filled:
        found.append(Problem(file, None, "", "stop", "the file is empty", "headings and rows"))
        return Sheet(file, (), 1, (), problems=tuple(found), content=content)
    header_row, header = filled[0][0], tuple(" ".join(cell.split()) for cell in filled[0][1])
    found.extend(_heading_problems(file, header, header_row))
    rows, row_problems = _rows(file, len(header), filled[1:])
    found.extend(row_problems)
    if whole_rows:
        kept = {row.number for row in rows}
        short = [n for n, cells in listed if n in kept and len(cells) < len(header)]
        found.extend(_short_rows(file, short))
    if not rows:
        found.append(
            Problem(
                file,
                header_row,
                "",
                "stop",
                "there are headings and no rows under them",
                "at least one row",
                "fill in a row, or leave the table out of the settings",
            )
        )
    sheet = Sheet(file, header, header_row, rows, content=content)
    sheet = _without_unnamed_columns(sheet, found)
    found.extend(_error_codes(sheet))
    return replace(sheet, problems=tuple(found))


def _trimmed(cells: Sequence[str]) -> tuple[str, ...]:
    """Cells without spaces around them and without the empty ones at the end."""
    stripped = [cell.strip() for cell in cells]
    while stripped and not stripped[-1]:
        stripped.pop()
    return tuple(stripped)


def _heading_problems(file: str, header: tuple[str, ...], row: int) -> list[Problem]:
    seen: dict[str, int] = {}
    found = []
    for position, heading in enumerate(header, start=1):
        folded = heading.casefold()
        if heading and folded in seen:
            found.append(
                Problem(
                    file,
                    row,
                    heading,
                    "stop",
                    f"columns {seen[folded]} and {position} have the same heading",
                    "each heading once",
                    "rename or remove one of them",
                )
            )
        seen.setdefault(folded, position)
    return found


def _rows(
    file: str, width: int, filled: list[tuple[int, tuple[str, ...]]]
) -> tuple[tuple[SheetRow, ...], list[Problem]]:
    rows, long = [], []
    for number, cells in filled:
        if len(cells) > width:
            long.append((number, len(cells)))
        rows.append(SheetRow(number, cells[:width] + ("",) * (width - len(cells))))
    problems = [
        Problem(
            file,
            number,
            "",
            "stop",
            f"the row has {count} cells under {width} headings",
            f"at most {width} cells",
            "look for a separator inside a number or a remark (put such a cell in double quotes)",
        )
        for number, count in long
    ]
    return tuple(rows), problems


def _short_rows(file: str, short: list[int]) -> list[Problem]:
    if not short:
        return []
    others = f", as have {len(short) - 1} more" if len(short) > 1 else ""
    return [
        Problem(
            file,
            short[0],
            "",
            "ask",
            f"the row has fewer cells than there are headings{others}; read as blank at the end",
            "one cell a heading, blank or not",
            "add the missing separators",
        )
    ]


def _without_unnamed_columns(sheet: Sheet, found: list[Problem]) -> Sheet:
    unnamed = [i for i, heading in enumerate(sheet.header) if not heading]
    if not unnamed:
        return sheet
    for i in unnamed:
        row = next((row for row in sheet.rows if row.cells[i]), None)
        if row is not None:
            found.append(
                Problem(
                    sheet.file,
                    row.number,
                    "",
                    "stop",
                    f"column {i + 1} has {row.cells[i]!r} in it and no heading",
                    "a heading for each column in use",
                    "give it a heading, or one that begins with 'note' to keep it out",
                )
            )
    keep = [i for i, heading in enumerate(sheet.header) if heading]
    rows = tuple(SheetRow(r.number, tuple(r.cells[i] for i in keep)) for r in sheet.rows)
    return replace(sheet, header=tuple(sheet.header[i] for i in keep), rows=rows)


def _error_codes(sheet: Sheet) -> list[Problem]:
    return [
        Problem(
            sheet.file,
            row.number,
            sheet.header[i],
            "stop",
            f"{cell} stands where a formula failed",
            "a number or an empty cell",
            "repair the formula in the workbook and save it again",
        )
        for row in sheet.rows
        for i, cell in enumerate(row.cells)
        if cell and cell[0] == "#" and cell.upper() in ERROR_CODES
    ]
