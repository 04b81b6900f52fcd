"""Run the published cases: printed and computed side by side."""

from __future__ import annotations

import math
from dataclasses import dataclass

from leachkin.published_checks.cases import Case, read_cases
from leachkin.published_checks.quantities import quantity
from leachkin.result_table import Column, ResultTable


@dataclass(frozen=True)
class CheckOutcome:
    """One published value recomputed.

    Attributes
    ----------
    case, source, unit, note : str
    as_printed : str
        The printed value in its own digits.
    printed, computed, tolerance : float
    ok : bool
        True where the computed value lies within the tolerance of the printed one.
    status : str
        How far the printed value can be trusted: "printed", "computed", "common practice", ...
    """

    case: str
    source: str
    printed: float
    computed: float
    tolerance: float
    ok: bool
    status: str
    unit: str = ""
    note: str = ""
    as_printed: str = ""


def verify() -> tuple[CheckOutcome, ...]:
    """Return every published value beside the one this program computes.

    Returns
    -------
    tuple of CheckOutcome

    Raises
    ------
    TableError
        If a case file of the package is damaged.

    Examples
    --------
    >>> all(outcome.ok for outcome in verify())
    True
    """
    return tuple(check(case) for case in read_cases())


def check(case: Case) -> CheckOutcome:
    """Return one case recomputed; a value that is not finite fails."""
    computed = float(quantity(case.quantity)(case))
    printed = float(case.printed)
    within = math.isfinite(computed) and abs(computed - printed) <= case.tolerance * (1 + 1e-9)
    return CheckOutcome(
        case=case.case,
        source=case.source,
        printed=printed,
        computed=computed,
        tolerance=case.tolerance,
        ok=within,
        status=case.status,
        unit=case.unit,
        note=case.note,
        as_printed=case.printed,
    )


def outcomes_table(outcomes: tuple[CheckOutcome, ...]) -> ResultTable:
    """Return the outcomes as a table for people."""
    columns = (
        Column("case", "case"),
        Column("unit", "unit"),
        Column("as_printed", "printed"),
        Column("computed", "computed", digits=6),
        Column("tolerance", "tolerance", digits=2),
        Column("verdict", "verdict"),
        Column("status", "status"),
        Column("source", "source"),
    )
    records = [
        {**vars(outcome), "verdict": "agrees" if outcome.ok else "DIFFERS"} for outcome in outcomes
    ]
    return ResultTable.from_records(
        "published_checks", columns, records, "Published values, recomputed"
    )
