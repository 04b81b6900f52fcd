"""Headings of a laboratory's own: which column of this program each stands for, kept in a file."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path

from leachkin.campaign.schema_sheets import MAPPED
from leachkin.campaign.settings import Settings
from leachkin.errors import InputProblems, nearest_names
from leachkin.files import Sheet, check_path_text, fold_cell, read_toml
from leachkin.problems import Problem, unknown_name

IGNORE = "ignore"


def read_mappings(
    settings: Settings, folder: Path, file: str, problems: list[Problem]
) -> dict[str, dict[str, str]]:
    """Return the mappings of a campaign by table: folded heading to column.

    Those of the campaign itself win over those of the mapping file.

    Parameters
    ----------
    settings : Settings
    folder : Path
        Folder of the campaign.
    file : str
        Campaign file, for messages.
    problems : list of Problem
        Added to.

    Returns
    -------
    dict of table name to dict of str to str
    """
    found = {name: _from_file(settings, folder, file, problems).get(name, {}) for name in MAPPED}
    for name in MAPPED:
        own = settings.free.get(f"mapping.{name}", {})
        found[name] = found[name] | {fold_cell(k): str(s.value) for k, s in own.items()}
    return found


def _from_file(
    settings: Settings, folder: Path, file: str, problems: list[Problem]
) -> dict[str, dict[str, str]]:
    setting = settings.values.get("mapping.file")
    if setting is None:
        return {}
    try:
        document = read_toml(folder / check_path_text(str(setting.value)), str(setting.value))
    except InputProblems as error:
        problems.extend(
            p.at(file=file, row=setting.line, column="mapping.file")
            for p in error.problems
            if isinstance(p, Problem)
        )
        return {}
    found: dict[str, dict[str, str]] = {}
    for name, table in document.data.items():
        line = document.line_of(name)
        if name not in MAPPED:
            problems.append(unknown_name("table", name, MAPPED, file=document.file, row=line))
        elif not isinstance(table, Mapping) or not all(isinstance(v, str) for v in table.values()):
            words = (f"[{name}] is no table of headings", '"their heading" = "Cu (mg/L)"')
            problems.append(Problem(document.file, line, name, "stop", *words))
        else:
            found[name] = {fold_cell(heading): column for heading, column in table.items()}
    return found


def with_mapped_headings(
    sheet: Sheet, mapping: Mapping[str, str], problems: list[Problem]
) -> Sheet:
    """Return a sheet with the headings of this program in place of a laboratory's own.

    Parameters
    ----------
    sheet : Sheet
    mapping : mapping of folded heading to column
    problems : list of Problem
        Added to: what was mapped, and headings of the mapping that the sheet has not.

    Returns
    -------
    Sheet
    """
    if not mapping:
        return sheet
    header, used = [], []
    for heading in sheet.header:
        column = mapping.get(fold_cell(heading))
        if column is None:
            header.append(heading)
            continue
        used.append(fold_cell(heading))
        header.append(f"note {heading}" if column.casefold() == IGNORE else column)
    absent = [heading for heading in mapping if heading not in used]
    if used:
        found = f"{len(used)} headings are read by the mapping"
        problems.append(Problem(sheet.file, sheet.header_row, "", "note", found))
    if absent and not used:
        near = nearest_names(absent[0], sheet.header)
        problems.append(
            Problem(
                sheet.file,
                sheet.header_row,
                "",
                "ask",
                f"no heading of the mapping is in this sheet, as {absent[0]!r}",
                ", ".join(sheet.header),
                f"did you mean {near[0]!r}?" if near else "look at the mapping",
            )
        )
    return replace(sheet, header=tuple(header))
