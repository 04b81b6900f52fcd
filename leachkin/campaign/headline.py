"""The first page in sentences: what, the answer with band and basis, what rules, reagents, iron,
what is assumed, what cannot be told apart, hazards."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from leachkin.campaign.bands import Quantity, in_words, listed
from leachkin.campaign.plant_words import outside_words
from leachkin.campaign.result import CampaignResult
from leachkin.campaign.settings import Assumption
from leachkin.campaign.stage_cementation_more import CementationMore
from leachkin.campaign.stage_results import CementationStage, HeapStage, TankStage
from leachkin.problems import Problem

_PERCENT = 100.0
#: How many of the worst assumptions are named on the first page.
WORST = 3


def headline(result: CampaignResult) -> tuple[str, ...]:
    """Return the first page of a result in sentences, in the order people read it."""
    return tuple(_lines(result))


def _lines(result: CampaignResult) -> Iterator[str]:
    yield _what(result)
    if result.heap is not None:
        yield from _heap_lines(result.heap, result.level)
    if result.tank is not None:
        yield from _tank_lines(result.tank, result.level)
    if result.heap is None and result.tank is None:
        yield from _bottle_lines(result)
    yield from _reagent_lines(result)
    if result.cementation is not None:
        yield from _cementation_lines(result.cementation)
    if result.cementation_more is not None:
        yield from _further_cementation_lines(result.cementation_more)
    yield _assumed_line(result.assumed)
    yield from _outside_lines(result)
    yield from _law_lines(result)
    yield _question_line(result.problems)
    yield _hazard_line(result)
    yield _scope_line(result)


def _what(result: CampaignResult) -> str:
    states = [test.state for test in result.tests]
    counts = [f"{states.count(state)} {state}" for state in dict.fromkeys(states)]
    tests = f"; tests: {', '.join(counts)}" if counts else ""
    kept_out = f"; {len(result.excluded)} exclusions by the user" if result.excluded else ""
    state = result.about.get("status", "draft")
    revision = result.about.get("revision")
    return (
        f"{result.title}: {state}"
        + (f", revision {revision}" if revision else "")
        + tests
        + kept_out
        + "."
    )


def _fraction(quantity: Quantity) -> str:
    return in_words(quantity, _PERCENT)


def _band_words(level: float | None, contains: tuple[str, ...]) -> str:
    if level is None:
        return f"; {listed(contains)}" if contains else ""
    return f"; {_PERCENT * level:.3g} % band of {listed(contains)}"


def _outside(outside: tuple[str, ...]) -> str:
    words = outside_words(outside)
    return f"; {words}" if words else ""


def _heap_lines(heap: HeapStage, level: float) -> Iterator[str]:
    del level
    extracted, metal = heap.extracted.at(-1), heap.key.rpartition("/")[2]
    yield (
        f"{heap.grade}: {_fraction(extracted)} % of total {metal} extracted at "
        f"{heap.cycle_d:.4g} d and {heap.m3_per_t[-1]:.3g} m3/t"
        f"{_band_words(extracted.level, heap.contains)}; by that day "
        f"{_fraction(heap.recovered.at(-1))} % recovered in solution out of the heap and "
        f"{_fraction(heap.in_solution.at(-1))} % dissolved in the heap. Basis: dry ore"
        f"{_outside(heap.outside)}."
    )
    yield _what_rules(heap)
    yield from _wide_line(heap)


def _wide_line(plant: HeapStage | TankStage) -> Iterator[str]:
    """What makes the band wide: each cause alone."""
    parts = []
    for one in plant.band_parts[:-1]:
        if one.figure.low is None or one.figure.high is None:
            parts.append(f"{one.cause} nothing ({one.holds})")
        else:
            ends = (_PERCENT * one.figure.low, _PERCENT * one.figure.high)
            parts.append(f"{one.cause} {ends[0]:.3g} to {ends[1]:.3g} %")
    if parts:
        yield f"What makes that band, each alone: {'; '.join(parts)}."


def _what_rules(heap: HeapStage) -> str:
    rules = heap.result.rules
    parts = []
    start = 0
    for end in range(1, len(rules) + 1):
        if end == len(rules) or rules[end] != rules[start]:
            parts.append(f"{rules[start]} to day {heap.days[end - 1]:.4g}")
            start = end
    supply = heap.supplied_kg_per_t.at(-1).value
    taken = heap.taken_kg_per_t.at(-1).value
    return (
        f"What rules: {', then '.join(parts)}. Irrigation brings {supply:.3g} kg/t of reagent, "
        f"the ore takes {taken:.3g} kg/t with the cure of {heap.cure_kg_per_t:.3g} kg/t."
    )


def _tank_lines(tank: TankStage, level: float) -> Iterator[str]:
    del level
    out, metal = tank.extraction.at(-1), tank.key.rpartition("/")[2]
    hours = sum(tank.residence_times_h)
    yield (
        f"{tank.grade}: {_fraction(out)} % of total {metal} extracted in "
        f"{len(tank.residence_times_h)} tanks of {hours:.3g} h in all"
        f"{_band_words(out.level, tank.contains)}. Basis: dry ore{_outside(tank.outside)}."
    )
    yield from _wide_line(tank)


def _bottle_lines(result: CampaignResult) -> Iterator[str]:
    for key, rows in result.balances.items():
        if key not in result.kinetics and result.kinetics:
            continue
        finals = [
            row.final_on_calculated_head
            if row.final_on_calculated_head is not None
            else row.final_on_assay_head
            for row in rows
        ]
        known = [value for value in finals if value is not None]
        if known:
            yield (
                f"{key}: final extraction {_PERCENT * min(known):.3g} to "
                f"{_PERCENT * max(known):.3g} % of the head in {len(known)} tests."
            )


def _reagent_lines(result: CampaignResult) -> Iterator[str]:
    heap, budget = result.heap, result.budget
    reagent = result.about.get("reagent", "reagent")
    if heap is not None:
        gangue = f"{in_words(heap.gangue_taken_kg_per_t)} kg/t by gangue"
        yield (
            f"{reagent}, net 100 %: {in_words(heap.metal_taken_kg_per_t)} kg/t bound by the "
            f"metal and {gangue if heap.gangue_known else 'what goes to gangue not known'}."
        )
    if budget is not None:
        yield from _budget_lines(result)


def _budget_lines(result: CampaignResult) -> Iterator[str]:
    budget = result.budget
    if budget is None:
        return
    missing = budget.budget.incomplete
    if budget.cost_per_month.value is None:
        yield f"Budget INCOMPLETE: {'; '.join(f'{name}: {why}' for name, why in missing)}."
        return
    cost = f"{in_words(budget.cost_per_month, digits=4)} {budget.currency} a month"
    per_t = f"{in_words(budget.cost_per_t_ore)} {budget.currency}/t of dry ore"
    per_kg = ""
    if budget.cost_per_kg_metal.value is not None:
        per_kg = f", {in_words(budget.cost_per_kg_metal)} {budget.currency}/kg recovered"
    outside = f" Quantities {words}." if (words := outside_words(budget.outside)) else ""
    yield f"Reagents: {cost}, {per_t}{per_kg}.{outside} {' '.join(budget.basis)}"


def _cementation_lines(stage: CementationStage) -> Iterator[str]:
    shares = [f"{line.name} {float(line.low_kg_per_m3):.3g}" for line in stage.demand.sinks]
    kind = stage.precipitant.kind
    yield (
        f"{kind.capitalize()}, per pass: {in_words(stage.net_kg_per_m3)} kg/m3 net "
        f"({', '.join(shares)} kg/m3); {in_words(stage.net_kg_per_kg)} kg/kg net and "
        f"{in_words(stage.gross_kg_per_kg)} kg/kg as received, per kg recovered."
    )


def _further_cementation_lines(found: CementationMore) -> Iterator[str]:
    if found.reconciliation is not None:
        yield f"Site: {found.reconciliation.text}."
    if found.course is not None:
        shares = {name: float(np.median(share)) for name, share in found.course.shares.items()}
        ranked = sorted(shares.items(), key=lambda pair: -pair[1])
        parts = [f"{name} {_PERCENT * share:.3g} %" for name, share in ranked]
        yield f"Sinks by the mixed potential: {', '.join(parts)}. {found.course.remark}"
    for metal, ranking in found.rankings.items():
        yield f"{metal} cementation tests: {ranking.verdict}"
    if found.vessel is not None:
        vessel = found.vessel
        size = f"{vessel.vessel_m3:.3g} m3, {60 * vessel.contact_h:.3g} min of contact"
        yield (
            f"{vessel.kind.capitalize()} for {vessel.barren_g_per_L:.3g} g/L {vessel.metal} left: "
            f"{size}."
        )


def _assumed_line(assumed: tuple[Assumption, ...]) -> str:
    if not assumed:
        return "Nothing is assumed beyond the sheets and settings."
    worst = sorted(assumed, key=_importance)[:WORST]
    named = listed([f"{row.key} = {_shown(row)}" for row in worst])
    counted = "1 value is" if len(assumed) == 1 else f"{len(assumed)} values are"
    return f"{counted} assumed, not measured; the worst: {named}."


def _importance(row: Assumption) -> tuple[bool, bool, float]:
    """Plant factors and stated ranges before defaults that touch little, the wider the earlier."""
    plant = row.key.startswith(("heap.", "tank.", "gangue.", "rate_law."))
    width = row.relative_width
    return (not plant, width == float("inf"), -width if width != float("inf") else 0.0)


def _shown(row: Assumption) -> str:
    value = row.value if isinstance(row.value, str) else f"{row.value:.3g}"
    ends = ""
    if row.low is not None and row.high is not None:
        ends = f" ({row.low:.3g} to {row.high:.3g})"
    return f"{value}{ends}" + (f" {row.unit}" if row.unit else "")


def _outside_lines(result: CampaignResult) -> Iterator[str]:
    for plant in (result.heap, result.tank):
        if plant is not None and plant.outside:
            yield "Extrapolated: " + "; ".join(plant.outside) + "."


def _law_lines(result: CampaignResult) -> Iterator[str]:
    for key, stage in result.kinetics.items():
        if stage.ranking is None:
            continue
        yield f"{key}: {stage.ranking.verdict}"
        if stage.evidence is not None and stage.evidence.lines is not None:
            yield stage.evidence.lines.verdict
    for plant in (result.heap, result.tank):
        if plant is not None and plant.law_verdict:
            yield plant.law_verdict


def _question_line(problems: tuple[Problem, ...]) -> str:
    asked = sum(problem.level == "ask" for problem in problems)
    notes = sum(problem.level == "note" for problem in problems)
    questions = "1 question" if asked == 1 else f"{asked} questions"
    remarks = "1 note" if notes == 1 else f"{notes} notes"
    return f"{questions} to answer and {remarks}; see problems."


def _hazard_line(result: CampaignResult) -> str:
    if not result.cautions:
        return "Cautions: none raised by these data; that is no finding about the site."
    parts = []
    for caution in result.cautions:
        number = "" if caution.number is None else f" {caution.number:.3g} {caution.unit}".rstrip()
        parts.append(f"{caution.name} ({caution.state}{',' if number else ''}{number})")
    return f"Cautions: {', '.join(parts)}."


def _scope_line(result: CampaignResult) -> str:
    held = [
        "shrinking-core resistances over size classes",
        "one reagent",
        "one temperature in the plant",
    ]
    left = ["bio-oxidation", "precipitation of metal", "heat balance", "solution recycle"]
    if result.heap is not None:
        held.append("plug flow through the heap")
        left.append("dispersion and stagnant solution")
    return f"In the model: {listed(held)}. Not in it: {listed(left)}."
