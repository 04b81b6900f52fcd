"""The one reader of the package's tables."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from functools import cache, lru_cache
from importlib import resources

from leachkin.errors import TableError, nearest_names

#: How far a value can be trusted. "from memory" is an editable default, never a check value.
STATUSES = ("printed", "computed", "exact", "convention", "common practice", "from memory")


@dataclass(frozen=True)
class Row:
    """One row of a table: text by column name, read as numbers on request."""

    table: str
    line: int
    cells: dict[str, str]

    def text(self, column: str) -> str:
        """Return the text of a cell.

        Raises
        ------
        TableError
            If the table has no such column.
        """
        try:
            return self.cells[column]
        except KeyError:
            known = ", ".join(nearest_names(column, self.cells) or self.cells)
            raise TableError(f"{self.table}: no column {column!r}; there are: {known}") from None

    def number(self, column: str) -> float:
        """Return a cell as a float.

        Raises
        ------
        TableError
            If the cell is empty or not a number.
        """
        cell = self.text(column)
        try:
            return float(cell)
        except ValueError:
            raise TableError(
                f"{self.table}, line {self.line}, column {column!r}: {cell!r} is not a number"
            ) from None

    def number_or_none(self, column: str) -> float | None:
        """Return a cell as a float, or None where the cell is empty."""
        return self.number(column) if self.text(column) else None


@dataclass(frozen=True)
class Table:
    """A table from print."""

    name: str
    columns: tuple[str, ...]
    rows: tuple[Row, ...]

    def where(self, column: str, value: str) -> tuple[Row, ...]:
        """Return the rows whose cell equals the value."""
        return tuple(row for row in self.rows if row.text(column) == value)

    def first(self, column: str, value: str) -> Row:
        """Return the first row whose cell equals the value.

        Raises
        ------
        TableError
            If there is none; the message names the nearest values.
        """
        found = self.where(column, value)
        if found:
            return found[0]
        known = [row.text(column) for row in self.rows]
        near = ", ".join(nearest_names(value, known)) or ", ".join(sorted(set(known))[:12])
        raise TableError(f"{self.name} has no {column} {value!r}; nearest: {near}")


@cache
def read_table(name: str) -> Table:
    """Read ``tables/data/NAME.csv`` and check that every row names a known source and status.

    Parameters
    ----------
    name : str
        File name without ``.csv``.

    Returns
    -------
    Table

    Raises
    ------
    TableError
        If the file is missing, a row is short, or a source or a status is unknown.
    """
    table = _read_file(name)
    if "source" in table.columns:
        known = sources()
        for row in table.rows:
            _check_provenance(row, known)
    return table


@lru_cache(maxsize=1)
def sources() -> dict[str, str]:
    """Return the citation of every source key."""
    return {row.text("key"): row.text("citation") for row in _read_file("sources").rows}


def source_citation(key: str) -> str:
    """Return the citation of a source key.

    Raises
    ------
    TableError
        If the key is unknown.
    """
    try:
        return sources()[key]
    except KeyError:
        near = ", ".join(nearest_names(key, sources()))
        raise TableError(f"unknown source key {key!r}; nearest: {near}") from None


def _read_file(name: str) -> Table:
    path = resources.files("leachkin.tables").joinpath("data", f"{name}.csv")
    try:
        text = path.read_text(encoding="utf-8")
    except FileNotFoundError:
        raise TableError(f"the package has no table {name!r}") from None
    lines = list(csv.reader(text.splitlines()))
    columns = tuple(lines[0])
    rows = []
    for number, cells in enumerate(lines[1:], start=2):
        if len(cells) != len(columns):
            raise TableError(f"{name}, line {number}: {len(cells)} cells, not {len(columns)}")
        rows.append(Row(name, number, dict(zip(columns, cells, strict=True))))
    return Table(name, columns, tuple(rows))


def _check_provenance(row: Row, known: dict[str, str]) -> None:
    if row.text("source") not in known:
        raise TableError(f"{row.table}, line {row.line}: unknown source {row.text('source')!r}")
    if row.text("status") not in STATUSES:
        raise TableError(f"{row.table}, line {row.line}: unknown status {row.text('status')!r}")
