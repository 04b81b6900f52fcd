"""Times as laboratories write them: dates, clock times past midnight, hours and minutes."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime, timedelta

from leachkin.files import Sheet, SheetRow
from leachkin.problems import Problem
from leachkin.testwork.answers import WITHIN_A_DAY, Answers

_CLOCK = re.compile(
    r"(?P<h>[0-9]{1,4})[:h.](?P<m>[0-9]{2})(?::(?P<s>[0-9]{2})(?:\.0*)?)?\s*(?P<half>[ap]\.?m\.?)?",
    re.I,
)
_ISO = re.compile(r"(?P<y>[0-9]{4})[-/.](?P<mo>[0-9]{1,2})[-/.](?P<d>[0-9]{1,2})")
_NUMBERS = re.compile(
    r"(?P<a>[0-9]{1,2})(?P<sep>[-/.])(?P<b>[0-9]{1,2})(?P=sep)(?P<y>[0-9]{4}|[0-9]{2})"
)
_NAMED = re.compile(
    r"(?:(?P<d>[0-9]{1,2})[-\s./]?(?P<mo>[a-z]{3})[a-z]*|(?P<mo2>[a-z]{3})[a-z]*[-\s./]?(?P<d2>[0-9]{1,2}))"
    r"[-\s,./]*(?P<y>[0-9]{4}|[0-9]{2})",
    re.I,
)
_MONTHS = ["jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec"]
_SERIAL = re.compile(r"[2-7][0-9]{4}(?:\.[0-9]+)?")
_EPOCH = datetime(
    1899, 12, 30
)  #: day 0 of a spreadsheet's serial dates, for dates after 1900-03-01


@dataclass(frozen=True)
class Stamp:
    """A date, a time of day in hours, or both."""

    date: datetime | None
    hours: float | None

    @property
    def moment(self) -> datetime | None:
        """Date and time; midnight where no time is written."""
        return None if self.date is None else self.date + timedelta(hours=self.hours or 0.0)


def read_stamp(text: str, day_first: bool = True) -> Stamp | None:
    """Return a written date, time or both; None where it is neither.

    Examples
    --------
    >>> read_stamp("2026-03-01 14:30").moment
    datetime.datetime(2026, 3, 1, 14, 30)
    >>> read_stamp("3/4/2026", day_first=False).date.month, read_stamp("2:30 pm").hours
    (3, 14.5)
    """
    rest = text.strip().replace("T", " ") if _ISO.match(text.strip()) else text.strip()
    if _SERIAL.fullmatch(rest):
        days = float(rest)
        return Stamp(_EPOCH + timedelta(days=int(days)), round(24.0 * (days % 1.0), 6))
    date, rest = _date_of(rest, day_first)
    if date is not None and not rest:
        return Stamp(date, None)
    hours = _hours_of(rest)
    return None if hours is None else Stamp(date, hours)


def _date_of(text: str, day_first: bool) -> tuple[datetime | None, str]:
    if match := _ISO.match(text):
        parts = (match["y"], match["mo"], match["d"])
    elif match := _NUMBERS.match(text):
        day, month = (match["a"], match["b"])
        if not (day_first or match["sep"] == "."):
            day, month = month, day
        parts = (match["y"], month, day)
    elif (match := _NAMED.match(text)) and (
        name := (match["mo"] or match["mo2"]).casefold()
    ) in _MONTHS:
        parts = (match["y"], str(_MONTHS.index(name) + 1), match["d"] or match["d2"])
    else:
        return None, text
    year = int(parts[0]) + (2000 if len(parts[0]) == 2 else 0)
    try:
        return datetime(year, int(parts[1]), int(parts[2])), text[match.end() :].strip(" ,")
    except ValueError:
        return None, text


def _hours_of(text: str) -> float | None:
    match = _CLOCK.fullmatch(text.strip())
    if match is None or int(match["m"]) > 59:
        return None
    hours = int(match["h"]) + int(match["m"]) / 60.0 + int(match["s"] or 0) / 3600.0
    half = (match["half"] or "").casefold()
    if half and not 1 <= int(match["h"]) <= 12:
        return None
    if half.startswith("p") and int(match["h"]) < 12:
        hours += 12.0
    elif half.startswith("a") and int(match["h"]) == 12:
        hours -= 12.0
    return hours


def day_comes_first(texts: Iterable[str], answer: str | None) -> tuple[bool, str]:
    """Return whether the day stands before the month, and an example where nothing tells.

    Examples
    --------
    >>> day_comes_first(["03/14/2026", "03/04/2026"], None)
    (False, '')
    >>> day_comes_first(["03/04/2026"], None)
    (True, '03/04/2026')
    """
    open_example = ""
    for text in texts:
        match = _NUMBERS.match(text.strip())
        if match is None or match["sep"] == ".":
            continue
        if int(match["a"]) > 12:
            return True, ""
        if int(match["b"]) > 12:
            return False, ""
        if match["a"] != match["b"]:
            open_example = open_example or text.strip()
    if answer is not None:
        return answer == "day first", ""
    return True, open_example


_ROLES = {
    "dateandtime": "moment", "datetime": "moment", "sampledat": "moment", "sampled": "moment",
    "timestamp": "moment",
    "date": "date", "sampledate": "date", "datesampled": "date",
    "clocktime": "clock", "clock": "clock", "timeofday": "clock", "sampletime": "clock",
    "timesampled": "clock",
}  # fmt: skip


def with_hours(
    sheet: Sheet,
    test_position: int | None,
    starts: Mapping[str, str],
    answers: Answers,
    problems: list[Problem],
) -> Sheet:
    """Return a readings sheet with a column "time (h)" made of dates and clock times.

    Parameters
    ----------
    sheet : Sheet
    test_position : int or None
        Where the names of the tests stand.
    starts : mapping of test name to str
        When each test started, as written; its first row where it does not say.
    answers : Answers
    problems : list of Problem
        Added to.

    Returns
    -------
    Sheet
        The same where times are numbers already; else without the columns of dates, and with
        hours since the start.
    """
    roles = _roles_of(sheet)
    if not roles or test_position is None:
        return sheet
    if "elapsed" in roles and _goes_back(sheet, roles["elapsed"], test_position):
        roles = {"clock" if role == "elapsed" else role: i for role, i in roles.items()}
    if "elapsed" in roles:
        return _with_elapsed(sheet, roles, problems)
    if "hours" in roles:
        return _without(sheet, roles)
    texts = [row.cells[i] for i in roles.values() for row in sheet.rows]
    day_first, open_example = day_comes_first([*texts, *starts.values()], answers.dates)
    if open_example:
        problems.append(_ask_order(sheet, roles, open_example))
    maker = _Hours(sheet, roles, starts, answers, day_first, problems)
    return _with_column(sheet, roles, maker.hours(test_position))


def _roles_of(sheet: Sheet) -> dict[str, int]:
    """Where dates and clock times stand; "hours" where a plain time column does."""
    roles: dict[str, int] = {}
    for position, heading in enumerate(sheet.header):
        folded = re.sub(r"[\s_.-]+", "", heading.casefold())
        role = _ROLES.get(folded)
        stem = re.sub(r"\(.*", "", folded)
        if role is None and stem in ("time", "elapsedtime", "leachtime", "elapsed"):
            role = _role_of_cells(sheet, position, "(" in folded)
        if role is not None:
            roles.setdefault(role, position)
    return roles if set(roles) & {"elapsed", "moment", "clock", "date"} else {}


def _role_of_cells(sheet: Sheet, position: int, has_unit: bool) -> str:
    filled = [row.cells[position] for row in sheet.rows if row.cells[position]]
    stamps = [read_stamp(cell) for cell in filled if ":" in cell or not _plain(cell)]
    read = [stamp for stamp in stamps if stamp is not None]
    if 2 * len(read) <= len(filled):
        return "hours"
    if any(stamp.date is not None for stamp in read):
        return "moment"
    return "elapsed" if has_unit else "clock"


def _plain(cell: str) -> bool:
    return re.fullmatch(r"[0-9]+(?:[.,][0-9]*)?", cell) is not None


def _goes_back(sheet: Sheet, position: int, test_position: int) -> bool:
    """Whether hours and minutes fall within a test: then they are times of day."""
    last: dict[str, float] = {}
    for row in sheet.rows:
        stamp = read_stamp(row.cells[position])
        hours = stamp.hours if stamp is not None else None
        if hours is None:
            continue
        if hours < last.get(row.cells[test_position], 0.0):
            return True
        last[row.cells[test_position]] = hours
    return False


def _with_elapsed(sheet: Sheet, roles: Mapping[str, int], problems: list[Problem]) -> Sheet:
    """Hours and minutes under a heading in hours: time since the start."""
    position = roles["elapsed"]
    hours: list[str] = []
    example: tuple[int, str] | None = None
    for row in sheet.rows:
        cell = row.cells[position]
        stamp = read_stamp(cell) if ":" in cell else None
        if stamp is None or stamp.hours is None:
            hours.append(cell)
            continue
        example = example or (row.number, cell)
        hours.append(_text(stamp.hours))
    if example is not None:
        found = f"{example[1]!r} and the like are read as hours and minutes since the start"
        place = (sheet.file, example[0], sheet.header[position])
        problems.append(Problem(*place, "note", found))
    return _with_column(sheet, roles, hours)


@dataclass
class _Hours:
    """Hours since the start of each test, as text for the column of times."""

    sheet: Sheet
    roles: Mapping[str, int]
    starts: Mapping[str, str]
    answers: Answers
    day_first: bool
    problems: list[Problem]

    def hours(self, test_position: int) -> list[str]:
        by_test: dict[str, list[int]] = {}
        for i, row in enumerate(self.sheet.rows):
            by_test.setdefault(row.cells[test_position], []).append(i)
        made = [""] * len(self.sheet.rows)
        rolled: list[int] = []
        for test, rows in by_test.items():
            for i, text in zip(rows, self._of_test(test, rows, rolled), strict=True):
                made[i] = text
        if rolled and self.answers.clock_times != WITHIN_A_DAY:
            self._ask_midnight(rolled, made)
        self.problems.append(self._note())
        return made

    def _of_test(self, test: str, rows: Sequence[int], rolled: list[int]) -> list[str]:
        start = read_stamp(self.starts[test], self.day_first) if test in self.starts else None
        origin = start.moment if start is not None else None
        clock_origin = start.hours if start is not None and start.date is None else None
        before: float | None = clock_origin
        days = 0.0
        texts: list[str] = []
        for i in rows:
            stamp = self._stamp(i)
            if stamp is None:
                texts.append("")
                continue
            if stamp.moment is not None:
                origin = origin or stamp.moment
                texts.append(_text((stamp.moment - origin).total_seconds() / 3600.0))
                continue
            hours = (stamp.hours or 0.0) + days
            if before is not None and hours < before:
                days += 24.0
                hours += 24.0
                rolled.append(i)
            before = hours
            clock_origin = hours if clock_origin is None else clock_origin
            texts.append(_text(hours - clock_origin))
        return texts

    def _stamp(self, i: int) -> Stamp | None:
        row = self.sheet.rows[i]
        found = Stamp(None, None)
        for role in ("moment", "date", "clock"):
            position = self.roles.get(role)
            text = row.cells[position] if position is not None else ""
            if not text:
                continue
            stamp = read_stamp(text, self.day_first)
            if stamp is None:
                self.problems.append(self._not_a_time(i, role, text))
                return None
            found = Stamp(
                found.date if found.date is not None else stamp.date,
                stamp.hours if stamp.hours is not None and role != "date" else found.hours,
            )
        if found.date is None and found.hours is None:
            return None
        return found

    def _not_a_time(self, i: int, role: str, text: str) -> Problem:
        return Problem(
            self.sheet.file,
            self.sheet.rows[i].number,
            self.sheet.header[self.roles[role]],
            "stop",
            f"{text!r} is no date or time",
            "2026-03-01 14:30, 01/03/2026, 14:30, or hours since the start",
            "write the hours since the start of the test in a column time (h)",
        )

    def _ask_midnight(self, rolled: Sequence[int], made: Sequence[str]) -> None:
        row = self.sheet.rows[rolled[0]]
        heading = self.sheet.header[self.roles["clock"]]
        cell = row.cells[self.roles["clock"]]
        more = f" (and {len(rolled) - 1} more rows)" if len(rolled) > 1 else ""
        self.problems.append(
            Problem(
                self.sheet.file,
                row.number,
                heading,
                "ask",
                f"{cell} comes before the time in the row above: a new day? Read as "
                f"{made[rolled[0]]} h since the start{more}",
                "dates with the clock times, or hours since the start",
                f'write clock_times = "{WITHIN_A_DAY}" under [sheets] in the settings if no two '
                "samples are more than a day apart",
                f'sheets.clock_times = "{WITHIN_A_DAY}"',
            )
        )

    def _note(self) -> Problem:
        columns = " and ".join(f'"{self.sheet.header[i]}"' for i in self.roles.values())
        since = "the start in the tests sheet" if self.starts else "the first row of each test"
        found = f"hours are counted from {since}, by {columns}"
        return Problem(self.sheet.file, self.sheet.header_row, "", "note", found)


def _text(hours: float) -> str:
    return f"{hours:.6f}".rstrip("0").rstrip(".")


def _ask_order(sheet: Sheet, roles: Mapping[str, int], example: str) -> Problem:
    position = roles.get("moment", roles.get("date", 0))
    return Problem(
        sheet.file,
        sheet.rows[0].number,
        sheet.header[position],
        "ask",
        f"{example!r}: day or month first? Read with the day first meanwhile",
        "2026-04-03, or an answer",
        'write dates = "day first" or dates = "month first" under [sheets] in the settings',
        'sheets.dates = "day first"',
    )


def _without(sheet: Sheet, roles: Mapping[str, int]) -> Sheet:
    """The sheet without its columns of dates, where hours stand beside them."""
    drop = {i for role, i in roles.items() if role != "hours"}
    keep = [i for i in range(len(sheet.header)) if i not in drop]
    rows = tuple(SheetRow(r.number, tuple(r.cells[i] for i in keep)) for r in sheet.rows)
    return replace(sheet, header=tuple(sheet.header[i] for i in keep), rows=rows)


def _with_column(sheet: Sheet, roles: Mapping[str, int], hours: Sequence[str]) -> Sheet:
    kept = _without(sheet, roles)
    decimal = sheet.decimal
    rows = tuple(
        SheetRow(row.number, (*row.cells, text.replace(".", decimal)))
        for row, text in zip(kept.rows, hours, strict=True)
    )
    return replace(kept, header=(*kept.header, "time (h)"), rows=rows)
