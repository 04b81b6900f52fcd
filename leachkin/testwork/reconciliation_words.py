"""What a reconciliation says in words, and its tables."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Any

import numpy as np

from leachkin.result_table import Column, ResultTable
from leachkin.testwork.reconcile import CLOSURE, TIE, Adjustment, GroupTest, Reconciliation

#: An error larger than this says no more than that it is far off.
_FAR_OFF = 9.0
_LEAST_CHANCE = 0.001
#: Adjustments of less than this many standard deviations are not listed in words.
_SHOWN_SD = 0.05
_SHOWN_LINES = 8


def verdict_of(found: Reconciliation) -> tuple[str, ...]:
    """Return what the tests of gross errors say, in sentences; the surest first."""
    if not found.tests:
        return ("nothing checks these assays: no replicates, and no closure",)
    said = tuple(_finding(found, test) for test in found.found)
    if said:
        return (*said, *_widened(found))
    groups = ", ".join(dict.fromkeys(test.group for test in found.tests))
    return (f"within the stated precision ({groups}; chance {_chance(found.chance)})",)


def repeat_of(found: Reconciliation) -> str:
    """Return the repeat that would settle what was found, "" where nothing was."""
    if not found.found:
        return ""
    failed = [test.group for test in found.found]
    for group in failed:
        if group == TIE:
            return "assay the filtrate and the last sample once more, side by side"
        if group != CLOSURE:
            count = sum(a.group == group for a in found.adjustments)
            return f"one more {_assay(group)} assay, the {_ordinal(count + 1)}: it agrees with one"
    if not found.candidates:
        return "the head assay, then the residue"
    first = found.candidates[0]
    others = ", then ".join(_assay(c.group) for c in found.candidates[1:3])
    why = "it has no replicate" if first.assays == 1 else "the smallest error would explain it"
    return f"{_assay(first.group)} first ({why})" + (f", then {others}" if others else "")


def reconciliation_lines(found: Reconciliation) -> list[str]:
    """Return the adjustments of one balance as lines of text."""
    lines = [
        f"Reconciled extraction: {100 * found.extraction:.2f} +- {100 * found.sd:.2g} % "
        f"({_ends(found)}, {100 * found.level:g} %), head {_head(found)}"
    ]
    moved = [a for a in found.adjustments if abs(a.in_sd) >= _SHOWN_SD]
    moved.sort(key=lambda a: -abs(a.in_sd))
    for one in moved[:_SHOWN_LINES]:
        lines.append(
            f"  {one.label}{_placed(one)}: {one.measured:.4g} -> {one.adjusted:.4g} {one.unit}, "
            f"{one.in_sd:+.2f} of its standard deviation {one.sd:.2g}"
        )
    if len(moved) > _SHOWN_LINES:
        lines.append(f"  and {len(moved) - _SHOWN_LINES} smaller ones")
    if found.degrees_of_freedom:
        lines.append(
            f"Global test: chi-square {found.chi_square:.3g} with {found.degrees_of_freedom} "
            f"degrees of freedom, chance {_chance(found.chance)}"
        )
    lines += [f"Gross errors: {text}" for text in verdict_of(found)]
    if repeat := repeat_of(found):
        lines.append(f"What would settle it: {repeat}")
    return [*lines, *_mass_lines(found)]


def _ends(found: Reconciliation) -> str:
    return f"{100 * found.low:.2f} to {100 * found.high:.2f}"


def _head(found: Reconciliation) -> str:
    if found.head_kg_per_t is None:
        return "not known"
    return f"{found.head_kg_per_t:.4g} +- {found.head_sd_kg_per_t or 0:.2g} kg/t"


def _placed(one: Adjustment) -> str:
    return f" ({one.place})" if one.place else ""


def _mass_lines(found: Reconciliation) -> list[str]:
    lines = []
    if found.mass_bounds is not None:
        low, high = (100 * end for end in found.mass_bounds)
        lines.append(f"Residue not weighed: {low:.1f} to {high:.1f} % with no and the largest loss")
    if found.residue_by_closure_g is not None:
        mass, sd = found.residue_by_closure_g
        lines.append(f"By the closure the residue would weigh {mass:.4g} +- {sd:.2g} g")
    return lines


def _finding(found: Reconciliation, test: GroupTest) -> str:
    size = f"chi-square {test.chi_square:.3g}, chance {_chance(test.chance)}"
    if test.group == CLOSURE:
        return f"the balance does not close ({size}): {_tied(found)}"
    if test.group == TIE:
        return f"the last reading and the filtrate are not the same solution ({size})"
    named = [a for a in found.suspects if a.group == test.group]
    places = [f"{a.label} ({a.measured:.4g} {a.unit}{_row(a)})" for a in named]
    which = " or ".join(places) if places else "one of them"
    return f"the {_assay(test.group)} assays disagree ({size}): {which}"


def _row(one: Adjustment) -> str:
    return f", {one.place}" if one.place else ""


def _tied(found: Reconciliation) -> str:
    """Which groups one closure cannot tell apart, and how wrong each would have to be."""
    parts = []
    for one in found.candidates:
        if not np.isfinite(one.relative_error) or abs(one.relative_error) > _FAR_OFF:
            parts.append(f"{_assay(one.group)} far off")
            continue
        way = "high" if one.relative_error > 0.0 else "low"
        parts.append(f"{_assay(one.group)} {100 * abs(one.relative_error):.3g} % too {way}")
    return f"one closure cannot say which: {', or '.join(parts)}" if parts else "cause not known"


def _widened(found: Reconciliation) -> Iterator[str]:
    for group, factor in found.widened.items():
        what = "all assays are" if group == CLOSURE else f"the {_assay(group)} precision is"
        yield f"{what} taken {factor:.2g} times as wide as stated meanwhile"


def _assay(group: str) -> str:
    return {"solution": "last solution", "residue mass": "residue mass"}.get(group, group)


def _ordinal(number: int) -> str:
    return {2: "second", 3: "third", 4: "fourth"}.get(number, f"{number}th")


def _chance(chance: float) -> str:
    return f"below {_LEAST_CHANCE:g}" if chance < _LEAST_CHANCE else f"{chance:.2g}"


def reconciliation_table(found: Iterable[Reconciliation]) -> ResultTable:
    """Return one row a measurement: what it was, what it becomes, by how much."""
    columns = (
        Column("test", "Test"),
        Column("domain", "Domain"),
        Column("analyte", "Analyte"),
        Column("label", "Measurement"),
        Column("measured", "Measured"),
        Column("sd", "sd", digits=2),
        Column("adjusted", "Adjusted"),
        Column("unit", "Unit"),
        Column("in_sd", "Adjustment", "sd", digits=3),
        Column("statistic", "Test of a gross error", "sd", digits=3),
        Column("detectable", "Smallest error that would be found", "%", digits=2),
        Column("suspect", "Suspect"),
        Column("place", "Place"),
    )
    records = (
        {
            "test": one.test,
            "domain": one.key.rpartition("/")[0],
            "analyte": one.analyte,
            "label": a.label,
            "measured": a.measured,
            "sd": a.sd,
            "adjusted": a.adjusted,
            "unit": a.unit,
            "in_sd": a.in_sd,
            "statistic": a.statistic,
            "detectable": _detectable(a),
            "suspect": a.suspect,
            "place": a.place,
        }
        for one in found
        for a in one.adjustments
    )
    caption = (
        "Each measurement is moved as little as its precision asks until head, solution and "
        "residue agree. A test of a gross error beyond 2 is worth a look, beyond 3 a repeat."
    )
    return ResultTable.from_records("reconciled_measurements", columns, records, caption)


def _detectable(one: Adjustment) -> float | None:
    """Per cent; None where less than a tenfold error would be found."""
    if one.detectable is None or one.detectable > _FAR_OFF:
        return None
    return 100.0 * one.detectable


def reconciled_table(found: Iterable[Reconciliation]) -> ResultTable:
    """Return one row a balance: the reconciled extraction with its interval, and the tests."""
    columns = (
        Column("test", "Test"),
        Column("domain", "Domain"),
        Column("analyte", "Analyte"),
        Column("extraction", "Extraction, reconciled", "%"),
        Column("low", "Low", "%"),
        Column("high", "High", "%"),
        Column("head", "Head of this charge", "kg/t"),
        Column("largest", "Largest adjustment", "sd", digits=3),
        Column("largest_in", "In"),
        Column("chance", "Chance of the whole", digits=2),
        Column("finding", "Gross errors"),
        Column("repeat", "What would settle it"),
    )
    records = (_reconciled_record(one) for one in found)
    caption = "Beside the three raw figures of the balance, which stay as they are."
    return ResultTable.from_records("reconciled", columns, records, caption)


def _reconciled_record(one: Reconciliation) -> dict[str, Any]:
    largest = max(one.adjustments, key=lambda a: abs(a.in_sd), default=None)
    return {
        "test": one.test,
        "domain": one.key.rpartition("/")[0],
        "analyte": one.analyte,
        "extraction": 100.0 * one.extraction,
        "low": 100.0 * one.low,
        "high": 100.0 * one.high,
        "head": one.head_kg_per_t,
        "largest": None if largest is None else largest.in_sd,
        "largest_in": "" if largest is None else largest.label,
        "chance": one.chance if one.degrees_of_freedom else None,
        "finding": "; ".join(verdict_of(one)),
        "repeat": repeat_of(one),
    }
