"""The tables of a result, in reading order; each has one name for CSV, workbook and page."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Any

from leachkin.campaign.bands import Band, Quantity
from leachkin.campaign.evidence_tables import (
    band_parts_table,
    evidence_tables,
    other_laws_table,
)
from leachkin.campaign.plant_words import outside_words
from leachkin.campaign.result import CampaignResult
from leachkin.campaign.settings import register_table
from leachkin.campaign.stage_results import (
    BudgetStage,
    CementationStage,
    GangueStage,
    HeapStage,
    KineticsStage,
    TankStage,
)
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.hazards import cautions_table
from leachkin.kinetics import RateLaw
from leachkin.problems import Problem
from leachkin.reagents import budget_tables as budget_sheets
from leachkin.result_table import Cell, Column, ResultTable
from leachkin.testwork import balance_table, extraction_table, test_inventory

_PERCENT = 100.0


def result_tables(result: CampaignResult) -> tuple[ResultTable, ...]:
    """Return every table of a result, in reading order."""
    return tuple(_all(result))


def _all(result: CampaignResult) -> Iterator[ResultTable]:
    yield headline_table(result)
    if result.tests:
        yield replace(test_inventory(result.tests), name="tests")
    rows = [row for key in result.balances for row in result.balances[key]]
    if rows:
        yield replace(balance_table(rows), name="metal_balance")
        yield replace(extraction_table(rows), name="extraction")
    for stage in result.kinetics.values():
        yield from kinetics_tables(stage)
    if result.gangue is not None:
        yield gangue_table(result.gangue)
    if result.tank is not None:
        yield tank_table(result.tank)
        yield from _law_tables(result.tank, "tank")
    if result.heap is not None:
        yield from heap_tables(result.heap)
        yield from _law_tables(result.heap, "heap")
    if result.cementation is not None:
        yield from cementation_tables(result.cementation)
    if result.cementation_more is not None:
        yield from result.cementation_more.tables()
    if result.budget is not None:
        yield from budget_tables(result.budget)
    if result.cautions:
        yield cautions_table(result.cautions)
    yield register_table(result.assumed)
    if result.excluded:
        yield excluded_table(result.excluded)
    yield problems_table(result.problems)
    if result.notes:
        yield notes_table(result.notes)


def headline_table(result: CampaignResult) -> ResultTable:
    """Return the first page as a table of sentences."""
    records = [{"line": line} for line in result.headline()]
    return ResultTable.from_records("summary", (Column("line", "Summary"),), records, result.title)


def kinetics_tables(stage: KineticsStage) -> Iterator[ResultTable]:
    """Yield ranking, parameters and residuals of one metal and domain."""
    key = stage.key.replace("/", "_").replace(" ", "_")
    if stage.ranking is not None:
        yield replace(stage.ranking.table(), name=f"ranking_{key}")
    if stage.fit is not None:
        yield replace(
            stage.fit.parameter_table(),
            name=f"parameters_{key}",
            caption=reference_words(stage),
        )
        if stage.two_step is not None:
            yield replace(
                stage.two_step.table(),
                name=f"arrhenius_{key}",
                caption="The energy of all tests together is the one used; a line through a fit a "
                "temperature keeps few degrees of freedom.",
            )
        yield from evidence_tables(stage, key)
        yield replace(stage.fit.residual_table(), name=f"residuals_{key}")
    else:
        yield replace(printed_table(stage), name=f"parameters_{key}")


def _law_tables(stage: HeapStage | TankStage, plant: str) -> Iterator[ResultTable]:
    found = (
        band_parts_table(stage, f"{plant}_band"),
        other_laws_table(stage, f"{plant}_other_laws"),
    )
    yield from (table for table in found if table is not None)


def printed_table(stage: KineticsStage) -> ResultTable:
    """Return the constants of a printed law."""
    columns = (
        Column("name", "Resistance"),
        Column("ln_tau", "ln of its time", "ln h"),
        Column("activation_energy_kJ_per_mol", "Activation energy", "kJ/mol"),
        Column("order", "Order in reagent"),
    )
    records = [
        {
            "name": one.kind,
            "ln_tau": float(one.ln_tau),
            "order": float(one.order),
            "activation_energy_kJ_per_mol": float(one.activation_energy_kJ_per_mol),
        }
        for one in stage.law.resistances
    ]
    return ResultTable.from_records("parameters", columns, records, reference_words(stage))


def reference_words(stage: KineticsStage) -> str:
    """Return the state that the times of a law refer to, in words."""
    reference = stage.law.reference
    celsius = reference.temperature_K - ZERO_CELSIUS_K
    return (
        f"{stage.key}, law {stage.law.name}, at {celsius:.4g} degC, "
        f"{reference.reagent_g_per_L:.4g} g/L reagent and {reference.size_mm:.4g} mm"
        f"{_other_species(stage.law)}"
    )


def _other_species(law: RateLaw) -> str:
    """The rest of the solution that the times refer to, where the drive reads more than one."""
    if law.drive is None:
        return ""
    said = [f"{n} {v:.4g}" for n, v in law.drive.reference.items() if n != "reagent"]
    return f"; drive {law.drive.kind} at {', '.join(said)} (g/L, or pH)"


def gangue_table(stage: GangueStage) -> ResultTable:
    """Return the gangue's reagent demand."""
    if stage.fit is not None:
        return replace(stage.fit.table(), name="gangue")
    columns = (Column("name", "Parameter"), Column("value", "Value"), Column("unit", "Unit"))
    law = stage.law
    records = [
        {"name": name, "value": float(value), "unit": unit}
        for name, value, unit in (
            ("fast", law.fast_kg_per_t, "kg/t"),
            ("fast_h", law.fast_h, "h"),
            ("slow", law.slow_kg_per_t, "kg/t"),
            ("slow_h", law.slow_h, "h"),
            ("activation_energy", law.activation_energy_kJ_per_mol, "kJ/mol"),
        )
    ]
    return ResultTable.from_records("gangue", columns, records, "As given in the campaign file.")


