"""Rate constants against temperature, read from a CSV for ``leachkin arrhenius``."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from leachkin.errors import InputProblems, UnitError
from leachkin.problems import Problem, stop_if_any, unit_problem, unknown_name

if TYPE_CHECKING:
    from leachkin.files import Sheet, SheetRow

_MEANINGS = {
    "temperature": "temperature",
    "t": "temperature",
    "rate constant": "rate constant",
    "k": "rate constant",
    "standard error": "standard error",
    "se": "standard error",
    "remark": "",
    "test": "",
}


@dataclass(frozen=True)
class RateConstants:
    """What the file says.

    Attributes
    ----------
    temperature_K, rate_constant : list of float
    standard_error : list of float or None
        In the unit of the rate constant.
    unit : str
        Unit of the rate constant as written; it cancels from the activation energy.
    """

    temperature_K: list[float]
    rate_constant: list[float]
    standard_error: list[float] | None
    unit: str


def read_rate_constants(path: str) -> RateConstants:
    """Return the columns of a CSV of rate constants.

    Raises
    ------
    InputProblems
        Every problem of the file at once, each with its row and column.
    """
    from leachkin.files import read_csv

    sheet = read_csv(path)
    stop_if_any(sheet.problems)
    places, units = _places(sheet)
    spelling = _temperature_unit(sheet, places["temperature"], units["temperature"])
    temperature = _numbers(sheet, places["temperature"], spelling)
    rate = _numbers(sheet, places["rate constant"], "")
    error_place = places.get("standard error")
    error = None if error_place is None else _numbers(sheet, error_place, "")
    stop_if_any(_physical(sheet, places["rate constant"], rate))
    return RateConstants(temperature, rate, error, units["rate constant"] or "")


def _places(sheet: Sheet) -> tuple[dict[str, int], dict[str, str | None]]:
    """Position and unit of each column that means something."""
    from leachkin.units import split_heading

    places: dict[str, int] = {}
    units: dict[str, str | None] = {}
    problems = []
    for position, heading in enumerate(sheet.header):
        name, unit = split_heading(heading)
        folded = " ".join(name.lower().replace("_", " ").split())
        if folded not in _MEANINGS:
            problems.append(
                unknown_name("column", name, _known(), file=sheet.file, row=sheet.header_row)
            )
        elif _MEANINGS[folded]:
            places[_MEANINGS[folded]] = position
            units[_MEANINGS[folded]] = unit
    problems += [
        _missing(sheet, name) for name in ("temperature", "rate constant") if name not in places
    ]
    stop_if_any(problems)
    return places, units


def _known() -> list[str]:
    return ["temperature", "rate constant", "standard error", "remark", "test"]


def _missing(sheet: Sheet, name: str) -> Problem:
    example = "temperature (degC)" if name == "temperature" else "rate constant (1/h)"
    return Problem(
        sheet.file,
        sheet.header_row,
        "",
        "stop",
        f"no column {name!r}",
        "columns temperature and rate constant",
        f"head one column {example!r}",
    )


def _temperature_unit(sheet: Sheet, position: int, unit: str | None) -> str:
    from leachkin.units import convert

    heading = sheet.header[position]
    if unit is None:
        raise InputProblems(
            [
                Problem(
                    sheet.file,
                    sheet.header_row,
                    heading,
                    "stop",
                    "no unit in the heading",
                    "degC, K or degF",
                    f"write it as {heading + ' (degC)'!r}",
                )
            ]
        )
    try:
        convert(1.0, unit, "K")
    except UnitError as error:
        problem = unit_problem(error, file=sheet.file, row=sheet.header_row, column=heading)
        raise InputProblems([problem]) from None
    return unit


def _numbers(sheet: Sheet, position: int, temperature_unit: str) -> list[float]:
    """A column as numbers, temperatures in kelvin; every cell must hold one."""
    problems: list[Problem] = []
    numbers = [_number(sheet, row, position, temperature_unit, problems) for row in sheet.rows]
    stop_if_any(problems)
    return numbers


def _number(
    sheet: Sheet, row: SheetRow, position: int, temperature_unit: str, problems: list[Problem]
) -> float:
    from leachkin.files import parse_numeral
    from leachkin.units import convert

    text = row.cells[position]
    try:
        number = parse_numeral(text, sheet.decimal)
    except ValueError as error:
        problems.append(
            Problem(
                sheet.file,
                row.number,
                sheet.header[position],
                "stop",
                str(error) if text.strip() else "the cell is empty",
                "a number",
                "type the number, or take the row out",
            )
        )
        return 0.0
    return convert(number, temperature_unit, "K") if temperature_unit else number


def _physical(sheet: Sheet, position: int, rates: list[float]) -> list[Problem]:
    return [
        Problem(
            sheet.file,
            row.number,
            sheet.header[position],
            "stop",
            f"a rate constant of {rate:g}",
            "above 0",
            "look for a wrong sign or an empty run",
        )
        for row, rate in zip(sheet.rows, rates, strict=True)
        if rate <= 0
    ]
