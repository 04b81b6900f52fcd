"""From sheets to tests: the sheets are read, and each test gets what belongs to it."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from leachkin.files import Sheet
from leachkin.problems import Problem, unknown_name
from leachkin.testwork.closeout_sheet import read_closeout_sheet
from leachkin.testwork.heads_sheet import HeadRows, Heads, read_heads_sheet
from leachkin.testwork.merge_readings import merged
from leachkin.testwork.names import EXAMPLE, POLICIES, TestNames, fold_name, is_test_heading
from leachkin.testwork.readings_sheet import Readings, read_readings_sheet
from leachkin.testwork.reagent_use import history_of
from leachkin.testwork.records import (
    Array,
    Exclusion,
    Head,
    History,
    Product,
    Test,
    VesselLog,
)
from leachkin.testwork.recursion import is_drained, solution_ledger
from leachkin.testwork.settings import TestworkSettings
from leachkin.testwork.sieves_sheet import SieveTable, read_sieves_sheet
from leachkin.testwork.suspicious import suspicions
from leachkin.testwork.tests_sheet import ROOM_TEMPERATURE_K, TestRow, read_tests_sheet
from leachkin.testwork.vessel_log import vessel_volumes
from leachkin.testwork.written_sizes import sizes_of_row

SHEETS = ("tests", "readings", "heads", "closeout", "sieves")

#: One sheet of a kind, or several.
Tables = Mapping[str, Sheet | Sequence[Sheet]]


@dataclass(frozen=True)
class _Closed:
    """The products of one test, and where they were read."""

    products: tuple[Product, ...] = ()
    rows: tuple[int, ...] = ()
    file: str = ""


@dataclass(frozen=True)
class _Parts:
    """What the sheets hold, by test; ``files`` has the first file of each kind."""

    readings: Mapping[str, Readings]
    closeout: Mapping[str, _Closed]
    heads: Heads
    sieves: Mapping[str, SieveTable]
    files: Mapping[str, str]

    def files_of(self, row: TestRow) -> dict[str, str]:
        """Return the file of each kind that a test was read from."""
        readings, closed = self.readings.get(row.name), self.closeout.get(row.name)
        found = dict(self.files) | {"tests": row.file}
        if readings is not None:
            found["readings"] = readings.file
        if closed is not None:
            found["closeout"] = closed.file
        return found


def sheets_of(tables: Tables, key: str) -> tuple[Sheet, ...]:
    """Return the sheets of a kind, none where there is none."""
    found = tables.get(key, ())
    return (found,) if isinstance(found, Sheet) else tuple(found)


def read_tests(
    tables: Tables, settings: TestworkSettings
) -> tuple[tuple[Test, ...], tuple[Problem, ...]]:
    """Read the sheets of a campaign into tests.

    Parameters
    ----------
    tables : mapping of str to Sheet or sequence of Sheet
        Out of "tests", "readings", "heads", "closeout" and "sieves"; those that are there.
    settings : TestworkSettings

    Returns
    -------
    tests : tuple of Test
        In the order of the tests sheet; empty without one.
    problems : tuple of Problem
        Everything that there is to say about the sheets, those of opening the files left out
        (they stand in each ``Sheet.problems``). Those about the row of a test stand in its
        ``problems`` too. After a stop the tests hold what could be read.
    """
    problems: list[Problem] = []
    tables = {
        key: [_without_examples(sheet, problems) for sheet in sheets_of(tables, key)]
        for key in tables
    }
    if not sheets_of(tables, "tests"):
        return (), tuple(_no_tests_sheet(tables))
    rows: dict[str, TestRow] = {}
    for sheet in sheets_of(tables, "tests"):
        rows |= read_tests_sheet(sheet, settings, problems, rows)
    parts = _read_parts(tables, settings, rows, problems)
    tests = [_test(row, parts, settings, problems) for row in rows.values()]
    problems.extend(suspicions(tests))
    problems.extend(_exclusion_problems(settings, tests))
    return tuple(_with_their_problems(tests, problems)), tuple(problems)


_SUMMARY = re.compile(r"(?:avg|average|mean|(?:grand )?total|sum|st\.? ?dev|min|max)\b.*", re.I)


def _without_examples(sheet: Sheet, problems: list[Problem]) -> Sheet:
    """The sheet without the rows that show how to fill it in, and those of averages and sums."""
    named = [i for i, h in enumerate(sheet.header) if is_test_heading(h) or h == "domain"]
    left: set[int] = set()
    for words, matches in (
        ("as an example", lambda cell: cell.upper().startswith(EXAMPLE)),
        ("as averages and sums", lambda cell: _SUMMARY.fullmatch(cell) is not None),
    ):
        rows = [r.number for r in sheet.rows if any(matches(r.cells[i]) for i in named)]
        if rows:
            found = f"rows {', '.join(map(str, rows))} are left out {words}"
            problems.append(Problem(sheet.file, rows[0], "", "note", found))
            left.update(rows)
    if not left:
        return sheet
    return replace(sheet, rows=tuple(row for row in sheet.rows if row.number not in left))


def domain_heads(
    sheet: Sheet, settings: TestworkSettings, domain: str
) -> tuple[dict[str, Head], tuple[Problem, ...]]:
    """Return the assay heads of a domain as a whole, by analyte, without any test.

    Parameters
    ----------
    sheet : Sheet
        The heads sheet.
    settings : TestworkSettings
    domain : str

    Returns
    -------
    heads : dict of analyte to Head
    problems : tuple of Problem
    """
    problems: list[Problem] = []
    return read_heads_sheet(sheet, settings, (), problems).of(domain), tuple(problems)


def _no_tests_sheet(tables: Tables) -> list[Problem]:
    for key in ("readings", "closeout"):
        for sheet in sheets_of(tables, key):
            return [
                Problem(
                    sheet.file,
                    None,
                    "",
                    "stop",
                    "there is no tests sheet that says what these tests are",
                    "a tests sheet with test, dry solids (g), solution (mL), aliquots",
                    'name it in the settings: tests = "tests.csv" under [tables]',
                )
            ]
    return []


def _read_parts(
    tables: Tables,
    settings: TestworkSettings,
    rows: Mapping[str, TestRow],
    problems: list[Problem],
) -> _Parts:
    names = TestNames(rows)
    readings: dict[str, Readings] = {}
    closeout: dict[str, _Closed] = {}
    groups: list[HeadRows] = []
    sieves: dict[str, SieveTable] = {}
    starts = {row.name: row.start for row in rows.values() if row.start}
    for sheet in sheets_of(tables, "readings"):
        for name, read in read_readings_sheet(sheet, settings, names, problems, starts).items():
            before = readings.get(name)
            readings[name] = read if before is None else merged(before, read, name, problems)
    for sheet in sheets_of(tables, "closeout"):
        found = read_closeout_sheet(sheet, settings, names, problems)
        for name, (products, numbers) in found.items():
            old = closeout.get(name, _Closed())
            closeout[name] = _Closed(
                old.products + products, old.rows or numbers, old.file or sheet.file
            )
    domains = [row.domain for row in rows.values()]
    for sheet in sheets_of(tables, "heads"):
        groups += read_heads_sheet(sheet, settings, domains, problems).groups
    for sheet in sheets_of(tables, "sieves"):
        sieves |= read_sieves_sheet(sheet, settings, problems)
    files = {key: sheets_of(tables, key)[0].file for key in tables if sheets_of(tables, key)}
    return _Parts(readings, closeout, Heads(tuple(groups)), sieves, files)


def _test(row: TestRow, parts: _Parts, settings: TestworkSettings, problems: list[Problem]) -> Test:
    readings = parts.readings.get(row.name)
    closed = parts.closeout.get(row.name, _Closed())
    files = parts.files_of(row)
    table = parts.sieves.get(fold_name(row.name))
    if table is None and not row.has_size:
        table = parts.sieves.get(fold_name(row.domain)) or parts.sieves.get("")
    sizes = table.sizes if table is not None else None
    if table is None and row.has_size:
        sizes = sizes_of_row(row, settings, problems, row.file)
    floor, proportional = settings.precision_of("residue")
    temperature = _temperature(row, readings, problems)
    test = Test(
        name=row.name,
        domain=row.domain,
        kind=row.kind,
        solids_g=row.solids_g,
        solution_mL=row.solution_mL,
        sizes=sizes,
        temperature_K=temperature,
        reagent_g_per_L=row.reagent_g_per_L,
        stirring_rpm=row.stirring_rpm,
        history=History(np.zeros(1), np.full(1, temperature)),
        aliquots=row.aliquots,
        time_h=np.zeros(0),
        aliquot_mL=np.zeros(0),
        makeup_mL=np.zeros(0),
        solution={},
        products=closed.products,
        heads=parts.heads.of(row.domain, row.size_mm, row.name),
        residue_mass_sd_relative=proportional + floor / row.solids_g,
        rows=_rows_of(row, readings, closed, files),
        reagent=settings.reagent or None,
        start_metal_g_per_L=row.start_metal_g_per_L,
        sizes_by_analyte=table.by_analyte if table is not None else {},
        exclusions=tuple(e for e in settings.exclusions if e.test == row.name),
        files=files,
        vessel=VesselLog(carbon_g=row.weighed.carbon_g),
        start_g_per_L=row.start_g_per_L,
        set_point_g_per_L=row.set_point_g_per_L,
        planned_h=row.planned_h,
        started=row.start,
    )
    if readings is not None:
        test = _with_readings(test, row, readings, settings, problems)
    _policy_problem(test, row, problems)
    return test


def _temperature(row: TestRow, readings: Readings | None, problems: list[Problem]) -> float:
    """The temperature of a test: as written, or the mean of its log, or asked about."""
    if row.temperature_K is not None:
        return row.temperature_K
    logged = readings.temperature_K if readings is not None else None
    if logged is not None and not np.isnan(logged).all():
        return float(np.nanmean(logged))
    problems.append(
        Problem(
            row.file,
            row.row,
            "temperature (degC)",
            "ask",
            f"test {row.name} has no temperature; 25 degC is taken meanwhile",
            "a temperature for each test, here or at its readings",
            "fill in the cell",
        )
    )
    return ROOM_TEMPERATURE_K


def _rows_of(
    row: TestRow, readings: Readings | None, closed: _Closed, files: Mapping[str, str]
) -> dict[str, tuple[int, ...]]:
    found: dict[str, tuple[int, ...]] = {row.file: (row.row,)}
    for key, rows in (
        ("readings", readings.rows if readings is not None else ()),
        ("closeout", closed.rows),
    ):
        if rows:
            found[files[key]] = (*found.get(files[key], ()), *rows)
    return found


def _with_readings(
    test: Test,
    row: TestRow,
    readings: Readings,
    settings: TestworkSettings,
    problems: list[Problem],
) -> Test:
    count = readings.time_h.size
    vessel = vessel_volumes(
        test.name, test.solids_g, test.solution_mL, row.weighed, readings, problems
    )
    reagent = settings.reagent or _only(readings.free_g_per_L) or _only(readings.added_g)
    test = replace(
        test,
        time_h=readings.time_h,
        aliquot_mL=_aliquots(test, vessel.aliquot_mL, readings, problems),
        makeup_mL=vessel.makeup_mL,
        solution=readings.assays,
        pH=readings.pH,
        reagent=reagent,
        reagent_added_g=readings.added_g.get(reagent or ""),
        free_reagent_g_per_L=readings.free_g_per_L.get(reagent or ""),
        added_g=readings.added_g,
        makeup_metal_g_per_L=readings.makeup_metal_g_per_L,
        logged=readings.logged,
        vessel=vessel.log,
        free_g_per_L=readings.free_g_per_L,
    )
    test = _start_strength(test, problems)
    if is_drained(solution_ledger(test)):
        problems.append(_drained(test, readings))
        nothing = np.zeros(count)
        log = VesselLog(carbon_g=test.vessel.carbon_g)
        return replace(test, aliquot_mL=nothing, makeup_mL=nothing, vessel=log)
    return replace(test, history=history_of(test, readings.temperature_K))


def _only(columns: Mapping[str, Array]) -> str | None:
    return next(iter(columns)) if len(columns) == 1 else None


def _aliquots(test: Test, written: Array, readings: Readings, problems: list[Problem]) -> Array:
    if np.isnan(written).any() and test.aliquots != "returned":
        i = int(np.flatnonzero(np.isnan(written))[0])
        problems.append(
            Problem(
                test.files["readings"],
                readings.rows[i],
                "aliquot (mL)",
                "ask",
                f"test {test.name} has readings without an aliquot volume; taken as 0 mL meanwhile",
                "a volume for each reading, 0 where nothing was taken out",
                'fill in the cells, or add a column "aliquot (mL)"',
            )
        )
    return np.nan_to_num(written)


def _start_strength(test: Test, problems: list[Problem]) -> Test:
    """The titration at time 0 where the tests sheet has no starting strength."""
    free = test.free_reagent_g_per_L
    if test.reagent_g_per_L is not None or free is None:
        return test
    if test.time_h[0] == 0.0 and not np.isnan(free[0]):
        return replace(test, reagent_g_per_L=float(free[0]))
    problems.append(
        Problem(
            test.files["tests"],
            test.rows[test.files["tests"]][0],
            f"start {test.reagent} (g/L)",
            "ask",
            f"test {test.name} has titrations and no starting strength; its reagent is not used",
            "a strength above 0",
            f'fill in the column "start {test.reagent} (g/L)"',
        )
    )
    return test


def _drained(test: Test, readings: Readings) -> Problem:
    ledger = solution_ledger(test)
    left = ledger.volume_mL - ledger.removed_mL
    empty = np.flatnonzero(left + ledger.makeup_mL <= 0.0)
    i = int(empty[0] if empty.size else np.argmin(left))
    found = f"{ledger.removed_mL[i]:g} mL are taken out of the {ledger.volume_mL[i]:g} mL there are"
    if ledger.share.min() <= 0.0:
        i = int(np.argmin(ledger.share)) - 1
        found = "the samples of slurry hold more solids than the charge"
    return Problem(
        test.files["readings"],
        readings.rows[i],
        "aliquot (mL)" if ledger.share.min() > 0.0 else "sampled solids (g)",
        "stop",
        found,
        "less than what is in the vessel, or all of it where as much is put in",
        "look at the units of the aliquot and of the solution",
    )


def _policy_problem(test: Test, row: TestRow, problems: list[Problem]) -> None:
    taken_out = test.aliquot_mL.any()
    if test.aliquots is not None or not taken_out or not np.isnan(test.makeup_mL).any():
        return
    problems.append(
        Problem(
            test.files["tests"],
            row.row,
            "aliquots",
            "ask",
            f"test {test.name} does not say what happened after a sample was taken out; "
            f"replaced is taken meanwhile",
            " / ".join(POLICIES),
            "write one of these in the column aliquots",
        )
    )


def _exclusion_problems(settings: TestworkSettings, tests: list[Test]) -> list[Problem]:
    by_name = {test.name: test for test in tests}
    found = []
    for number, exclusion in enumerate(settings.exclusions):
        column = f"exclude[{number}]"
        test = by_name.get(exclusion.test)
        if test is None:
            found.append(unknown_name("test", exclusion.test, by_name, column=f"{column}.test"))
        elif not _has_time(test, exclusion):
            times = ", ".join(f"{t:g}" for t in test.time_h)
            what = f"test {test.name} has no reading at {exclusion.time_h:g} h"
            found.append(Problem("", None, f"{column}.time", "stop", what, f"{times} h"))
    return found


def _has_time(test: Test, exclusion: Exclusion) -> bool:
    if exclusion.time_h is None:
        return True
    return bool(np.isclose(test.time_h, exclusion.time_h, rtol=1e-9, atol=1e-9).any())


def _with_their_problems(tests: list[Test], problems: list[Problem]) -> list[Test]:
    """Each test with the problems of its rows."""
    owner = {(f, n): test.name for test in tests for f, ns in test.rows.items() for n in ns}
    by_test: dict[str, list[Problem]] = {}
    for problem in problems:
        name = owner.get((problem.file, problem.row or 0))
        if name is not None:
            by_test.setdefault(name, []).append(problem)
    return [replace(test, problems=tuple(by_test.get(test.name, ()))) for test in tests]