def tank_table(stage: TankStage) -> ResultTable:
    """Return extraction and reagent tank by tank, with bands."""
    columns = [
        Column("tank", "Tank"),
        Column("residence_time_h", "Mean residence time", "h"),
        *_band_columns("extraction", "Extracted, cumulative", "% of total metal", stage.extraction),
    ]
    if stage.reagent_g_per_L is not None:
        columns += _band_columns("reagent", "Reagent", "g/L", stage.reagent_g_per_L)
    records = []
    for tank, hours in enumerate(stage.residence_times_h):
        record: dict[str, Any] = {"tank": tank + 1, "residence_time_h": hours}
        record |= _band_cells("extraction", stage.extraction, tank, _PERCENT)
        if stage.reagent_g_per_L is not None:
            record |= _band_cells("reagent", stage.reagent_g_per_L, tank, 1.0)
        records.append(record)
    return ResultTable.from_records("tank", columns, records, _plant_caption(stage))


def _plant_caption(stage: TankStage | HeapStage) -> str:
    level = stage.extraction.level if isinstance(stage, TankStage) else stage.extracted.level
    band = f" {_PERCENT * level:.3g} % band: " if level is not None else " "
    held = "; ".join(stage.contains)
    outside = f". {words.capitalize()}" if (words := outside_words(stage.outside)) else ""
    return f"{stage.grade}; {stage.key}; dry ore, of total metal.{band}{held}{outside}"


def _band_columns(key: str, heading: str, unit: str, band: Band) -> list[Column]:
    columns = [Column(key, heading, unit)]
    if band.low is not None:
        columns += [
            Column(f"{key}_low", f"{heading}, low", unit),
            Column(f"{key}_high", f"{heading}, high", unit),
        ]
    return columns


def _band_cells(key: str, band: Band, index: int, scale: float) -> dict[str, Cell]:
    cells: dict[str, Cell] = {key: float(band.value[index]) * scale}
    if band.low is not None and band.high is not None:
        cells[f"{key}_low"] = float(band.low[index]) * scale
        cells[f"{key}_high"] = float(band.high[index]) * scale
    return cells


def heap_tables(stage: HeapStage) -> Iterator[ResultTable]:
    """Yield the heap by day and its key figures."""
    percent = "% of total metal"
    parts: tuple[tuple[str, str, str, Band, float], ...] = (
        ("extracted", "Extracted", percent, stage.extracted, _PERCENT),
        ("recovered", "Recovered to date", percent, stage.recovered, _PERCENT),
        ("in_solution", "In solution in the bed", percent, stage.in_solution, _PERCENT),
        ("ore_limited", "If reagent were never short", percent, stage.ore_limited, _PERCENT),
        (
            "particles_alone",
            "Particles alone (not a heap)",
            percent,
            stage.particles_alone,
            _PERCENT,
        ),
        ("supplied", "Reagent brought by irrigation", "kg/t", stage.supplied_kg_per_t, 1.0),
        ("taken", "Reagent taken, with cure", "kg/t", stage.taken_kg_per_t, 1.0),
        ("pls", "Metal in solution leaving", "g/L", stage.pls_g_per_L, 1.0),
    )
    columns = [Column("day", "Day", "d"), Column("m3_per_t", "Solution applied", "m3/t")]
    for key, heading, unit, band, _ in parts:
        columns += _band_columns(key, heading, unit, band)
    columns.append(Column("rules", "What rules"))
    records = []
    for row, day in enumerate(stage.days):
        record: dict[str, Any] = {
            "day": float(day),
            "m3_per_t": float(stage.m3_per_t[row]),
            "rules": stage.result.rules[row],
        }
        for key, _, _, band, scale in parts:
            record |= _band_cells(key, band, row, scale)
        records.append(record)
    yield ResultTable.from_records("heap", columns, records, _plant_caption(stage))
    yield figures_table("heap_figures", _heap_figures(stage), _plant_caption(stage))


