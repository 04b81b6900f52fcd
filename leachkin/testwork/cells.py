"""The cells of a sheet as numbers: values, bounds, missing ones, and every cell that is none."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import UnitError
from leachkin.files import ERROR_CODES, Sheet, parse_numeral
from leachkin.problems import Level, Problem
from leachkin.tables import read_table
from leachkin.testwork.answers import Answers
from leachkin.testwork.columns import Use
from leachkin.testwork.records import Array
from leachkin.testwork.written_units import apertures_of
from leachkin.units import convert, parse_quantity, split_heading

_NUMBER_AND_UNIT = re.compile(r"([+-]?[0-9.,]+(?:[eE][+-]?[0-9]+)?)\s*([^\s0-9].*)")
_MOST_PROBLEMS = 12  #: of one kind in one column; the rest are counted
_MOST_LISTED = 8
_LARGEST = 1e12  #: of any number as written; its inverse is the smallest


#: What laboratories write for "no number" by filling a field: -9, -99, -999.0, ...
_FILLED = re.compile(r"[-\u2212]9+(?:[.,]0*)?")
_BOUND = re.compile(
    r"(?P<sign>[<>\u2264\u2265]|less than |greater than |more than )=?\s*(?P<rest>.+)", re.I
)


@lru_cache(maxsize=1)
def code_meanings() -> Mapping[str, str]:
    """Return what the codes of laboratories mean: "missing" or "below limit"."""
    return {row.text("code"): row.text("meaning") for row in read_table("cell_codes").rows}


@dataclass
class CellReader:
    """Reads the columns of one sheet and gathers what there is to say about its cells.

    Attributes
    ----------
    sheet : Sheet
    uses : mapping of key to Use
    problems : list of Problem
        Added to.
    answers : Answers
        What codes and negative assays mean.
    """

    sheet: Sheet
    uses: Mapping[str, Use]
    problems: list[Problem]
    answers: Answers = field(default_factory=Answers)
    _texts: dict[str, list[str]] = field(default_factory=dict)
    _missing: list[tuple[int, str, str]] = field(default_factory=list)
    _censored: list[tuple[int, str, str]] = field(default_factory=list)
    _about: list[tuple[int, str, str]] = field(default_factory=list)
    _no_limit: dict[str, list[tuple[int, str, str]]] = field(default_factory=dict)
    _filled: dict[str, list[tuple[int, str, str]]] = field(default_factory=dict)

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

        A negative assay is what the answers say; without one it is asked about and missing
        meanwhile.
        """
        found = self._read(key, bounds_allowed=True)
        if found is None:
            return None
        values, bounds = found
        negative = values < 0.0
        if self.answers.negative_assays == "below limit":
            values[negative], bounds[negative] = -values[negative], -1
            self._tell(self._censored, key, negative)
        elif self.answers.negative_assays == "missing":
            values[negative] = np.nan
            self._tell(self._missing, key, negative)
        else:
            self._ask(key, negative, _negative_assay, paste=_NEGATIVE)
            values[negative] = np.nan
        return values, bounds

    def _tell(self, listed: list[tuple[int, str, str]], key: str, which: NDArray[np.bool_]) -> None:
        use = self.uses[key]
        for i in np.flatnonzero(which):
            row = self.sheet.rows[i]
            listed.append((row.number, use.heading, row.cells[use.position]))

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
        if self._about:
            self.problems.append(
                self._gathered(self._about, 'with "~", read as the number itself', "")
            )
        self.problems.extend(self._limits_to_ask())
        self.problems.extend(self._codes_to_ask())

    def _limits_to_ask(self) -> list[Problem]:
        """Ask once for each column whose codes say "below limit" and no number."""
        found = []
        for heading, cells in self._no_limit.items():
            name, _ = split_heading(heading)
            use = next(use for use in self.uses.values() if use.heading == heading)
            limit = f'{_quoted(self._analyte(heading) or name)} = "0.01 {use.spelling or "g/L"}"'
            row, _, code = cells[0]
            more = f" and {len(cells) - 1} more" if len(cells) > 1 else ""
            found.append(
                Problem(
                    self.sheet.file,
                    row,
                    heading,
                    "ask",
                    f"{code!r}{more} says below the limit, and not which; missing meanwhile",
                    '"<" and the limit, or the limit in the settings',
                    f"write {limit} (with your limit) under [sheets.limits] in the settings",
                    f"sheets.limits.{limit}",
                )
            )
        return found

    def _analyte(self, heading: str) -> str:
        key = next(key for key, use in self.uses.items() if use.heading == heading)
        return key.partition(":")[2].partition("@")[0]

    def _codes_to_ask(self) -> list[Problem]:
        """Ask once for each filled-in number such as -99."""
        found = []
        for code, cells in self._filled.items():
            row, heading, _ = cells[0]
            more = f" and {len(cells) - 1} more cells" if len(cells) > 1 else ""
            line = f'"{code}" = "missing"'
            found.append(
                Problem(
                    self.sheet.file,
                    row,
                    heading,
                    "ask",
                    f"{code}{more}: a code for a missing number? Read as missing meanwhile",
                    '"missing" or "below limit"',
                    f"write {line} under [sheets.codes] in the settings",
                    f"sheets.codes.{line}",
                )
            )
        return found

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
            if text[0] in "-\u2212" and self._is_filled(text, use, row.number):
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

    def _is_filled(self, text: str, use: Use, row: int) -> bool:
        """Whether a negative number is a code; one that the settings do not know is asked about."""
        meaning = self.answers.codes.get(text)
        if meaning == "missing":
            self._missing.append((row, use.heading, text))
            return True
        if meaning is None and _FILLED.fullmatch(text) and len(text) > 2 and use.target != "K":
            self._filled.setdefault(text, []).append((row, use.heading, text))
            return True
        return False

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
        meaning = self.answers.codes.get(text) or code_meanings().get(text.casefold())
        if meaning is not None:
            return self._coded(text, meaning, use, row, bounds_allowed)
        if text.upper() in ERROR_CODES:  # the reader of the file has told of it
            return np.nan, 0, False
        try:
            if bounds_allowed and (bound := _BOUND.fullmatch(text)):
                value = self._numeral(bound["rest"], use)
                self._censored.append((row, use.heading, text))
                below = bound["sign"][0].casefold() in "<\u2264l"
                return value, -1 if below else 1, False
            if text[0] in "~\u2248":
                value = self._numeral(text[1:], use)
                self._about.append((row, use.heading, text))
                return value, 0, False
            return self._numeral(text, use), 0, False
        except ValueError:
            return np.nan, 0, True

    def _numeral(self, text: str, use: Use) -> float:
        """A number, its unit written behind it or not."""
        match = _NUMBER_AND_UNIT.fullmatch(text.strip())
        if match and use.spelling and _bare(match.group(2)) == _bare(use.spelling):
            return parse_numeral(match.group(1), self.sheet.decimal)
        return parse_numeral(text, self.sheet.decimal)

    def _coded(
        self, text: str, meaning: str, use: Use, row: int, bounds_allowed: bool
    ) -> tuple[float, int, bool]:
        """A code for a missing number, or for one below a limit that the settings may know."""
        if meaning == "below limit" and bounds_allowed:
            limit = self._limit(use)
            if limit is not None:
                self._censored.append((row, use.heading, text))
                return limit, -1, False
            self._no_limit.setdefault(use.heading, []).append((row, use.heading, text))
        self._missing.append((row, use.heading, text))
        return np.nan, 0, False

    def _limit(self, use: Use) -> float | None:
        """The limit of a column in its own unit, from the settings."""
        written = self.answers.limits.get(self._analyte(use.heading))
        if written is None or not use.target:
            return None
        try:
            return parse_quantity(written, use.target) / use.scale()
        except UnitError:
            return None

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
        paste: str = "",
    ) -> None:
        use = self.uses[key]
        places = np.flatnonzero(wrong)
        for i in places[:_MOST_PROBLEMS]:
            row = self.sheet.rows[i]
            found, allowed, try_this = words(row.cells[use.position])
            where = (self.sheet.file, row.number, use.heading)
            self.problems.append(Problem(*where, level, found, allowed, try_this, paste))
        if places.size > _MOST_PROBLEMS:
            row = self.sheet.rows[places[_MOST_PROBLEMS]]
            more = f"{places.size - _MOST_PROBLEMS} more such cells from here on"
            self.problems.append(Problem(self.sheet.file, row.number, use.heading, level, more))


_NEGATIVE = 'sheets.negative_assays = "below limit"'


def _negative_assay(cell: str) -> tuple[str, str, str]:
    limit = cell.lstrip("-\u2212 ")
    return (
        f"the assay is negative ({cell}): is it below a limit? Read as missing meanwhile",
        'a number from 0 up, or "<" and the limit',
        f'write "<{limit}" if {limit} is the limit; for all of them, negative_assays = '
        '"below limit" or "missing" under [sheets] in the settings',
    )


def _converted(values: Array, use: Use) -> Array:
    if use.series:
        return apertures_of(use.series, values)
    if not use.target:
        return values
    if use.target != "K":
        return np.asarray(values * use.scale() + use.added)
    known = ~np.isnan(values)
    unique, where = np.unique(values[known], return_inverse=True)
    values[known] = np.array([convert(v, use.spelling, "K") for v in unique])[where]
    return values


def _quoted(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else f'"{name}"'


def _bare(unit: str) -> str:
    return re.sub(r"\s+", "", unit).replace("\u00b5", "u").replace("\u03bc", "u")
