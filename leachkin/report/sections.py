"""Which table and which figure stands where, and what of a long table people are shown."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from leachkin.campaign import CampaignResult
from leachkin.report.figures.style import ReportFigure
from leachkin.result_table import Cell, ResultTable

Rows = tuple[tuple[Cell, ...], ...]


@dataclass(frozen=True)
class Section:
    """One section of the page."""

    key: str
    title: str
    text: tuple[str, ...]
    figures: tuple[ReportFigure, ...]
    tables: tuple[ResultTable, ...]


#: Key, title, and the tables by the start of their names, in reading order.
_SECTIONS = (
    ("evidence", "Tests and balances", ("tests", "metal_balance")),
    ("kinetics", "Rate law", ("ranking", "parameters", "arrhenius", "gangue")),
    (
        "mechanism",
        "How sure is the mechanism",
        ("mechanism", "nested_tests", "left_out", "tests_of_need", "residual_checks"),
    ),
    ("plant", "Plant", ("tank", "heap")),
    ("solution", "Recovery from solution", ("cementation",)),
    ("money", "Reagents and cost", ("budget", "reagent")),
    ("hazards", "Cautions", ()),
    ("register", "Assumed, excluded, noticed", ("assumed", "excluded", "problems", "notes")),
)
#: Too long for a page: in the workbook and in tables/ only.
_FILES_ONLY = ("summary", "extraction", "residuals")
_OF_STAGE = {
    "extraction": ("metal_balance",),
    "fit": ("ranking", "parameters", "arrhenius", "mechanism", "tests_of_need", "gangue"),
    "tank": ("tank",),
    "heap": ("heap",),
    "cementation": ("cementation",),
    "budget": ("budget", "reagent"),
}
#: Columns of a wide table that people are shown; files hold all of them.
_SHOWN_COLUMNS = {
    "tests": (
        "test",
        "domain",
        "kind",
        "size_mm",
        "temperature_degC",
        "reagent_g_per_L",
        "aliquots",
        "readings",
        "last_h",
        "state",
    ),
    "metal_balance": (
        "test",
        "analyte",
        "on_calculated_head",
        "on_calculated_head_sd",
        "on_assay_head",
        "by_tail",
        "head_assay",
        "head_calculated",
        "tail",
        "grade_unit",
        "closure",
        "correction",
        "provisional",
    ),
    "heap": (
        "day",
        "m3_per_t",
        "extracted",
        "extracted_low",
        "extracted_high",
        "recovered",
        "in_solution",
        "ore_limited",
        "particles_alone",
        "supplied",
        "taken",
        "pls",
        "rules",
    ),
    "budget_by_reagent": (
        "reagent",
        "net_kg_per_t",
        "received_t_per_month",
        "received_t_per_month_low",
        "received_t_per_month_high",
        "cost_per_month",
        "cost_per_month_low",
        "cost_per_month_high",
        "cost_per_t",
        "cost_share",
        "missing",
    ),
    "parameters": (
        "name",
        "parameter",
        "value",
        "unit",
        "standard_error",
        "low",
        "high",
        "level",
        "method",
        "why_no_interval",
    ),
}
_MOST_ROWS = 40
#: A smaller chance is shown as below it.
_LEAST_CHANCE = 0.001
#: Steps in days between the rows that are shown, and about how many rows.
_DAY_STEPS = (1, 2, 5, 10, 15, 30, 60, 90, 180)
_SHOWN_DAYS = 12


def sections(result: CampaignResult, figures: Sequence[ReportFigure]) -> tuple[Section, ...]:
    """Return the sections of the page that have anything in them."""
    tables = result.tables()
    found = []
    for key, title, _ in _SECTIONS:
        own = tuple(for_people(t) for t in tables if t.rows and _home(t) == key)
        pictures = tuple(figure for figure in figures if figure.section == key)
        if own or pictures or (key == "hazards" and result.cautions):
            text = (*_verdicts(result, key), *_left_out(tables, own))
            found.append(Section(key, title, text, pictures, own))
    return tuple(found)


def _verdicts(result: CampaignResult, key: str) -> tuple[str, ...]:
    """What the tests say of the mechanism, and whether it matters to the plant, first of all."""
    if key != "mechanism":
        return ()
    rankings = [(k, stage.ranking) for k, stage in result.kinetics.items() if stage.ranking]
    said = [f"{name}: {ranking.verdict}" for name, ranking in rankings]
    plants = [plant for plant in (result.heap, result.tank) if plant is not None]
    return (*said, *(plant.law_verdict for plant in plants if plant.law_verdict))


def stage_tables(result: CampaignResult, stage: str) -> tuple[ResultTable, ...]:
    """Return the tables of one stage as people are shown them.

    Parameters
    ----------
    result : CampaignResult
    stage : str
        extraction, fit, tank, heap, cementation or budget.
    """
    names = _OF_STAGE[stage]
    return tuple(for_people(table) for table in result.tables() if _begins(table, names))


def first_tables(result: CampaignResult) -> tuple[ResultTable, ...]:
    """Return the short tables of the first page: reagents, precipitant; else the balances."""
    wanted = ["budget_by_reagent", "cementation_sinks"]
    if result.heap is None and result.tank is None:
        wanted.append("metal_balance")
    by_name = {table.name: table for table in result.tables()}
    return tuple(for_people(by_name[name]) for name in wanted if name in by_name)


def for_people(table: ResultTable) -> ResultTable:
    """Return a table with the columns and rows that people are shown; files hold all."""
    shown = _without_empty_columns(_without_equal_end(_with_columns(_with_least_chance(table))))
    if shown.name == "heap":
        return replace(shown, rows=_round_days(shown))
    if len(shown.rows) > _MOST_ROWS:
        more = f"{len(shown.rows) - _MOST_ROWS} more rows in the files"
        caption = f"{shown.caption} ({more})" if shown.caption else more
        return replace(shown, rows=shown.rows[:_MOST_ROWS], caption=caption)
    return shown


def _with_least_chance(table: ResultTable) -> ResultTable:
    """A table whose chances near nothing say no more than that."""
    at = [i for i, column in enumerate(table.columns) if column.key == "chance"]

    def cell(i: int, value: Cell) -> Cell:
        if i not in at or not isinstance(value, float) or value >= _LEAST_CHANCE:
            return value
        return f"< {_LEAST_CHANCE:g}"

    rows = tuple(tuple(cell(i, v) for i, v in enumerate(row)) for row in table.rows)
    return replace(table, rows=rows) if at else table


def _with_columns(table: ResultTable) -> ResultTable:
    start = "parameters" if table.name.startswith("parameters_") else table.name
    names = _SHOWN_COLUMNS.get(start)
    keys = {column.key for column in table.columns}
    if names is None or (start == "parameters" and "standard_error" not in keys):
        return table
    keep = [i for i, column in enumerate(table.columns) if column.key in names]
    return _only(table, keep) if keep else table


def _without_equal_end(table: ResultTable) -> ResultTable:
    """A table of sinks without its upper ends where they are the values themselves."""
    keys = [column.key for column in table.columns]
    pair = ("low_kg_per_m3", "high_kg_per_m3")
    if not set(pair) <= set(keys) or table.column(pair[0]) != table.column(pair[1]):
        return table
    return _only(table, [i for i, key in enumerate(keys) if key != pair[1]])


def _without_empty_columns(table: ResultTable) -> ResultTable:
    filled = [
        any(row[i] not in (None, "") for row in table.rows) for i in range(len(table.columns))
    ]
    if not table.rows or all(filled):
        return table
    keep = [i for i, has in enumerate(filled) if has]
    return _only(table, keep)


def _only(table: ResultTable, keep: Sequence[int]) -> ResultTable:
    return replace(
        table,
        columns=tuple(table.columns[i] for i in keep),
        rows=tuple(tuple(row[i] for i in keep) for row in table.rows),
    )


def _round_days(table: ResultTable) -> Rows:
    """The rows at round days, and the last one."""
    days = [float(day or 0.0) for day in table.column("day")]
    steps = [step for step in _DAY_STEPS if days[-1] / step <= _SHOWN_DAYS] or [_DAY_STEPS[-1]]
    last = len(days) - 1
    return tuple(
        row
        for i, (row, day) in enumerate(zip(table.rows, days, strict=True))
        if i == last or day % steps[0] == 0
    )


def _home(table: ResultTable) -> str | None:
    """The section of a table: that of the longest start of its name."""
    starts = [
        (len(name), key) for key, _, names in _SECTIONS for name in names if _begins(table, (name,))
    ]
    return max(starts)[1] if starts else None


def _begins(table: ResultTable, names: Sequence[str]) -> bool:
    if any(table.name == only or table.name.startswith(f"{only}_") for only in _FILES_ONLY):
        return False
    return any(table.name.startswith(name) for name in names)


def _left_out(tables: Sequence[ResultTable], own: Sequence[ResultTable]) -> tuple[str, ...]:
    whole = {table.name: table for table in tables}
    shorter = [
        table.name
        for table in own
        if len(whole[table.name].rows) > len(table.rows)
        or len(_without_empty_columns(whole[table.name]).columns) > len(table.columns)
    ]
    if not shorter:
        return ()
    return (f"Shortened here, whole in tables/ and in the workbook: {', '.join(shorter)}.",)
