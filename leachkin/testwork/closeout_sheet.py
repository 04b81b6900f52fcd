"""The close-out sheet: what was weighed, measured and assayed when a test ended."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from leachkin.files import Sheet
from leachkin.problems import Problem
from leachkin.testwork.cells import CellReader
from leachkin.testwork.columns import ASSAYED, Family, Field, of_family, resolve_columns
from leachkin.testwork.names import TEST_NAMES, TestNames, fold_name
from leachkin.testwork.records import Array, Product
from leachkin.testwork.settings import TestworkSettings

FIELDS = (
    Field("test", "test", names=TEST_NAMES, needed=True),
    Field("product", "product", needed=True),
    Field("mass", "mass (g)", ("g",), ("dry mass", "residue mass")),
    Field("volume", "volume (mL)", ("mL",)),
    Field("replicate", "replicate", names=("assay no",)),
)
#: An analyte column may be of a solid (kg/t inside) or of a solution (g/L inside).
FAMILIES = (Family("assay", "{} (%)", ASSAYED, ("kg/t", "g/L"), ("Cu", "Fe", "Zn", "Au", "Ag")),)


@dataclass(frozen=True)
class _Amounts:
    """Mass [g] and volume [mL] of the rows of one product, NaN where blank."""

    mass_g: Array
    volume_mL: Array


def read_closeout_sheet(
    sheet: Sheet, settings: TestworkSettings, names: TestNames, problems: list[Problem]
) -> dict[str, tuple[tuple[Product, ...], tuple[int, ...]]]:
    """Read the close-out sheet.

    Parameters
    ----------
    sheet : Sheet
    settings : TestworkSettings
        For the precision of tail and solution assays.
    names : TestNames
        The tests there are.
    problems : list of Problem
        Added to.

    Returns
    -------
    dict of test name to (products, row numbers)
        Rows of one product with the same amount, or without one, are replicate assays. A product
        with a mass and a volume, such as slurry, becomes its solids and its solution.
    """
    uses = resolve_columns(sheet, FIELDS, FAMILIES, problems, settings, "closeout")
    if not {"test", "product"} <= set(uses):
        return {}
    reader = CellReader(sheet, uses, problems, settings.answers)
    columns = _Columns(reader)
    found: dict[str, tuple[tuple[Product, ...], tuple[int, ...]]] = {}
    for test, rows in _rows_by_test(reader, names).items():
        products: list[Product] = []
        for group in _rows_by_product(rows, reader, columns.amounts):
            products.extend(_products(group, reader, columns, settings))
        found[test] = (tuple(products), tuple(sheet.rows[i].number for i in rows))
    reader.finish()
    return found


class _Columns:
    """The numeric columns of the whole sheet."""

    def __init__(self, reader: CellReader) -> None:
        absent = np.full(len(reader.sheet.rows), np.nan)
        read = {key: reader.numbers(key) for key in ("mass", "volume")}
        amounts = {}
        for key, values in read.items():
            amounts[key] = absent.copy() if values is None else values
            if values is not None:
                reader.flag(key, values < 0.0, "a number from 0 up")
                amounts[key][values < 0.0] = np.nan
        self.amounts = _Amounts(amounts["mass"], amounts["volume"])
        self.solid = self._assays(reader, "kg/t")
        self.solution = self._assays(reader, "g/L")

    @staticmethod
    def _assays(reader: CellReader, unit: str) -> dict[str, tuple[Array, Array]]:
        found = {}
        for name in of_family(reader.uses, "assay"):
            analyte, _, target = name.partition("@")
            if target == unit and (read := reader.assays(f"assay:{name}")) is not None:
                found[analyte] = (read[0], read[1].astype(np.float64))
        return found


def _rows_by_test(reader: CellReader, names: TestNames) -> dict[str, list[int]]:
    groups: dict[str, list[int]] = {}
    heading = reader.uses["test"].heading
    for i, text in enumerate(reader.texts("test")):
        row = reader.sheet.rows[i].number
        test = names.find(text, reader.sheet.file, row, heading, reader.problems)
        if test is not None:
            groups.setdefault(test, []).append(i)
    return groups


def _rows_by_product(rows: Sequence[int], reader: CellReader, amounts: _Amounts) -> list[list[int]]:
    """Rows of the same product; rows with other amounts and no replicate mark stand alone."""
    texts, replicate = reader.texts("product"), reader.texts("replicate")
    groups: list[list[int]] = []
    for i in rows:
        if not texts[i]:
            reader.problems.append(_no_product(reader, i))
            continue
        for group in groups:
            same_name = fold_name(texts[group[0]]) == fold_name(texts[i])
            if same_name and (replicate[i] or _same_amount(group[0], i, amounts)):
                group.append(i)
                break
        else:
            groups.append([i])
    return groups


def _no_product(reader: CellReader, i: int) -> Problem:
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        reader.uses["product"].heading,
        "stop",
        "the row names no product",
        "filtrate, wash, residue, carbon, slurry or another name",
        "name it",
    )


def _same_amount(one: int, other: int, amounts: _Amounts) -> bool:
    return all(
        np.isnan(values[other]) or values[other] == values[one]
        for values in (amounts.mass_g, amounts.volume_mL)
    )


def _products(
    rows: list[int], reader: CellReader, columns: _Columns, settings: TestworkSettings
) -> list[Product]:
    name = " ".join(reader.texts("product")[rows[0]].split())
    mass, volume = _mean(columns.amounts.mass_g[rows]), _mean(columns.amounts.volume_mL[rows])
    solid = _grades(rows, columns.solid, "tail", settings)
    solution = _grades(rows, columns.solution, "solution", settings)
    both = (mass is not None or bool(solid[0])) and (volume is not None or bool(solution[0]))
    made = []
    if mass is not None or solid[0]:
        written = _replicates(rows, columns.solid, reader)
        made.append(Product(f"{name} solids" if both else name, False, mass, *solid, *written))
    if volume is not None or solution[0]:
        written = _replicates(rows, columns.solution, reader)
        named = f"{name} solution" if both else name
        made.append(Product(named, True, volume, *solution, *written))
    for product in made:
        if product.amount is None:
            reader.problems.append(_no_amount(reader, rows[0], product))
    if not made:
        reader.problems.append(_empty_product(reader, rows[0], name))
    return made


def _mean(values: Array) -> float | None:
    known = values[~np.isnan(values)]
    return float(known.mean()) if known.size else None


def _grades(
    rows: list[int],
    columns: Mapping[str, tuple[Array, Array]],
    kind: str,
    settings: TestworkSettings,
) -> tuple[dict[str, tuple[float, float, int]], dict[str, int]]:
    """Mean, its standard deviation and count of the replicates, and bounds, by analyte."""
    grades: dict[str, tuple[float, float, int]] = {}
    bounds: dict[str, int] = {}
    for analyte, (values, bound) in columns.items():
        known = [i for i in rows if not np.isnan(values[i])]
        plain = [i for i in known if bound[i] == 0]
        if plain:
            mean = float(np.mean(values[plain]))
            sd = float(settings.sd(kind, mean, analyte)) / np.sqrt(len(plain))
            grades[analyte] = (mean, float(sd), len(plain))
        elif known:
            limit = float(np.min(values[known]) if bound[known[0]] < 0 else np.max(values[known]))
            grades[analyte] = (limit, float(settings.sd(kind, limit, analyte)), len(known))
            bounds[analyte] = int(bound[known[0]])
    return grades, bounds


def _replicates(
    rows: list[int], columns: Mapping[str, tuple[Array, Array]], reader: CellReader
) -> tuple[dict[str, tuple[float, ...]], dict[str, tuple[int, ...]]]:
    """Every assay that is a value, and its row, by analyte."""
    values: dict[str, tuple[float, ...]] = {}
    numbers: dict[str, tuple[int, ...]] = {}
    for analyte, (read, bound) in columns.items():
        plain = [i for i in rows if not np.isnan(read[i]) and bound[i] == 0]
        if plain:
            values[analyte] = tuple(float(read[i]) for i in plain)
            numbers[analyte] = tuple(reader.sheet.rows[i].number for i in plain)
    return values, numbers


def _no_amount(reader: CellReader, i: int, product: Product) -> Problem:
    what = "volume" if product.is_solution else "mass"
    found = f"the {what} of the {product.name} is missing"
    if not product.is_solution:
        found += "; the charge is taken for it meanwhile, which reads the tail high"
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        "volume (mL)" if product.is_solution else "mass (g)",
        "ask",
        found,
        "a number from 0 up",
        f"fill in the {what}",
    )


def _empty_product(reader: CellReader, i: int, name: str) -> Problem:
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        "product",
        "note",
        f"{name} has neither an amount nor an assay; it is not used",
    )
