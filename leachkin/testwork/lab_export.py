"""The long export of a laboratory: one row a sample and analyte, matched to test and time."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

from leachkin.files import Grid, Sheet, SheetRow, parse_numeral
from leachkin.problems import Problem
from leachkin.testwork.cells import code_meanings
from leachkin.testwork.columns import ELEMENTS, fold_heading
from leachkin.testwork.names import fold_name
from leachkin.testwork.quality import (
    DuplicatePair,
    QualityRecord,
    kind_of_pair,
    kind_of_sample,
    quality_notes,
    sample_without_mark,
)
from leachkin.testwork.sample_ids import Place, SampleNames
from leachkin.testwork.settings import TestworkSettings
from leachkin.testwork.trade_names import as_trade_name, plain_text

FORM = "laboratory export"
_COLUMNS = {
    "sample": ("sampleid", "sample", "sampleno", "samplename", "clientid", "clientsampleid",
               "clientsample", "samplenumber", "id"),
    "lab no": ("labno", "labnumber", "labid", "labsampleid"),
    "analyte": ("analyte", "element", "parameter", "determination", "component", "assay"),
    "value": ("value", "result", "reportedvalue", "numericresult", "concentration"),
    "qualifier": ("qualifier", "flag", "prefix", "symbol", "sign"),
    "unit": ("unit", "units", "uom"),
    "limit": ("lod", "detectionlimit", "limit", "mdl", "dl", "reportinglimit", "rl", "loq"),
    "dilution": ("dilution", "df", "dilutionfactor"),
    "type": ("type", "sampletype", "qctype", "qc"),
    "expected": ("expected", "certified", "certifiedvalue", "target", "targetvalue"),
    "job": ("job", "jobno", "jobnumber", "batch", "workorder", "certificate"),
    "date": ("date", "datereported", "reported", "dateanalysed", "dateanalyzed", "datereceived"),
}  # fmt: skip
_NEEDED = ("sample", "analyte", "value", "unit")
_ID_HEADINGS = ("sampleid", "sampleno", "samplenumber", "labno")


@dataclass
class _Result:
    """One row of the export as it is used."""

    row: int
    sample: str
    heading: str
    analyte: str
    unit: str
    text: str
    kind: str
    expected: str
    job: str = ""
    date: str = ""


@dataclass
class Export:
    """What an export gives: tables to read, sheets with assays put in, checks of quality."""

    tables: dict[str, Sheet] = field(default_factory=dict)
    replaced: dict[str, Sheet] = field(default_factory=dict)
    quality: list[QualityRecord] = field(default_factory=list)
    pairs: list[DuplicatePair] = field(default_factory=list)


def is_lab_export(grid: Grid) -> bool:
    """Return True where the first row has the headings of a long export."""
    return bool(grid.rows) and set(_NEEDED) <= set(_positions(grid.rows[0].cells))


def read_lab_export(
    grid: Grid,
    tests: Sequence[str],
    domains: Sequence[str],
    readings: Sequence[Sheet],
    settings: TestworkSettings,
    problems: list[Problem],
) -> Export:
    """Match the samples of an export to tests and times.

    Parameters
    ----------
    grid : Grid
    tests, domains : sequence of str
        The names that samples are matched to.
    readings : sequence of Sheet
        Sheets of readings; those with a column "sample id" get the assays of their samples.
    settings : TestworkSettings
    problems : list of Problem
        Added to.

    Returns
    -------
    Export
        ``tables`` has "readings", "heads" and "closeout" for samples whose names say where they
        belong; ``replaced`` the sheets of readings with assays put in, by file.
    """
    positions = _positions(grid.rows[0].cells)
    results = _results(grid, positions, settings, problems)
    export = Export()
    placed: list[tuple[Place, _Result]] = []
    by_id: dict[str, list[_Result]] = {fold_name(r.sample): [] for r in results}
    lost: dict[str, int] = {}
    known = _known_ids(readings)
    names = SampleNames(tests, domains)
    kinds = {
        key: kind_of_sample(*key) for key in dict.fromkeys((r.kind, r.sample) for r in results)
    }
    for result in results:
        kind = kinds[result.kind, result.sample]
        if kind in ("blank", "standard"):
            export.quality.append(_quality(grid, result, kind))
        elif fold_name(result.sample) in known:
            by_id[fold_name(result.sample)].append(result)
        elif (place := names.place(result.sample)) is not None:
            placed.append((place, result))
        else:
            lost.setdefault(result.sample, result.row)
    for sheet in readings:
        joined = _with_assays(sheet, by_id, problems)
        if joined is not sheet:
            export.replaced[sheet.file] = joined
    export.tables = _tables(grid, placed, export, problems)
    if lost:
        problems.append(_lost(grid, lost))
    problems.extend(quality_notes(export.quality, export.pairs, grid.file))
    return export


def read_quality(
    grid: Grid, settings: TestworkSettings, problems: list[Problem]
) -> tuple[list[QualityRecord], list[DuplicatePair]]:
    """Return the blanks, standards and duplicates of an export of any job, other samples left.

    Parameters
    ----------
    grid : Grid
    settings : TestworkSettings
    problems : list of Problem
        Added to.

    Returns
    -------
    records : list of QualityRecord
    pairs : list of DuplicatePair
        Two assays of one sample and analyte: the second one is marked as a duplicate, or has the
        same name.
    """
    records: list[QualityRecord] = []
    pairs: list[DuplicatePair] = []
    first: dict[tuple[str, str, str], _Result] = {}
    for result in _results(grid, _positions(grid.rows[0].cells), settings, problems):
        kind = kind_of_sample(result.kind, result.sample)
        if kind in ("blank", "standard"):
            records.append(_quality(grid, result, kind))
            continue
        key = (result.job, fold_name(sample_without_mark(result.sample)), result.analyte)
        before = first.setdefault(key, result)
        if before is not result:
            records.append(_quality(grid, result, "duplicate"))
            both = [_quality(grid, r, "duplicate") for r in (before, result)]
            pairs.append(DuplicatePair(kind_of_pair(result.sample, *both), both[0], both[1]))
    return records, pairs


def _positions(header: Sequence[str]) -> dict[str, int]:
    found: dict[str, int] = {}
    folded = [fold_heading(cell) for cell in header]
    for key, names in _COLUMNS.items():
        position = next((folded.index(name) for name in names if name in folded), None)
        if position is not None:
            found[key] = position
    return found


def _results(
    grid: Grid, positions: Mapping[str, int], settings: TestworkSettings, problems: list[Problem]
) -> list[_Result]:
    found: list[_Result] = []
    diluted: tuple[int, str] | None = None
    apply = settings.answers.dilution == "to apply"
    analytes: dict[str, str] = {}
    for row in grid.rows[1:]:
        cells = {key: row.cells[i] if i < len(row.cells) else "" for key, i in positions.items()}
        if not cells["sample"] or not cells["analyte"]:
            continue
        if cells["analyte"] not in analytes:
            analytes[cells["analyte"]] = _analyte(cells["analyte"], settings)
        analyte = analytes[cells["analyte"]]
        text = _value(cells)
        dilution = cells.get("dilution", "")
        if dilution not in ("", "1", "1.0", "0"):
            diluted = diluted or (row.number, dilution)
            text = _times(text, dilution, grid) if apply else text
        found.append(
            _Result(
                row.number,
                cells["sample"],
                f"{analyte} ({cells['unit']})",
                analyte,
                cells["unit"],
                text,
                cells.get("type", ""),
                cells.get("expected", ""),
                cells.get("job", ""),
                cells.get("date", ""),
            )
        )
    if diluted is not None and settings.answers.dilution is None:
        problems.append(_ask_dilution(grid, diluted))
    return found


def _analyte(text: str, settings: TestworkSettings) -> str:
    """``CU`` and ``Copper`` as ``Cu``; what names a titration as the readings write it."""
    plain = plain_text(text)
    if re.fullmatch(r"[A-Z]{2}", plain) and plain.capitalize() in ELEMENTS:
        return plain.capitalize()
    return as_trade_name(plain, settings, "readings")[0]


def _value(cells: Mapping[str, str]) -> str:
    value, qualifier = cells["value"].strip(), cells.get("qualifier", "").strip()
    limit = cells.get("limit", "").strip()
    if code_meanings().get((value or qualifier).casefold()) == "below limit" and limit:
        return f"<{limit}"
    if qualifier and qualifier[0] in "<>~\u2264\u2265" and value and value[0] not in "<>~":
        return f"{qualifier[0]}{value}"
    return value or qualifier


def _times(text: str, dilution: str, grid: Grid) -> str:
    sign = text[0] if text[:1] in ("<", ">", "~") else ""
    try:
        number = parse_numeral(text[len(sign) :], grid.decimal)
        factor = parse_numeral(dilution, grid.decimal)
    except ValueError:
        return text
    return f"{sign}{number * factor:.12g}".replace(".", grid.decimal)


def _ask_dilution(grid: Grid, diluted: tuple[int, str]) -> Problem:
    row, dilution = diluted
    return Problem(
        grid.file,
        row,
        "dilution",
        "ask",
        f"a dilution of {dilution}: is the value multiplied by it already? Taken as such meanwhile",
        '"applied" or "to apply"',
        'write dilution = "applied" or dilution = "to apply" under [sheets] in the settings',
        'sheets.dilution = "applied"',
    )


def _known_ids(readings: Sequence[Sheet]) -> set[str]:
    return {
        fold_name(row.cells[i])
        for sheet in readings
        for i in [_id_position(sheet)]
        if i is not None
        for row in sheet.rows
        if row.cells[i]
    }


def _id_position(sheet: Sheet) -> int | None:
    return next((i for i, h in enumerate(sheet.header) if fold_heading(h) in _ID_HEADINGS), None)


def _with_assays(
    sheet: Sheet, by_id: Mapping[str, Sequence[_Result]], problems: list[Problem]
) -> Sheet:
    """A sheet of readings with the assays of its samples in columns of their own."""
    position = _id_position(sheet)
    if position is None:
        return sheet
    wanted = [by_id.get(fold_name(row.cells[position]), ()) for row in sheet.rows]
    headings = list(dict.fromkeys(r.heading for results in wanted for r in results))
    new = [h for h in headings if h not in sheet.header]
    if not any(wanted):
        return sheet
    header = (*sheet.header, *new)
    rows, clash = [], None
    for row, results in zip(sheet.rows, wanted, strict=True):
        cells = [*row.cells, *("" for _ in new)]
        for result in results:
            at = header.index(result.heading)
            if cells[at] and cells[at] != result.text:
                clash = clash or (row.number, result)
            elif not cells[at]:
                cells[at] = result.text
        rows.append(SheetRow(row.number, tuple(cells)))
    count = sum(1 for results in wanted if results)
    found = f"assays of {count} samples are put in by their sample id"
    problems.append(Problem(sheet.file, None, "", "note", found))
    if clash is not None:
        problems.append(_clash(sheet, *clash))
    return replace(sheet, header=header, rows=tuple(rows))


def _clash(sheet: Sheet, row: int, result: _Result) -> Problem:
    return Problem(
        sheet.file,
        row,
        result.heading,
        "ask",
        f"the export has {result.text} for sample {result.sample}; the sheet's own number is used",
        "one number for each sample and analyte",
        "empty one of the two",
    )


def _tables(
    grid: Grid,
    placed: Sequence[tuple[Place, _Result]],
    export: Export,
    problems: list[Problem],
) -> dict[str, Sheet]:
    """The tables of samples whose names say where they belong; repeats become pairs."""
    grouped: dict[str, dict[tuple[str, ...], tuple[int, dict[str, str]]]] = {}
    first: dict[tuple[str, ...], _Result] = {}
    repeated: list[_Result] = []
    for place, result in sorted(placed, key=lambda item: item[0].duplicate):
        table = grouped.setdefault(place.table, {})
        mark = (place.table, *place.key, result.heading)
        if (before := first.setdefault(mark, result)) is not result:
            export.quality.append(_quality(grid, result, "duplicate"))
            export.pairs.append(_pair(place, before, result, grid))
            repeated.append(result)
            if place.table == "readings":
                continue
        number = 0
        while True:
            key = (*place.key, str(number))
            _, record = table.setdefault(key, (result.row, dict(place.record)))
            if result.heading not in record:
                record[result.heading] = result.text
                break
            number += 1
    if repeated:
        problems.append(_repeated(grid, repeated))
    return {
        name: _sheet(grid, name, list(table.values())) for name, table in grouped.items() if table
    }


def _pair(place: Place, before: _Result, result: _Result, grid: Grid) -> DuplicatePair:
    kinds = {"readings": "solution", "heads": "head", "closeout": "tail"}
    records = [_quality(grid, r, "duplicate") for r in (before, result)]
    return DuplicatePair(kinds[place.table], records[0], records[1])


def _sheet(grid: Grid, name: str, records: list[tuple[int, dict[str, str]]]) -> Sheet:
    if name == "readings":
        records.sort(key=lambda item: float(item[1]["time (h)"].replace(",", ".")))
    header = tuple(dict.fromkeys(h for _, record in records for h in record))
    decimal = grid.decimal
    rows = tuple(
        SheetRow(
            number,
            tuple(
                record.get(h, "").replace(".", decimal) if h == "time (h)" else record.get(h, "")
                for h in header
            ),
        )
        for number, record in records
    )
    return Sheet(grid.file, header, grid.rows[0].number, rows, decimal, (), grid.content, FORM)


def _repeated(grid: Grid, repeated: Sequence[_Result]) -> Problem:
    first = repeated[0]
    more = f" and {len(repeated) - 1} more" if len(repeated) > 1 else ""
    return Problem(
        grid.file,
        first.row,
        "",
        "note",
        f"a second {first.analyte} of sample {first.sample}{more}: the first one is used, the "
        "second counts as a duplicate assay (a head or a residue takes the mean)",
    )


def _lost(grid: Grid, lost: Mapping[str, int]) -> Problem:
    names = ", ".join(f"{name!r}" for name in list(lost)[:8])
    more = f" and {len(lost) - 8} more" if len(lost) > 8 else ""
    return Problem(
        grid.file,
        next(iter(lost.values())),
        "sample",
        "ask",
        f"samples that name no test and time: {names}{more}; they are not used",
        'names such as "B40 24 h", "B40 residue", "oxide head", or a column "sample id" in the '
        "readings",
        'add a column "sample id" to the readings with these names',
    )


def _quality(grid: Grid, result: _Result, kind: str) -> QualityRecord:
    return QualityRecord(
        kind,
        result.sample,
        result.analyte,
        result.text,
        result.unit,
        result.expected,
        grid.file,
        result.row,
        grid.decimal,
        result.job,
        result.date,
    )
