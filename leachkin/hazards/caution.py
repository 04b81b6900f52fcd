"""A caution: what could hurt, in which of three states, by which number and against which limit."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from leachkin.result_table import Column, ResultTable
from leachkin.tables import Row, read_table

#: Stands at the head of every list of cautions.
GENERAL_CAUTION = (
    "These figures support decisions and make none: they take the place of no risk assessment of "
    "the site, no supplier's data sheet, no trained supervision and no local law."
)


@dataclass(frozen=True)
class Caution:
    """One hazard.

    Attributes
    ----------
    name : str
    state : str
        "present", "not measured" or "below limit".
    number : float or None
        The number that raised it.
    unit : str
    text : str
        What to look to.
    limit : str
        Published limits in words, "" where there is none.
    source : str
        Source keys of number and limits, separated by commas.
    defer_to : str
        Codes and people that decide.
    """

    name: str
    state: str
    number: float | None
    unit: str
    text: str
    limit: str
    source: str
    defer_to: str


def limits_of(substance: str) -> tuple[str, tuple[str, ...]]:
    """Return the limits of a substance in words, printed ones only, and their source keys.

    Parameters
    ----------
    substance : str
        A substance of the table of exposure limits.

    Returns
    -------
    tuple of (str, tuple of str)

    Raises
    ------
    TableError
        If the table has none.
    """
    read_table("exposure_limits").first("substance", substance)
    rows = [row for row in _rows(substance) if row.text("status") != "from memory"]
    texts = dict.fromkeys(row.text("text") for row in rows)
    return "; ".join(texts), tuple(dict.fromkeys(row.text("source") for row in rows))


def limit_value(substance: str, limit: str) -> float:
    """Return one limit as a number in the unit of its row.

    Parameters
    ----------
    substance, limit : str

    Returns
    -------
    float

    Raises
    ------
    TableError
        If there is no such row.
    """
    table = read_table("exposure_limits")
    for row in _rows(substance):
        if row.text("limit") == limit:
            return row.number("value")
    return table.first("limit", limit).number("value")


def common_rule(name: str) -> float:
    """Return a figure of common practice, as ``lowest_pH_with_cyanide``.

    Parameters
    ----------
    name : str

    Returns
    -------
    float

    Raises
    ------
    TableError
        If there is none of that name; the nearest are given.
    """
    return read_table("solution_defaults").first("name", name).number("value")


def cautions_table(cautions: Iterable[Caution]) -> ResultTable:
    """Return the cautions as a table under the general line."""
    columns = (
        Column("name", "Hazard"),
        Column("state", "State"),
        Column("number", "Number", "", 3),
        Column("unit", "Unit"),
        Column("text", "Caution"),
        Column("limit", "Published limits"),
        Column("source", "Source"),
        Column("defer_to", "Defer to"),
    )
    records = ({column.key: getattr(item, column.key) for column in columns} for item in cautions)
    return ResultTable.from_records("cautions", columns, records, GENERAL_CAUTION)


def _rows(substance: str) -> tuple[Row, ...]:
    return read_table("exposure_limits").where("substance", substance)
