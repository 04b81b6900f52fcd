"""A campaign as read: settings, tests, register of assumptions and problems, and how to read it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from leachkin.campaign.read_settings import assumptions_of, read_settings
from leachkin.campaign.settings import Assumption, Settings
from leachkin.campaign.sheets import observed_of_sheet, read_sheets, tests_of_sheets
from leachkin.errors import InputProblems
from leachkin.files import TomlDocument, check_path_text, read_toml
from leachkin.problems import Problem, stop_if_any
from leachkin.run_record import sha256_of
from leachkin.testwork import Observed, Test


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
    """

    file: str
    settings: Settings
    tests: tuple[Test, ...] = ()
    observed: tuple[Observed, ...] = ()
    assumed: tuple[Assumption, ...] = ()
    problems: tuple[Problem, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)
    overrides: Mapping[str, str] = field(default_factory=dict)

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
        ``campaign.toml``, a folder that holds one, or a ``.csv`` with a time and an extraction
        column.
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
        return _of_one_csv(place, dict(overrides or {}))
    document = read_toml(place)
    return _of_document(document, place.parent, dict(overrides or {}))


def _of_document(document: TomlDocument, folder: Path, overrides: dict[str, str]) -> Campaign:
    settings, problems = read_settings(document.data, document.file, document.line_of, overrides)
    sheets, sheet_problems = read_sheets(settings, folder, document.file)
    tests, test_problems = tests_of_sheets(settings, sheets)
    observed, observed_problems = observed_of_sheet(settings, sheets)
    inputs = {document.file: sha256_of(document.content)}
    inputs |= {sheet.file.split("#")[0]: sha256_of(sheet.content) for sheet in sheets.values()}
    everything = (*problems, *sheet_problems, *test_problems, *observed_problems)
    return Campaign(
        document.file,
        settings,
        tests,
        observed,
        assumptions_of(settings),
        _without_repeats(everything),
        inputs,
        overrides,
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
    inputs = {place.name: sha256_of(sheets["extraction"].content)}
    everything = (*problems, *sheet_problems, *observed_problems)
    kept = replace(settings, tables=frozenset({"campaign", "tables"}))
    return Campaign(
        place.name, kept, (), observed, (), _without_repeats(everything), inputs, overrides
    )


def _without_repeats(problems: tuple[Problem, ...]) -> tuple[Problem, ...]:
    return tuple(dict.fromkeys(problems))
