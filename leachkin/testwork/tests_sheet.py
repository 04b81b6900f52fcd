"""The tests sheet: one row a test, its charge, solution and conditions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.files import Sheet
from leachkin.problems import Problem, unknown_name
from leachkin.testwork.cells import CellReader
from leachkin.testwork.columns import ANALYTE, FORMULA, Family, Field, of_family, resolve_columns
from leachkin.testwork.names import KINDS, POLICIES, TestNames, find_policy
from leachkin.testwork.records import AliquotPolicy, Array
from leachkin.testwork.settings import TestworkSettings

FIELDS = (
    Field("test", "test", names=("test id", "test no", "test name"), needed=True),
    Field("domain", "domain", names=("ore", "ore type")),
    Field("kind", "kind", names=("test kind", "type")),
    Field("solids", "dry solids (g)", ("g",), ("solids dry", "dry mass", "dry charge"), True),
    Field("solution", "solution (mL)", ("mL",), ("solution volume",), True),
    Field("lower", "size lower (mm)", ("mm",), ("lower size",)),
    Field("upper", "size upper (mm)", ("mm",), ("upper size", "top size")),
    Field("temperature", "temperature (degC)", ("K",)),
    Field("aliquots", "aliquots", names=("aliquot policy",)),
    Field("stirring", "stirring (rpm)", ("rpm",), ("stirring speed",)),
)
FAMILIES = (
    Family("start", "start {} (g/L)", rf"start {FORMULA}", ("g/L",), ("H2SO4", "NaCN")),
    Family(
        "start metal",
        "{} in start solution (g/L)",
        rf"{ANALYTE} in start solution",
        ("g/L",),
        ("Cu",),
    ),
)
DEFAULT_DOMAIN = "ore"
ROOM_TEMPERATURE_K = 298.15


@dataclass(frozen=True)
class TestRow:
    """One row of the tests sheet, in base units; sizes None where not written."""

    __test__ = False  # not a test case for pytest

    name: str
    domain: str
    kind: str
    solids_g: float
    solution_mL: float
    size_mm: tuple[float, float] | None
    temperature_K: float | None
    reagent_g_per_L: float | None
    stirring_rpm: float | None
    aliquots: AliquotPolicy | None
    start_metal_g_per_L: Mapping[str, float]
    row: int


def read_tests_sheet(
    sheet: Sheet, settings: TestworkSettings, problems: list[Problem]
) -> dict[str, TestRow]:
    """Read the tests sheet.

    Parameters
    ----------
    sheet : Sheet
    settings : TestworkSettings
    problems : list of Problem
        Added to.

    Returns
    -------
    dict of test name to TestRow
        Tests without dry solids or solution are left out, with a stop.
    """
    uses = resolve_columns(sheet, FIELDS, FAMILIES, problems)
    if not {"test", "solids", "solution"} <= set(uses):
        return {}
    reader = CellReader(sheet, uses, problems)
    columns = _columns(reader, settings)
    found: dict[str, TestRow] = {}
    for i, name in enumerate(reader.texts("test")):
        if _name_is_good(name, found, sheet, i, problems):
            row = _row(i, name, reader, columns)
            if row is not None:
                found[name] = row
    reader.finish()
    problems.extend(_alike(sheet, found))
    return found


def _columns(reader: CellReader, settings: TestworkSettings) -> dict[str, Array]:
    """The numeric columns by key, NaN where there is none, checked against what has meaning."""
    absent = np.full(len(reader.sheet.rows), np.nan)
    keys = ["solids", "solution", "lower", "upper", "temperature", "stirring"]
    columns = {key: _or_absent(reader.numbers(key), absent) for key in keys}
    for key in ("solids", "solution", "lower", "upper"):
        if key in reader.uses:
            reader.flag(key, columns[key] <= 0.0, "a number above 0")
            columns[key][columns[key] <= 0.0] = np.nan
    reagents = of_family(reader.uses, "start")
    chosen = settings.reagent if settings.reagent in reagents else None
    if settings.reagent is None and len(reagents) == 1:
        chosen = next(iter(reagents))
    columns["reagent"] = _or_absent(reader.numbers(f"start:{chosen}") if chosen else None, absent)
    _reagent_problems(reader, settings, set(reagents))
    for metal in of_family(reader.uses, "start metal"):
        columns[f"start metal:{metal}"] = _or_absent(reader.numbers(f"start metal:{metal}"), absent)
    return columns


def _or_absent(values: Array | None, absent: Array) -> Array:
    return absent.copy() if values is None else values


def _reagent_problems(reader: CellReader, settings: TestworkSettings, reagents: set[str]) -> None:
    """Say which start columns are not of the campaign's reagent."""
    if settings.reagent is None:
        return
    for other in sorted(reagents - {settings.reagent}):
        use = reader.uses[f"start:{other}"]
        reader.problems.append(
            Problem(
                reader.sheet.file,
                reader.sheet.header_row,
                use.heading,
                "note",
                f"the campaign's reagent is {settings.reagent}; {other} is not used",
                try_this=f'for {other} as the reagent, write reagent = "{other}" in the settings',
            )
        )


