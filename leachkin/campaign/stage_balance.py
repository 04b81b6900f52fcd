"""The balance stage: every analyte of every test."""

from __future__ import annotations

from collections.abc import Sequence

from leachkin.errors import InputProblems
from leachkin.problems import Problem
from leachkin.testwork import MetalBalance, Test, metal_balance

Balances = dict[str, tuple[MetalBalance, ...]]


def balance_stage(tests: Sequence[Test]) -> tuple[Balances, tuple[Problem, ...]]:
    """Return the metal balances of all analytes, by "domain/analyte", and what was noticed.

    A balance that cannot be made is a problem and the others are still made.
    """
    found: dict[str, list[MetalBalance]] = {}
    problems: list[Problem] = []
    for test in tests:
        for analyte in test.solution:
            try:
                balance = metal_balance(test, analyte)
            except InputProblems as error:
                problems += [p for p in error.problems if isinstance(p, Problem)]
                continue
            found.setdefault(balance.key, []).append(balance)
            problems += balance.problems
    return {key: tuple(rows) for key, rows in found.items()}, tuple(dict.fromkeys(problems))
