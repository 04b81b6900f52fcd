"""The errors and the warning that leachkin raises.

Every error has one base, :class:`LeachkinError`, and also inherits the built-in that a caller
would expect. Known errors become one message and exit code 1 on the command line.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from typing import Protocol


class _ProblemLike(Protocol):
    """Anything that prints as one problem."""

    @property
    def level(self) -> str: ...

    def __str__(self) -> str: ...


class LeachkinError(Exception):
    """Base of every error that leachkin raises on purpose."""


class InputProblems(LeachkinError, ValueError):  # noqa: N818 - the public name is a plural noun
    """One or more problems in what was given.

    Parameters
    ----------
    problems : sequence of Problem
        Each with file, row, column, what was found, what is allowed, what to try.
    """

    def __init__(self, problems: Sequence[_ProblemLike]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))

    def __reduce__(self) -> tuple[type, tuple[Sequence[_ProblemLike]]]:
        return (type(self), (self.problems,))


class TableError(LeachkinError, ValueError):
    """A table of the package is damaged: a missing column, an unknown source, a value that is
    not a number."""


class UnitError(LeachkinError, ValueError):
    """A quantity cannot be read: no unit, an unknown spelling, or one that needs an answer.

    Parameters
    ----------
    found, allowed, try_this : str
        The parts of a problem; the caller adds file, row and column.
    ambiguous : bool
        True where the spelling has more than one meaning and the user must choose.
    """

    def __init__(self, found: str, allowed: str, try_this: str, ambiguous: bool = False) -> None:
        self.found = found
        self.allowed = allowed
        self.try_this = try_this
        self.ambiguous = ambiguous
        super().__init__(f"{found}. Allowed: {allowed}. Try: {try_this}")

    def __reduce__(self) -> tuple[type, tuple[str, str, str, bool]]:
        return (type(self), (self.found, self.allowed, self.try_this, self.ambiguous))


class MissingExtraError(LeachkinError, ImportError):
    """An optional package is needed and not installed; the message says how to install it."""


class LeachkinWarning(UserWarning):
    """A result stands, but something about it should be known; results keep the text too."""


def nearest_names(name: str, known: Iterable[str], count: int = 3) -> list[str]:
    """Return the known names nearest to a mistyped one, best first.

    Examples
    --------
    >>> nearest_names("tempratur", ["temperature", "time", "reagent"])
    ['temperature']
    """
    scored = [
        (_likeness(name.casefold(), candidate.casefold()), _likeness(name, candidate), candidate)
        for candidate in dict.fromkeys(known)
    ]
    near = sorted((item for item in scored if item[0] >= 0.5), key=lambda item: item[:2])
    return [candidate for _, _, candidate in near[::-1][:count]]


def _likeness(first: str, second: str) -> float:
    return difflib.SequenceMatcher(None, first, second).ratio()
