"""The readings sheet: one row a sample of a test, in order of time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from leachkin.files import Sheet
from leachkin.problems import Problem
from leachkin.testwork.cells import CellReader
from leachkin.testwork.clock import with_hours
from leachkin.testwork.columns import ANALYTE, ASSAYED, FORMULA, Family, Field, resolve_columns
from leachkin.testwork.names import TEST_NAMES, TestNames, is_test_heading
from leachkin.testwork.records import Array, Assays
from leachkin.testwork.settings import TestworkSettings
from leachkin.testwork.tests_sheet import likely_kelvin
from leachkin.testwork.written_units import SHE_MV

FIELDS = (
    Field("test", "test", names=TEST_NAMES, needed=True),
    Field("sample id", "sample id", names=("sample", "sample no", "sample number", "lab no")),
    Field("time", "time (h)", ("h",), ("elapsed time", "leach time", "elapsed", "t"), needed=True),
    Field(
        "aliquot", "aliquot (mL)", ("mL",), ("sample volume", "aliquot volume", "sample", "aliq")
    ),
    Field("makeup", "make-up (mL)", ("mL",), ("makeup volume", "replaced", "topup", "top up")),
    Field("returned", "returned (mL)", ("mL",), ("aliquot returned", "sample returned")),
    Field(
        "decanted",
        "decanted (mL)",
        ("mL",),
        ("drained", "poured off", "solution change", "drawn off"),
    ),
    Field("volume", "volume (mL)", ("mL",), ("solution volume", "volume before sample")),
    Field("bottle", "bottle mass (g)", ("g",), ("gross mass", "bottle weight", "gross weight")),
    Field(
        "bottle after",
        "bottle mass after (g)",
        ("g",),
        ("gross mass after", "bottle mass after make-up", "bottle weight after"),
    ),
    Field("evaporated", "evaporated (mL)", ("mL",), ("evaporation", "water lost")),
    Field("slurry", "slurry sample (g)", ("g",), ("slurry mass", "pulp sample")),
    Field(
        "solids taken",
        "sampled solids (g)",
        ("g",),
        ("solids in sample", "dry solids in sample", "solids taken"),
    ),
    Field("pH", "pH", ("",)),
    Field("temperature", "temperature (degC)", ("K",), ("temp", "t")),
    Field("Eh", "Eh (mV)", (SHE_MV,), ("ORP", "redox", "redox potential", "potential")),
    Field("DO", "DO (mg/L)", ("mg/L",), ("dissolved oxygen", "dissolved O2", "D.O.")),
)
FAMILIES = (
    Family("free", "free {} (g/L)", rf"free {FORMULA}", ("g/L",), ("H2SO4", "NaCN")),
    Family("added", "{} added (g)", rf"{FORMULA} added", ("g",), ("H2SO4", "NaCN", "CaO")),
    Family(
        "in solids",
        "{} in sampled solids (%)",
        rf"{ANALYTE} in (?:sampled )?solids",
        ("kg/t",),
        ("Cu", "Au"),
    ),
    Family("made up", "{} in make-up (g/L)", rf"{ANALYTE} in make-?up", ("g/L",), ("Cu", "Au")),
    Family("assay", "{} (g/L)", ASSAYED, ("g/L",), ("Cu", "Fe", "Zn", "Ni", "Co", "Au", "Ag")),
)


_LARGEST_EH_MV = 2000.0  #: beyond it water does not stand
#: Columns about the vessel, kept as they were written.
VESSEL_COLUMNS = (
    "returned", "decanted", "volume", "bottle", "bottle after", "evaporated", "slurry",
    "solids taken",
)  # fmt: skip
_LOGGED = {"Eh": "Eh_mV_SHE", "DO": "DO_mg_per_L"}


@dataclass(frozen=True)
class Readings:
    """The readings of one test, in base units; a column that is not there is None or absent."""

    time_h: Array
    aliquot_mL: Array | None
    makeup_mL: Array | None
    pH: Array | None
    temperature_K: Array | None
    assays: Mapping[str, Assays]
    free_g_per_L: Mapping[str, Array]
    added_g: Mapping[str, Array]
    makeup_metal_g_per_L: Mapping[str, Array]
    rows: tuple[int, ...]
    logged: Mapping[str, Array] = field(default_factory=dict)
    file: str = ""
    vessel: Mapping[str, Array] = field(default_factory=dict)
    solids_assays: Mapping[str, Assays] = field(default_factory=dict)


@dataclass(frozen=True)
class _Columns:
    """The columns of the whole sheet."""

    numbers: Mapping[str, Array]
    assays: Mapping[str, tuple[Array, Array, NDArray[np.int64]]] = field(default_factory=dict)
    in_solids: Mapping[str, tuple[Array, Array, NDArray[np.int64]]] = field(default_factory=dict)


def read_readings_sheet(
    sheet: Sheet,
    settings: TestworkSettings,
    names: TestNames,
    problems: list[Problem],
    starts: Mapping[str, str] | None = None,
) -> dict[str, Readings]:
    """Read the readings sheet.

    Parameters
    ----------
    sheet : Sheet
    settings : TestworkSettings
        For the precision of solution assays.
    names : TestNames
        The tests there are.
    problems : list of Problem
        Added to: unknown columns and tests, cells that are no numbers, times that go back.
    starts : mapping of test name to str, optional
        When each test started, for times written as dates or by the clock.

    Returns
    -------
    dict of test name to Readings
        Rows without a time, or with one before the row above, are left out.
    """
    test_position = next((i for i, h in enumerate(sheet.header) if is_test_heading(h)), None)
    sheet = with_hours(sheet, test_position, starts or {}, settings.answers, problems)
    uses = resolve_columns(sheet, FIELDS, FAMILIES, problems, settings, "readings")
    if not {"test", "time"} <= set(uses):
        return {}
    reader = CellReader(sheet, uses, problems, settings.answers)
    columns = _columns(reader, settings)
    groups = _rows_by_test(reader, names)
    reader.finish()
    return {
        test: _readings(np.array(rows), columns, reader)
        for test, found in groups.items()
        if (rows := _in_order(found, columns.numbers["time"], reader))
    }


def _columns(reader: CellReader, settings: TestworkSettings) -> _Columns:
    numbers: dict[str, Array] = {}
    assays: dict[str, dict[str, tuple[Array, Array, NDArray[np.int64]]]] = {}
    kinds = {"assay": "solution", "in solids": "tail"}
    for key in reader.uses:
        family, _, name = key.partition(":")
        if family in kinds:
            found = reader.assays(key)
            if found is not None:
                sd = settings.sd(kinds[family], found[0], name)
                assays.setdefault(family, {})[name] = (found[0], sd, found[1])
        elif key not in ("test", "sample id") and (values := reader.numbers(key)) is not None:
            numbers[key] = values
    _check(reader, numbers)
    return _Columns(numbers, assays.get("assay", {}), assays.get("in solids", {}))


def _check(reader: CellReader, numbers: dict[str, Array]) -> None:
    """Numbers without a meaning become NaN, with a problem each."""
    for key, values in numbers.items():
        if key == "pH":
            wrong = (values > 15.0) | (values < -2.0)
            reader.flag(key, wrong, "a pH from -2 to 15", "look for a decimal mark", "ask")
        elif key == "temperature":
            for i in np.flatnonzero(~np.isnan(values)):
                values[i] = likely_kelvin(float(values[i]), reader, key, int(i))
            wrong = values <= 0.0
        elif key == "Eh":
            wrong = np.abs(values) > _LARGEST_EH_MV
            reader.flag(
                key, wrong, f"within {_LARGEST_EH_MV:g} mV of SHE", "look at the unit", "ask"
            )
        else:
            wrong = values < 0.0
            reader.flag(key, wrong, "a number from 0 up")
        values[wrong] = np.nan


def _rows_by_test(reader: CellReader, names: TestNames) -> dict[str, list[int]]:
    groups: dict[str, list[int]] = {}
    known: dict[str, str | None] = {}
    file, heading = reader.sheet.file, reader.uses["test"].heading
    for i, text in enumerate(reader.texts("test")):
        if text not in known:
            row = reader.sheet.rows[i].number
            known[text] = names.find(text, file, row, heading, reader.problems)
        test = known[text]
        if test is not None:
            groups.setdefault(test, []).append(i)
    return groups


def _in_order(rows: list[int], time_h: Array, reader: CellReader) -> list[int]:
    """The rows of a test whose time does not go back."""
    kept: list[int] = []
    for i in rows:
        if np.isnan(time_h[i]):
            if not reader.texts("time")[i]:
                reader.problems.append(_time_problem(reader, i, "the time is missing", "stop"))
        elif kept and time_h[i] < time_h[kept[-1]]:
            before = reader.sheet.rows[kept[-1]]
            found = (
                f"time goes back: {time_h[i]:g} h after {time_h[kept[-1]]:g} h in row "
                f"{before.number}"
            )
            reader.problems.append(_time_problem(reader, i, found, "stop"))
        else:
            if kept and time_h[i] == time_h[kept[-1]]:
                found = f"{time_h[i]:g} h twice in one test; both are kept as two samples"
                reader.problems.append(_time_problem(reader, i, found, "ask"))
            kept.append(i)
    return kept


def _time_problem(reader: CellReader, i: int, found: str, level: str) -> Problem:
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        reader.uses["time"].heading,
        "ask" if level == "ask" else "stop",
        found,
        "hours since the start of the test, rising from row to row",
        "write clock times past midnight as hours since the start (27, not 3)",
    )


def _readings(rows: NDArray[np.int64], columns: _Columns, reader: CellReader) -> Readings:
    numbers = {key: values[rows] for key, values in columns.numbers.items()}
    row_numbers = tuple(reader.sheet.rows[i].number for i in rows)
    assays, in_solids = (
        {
            name: Assays(value[rows], sd[rows], bound[rows], row_numbers)
            for name, (value, sd, bound) in read.items()
            if not np.isnan(value[rows]).all()
        }
        for read in (columns.assays, columns.in_solids)
    )
    return Readings(
        time_h=numbers["time"],
        aliquot_mL=numbers.get("aliquot"),
        makeup_mL=numbers.get("makeup"),
        pH=numbers.get("pH"),
        temperature_K=numbers.get("temperature"),
        assays=assays,
        free_g_per_L=_family(numbers, "free"),
        added_g=_family(numbers, "added"),
        makeup_metal_g_per_L=_family(numbers, "made up"),
        rows=row_numbers,
        logged={name: numbers[key] for key, name in _LOGGED.items() if key in numbers},
        file=reader.sheet.file,
        vessel={
            key: numbers[key]
            for key in VESSEL_COLUMNS
            if key in numbers and not np.isnan(numbers[key]).all()
        },
        solids_assays=in_solids,
    )


def _family(numbers: Mapping[str, Array], key: str) -> dict[str, Array]:
    return {
        name.partition(":")[2]: values
        for name, values in numbers.items()
        if name.startswith(f"{key}:") and not np.isnan(values).all()
    }
