"""The sheets of a budget: basis, unit consumption, lines, roll-ups, totals and what is missing."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

import numpy as np

from leachkin.reagents.budget import Budget, BudgetRow, total
from leachkin.reagents.law import band
from leachkin.reagents.lines import Array
from leachkin.result_table import Cell, Column, ResultTable


def budget_tables(budget: Budget, drawn: Budget | None = None) -> tuple[ResultTable, ...]:
    """Return every sheet of the budget, in reading order.

    Parameters
    ----------
    budget : Budget
    drawn : Budget, optional
        The same lines with draws. The figures stay those of ``budget``, low and high come from
        here.
    """
    stated = _sheets(budget)
    if drawn is None:
        return stated
    pairs = zip(stated, _sheets(drawn), strict=True)
    return tuple(_with_ends(table, other, drawn) for table, other in pairs)


def _sheets(budget: Budget) -> tuple[ResultTable, ...]:
    return (
        basis_table(budget),
        unit_consumption_table(budget),
        lines_table(budget),
        reagent_table(budget),
        sink_table(budget),
        total_table(budget),
        incomplete_table(budget),
    )


def _with_ends(table: ResultTable, drawn: ResultTable, budget: Budget) -> ResultTable:
    """Return a table with low and high of the same table with draws."""
    ends = [i for i, c in enumerate(table.columns) if c.key.endswith(("_low", "_high"))]
    if not ends or len(table.rows) != len(drawn.rows):
        return table
    rows = tuple(
        tuple(theirs.get(i, cell) for i, cell in enumerate(own))
        for own, theirs in zip(table.rows, (_ends(row, ends) for row in drawn.rows), strict=True)
    )
    low = 50 * (1 - budget.level)
    ends_are = f"low is P{low:.3g} of the draws, high is P{100 - low:.4g}"
    return replace(table, rows=rows, caption=f"{table.caption}; {ends_are}")


def _ends(row: tuple[Cell, ...], ends: list[int]) -> dict[int, Cell]:
    """Low and high of a row, nothing where they are one: that figure was not drawn."""
    pairs = zip(ends[::2], ends[1::2], strict=True)
    return {i: row[i] for pair in pairs if row[pair[0]] != row[pair[1]] for i in pair}


def basis_table(budget: Budget) -> ResultTable:
    """Return what the figures are per."""
    basis = budget.basis
    columns = (Column("item", "Item"), Column("value", "Value"), Column("unit", "Unit"))
    rows: list[tuple[str, float | str, str]] = [
        ("dry ore", _middle(basis.ore_t_per_month), "t/month"),
        ("currency", basis.currency, ""),
    ]
    if basis.solution_m3_per_t is not None:
        rows.append(("solution", _middle(basis.solution_m3_per_t), "m3/t"))
    for metal, kilograms in basis.recovered_kg_per_t.items():
        rows.append((f"{metal} {basis.metal_basis}", _middle(kilograms), "kg/t"))
    records = [{"item": item, "value": value, "unit": unit} for item, value, unit in rows]
    return ResultTable.from_records("budget_basis", columns, records, _caption(budget))


def unit_consumption_table(budget: Budget) -> ResultTable:
    """Return consumption by the tonne of ore and by the kilogram of metal, by sink."""
    columns = (
        Column("reagent", "Reagent"),
        Column("sink", "Sink"),
        Column("driver", "Driver"),
        *_band_columns("net_kg_per_t", "Net, as 100 %", "kg/t"),
        Column("per_metal_kg_per_kg", f"Net per kg {_metal(budget)}", "kg/kg"),
        Column("purity", "Purity"),
        Column("loss", "Loss"),
        *_band_columns("received_kg_per_t", "As received", "kg/t"),
        Column("source", "Basis"),
    )
    records = []
    for row in budget.rows:
        record = _row_record(row)
        record |= _banded("net_kg_per_t", row.net_kg_per_t, budget.level)
        record |= _banded("received_kg_per_t", row.received_kg_per_t, budget.level)
        records.append(record)
    return ResultTable.from_records(
        "budget_unit_consumption", columns, records, _caption(budget)
    )  # fmt: skip


def lines_table(budget: Budget) -> ResultTable:
    """Return the budget line by line, with its sum."""
    currency = budget.basis.currency
    columns = (
        Column("reagent", "Reagent"),
        Column("sink", "Sink"),
        Column("net_kg_per_t", "Net", "kg/t"),
        Column("purity", "Purity"),
        Column("loss", "Loss"),
        Column("received_kg_per_t", "As received", "kg/t"),
        Column("received_t_per_month", "By the month", "t/month"),
        Column("price", "Price", currency),
        Column("per", "Price per"),
        Column("date", "Price date"),
        *_band_columns("cost_per_month", "Cost", f"{currency}/month"),
        Column("cost_per_t", "Cost per t ore", f"{currency}/t"),
        Column("missing", "Missing"),
    )
    records = []
    for row in budget.rows:
        record = _row_record(row)
        records.append(record | _banded("cost_per_month", row.cost_per_month, budget.level))
    sums: dict[str, object] = {
        "reagent": "sum" if budget.complete else "PARTIAL SUM of the complete lines"
    }
    cost = budget.partial_per_month
    sums |= _banded("cost_per_month", cost, budget.level)
    records.append(sums | {"cost_per_t": _middle(cost / budget.basis.ore_t_per_month)})
    return ResultTable.from_records("budget_lines", columns, records, _caption(budget))


def reagent_table(budget: Budget) -> ResultTable:
    """Return the roll-up by reagent."""
    return _roll_up(budget, "reagent", "Reagent", "budget_by_reagent")


def sink_table(budget: Budget) -> ResultTable:
    """Return the roll-up by sink."""
    return _roll_up(budget, "sink", "Sink", "budget_by_sink")


def total_table(budget: Budget) -> ResultTable:
    """Return the totals, or why there are none."""
    currency, metals = budget.basis.currency, budget.basis.recovered_kg_per_t
    columns = (
        Column("item", "Item"),
        *_band_columns("value", "Value", ""),
        Column("unit", "Unit"),
        Column("note", "Note"),
    )
    note = "" if budget.complete else "INCOMPLETE: see what is missing"
    items: list[tuple[str, Array | None, str, str]] = [
        ("total", budget.total_per_month, f"{currency}/month", note),
        ("total per t ore", budget.total_per_t, f"{currency}/t", note),
    ]
    for metal in metals:
        unit = f"{currency}/kg {metal} {budget.basis.metal_basis}"
        items.append((f"total per kg {metal}", budget.total_per_kg(metal), unit, note))
    if not budget.complete:
        partial, what = budget.partial_per_month, "complete lines only"
        items.append(("partial sum", partial, f"{currency}/month", what))
        priced = total(row.cost_per_month for row in budget.rows)
        what = "with priced lines that are incomplete"
        items.append(("partial sum, wider", priced, f"{currency}/month", what))
    if budget.allowance:
        what = f"{100 * budget.allowance:g} %, kept apart from the total"
        items.append(("allowance", budget.allowance_per_month, f"{currency}/month", what))
    records = [
        {"item": item, "unit": unit, "note": text} | _banded("value", value, budget.level)
        for item, value, unit, text in items
    ]
    return ResultTable.from_records("budget_total", columns, records, _caption(budget))


def incomplete_table(budget: Budget) -> ResultTable:
    """Return what is missing, line by line, and the notes."""
    columns = (Column("line", "Line"), Column("reason", "What is missing"))
    records = [{"line": line, "reason": reason} for line, reason in budget.incomplete]
    records += [{"line": "note", "reason": note} for note in budget.notes]
    return ResultTable.from_records("budget_missing", columns, records)


def _roll_up(budget: Budget, key: str, heading: str, name: str) -> ResultTable:
    currency = budget.basis.currency
    columns = (
        Column(key, heading),
        Column("net_kg_per_t", "Net, as 100 %", "kg/t"),
        Column("per_metal_kg_per_kg", f"Net per kg {_metal(budget)}", "kg/kg"),
        *_band_columns("received_t_per_month", "As received", "t/month"),
        *_band_columns("cost_per_month", "Cost", f"{currency}/month"),
        Column("cost_per_t", "Cost per t ore", f"{currency}/t"),
        Column("cost_per_kg", f"Cost per kg {_metal(budget)}", f"{currency}/kg"),
        Column("cost_share", "Share of the cost", "%", 3),
        Column("missing", "Missing"),
    )
    groups: dict[str, list[BudgetRow]] = {}
    for row in budget.rows:
        groups.setdefault(getattr(row.line, key), []).append(row)
    records = [
        {key: group} | _group_record(budget, rows, mixed=key == "sink")
        for group, rows in groups.items()
    ]
    return ResultTable.from_records(name, columns, records, _caption(budget))


def _group_record(budget: Budget, rows: list[BudgetRow], mixed: bool) -> dict[str, object]:
    """Sums of a group; masses of unlike reagents are not added."""
    reasons = dict.fromkeys(reason for row in rows for reason in row.incomplete)
    one_reagent = not mixed or len({row.line.reagent for row in rows}) == 1
    record: dict[str, object] = {"missing": "; ".join(reasons)}
    if one_reagent:
        for field in ("net_kg_per_t", "per_metal_kg_per_kg"):
            record[field] = _maybe_middle(_whole(getattr(row, field) for row in rows))
        received = _whole(row.received_t_per_month for row in rows)
        record |= _banded("received_t_per_month", received, budget.level)
    cost = _whole(row.cost_per_month for row in rows)
    record |= _banded("cost_per_month", cost, budget.level)
    if cost is None:
        return record
    per_t = cost / budget.basis.ore_t_per_month
    record["cost_per_t"] = _middle(per_t)
    if budget.basis.metal is not None:
        metal = budget.basis.recovered_kg_per_t[budget.basis.metal]
        record["cost_per_kg"] = _middle(per_t / metal)
    whole = budget.total_per_month
    if whole is not None and np.all(whole > 0.0):
        record["cost_share"] = 100.0 * _middle(cost / whole)
    return record


def _row_record(row: BudgetRow) -> dict[str, object]:
    line, product = row.line, row.product
    return {
        "reagent": line.reagent,
        "sink": line.sink,
        "driver": f"per {line.driver}",
        "net_kg_per_t": _maybe_middle(row.net_kg_per_t),
        "per_metal_kg_per_kg": _maybe_middle(row.per_metal_kg_per_kg),
        "purity": None if product is None else product.purity,
        "loss": None if product is None else product.loss,
        "received_kg_per_t": _maybe_middle(row.received_kg_per_t),
        "received_t_per_month": _maybe_middle(row.received_t_per_month),
        "price": None if product is None else product.price,
        "per": None if product is None else product.per,
        "date": None if product is None else product.date,
        "cost_per_t": _maybe_middle(row.cost_per_t),
        "missing": "; ".join(row.incomplete),
        "source": line.source,
    }


def _caption(budget: Budget) -> str:
    basis = budget.basis
    metal = f", {basis.metal} {basis.metal_basis}" if basis.metal else ""
    text = f"Per dry tonne of ore{metal}; net is 100 % reagent; money in {basis.currency}"
    if _is_drawn(budget):
        low = 50 * (1 - budget.level)
        text += f"; low is P{low:g} of the draws, high is P{100 - low:g}, the middle their median"
    if not budget.complete:
        text += "; INCOMPLETE: " + ", ".join(line for line, _ in budget.incomplete)
    return text


def _is_drawn(budget: Budget) -> bool:
    figures = [row.cost_per_month for row in budget.rows] + [r.net_kg_per_t for r in budget.rows]
    return any(figure is not None and np.ndim(figure) for figure in figures)


def _metal(budget: Budget) -> str:
    basis = budget.basis
    return f"{basis.metal} {basis.metal_basis}" if basis.metal else "metal"


def _band_columns(key: str, heading: str, unit: str) -> tuple[Column, Column, Column]:
    return (
        Column(key, heading, unit),
        Column(f"{key}_low", f"{heading}, low", unit),
        Column(f"{key}_high", f"{heading}, high", unit),
    )


def _banded(key: str, values: Array | None, level: float) -> dict[str, object]:
    if values is None:
        return {}
    low, middle, high = band(values, level)
    if np.ndim(values) == 0:
        return {key: middle}
    return {key: middle, f"{key}_low": low, f"{key}_high": high}


def _whole(values: Iterable[Array | None]) -> Array | None:
    listed = list(values)
    return None if any(value is None for value in listed) else total(listed)


def _maybe_middle(values: Array | None) -> float | None:
    return None if values is None else _middle(values)


def _middle(values: Array) -> float:
    return float(np.median(values))
