"""Opens the sheets that a campaign names and hands them to testwork."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

from leachkin.campaign.cementation_sheet import read_cementation_sheet
from leachkin.campaign.extraction_sheet import read_extraction_sheet
from leachkin.campaign.mapping import read_mappings, with_mapped_headings
from leachkin.campaign.settings import Setting, Settings
from leachkin.cementation import CementationTest
from leachkin.errors import InputProblems
from leachkin.files import (
    WORKBOOK_ENDINGS,
    Grid,
    Sheet,
    check_path_text,
    read_grid,
    read_sheet,
    read_workbook,
)
from leachkin.problems import Problem
from leachkin.testwork import (
    Answers,
    Exclusion,
    Observed,
    Test,
    TestworkSettings,
    extraction_of_column_log,
    is_bench_sheet,
    is_column_log,
    is_lab_export,
    read_lab_export,
    read_tests,
    tables_of_bench_sheet,
    test_names,
)

#: The sheets that hold bench tests; the extraction sheet is read on its own.
BENCH_SHEETS = ("tests", "readings", "heads", "closeout", "sieves")


#: The sheets of a campaign by the table they hold, each in the order it was named.
SheetsByTable = Mapping[str, Sequence[Sheet]]


def read_sheets(
    settings: Settings, folder: Path, file: str
) -> tuple[dict[str, list[Sheet]], tuple[Problem, ...]]:
    """Return the sheets that open, by table, and a problem for each that does not."""
    sheets: dict[str, list[Sheet]] = {}
    problems: list[Problem] = []
    decimal_mark = settings.get("sheets.decimal_mark")
    mappings = read_mappings(settings, folder, file, problems)
    for name in (*BENCH_SHEETS, "extraction", "cementation_tests"):
        setting = settings.values.get(f"tables.{name}")
        if setting is not None:
            with _told(problems, setting, file):
                sheet = read_sheet(str(setting.value), folder, decimal_mark)
                problems.extend(sheet.problems)
                sheet = with_mapped_headings(sheet, mappings.get(name, {}), problems)
                sheets.setdefault(name, []).append(sheet)
    bench = settings.values.get("tables.bench")
    for text in bench.value if bench is not None else ():
        with _told(problems, bench, file):
            grids = _bench_grids(text, folder, decimal_mark, mappings["bench"])
            _add_bench_sheets(grids, sheets, problems)
    export = settings.values.get("tables.export")
    for text in export.value if export is not None else ():
        with _told(problems, export, file):
            grid = read_grid(text, folder, decimal_mark)
            _add_export(grid, testwork_settings(settings), sheets, problems)
    logs = settings.values.get("tables.column_log")
    for text in logs.value if logs is not None else ():
        with _told(problems, logs, file):
            grid = read_grid(text, folder, decimal_mark)
            problems.extend(grid.problems)
            if not is_column_log(grid):
                raise InputProblems([no_column_log(grid)])
            made = extraction_of_column_log(grid, problems)
            sheets.setdefault("extraction", []).extend([] if made is None else [made])
    return sheets, tuple(problems)


def _add_export(
    grid: Grid,
    settings: TestworkSettings,
    sheets: dict[str, list[Sheet]],
    problems: list[Problem],
) -> None:
    """Put the assays of a laboratory export where their samples belong."""
    problems.extend(grid.problems)
    if not is_lab_export(grid):
        raise InputProblems([no_lab_export(grid)])
    tests = [name for sheet in sheets.get("tests", ()) for name in test_names(sheet)]
    domains = [
        c for s in sheets.get("tests", ()) if "domain" in s.header for c in s.column("domain")
    ]
    readings = sheets.get("readings", [])
    found = read_lab_export(grid, tests, list(dict.fromkeys(domains)), readings, settings, problems)
    sheets["readings"] = [found.replaced.get(sheet.file, sheet) for sheet in readings]
    for name, sheet in found.tables.items():
        sheets.setdefault(name, []).append(sheet)


def no_lab_export(grid: Grid) -> Problem:
    """Return the problem for a file that is named as an export and is none."""
    return Problem(
        grid.file,
        grid.rows[0].number if grid.rows else None,
        "",
        "stop",
        "this is no export with one row a sample and analyte",
        "headings sample, analyte, value, unit; and if there are, qualifier, limit, dilution, type",
        "a table with a column for each analyte goes under readings",
    )


@contextmanager
def _told(problems: list[Problem], setting: Setting | None, file: str) -> Iterator[None]:
    """Gather what a sheet that does not open says, with the place where it is named."""
    try:
        yield
    except InputProblems as error:
        row, key = (setting.line, setting.key) if setting is not None else (None, "")
        problems.extend(
            p.at(file=file, row=row, column=key) if not p.file else p
            for p in error.problems
            if isinstance(p, Problem)
        )


def _bench_grids(
    text: str, folder: Path, decimal_mark: str | None, mapping: Mapping[str, str]
) -> list[Grid]:
    """The bench sheets of a file, every one of a workbook where none is named."""
    path = check_path_text(text)
    if path.lower().endswith(WORKBOOK_ENDINGS):
        grids = read_workbook(folder / path, path, decimal_mark)
    else:
        grids = [read_grid(path, folder, decimal_mark)]
    mapped = [grid.with_cells(mapping) for grid in grids]
    bench = [grid for grid in mapped if is_bench_sheet(grid)]
    if not bench:
        raise InputProblems([no_bench_sheet(path)])
    return bench


def _add_bench_sheets(
    bench: Sequence[Grid], sheets: dict[str, list[Sheet]], problems: list[Problem]
) -> None:
    """Add what bench sheets hold to the tables."""
    for grid in bench:
        problems.extend(grid.problems)
        taken = [c for sheet in sheets.get("tests", ()) for c in test_names(sheet)]
        for name, sheet in tables_of_bench_sheet(grid, problems, taken).items():
            sheets.setdefault(name, []).append(sheet)


def no_bench_sheet(file: str) -> Problem:
    """Return the problem for a file that is named as a bench sheet and is none."""
    return Problem(
        file,
        None,
        "",
        "stop",
        "no table of readings was found",
        "a row of headings with a time and at least two more, and readings under it",
        'write the headings in one row, as "Time h", "pH", "Cu mg/L"',
    )


def no_column_log(grid: Grid) -> Problem:
    """Return the problem for a file that is named as a column log and is none."""
    return Problem(
        grid.file,
        grid.rows[0].number if grid.rows else None,
        "",
        "stop",
        "this is no daily log of a column",
        "a row of headings with Day and PLS L",
        'write the headings in one row, as "Day", "Feed L", "PLS L", "PLS Cu g/L"',
    )


def tests_of_sheets(
    settings: Settings, sheets: SheetsByTable
) -> tuple[tuple[Test, ...], tuple[Problem, ...]]:
    """Return the tests of the bench sheets; none where no tests sheet is named or opens.

    A stop at opening a sheet takes out what it is about; everything else is read, so that a check
    can say how the tests stand.
    """
    bench = {name: found for name, found in sheets.items() if name in BENCH_SHEETS}
    if not bench:
        return (), ()
    try:
        return read_tests(bench, testwork_settings(settings))
    except InputProblems as error:
        return (), tuple(p for p in error.problems if isinstance(p, Problem))


def metals_of_sheets(settings: Settings, sheets: SheetsByTable) -> tuple[tuple[str, ...], str]:
    """Return the metals and the reagent that the sheets themselves speak of, "" where none."""
    bench = {name: found for name, found in sheets.items() if name in BENCH_SHEETS}
    tests, _ = read_tests(bench, replace(testwork_settings(settings), metals=(), reagent=None))
    dissolved = [n for test in tests for n in test.solution if not n.endswith(("+", "-"))]
    heads = {name for test in tests for name in test.heads}
    metals = dict.fromkeys([n for n in dissolved if n in heads] or dissolved)
    reagents = dict.fromkeys(test.reagent for test in tests if test.reagent)
    return tuple(metals), next(iter(reagents), "")


def testwork_settings(settings: Settings) -> TestworkSettings:
    """Return what testwork needs to know: metals, reagent, precision."""
    kinds = ("solution", "tail", "head", "residue")
    precision = {kind: settings.get(f"precision.{kind}") for kind in kinds}
    return TestworkSettings(
        metals=tuple(settings.get("campaign.metals") or ()),
        reagent=str(settings.get("campaign.reagent") or ""),
        precision={kind: pair for kind, pair in precision.items() if pair is not None},
        exclusions=tuple(exclusions(settings)),
        answers=answers_of(settings),
    )


def answers_of(settings: Settings) -> Answers:
    """Return what the user has answered about how the sheets are written."""

    def free(path: str) -> dict[str, Any]:
        return {name: setting.value for name, setting in settings.free.get(path, {}).items()}

    return Answers(
        decimal_mark=settings.get("sheets.decimal_mark"),
        negative_assays=settings.get("sheets.negative_assays"),
        codes=free("sheets.codes"),
        limits=free("sheets.limits"),
        ton=settings.get("sheets.ton"),
        mesh=settings.get("sheets.mesh"),
        electrode=settings.get("sheets.electrode"),
        solution_density_g_per_mL=settings.get("sheets.solution_density"),
        cyanide=settings.get("sheets.cyanide"),
        lime=settings.get("sheets.lime"),
        dates=settings.get("sheets.dates"),
        clock_times=settings.get("sheets.clock_times"),
        dilution=settings.get("sheets.dilution"),
        size_slope=settings.get("sheets.size_slope"),
        stock_solutions=free("sheets.stock_solutions"),
    )


def exclusions(settings: Settings) -> Iterator[Exclusion]:
    """Yield what the user keeps out of the fits; incomplete rows are problems already."""
    for group in settings.repeated.get("exclude", ()):
        value = {name: setting.value for name, setting in group.items()}
        if {"test", "time", "reason", "by"} <= set(value):
            time_h = None if value["time"] == "all" else float(value["time"])
            yield Exclusion(value["test"], time_h, value["reason"], value["by"])


def observed_of_sheet(
    settings: Settings, sheets: SheetsByTable
) -> tuple[tuple[Observed, ...], tuple[Problem, ...]]:
    """Return the extraction-only observations, none where no such sheet is named or opens."""
    observed: list[Observed] = []
    problems: list[Problem] = []
    part = settings.get("precision.solution") if "precision.solution" in settings.values else None
    given = settings.values.get("precision.solution")
    relative = part[1] if part is not None and given is not None and given.given else None
    for sheet in sheets.get("extraction", ()):
        if not any(p.level == "stop" for p in sheet.problems):
            found, told = read_extraction_sheet(sheet, relative)
            observed += found
            problems += told
    return tuple(observed), tuple(problems)


def cementation_tests_of_sheets(
    settings: Settings, sheets: SheetsByTable
) -> tuple[tuple[CementationTest, ...], tuple[Problem, ...]]:
    """Return the tests of concentration against time over a precipitant, none without a sheet."""
    tests: list[CementationTest] = []
    problems: list[Problem] = []
    for sheet in sheets.get("cementation_tests", ()):
        if not any(p.level == "stop" for p in sheet.problems):
            found, told = read_cementation_sheet(sheet, testwork_settings(settings))
            tests += found
            problems += told
    return tuple(tests), tuple(problems)