def _heap_figures(stage: HeapStage) -> Iterator[tuple[str, Quantity]]:
    yield "Extracted at the end of the cycle", _percent_of(stage.extracted.at(-1))
    yield "Recovered at the end of the cycle", _percent_of(stage.recovered.at(-1))
    yield "In solution at the end of the cycle", _percent_of(stage.in_solution.at(-1))
    yield "Metal extracted", stage.metal_extracted_kg_per_t
    yield "Mean metal in solution, drained", stage.mean_pls_g_per_L
    yield "Reagent bound by the metal", stage.metal_taken_kg_per_t
    yield "Reagent taken by gangue", stage.gangue_taken_kg_per_t
    yield "Reagent brought by irrigation", stage.supplied_kg_per_t.at(-1)
    yield "Reagent added as cure", Quantity(stage.cure_kg_per_t, "kg/t")
    yield "Solution applied", Quantity(float(stage.m3_per_t[-1]), "m3/t")
    yield "Area under irrigation", Quantity(stage.area_m2, "m2")
    yield "Solution flow", Quantity(stage.flow_m3_per_h, "m3/h")
    yield "First solution leaves on day", Quantity(float(stage.result.first_solution_day), "d")


def _percent_of(quantity: Quantity) -> Quantity:
    scaled = [
        None if v is None else v * _PERCENT for v in (quantity.value, quantity.low, quantity.high)
    ]
    return Quantity(scaled[0], "% of total metal", scaled[1], scaled[2], quantity.level)


def figures_table(
    name: str, figures: Iterator[tuple[str, Quantity]], caption: str = ""
) -> ResultTable:
    """Return named figures with their bands as a table."""
    columns = (
        Column("figure", "Figure"),
        Column("value", "Value"),
        Column("unit", "Unit"),
        Column("low", "Low"),
        Column("high", "High"),
        Column("level", "Level", digits=3),
    )
    records = [{"figure": words, **quantity.to_dict()} for words, quantity in figures]
    return ResultTable.from_records(name, columns, records, caption)


def cementation_tables(stage: CementationStage) -> Iterator[ResultTable]:
    """Yield demand by sink, feasibility and the figures of a cementation."""
    yield replace(stage.demand.table(), name="cementation_sinks")
    yield figures_table("cementation_figures", _cementation_figures(stage), stage.basis)
    others = stage.demand.tables()
    if len(others) > 2:
        yield replace(others[2], name="cementation_feasibility")


def _cementation_figures(stage: CementationStage) -> Iterator[tuple[str, Quantity]]:
    kind = stage.precipitant.kind
    yield f"Net {kind} per solution", stage.net_kg_per_m3
    yield f"Net {kind} per metal recovered", stage.net_kg_per_kg
    yield f"{kind.capitalize()} as received per metal recovered", stage.gross_kg_per_kg
    per_hour = stage.demand.hydrogen_Nm3_per_h
    if per_hour is not None:
        yield "Hydrogen", Quantity(float(per_hour), "Nm3/h")
    for words, quantity in (
        ("Metal recovered per ore", stage.recovered_kg_per_t),
        (f"Net {kind} per ore", stage.precipitant_kg_per_t),
        ("Acid taken in the vessels per ore", stage.acid_taken_kg_per_t),
    ):
        if quantity is not None:
            yield words, quantity


def budget_tables(stage: BudgetStage) -> Iterator[ResultTable]:
    """Yield the budget's own tables and its totals with bands."""
    yield from budget_sheets(stage.budget, stage.drawn)
    yield figures_table(
        "budget_totals",
        iter(
            (
                ("Reagents per month", stage.cost_per_month),
                ("Reagents per tonne of dry ore", stage.cost_per_t_ore),
                ("Reagents per kilogram of metal recovered", stage.cost_per_kg_metal),
            )
        ),
        "; ".join((*stage.basis, *stage.contains, *_outside(stage))),
    )


def _outside(stage: BudgetStage) -> tuple[str, ...]:
    words = outside_words(stage.outside)
    return (f"quantities {words}",) if words else ()


def excluded_table(excluded: tuple[str, ...]) -> ResultTable:
    """Return the readings kept out of the fits."""
    columns = (Column("excluded", "Kept out of the fit by the user"),)
    return ResultTable.from_records("excluded", columns, [{"excluded": e} for e in excluded])


def problems_table(problems: tuple[Problem, ...]) -> ResultTable:
    """Return problems with file, row, column, what was found and what to type."""
    names = ("level", "file", "row", "column", "found", "allowed", "try_this")
    headings = ("Level", "File", "Row", "Column", "Found", "Allowed", "Try")
    columns = tuple(Column(name, heading) for name, heading in zip(names, headings, strict=True))
    records = [{name: getattr(problem, name) for name in names} for problem in problems]
    return ResultTable.from_records("problems", columns, records)


def notes_table(notes: tuple[str, ...]) -> ResultTable:
    """Return the notes as a table."""
    return ResultTable.from_records(
        "notes", (Column("note", "Note"),), [{"note": n} for n in notes]
    )
