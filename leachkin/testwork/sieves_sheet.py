"""The sieves sheet: mass that stays on each aperture, and assays by fraction."""

from __future__ import annotations

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
    Field("domain", "domain", names=("ore", "ore type", "domain or test")),
    Field("aperture", "aperture (mm)", ("mm",), ("sieve", "size"), needed=True),
    Field("retained", "retained (g)", ("g",), ("mass retained",), needed=True),
)
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
    if not {"aperture", "retained"} <= set(uses):
        return {}
    reader = CellReader(
        _pan_as_zero(sheet, uses["aperture"].position), uses, problems, settings.answers
    )
    aperture, retained = reader.numbers("aperture"), reader.numbers("retained")
    assays = {
        name: found[0]
        for name in of_family(uses, "assay")
        if (found := reader.assays(f"assay:{name}")) is not None
    }
    reader.finish()
    if aperture is None or retained is None:
        return {}
    tables = {}
    for name, rows in _groups(reader).items():
        table = _table(rows, aperture, retained, assays, settings, reader)
        if table is not None:
            tables[name] = table
    return tables


def _pan_as_zero(sheet: Sheet, position: int) -> Sheet:
    """The same sheet with the aperture of the pan written as 0."""
    rows = []
    for row in sheet.rows:
        if row.cells[position].casefold() in ("pan", "bottom"):
            cells = (*row.cells[:position], "0", *row.cells[position + 1 :])
            row = replace(row, cells=cells)
        rows.append(row)
    return replace(sheet, rows=tuple(rows))


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
        reader.uses["retained"].heading,
        "stop",
        "an aperture or a mass is missing, so the table has no shares",
        "a number in both cells of each row",
        'write 0 for an empty sieve, and "pan" for the aperture of the pan',
    )
