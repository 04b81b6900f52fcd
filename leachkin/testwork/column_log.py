"""The daily log of a column: what came out each day becomes extraction against time."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from leachkin.errors import UnitError
from leachkin.files import Grid, Sheet, SheetRow, parse_numeral
from leachkin.problems import Problem
from leachkin.testwork.bench_blocks import Pair, pairs_of_row
from leachkin.testwork.cells import code_meanings
from leachkin.testwork.columns import ELEMENTS, heading_candidates
from leachkin.testwork.names import is_test_heading
from leachkin.testwork.records import Array
from leachkin.testwork.trade_names import ELEMENT_WORDS
from leachkin.units import convert

FORM = "column log"
_DAY = ("day", "days", "elapsed days", "time")
_OUT = ("pls", "pls volume", "effluent", "effluent volume", "drainage", "out", "solution out")
_IN = ("feed", "feed volume", "feed solution", "irrigation", "on", "solution in")
_GRADE = re.compile(
    r"(?P<stream>pls|effluent|feed)[\s,:-]+(?P<what>[A-Za-z0-9]+)(?: grade| assay)?", re.I
)
_MASS = ("dry mass", "charge", "charge dry", "dry charge", "ore", "dry ore", "solids", "mass dry")
_HEAD = re.compile(r"head(?: assay| grade)?[\s,:-]+(?P<what>[A-Za-z0-9]+)", re.I)


@dataclass
class ColumnLog:
    """One column, day by day.

    Attributes
    ----------
    name, domain : str
    dry_kg : float
    head_kg_per_t : mapping of metal to float
    day, feed_L, out_L : ndarray, shape (m,)
    out_g_per_L, feed_g_per_L : mapping of metal to ndarray, shape (m,)
    rows : list of int
    """

    name: str
    domain: str
    dry_kg: float
    head_kg_per_t: Mapping[str, float]
    day: Array
    feed_L: Array
    out_L: Array
    out_g_per_L: Mapping[str, Array]
    feed_g_per_L: Mapping[str, Array]
    rows: list[int] = field(default_factory=list)

    def extraction(self, metal: str) -> Array:
        """Return the cumulative extraction of a metal on its assay head, as a fraction."""
        out = np.cumsum(self.out_L * np.nan_to_num(self.out_g_per_L[metal]))
        brought = self.feed_g_per_L.get(metal)
        if brought is not None:
            out = out - np.cumsum(self.feed_L * np.nan_to_num(brought))
        return np.asarray(out / (self.dry_kg * self.head_kg_per_t[metal]))

    @property
    def rests(self) -> Array:
        """True for days without any flow."""
        return np.asarray((self.feed_L == 0.0) & (self.out_L == 0.0))


def is_column_log(grid: Grid) -> bool:
    """Return True where a row of headings has days and what came out.

    Examples
    --------
    >>> from leachkin.files import grid_of
    >>> is_column_log(grid_of("c.csv", [(1, ["Day", "Feed L", "PLS L", "PLS Cu g/L"])], b""))
    True
    """
    return _heading_row(grid) is not None


def extraction_of_column_log(grid: Grid, problems: list[Problem]) -> Sheet | None:
    """Return extraction against time of a column log, as a sheet of extraction.

    Parameters
    ----------
    grid : Grid
    problems : list of Problem
        Added to: rests, days without an assay, what is missing.

    Returns
    -------
    Sheet or None
        None where the dry mass, a head or the days are missing.
    """
    log = read_column_log(grid, problems)
    if log is None:
        return None
    _tell(log, grid, problems)
    metals = [metal for metal in log.out_g_per_L if metal in log.head_kg_per_t]
    columns = {metal: 100.0 * log.extraction(metal) for metal in metals}
    header = ("test", "domain", "time (d)", *(f"{metal} extraction (%)" for metal in metals))
    rows = tuple(
        SheetRow(
            number,
            (
                log.name,
                log.domain,
                f"{log.day[i]:g}".replace(".", grid.decimal),
                *(f"{columns[m][i]:.6g}".replace(".", grid.decimal) for m in metals),
            ),
        )
        for i, number in enumerate(log.rows)
    )
    header_row = _heading_row(grid)
    number = grid.rows[header_row].number if header_row is not None else 1
    return Sheet(grid.file, header, number, rows, grid.decimal, (), grid.content, FORM)


def _heading_row(grid: Grid) -> int | None:
    for place, row in enumerate(grid.rows[:60]):
        names = {n.casefold() for cell in row.cells if cell for n, _ in heading_candidates(cell)}
        if names & set(_DAY) and names & set(_OUT):
            return place
    return None


def read_column_log(grid: Grid, problems: list[Problem]) -> ColumnLog | None:
    """Return a column log as it stands; None, with the reason told, where it cannot be used."""
    place = _heading_row(grid)
    if place is None:
        return None
    pairs = [p for row in grid.rows[:place] for p in pairs_of_row(row, 0, len(row.cells))]
    columns = _columns(grid, place, problems)
    mass, heads = _mass_kg(pairs, grid), _heads(pairs, grid)
    missing = [
        words
        for words, is_there in (
            ("the dry mass, as Dry mass kg | 120", mass is not None),
            ("a head, as Head Cu % | 0.68", bool(heads)),
            ("days with PLS and its assay", "day" in columns and "out" in columns),
        )
        if not is_there
    ]
    if missing or mass is None:
        row = grid.rows[place].number
        found = f"the column log lacks {'; '.join(missing)}"
        allowed = "label and value above the table of days"
        problems.append(Problem(grid.file, row, "", "stop", found, allowed, "add them above"))
        return None
    rows, values = _days(grid, place, columns, problems)
    absent = np.zeros(len(rows))
    return ColumnLog(
        _said(pairs, is_test_heading) or grid.tab or re.sub(r"\.[^.]*$", "", grid.file),
        _said(pairs, lambda label: label.casefold() in ("sample", "domain", "ore")) or "ore",
        mass,
        heads,
        values["day"],
        values.get("in", absent),
        values["out"],
        {k[4:]: v for k, v in values.items() if k.startswith("out:")},
        {k[3:]: v for k, v in values.items() if k.startswith("in:")},
        rows,
    )


def _said(pairs: Sequence[Pair], fits: Callable[[str], bool]) -> str:
    return next((p.values[0] for p in pairs if fits(p.label)), "")


def _columns(grid: Grid, place: int, problems: list[Problem]) -> dict[str, tuple[int, float]]:
    """Position and factor to the base unit of each column that is known."""
    found: dict[str, tuple[int, float]] = {}
    for position, cell in enumerate(grid.rows[place].cells):
        for name, spelling in heading_candidates(cell) if cell else ():
            key, target = _key(name)
            if not key or key in found:
                continue
            factor = 1.0
            if target and not (key == "day" and spelling is None):
                try:
                    factor = convert(1.0, spelling or "", target)
                except UnitError as error:
                    if spelling:
                        where = (grid.file, grid.rows[place].number, cell)
                        words = (error.found, error.allowed, error.try_this)
                        problems.append(Problem(*where, "stop", *words))
                    continue
            found[key] = (position, factor)
            break
    return found


def _key(name: str) -> tuple[str, str]:
    folded = name.casefold().strip()
    if folded in _DAY:
        return "day", "d"
    if folded in _OUT:
        return "out", "L"
    if folded in _IN:
        return "in", "L"
    match = _GRADE.fullmatch(name.strip())
    metal = _metal(match["what"]) if match else ""
    if match and metal:
        return ("in:" if match["stream"].casefold() == "feed" else "out:") + metal, "g/L"
    return "", ""


def _metal(text: str) -> str:
    metal = ELEMENT_WORDS.get(text.casefold(), text)
    return metal if metal in ELEMENTS else ""


def _mass_kg(pairs: Sequence[Pair], grid: Grid) -> float | None:
    return _quantity(pairs, grid, lambda name: name.casefold() in _MASS, "kg")


def _heads(pairs: Sequence[Pair], grid: Grid) -> dict[str, float]:
    heads: dict[str, float] = {}
    for pair in pairs:
        for name, _ in heading_candidates(pair.label):
            match = _HEAD.fullmatch(name)
            metal = _metal(match["what"]) if match else ""
            value = _quantity([pair], grid, lambda _: True, "kg/t") if metal else None
            if value:
                heads.setdefault(metal, value)
    return heads


def _quantity(
    pairs: Sequence[Pair], grid: Grid, fits: Callable[[str], bool], target: str
) -> float | None:
    for pair in pairs:
        for name, spelling in heading_candidates(pair.label):
            if not fits(name):
                continue
            match = re.fullmatch(r"([0-9.,]+)\s*(.*)", pair.values[0])
            unit = spelling or (match[2] if match else "")
            try:
                number = parse_numeral(match[1] if match else "", grid.decimal)
                if unit:
                    return convert(number, unit, target)
            except (ValueError, UnitError):
                continue
    return None


def _days(
    grid: Grid,
    place: int,
    columns: Mapping[str, tuple[int, float]],
    problems: list[Problem],
) -> tuple[list[int], dict[str, Array]]:
    """The rows of days, every column as numbers; volumes blank are none, grades blank are NaN."""
    rows: list[int] = []
    lists: dict[str, list[float]] = {key: [] for key in columns}
    heading = grid.rows[place].cells
    for row in grid.rows[place + 1 :]:
        day = _cell(row, columns["day"][0], grid, heading, problems)
        if np.isnan(day):
            continue
        if rows and day * columns["day"][1] <= lists["day"][-1]:
            found = f"day {day:g} comes after day {lists['day'][-1]:g}"
            where = (grid.file, row.number, heading[columns["day"][0]])
            problems.append(Problem(*where, "stop", found, "days that rise", "left out meanwhile"))
            continue
        rows.append(row.number)
        for key, (position, factor) in columns.items():
            value = _cell(row, position, grid, heading, problems) * factor
            if key in ("in", "out"):
                value = 0.0 if np.isnan(value) else value
                if value < 0.0:
                    found = f"{row.cells[position]} is a volume below 0; taken as none"
                    where = (grid.file, row.number, heading[position])
                    problems.append(Problem(*where, "stop", found, "0 or more", "correct the cell"))
                    value = 0.0
            lists[key].append(value)
    return rows, {key: np.array(values) for key, values in lists.items()}


def _cell(
    row: SheetRow, position: int, grid: Grid, heading: Sequence[str], problems: list[Problem]
) -> float:
    text = row.cells[position] if position < len(row.cells) else ""
    if not text or text.casefold() in code_meanings():
        return float("nan")
    try:
        return parse_numeral(text.lstrip("<~ "), grid.decimal)
    except ValueError as error:
        where = (grid.file, row.number, heading[position])
        problems.append(
            Problem(*where, "stop", str(error), "a number or an empty cell", "correct it")
        )
        return float("nan")


def _tell(log: ColumnLog, grid: Grid, problems: list[Problem]) -> None:
    rests = int(log.rests.sum())
    flowing = np.logical_not(log.rests)
    per_t = float(log.out_L.sum() / log.dry_kg)
    words = f"column {log.name}: {len(log.rows)} days, {per_t:.3g} m3 of solution a tonne"
    if rests:
        rows = ", ".join(str(log.rows[i]) for i in np.flatnonzero(log.rests)[:8])
        words += f"; {rests} rest days (rows {rows}) count in the time and not in the flow"
    problems.append(Problem(grid.file, log.rows[0] if log.rows else None, "", "note", words))
    for metal, grade in log.out_g_per_L.items():
        blank = np.flatnonzero(np.isnan(grade) & flowing & (log.out_L > 0.0))
        if blank.size:
            rows = ", ".join(str(log.rows[i]) for i in blank[:8])
            found = f"{blank.size} days with PLS and no {metal} assay count as none: rows {rows}"
            try_this = "fill in the assays, or composite the days"
            where = (grid.file, log.rows[int(blank[0])], f"PLS {metal}")
            problems.append(Problem(*where, "ask", found, "an assay for each volume", try_this))
