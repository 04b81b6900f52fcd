"""The cells of a sheet as numbers: values, bounds, missing ones, and every cell that is none."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from leachkin.files import ERROR_CODES, Sheet, parse_numeral
from leachkin.problems import Level, Problem
from leachkin.testwork.columns import Use
from leachkin.testwork.records import Array
from leachkin.units import convert

#: Words that stand for "no number" in a laboratory's sheet.
_WORDS = "nil n/a na nan none trace tr - -- \u2013 \u2014 nd n.d. nr nss is lnr bdl pending . ?"
MISSING_WORDS = frozenset(_WORDS.split())
_NUMBER_AND_UNIT = re.compile(r"([+-]?[0-9.,]+(?:[eE][+-]?[0-9]+)?)\s*([^\s0-9].*)")
_MOST_PROBLEMS = 12  #: of one kind in one column; the rest are counted
_MOST_LISTED = 8
_LARGEST = 1e12  #: of any number as written; its inverse is the smallest


@dataclass
class CellReader:
    """Reads the columns of one sheet and gathers what there is to say about its cells.

    Attributes
    ----------
    sheet : Sheet
    uses : mapping of key to Use
    problems : list of Problem
        Added to.
    """

    sheet: Sheet
    uses: Mapping[str, Use]
    problems: list[Problem]
    _texts: dict[str, list[str]] = field(default_factory=dict)
    _missing: list[tuple[int, str, str]] = field(default_factory=list)
    _censored: list[tuple[int, str, str]] = field(default_factory=list)

    @property
    def row_numbers(self) -> list[int]:
        """Row number of each row of the sheet."""
        return [row.number for row in self.sheet.rows]

    def texts(self, key: str) -> list[str]:
        """Return a column as text, empty cells where there is no such column."""
        if key not in self._texts:
            use = self.uses.get(key)
            self._texts[key] = [
                row.cells[use.position] if use is not None else "" for row in self.sheet.rows
            ]
        return self._texts[key]

    def numbers(self, key: str) -> Array | None:
        """Return a column in its target unit, NaN where a cell is blank; None without it."""
        found = self._read(key, bounds_allowed=False)
        return None if found is None else found[0]

    def assays(self, key: str) -> tuple[Array, NDArray[np.int64]] | None:
        """Return a column of assays and its bounds (-1 below, +1 above); None without it.

        A negative assay is asked about and missing meanwhile.
        """
        found = self._read(key, bounds_allowed=True)
        if found is None:
            return None
        values, bounds = found
        self._ask(key, values < 0.0, _negative_assay)
        values[values < 0.0] = np.nan
        return values, bounds

    def flag(
        self,
        key: str,
        wrong: NDArray[np.bool_],
        allowed: str,
        try_this: str = "",
        level: Level = "stop",
    ) -> None:
        """Add a problem for each cell of a column that is marked as wrong."""
        self._ask(
            key, wrong, lambda cell: (f"{cell} has no meaning here", allowed, try_this), level
        )

    def finish(self) -> None:
        """Add the notes that gather cells: those read as missing, and those with a bound."""
        if self._missing:
            self.problems.append(
                self._gathered(self._missing, "without a number, read as missing", "")
            )
        if self._censored:
            self.problems.append(
                self._gathered(
                    self._censored,
                    'with "<" or ">", kept as below or above that limit',
                    "not taken for the limit itself: a fit uses them as bounds",
                )
            )

    def _gathered(self, cells: list[tuple[int, str, str]], what: str, more: str) -> Problem:
        listed = "; ".join(f'row {r} "{h}" {c!r}' for r, h, c in cells[:_MOST_LISTED])
        rest = f" and {len(cells) - _MOST_LISTED} more" if len(cells) > _MOST_LISTED else ""
        noun = "cell" if len(cells) == 1 else "cells"
        found = f"{len(cells)} {noun} {what}: {listed}{rest}"
        return Problem(self.sheet.file, None, "", "note", found, more)

    def _read(self, key: str, bounds_allowed: bool) -> tuple[Array, NDArray[np.int64]] | None:
        use = self.uses.get(key)
        if use is None:
            return None
        count, decimal = len(self.sheet.rows), self.sheet.decimal
        values = np.full(count, np.nan)
        bounds = np.zeros(count, dtype=np.int64)
        bad: list[tuple[int, str]] = []
        for i, row in enumerate(self.sheet.rows):
            text = row.cells[use.position]
            if not text:
                continue
            try:
                values[i] = parse_numeral(text, decimal)
            except ValueError as error:
                values[i], bounds[i], fault = self._other(text, use, row.number, bounds_allowed)
                if fault:
                    bad.append((row.number, str(error)))
        bad += self._beyond_measure(values, use)
        self._not_numbers(use, sorted(bad), bounds_allowed)
        return _converted(values, use), bounds

    def _beyond_measure(self, values: Array, use: Use) -> list[tuple[int, str]]:
        """Numbers that no balance or flask has, made missing."""
        size = np.abs(values)
        wrong = (size > _LARGEST) | ((size > 0.0) & (size < 1.0 / _LARGEST))
        values[wrong] = np.nan
        rows = [self.sheet.rows[i] for i in np.flatnonzero(wrong)]
        return [(r.number, f"{r.cells[use.position]!r} is beyond all measure") for r in rows]

    def _other(
        self, text: str, use: Use, row: int, bounds_allowed: bool
    ) -> tuple[float, int, bool]:
        """Value, bound and whether the cell is at fault, for a cell that is no plain number."""
        if text.casefold() in MISSING_WORDS:
            self._missing.append((row, use.heading, text))
            return np.nan, 0, False
        if text.upper() in ERROR_CODES:  # the reader of the file has told of it
            return np.nan, 0, False
        try:
            if bounds_allowed and text[0] in "<>":
                value = parse_numeral(text[1:].lstrip("= "), self.sheet.decimal)
                self._censored.append((row, use.heading, text))
                return value, -1 if text[0] == "<" else 1, False
            match = _NUMBER_AND_UNIT.fullmatch(text)
            if match and use.spelling and _bare(match.group(2)) == _bare(use.spelling):
                return parse_numeral(match.group(1), self.sheet.decimal), 0, False
        except ValueError:
            pass
        return np.nan, 0, True

    def _not_numbers(self, use: Use, bad: list[tuple[int, str]], bounds_allowed: bool) -> None:
        unit = f" in {use.spelling}" if use.spelling else ""
        allowed = f"a number{unit}, or an empty cell"
        if bounds_allowed:
            allowed = f'a number{unit}, one with "<" or ">" before it, or an empty cell'
        for number, (row, found) in enumerate(bad):
            if number == _MOST_PROBLEMS:
                found = f"{found}, as in {len(bad) - number} rows from here on"
            try_this = "put words in a remark column"
            if "comma" in found or "thousands" in found or "point" in found:
                try_this = f'write it with "{self.sheet.decimal}" as decimal mark only'
            self.problems.append(
                Problem(self.sheet.file, row, use.heading, "stop", found, allowed, try_this)
            )
            if number == _MOST_PROBLEMS:
                break

    def _ask(
        self,
        key: str,
        wrong: NDArray[np.bool_],
        words: Callable[[str], tuple[str, str, str]],
        level: Level = "ask",
    ) -> None:
        use = self.uses[key]
        places = np.flatnonzero(wrong)
        for i in places[:_MOST_PROBLEMS]:
            row = self.sheet.rows[i]
            found, allowed, try_this = words(row.cells[use.position])
            self.problems.append(
                Problem(self.sheet.file, row.number, use.heading, level, found, allowed, try_this)
            )
        if places.size > _MOST_PROBLEMS:
            row = self.sheet.rows[places[_MOST_PROBLEMS]]
            more = f"{places.size - _MOST_PROBLEMS} more such cells from here on"
            self.problems.append(Problem(self.sheet.file, row.number, use.heading, level, more))


def _negative_assay(cell: str) -> tuple[str, str, str]:
    limit = cell.lstrip("-\u2212 ")
    return (
        f"the assay is negative ({cell}): is it below a limit? Read as missing meanwhile",
        'a number from 0 up, or "<" and the limit',
        f'write "<{limit}" if {limit} is the limit, or leave the cell empty',
    )


def _converted(values: Array, use: Use) -> Array:
    if not use.target:
        return values
    if use.target != "K":
        return np.asarray(values * use.scale())
    known = ~np.isnan(values)
    unique, where = np.unique(values[known], return_inverse=True)
    values[known] = np.array([convert(v, use.spelling, "K") for v in unique])[where]
    return values


def _bare(unit: str) -> str:
    return re.sub(r"\s+", "", unit).replace("\u00b5", "u").replace("\u03bc", "u")
