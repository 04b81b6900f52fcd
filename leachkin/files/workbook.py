"""Reading a sheet of a workbook, its values as a person sees them."""

from __future__ import annotations

import io
import re
import zipfile
from collections.abc import Iterator, Sequence
from datetime import date, datetime, time
from pathlib import Path
from typing import Any

from leachkin.errors import InputProblems
from leachkin.files.csv_sheet import read_csv_grid
from leachkin.files.decimal_marks import Marks, Row, settle_marks
from leachkin.files.grid import Grid, grid_of
from leachkin.files.paths import check_path_text, file_bytes
from leachkin.files.sheet import Sheet
from leachkin.problems import Problem, unknown_name

WORKBOOK_ENDINGS = (".xlsx", ".xlsm", ".xltx", ".xltm")
#: A workbook that unpacks to more is refused before it is unpacked.
LARGEST_UNPACKED_BYTES = 1_000_000_000
_OLD_WORKBOOK = b"\xd0\xcf\x11\xe0"
_COMMA_NUMBER = re.compile(
    r"[<>~=\u2264\u2265\s]*[+\-\u2212]?(?:[0-9]+,[0-9]*|,[0-9]+)(?:[eE][+-]?[0-9]+)?\s*%?"
)
_HIDDEN = re.compile(rb"<row [^>]*hidden=\"(?:1|true)\"[^>]*>")
_ROW = re.compile(rb" r=\"([0-9]+)\"")
_PERCENT_FORMAT = re.compile(rb'formatCode="[^"]*%|numFmtId="(?:9|10)"')


def read_sheet(text: str, base_dir: str | Path = ".", decimal_mark: str | None = None) -> Sheet:
    """Read a table named as in a settings file.

    Parameters
    ----------
    text, base_dir, decimal_mark
        As :func:`read_grid`.

    Returns
    -------
    Sheet

    Raises
    ------
    InputProblems
        As :func:`read_grid`.
    """
    return read_grid(text, base_dir, decimal_mark).as_sheet()


def read_grid(text: str, base_dir: str | Path = ".", decimal_mark: str | None = None) -> Grid:
    """Read the cells of a file named as in a settings file.

    Parameters
    ----------
    text : str
        ``"sheets/readings.csv"`` or ``"book.xlsx#Readings"``; forward slashes.
    base_dir : str or Path
        Folder that a relative path starts from.
    decimal_mark : "." or ",", optional
        What the user says it is, where the file does not tell.

    Returns
    -------
    Grid

    Raises
    ------
    InputProblems
        As :func:`read_csv` and :func:`read_xlsx_sheet`, and for a path that may not be used.
    """
    checked = check_path_text(text)
    path_text, mark, sheet = checked.partition("#")
    if path_text.lower().endswith(WORKBOOK_ENDINGS):
        return read_xlsx_grid(Path(base_dir) / path_text, sheet or None, path_text, decimal_mark)
    if path_text.lower().endswith(".xls") and (mark or not (Path(base_dir) / checked).exists()):
        raise InputProblems([_old_workbook(path_text)])
    return read_csv_grid(Path(base_dir) / checked, checked, decimal_mark)


def sheet_names(path: str | Path) -> list[str]:
    """Return the names of the sheets of a workbook.

    Raises
    ------
    InputProblems
        If it cannot be read.
    """
    path = Path(path)
    book = _opened(file_bytes(path, path.name), path.name, data_only=True)
    try:
        return list(book.sheetnames)
    finally:
        book.close()


def read_xlsx_sheet(
    path: str | Path, sheet: str | None = None, name: str = "", decimal_mark: str | None = None
) -> Sheet:
    """Read one sheet of a workbook as a table.

    Parameters
    ----------
    path, sheet, name, decimal_mark
        As :func:`read_xlsx_grid`.

    Returns
    -------
    Sheet
        Numbers as text with a decimal point; a cell in a per cent format with its ``%``; dates in
        ISO form. A formula that was never calculated is a stop in ``problems``, by cell.

    Raises
    ------
    InputProblems
        As :func:`read_xlsx_grid`.
    """
    return read_xlsx_grid(path, sheet, name, decimal_mark).as_sheet()


def read_xlsx_grid(
    path: str | Path, sheet: str | None = None, name: str = "", decimal_mark: str | None = None
) -> Grid:
    """Read the cells of one sheet of a workbook.

    Parameters
    ----------
    path : str or Path
        An ``.xlsx`` or ``.xlsm`` workbook; macros are not run.
    sheet : str or None
        Its name; None where the workbook has only one.
    name : str
        Name of the file to show in messages; the file name by default.
    decimal_mark : "." or ",", optional
        Of numbers that stand as text.

    Returns
    -------
    Grid

    Raises
    ------
    InputProblems
        If it is not there, not a workbook, has a password, or has no such sheet.
    """
    path = Path(path)
    shown = name or path.name
    content = file_bytes(path, shown)
    _check_container(content, shown)
    book = _opened(content, shown, data_only=True)
    try:
        chosen = _chosen_sheet(book, sheet, shown)
        percent = _any_part(content, "xl/styles.xml", _PERCENT_FORMAT)
        return _grid(book, chosen, shown, content, percent, decimal_mark)
    finally:
        book.close()


