"""The settings of a campaign, read and converted, and the register of what was assumed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.run_record import stage_seed

Group = Mapping[str, "Setting"]


@dataclass(frozen=True)
class Setting:
    """One setting in its unit.

    Attributes
    ----------
    key : str
        Dotted path.
    value : object
        A number in ``unit``, text, a tuple, or a pair for a precision.
    unit : str
    low, high : float or None
        The stated range, in ``unit``.
    source, by : str
    line : int or None
        Line in the campaign file; None for a default.
    given : bool
        False for a default of the program.
    """

    key: str
    value: Any
    unit: str = ""
    low: float | None = None
    high: float | None = None
    source: str = ""
    by: str = ""
    line: int | None = None
    given: bool = True

    @property
    def has_range(self) -> bool:
        """True where low and high differ, so that draws move the value."""
        return self.low is not None and self.high is not None and self.high > self.low


@dataclass(frozen=True)
class Assumption:
    """A row of the assumption register.

    Attributes
    ----------
    key : str
        Dotted path or name of the parameter.
    value : float or str
    unit : str
    low, high : float or None
    why : str
        Reason or source.
    by : str
        Who: a name from the file, or "default of the program".
    in_band : bool
        True where the range is part of the band of the plant figures.
    """

    key: str
    value: float | str
    unit: str = ""
    low: float | None = None
    high: float | None = None
    why: str = ""
    by: str = "default of the program"
    in_band: bool = False

    @property
    def relative_width(self) -> float:
        """Width of the range over the value, for ranking; infinite where no range is known."""
        if self.low is None or self.high is None or isinstance(self.value, str):
            return float("inf")
        scale = max(abs(self.value), abs(self.low), abs(self.high))
        return (self.high - self.low) / scale if scale > 0.0 else 0.0


_REGISTER_COLUMNS = (
    Column("key", "Assumed"),
    Column("value", "Value"),
    Column("unit", "Unit"),
    Column("low", "Low"),
    Column("high", "High"),
    Column("why", "Why, or source"),
    Column("by", "By"),
    Column("in_band", "In the band"),
)


def register_table(assumed: tuple[Assumption, ...]) -> ResultTable:
    """Return the assumption register as a table."""
    records = [{c.key: getattr(row, c.key) for c in _REGISTER_COLUMNS} for row in assumed]
    return ResultTable.from_records(
        "assumed",
        _REGISTER_COLUMNS,
        records,
        "Everything that was assumed rather than measured: defaults of the program, values "
        "marked as assumed, and stated ranges.",
    )


@dataclass(frozen=True)
class Settings:
    """All settings of a campaign.

    Attributes
    ----------
    values : mapping of dotted key to Setting
        Keys with one place; defaults are filled in for tables that are present.
    repeated : mapping of table path to tuple of mappings
        ``[[exclude]]``, ``[[assumed]]``, ``[[budget.lines]]``.
    named : mapping of table path to mapping of name to mapping
        ``[budget.prices.NAME]``.
    free : mapping of table path to mapping of name to Setting
        ``[cementation.metals]``, ``[budget.consumption]``, ``[campaign.reagent_per_metal]``.
    tables : frozenset of str
        Paths of the tables that the file holds.
    """

    values: Mapping[str, Setting]
    repeated: Mapping[str, tuple[Group, ...]] = field(default_factory=dict)
    named: Mapping[str, Mapping[str, Group]] = field(default_factory=dict)
    free: Mapping[str, Group] = field(default_factory=dict)
    tables: frozenset[str] = frozenset()

    def has(self, table: str) -> bool:
        """Return True where the file holds that table."""
        return table in self.tables

    def get(self, key: str) -> Any:
        """Return the value of a key, or None where it was left out and has no default."""
        setting = self.values.get(key)
        return None if setting is None else setting.value

    def number(self, key: str) -> float:
        """Return a number that must be there.

        Raises
        ------
        InputProblems
            If the key was left out; the message names it.
        """
        value = self.get(key)
        if value is None:
            raise argument_error(key, "nothing", "a value", f"add {key} to the campaign file")
        return float(value)

    def group(self, table: str) -> Group:
        """Return the settings directly under a table, by short name."""
        prefix = f"{table}."
        return {
            key[len(prefix) :]: setting
            for key, setting in self.values.items()
            if key.startswith(prefix) and "." not in key[len(prefix) :]
        }

    def draw(self, key: str, count: int, seed: int) -> NDArray[np.float64] | float | None:
        """Return draws of a setting: triangular over its range, or the value alone without one.

        The draws of one key depend on the seed and the key only.
        """
        setting = self.values.get(key)
        return None if setting is None else draw_setting(setting, count, seed)

    def ranged(self, *tables: str) -> tuple[Setting, ...]:
        """Return the settings under these tables that have a stated range."""
        return tuple(
            setting
            for key, setting in self.values.items()
            if setting.has_range and key.split(".")[0] in tables
        )


def draw_setting(setting: Setting, count: int, seed: int) -> NDArray[np.float64] | float | None:
    """Return draws of one setting, shape (count,); the plain value where it has no range."""
    if setting.value is None:
        return None
    if not setting.has_range or setting.low is None or setting.high is None:
        return float(setting.value)
    generator = np.random.default_rng(stage_seed(seed, setting.key))
    return generator.triangular(setting.low, float(setting.value), setting.high, count)


def is_drawn(value: object) -> bool:
    """Return True for an array of draws, False for one number or none."""
    return isinstance(value, np.ndarray) and value.ndim > 0
