"""Reads concentration against time over a precipitant: one table, one row a sample.

Columns: ``test``, ``time (min)``, one for each metal as ``Cu (g/L)``, and if there are
``temperature (degC)``, ``stirring (rpm)``, ``area (m2/m3)``. The conditions of a test stand in its
first row. A reading such as ``<0.002`` is kept as a limit.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from leachkin.cementation import CementationTest
from leachkin.errors import InputProblems, UnitError
from leachkin.files import Sheet, SheetRow, parse_numeral
from leachkin.problems import Level, Problem, unit_problem
from leachkin.testwork import TestworkSettings
from leachkin.units import convert, split_heading

_TEXTS = {"test": "test", "sample": "test", "test id": "test"}
_NUMBERS = {
    "time": ("time", "h"),
    "temperature": ("temperature", "K"),
    "stirring": ("stirring", "1/min"),
    "speed": ("stirring", "1/min"),
    "area": ("area", "m2/m3"),
}
_METALS = ("Cu", "Ag", "Au", "Cd", "Pb", "Ni", "Co", "Hg", "Zn")
_NAMES = {"copper": "Cu", "silver": "Ag", "gold": "Au", "cadmium": "Cd", "lead": "Pb",
          "nickel": "Ni", "cobalt": "Co", "mercury": "Hg", "zinc": "Zn"}  # fmt: skip
_CONDITIONS = ("temperature", "stirring", "area")
_FEWEST = 2


@dataclass(frozen=True)
class _Column:
    position: int
    heading: str
    role: str
    target: str = ""
    spelling: str = ""


def read_cementation_sheet(
    sheet: Sheet, settings: TestworkSettings
) -> tuple[tuple[CementationTest, ...], tuple[Problem, ...]]:
    """Return the tests of a sheet, one for each test and metal, and what is wrong with it.

    Parameters
    ----------
    sheet : Sheet
    settings : TestworkSettings
        For the precision of a solution assay.

    Returns
    -------
    tests : tuple of CementationTest
        Concentrations in g/L.
    problems : tuple of Problem
    """
    columns, problems = _columns(sheet)
    if any(problem.level == "stop" for problem in problems):
        return (), tuple(problems)
    tests = []
    metals = [column for column in columns if column.role in _METALS]
    for name, rows in _by_test(sheet, columns).items():
        for column in metals:
            shown = name if len(metals) == 1 else f"{name} {column.role}"
            test = _test(sheet, columns, column, rows, shown, settings, problems)
            tests += [] if test is None else [test]
    return tuple(tests), tuple(dict.fromkeys(problems))


def _columns(sheet: Sheet) -> tuple[list[_Column], list[Problem]]:
    columns: list[_Column] = []
    problems: list[Problem] = []
    for position, heading in enumerate(sheet.header):
        column = _meaning(position, heading)
        if column is None:
            known = "test, time, temperature, stirring, area, and metals such as Cu (g/L)"
            problems.append(_problem(sheet, heading, "note", "this column is not used", known))
            continue
        columns.append(column)
        problems += _unit_fault(sheet, column)
    roles = [column.role for column in columns]
    if "time" not in roles:
        problems.append(_problem(sheet, "", "stop", "no time column", "time (min)"))
    if not set(roles) & set(_METALS):
        problems.append(_problem(sheet, "", "stop", "no column of a metal", "Cu (g/L)"))
    return columns, problems


def _meaning(position: int, heading: str) -> _Column | None:
    name, written = split_heading(heading)
    spelling = written or ""
    words = name.strip().lower().replace("_", " ").split()
    if not words:
        return None
    if " ".join(words) in _TEXTS:
        return _Column(position, heading, "test")
    if words[0] in _NUMBERS:
        role, target = _NUMBERS[words[0]]
        if role == "stirring" and spelling.strip().lower() == "rpm":
            return _Column(position, heading, role)
        return _Column(position, heading, role, target, spelling)
    metal = _NAMES.get(words[0], words[0].capitalize())
    return _Column(position, heading, metal, "g/L", spelling) if metal in _METALS else None


def _unit_fault(sheet: Sheet, column: _Column) -> list[Problem]:
    if not column.target:
        return []
    if not column.spelling:
        try_this = f"{column.heading} ({column.target})"
        return [_problem(sheet, column.heading, "stop", "no unit in the heading", try_this)]
    try:
        convert(1.0, column.spelling, column.target)
    except UnitError as error:
        return [unit_problem(error, file=sheet.file, row=sheet.header_row, column=column.heading)]
    return []


def _by_test(sheet: Sheet, columns: Sequence[_Column]) -> dict[str, list[SheetRow]]:
    position = next((c.position for c in columns if c.role == "test"), None)
    groups: dict[str, list[SheetRow]] = {}
    for row in sheet.rows:
        name = "" if position is None else row.cells[position].strip()
        groups.setdefault(name or "test", []).append(row)
    return groups


def _test(
    sheet: Sheet,
    columns: Sequence[_Column],
    metal: _Column,
    rows: Sequence[SheetRow],
    name: str,
    settings: TestworkSettings,
    problems: list[Problem],
) -> CementationTest | None:
    clock = next(column for column in columns if column.role == "time")
    points = []
    for row in rows:
        time, _ = _number(sheet, clock, row, problems)
        value, bound = _number(sheet, metal, row, problems)
        if time is not None and value is not None:
            points.append((time, value, bound))
    if len(points) < _FEWEST:
        text = f"{len(points)} readings of {metal.role} in {name}"
        problems.append(_problem(sheet, metal.heading, "note", text, "two or more for a rate"))
        return None
    times, values, bounds = (np.array(column, dtype=float) for column in zip(*points, strict=True))
    given = {
        c.role: _number(sheet, c, rows[0], problems)[0] for c in columns if c.role in _CONDITIONS
    }
    kelvin = given.get("temperature")
    try:
        return CementationTest(
            times,
            values,
            name,
            bound=bounds,
            sd=np.maximum(settings.sd("solution", values, metal.role), 1e-12),
            stirring_rpm=given.get("stirring"),
            area_m2_per_m3=given.get("area"),
            metal=metal.role,
            unit="g/L",
            **({} if kelvin is None else {"temperature_K": kelvin}),
        )
    except InputProblems as error:
        own = [p for p in error.problems if isinstance(p, Problem)]
        problems += [p.at(file=sheet.file, row=rows[0].number) for p in own]
        return None


def _number(
    sheet: Sheet, column: _Column, row: SheetRow, problems: list[Problem]
) -> tuple[float | None, int]:
    """A cell in the unit of its column, and -1 where it is a limit."""
    text = row.cells[column.position].strip()
    if not text:
        return None, 0
    limit = text.startswith("<")
    try:
        number = parse_numeral(text.lstrip("<").strip(), sheet.decimal)
        value = convert(number, column.spelling, column.target) if column.target else number
    except ValueError as error:
        problems.append(
            Problem(sheet.file, row.number, column.heading, "stop", str(error), "a number")
        )
        return None, 0
    if value < 0.0 and column.role in _METALS:
        found = f"{text} {column.spelling}: a negative assay"
        problems.append(
            Problem(
                sheet.file,
                row.number,
                column.heading,
                "ask",
                found,
                "a reading, or <limit",
                "write a limit as <0.01",
            )  # fmt: skip
        )
        return None, 0
    return float(value), -1 if limit else 0


def _problem(sheet: Sheet, heading: str, level: Level, found: str, allowed: str) -> Problem:
    return Problem(sheet.file, sheet.header_row, heading, level, found, allowed)
