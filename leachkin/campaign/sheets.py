"""Opens the sheets that a campaign names and hands them to testwork."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from leachkin.campaign.extraction_sheet import read_extraction_sheet
from leachkin.campaign.settings import Settings
from leachkin.errors import InputProblems
from leachkin.files import Sheet, read_sheet
from leachkin.problems import Problem
from leachkin.testwork import Answers, Exclusion, Observed, Test, TestworkSettings, read_tests

#: The sheets that hold bench tests; the extraction sheet is read on its own.
BENCH_SHEETS = ("tests", "readings", "heads", "closeout", "sieves")


def read_sheets(
    settings: Settings, folder: Path, file: str
) -> tuple[dict[str, Sheet], tuple[Problem, ...]]:
    """Return the sheets that open, by name, and a problem for each that does not."""
    sheets: dict[str, Sheet] = {}
    problems: list[Problem] = []
    decimal_mark = settings.get("sheets.decimal_mark")
    for name in (*BENCH_SHEETS, "extraction"):
        setting = settings.values.get(f"tables.{name}")
        if setting is None:
            continue
        try:
            sheets[name] = read_sheet(str(setting.value), folder, decimal_mark)
            problems.extend(sheets[name].problems)
        except InputProblems as error:
            key = f"tables.{name}"
            problems.extend(
                p.at(file=file, row=setting.line, column=key) if not p.file else p
                for p in error.problems
                if isinstance(p, Problem)
            )
    return sheets, tuple(problems)


def tests_of_sheets(
    settings: Settings, sheets: Mapping[str, Sheet]
) -> tuple[tuple[Test, ...], tuple[Problem, ...]]:
    """Return the tests of the bench sheets; none where no tests sheet is named or opens.

    A stop at opening a sheet takes out what it is about; everything else is read, so that a check
    can say how the tests stand.
    """
    bench = {name: sheet for name, sheet in sheets.items() if name in BENCH_SHEETS}
    if not bench:
        return (), ()
    try:
        return read_tests(bench, testwork_settings(settings))
    except InputProblems as error:
        return (), tuple(p for p in error.problems if isinstance(p, Problem))


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
    settings: Settings, sheets: Mapping[str, Sheet]
) -> tuple[tuple[Observed, ...], tuple[Problem, ...]]:
    """Return the extraction-only observations, none where no such sheet is named or opens."""
    sheet = sheets.get("extraction")
    if sheet is None or any(p.level == "stop" for p in sheet.problems):
        return (), ()
    part = settings.get("precision.solution") if "precision.solution" in settings.values else None
    given = settings.values.get("precision.solution")
    relative = part[1] if part is not None and given is not None and given.given else None
    return read_extraction_sheet(sheet, relative)
