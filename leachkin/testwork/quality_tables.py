"""Tables of a laboratory's checks: precision, limits of detection, control charts over jobs."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np

from leachkin.result_table import Column, ResultTable
from leachkin.testwork.control_chart import ControlChart, individuals_chart, range_chart
from leachkin.testwork.detection_limit import detection_limit
from leachkin.testwork.names import fold_name
from leachkin.testwork.precision_estimate import DuplicatePrecision, precision_of_groups
from leachkin.testwork.quality import DuplicatePair, QualityRecord, pair_values
from leachkin.testwork.records import Array

_UNITS = {"solution": "g/L", "head": "kg/t", "tail": "kg/t"}
_ISO = re.compile(r"\d{4}-\d{2}-\d{2}")


def precision_by_analyte(
    records: Sequence[QualityRecord], pairs: Sequence[DuplicatePair]
) -> dict[tuple[str, str], DuplicatePrecision]:
    """Return the precision of one assay by kind and analyte.

    Duplicates of that kind and analyte together with standards, and with blanks that have values,
    in the same unit; "head" and "tail" share the standards of solids.

    Parameters
    ----------
    records : sequence of QualityRecord
    pairs : sequence of DuplicatePair

    Returns
    -------
    dict of (kind, analyte) to DuplicatePrecision
    """
    found = {}
    keys = dict.fromkeys((pair.kind, pair.first.analyte) for pair in pairs)
    for kind, analyte in keys:
        own = [p for p in pairs if p.kind == kind and p.first.analyte == analyte]
        groups: list[Array] = list(np.stack(pair_values(own, kind), axis=-1))
        groups += _repeated(records, analyte, _UNITS[kind])
        precision = precision_of_groups(groups)
        if precision is not None:
            found[kind, analyte] = precision
    return found


def _repeated(records: Sequence[QualityRecord], analyte: str, unit: str) -> list[Array]:
    """Assays of each standard, and of the blanks, in one unit."""
    groups: dict[str, list[float]] = {}
    for record in records:
        if record.kind == "duplicate" or record.analyte != analyte or record.is_below:
            continue
        value = record.value(unit)
        if value is not None:
            name = "blank" if record.kind == "blank" else fold_name(record.sample)
            groups.setdefault(name, []).append(value)
    return [np.array(values) for values in groups.values()]


def quality_tables(
    records: Sequence[QualityRecord], pairs: Sequence[DuplicatePair]
) -> Iterator[ResultTable]:
    """Yield precision, duplicates, standards and blanks; those that have anything in them.

    Parameters
    ----------
    records : sequence of QualityRecord
        Blanks, standards and duplicates of one job or of many.
    pairs : sequence of DuplicatePair
    """
    for table in (
        _precision_table(records, pairs),
        _standards_table(records),
        _duplicates_table(pairs),
        _blanks_table(records),
    ):
        if table.rows:
            yield table


def _precision_table(
    records: Sequence[QualityRecord], pairs: Sequence[DuplicatePair]
) -> ResultTable:
    columns = (
        Column("kind", "Kind"),
        Column("analyte", "Analyte"),
        Column("proportional", "Proportional part", "%", 3),
        Column("floor", "Floor", digits=3),
        Column("unit", "Unit"),
        Column("degrees", "Degrees of freedom"),
        Column("known_to", "Known to", "% of it", 2),
        Column("line", "Line for [precision]"),
    )
    rows = []
    for (kind, analyte), found in precision_by_analyte(records, pairs).items():
        unit = _UNITS[kind]
        text = f"{100.0 * found.proportional:.2g} %"
        if found.floor > 0.0:
            text += f" + {found.floor:.2g} {unit}"
        rows.append(
            {
                "kind": kind,
                "analyte": analyte,
                "proportional": 100.0 * found.proportional,
                "floor": found.floor,
                "unit": unit,
                "degrees": found.pairs,
                "known_to": 100.0 * found.relative_error,
                "line": f'precision.analyte.{analyte}.{kind} = "{text}"',
            }
        )
    caption = "One standard deviation of one assay, from duplicates, standards and blanks."
    return ResultTable.from_records("assay_precision", columns, rows, caption)


def in_order(records: Sequence[QualityRecord]) -> list[QualityRecord]:
    """Return records by date where all have one as 2026-03-01, else as they stand."""
    if all(_ISO.match(record.date) for record in records):
        return sorted(records, key=lambda record: record.date)
    return list(records)


def charts_of_standards(
    records: Sequence[QualityRecord],
) -> Iterator[tuple[list[QualityRecord], ControlChart]]:
    """Yield the chart of each standard and analyte over jobs, with its records in order."""
    groups: dict[tuple[str, str, str], list[QualityRecord]] = {}
    for record in records:
        if record.kind == "standard" and not record.is_below:
            key = (fold_name(record.sample), record.analyte, record.unit)
            groups.setdefault(key, []).append(record)
    for group in groups.values():
        ordered = [r for r in in_order(group) if r.value(r.unit) is not None]
        values = [r.value(r.unit) for r in ordered]
        certified = next((c for r in ordered if (c := r.certified) is not None), None)
        chart = individuals_chart(np.array(values, dtype=float), certified)
        if chart is not None:
            yield ordered, chart


def _standards_table(records: Sequence[QualityRecord]) -> ResultTable:
    columns = (
        Column("standard", "Standard"),
        Column("analyte", "Analyte"),
        Column("job", "Job"),
        Column("date", "Date"),
        Column("value", "Value"),
        Column("unit", "Unit"),
        Column("centre", "Centre"),
        Column("low_action", "Low action limit"),
        Column("low_warning", "Low warning limit"),
        Column("high_warning", "High warning limit"),
        Column("high_action", "High action limit"),
        Column("in_sd", "From the centre", "sd", 3),
        Column("signal", "Signal"),
        Column("place", "Place"),
    )
    rows: list[dict[str, Any]] = []
    for ordered, chart in charts_of_standards(records):
        for i, record in enumerate(ordered):
            rows.append(
                {
                    "standard": record.sample,
                    "analyte": record.analyte,
                    "job": record.job,
                    "date": record.date,
                    "value": chart.value[i],
                    "unit": record.unit,
                    "centre": chart.centre,
                    "low_action": chart.action[0],
                    "low_warning": chart.warning[0],
                    "high_warning": chart.warning[1],
                    "high_action": chart.action[1],
                    "in_sd": chart.in_sd[i],
                    "signal": chart.signals[i] + (" (trial limits)" * chart.is_trial),
                    "place": f"{record.file}, row {record.row}",
                }
            )
    caption = (
        "Control chart over jobs: centre the certified value, or the mean; limits 2 and 3 standard "
        "deviations by the moving range."
    )
    return ResultTable.from_records("control_chart_standards", columns, rows, caption)


def _duplicates_table(pairs: Sequence[DuplicatePair]) -> ResultTable:
    columns = (
        Column("kind", "Kind"),
        Column("analyte", "Analyte"),
        Column("sample", "Sample"),
        Column("job", "Job"),
        Column("date", "Date"),
        Column("mean", "Mean"),
        Column("unit", "Unit"),
        Column("range", "Range over mean", "%", 3),
        Column("centre", "Mean range", "%", 3),
        Column("action", "Action limit", "%", 3),
        Column("signal", "Signal"),
    )
    rows: list[dict[str, Any]] = []
    for kind, analyte in dict.fromkeys((p.kind, p.first.analyte) for p in pairs):
        own = [p for p in pairs if p.kind == kind and p.first.analyte == analyte]
        own = [p for p in own if _has_values(p, _UNITS[kind])]
        first, second = pair_values(own, kind)
        chart = range_chart(first, second)
        if chart is None or chart.relative_range.size != len(own):
            continue
        for i, pair in enumerate(own):
            rows.append(
                {
                    "kind": kind,
                    "analyte": analyte,
                    "sample": pair.first.sample,
                    "job": pair.first.job,
                    "date": pair.first.date,
                    "mean": 0.5 * (first[i] + second[i]),
                    "unit": _UNITS[kind],
                    "range": 100.0 * chart.relative_range[i],
                    "centre": 100.0 * chart.centre,
                    "action": 100.0 * chart.action,
                    "signal": chart.signals[i],
                }
            )
    caption = (
        "Ranges of duplicates over their means; the action limit is 3.267 times the mean range."
    )
    return ResultTable.from_records("control_chart_duplicates", columns, rows, caption)


def _has_values(pair: DuplicatePair, unit: str) -> bool:
    one, other = pair.first.value(unit), pair.second.value(unit)
    return one is not None and other is not None and one + other > 0.0


def _blanks_table(records: Sequence[QualityRecord]) -> ResultTable:
    columns = (
        Column("analyte", "Analyte"),
        Column("unit", "Unit"),
        Column("blanks", "Blanks with a value"),
        Column("below", "Blanks below a limit"),
        Column("mean", "Mean"),
        Column("sd", "sd", digits=3),
        Column("critical", "More than a blank from"),
        Column("detection", "Limit of detection"),
    )
    blanks = [record for record in records if record.kind == "blank"]
    rows = []
    for analyte, unit in dict.fromkeys((r.analyte, r.unit) for r in blanks):
        own = [r for r in blanks if (r.analyte, r.unit) == (analyte, unit)]
        values = [v for r in own if not r.is_below and (v := r.value(unit)) is not None]
        below = sum(r.is_below for r in own)
        row: dict[str, Any] = {
            "analyte": analyte, "unit": unit, "blanks": len(values), "below": below,
        }  # fmt: skip
        found = detection_limit(values, below)
        if found is not None:
            row |= {
                "mean": found.mean,
                "sd": found.sd,
                "critical": found.critical,
                "detection": found.detection,
            }
        rows.append(row)
    caption = "5 % chance of either error; with few blanks Student's t widens both limits."
    return ResultTable.from_records("detection_limits", columns, rows, caption)
