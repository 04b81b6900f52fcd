"""One table type for every result: a name, columns with key, heading and unit, and rows.

The report layer renders it as CSV, XLSX, HTML or terminal text; only ``to_frame`` uses pandas.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas

Cell = float | int | str | bool | None


@dataclass(frozen=True)
class Column:
    """A column: key for programs, heading for people, unit ("" for text or a bare number).

    ``digits`` is how many significant digits a person wants to see; files keep them all.
    """

    key: str
    heading: str
    unit: str = ""
    digits: int = 4

    @property
    def title(self) -> str:
        """Heading with the unit in brackets."""
        return f"{self.heading} ({self.unit})" if self.unit else self.heading


@dataclass(frozen=True)
class ResultTable:
    """A table of results, its cells plain numbers and text."""

    name: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]
    caption: str = ""

    @classmethod
    def from_records(
        cls,
        name: str,
        columns: Iterable[Column],
        records: Iterable[Mapping[str, Any]],
        caption: str = "",
    ) -> ResultTable:
        """Make a table from mappings of column key to cell; a missing key is an empty cell."""
        listed = tuple(columns)
        rows = tuple(
            tuple(_plain(record.get(column.key)) for column in listed) for record in records
        )
        return cls(name, listed, rows, caption)

    def column(self, key: str) -> list[Cell]:
        """Return one column's cells.

        Raises
        ------
        KeyError
            If there is no such column.
        """
        keys = [column.key for column in self.columns]
        if key not in keys:
            raise KeyError(f"{self.name} has no column {key!r}; there are: {', '.join(keys)}")
        position = keys.index(key)
        return [row[position] for row in self.rows]

    def to_records(self) -> list[dict[str, Cell]]:
        """Return the rows as dictionaries by column key."""
        keys = [column.key for column in self.columns]
        return [dict(zip(keys, row, strict=True)) for row in self.rows]

    def to_frame(self) -> pandas.DataFrame:
        """Return the table as a pandas DataFrame, the columns named by key."""
        import pandas

        return pandas.DataFrame(self.to_records(), columns=[c.key for c in self.columns])


def _plain(value: Any) -> Cell:
    if value is None or isinstance(value, str | bool | int | float):
        return value
    if hasattr(value, "item"):
        return _plain(value.item())
    raise TypeError(f"a table cell must be a number or text, not {type(value).__name__}")
