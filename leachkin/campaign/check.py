"""Checks a campaign without running it: every problem, how the tests stand, lines to paste."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from leachkin.campaign.campaign import Campaign, read_leniently
from leachkin.campaign.next_tests_given import candidate_problems
from leachkin.campaign.read_settings import quoted, split_dotted
from leachkin.campaign.result_tables import problems_table
from leachkin.campaign.run import STAGES
from leachkin.errors import InputProblems
from leachkin.problems import Problem
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import Test, test_inventory

#: How the states of a test are counted, in the order they are said.
_COUNTED = {
    "ready": "ready",
    "running": "running",
    "waiting for an answer": "need an answer",
    "no readings": "without readings",
    "excluded": "excluded",
}


@dataclass(frozen=True)
class CheckOutcome:
    """What a check found.

    Attributes
    ----------
    problems : tuple of Problem
        Stops first, then questions, then notes.
    tests : tuple of Test
    counts : mapping of state to int
    stages : tuple of str
        Stages that would run.
    paste : tuple of str
        What to type, each with its file and row.
    settings : tuple of str
        Lines for the settings that answer questions, as ``sheets.ton = "short"``.
    """

    problems: tuple[Problem, ...]
    tests: tuple[Test, ...] = ()
    counts: Mapping[str, int] = field(default_factory=dict)
    stages: tuple[str, ...] = ()
    paste: tuple[str, ...] = ()
    settings: tuple[str, ...] = ()

    @property
    def stops(self) -> int:
        """Number of problems that stop a run."""
        return sum(problem.level == "stop" for problem in self.problems)

    @property
    def summary(self) -> str:
        """Counts in one line, as "24 tests: 19 ready, 3 running, 2 need an answer"."""
        words = [
            f"{self.counts[state]} {said}"
            for state, said in _COUNTED.items()
            if self.counts.get(state)
        ]
        tests = f"{len(self.tests)} tests: {', '.join(words)}" if self.tests else "no tests"
        levels = [sum(p.level == level for p in self.problems) for level in ("stop", "ask", "note")]
        problems = f"{levels[0]} stops, {levels[1]} questions, {levels[2]} notes"
        stages = f"would run: {', '.join(self.stages)}" if self.stages else "nothing would run"
        return f"{tests}; {problems}; {stages}."

    def settings_block(self, workbook: bool = False) -> str:
        """Return the lines that answer questions, as they are pasted; "" where there is none.

        Parameters
        ----------
        workbook : bool
            True for rows of a settings sheet instead of lines of a campaign file.
        """
        if workbook:
            return "\n".join(
                f"{key}\t{value.strip(chr(34))}"
                for key, _, value in (line.partition(" = ") for line in self.settings)
            )
        tables: dict[str, list[str]] = {}
        for line in self.settings:
            key, _, value = line.partition(" = ")
            *table, name = split_dotted(key)
            tables.setdefault(".".join(table), []).append(f"{quoted(name)} = {value}")
        return "\n".join(f"[{table}]\n" + "\n".join(lines) for table, lines in tables.items())

    def tables(self) -> tuple[ResultTable, ...]:
        """Return the inventory of tests, the problems, and the lines to paste."""
        tables = [test_inventory(self.tests)] if self.tests else []
        tables.append(problems_table(self.problems))
        if self.paste:
            columns = (Column("line", "To paste or to do"),)
            tables.append(
                ResultTable.from_records(
                    "to_paste", columns, [{"line": line} for line in self.paste]
                )
            )
        return tuple(tables)


def check_campaign(path: str | Path, overrides: Mapping[str, str] | None = None) -> CheckOutcome:
    """Return every problem of a campaign file and its sheets; nothing is run.

    Parameters
    ----------
    path : str or Path
        As in :func:`read_campaign`.
    overrides : mapping of dotted key to text, optional

    Returns
    -------
    CheckOutcome
    """
    try:
        campaign = read_leniently(path, overrides)
    except InputProblems as error:
        problems = tuple(p for p in error.problems if isinstance(p, Problem))
        return CheckOutcome(problems, paste=tuple(_lines(problems)), settings=_settings(problems))
    problems = _sorted((*campaign.problems, *candidate_problems(campaign)))
    states = [test.state for test in campaign.tests]
    return CheckOutcome(
        problems,
        campaign.tests,
        {state: states.count(state) for state in dict.fromkeys(states)},
        () if any(p.level == "stop" for p in problems) else tuple(_stages(campaign)),
        tuple(_lines(problems)),
        _settings(problems),
    )


def _settings(problems: Iterable[Problem]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(problem.paste for problem in problems if problem.paste))


def _sorted(problems: Iterable[Problem]) -> tuple[Problem, ...]:
    order = {"stop": 0, "ask": 1, "note": 2}
    return tuple(sorted(problems, key=lambda problem: order[problem.level]))


def _stages(campaign: Campaign) -> list[str]:
    has = campaign.settings.has
    tested = bool(campaign.tests)
    there = {
        "balance": tested,
        "kinetics": tested or bool(campaign.observed) or has("rate_law"),
        "gangue": has("gangue") or any(t.free_reagent_g_per_L is not None for t in campaign.tests),
        **{name: has(name) for name in ("tank", "heap", "cementation", "budget")},
        "hazards": True,
    }
    return [stage for stage in STAGES if there[stage]]


def _lines(problems: Iterable[Problem]) -> list[str]:
    return list(
        dict.fromkeys(
            f"{problem.where}: {problem.try_this}"
            for problem in problems
            if problem.level in ("stop", "ask") and problem.try_this
        )
    )