def read_workbook(path: str | Path, name: str = "", decimal_mark: str | None = None) -> list[Grid]:
    """Read every sheet of a workbook that holds anything, in order.

    Parameters
    ----------
    path, name, decimal_mark
        As :func:`read_xlsx_grid`.

    Returns
    -------
    list of Grid

    Raises
    ------
    InputProblems
        As :func:`read_xlsx_grid`.
    """
    path = Path(path)
    shown = name or path.name
    content = file_bytes(path, shown)
    _check_container(content, shown)
    book = _opened(content, shown, data_only=True)
    try:
        percent = _any_part(content, "xl/styles.xml", _PERCENT_FORMAT)
        names = [worksheet.title for worksheet in book.worksheets]
        grids = [_grid(book, n, shown, content, percent, decimal_mark) for n in names]
    finally:
        book.close()
    return [grid for grid in grids if grid.rows]


def _grid(
    book: Any, sheet: str, shown: str, content: bytes, percent: bool, decimal_mark: str | None
) -> Grid:
    """One sheet: numbers that stand as text are written with a decimal point."""
    file = f"{shown}#{sheet}"
    try:
        typed = list(_records(book[sheet], percent))
    except Exception:  # a damaged part raises almost anything; the user hears one message
        raise _not_a_workbook(shown) from None
    texts: list[Row] = [(n, [c if is_text else "" for c, is_text in cells]) for n, cells in typed]
    records: list[tuple[int, Sequence[str]]] = [(n, [c for c, _ in cells]) for n, cells in typed]
    problems = _uncalculated(content, shown, sheet, records)
    problems += _hidden_rows(book[sheet], content, file)
    if any(re.search(r"[0-9][,. \u00a0\u202f'][0-9]", c) for _, cells in texts for c in cells):
        marks = settle_marks(file, texts, "", decimal_mark)
        problems += marks.problems
        records = _put_back(records, texts, marks)
    return grid_of(file, records, content, problems)


def _put_back(
    records: list[tuple[int, Sequence[str]]], texts: list[Row], marks: Marks
) -> list[tuple[int, Sequence[str]]]:
    """The records with numbers that stand as text written with a decimal point."""
    changed: list[tuple[int, Sequence[str]]] = []
    for (number, cells), (_, before), (_, after) in zip(records, texts, marks.rows, strict=True):
        new = list(cells)
        for i, (old, cell) in enumerate(zip(before, after, strict=True)):
            if marks.decimal == "," and _COMMA_NUMBER.fullmatch(cell.strip()):
                new[i] = cell.replace(",", ".")
            elif cell != old:
                new[i] = cell
        changed.append((number, new))
    return changed


def _hidden_rows(worksheet: Any, content: bytes, file: str) -> list[Problem]:
    """A note on hidden rows: they are read like the others."""
    part = str(getattr(worksheet, "_worksheet_path", "")).lstrip("/")
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            text = archive.read(part)
    except KeyError:
        return []
    rows = [int(match.group(1)) for tag in _HIDDEN.findall(text) if (match := _ROW.search(tag))]
    if not rows:
        return []
    listed = ", ".join(str(row) for row in rows[:8]) + (" ..." if len(rows) > 8 else "")
    what = "row is" if len(rows) == 1 else "rows are"
    found = f"{len(rows)} hidden {what} read like the others: {listed}"
    return [Problem(file, rows[0], "", "note", found, "", "delete rows that are not to be used")]


def _old_workbook(shown: str) -> Problem:
    return Problem(
        shown,
        None,
        "",
        "stop",
        "this is an old .xls workbook or one with a password",
        ".xlsx without a password, or CSV UTF-8",
        "open it, remove the password, and save it as .xlsx",
    )


def _check_container(content: bytes, shown: str) -> None:
    if content.startswith(_OLD_WORKBOOK):
        raise InputProblems([_old_workbook(shown)])
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            unpacked = sum(entry.file_size for entry in archive.infolist())
            unsafe = unpacked > LARGEST_UNPACKED_BYTES or _declares_entities(archive)
    except (zipfile.BadZipFile, OSError, RuntimeError, NotImplementedError):
        raise _not_a_workbook(shown) from None
    if unsafe:
        found = f"the workbook unpacks to {unpacked // 1_000_000} MB or defines its own entities"
        allowed = f"at most {LARGEST_UNPACKED_BYTES // 1_000_000} MB, as a spreadsheet saves it"
        raise InputProblems(
            [Problem(shown, None, "", "stop", found, allowed, "save the sheet alone")]
        )


