"""The tests sheet: one row a test, its charge, solution and conditions."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.errors import UnitError
from leachkin.files import Sheet, parse_numeral
from leachkin.problems import Level, Problem, unknown_name
from leachkin.testwork.cells import CellReader, code_meanings
from leachkin.testwork.charge import (
    CHARGE_COLUMNS,
    SOLUTION_COLUMNS,
    Weighed,
    charge_of_row,
    stands_otherwise,
    weighed_of_row,
)
from leachkin.testwork.columns import ANALYTE, FORMULA, Family, Field, of_family, resolve_columns
from leachkin.testwork.names import KINDS, POLICIES, TEST_NAMES, TestNames, find_policy
from leachkin.testwork.records import AliquotPolicy, Array
from leachkin.testwork.settings import TestworkSettings
from leachkin.testwork.written_sizes import SizeProblem, WrittenSize, read_size
from leachkin.testwork.written_units import known_meshes
from leachkin.units import convert

FIELDS = (
    Field("test", "test", names=TEST_NAMES, needed=True),
    Field("domain", "domain", names=("ore", "ore type", "sample", "composite", "lithology")),
    Field("kind", "kind", names=("test kind", "type", "test type")),
    Field(
        "solids",
        "dry solids (g)",
        ("g",),
        ("solids dry", "dry mass", "dry charge", "charge dry", "charge", "solids", "mass dry"),
        True,
    ),
    Field(
        "wet",
        "wet solids (g)",
        ("g",),
        ("wet mass", "wet charge", "charge wet", "solids wet", "mass wet", "charge as received"),
    ),
    Field("moisture", "moisture (%)", ("1",), ("moisture content", "ore moisture")),
    Field("solution", "solution (mL)", ("mL",), ("solution volume", "soln", "volume"), True),
    Field("solids share", "solids (%)", ("1",), ("pulp density", "pulp solids")),
    Field("pulp mass", "pulp mass (g)", ("g",), ("slurry mass", "pulp weight")),
    Field("pulp volume", "pulp volume (mL)", ("mL",), ("slurry volume",)),
    Field(
        "pulp density",
        "pulp density (g/mL)",
        ("g/mL",),
        ("slurry density", "pulp SG", "slurry SG"),
    ),
    Field(
        "solids density", "solids density (g/mL)", ("g/mL",), ("solids SG", "ore SG", "ore density")
    ),
    Field("density", "solution density (g/mL)", ("g/mL",), ("solution SG", "liquor density")),
    Field("bottle", "bottle mass at start (g)", ("g",), ("gross mass at start", "start mass")),
    Field("tare", "bottle tare (g)", ("g",), ("tare", "empty bottle", "bottle empty")),
    Field("carbon", "carbon (g)", ("g",), ("carbon mass", "carbon added", "resin", "resin mass")),
    Field("lower", "size lower (mm)", ("mm",), ("lower size",)),
    Field("upper", "size upper (mm)", ("mm",), ("upper size", "top size")),
    Field(
        "size", "size (mm)", names=("size fraction", "particle size", "crush size"), in_words=True
    ),
    Field("P80", "P80 (um)", names=("K80", "F80", "80 % passing"), in_words=True),
    Field("temperature", "temperature (degC)", ("K",), ("temp", "t")),
    Field("start", "started", names=("start", "start time", "start date", "date started")),
    Field(
        "planned",
        "planned samples (h)",
        names=("sample times", "planned", "sampling plan"),
        in_words=True,
    ),
    Field("aliquots", "aliquots", names=("aliquot policy", "aliquot")),
    Field("stirring", "stirring (rpm)", ("rpm",), ("stirring speed", "rolling speed", "agitation")),
)
FAMILIES = (
    Family("start", "start {} (g/L)", rf"start {FORMULA}", ("g/L",), ("H2SO4", "NaCN")),
    Family(
        "set point",
        "set-point {} (g/L)",
        rf"(?:set[ -]?point|target) {FORMULA}",
        ("g/L",),
        ("NaCN",),
    ),
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
    single_mm: float | None = None
    p80_mm: float | None = None
    start: str = ""
    file: str = ""
    weighed: Weighed = Weighed()
    start_g_per_L: Mapping[str, float] = field(default_factory=dict)
    set_point_g_per_L: float | None = None
    planned_h: tuple[float, ...] = ()

    @property
    def has_size(self) -> bool:
        """True where the row says a size of some kind."""
        return any(s is not None for s in (self.size_mm, self.single_mm, self.p80_mm))


def read_tests_sheet(
    sheet: Sheet,
    settings: TestworkSettings,
    problems: list[Problem],
    others: Mapping[str, TestRow] | None = None,
) -> dict[str, TestRow]:
    """Read the tests sheet.

    Parameters
    ----------
    sheet : Sheet
    settings : TestworkSettings
    problems : list of Problem
        Added to.
    others : mapping of test name to TestRow, optional
        Tests of other sheets, whose names may not come again.

    Returns
    -------
    dict of test name to TestRow
        Tests without dry solids or solution are left out, with a stop.
    """
    found_problems: list[Problem] = []
    uses = resolve_columns(sheet, FIELDS, FAMILIES, found_problems, settings, "tests")
    problems.extend(p for p in found_problems if not stands_otherwise(p, set(uses)))
    charged = {"solids", "wet"} & set(uses)
    if "test" not in uses or not charged or not SOLUTION_COLUMNS & set(uses):
        return {}
    reader = CellReader(sheet, uses, problems, settings.answers)
    columns = _columns(reader, settings)
    found: dict[str, TestRow] = {}
    known = dict(others or {})
    for i, name in enumerate(reader.texts("test")):
        if _name_is_good(name, known, sheet, i, problems):
            row = _row(i, name, reader, columns, settings)
            if row is not None:
                found[name] = known[name] = row
    reader.finish()
    problems.extend(_alike(sheet, found))
    return found


def _columns(reader: CellReader, settings: TestworkSettings) -> dict[str, Array]:
    """The numeric columns by key, NaN where there is none, checked against what has meaning."""
    absent = np.full(len(reader.sheet.rows), np.nan)
    keys = [*CHARGE_COLUMNS, "moisture", "solids share", "lower", "upper"]
    keys += ["temperature", "stirring"]
    columns = {key: _or_absent(reader.numbers(key), absent) for key in keys}
    for key in (*CHARGE_COLUMNS, "lower", "upper"):
        if key in reader.uses:
            reader.flag(key, columns[key] <= 0.0, "a number above 0")
            columns[key][columns[key] <= 0.0] = np.nan
    for key, allowed in (
        ("moisture", "0 to below 100 %"),
        ("solids share", "above 0, below 100 %"),
    ):
        if key in reader.uses:
            wrong = (columns[key] < 0.0) | (columns[key] >= 1.0)
            wrong |= (columns[key] <= 0.0) & (key != "moisture")
            reader.flag(key, wrong, allowed, "look at the unit")
            columns[key][wrong] = np.nan
    reagents = of_family(reader.uses, "start")
    chosen = settings.reagent if settings.reagent in reagents else None
    if settings.reagent is None and len(reagents) == 1:
        chosen = next(iter(reagents))
    columns["reagent"] = _or_absent(reader.numbers(f"start:{chosen}") if chosen else None, absent)
    for name in reagents:
        columns[f"start:{name}"] = _or_absent(reader.numbers(f"start:{name}"), absent)
    points = of_family(reader.uses, "set point")
    point = chosen or settings.reagent
    point = point if point in points else next(iter(points)) if len(points) == 1 else None
    columns["set point"] = _or_absent(
        reader.numbers(f"set point:{point}") if point else None, absent
    )
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
                f"the campaign's reagent is {settings.reagent}; {other} is in its own balance only",
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
                f"test {name!r} stands in {_place(found[name], sheet)} too",
                "each test once",
                "rename one of them",
            )
        )
        return False
    return True


def _place(row: TestRow, sheet: Sheet) -> str:
    return f"row {row.row}" if row.file == sheet.file else f"{row.file}, row {row.row},"


def _row(
    i: int,
    name: str,
    reader: CellReader,
    columns: Mapping[str, Array],
    settings: TestworkSettings,
) -> TestRow | None:
    number = reader.sheet.rows[i].number
    charge = charge_of_row(i, reader, columns, settings)
    if charge is None:
        return None
    metals = of_family(reader.uses, "start metal")
    size = _size(i, reader, columns, settings)
    reagent = _or_none(columns["reagent"][i])
    return TestRow(
        name=name,
        domain=reader.texts("domain")[i] or DEFAULT_DOMAIN,
        kind=_kind(reader.texts("kind")[i], reader, number),
        solids_g=charge.solids_g,
        solution_mL=charge.solution_mL,
        size_mm=size.pair_mm,
        temperature_K=_temperature(i, reader, columns),
        reagent_g_per_L=None if reagent is None else reagent * charge.dilution,
        stirring_rpm=_or_none(columns["stirring"][i]),
        aliquots=_policy(reader.texts("aliquots")[i], reader, number),
        start_metal_g_per_L={
            metal: value * charge.dilution
            for metal in metals
            if (value := _or_none(columns[f"start metal:{metal}"][i])) is not None
        },
        row=number,
        single_mm=size.single_mm,
        p80_mm=size.p80_mm,
        start=reader.texts("start")[i],
        file=reader.sheet.file,
        weighed=weighed_of_row(i, columns, settings),
        start_g_per_L={
            name: value * charge.dilution
            for name in of_family(reader.uses, "start")
            if (value := _or_none(columns[f"start:{name}"][i])) is not None
        },
        set_point_g_per_L=_or_none(columns["set point"][i]),
        planned_h=_planned(i, reader),
    )


def _planned(i: int, reader: CellReader) -> tuple[float, ...]:
    """Times at which samples are planned, as "2; 6; 24; 48"."""
    separators = r"[;/\s]+" if reader.sheet.decimal == "," else r"[;/,\s]+"
    parts = [part.strip(",h") for part in re.split(separators, reader.texts("planned")[i])]
    unit = reader.uses["planned"].spelling if "planned" in reader.uses else ""
    try:
        hours = convert(1.0, unit or "h", "h")
        return tuple(
            sorted({hours * parse_numeral(part, reader.sheet.decimal) for part in parts if part})
        )
    except (ValueError, UnitError):
        reader.problems.append(
            Problem(
                reader.sheet.file,
                reader.sheet.rows[i].number,
                reader.uses["planned"].heading,
                "ask",
                f"{reader.texts('planned')[i]!r} is no list of times; the plan is not used",
                "hours with semicolons between them",
                'write "2; 6; 24; 48"',
            )
        )
        return ()


def _or_none(value: float) -> float | None:
    return None if np.isnan(value) else float(value)


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


def _size(
    i: int, reader: CellReader, columns: Mapping[str, Array], settings: TestworkSettings
) -> WrittenSize:
    pair = _sieve_pair(i, reader, columns)
    if pair is not None:
        return WrittenSize(pair_mm=pair)
    for key in ("size", "P80"):
        text = reader.texts(key)[i]
        if not text or text.casefold() in code_meanings():
            continue
        use = reader.uses[key]
        if reader.sheet.decimal == ",":
            text = text.replace(",", ".")
        try:
            return read_size(text, use.spelling, settings.answers, key == "P80")
        except SizeProblem as fault:
            level: Level = "ask" if fault.paste or "top size" in fault.found else "stop"
            where = (reader.sheet.file, reader.sheet.rows[i].number, use.heading)
            words = (fault.found, fault.allowed, fault.try_this, fault.paste)
            reader.problems.append(Problem(*where, level, *words))
    return WrittenSize()


def _sieve_pair(
    i: int, reader: CellReader, columns: Mapping[str, Array]
) -> tuple[float, float] | None:
    for key in ("lower", "upper"):
        use = reader.uses.get(key)
        if use is not None and use.series and np.isnan(columns[key][i]) and reader.texts(key)[i]:
            reader.problems.append(_no_such_mesh(i, reader, key))
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


def _no_such_mesh(i: int, reader: CellReader, key: str) -> Problem:
    series = reader.uses[key].series
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        reader.uses[key].heading,
        "stop",
        f"{reader.texts(key)[i]!r} is no mesh of the {series} series",
        ", ".join(known_meshes(series)),
        "write the aperture in mm under (mm)",
    )


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
