"""A campaign as read: settings, tests, register of assumptions and problems, and how to read it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from leachkin.campaign.assumed_values import assumed_problems
from leachkin.campaign.extraction_sheet import is_extraction_sheet
from leachkin.campaign.read_settings import assumptions_of, read_settings
from leachkin.campaign.schema import FORMAT
from leachkin.campaign.settings import Assumption, Settings
from leachkin.campaign.settings_sheet import (
    no_settings_sheet,
    nothing_in_workbook,
    read_settings_workbook,
)
from leachkin.campaign.sheets import (
    cementation_tests_of_sheets,
    metals_of_sheets,
    observed_of_sheet,
    read_sheets,
    tests_of_sheets,
)
from leachkin.cementation import CementationTest
from leachkin.errors import InputProblems
from leachkin.files import (
    WORKBOOK_ENDINGS,
    TomlDocument,
    check_path_text,
    read_csv_grid,
    read_toml,
)
from leachkin.problems import Problem, stop_if_any
from leachkin.run_record import sha256_of
from leachkin.testwork import Observed, Test, is_bench_sheet, is_column_log, is_lab_export


@dataclass(frozen=True)
class Campaign:
    """Everything that a run needs; nothing is read after this.

    Attributes
    ----------
    file : str
        Name of the campaign file, or of the one CSV.
    settings : Settings
        In the unit of each key, defaults filled in.
    tests : tuple of Test
    observed : tuple of Observed
        Extraction against time that was given directly, without a bench sheet.
    assumed : tuple of Assumption
    problems : tuple of Problem
        Notes and questions; a stop never gets this far.
    inputs : mapping of file name to SHA-256
    overrides : mapping of dotted key to text
        What-ifs of this run.
    cementation_tests : tuple of CementationTest
        Concentration against time over a precipitant.
    """

    file: str
    settings: Settings
    tests: tuple[Test, ...] = ()
    observed: tuple[Observed, ...] = ()
    assumed: tuple[Assumption, ...] = ()
    problems: tuple[Problem, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)
    overrides: Mapping[str, str] = field(default_factory=dict)
    cementation_tests: tuple[CementationTest, ...] = ()

    @property
    def title(self) -> str:
        """Title of the job."""
        return str(self.settings.get("campaign.title") or self.file)

    @property
    def metals(self) -> tuple[str, ...]:
        """Metals that get a rate law."""
        return tuple(self.settings.get("campaign.metals") or ())

    @property
    def reagent(self) -> str:
        """Leach reagent."""
        return str(self.settings.get("campaign.reagent") or "")


def read_campaign(path: str | Path, overrides: Mapping[str, str] | None = None) -> Campaign:
    """Read a campaign file and the sheets that it names, or one CSV of extraction against time.

    Parameters
    ----------
    path : str or Path
        ``campaign.toml``, a folder that holds one, a workbook with a sheet "settings", or a
        ``.csv``: extraction against time, or a bench sheet.
    overrides : mapping of dotted key to text, optional
        Values that win over the file for this run, as ``{"heap.lift_height": "8 m"}``; checked as
        the file is.

    Returns
    -------
    Campaign

    Raises
    ------
    InputProblems
        If anything has no meaning: every such problem at once, each with file and row.

    Examples
    --------
    >>> read_campaign("no_such_folder/campaign.toml")  # doctest: +ELLIPSIS
    Traceback (most recent call last):
    leachkin.errors.InputProblems: ...
    """
    campaign = read_leniently(path, overrides)
    stop_if_any(campaign.problems)
    return campaign


def read_leniently(path: str | Path, overrides: Mapping[str, str] | None = None) -> Campaign:
    """Return the campaign with every problem in it, stops too; for checking only.

    Raises
    ------
    InputProblems
        If the campaign file itself cannot be read.
    """
    place = Path(check_path_text(str(path)))
    if place.is_dir():
        place = place / "campaign.toml"
    if place.suffix.lower() == ".csv":
        grid = read_csv_grid(place)
        if is_bench_sheet(grid) and not is_extraction_sheet(grid.as_sheet()):
            return _of_bench_sheet(place, dict(overrides or {}))
        return _of_one_csv(place, dict(overrides or {}))
    if place.suffix.lower() in WORKBOOK_ENDINGS:
        return _of_workbook(place, dict(overrides or {}))
    document = read_toml(place)
    return _of_document(document, place.parent, dict(overrides or {}))


def _of_workbook(place: Path, overrides: dict[str, str]) -> Campaign:
    """A workbook with a settings sheet, tables on tabs, and bench sheets on others."""
    document, rest, problems = read_settings_workbook(place)
    tables = document.data.get("tables", {})
    bench = [f"{place.name}#{grid.tab}" for grid in rest if is_bench_sheet(grid)]
    if bench and "bench" not in tables and "tests" not in tables:
        document.data.setdefault("tables", tables)["bench"] = bench
    logs = [f"{place.name}#{grid.tab}" for grid in rest if is_column_log(grid)]
    if logs:
        document.data.setdefault("tables", tables).setdefault("column_log", logs)
    exports = [f"{place.name}#{grid.tab}" for grid in rest if is_lab_export(grid)]
    if exports:
        document.data.setdefault("tables", tables).setdefault("export", exports)
    if "campaign" in document.data or "format" in document.data:
        return _of_document(document, place.parent, overrides, problems)
    if not tables and not bench:
        raise nothing_in_workbook(place.name, [grid.tab for grid in rest])
    return _without_settings(document, place, overrides)


def _of_bench_sheet(place: Path, overrides: dict[str, str]) -> Campaign:
    """One bench sheet as CSV, without any settings."""
    data = {"tables": {"bench": [place.name]}}
    document = TomlDocument(place.name, data, {}, place.read_bytes())
    return _without_settings(document, place, overrides)


def _without_settings(document: TomlDocument, place: Path, overrides: dict[str, str]) -> Campaign:
    """Sheets alone: the metals and the reagent are those that they speak of, and asked."""
    data = {"format": FORMAT, "campaign": {"metals": ["?"], "title": place.name}, **document.data}
    settings, _ = read_settings(data, place.name, document.line_of, overrides)
    sheets, _ = read_sheets(settings, place.parent, place.name)
    metals, reagent = metals_of_sheets(settings, sheets)
    data["campaign"] = {"metals": list(metals or ("Cu",)), "title": place.name}
    if reagent:
        data["campaign"]["reagent"] = reagent
    asked = no_settings_sheet(place.name, metals, reagent or "H2SO4")
    return _of_document(replace(document, data=data), place.parent, overrides, (asked,))


def _of_document(
    document: TomlDocument,
    folder: Path,
    overrides: dict[str, str],
    before: tuple[Problem, ...] = (),
) -> Campaign:
    settings, problems = read_settings(document.data, document.file, document.line_of, overrides)
    sheets, sheet_problems = read_sheets(settings, folder, document.file)
    tests, test_problems = tests_of_sheets(settings, sheets)
    observed, observed_problems = observed_of_sheet(settings, sheets)
    cemented, cemented_problems = cementation_tests_of_sheets(settings, sheets)
    inputs = {document.file.split("#")[0]: sha256_of(document.content)}
    inputs |= {
        sheet.file.split("#")[0]: sha256_of(sheet.content)
        for found in sheets.values()
        for sheet in found
    }
    found = (*sheet_problems, *test_problems, *observed_problems, *cemented_problems)
    everything = (*before, *problems, *assumed_problems(settings, document.file), *found)
    return Campaign(
        document.file,
        settings,
        tests,
        observed,
        assumptions_of(settings),
        _without_repeats(everything),
        inputs,
        overrides,
        cemented,
    )


def _of_one_csv(place: Path, overrides: dict[str, str]) -> Campaign:
    settings, problems = read_settings(
        {
            "format": 1,
            "campaign": {"metals": ["extraction"], "title": place.name},
            "tables": {"extraction": place.name},
        },
        place.name,
        lambda _: None,
        overrides,
    )
    sheets, sheet_problems = read_sheets(settings, place.parent, place.name)
    observed, observed_problems = observed_of_sheet(settings, sheets)
    if not sheets:
        raise InputProblems(sheet_problems)
    inputs = {place.name: sha256_of(sheets["extraction"][0].content)}
    everything = (*problems, *sheet_problems, *observed_problems)
    kept = replace(settings, tables=frozenset({"campaign", "tables"}))
    return Campaign(
        place.name, kept, (), observed, (), _without_repeats(everything), inputs, overrides
    )


def _without_repeats(problems: tuple[Problem, ...]) -> tuple[Problem, ...]:
    return tuple(dict.fromkeys(problems))
