"""One workbook as a campaign: a sheet "settings" in place of the campaign file, tables on tabs."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from leachkin.campaign.schema import FORMAT, Key
from leachkin.campaign.schema_tables import SCHEMA
from leachkin.errors import InputProblems
from leachkin.files import Grid, TomlDocument, file_bytes, read_workbook
from leachkin.problems import Problem

SETTINGS_TAB = "settings"
#: Tabs that hold a table of the campaign, under other names too.
_TABLE_TABS = {
    "tests": "tests",
    "readings": "readings",
    "heads": "heads",
    "headassays": "heads",
    "closeout": "closeout",
    "products": "closeout",
    "sieves": "sieves",
    "extraction": "extraction",
    "cementationtests": "cementation_tests",
}
_COLUMNS = ("key", "value", "unit", "low", "high", "source", "by")
_HEADINGS = {"setting": "key", "name": "key", "parameter": "key", "note": "", "what": ""}
_LIST_KINDS = ("texts", "laws", "numbers", "fractions", "quantities")


@dataclass
class _Read:
    """What the settings sheet holds so far."""

    file: str
    data: dict[str, Any] = field(default_factory=dict)
    lines: dict[str, int] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)


def read_settings_workbook(
    path: Path, name: str = ""
) -> tuple[TomlDocument, tuple[Grid, ...], tuple[Problem, ...]]:
    """Read a workbook as the campaign file that its settings sheet stands for.

    Parameters
    ----------
    path : Path
    name : str
        Name to show in messages; the file name by default.

    Returns
    -------
    document : TomlDocument
        As a campaign file gives it; ``lines`` are rows of the settings sheet. Without a settings
        sheet its data is empty.
    grids : tuple of Grid
        Every other sheet that is no table of the campaign: bench sheets, perhaps.
    problems : tuple of Problem

    Raises
    ------
    InputProblems
        If the workbook cannot be read.
    """
    shown = name or path.name
    grids = read_workbook(path, shown)
    content = file_bytes(path, shown)
    tabs = {_folded(grid.tab): grid for grid in grids}
    settings = tabs.get(SETTINGS_TAB)
    read = _Read(settings.file if settings is not None else shown)
    if settings is not None:
        read.data["format"] = FORMAT
        _read_rows(settings, read)
    rest: list[Grid] = []
    for folded, grid in tabs.items():
        if grid is settings or folded in ("notes", "readme", "instructions", "lists"):
            continue
        table = SCHEMA.table(grid.tab.strip())
        if table is not None and (table.repeated or table.named):
            _read_groups(grid, read, named=table.named)
        elif folded in _TABLE_TABS:
            tables = read.data.setdefault("tables", {})
            tables.setdefault(_TABLE_TABS[folded], f"{shown}#{grid.tab}")
        else:
            rest.append(grid)
    document = TomlDocument(read.file, read.data, read.lines, content)
    return document, tuple(rest), tuple(read.problems)


def _folded(text: str) -> str:
    return re.sub(r"[\s_-]+", "", text.casefold())


def _read_rows(grid: Grid, read: _Read) -> None:
    columns, first = _columns(grid)
    prefix = ""
    for row in grid.rows[first:]:
        cells = {name: row.cells[i] if i < len(row.cells) else "" for name, i in columns.items()}
        key = cells.get("key", "").strip()
        if not key or key.startswith("#"):
            continue
        if section := re.fullmatch(r"\[+([A-Za-z0-9_.\" ]+?)\]+", key):
            prefix = f"{section[1].strip()}."
            _table_at(read, section[1].strip())
            continue
        if not cells.get("value"):
            continue  # a key left blank is a key left out
        dotted = key if prefix == "" or "." in key else f"{prefix}{key}"
        _put(read, dotted, cells, row.number)


def _columns(grid: Grid) -> tuple[dict[str, int], int]:
    """Positions of key, value, unit and so on, and where the rows begin."""
    head = [_HEADINGS.get(_folded(cell), _folded(cell)) for cell in grid.rows[0].cells]
    if "key" in head and "value" in head:
        return {name: head.index(name) for name in _COLUMNS if name in head}, 1
    return {"key": 0, "value": 1, "unit": 2}, 0


def _parts(dotted: str) -> list[str]:
    return [part.strip("\"' ") for part in re.findall(r'"[^"]*"|[^."]+', dotted)]


def _table_at(read: _Read, dotted: str) -> dict[str, Any]:
    table = read.data
    for part in _parts(dotted):
        below = table.setdefault(part, {})
        if not isinstance(below, dict):
            below = table[part] = {}
        table = below
    return table


def _put(read: _Read, dotted: str, cells: Mapping[str, str], number: int) -> None:
    parts = _parts(dotted)
    for length in range(1, len(parts) + 1):
        read.lines.setdefault(".".join(parts[:length]), number)
    if parts == ["format"]:
        return
    if len(parts) < 2:
        read.problems.append(
            Problem(
                read.file,
                number,
                dotted,
                "stop",
                f"the key {dotted!r} names no table",
                "a key such as campaign.metals, or [campaign] in a row above",
                f"write campaign.{dotted}, or the table it belongs to",
            )
        )
        return
    table = _table_at(read, ".".join(parts[:-1]))
    key = _key_of(parts)
    value = _value(key, cells.get("value", ""), cells.get("unit", ""))
    ends = {end: cells[end] for end in ("low", "high", "source", "by") if cells.get(end)}
    if key is not None and key.ranged and {"low", "high"} & set(ends):
        ranged = {
            name: _value(key, text, cells.get("unit", "")) if name in ("low", "high") else text
            for name, text in ends.items()
        }
        table[parts[-1]] = {"value": value, **ranged}
        return
    table[parts[-1]] = value


def _key_of(parts: Sequence[str]) -> Key | None:
    path = ".".join(parts[:-1])
    table = SCHEMA.table(path)
    if table is not None:
        return table.free or table.key(parts[-1])
    above = SCHEMA.table(".".join(parts[:-2]))
    return above.key(parts[-1]) if above is not None and above.named else None


def _value(key: Key | None, text: str, unit: str) -> Any:
    """A cell as the campaign file would hold it, by the kind of its key."""
    kind = key.kind if key is not None else "text"
    written = f"{text} {unit}".strip() if unit else text
    if kind in _LIST_KINDS:
        items = [item.strip() for item in re.split(r"[;,]", text.strip("[] ")) if item.strip()]
        one = {"numbers": "number", "quantities": "quantity", "fractions": "fraction"}.get(kind)
        return [_scalar(one or "text", f"{item} {unit}".strip()) for item in items]
    return _scalar(kind, written)


def _scalar(kind: str, text: str) -> Any:
    if kind == "boolean" and text.strip().casefold() in ("true", "false", "yes", "no"):
        return text.strip().casefold() in ("true", "yes")
    if kind in ("number", "integer", "fraction", "choice or number", "choice or fraction"):
        try:
            return float(text)
        except ValueError:
            return text
    if kind == "number or quantity":
        try:
            return float(text)
        except ValueError:
            return text
    if kind == "date":
        return text.partition(" ")[0]
    return text


def _read_groups(grid: Grid, read: _Read, named: bool) -> None:
    """A tab named after a table of many: one row an entry; the first column names it if need be."""
    path = grid.tab.strip()
    table = SCHEMA.table(path)
    header = [cell.strip() for cell in grid.rows[0].cells]
    groups: list[dict[str, Any]] = []
    names: dict[str, dict[str, Any]] = {}
    for position, row in enumerate(grid.rows[1:]):
        cells = dict(zip(header, row.cells, strict=False))
        name = row.cells[0] if named else ""
        read.lines[f"{path}.{name if named else position}"] = row.number
        group: dict[str, Any] = {}
        for heading, text in cells.items():
            if not text or not heading or (named and heading == header[0]):
                continue
            key = table.key(heading) if table is not None else None
            group[heading] = _value(key, text, "")
            read.lines[f"{path}.{name if named else position}.{heading}"] = row.number
        groups.append(group)
        names[name] = group
    *above, last = _parts(path)
    parent = _table_at(read, ".".join(above)) if above else read.data
    parent[last] = names if named else groups


def no_settings_sheet(file: str, metals: Sequence[str], reagent: str) -> Problem:
    """Return the question for a workbook or a bench sheet without settings."""
    listed = ", ".join(metals) or "Cu"
    return Problem(
        file,
        None,
        "",
        "ask",
        f"there are no settings: metals {listed} and reagent {reagent} are taken from the sheets "
        "meanwhile",
        'a sheet "settings" with the columns key, value, unit',
        f'add a sheet "settings" with the rows campaign.metals | {listed} and '
        f"campaign.reagent | {reagent}",
    )


def nothing_in_workbook(file: str, tabs: Sequence[str]) -> InputProblems:
    """Return the error for a workbook in which nothing is known."""
    return InputProblems(
        [
            Problem(
                file,
                None,
                "",
                "stop",
                f"none of the sheets {', '.join(tabs) or '(empty)'} is one that is known",
                "sheets named settings, tests, readings, heads, closeout, sieves or extraction, or "
                "bench sheets with a row of headings that begins with Time",
                "start from a workbook of: leachkin template DIR --kind bottle-rolls",
            )
        ]
    )