def _name_is_good(
    name: str, found: Mapping[str, TestRow], sheet: Sheet, i: int, problems: list[Problem]
) -> bool:
    row = sheet.rows[i].number
    if not name:
        problems.append(
            Problem(sheet.file, row, "test", "stop", "the row names no test", "a name", "name it")
        )
        return False
    if name in found:
        problems.append(
            Problem(
                sheet.file,
                row,
                "test",
                "stop",
                f"test {name!r} stands in row {found[name].row} too",
                "each test once",
                "rename one of them",
            )
        )
        return False
    return True


def _row(i: int, name: str, reader: CellReader, columns: Mapping[str, Array]) -> TestRow | None:
    number = reader.sheet.rows[i].number
    if not _charge_is_there(i, reader, columns):
        return None
    metals = of_family(reader.uses, "start metal")
    return TestRow(
        name=name,
        domain=reader.texts("domain")[i] or DEFAULT_DOMAIN,
        kind=_kind(reader.texts("kind")[i], reader, number),
        solids_g=float(columns["solids"][i]),
        solution_mL=float(columns["solution"][i]),
        size_mm=_size(i, reader, columns),
        temperature_K=_temperature(i, reader, columns),
        reagent_g_per_L=_or_none(columns["reagent"][i]),
        stirring_rpm=_or_none(columns["stirring"][i]),
        aliquots=_policy(reader.texts("aliquots")[i], reader, number),
        start_metal_g_per_L={
            metal: value
            for metal in metals
            if (value := _or_none(columns[f"start metal:{metal}"][i])) is not None
        },
        row=number,
    )


def _or_none(value: float) -> float | None:
    return None if np.isnan(value) else float(value)


def _charge_is_there(i: int, reader: CellReader, columns: Mapping[str, Array]) -> bool:
    good = True
    for key, what in (("solids", "dry solids"), ("solution", "solution")):
        if np.isnan(columns[key][i]):
            good = False
            if not reader.texts(key)[i]:
                reader.problems.append(
                    Problem(
                        reader.sheet.file,
                        reader.sheet.rows[i].number,
                        reader.uses[key].heading,
                        "stop",
                        f"the {what} are missing" if key == "solids" else f"the {what} is missing",
                        "a number above 0",
                        "dry mass, not as received" if key == "solids" else "the starting volume",
                    )
                )
    return good


def _kind(text: str, reader: CellReader, number: int) -> str:
    folded = " ".join(text.casefold().replace("-", " ").split())
    if not folded:
        return KINDS[0]
    for kind in KINDS:
        if folded in (kind, f"{kind}s", kind.split()[0]):
            return kind
    reader.problems.append(
        unknown_name("kind", text, KINDS, file=reader.sheet.file, row=number, column="kind")
    )
    return KINDS[0]


def _policy(text: str, reader: CellReader, number: int) -> AliquotPolicy | None:
    policy = find_policy(text) if text else None
    if text and policy is None:
        reader.problems.append(
            unknown_name(
                "aliquot policy",
                text,
                POLICIES,
                file=reader.sheet.file,
                row=number,
                column=reader.uses["aliquots"].heading,
            )
        )
    return policy


def _size(i: int, reader: CellReader, columns: Mapping[str, Array]) -> tuple[float, float] | None:
    lower, upper = float(columns["lower"][i]), float(columns["upper"][i])
    if np.isnan(lower) or np.isnan(upper):
        return None
    if lower < upper:
        return lower, upper
    reader.problems.append(
        Problem(
            reader.sheet.file,
            reader.sheet.rows[i].number,
            reader.uses["lower"].heading,
            "stop",
            f"the lower size {lower:g} mm is not below the upper size {upper:g} mm",
            "lower below upper",
            "give the sieve it passed as the upper size" if lower == upper else "exchange the two",
        )
    )
    return None


def _temperature(i: int, reader: CellReader, columns: Mapping[str, Array]) -> float | None:
    value = _or_none(columns["temperature"][i])
    use = reader.uses.get("temperature")
    if value is None or use is None:
        return None
    return likely_kelvin(value, reader, "temperature", i)


def likely_kelvin(value_K: float, reader: CellReader, key: str, i: int) -> float:
    """Return a temperature, asked about where the heading's unit makes it an unlikely one.

    A number such as 298 under degC is read as kelvin, and one such as 25 under K as degC, until
    the question is answered.
    """
    use, row = reader.uses[key], reader.sheet.rows[i]
    written = row.cells[use.position]
    if use.spelling != "K" and 270.0 <= value_K - ZERO_CELSIUS_K <= 380.0:
        meant, unit = value_K - ZERO_CELSIUS_K, "K"
    elif use.spelling == "K" and value_K < 200.0:
        meant, unit = value_K + ZERO_CELSIUS_K, "degC"
    else:
        return value_K
    reader.problems.append(
        Problem(
            reader.sheet.file,
            row.number,
            use.heading,
            "ask",
            f"{written} {use.spelling} for a leach in water: read as {written} {unit} meanwhile",
            "the unit of the heading for every row",
            f"correct the number, or the heading to ({unit})",
        )
    )
    return meant


def _alike(sheet: Sheet, found: Mapping[str, TestRow]) -> list[Problem]:
    return [
        Problem(
            sheet.file,
            found[group[1]].row,
            "test",
            "ask",
            f"are {' and '.join(repr(name) for name in group)} the same test? Kept apart meanwhile",
            "names that differ in more than case, spaces and hyphens",
            "give one of them another name, or merge their rows",
        )
        for group in TestNames(found).alike()
    ]
