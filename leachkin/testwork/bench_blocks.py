"""Finds tests in a bench sheet: label and value pairs, a row of headings, one row a time.

Tests stand below one another, side by side, or on tabs of their own.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, field

from leachkin.files import Grid, SheetRow
from leachkin.testwork.columns import fold_heading, heading_candidates
from leachkin.testwork.trade_names import plain_text
from leachkin.units import is_spelling

_TIMES = ("time", "elapsedtime", "leachtime", "elapsed", "dateandtime", "datetime", "clocktime")
_HOURS = ("hours", "hrs", "h")
_SUMMARY = re.compile(
    r"(?:avg|average|mean|total|sum|std|st\.? ?dev|stdev|min|max|median|rsd)\b\.?", re.I
)
_NUMBER = re.compile(
    r"[<>~]?\s*[-+\u2212]?(?:[0-9]+[.,]?[0-9]*|[.,][0-9]+)(?:[eE][-+]?[0-9]+)?\s*%?"
)
_TIME_CELL = re.compile(r"[0-9].*")
_FURTHEST_VALUE = 3  #: columns between a label and its value


@dataclass(frozen=True)
class Pair:
    """A label and its value, with where the label stands; more values beside it are replicates."""

    label: str
    values: tuple[str, ...]
    row: int


@dataclass
class Block:
    """One table of readings, and the pairs that go with it.

    Attributes
    ----------
    headings : list of (position, heading)
    heading_row : int
    rows : list of SheetRow
        The rows of the table, cells as in the file.
    pairs : list of Pair
    skipped : list of (row number, text)
        Rows of averages and the like.
    unread : list of (row number, text)
        Rows among the readings that are neither.
    first, last : int
        Columns of the block, the last one left out.
    """

    headings: list[tuple[int, str]]
    heading_row: int
    first: int
    last: int
    rows: list[SheetRow] = field(default_factory=list)
    pairs: list[Pair] = field(default_factory=list)
    skipped: list[tuple[int, str]] = field(default_factory=list)
    unread: list[tuple[int, str]] = field(default_factory=list)


def is_time_heading(text: str) -> bool:
    """Return True for the heading of a column of times.

    Examples
    --------
    >>> is_time_heading("Time h"), is_time_heading("Elapsed time (hrs)"), is_time_heading("pH")
    (True, True, False)
    """
    if not text or _NUMBER.fullmatch(text):
        return False
    if fold_heading(text) in _HOURS:
        return True
    return any(fold_heading(name) in _TIMES for name, _ in heading_candidates(text))


def find_blocks(grid: Grid) -> list[Block]:
    """Return the tables of readings of a sheet in order, each with its pairs.

    Parameters
    ----------
    grid : Grid

    Returns
    -------
    list of Block
    """
    starts = [i for i, row in enumerate(grid.rows) if _times_in(row.cells)]
    blocks: list[Block] = []
    above = 0
    for number, start in enumerate(starts):
        end = starts[number + 1] if number + 1 < len(starts) else len(grid.rows)
        made = _blocks_of(grid.rows, start)
        last_read = start
        for block in made:
            last_read = max(last_read, _fill(block, grid.rows, start, end))
        for block in made:
            block.pairs = _pairs(grid.rows[above:start], block, len(made) > 1) + block.pairs
        blocks += made
        above = last_read + 1
    return blocks


def _times_in(cells: Sequence[str]) -> list[int]:
    """Columns of times in a row of headings; none where it is no row of headings."""
    times = [i for i, cell in enumerate(cells) if is_time_heading(cell)]
    words = [c for c in cells if c and not _NUMBER.fullmatch(c)]
    numbers = [c for c in cells if c and _NUMBER.fullmatch(c)]
    units = [c for c in words if is_spelling(c.strip("()[] "))]
    if 2 * len(units) > len(words):  # the row of units under the headings
        return []
    return times if times and len(words) >= 3 and not numbers else []


def _blocks_of(rows: Sequence[SheetRow], start: int) -> list[Block]:
    cells = rows[start].cells
    times = _times_in(cells)
    firsts, name = [0], fold_heading(cells[times[0]])
    for before, here in zip(times, times[1:], strict=False):
        blanks = [i for i in range(before + 1, here) if not cells[i]]
        if blanks or fold_heading(cells[here]) == name:  # else a second time of the same table
            firsts.append(blanks[-1] + 1 if blanks else here)
    lasts = [*firsts[1:], max(len(row.cells) for row in rows)]
    units = _unit_row(rows, start)
    blocks = []
    for first, last in zip(firsts, lasts, strict=True):
        headings = []
        for i in range(first, min(last, len(cells))):
            if cells[i]:
                unit = units[i].strip("()[] ") if i < len(units) else ""
                headings.append((i, _with_unit(cells[i], unit)))
        blocks.append(Block(headings, rows[start].number, first, last))
    return blocks


def _with_unit(heading: str, unit: str) -> str:
    heading = "time (h)" if fold_heading(heading) in _HOURS and not unit else heading
    if not unit or any(spelling for _, spelling in heading_candidates(heading)):
        return heading
    return f"{heading} ({unit})"


def _unit_row(rows: Sequence[SheetRow], start: int) -> Sequence[str]:
    """The row under the headings if it holds units and no numbers."""
    if start + 1 >= len(rows):
        return ()
    cells = [c for c in rows[start + 1].cells if c]
    units = [c for c in cells if is_spelling(c.strip("()[] ").partition(" ")[0])]
    if any(_NUMBER.fullmatch(c) for c in cells) or 2 * len(units) < len(cells) or not units:
        return ()
    return rows[start + 1].cells


def _fill(block: Block, rows: Sequence[SheetRow], start: int, end: int) -> int:
    """Put the rows under the headings where they belong; the last one that was used comes back."""
    first = start + (2 if _unit_row(rows, start) else 1)
    time = next(i for i, heading in block.headings if is_time_heading(heading))
    used = [i for i, _ in block.headings]
    last_read, in_table = first - 1, True
    for place in range(first, end):
        row = rows[place]
        cells = [row.cells[i] if i < len(row.cells) else "" for i in range(block.first, block.last)]
        filled = [c for c in cells if c]
        if not filled:
            continue
        words = [c for c in filled if not _NUMBER.fullmatch(c)]
        if words and _SUMMARY.match(words[0]):
            block.skipped.append((row.number, words[0]))
            last_read = place
            continue
        time_cell = row.cells[time] if time < len(row.cells) else ""
        numbers = sum(1 for i in used if i < len(row.cells) and _NUMBER.fullmatch(row.cells[i]))
        if in_table and (_TIME_CELL.fullmatch(time_cell) or (not time_cell and numbers > 1)):
            block.rows.append(row)
            last_read = place
            continue
        pairs = pairs_of_row(row, block.first, block.last)
        if pairs and is_footer(pairs):
            in_table = False
            block.pairs += pairs
            last_read = place
        elif in_table and numbers:
            block.rows.append(row)
            last_read = place
        elif pairs or not in_table:
            break  # what stands above the next table
        else:
            block.unread.append((row.number, filled[0]))
            last_read = place
    return last_read


_FOOTER = re.compile(
    r"(?:residue|tails?|tailings?|filtrate|final solution|wash|carbon|loaded carbon|resin|cake"
    r"|head|calculated|assay(?:ed)? head)\b",
    re.I,
)


def is_footer(pairs: Sequence[Pair]) -> bool:
    """Return True where pairs under a table are of its close-out."""
    return any(_FOOTER.match(pair.label) for pair in pairs)


def _pairs(rows: Sequence[SheetRow], block: Block, side_by_side: bool) -> list[Pair]:
    last = block.last if side_by_side else max((len(r.cells) for r in rows), default=0)
    first = block.first if side_by_side else 0
    return [pair for row in rows for pair in pairs_of_row(row, first, last)]


def pairs_of_row(row: SheetRow, first: int, last: int) -> list[Pair]:
    """Return the labels of a row that have a value beside them, in some columns."""
    cells = [row.cells[i] if i < len(row.cells) else "" for i in range(first, last)]
    pairs: list[Pair] = []
    i = 0
    while i < len(cells):
        cell = plain_text(cells[i])
        i += 1
        if not cell or _NUMBER.fullmatch(cell):
            continue
        label, colon, inside = cell.partition(":")
        if colon and inside.strip():
            pairs.append(Pair(label.strip(), (inside.strip(),), row.number))
            continue
        value = next((j for j in range(i, min(i + _FURTHEST_VALUE, len(cells))) if cells[j]), None)
        if value is None:
            continue
        values, i = _values(cells, value)
        pairs.append(Pair(label.strip(), values, row.number))
    return pairs


def _values(cells: Sequence[str], start: int) -> tuple[tuple[str, ...], int]:
    """A value with its unit if that stands in the next cell, and further numbers beside it."""
    values = [cells[start]]
    place = start + 1
    if not _NUMBER.fullmatch(cells[start]):
        return tuple(values), place
    while place < len(cells) and cells[place] and _NUMBER.fullmatch(cells[place]):
        values.append(cells[place])
        place += 1
    if place < len(cells) and cells[place] and is_spelling(cells[place].strip("()[] ")):
        unit = cells[place].strip("()[] ")
        return tuple(f"{value} {unit}" for value in values), place + 1
    return tuple(values), place
