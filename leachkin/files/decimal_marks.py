"""Decimal and thousands marks of a whole file: found by unmistakable cells, refused when mixed.

``1,234`` alone says nothing: it is read by what other cells of the file prove.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from leachkin.files.numerals import DecimalMark
from leachkin.problems import Problem

Row = tuple[int, Sequence[str]]
SEPARATOR_NAMES = {";": "semicolons", "\t": "tabs", ",": "commas", "|": "bars"}
#: Columns whose cells are names or words even where they look like numbers.
_WORDS = re.compile(
    r"(?:note|remark|comment|test|sample|domain|ore|product|kind|lab|job|method|certificate|date"
    r"|who|by\b|reason|id\b|standard|batch|hole|bag)"
)
_HEADING_ROWS = 40
_SPACES = "\u0020\u00a0\u2009\u202f'\u2019"
_GROUPED_BY_SPACE = re.compile(rf"[0-9]{{1,3}}(?:[{_SPACES}][0-9]{{3}})+(?![0-9])")
_EXPONENT = re.compile(r"[eE][+-]?[0-9]+$")
#: Patterns of a numeral without sign and exponent; the first that fits names its kind.
_KINDS = (
    ("point after commas", re.compile(r"[0-9]{1,3}(?:,[0-9]{3})+\.[0-9]*")),
    ("comma after points", re.compile(r"[0-9]{1,3}(?:\.[0-9]{3})+,[0-9]*")),
    ("groups by comma", re.compile(r"[1-9][0-9]{0,2}(?:,[0-9]{3}){2,}")),
    ("groups by point", re.compile(r"[1-9][0-9]{0,2}(?:\.[0-9]{3}){2,}")),
    ("comma and three", re.compile(r"[1-9][0-9]{0,2},[0-9]{3}")),
    ("point and three", re.compile(r"[1-9][0-9]{0,2}\.[0-9]{3}")),
    ("comma", re.compile(r"[0-9]+,[0-9]*|,[0-9]+")),
    ("point", re.compile(r"[0-9]+\.[0-9]*|\.[0-9]+")),
)
_PROVE_COMMA = ("comma", "comma after points", "groups by point")
_PROVE_POINT = ("point", "point after commas", "groups by comma")
#: A value read with a thousands mark may not dwarf the others of its column so many times.
_OUT_OF_SCALE = 100.0


@dataclass
class _Seen:
    """A first cell of each kind with its place, and how many there are."""

    first: dict[str, tuple[int, int, str]] = field(default_factory=dict)
    count: dict[str, int] = field(default_factory=dict)

    def add(self, kind: str, row: int, position: int, cell: str) -> None:
        self.first.setdefault(kind, (row, position, cell))
        self.count[kind] = self.count.get(kind, 0) + 1

    def any_of(self, kinds: Iterable[str]) -> str | None:
        return next((kind for kind in kinds if kind in self.first), None)


@dataclass(frozen=True)
class Marks:
    """What a file uses.

    Attributes
    ----------
    decimal : "." or ","
    rows : list of (row number, cells)
        With thousands marks taken out.
    problems : list of Problem
    """

    decimal: DecimalMark
    rows: list[Row]
    problems: list[Problem]


def settle_marks(
    file: str,
    rows: list[Row],
    separator: str = "",
    answer: str | None = None,
) -> Marks:
    """Find the decimal mark of a table, and take thousands marks out of its cells.

    Parameters
    ----------
    file : str
    rows : list of (row number, cells)
    separator : str
        Between the cells; "" in a workbook, where only text cells are given.
    answer : "." or ",", optional
        What the user says the decimal mark is.

    Returns
    -------
    Marks

    Examples
    --------
    >>> settle_marks("a.csv", [(1, ["a"]), (2, ["1.234,5"])], ";").rows[1]
    (2, ['1234,5'])
    """
    seen = _Seen()
    grouped_by_space = False
    left_out = _columns_of_words(rows)
    for number, cells in rows:
        for position, cell in enumerate(cells):
            if position in left_out or not _may_be_marked(cell):
                continue
            core = _core(cell)
            if spaced := _without_spaces(core):
                grouped_by_space = True
                seen.add("groups by space", number, position, cell)
                core = spaced
            if kind := _kind(core):
                seen.add(kind, number, position, cell)
    return _settled(file, rows, separator, answer, seen, left_out, grouped_by_space)


def _settled(
    file: str,
    rows: list[Row],
    separator: str,
    answer: str | None,
    seen: _Seen,
    left_out: set[int],
    grouped_by_space: bool,
) -> Marks:
    comma, point = seen.any_of(_PROVE_COMMA), seen.any_of(_PROVE_POINT)
    if comma and point:
        return Marks(".", rows, [_mixed(file, rows, seen, (comma, point))])
    if answer is not None and (point if answer == "," else comma):
        return Marks(".", rows, [_against_the_answer(file, rows, seen, answer)])
    decimal = _decimal(seen, separator, answer, comma)
    foreign = "point and three" if decimal == "," else "comma and three"
    groups = "." if decimal == "," else ","
    proven = seen.any_of(
        ("comma after points", "groups by point")
        if decimal == ","
        else ("point after commas", "groups by comma")
    )
    problems: list[Problem] = []
    if foreign in seen.first:
        if not proven and decimal == ",":
            other = seen.any_of(("comma", "comma and three"))
            return Marks(".", rows, [_mixed(file, rows, seen, (other, foreign))])
        if not proven and not point and answer is None:
            return Marks(decimal, rows, problems)  # nothing proves anything: the cell is refused
        if fault := _out_of_scale(file, rows, left_out):
            return Marks(".", rows, [fault])
    if proven or foreign in seen.first or grouped_by_space:
        rows = _without_groups(rows, groups, left_out)
        problems.append(_groups_note(file, rows, seen, groups, proven or foreign, decimal))
    if decimal == ",":
        problems.append(_comma_note(file, rows, seen, separator, answer))
    return Marks(decimal, rows, problems)


def _decimal(seen: _Seen, separator: str, answer: str | None, comma: str | None) -> DecimalMark:
    if answer in (".", ","):
        return "," if answer == "," else "."
    if comma or ("comma and three" in seen.first and separator in (";", "\t", "|")):
        return "," if not seen.any_of(_PROVE_POINT) else "."
    return "."


def _may_be_marked(cell: str) -> bool:
    return (
        bool(cell)
        and ("," in cell or "." in cell or " " in cell or not cell.isascii() or "'" in cell)
        and any(character.isdigit() for character in cell)
    )


def _core(cell: str) -> str:
    """A cell without spaces, bound signs, sign, per cent sign and exponent."""
    core = cell.strip().lstrip("<>~=\u2264\u2265 ").lstrip("+-\u2212\u2013").rstrip("% ")
    return _EXPONENT.sub("", core)


def _without_spaces(core: str) -> str:
    match = _GROUPED_BY_SPACE.match(core)
    if match is None:
        return ""
    rest = core[match.end() :]
    if rest and not re.fullmatch(r"[.,][0-9]*", rest):
        return ""
    return re.sub(rf"[{_SPACES}]", "", match.group()) + rest


def _kind(core: str) -> str:
    if "," not in core and "." not in core:
        return ""
    return next((kind for kind, pattern in _KINDS if pattern.fullmatch(core)), "")


def _columns_of_words(rows: Sequence[Row]) -> set[int]:
    found = set()
    for _, cells in rows[:_HEADING_ROWS]:
        for position, cell in enumerate(cells):
            if _WORDS.match(cell.strip().casefold()):
                found.add(position)
    return found


def _heading_of(rows: Sequence[Row], position: int) -> str:
    for _, cells in rows:
        if position < len(cells) and cells[position].strip():
            heading = " ".join(cells[position].split())
            return heading if not heading[0].isdigit() else ""
    return ""


def _place(rows: Sequence[Row], seen: _Seen, kind: str) -> str:
    row, position, cell = seen.first[kind]
    heading = _heading_of(rows, position)
    column = f'column "{heading}"' if heading else f"column {position + 1}"
    return f"{cell!r} in row {row}, {column}"


def _mixed(
    file: str, rows: Sequence[Row], seen: _Seen, kinds: tuple[str | None, str | None]
) -> Problem:
    named = [kind for kind in kinds if kind]
    row, position, _ = max(seen.first[kind] for kind in named)
    return Problem(
        file,
        row,
        _heading_of(rows, position),
        "stop",
        f"decimal marks are mixed: {' and '.join(_place(rows, seen, kind) for kind in named)}",
        "one decimal mark in a file, and no thousands marks that look like one",
        "write all numbers with the same mark",
    )


def _against_the_answer(file: str, rows: Sequence[Row], seen: _Seen, answer: str) -> Problem:
    kinds = _PROVE_POINT if answer == "," else _PROVE_COMMA
    kind = seen.any_of(kinds) or ""
    row, position, _ = seen.first[kind]
    return Problem(
        file,
        row,
        _heading_of(rows, position),
        "stop",
        f"the settings say decimal_mark = {answer!r}, but {_place(rows, seen, kind)} has another",
        f"numbers with {answer!r}",
        "correct the cell, or take decimal_mark out of the settings",
    )


def _out_of_scale(file: str, rows: Sequence[Row], left_out: set[int]) -> Problem | None:
    """A column where taking the comma for a thousands mark makes a jump of a hundred times."""
    plain: dict[int, float] = {}
    grouped: dict[int, tuple[float, int, str]] = {}
    for number, cells in rows:
        for position, cell in enumerate(cells):
            core = _core(cell)
            if position in left_out or not core or not core[0].isdigit():
                continue
            kind = _kind(core)
            try:
                value = float(core.replace(",", ""))
            except ValueError:
                continue
            if kind == "comma and three":
                if position not in grouped or value > grouped[position][0]:
                    grouped[position] = (value, number, cell)
            elif kind in ("", "point", "point and three"):
                plain[position] = max(plain.get(position, 0.0), value)
    for position, (value, number, cell) in grouped.items():
        if 0.0 < plain.get(position, 0.0) < value / _OUT_OF_SCALE:
            return Problem(
                file,
                number,
                _heading_of(rows, position),
                "stop",
                f"decimal marks are mixed: {cell!r} would be {value:g} in a column that else goes "
                f"up to {plain[position]:g}",
                "one decimal mark in a file",
                "write the number without a comma, or with a decimal point",
            )
    return None


def _without_groups(rows: Sequence[Row], groups: str, left_out: set[int]) -> list[Row]:
    """The rows with thousands marks taken out of cells that are numerals."""
    numeral = re.compile(
        rf"(?P<before>[<>~=\u2264\u2265\s]*[+\-\u2212\u2013]?)"
        rf"(?P<whole>[0-9]{{1,3}}(?:[{_SPACES}{re.escape(groups)}][0-9]{{3}})+)"
        rf"(?P<rest>(?:[.,][0-9]*)?(?:[eE][+-]?[0-9]+)?\s*%?\s*)"
    )
    strip = re.compile(rf"[{_SPACES}{re.escape(groups)}]")

    def cleaned(cell: str) -> str:
        match = numeral.fullmatch(cell)
        if match is None:
            return cell
        return match["before"] + strip.sub("", match["whole"]) + match["rest"]

    return [
        (n, [cleaned(c) if i not in left_out else c for i, c in enumerate(cells)])
        for n, cells in rows
    ]


def _groups_note(
    file: str, rows: Sequence[Row], seen: _Seen, groups: str, kind: str, decimal: str
) -> Problem:
    shown = kind if kind in seen.first else "groups by space"
    count = sum(
        seen.count.get(k, 0)
        for k in (
            ("comma after points", "groups by point", "point and three")
            if groups == "."
            else ("point after commas", "groups by comma", "comma and three")
        )
    ) + seen.count.get("groups by space", 0)
    name = "points" if groups == "." else "commas"
    marks = "spaces or apostrophes" if shown == "groups by space" else name
    cells = "cell" if count == 1 else "cells"
    return Problem(
        file,
        None,
        "",
        "note",
        f"read with {marks} as thousands marks in {count} {cells}, as "
        f"{_place(rows, seen, shown)}; the decimal mark is {decimal!r}",
        "",
        "if that is wrong, write the numbers without thousands marks",
    )


def _comma_note(
    file: str, rows: Sequence[Row], seen: _Seen, separator: str, answer: str | None
) -> Problem:
    between = f"{SEPARATOR_NAMES[separator]} between cells and " if separator else ""
    kind = seen.any_of((*_PROVE_COMMA, "comma and three"))
    cells = sum(seen.count.get(k, 0) for k in (*_PROVE_COMMA, "comma and three"))
    found = f"read with {between}decimal commas in {cells} cells"
    found += f", as {_place(rows, seen, kind)}" if kind else ""
    if answer is not None or seen.any_of(_PROVE_COMMA):
        return Problem(file, None, "", "note", found)
    return Problem(
        file,
        None,
        "",
        "ask",
        f"{found}; each comma has three digits after it and may be a thousands mark",
        "numbers without thousands marks",
        'write decimal_mark = "," or decimal_mark = "." under [sheets] in the settings',
    )
