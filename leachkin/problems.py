"""Problems: where, what was found, what is allowed, what to try.

A problem is made where a value is read and travels with the result; nothing is dropped on the way.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Literal

from leachkin.errors import InputProblems, UnitError, nearest_names

Level = Literal["stop", "ask", "note"]


@dataclass(frozen=True)
class Problem:
    """One thing to know about the input.

    Attributes
    ----------
    file : str
        File name (with ``#Sheet`` in a workbook), or "" for an argument of a call.
    row : int or None
        Row as a person counts it in the file, the first line being 1.
    column : str
        Column heading, dotted key of a settings file, or argument name.
    level : "stop", "ask" or "note"
        stop: has no meaning as it stands; ask: needs an answer, what could be done was done
        and is provisional; note: done, and should be known.
    found, allowed, try_this : str
        What was found with its unit, what is allowed, what to type or to look at.
    paste : str
        The line of the settings that answers the question, as ``sheets.ton = "short"``; "" where
        no setting does.
    """

    file: str
    row: int | None
    column: str
    level: Level
    found: str
    allowed: str = ""
    try_this: str = ""
    paste: str = ""

    @property
    def where(self) -> str:
        """The place in words, as ``readings.csv, row 9, column "Cu (g/L)"``."""
        parts = [self.file] if self.file else []
        if self.row is not None:
            parts.append(f"row {self.row}")
        if self.column:
            parts.append(f'column "{self.column}"' if self.row is not None else self.column)
        return ", ".join(parts)

    def __str__(self) -> str:
        text = f"{self.where}: {self.found}" if self.where else self.found
        for word, part in (("Allowed", self.allowed), ("Try", self.try_this)):
            if part:
                text += f"{'' if text.endswith('?') else '.'} {word}: {part}"
        return text.replace("..", ".") if text.count("..") == 1 else text

    def at(self, *, file: str = "", row: int | None = None, column: str = "") -> Problem:
        """Return the same problem with a place filled in where it has none."""
        return replace(
            self,
            file=self.file or file,
            row=self.row if self.row is not None else row,
            column=self.column or column,
        )


def stop_if_any(problems: Iterable[Problem]) -> None:
    """Raise :class:`InputProblems` with every problem if one of them is a stop."""
    listed = tuple(problems)
    if any(problem.level == "stop" for problem in listed):
        raise InputProblems([problem for problem in listed if problem.level == "stop"])


def argument_error(name: str, found: str, allowed: str, try_this: str = "") -> InputProblems:
    """Return the error for an argument of a Python call that has no meaning.

    Examples
    --------
    >>> raise argument_error("lift_m", "-2 m", "above 0 m")
    Traceback (most recent call last):
    leachkin.errors.InputProblems: lift_m: -2 m. Allowed: above 0 m
    """
    return InputProblems([Problem("", None, name, "stop", found, allowed, try_this)])


def unknown_name(
    kind: str,
    name: str,
    known: Iterable[str],
    *,
    file: str = "",
    row: int | None = None,
    column: str = "",
) -> Problem:
    """Return the problem for a name that is not known, with the nearest known ones."""
    names = list(known)
    near = nearest_names(name, names)
    hint = f"did you mean {' or '.join(near)}?" if near else ""
    return Problem(file, row, column, "stop", f"unknown {kind} {name!r}", ", ".join(names), hint)


def unit_problem(
    error: UnitError, *, file: str = "", row: int | None = None, column: str = ""
) -> Problem:
    """Return the problem for a quantity that could not be read."""
    level: Level = "ask" if error.ambiguous else "stop"
    return Problem(file, row, column, level, error.found, error.allowed, error.try_this)
