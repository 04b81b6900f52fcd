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
    form : str
        What it was made of where it is not a plain table, as "bench sheet"; "" for a plain one.
    """

    file: str
    header: tuple[str, ...]
    header_row: int
    rows: tuple[SheetRow, ...]
    decimal: DecimalMark = "."
    problems: tuple[Problem, ...] = ()
    content: bytes = field(default=b"", repr=False)
    form: str = ""

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
    rows: Sequence[SheetRow],
    content: bytes,
    problems: Sequence[Problem] = (),
    whole_rows: bool = False,
) -> Sheet:
    """Make a sheet of rows that hold anything: the first one has the headings.

    Parameters
    ----------
    file : str
    rows : sequence of SheetRow
        Cells without spaces around them.
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
    found = list(problems)
    if not rows:
        found.append(Problem(file, None, "", "stop", "the file is empty", "headings and rows"))
        return Sheet(file, (), 1, (), problems=tuple(found), content=content)
    header_row = rows[0].number
    header = tuple(" ".join(cell.split()) for cell in without_empty_end(rows[0].cells))
    found.extend(_heading_problems(file, header, header_row))
    kept, row_problems = _rows(file, len(header), rows[1:], whole_rows)
    found.extend(row_problems)
    if not kept:
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
    sheet = Sheet(file, header, header_row, kept, content=content)
    found.extend(failed_formulas(file, kept, header))
    sheet = _without_unnamed_columns(sheet, found)
    return replace(sheet, problems=tuple(found))


def without_empty_end(cells: Sequence[str]) -> tuple[str, ...]:
    """Return cells without the empty ones at the end.

    Examples
    --------
    >>> without_empty_end(["a", "", "b", ""])
    ('a', '', 'b')
    """
    end = len(cells)
    while end and not cells[end - 1]:
        end -= 1
    return tuple(cells[:end])


def column_letters(position: int) -> str:
    """Return what a spreadsheet calls a column, the first being 0.

    Examples
    --------
    >>> column_letters(0), column_letters(27)
    ('A', 'AB')
    """
    letters, rest = "", position + 1
    while rest:
        rest, digit = divmod(rest - 1, 26)
        letters = chr(ord("A") + digit) + letters
    return letters


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
    file: str, width: int, filled: Sequence[SheetRow], whole_rows: bool
) -> tuple[tuple[SheetRow, ...], list[Problem]]:
    rows: list[SheetRow] = []
    long: list[tuple[int, int]] = []
    short: list[int] = []
    for row in filled:
        count = len(row.cells)
        if count == width:
            rows.append(row)
            continue
        if count < width:
            short.append(row.number)
        elif len(trimmed := without_empty_end(row.cells)) > width:
            long.append((row.number, len(trimmed)))
        cells = row.cells[:width] + ("",) * (width - count)
        if any(cells):
            rows.append(SheetRow(row.number, cells))
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
    return tuple(rows), [*problems, *(_short_rows(file, short) if whole_rows else [])]


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


def failed_formulas(
    file: str, rows: Iterable[SheetRow], header: Sequence[str] = ()
) -> list[Problem]:
    """Return a stop for each cell where a formula failed, by its name in a spreadsheet."""
    return [
        Problem(
            file,
            row.number,
            header[i] if i < len(header) else column_letters(i),
            "stop",
            f"{cell} stands where a formula failed, in cell {column_letters(i)}{row.number}",
            "a number or an empty cell",
            "repair the formula in the workbook and save it again",
        )
        for row in rows
        for i, cell in enumerate(row.cells)
        if cell and cell[0] == "#" and cell.upper() in ERROR_CODES
    ]
