"""Writing tables as a workbook: numbers as numbers, text never as a formula, no clock in it."""

from __future__ import annotations

import io
import re
import zipfile
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from leachkin.files.write import check_finite
from leachkin.result_table import ResultTable

_LONGEST_NAME = 31
_MOST_ROWS = 1_048_576
_FORBIDDEN_IN_NAME = re.compile(r"[\[\]:*?/\\]")
_ILLEGAL = re.compile(r"[\x00-\x08\x0b\x0c\x0e-\x1f\ufffe\uffff]")
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
_TIMESTAMP = re.compile(rb"(<dcterms:(created|modified)[^>]*>)[^<]*(<)")
_EPOCH = (1980, 1, 1, 0, 0, 0)  # the earliest date a zip archive can hold


def write_xlsx(tables: Iterable[ResultTable], path: str | Path) -> None:
    """Write tables as the sheets of one workbook.

    Headings are bold and stay in view. Text is written as text whatever it begins with, so that
    nothing a user typed becomes a live formula.

    Parameters
    ----------
    tables : iterable of ResultTable
        At least one.
    path : str or Path

    Raises
    ------
    ValueError
        If there is no table, a cell is NaN or infinite, or a table has too many rows for a sheet.
    """
    from openpyxl import Workbook

    listed = list(tables)
    if not listed:
        raise ValueError("a workbook needs at least one table")
    for table in listed:
        if len(table.rows) >= _MOST_ROWS:
            raise ValueError(f"table {table.name!r} has {len(table.rows)} rows; write it as CSV")
        for row in table.rows:
            check_finite(table, row)
    book = Workbook(write_only=True)
    names: set[str] = set()
    for table in listed:
        _add_sheet(book, table, _sheet_name(table.name, names))
    buffer = io.BytesIO()
    book.save(buffer)
    Path(path).write_bytes(without_clock(buffer.getvalue()))


def _sheet_name(name: str, taken: set[str]) -> str:
    base = _FORBIDDEN_IN_NAME.sub(" ", _ILLEGAL.sub("", name)).strip("' ") or "table"
    candidate, number = base[:_LONGEST_NAME], 2
    while candidate.casefold() in taken:
        ending = f" {number}"
        candidate = base[: _LONGEST_NAME - len(ending)] + ending
        number += 1
    taken.add(candidate.casefold())
    return candidate


def _add_sheet(book: Any, table: ResultTable, name: str) -> None:
    from openpyxl.utils import get_column_letter

    sheet = book.create_sheet(name)
    sheet.freeze_panes = "A2"
    for position, width in enumerate(_widths(table), start=1):
        sheet.column_dimensions[get_column_letter(position)].width = width
    sheet.append([_text_cell(sheet, column.title, bold=True) for column in table.columns])
    for row in table.rows:
        sheet.append([_cell(sheet, value) for value in row])


def _widths(table: ResultTable) -> list[int]:
    """Column widths in characters, from the heading and the first rows."""
    widths = []
    for position, column in enumerate(table.columns):
        cells = [row[position] for row in table.rows[:200]]
        longest = max([len(column.title), *(len(str(c)) for c in cells if isinstance(c, str))])
        widths.append(min(max(longest + 2, 8), 60))
    return widths


def _cell(sheet: Any, value: Any) -> Any:
    if isinstance(value, str):
        return _text_cell(sheet, value)
    return value


def _text_cell(sheet: Any, text: str, bold: bool = False) -> Any:
    from openpyxl.cell import WriteOnlyCell
    from openpyxl.styles import Font

    clean = _ILLEGAL.sub("\ufffd", text)
    if not bold and not clean.startswith(_FORMULA_STARTS):
        return clean
    cell = WriteOnlyCell(sheet, value=clean)
    cell.data_type = "s"  # openpyxl would make a formula of a leading "="
    cell.quotePrefix = clean.startswith(_FORMULA_STARTS)
    if bold:
        cell.font = Font(bold=True)
    return cell


def without_clock(content: bytes) -> bytes:
    """Return the same archive with fixed dates, so that the same tables give the same file."""
    packed = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(packed, "w") as new:
        for entry in old.infolist():
            part = old.read(entry)
            if entry.filename == "docProps/core.xml":
                part = _TIMESTAMP.sub(rb"\g<1>1980-01-01T00:00:00Z\g<3>", part)
            info = zipfile.ZipInfo(entry.filename, date_time=_EPOCH)
            info.compress_type = zipfile.ZIP_DEFLATED
            new.writestr(info, part)
    return packed.getvalue()
