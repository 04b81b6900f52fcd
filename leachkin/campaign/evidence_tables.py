"""Tables of what speaks for and against a law, and of what makes a plant band wide."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from leachkin.campaign.stage_results import BandPart, HeapStage, KineticsStage, TankStage
from leachkin.kinetics import NestedTest, ResidualChecks, left_out_table, need_table
from leachkin.result_table import Column, ResultTable

_PERCENT = 100.0
NESTED_CAPTION = (
    "Chance of so large a gain if the smaller law is true. A further part is named where it is "
    "below 0.01."
)
LEFT_OUT_CAPTION = (
    "Each test predicted from the others, its head at the assay: 1 is as good as the assays."
)
NEED_CAPTION = (
    "Each term fitted alone beside the law. Where several are needed the largest fall of AICc "
    "explains most."
)


def evidence_tables(stage: KineticsStage, key: str) -> Iterator[ResultTable]:
    """Yield the tables of one metal and domain; none for a law from print."""
    found = stage.evidence
    if found is None:
        return
    if found.lines is not None:
        yield replace(found.lines.table(), name=f"mechanism_{key}")
    if found.nested:
        yield nested_table(found.nested, f"nested_tests_{key}")
    if found.left_out:
        table = left_out_table(found.left_out)
        yield replace(table, name=f"left_out_{key}", caption=LEFT_OUT_CAPTION)
    if found.terms:
        yield replace(need_table(found.terms), name=f"tests_of_need_{key}", caption=NEED_CAPTION)
    if found.residuals is not None:
        yield residual_table(found.residuals, f"residual_checks_{key}")


def nested_table(tests: Sequence[NestedTest], name: str) -> ResultTable:
    """Return nested tests as a table."""
    columns = (
        Column("larger", "Larger law"),
        Column("smaller", "Law within it"),
        Column("kind", "Test"),
        Column("statistic", "Statistic", digits=4),
        Column("extra", "Quantities more"),
        Column("degrees_of_freedom", "Degrees of freedom"),
        Column("chance", "Chance", digits=2),
    )
    return ResultTable.from_records(name, columns, [vars(one) for one in tests], NESTED_CAPTION)


def residual_table(checks: ResidualChecks, name: str) -> ResultTable:
    """Return runs and trend of the residuals as a table."""
    columns = (
        Column("check", "Check"),
        Column("found", "Found", digits=3),
        Column("expected", "By chance", digits=3),
        Column("chance", "Chance", digits=2),
    )
    records = [
        {
            "check": "runs of one sign, along each test",
            "found": checks.runs.runs,
            "expected": checks.runs.expected,
            "chance": checks.runs.chance,
        },
        {
            "check": "trend of the residuals",
            "found": checks.slope,
            "expected": 0.0,
            "chance": checks.trend_chance,
        },
    ]
    return ResultTable.from_records(name, columns, records, checks.says)


def band_parts_table(stage: HeapStage | TankStage, name: str) -> ResultTable | None:
    """Return what makes the band of a plant figure wide; None without a band."""
    if not stage.band_parts:
        return None
    columns = (
        Column("cause", "From"),
        Column("low", "Low", "%", digits=4),
        Column("value", "Figure", "%", digits=4),
        Column("high", "High", "%", digits=4),
        Column("width", "Width", "points", digits=3),
        Column("holds", "Drawn"),
    )
    records = [_part(one) for one in stage.band_parts]
    return ResultTable.from_records(name, columns, records, stage.law_verdict)


def _part(one: BandPart) -> dict[str, object]:
    ends = (one.figure.low, one.figure.value, one.figure.high)
    low, value, high = (None if end is None else _PERCENT * end for end in ends)
    width = None if low is None or high is None else high - low
    record = {"cause": one.cause, "low": low, "value": value, "high": high}
    return {**record, "width": width, "holds": one.holds}


def other_laws_table(stage: HeapStage | TankStage, name: str) -> ResultTable | None:
    """Return what the other laws that are not rejected say of the plant; None without any."""
    if not stage.other_laws:
        return None
    columns = (
        Column("law", "Law not rejected either"),
        Column("extraction", "Extraction there", "%", digits=4),
        Column("weight", "Share of the draws", digits=2),
        Column("changes_the_figure", "Changes the figure"),
    )
    records = [{**vars(one), "extraction": _PERCENT * one.extraction} for one in stage.other_laws]
    return ResultTable.from_records(name, columns, records)
