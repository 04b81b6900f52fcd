"""Reading a CSV file: encoding, separator and decimal mark are found and said, never guessed at."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Sequence
from pathlib import Path

from leachkin.errors import InputProblems
from leachkin.files.decimal_marks import Marks, settle_marks
from leachkin.files.grid import Grid, grid_of
from leachkin.files.paths import file_bytes
from leachkin.files.sheet import Sheet
from leachkin.files.text import decode_text
from leachkin.problems import Problem

#: Semicolon and tab first: where a file fits two separators, a comma is more often a decimal mark.
SEPARATORS = (";", "\t", "|", ",")
_ONE_TABLE = 0.5  #: share of rows as wide as the headings, below which a file is no one table
_SAID_SEPARATOR = re.compile(r"sep=(.)[ \t]*(?=\r?\n)", re.IGNORECASE)
_GROUPED_BY_POINT = re.compile(r"[0-9]\.[0-9]{3}[.,][0-9]")
_GROUPED = re.compile("[0-9][ \u00a0\u2009\u202f'\u2019][0-9]{3}(?![0-9])")


def read_csv(path: str | Path, name: str = "", decimal_mark: str | None = None) -> Sheet:
    """Read a CSV file as a table.

    Parameters
    ----------
    path, name, decimal_mark
        As :func:`read_csv_grid`.

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
    return read_csv_grid(path, name, decimal_mark).as_sheet()


def read_csv_grid(path: str | Path, name: str = "", decimal_mark: str | None = None) -> Grid:
    """Read the cells of a CSV file.

    Parameters
    ----------
    path : str or Path
        Text in UTF-8, UTF-16 or a Western code page; separated by commas, semicolons, tabs or
        bars.
    name : str
        Name to show in messages; the file name by default.
    decimal_mark : "." or ",", optional
        What the user says it is, where the file does not tell.

    Returns
    -------
    Grid

    Raises
    ------
    InputProblems
        If the file is not there, or not text.
    """
    path = Path(path)
    shown = name or path.name
    content = file_bytes(path, shown)
    text, problems = decode_text(content, shown)
    said = _SAID_SEPARATOR.match(text)
    separator = said.group(1) if said else _separator(text)
    text = text[said.end() :] if said else text
    records = _records(text, separator, shown)
    marks = Marks(".", records, [])
    if _may_have_marks(text, separator) or decimal_mark is not None:
        marks = settle_marks(shown, records, separator, decimal_mark)
    return grid_of(
        shown,
        marks.rows,
        content,
        [*problems, *marks.problems],
        decimal=marks.decimal,
        whole_rows=True,
    )


def _may_have_marks(text: str, separator: str) -> bool:
    """Whether a cell can hold a comma or a grouped number (then every cell is looked at)."""
    commas = "," in text if separator != "," else '"' in text
    return commas or _GROUPED.search(text) is not None or _GROUPED_BY_POINT.search(text) is not None


def _separator(text: str) -> str:
    """The separator with which most of the first rows are as wide as the headings."""
    sample = [line for line in text.splitlines()[:400] if line.strip()][:200]
    best, best_score = ",", (0.0, 0)
    several: dict[str, tuple[int, int]] = {}
    for separator in SEPARATORS:
        widths = [len(record) for record in csv.reader(sample, delimiter=separator) if record]
        wide = [width for width in widths if width > 1]
        several[separator] = (len(wide), sum(wide))
        if not wide or widths[0] < 2:
            continue
        same = sum(width == widths[0] for width in widths) / len(widths)
        if (score := (round(same, 2), widths[0])) > best_score:
            best, best_score = separator, score
    if best_score[0] < _ONE_TABLE:  # no one table: the separator that parts most rows
        best = max(SEPARATORS, key=lambda separator: several[separator])
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
