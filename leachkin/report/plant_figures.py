"""The figures of the plant and of the money, from a result of a run."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from leachkin.campaign import BudgetStage, CampaignResult, CementationStage, HeapStage, TankStage
from leachkin.report.figures.money import cost_bars, sink_bars
from leachkin.report.figures.plant import HeapCurves, heap_twin, supply_demand, tank_bars
from leachkin.report.figures.style import ReportFigure
from leachkin.report.first_page import rule_words
from leachkin.report.words import band_words, celsius


def plant_figures(result: CampaignResult) -> Iterator[ReportFigure]:
    """Yield tanks, heap, supply against demand, precipitant by sink and cost."""
    reagent = result.about.get("reagent", "reagent")
    if result.tank is not None:
        yield _tanks(result.tank, reagent)
    if result.heap is not None:
        yield _heap(result.heap, reagent)
        yield _supply(result.heap, reagent)
    if result.cementation is not None:
        yield _sinks(result.cementation)
    if result.budget is not None:
        yield from _cost(result.budget)


def _metal(key: str) -> str:
    return key.rsplit("/", 1)[-1]


def _tanks(stage: TankStage, reagent: str) -> ReportFigure:
    left = None if stage.reagent_g_per_L is None else list(stage.reagent_g_per_L.value)
    metal = _metal(stage.key)
    svg = tank_bars("tanks", list(stage.extraction.value), left, (metal, reagent), stage.grade)
    caption = (
        f"{stage.grade}. Cumulative extraction of total {metal} at each outlet, ideally mixed "
        f"tanks at {celsius(stage.temperature_K)}. Band, in the table: "
        f"{band_words(stage.extraction.level, stage.contains)}."
    )
    return ReportFigure("tanks", "plant", "Tank by tank", caption, svg)


def _heap(stage: HeapStage, reagent: str) -> ReportFigure:
    metal = _metal(stage.key)
    curves = (
        ("extracted: ore and reagent", stage.extracted.value),
        ("ore-limited, reagent never short", stage.ore_limited.value),
        ("particles alone (not a plant figure)", stage.particles_alone.value),
        ("recovered in solution that left", stage.recovered.value),
    )
    drawn = HeapCurves(
        stage.days,
        stage.m3_per_t,
        curves,
        stage.extracted.low,
        stage.extracted.high,
        [rule_words(rule, reagent) for rule in stage.result.rules],
    )
    band = band_words(stage.extracted.level, stage.contains)
    svg = heap_twin("heap_extraction", drawn, metal, _short_band(stage), stage.grade)
    caption = (
        f"{stage.grade}. Heap by plug flow at {celsius(stage.temperature_K)}, % of total {metal} "
        f"in dry ore, against days and against solution to ore. Band: {band}. The tint says what "
        "rules; the curve of the particles alone shows what a bottle would promise."
    )
    return ReportFigure("heap_extraction", "plant", "Heap extraction", caption, svg)


def _short_band(stage: HeapStage) -> str:
    return band_words(stage.extracted.level, ()) if stage.extracted.level is not None else ""


def _supply(stage: HeapStage, reagent: str) -> ReportFigure:
    taken = stage.taken_kg_per_t
    svg = supply_demand(
        "supply_demand",
        stage.days,
        stage.supplied_kg_per_t.value + stage.cure_kg_per_t,
        taken.value,
        reagent,
        stage.grade,
        taken.low,
        taken.high,
        np.asarray(stage.result.wanted_kg_per_t),
    )
    caption = (
        f"{stage.grade}. {reagent} at 100 % per dry tonne: brought by cure and irrigation, against "
        f"what metal and gangue took. Band: {band_words(taken.level, stage.contains)}. What is "
        "supplied and not taken leaves with the solution."
    )
    return ReportFigure("supply_demand", "plant", "Supply against demand", caption, svg)


def _sinks(stage: CementationStage) -> ReportFigure:
    kind = stage.precipitant.kind
    sinks = [(line.name, float(np.median(line.low_kg_per_m3))) for line in stage.demand.sinks]
    missing = [line.name for line in stage.demand.sinks if line.state == "not measured"]
    svg = sink_bars("precipitant_sinks", sinks, "kg of pure metal per m\u00b3", f"{kind} taken")
    caption = (
        f"What takes the {kind}, net, one pass, at {100 * stage.recovery:g} % recovery. "
        f"Solution: {stage.basis}."
    )
    if missing:
        caption += f" PROVISIONAL: {', '.join(missing)} not measured."
    title = f"What takes the {kind}"
    return ReportFigure("precipitant_sinks", "solution", title, caption, svg)


def _cost(stage: BudgetStage) -> Iterator[ReportFigure]:
    priced = [
        (f"{row.line.reagent}, {row.line.sink}", float(np.median(row.cost_per_month)))
        for row in stage.budget.rows
        if row.cost_per_month is not None
    ]
    if not priced:
        return
    missing = [name for name, _ in stage.budget.incomplete]
    svg = cost_bars("cost", priced, f"{stage.currency} per month", "reagent cost", missing)
    caption = f"Reagent cost by line. {' '.join(stage.basis)}"
    if missing:
        caption += f" INCOMPLETE: {', '.join(missing)}."
    yield ReportFigure("cost", "money", "Where the money goes", caption, svg)
