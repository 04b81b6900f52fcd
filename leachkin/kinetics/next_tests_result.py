"""What further tests would tell: by candidate, as a set, and in words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.errors import InputProblems
from leachkin.kinetics.next_tests_candidate import Candidate
from leachkin.problems import unknown_name
from leachkin.result_table import Column, ResultTable


@dataclass(frozen=True)
class Outlook:
    """How well one target is known, now or with further tests.

    Attributes
    ----------
    target, unit : str
    value : float
        The present estimate; an expected interval is drawn about it.
    low, high : float or None
        None where nothing would be told.
    shrink : float
        Share of the present interval that goes; 1 where there is none at present.
    opened : bool
        True where this is the first interval of the target.
    untold : tuple of str
        Quantities that the target depends on and no test tells.
    """

    target: str
    unit: str
    value: float
    low: float | None
    high: float | None
    shrink: float = 0.0
    opened: bool = False
    untold: tuple[str, ...] = ()

    @property
    def half_width(self) -> float | None:
        """Half the width of the interval, natural scale."""
        if self.low is None or self.high is None:
            return None
        return 0.5 * (self.high - self.low)


@dataclass(frozen=True)
class Separation:
    """Whether a candidate would tell apart laws that the present tests do not.

    Attributes
    ----------
    chance : float
        That only the true law would be left at the rule of the ranking, over the laws by their
        weights.
    lead : float
        Expected lead of the true law over the nearest other one in AICc.
    by_truth : mapping of law to float
        The chance where that law is true.
    """

    chance: float
    lead: float
    by_truth: Mapping[str, float]


@dataclass(frozen=True)
class CandidateGain:
    """What one candidate would tell.

    Attributes
    ----------
    candidate : Candidate
    outlooks : tuple of Outlook
        With this candidate, for each target.
    shrink : float
        Mean of the shares of the intervals that go.
    information : float
        Mean of the logarithms of the ratios of the widths: the measure that ranks.
    by_multiple : mapping of int to float
        Mean shrink with so many times its bottles.
    per_cost : float or None
        Measure over cost, where every candidate has a cost.
    separation : Separation or None
    """

    candidate: Candidate
    outlooks: tuple[Outlook, ...]
    shrink: float
    information: float
    by_multiple: Mapping[int, float]
    per_cost: float | None = None
    separation: Separation | None = None

    @property
    def name(self) -> str:
        """Name of the candidate."""
        return self.candidate.name

    def outlook(self, target: str) -> Outlook:
        """Return the outlook of one target.

        Raises
        ------
        InputProblems
            With the nearest names, if there is none such.
        """
        return _one(self.outlooks, target)


@dataclass(frozen=True)
class Step:
    """One step of a set of tests, each chosen to add most to those before it."""

    name: str
    bottles: int
    outlooks: tuple[Outlook, ...]
    shrink: float
    cost: float | None


@dataclass(frozen=True)
class NextTests:
    """What further tests would tell.

    Attributes
    ----------
    law : str
    level : float
    present : tuple of Outlook
        The targets as the present tests tell them.
    rows : tuple of CandidateGain
        Best first.
    steps : tuple of Step
        A set of tests, chosen one after the other.
    laws : tuple of str
        Laws that cannot be told apart, where asked for.
    left_out : tuple of str
        Assumed quantities that the prediction takes no other value of: not in its interval.
    remarks : tuple of str
    """

    law: str
    level: float
    present: tuple[Outlook, ...]
    rows: tuple[CandidateGain, ...]
    steps: tuple[Step, ...] = ()
    laws: tuple[str, ...] = ()
    left_out: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()

    @property
    def best(self) -> CandidateGain:
        """The candidate that tells most."""
        return self.rows[0]

    def row(self, name: str) -> CandidateGain:
        """Return a candidate by name.

        Raises
        ------
        InputProblems
            With the nearest names, if there is none such.
        """
        for row in self.rows:
            if row.name == name:
                return row
        raise InputProblems([unknown_name("candidate", name, [r.name for r in self.rows])])

    def now(self, target: str) -> Outlook:
        """Return a target as the present tests tell it."""
        return _one(self.present, target)

    def tables(self) -> tuple[ResultTable, ...]:
        """Return the candidates, the intervals and the set, as tables."""
        tables = [self.ranking_table(), self.interval_table()] if self.present else []
        if self.laws:
            tables.append(self.separation_table())
        if self.steps:
            tables.append(self.set_table())
        return tuple(tables)

    def ranking_table(self) -> ResultTable:
        """Return the candidates, best first, with what more bottles would add."""
        counts = sorted({n for row in self.rows for n in row.by_multiple})
        columns = [*_CONDITIONS, Column("shrink", "Interval shrinks by", "%", digits=2)]
        columns += [Column(f"shrink_{n}", f"{n} x bottles", "%", digits=2) for n in counts]
        if any(row.per_cost is not None for row in self.rows):
            columns.append(Column("cost", "Cost"))
            columns.append(Column("per_cost", "Gain per cost, best = 100", digits=3))
        columns.append(Column("why", "What for"))
        best = max((row.per_cost or 0.0 for row in self.rows), default=0.0) or 1.0
        records = []
        for row in self.rows:
            record = _conditions(row.candidate)
            record["why"] = row.candidate.why
            if not all(outlook.opened for outlook in row.outlooks):
                record["shrink"] = 100.0 * row.shrink
                record |= {f"shrink_{n}": 100.0 * value for n, value in row.by_multiple.items()}
            if row.per_cost is not None:
                record |= {
                    "cost": row.candidate.total_cost,
                    "per_cost": 100.0 * row.per_cost / best,
                }
            records.append(record)
        targets = ", ".join(outlook.target for outlook in self.present)
        caption = f"Mean over {targets}; law {self.law}"
        return ResultTable.from_records("next_tests", columns, records, caption)

    def interval_table(self, best: int | None = None) -> ResultTable:
        """Return every target, now and as each candidate, or the best of them, would leave it."""
        columns = (
            Column("candidate", "With"),
            Column("target", "Of"),
            Column("value", "Value"),
            Column("unit", "Unit"),
            Column("low", f"Low, {100 * self.level:g} %"),
            Column("high", f"High, {100 * self.level:g} %"),
            Column("shrink", "Shrinks by", "%", digits=2),
            Column("remark", "Remark"),
        )
        records = [_interval("the present tests", outlook) for outlook in self.present]
        for row in self.rows[:best]:
            records += [_interval(row.name, outlook) for outlook in row.outlooks]
        caption = "Expected intervals, linearised, drawn about the present values"
        return ResultTable.from_records("next_test_intervals", columns, records, caption)

    def separation_table(self) -> ResultTable:
        """Return how likely each candidate would leave the true law alone."""
        columns = [
            Column("candidate", "Test"),
            Column("chance", "Chance that only the true law is left", "%", digits=2),
            Column("lead", "Expected lead in AICc", digits=2),
            *(Column(law, f"if {law} is true", "%", digits=2) for law in self.laws),
        ]
        rows = [row for row in self.rows if row.separation is not None]
        records = []
        for row in sorted(
            rows, key=lambda r: (-(r.separation.chance if r.separation else 0), r.name)
        ):
            if row.separation is not None:
                record: dict[str, Any] = {"candidate": row.name, "lead": row.separation.lead}
                record["chance"] = 100.0 * row.separation.chance
                record |= {law: 100.0 * p for law, p in row.separation.by_truth.items()}
                records.append(record)
        caption = f"Laws that cannot be told apart now: {', '.join(self.laws)}"
        return ResultTable.from_records("next_test_separation", columns, records, caption)

    def set_table(self) -> ResultTable:
        """Return the set of tests in the order in which they were chosen."""
        columns = [
            Column("step", "Step"),
            Column("candidate", "Test"),
            Column("bottles", "Bottles"),
            Column("shrink", "Interval has shrunk by", "%", digits=2),
        ]
        if len(self.present) == 1:
            unit = self.present[0].unit
            columns += [
                Column(end, f"{end.capitalize()}, {100 * self.level:g} %", unit)
                for end in ("low", "high")
            ]
        if any(step.cost is not None for step in self.steps):
            columns.append(Column("cost", "Cost so far"))
        records = [
            {
                "step": number,
                "candidate": step.name,
                "bottles": step.bottles,
                "shrink": None if step.outlooks[0].opened else 100.0 * step.shrink,
                "low": step.outlooks[0].low,
                "high": step.outlooks[0].high,
                "cost": step.cost,
            }
            for number, step in enumerate(self.steps, start=1)
        ]
        caption = "Each test adds most to those before it"
        return ResultTable.from_records("next_test_set", columns, records, caption)


_CONDITIONS = (
    Column("candidate", "Test"),
    Column("temperature", "Temperature", "degC"),
    Column("size", "Size", "mm"),
    Column("reagent", "Reagent", "g/L"),
    Column("hours", "Last reading", "h"),
    Column("readings", "Readings"),
    Column("bottles", "Bottles"),
)


def _conditions(candidate: Candidate) -> dict[str, Any]:
    bottle = candidate.bottle
    return {
        "candidate": candidate.name,
        "temperature": bottle.temperature_K - ZERO_CELSIUS_K,
        "size": bottle.sizes.mass_mean_mm,
        "reagent": bottle.reagent_g_per_L,
        "hours": float(bottle.time_h[-1]),
        "readings": len(bottle.time_h),
        "bottles": candidate.repeats,
    }


def _interval(name: str, outlook: Outlook) -> dict[str, Any]:
    remark = "first interval" if outlook.opened else ""
    if outlook.low is None:
        remark = "not told"
    return {
        "candidate": name,
        "target": outlook.target,
        "value": outlook.value,
        "unit": outlook.unit,
        "low": outlook.low,
        "high": outlook.high,
        "shrink": None if outlook.opened else 100.0 * outlook.shrink,
        "remark": remark,
    }


def _one(outlooks: tuple[Outlook, ...], target: str) -> Outlook:
    for outlook in outlooks:
        if outlook.target == target:
            return outlook
    raise InputProblems([unknown_name("target", target, [o.target for o in outlooks])])
