"""What a campaign file may hold: the kinds of keys, and the look-up by table.

The keys themselves, with every default of the program, stand in :mod:`schema_tables`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Literal

Kind = Literal[
    "text",
    "texts",
    "choice",
    "choices",
    "boolean",
    "integer",
    "number",
    "numbers",
    "fraction",
    "fractions",
    "quantity",
    "quantities",
    "precision",
    "date",
    "choice or number",
    "choice or fraction",
    "choice or quantity",
    "number or quantity",
    "law",
    "laws",
]

#: Format number of the campaign file that this program reads.
FORMAT = 1

#: Temperatures that a leach in water can have, with pressure where it needs it [K].
COLDEST_K, HOTTEST_K = 258.15, 543.15


@dataclass(frozen=True)
class Key:
    """One key of the campaign file.

    Attributes
    ----------
    name : str
    kind : Kind
    meaning : str
        What it is, in the user's words.
    unit : str
        Unit that a quantity is converted to; "1" or "" for a bare number.
    required : bool
        The table has no meaning without it.
    default : str, float, list or None
        As a user would write it; None where the key may be left out and nothing is put in.
    why : str
        Why this default: goes into the assumption register when it is used.
    low, high : str, float or None
        Range of the default, as a user would write it.
    ranged : bool
        True where ``{ value, low, high, source, by }`` may be written instead of the value.
    above, at_least, at_most : float or None
        Limits in ``unit``; ``above`` is exclusive.
    choices : tuple of str
    judged : bool
        True for what no test of this campaign measures: registered even where the user gives it.
    """

    name: str
    kind: Kind
    meaning: str
    unit: str = ""
    required: bool = False
    default: Any = None
    why: str = ""
    low: Any = None
    high: Any = None
    ranged: bool = False
    above: float | None = None
    at_least: float | None = None
    at_most: float | None = None
    choices: tuple[str, ...] = ()
    judged: bool = False


@dataclass(frozen=True)
class TableSchema:
    """One table of the campaign file.

    Attributes
    ----------
    path : str
        Dotted path, as ``heap.sizes``.
    meaning : str
    keys : tuple of Key
    repeated : bool
        Written ``[[path]]``, any number of times.
    named : bool
        Holds tables under names that the user chooses, each with ``keys``.
    free : Key or None
        Holds values under names that the user chooses, each read as this key.
    """

    path: str
    meaning: str
    keys: tuple[Key, ...] = ()
    repeated: bool = False
    named: bool = False
    free: Key | None = None

    def key(self, name: str) -> Key | None:
        """Return the key of that name, or None."""
        return next((key for key in self.keys if key.name == name), None)


@dataclass(frozen=True)
class Schema:
    """All tables of the campaign file, by path."""

    tables: tuple[TableSchema, ...]

    def table(self, path: str) -> TableSchema | None:
        """Return the table at that path, or None."""
        return next((table for table in self.tables if table.path == path), None)

    def children(self, path: str) -> list[str]:
        """Return the names of the tables directly under a path ("" for the top)."""
        prefix = f"{path}." if path else ""
        names = (t.path[len(prefix) :] for t in self.tables if t.path.startswith(prefix))
        return [name for name in names if name and "." not in name]

    def known_names(self, path: str) -> list[str]:
        """Return what may stand in a table: its keys and the tables under it."""
        table = self.table(path)
        keys = [key.name for key in table.keys] if table is not None else []
        return keys + self.children(path)

    def dotted_keys(self) -> Iterator[tuple[str, Key]]:
        """Yield every key with a fixed name, by dotted path."""
        for table in self.tables:
            if table.repeated or table.named:
                continue
            yield from ((f"{table.path}.{key.name}", key) for key in table.keys)
