"""Reading a CSV file: encoding, separator and decimal mark are found and said, never guessed at."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from leachkin.errors import InputProblems
from leachkin.files.numerals import DecimalMark, marks_used
from leachkin.files.paths import file_bytes
from leachkin.files.sheet import Sheet, build_sheet
from leachkin.problems import Problem

#: Semicolon and tab first: where a file fits two separators, a comma is more often a decimal mark.
SEPARATORS = (";", "\t", ",")
SEPARATOR_NAMES = {";": "semicolon", "\t": "tab", ",": "comma"}
_FREE_TEXT = ("note", "remark", "comment")
_SIGNATURES = {
    b"PK\x03\x04": ("a workbook or a zip archive", 'name a sheet of it, as "book.xlsx#Sheet"'),
    b"\xd0\xcf\x11\xe0": ("an old .xls workbook or one with a password", "save it as CSV UTF-8"),
    b"%PDF": ("a PDF", "ask the laboratory for the numbers as CSV or XLSX"),
    b"\xff\xfe": ("UTF-16 text", "save it as CSV UTF-8"),
    b"\xfe\xff": ("UTF-16 text", "save it as CSV UTF-8"),
}


def read_csv(path: str | Path, name: str = "") -> Sheet:
    """Read a CSV file.

    Parameters
    ----------
    path : str or Path
        UTF-8 text, with a byte-order mark or without; separated by commas, semicolons or tabs;
        with decimal commas only where the separator is not a comma.
    name : str
        Name to show in messages; the file name by default.

    Returns
    -------
    Sheet
        Blank rows left out, row numbers as in the file. The decimal mark and what was noticed
        stand in ``decimal`` and ``problems``; a stop there means that the sheet is not whole.

    Raises
    ------
    InputProblems
        If the file is not there, not text, or not one table.
    """
    path = Path(path)
    shown = name or path.name
    content = file_bytes(path, shown)
    text = _decoded(content, shown)
    separator = _separator(text)
    sheet = build_sheet(shown, _records(text, separator, shown), content, whole_rows=True)
    return _with_decimal_mark(sheet, separator)


def _decoded(content: bytes, shown: str) -> str:
    for signature, (what, try_this) in _SIGNATURES.items():
        if content.startswith(signature):
            raise _not_text(shown, None, f"this is {what}, not a CSV file", try_this)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        row = content[: error.start].count(b"\n") + 1
        found = f"byte {error.start + 1} (0x{content[error.start]:02X}) is not UTF-8 text"
        try_this = "save it again as CSV UTF-8; it may have been saved in a Windows code page"
        raise _not_text(shown, row, found, try_this) from None
    for position, character in enumerate(text):
        if character < " " and character not in "\t\n\r\f":
            row = text[:position].count("\n") + 1
            found = f"character U+{ord(character):04X} does not belong in text"
            raise _not_text(shown, row, found, "name a CSV file; this looks like another kind")
    return text


def _not_text(shown: str, row: int | None, found: str, try_this: str) -> InputProblems:
    return InputProblems(
        [Problem(shown, row, "", "stop", found, "UTF-8 text with separators", try_this)]
    )


def _separator(text: str) -> str:
    """The separator with which most of the first rows are as wide as the headings."""
    sample = [line for line in text.splitlines()[:400] if line.strip()][:200]
    best, best_score = ",", (0.0, 0)
    for separator in SEPARATORS:
        widths = [len(record) for record in csv.reader(sample, delimiter=separator) if record]
        if not widths or widths[0] < 2:
            continue
        same = sum(width == widths[0] for width in widths) / len(widths)
        if (score := (round(same, 2), widths[0])) > best_score:
            best, best_score = separator, score
    return best


def _records(text: str, separator: str, shown: str) -> list[tuple[int, Sequence[str]]]:
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    records: list[tuple[int, Sequence[str]]] = []
    try:
        for number, cells in enumerate(reader, start=1):
            records.append((number, cells))
    except csv.Error:
        problem = Problem(
            shown,
            len(records) + 1,
            "",
            "stop",
            "a double quote opens a cell and is not closed as it should be",
            "double quotes in pairs round a cell, and doubled inside one",
            "look for inches written as a double quote in this row or below",
        )
        raise InputProblems([problem]) from None
    return records


def _with_decimal_mark(sheet: Sheet, separator: str) -> Sheet:
    marks = {
        heading: marks_used(row.cells[i] for row in sheet.rows)
        for i, heading in enumerate(sheet.header)
        if not heading.casefold().startswith(_FREE_TEXT)
    }
    kinds = {kind for used in marks.values() for kind in used}
    if separator == "," or not kinds & {"comma", "comma or thousands", "both"}:
        return sheet
    if "both" in kinds or "point" in kinds:
        return replace(sheet, problems=(*sheet.problems, _mixed_marks(sheet, marks)))
    return replace(
        sheet, decimal=_comma(), problems=(*sheet.problems, _comma_note(sheet, separator, kinds))
    )


def _comma() -> DecimalMark:
    return ","


def _mixed_marks(sheet: Sheet, marks: dict[str, dict[str, str]]) -> Problem:
    examples = []
    for kind in ("both", "comma", "comma or thousands", "point"):
        for i, heading in enumerate(sheet.header):
            if kind in marks.get(heading, {}):
                cell = marks[heading][kind]
                row = next(row.number for row in sheet.rows if row.cells[i] == cell)
                examples.append(f'{cell!r} in row {row}, column "{heading}"')
                break
    return Problem(
        sheet.file,
        None,
        "",
        "stop",
        f"decimal marks are mixed: {' and '.join(examples[:2])}",
        "one decimal mark in a file, and no thousands marks",
        "write all numbers with the same mark",
    )


def _comma_note(sheet: Sheet, separator: str, kinds: set[str]) -> Problem:
    found = f"read with {SEPARATOR_NAMES[separator]}s between cells and decimal commas"
    if "comma" in kinds:
        return Problem(sheet.file, None, "", "note", found)
    return Problem(
        sheet.file,
        None,
        "",
        "ask",
        f"{found}, but each comma has three digits after it and may be a thousands mark",
        "numbers without thousands marks",
        "write the numbers without commas, or one with another number of decimals",
    )
