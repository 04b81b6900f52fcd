"""Names that people write in more than one way: tests, domains, policies, kinds."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import get_args

from leachkin.problems import Problem, unknown_name
from leachkin.testwork.records import AliquotPolicy

#: A row whose test or domain begins so shows how to fill a sheet in, and is left out.
EXAMPLE = "EXAMPLE"
#: Other headings of a column of test names.
TEST_NAMES = (
    "test id", "test no", "test name", "test number", "testno", "bottle", "bottle no",
    "bottle id", "column no", "column id",
)  # fmt: skip
KINDS = ("bottle roll", "stirred tank", "column")
POLICIES: tuple[AliquotPolicy, ...] = get_args(AliquotPolicy)
_OTHER_POLICY_NAMES: dict[str, AliquotPolicy] = {
    "replaced by reagent": "replaced by reagent solution",
    "replaced by fresh solution": "replaced by reagent solution",
    "replaced by fresh": "replaced by reagent solution",
    "fresh solution": "replaced by reagent solution",
    "water": "replaced by water",
    "replaced with water": "replaced by water",
    "made up to volume with reagent solution": "made up with reagent solution",
    "made up to volume with water": "made up with water",
    "made up to mass with reagent solution": "made up with reagent solution",
    "made up to mass with water": "made up with water",
    "made up to the mark with reagent solution": "made up with reagent solution",
    "made up to the mark with water": "made up with water",
    "none": "not replaced",
    "no": "not replaced",
}


def fold_name(name: str) -> str:
    """Return a name without case, spaces, hyphens and underscores.

    Examples
    --------
    >>> fold_name("C-03") == fold_name("c 03")
    True
    """
    return re.sub(r"[\s_-]+", "", name.casefold())


def is_test_heading(heading: str) -> bool:
    """Return True for the heading of a column of test names.

    Examples
    --------
    >>> is_test_heading("Test No."), is_test_heading("time (h)")
    (True, False)
    """
    folded = fold_name(heading).strip(".:#")
    return folded in {fold_name(name) for name in ("test", *TEST_NAMES)}


def find_policy(text: str) -> AliquotPolicy | None:
    """Return the aliquot policy that a text names, None if it names none."""
    folded = " ".join(text.casefold().replace("_", " ").split()).replace(" by ", " with ")
    for written, policy in (*zip(POLICIES, POLICIES, strict=True), *_OTHER_POLICY_NAMES.items()):
        if folded == written.replace(" by ", " with "):
            return policy
    return None


class TestNames:
    """Looks up tests by the name in another sheet; spellings that differ are asked about once.

    Parameters
    ----------
    names : iterable of str
        The names in the tests sheet.
    """

    __test__ = False  # not a test case for pytest

    def __init__(self, names: Iterable[str]) -> None:
        self.names = list(names)
        self._exact = set(self.names)
        self._folded: dict[str, list[str]] = {}
        for name in self.names:
            self._folded.setdefault(fold_name(name), []).append(name)
        self._told: set[tuple[str, str]] = set()

    def find(
        self, text: str, file: str, row: int, column: str, problems: list[Problem]
    ) -> str | None:
        """Return the test's name as in the tests sheet, None if there is no such test."""
        if text in self._exact:
            return text
        first_time = (file, text) not in self._told
        self._told.add((file, text))
        alike = self._folded.get(fold_name(text), [])
        if text and len(alike) == 1:
            if first_time:
                problems.append(_spelled_otherwise(text, alike[0], file, row, column))
            return alike[0]
        if first_time:
            problems.append(self._unknown(text, file, row, column))
        return None

    def _unknown(self, text: str, file: str, row: int, column: str) -> Problem:
        if not text:
            found = "the row names no test"
            return Problem(file, row, column, "stop", found, "a test of the tests sheet")
        return unknown_name("test", text, self.names, file=file, row=row, column=column)

    def alike(self) -> list[list[str]]:
        """Return the groups of names that differ only in case, spaces or hyphens."""
        return [group for group in self._folded.values() if len(group) > 1]


def _spelled_otherwise(text: str, known: str, file: str, row: int, column: str) -> Problem:
    return Problem(
        file,
        row,
        column,
        "ask",
        f"{text!r} is spelled {known!r} in the tests sheet; read as that test",
        "one spelling a test",
        f"write {known!r} in both",
    )
