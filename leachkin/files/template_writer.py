"""Workbooks to fill in: headings with notes, example rows marked as such, lists to choose from."""

from __future__ import annotations

import io
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from leachkin.files.workbook_writer import without_clock

_LAST_ROW = 2000  #: of the rows that have lists to choose from
_LONGEST_LIST = 255  #: characters of a list inside a workbook
_WIDEST = 60


@dataclass(frozen=True)
class TemplateSheet:
    """One sheet of a workbook to fill in.

    Attributes
    ----------
    name : str
    headings : tuple of str
    rows : tuple of rows
        Cells below the headings; text, numbers or None.
    examples : int
        How many of the first rows are examples, shown in grey italics.
    notes : mapping of heading to str
        Shown when the mouse rests on the heading.
    choices : mapping of heading to tuple of str
        Lists to choose from, for every row of a column.
    cell_choices : mapping of (row, column) to tuple of str
        Lists for single cells; rows below the headings are counted from 0.
    strict : bool
        False where something else than the list may be typed.
    """

    name: str
    headings: tuple[str, ...]
    rows: tuple[Sequence[Any], ...] = ()
    examples: int = 0
    notes: Mapping[str, str] = field(default_factory=dict)
    choices: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    cell_choices: Mapping[tuple[int, int], tuple[str, ...]] = field(default_factory=dict)
    strict: bool = True


def write_template(sheets: Iterable[TemplateSheet], path: str | Path) -> None:
    """Write a workbook to fill in.

    Parameters
    ----------
    sheets : iterable of TemplateSheet
        At least one.
    path : str or Path
    """
    from openpyxl import Workbook

    book = Workbook()
    book.remove(book.worksheets[0])
    for sheet in sheets:
        _add(book, sheet)
    buffer = io.BytesIO()
    book.save(buffer)
    Path(path).write_bytes(without_clock(buffer.getvalue()))


def _add(book: Any, sheet: TemplateSheet) -> None:
    from openpyxl.styles import Font, PatternFill
    from openpyxl.utils import get_column_letter

    made = book.create_sheet(sheet.name)
    made.append(list(sheet.headings))
    for row in sheet.rows:
        made.append(list(row))
    for cell in made[1]:
        cell.font = Font(bold=True)
        cell.fill = PatternFill("solid", fgColor="DDE6EE")
        _note(cell, sheet.notes.get(str(cell.value), ""))
    grey = Font(italic=True, color="808080")
    for row in made.iter_rows(min_row=2, max_row=1 + sheet.examples):
        for cell in row:
            cell.font = grey
    made.freeze_panes = "A2"
    for position in range(1, len(sheet.headings) + 1):
        cells = [row[position - 1] for row in (sheet.headings, *sheet.rows) if len(row) >= position]
        longest = max(len(str(cell)) for cell in cells if cell is not None)
        width = min(max(longest + 2, 10), _WIDEST)
        made.column_dimensions[get_column_letter(position)].width = width
    _lists(made, sheet)


def _note(cell: Any, text: str) -> None:
    from openpyxl.comments import Comment

    if text:
        cell.comment = Comment(text, "leachkin", width=320, height=90)


def _lists(made: Any, sheet: TemplateSheet) -> None:
    from openpyxl.utils import get_column_letter

    for heading, choices in sheet.choices.items():
        letter = get_column_letter(sheet.headings.index(heading) + 1)
        _list(made, f"{letter}2:{letter}{_LAST_ROW}", choices, sheet.strict)
    for (row, column), choices in sheet.cell_choices.items():
        _list(made, f"{get_column_letter(column + 1)}{row + 2}", choices, sheet.strict)


def _list(made: Any, where: str, choices: tuple[str, ...], strict: bool) -> None:
    from openpyxl.worksheet.datavalidation import DataValidation

    listed = ",".join(choices)
    if len(listed) > _LONGEST_LIST or any("," in choice for choice in choices):
        return
    validation = DataValidation(type="list", formula1=f'"{listed}"', allow_blank=True)
    validation.showErrorMessage = strict
    validation.error = f"one of: {listed}"
    validation.errorTitle = "not in the list"
    made.add_data_validation(validation)
    validation.add(where)