def _declares_entities(archive: zipfile.ZipFile) -> bool:
    for entry in archive.infolist():
        if entry.filename.endswith((".xml", ".rels")):
            with archive.open(entry) as part:
                if b"<!DOCTYPE" in part.read(4096):
                    return True
    return False


def _not_a_workbook(shown: str) -> InputProblems:
    problem = Problem(
        shown,
        None,
        "",
        "stop",
        "this is not a workbook, or it is damaged",
        "an .xlsx workbook",
        "open it in a spreadsheet program and save it again as .xlsx",
    )
    return InputProblems([problem])


def _opened(content: bytes, shown: str, *, data_only: bool) -> Any:
    import warnings

    import openpyxl

    if content.startswith(_OLD_WORKBOOK):
        raise InputProblems([_old_workbook(shown)])
    try:
        with warnings.catch_warnings():  # what openpyxl does not keep is nothing that is read here
            warnings.simplefilter("ignore")
            return openpyxl.load_workbook(
                io.BytesIO(content), read_only=True, data_only=data_only, keep_links=False
            )
    except Exception:  # a damaged part raises almost anything; the user hears one message
        raise _not_a_workbook(shown) from None


def _chosen_sheet(book: Any, sheet: str | None, shown: str) -> str:
    names = [worksheet.title for worksheet in book.worksheets]
    if sheet is not None:
        if sheet in names:
            return sheet
        raise InputProblems([unknown_name("sheet", sheet, names, file=shown)])
    if len(names) == 1:
        return str(names[0])
    problem = Problem(
        shown,
        None,
        "",
        "stop",
        f"the workbook has {len(names)} sheets and none is named",
        ", ".join(names),
        f'write "{shown}#{names[0]}"' if names else "add a sheet",
    )
    raise InputProblems([problem])


def _records(worksheet: Any, percent: bool) -> Iterator[tuple[int, list[tuple[str, bool]]]]:
    """Row numbers with the text of each cell, and whether it stands as text in the workbook."""
    worksheet.reset_dimensions()  # some programs write a wrong extent
    if not percent:
        for number, values in enumerate(worksheet.iter_rows(values_only=True), start=1):
            yield number, [(_as_text(value), isinstance(value, str)) for value in values]
        return
    for number, cells in enumerate(worksheet.iter_rows(), start=1):
        yield number, [(_as_seen(cell), isinstance(cell.value, str)) for cell in cells]


def _as_seen(cell: Any) -> str:
    number = isinstance(cell.value, int | float) and not isinstance(cell.value, bool)
    if number and "%" in (cell.number_format or ""):
        return f"{float(f'{100.0 * cell.value:.15g}')!r} %"
    return _as_text(cell.value)


def _as_text(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return value
    if isinstance(value, bool):
        return "TRUE" if value else "FALSE"
    if isinstance(value, float):
        return str(int(value)) if value.is_integer() and abs(value) < 1e15 else repr(value)
    if isinstance(value, datetime):
        return value.isoformat(sep=" ")
    if isinstance(value, date | time):
        return value.isoformat()
    return str(value)


def _any_part(content: bytes, prefix: str, pattern: re.Pattern[bytes]) -> bool:
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        return any(
            pattern.search(archive.read(entry)) is not None
            for entry in archive.infolist()
            if entry.filename.startswith(prefix)
        )


def _uncalculated(
    content: bytes, shown: str, sheet: str, records: list[tuple[int, Sequence[str]]]
) -> list[Problem]:
    """Formulas of a sheet that hold no value, because no program calculated them."""
    if not _any_part(content, "xl/worksheets/", re.compile(rb"<f[ >]")):
        return []
    values = dict(records)
    book = _opened(content, shown, data_only=False)
    try:
        return [
            _uncalculated_problem(f"{shown}#{sheet}", cell)
            for row in book[sheet].iter_rows()
            for cell in row
            if getattr(cell, "data_type", "") == "f"
            and not _cell(values.get(cell.row, ()), cell.column - 1)
        ]
    finally:
        book.close()


def _cell(cells: Sequence[str], position: int) -> str:
    return cells[position] if position < len(cells) else ""


def _uncalculated_problem(file: str, cell: Any) -> Problem:
    return Problem(
        file,
        cell.row,
        cell.column_letter,
        "stop",
        f"cell {cell.coordinate} has a formula without a stored value",
        "a number or an empty cell",
        "open the workbook in a spreadsheet program, let it calculate, and save it",
    )
