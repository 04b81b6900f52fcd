"""The sieves sheet: mass that stays on each aperture, and assays by fraction."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from leachkin.errors import InputProblems
from leachkin.files import Sheet
from leachkin.problems import Problem
from leachkin.testwork.cells import CellReader
from leachkin.testwork.columns import ASSAYED, Family, Field, of_family, resolve_columns
from leachkin.testwork.names import TEST_NAMES, fold_name
from leachkin.testwork.records import Array
from leachkin.testwork.settings import TestworkSettings
from leachkin.testwork.sizes import SizeDistribution

FIELDS = (
    Field("test", "test", names=TEST_NAMES),
    Field("domain", "domain", names=("ore", "ore type", "domain or test", "sample")),
    Field(
        "aperture",
        "aperture (mm)",
        ("mm",),
        ("sieve", "size", "mesh", "screen", "sieve size", "opening"),
        True,
    ),
    Field("retained", "retained (g)", ("g",), ("mass retained", "mass", "weight", "wt", "ret")),
    Field("share", "retained (%)", ("1",), ("ret", "mass", "weight", "wt")),
    Field(
        "passing",
        "passing (%)",
        ("1",),
        ("pass", "cum passing", "cumulative passing", "cum pass", "undersize"),
    ),
    Field(
        "cumulative",
        "cumulative retained (%)",
        ("1",),
        ("cum retained", "cum ret", "oversize"),
    ),
)
_AMOUNTS = ("retained", "share", "passing", "cumulative")
_TOTAL = re.compile(r"(?:grand )?(?:total|sum|calc(?:ulated)?\.? head|head)\b.*", re.I)
_SUM_OFF = 0.02  #: how far shares may be from 100 % before they are asked about
FAMILIES = (Family("assay", "{} (%)", ASSAYED, ("kg/t",), ("Cu", "Zn", "Au", "Ag")),)


@dataclass(frozen=True)
class SieveTable:
    """Sizes of one domain or test: by mass, and by analyte where fractions were assayed."""

    sizes: SizeDistribution
    by_analyte: Mapping[str, SizeDistribution]


def read_sieves_sheet(
    sheet: Sheet, settings: TestworkSettings, problems: list[Problem]
) -> dict[str, SieveTable]:
    """Read the sieves sheet.

    Parameters
    ----------
    sheet : Sheet
    settings : TestworkSettings
        The first metal that was assayed by fraction gives the metal shares of ``sizes``.
    problems : list of Problem
        Added to.

    Returns
    -------
    dict of folded test or domain name to SieveTable
        "" for a table that names neither.
    """
    uses = resolve_columns(sheet, FIELDS, FAMILIES, problems, settings, "sieves")
    if "aperture" not in uses or not set(_AMOUNTS) & set(uses):
        if "aperture" in uses:
            problems.append(_no_amount(sheet))
        return {}
    plain = _without_totals(sheet, uses["aperture"].position, problems)
    pans = _pan_as_zero(plain, uses["aperture"].position)
    reader = CellReader(pans, uses, problems, settings.answers)
    aperture = reader.numbers("aperture")
    amounts = {k: v for k in _AMOUNTS if (v := reader.numbers(k)) is not None}
    assays = {
        name: found[0]
        for name in of_family(uses, "assay")
        if (found := reader.assays(f"assay:{name}")) is not None
    }
    reader.finish()
    if aperture is None:
        return {}
    tables = {}
    for name, rows in _groups(reader).items():
        retained = _retained(rows, aperture, amounts, reader)
        table = None
        if retained is not None:
            table = _table(rows, aperture, retained, assays, settings, reader)
        if table is not None:
            tables[name] = table
    return tables


def _no_amount(sheet: Sheet) -> Problem:
    return Problem(
        sheet.file,
        sheet.header_row,
        "",
        "stop",
        "there is no column of what stays on each sieve or passes it",
        "retained (g), retained (%), cumulative retained (%) or passing (%)",
        'add a column "retained (g)"',
    )


def _without_totals(sheet: Sheet, position: int, problems: list[Problem]) -> Sheet:
    """The sheet without a row of totals, which is said."""
    totals = [row for row in sheet.rows if _TOTAL.fullmatch(row.cells[position])]
    if not totals:
        return sheet
    listed = ", ".join(f"{row.number} ({row.cells[position]!r})" for row in totals)
    found = f"rows {listed} are left out, as totals"
    problems.append(Problem(sheet.file, totals[0].number, "", "note", found))
    return replace(sheet, rows=tuple(row for row in sheet.rows if row not in totals))


def _pan_as_zero(sheet: Sheet, position: int) -> Sheet:
    """The same sheet with the aperture of the pan written as 0; a last -75 is the pan too."""
    rows = []
    for row in sheet.rows:
        cell = row.cells[position].casefold()
        below = re.fullmatch(r"[-<\u2212]\s*[0-9.,]+.*", cell) is not None
        if cell in ("pan", "bottom", "fines", "undersize") or below:
            cells = (*row.cells[:position], "0", *row.cells[position + 1 :])
            row = replace(row, cells=cells)
        rows.append(row)
    return replace(sheet, rows=tuple(rows))


def _retained(
    rows: list[int], aperture: Array, amounts: Mapping[str, Array], reader: CellReader
) -> Array | None:
    """What stays on each sieve, from whichever column says it; None where it cannot be had."""
    if "retained" in amounts and not np.isnan(amounts["retained"][rows]).all():
        return amounts["retained"]
    if "share" in amounts and not np.isnan(amounts["share"][rows]).all():
        _ask_sum(rows, amounts["share"], reader)
        return 100.0 * amounts["share"]
    for key in ("passing", "cumulative"):
        if key in amounts and not np.isnan(amounts[key][rows]).all():
            return _from_cumulative(rows, aperture, amounts[key], key, reader)
    return amounts.get("retained", amounts.get("share"))


def _ask_sum(rows: list[int], share: Array, reader: CellReader) -> None:
    total = float(np.nansum(share[rows]))
    if abs(total - 1.0) > _SUM_OFF:
        reader.problems.append(
            Problem(
                reader.sheet.file,
                reader.sheet.rows[rows[0]].number,
                reader.uses["share"].heading,
                "ask",
                f"the table sums to {100.0 * total:.1f} %: is the pan missing? Taken as the whole "
                "meanwhile",
                "98 to 102 % in all",
                "add the pan, or correct the shares",
            )
        )


def _from_cumulative(
    rows: list[int], aperture: Array, values: Array, key: str, reader: CellReader
) -> Array | None:
    """What stays on each sieve, from cumulative passing or retained."""
    size, share = aperture[rows], values[rows].copy()
    order = np.argsort(size)[::-1]
    pan = size == 0.0
    share[pan & np.isnan(share)] = 0.0 if key == "passing" else 1.0
    if np.isnan(size + share).any():
        return values
    steps = np.diff(share[order]) * (-1.0 if key == "passing" else 1.0)
    is_passing = key == "passing"
    if np.all(steps <= 0.0) and np.any(steps < 0.0):
        reader.problems.append(_wrong_way(rows, key, reader))
        is_passing = not is_passing
    elif np.any(steps < -1e-9):
        reader.problems.append(_not_monotone(rows[int(order[_first(steps)])], key, reader))
        return None
    passing = share[order] if is_passing else 1.0 - share[order]
    passing[size[order] == 0.0] = 0.0
    steps = np.diff(np.concatenate([[1.0], passing]))
    retained = values.copy()
    retained[np.asarray(rows)[order]] = np.maximum(-steps, 0.0) * 100.0
    return retained


def _wrong_way(rows: list[int], key: str, reader: CellReader) -> Problem:
    what, other = ("passing", "retained") if key == "passing" else ("retained", "passing")
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[rows[0]].number,
        reader.uses[key].heading,
        "ask",
        f"cumulative {what} rises with {'falling' if key == 'passing' else 'rising'} size: read as "
        f"cumulative {other} meanwhile",
        f"cumulative {what} that {'falls' if key == 'passing' else 'rises'} with falling size",
        f'write the heading as "{"cumulative retained" if key == "passing" else "passing"} (%)"',
    )


def _first(steps: Array) -> int:
    """Place after the first step that goes the wrong way."""
    return int(np.flatnonzero(steps < -1e-9)[0]) + 1


def _not_monotone(at: int, key: str, reader: CellReader) -> Problem:
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[at].number,
        reader.uses[key].heading,
        "stop",
        "the cumulative column goes up and down",
        "one direction from the coarsest sieve to the pan, between 0 and 100 %",
        "look for a mistyped number, or give retained (g)",
    )


def _groups(reader: CellReader) -> dict[str, list[int]]:
    groups: dict[str, list[int]] = {}
    for i, (test, domain) in enumerate(
        zip(reader.texts("test"), reader.texts("domain"), strict=True)
    ):
        groups.setdefault(fold_name(test or domain), []).append(i)
    return groups


def _table(
    rows: list[int],
    aperture: Array,
    retained: Array,
    assays: Mapping[str, Array],
    settings: TestworkSettings,
    reader: CellReader,
) -> SieveTable | None:
    if np.isnan(aperture[rows] + retained[rows]).any():
        reader.problems.append(_incomplete(reader, rows, aperture + retained))
        return None
    try:
        mass_only = SizeDistribution.from_sieves(aperture[rows], retained[rows])
        by_analyte = {
            name: SizeDistribution.from_sieves(aperture[rows], retained[rows], grade[rows])
            for name, grade in assays.items()
            if not np.isnan(grade[rows]).any()
        }
    except InputProblems as error:
        row = reader.sheet.rows[rows[0]].number
        reader.problems.extend(
            Problem(reader.sheet.file, row, p.column, "stop", p.found, p.allowed, p.try_this)
            for p in error.problems
            if isinstance(p, Problem)
        )
        return None
    first = next((metal for metal in settings.metals if metal in by_analyte), None)
    return SieveTable(by_analyte[first] if first else mass_only, by_analyte)


def _incomplete(reader: CellReader, rows: list[int], total: Array) -> Problem:
    i = next(i for i in rows if np.isnan(total[i]))
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        next(reader.uses[key].heading for key in _AMOUNTS if key in reader.uses),
        "stop",
        "an aperture or a mass is missing, so the table has no shares",
        "a number in both cells of each row",
        'write 0 for an empty sieve, and "pan" for the aperture of the pan',
    )
