"""Reads extraction against time where there is no bench sheet: one CSV, one row a time.

The time unit stands in the heading, as ``time (h)`` or ``time_min``; an extraction column holds
"extraction" or "conversion" in its heading, with the metal before it, and is a fraction unless
the heading says %, pct or percent.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from leachkin.errors import UnitError
from leachkin.files import Sheet, SheetRow, parse_numeral
from leachkin.problems import Problem, unit_problem
from leachkin.testwork import Observed, SizeDistribution, observed_from_extraction
from leachkin.units import convert, split_heading

_EXTRACTION_WORDS = ("extraction", "conversion", "leached", "dissolved")
_NAME_OF_METAL = {
    "gold": "Au",
    "silver": "Ag",
    "copper": "Cu",
    "zinc": "Zn",
    "nickel": "Ni",
    "cobalt": "Co",
    "uranium": "U",
}
_PERCENT_WORDS = ("pct", "percent", "%")
_TEXT_COLUMNS = {
    "test": "test",
    "test id": "test",
    "sample": "test",
    "domain": "domain",
    "ore": "domain",
}
_NUMBER_COLUMNS = {
    "time": ("time", "h"),
    "temperature": ("temperature", "K"),
    "size": ("size", "mm"),
    "crush": ("size", "mm"),
    "diameter": ("size", "mm"),
}


@dataclass(frozen=True)
class _Column:
    """What a column means: role, target unit, unit as written, metal."""

    position: int
    heading: str
    role: str
    target: str = ""
    spelling: str = ""
    metal: str = ""


def read_extraction_sheet(
    sheet: Sheet, relative_sd: float | None = None
) -> tuple[tuple[Observed, ...], tuple[Problem, ...]]:
    """Return one ``Observed`` for each test and metal of an extraction table.

    Parameters
    ----------
    sheet : Sheet
    relative_sd : float, optional
        Stated relative standard deviation of an extraction; without it the scatter of the fit
        itself gives the errors.

    Returns
    -------
    observed : tuple of Observed
    problems : tuple of Problem
    """
    columns, problems = _columns(sheet)
    problems += _missing(sheet, columns)
    if any(problem.level == "stop" for problem in problems):
        return (), tuple(problems)
    observed: list[Observed] = []
    for column in (c for c in columns if c.role == "extraction"):
        for rows in _by_test(sheet, columns):
            one, found = _observed(sheet, columns, column, rows, relative_sd)
            problems += found
            observed += one
    return tuple(observed), tuple(dict.fromkeys(problems))


def is_extraction_sheet(sheet: Sheet) -> bool:
    """Return True where a heading speaks of extraction, so that this is no bench sheet."""
    roles = [_meaning(i, heading) for i, heading in enumerate(sheet.header)]
    return any(column is not None and column.role == "extraction" for column in roles)


def _columns(sheet: Sheet) -> tuple[list[_Column], list[Problem]]:
    columns, problems = [], []
    for position, heading in enumerate(sheet.header):
        column = _meaning(position, heading)
        if column is None:
            problems.append(
                Problem(
                    sheet.file,
                    sheet.header_row,
                    heading,
                    "note",
                    "this column is not used",
                    "time, extraction, test, domain, temperature, size",
                )
            )
            continue
        columns.append(column)
    return columns, problems


def _meaning(position: int, heading: str) -> _Column | None:
    name, spelling = split_heading(heading)
    words = re.split(r"[\s_]+", name.strip().lower())
    if any(word in _EXTRACTION_WORDS for word in words):
        left = [w for w in words if w not in _EXTRACTION_WORDS and w not in _PERCENT_WORDS]
        metal = _NAME_OF_METAL.get(left[0], left[0].capitalize()) if left else "metal"
        percent = spelling == "%" or any(word in _PERCENT_WORDS for word in words)
        return _Column(position, heading, "extraction", "1", "%" if percent else "1", metal)
    text = _TEXT_COLUMNS.get(" ".join(words))
    if text is not None:
        return _Column(position, heading, text)
    number = _NUMBER_COLUMNS.get(words[0])
    if number is None:
        return None
    written = spelling or (words[-1] if len(words) > 1 else "")
    return _Column(position, heading, number[0], number[1], written)


def _missing(sheet: Sheet, columns: Sequence[_Column]) -> list[Problem]:
    problems = []
    for role, example in (("time", "time (h)"), ("extraction", "Cu extraction (%)")):
        if not any(column.role == role for column in columns):
            problems.append(
                Problem(
                    sheet.file,
                    sheet.header_row,
                    "",
                    "stop",
                    f"no {role} column",
                    f"a heading such as {example}",
                    f"rename the column to {example!r}",
                )
            )
    for column in columns:
        problems += _unit_fault(sheet, column)
    return problems


def _unit_fault(sheet: Sheet, column: _Column) -> list[Problem]:
    if not column.target or column.role == "extraction":
        return []
    if not column.spelling:
        problem = Problem(
            sheet.file,
            sheet.header_row,
            column.heading,
            "stop",
            "no unit in the heading",
            f"a unit that converts to {column.target}",
            f"{column.heading} ({column.target})",
        )
        return [problem]
    try:
        convert(1.0, column.spelling, column.target)
    except UnitError as error:
        return [unit_problem(error, file=sheet.file, row=sheet.header_row, column=column.heading)]
    return []


def _by_test(sheet: Sheet, columns: Sequence[_Column]) -> list[list[SheetRow]]:
    name = _cell_of(columns, "test")
    groups: dict[str, list[SheetRow]] = {}
    for row in sheet.rows:
        groups.setdefault(name(row) or "test", []).append(row)
    return list(groups.values())


def _cell_of(columns: Sequence[_Column], role: str) -> Callable[[SheetRow], str]:
    position = next((column.position for column in columns if column.role == role), None)
    return lambda row: "" if position is None else row.cells[position].strip()


def _observed(
    sheet: Sheet,
    columns: Sequence[_Column],
    column: _Column,
    rows: Sequence[SheetRow],
    relative_sd: float | None,
) -> tuple[list[Observed], list[Problem]]:
    time_column = next(c for c in columns if c.role == "time")
    points, problems = _points(sheet, time_column, column, rows)
    if any(problem.level == "stop" for problem in problems):
        return [], problems
    name = _cell_of(columns, "test")(rows[0]) or sheet.file
    if len(points) < 3:
        problems.append(
            Problem(
                sheet.file,
                rows[0].number,
                column.heading,
                "note",
                f"{len(points)} readings of {name}",
                "3 or more for a fit",
            )
        )
        return [], problems
    time_h, extraction = np.array(points).T
    settings, found = _conditions(sheet, columns, rows[0])
    problems += found
    domain = _cell_of(columns, "domain")(rows[0]) or "ore"
    one = observed_from_extraction(
        time_h,
        extraction,
        sd=None if relative_sd is None else np.maximum(relative_sd * extraction, 1e-3),
        test=name,
        key=f"{domain}/{column.metal}",
        **settings,
    )
    return [one], problems


def _points(
    sheet: Sheet, time_column: _Column, column: _Column, rows: Sequence[SheetRow]
) -> tuple[list[tuple[float, float]], list[Problem]]:
    points: list[tuple[float, float]] = []
    problems: list[Problem] = []
    for row in rows:
        pair = [_number(sheet, c, row, problems) for c in (time_column, column)]
        if pair[0] is None or pair[1] is None:
            continue
        time_h, extraction = pair[0], pair[1]
        problems += _faults(sheet, (time_column, column), row, (time_h, extraction), points)
        if time_h > 0.0:
            points.append((time_h, extraction))
    return points, problems


def _number(sheet: Sheet, column: _Column, row: SheetRow, problems: list[Problem]) -> float | None:
    text = row.cells[column.position]
    if not text.strip():
        return None
    try:
        return convert(parse_numeral(text, sheet.decimal), column.spelling, column.target)
    except ValueError as error:
        problems.append(
            Problem(
                sheet.file,
                row.number,
                column.heading,
                "stop",
                str(error),
                "a number",
                "correct the cell, or empty it",
            )
        )
        return None


def _faults(
    sheet: Sheet,
    columns: tuple[_Column, _Column],
    row: SheetRow,
    pair: tuple[float, float],
    points: Sequence[tuple[float, float]],
) -> list[Problem]:
    time_h, extraction = pair
    found = []
    if time_h < 0.0 or (points and time_h < points[-1][0]):
        found.append(
            Problem(
                sheet.file,
                row.number,
                columns[0].heading,
                "stop",
                f"time goes back to {time_h:g} h",
                "times that rise within a test",
                "put the rows in order, or name the tests in a column test",
            )
        )
    if extraction < 0.0:
        found.append(
            Problem(
                sheet.file,
                row.number,
                columns[1].heading,
                "ask",
                f"an extraction of {100 * extraction:g} %",
                "0 to 100 %",
                "below the limit of the assay? then empty the cell",
            )
        )
    if extraction > 1.05:
        found.append(_too_high(sheet, columns[1], row, extraction))
    return found


def _too_high(sheet: Sheet, column: _Column, row: SheetRow, extraction: float) -> Problem:
    percent_as_fraction = column.spelling == "1" and extraction > 2.0
    return Problem(
        sheet.file,
        row.number,
        column.heading,
        "stop" if percent_as_fraction else "note",
        f"an extraction of {100 * extraction:g} %",
        "up to about 105 %",
        f"write the heading as {column.heading!r} with (%)"
        if percent_as_fraction
        else "a head that reads low, or a dilution counted twice",
    )


def _conditions(
    sheet: Sheet, columns: Sequence[_Column], row: SheetRow
) -> tuple[dict[str, Any], list[Problem]]:
    problems: list[Problem] = []
    found: dict[str, Any] = {}
    for column in columns:
        if column.role in ("temperature", "size"):
            number = _number(sheet, column, row, problems)
            if number is None:
                continue
            if column.role == "size":
                found["sizes"] = SizeDistribution.single(number)
            else:
                found["temperature_K"] = number
    return found, problems
