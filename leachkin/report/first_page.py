"""What stands on the first page: whose, the answer, what rules, how far it can be trusted."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np

from leachkin.campaign import (
    Assumption,
    BudgetStage,
    CampaignResult,
    HeapStage,
    KineticsStage,
    Quantity,
    TankStage,
    outside_words,
)
from leachkin.hazards import Caution
from leachkin.report.numbers import format_number
from leachkin.report.words import band_words
from leachkin.testwork import MetalBalance

_WORST = 3
#: Scores of the lines of evidence in words.
_SCORES = {
    "consistent": "agree",
    "conflicting": "contradict",
    "undetermined": "cannot tell",
}
_GRADE_TEXT = {
    "SCOPING": "Bottles alone stand behind the plant figures: they rank and scope. Columns are "
    "the design test of a heap.",
    "COLUMN": "One column stands behind the plant figures. Columns of two heights show what "
    "depends on height.",
    "FROM PRINT": "Published constants stand behind the plant figures: no test of this ore.",
}


@dataclass(frozen=True)
class BandPart:
    """One part of a band, and whether this band holds it."""

    name: str
    inside: bool
    text: str


@dataclass(frozen=True)
class HazardLine:
    """One hazard: its number on the first page, what to do in the section of cautions."""

    name: str
    state: str
    kind: str
    number: str
    text: str
    limit: str
    defer_to: str


@dataclass(frozen=True)
class FirstPage:
    """The first page in words, part by part."""

    whose: tuple[str, ...]
    answer: str
    basis: str
    rules: tuple[str, ...]
    undecided: tuple[str, ...]
    next_test: tuple[str, ...]
    grade: str
    grade_text: str
    band: tuple[BandPart, ...]
    assumed_count: int
    assumed_worst: tuple[str, ...]
    extrapolated: tuple[str, ...]
    money: tuple[str, ...]
    hazards: tuple[HazardLine, ...]
    state: str
    revision: str
    signatures: tuple[tuple[str, str], ...] = field(default=())


def first_page(result: CampaignResult) -> FirstPage:
    """Return the first page of a run.

    Parameters
    ----------
    result : CampaignResult
    """
    plant = result.heap or result.tank
    grade = plant.grade if plant is not None else "TESTS ONLY"
    no_plant = "No plant figure was asked for: what stands here is what the tests say."
    return FirstPage(
        whose=tuple(_whose(result)),
        answer=_answer(result),
        basis=_basis(result),
        rules=tuple(_rules(result)),
        undecided=tuple(_undecided(result)),
        next_test=tuple(_next_test(result)),
        grade=grade,
        grade_text=_GRADE_TEXT.get(grade, no_plant if plant is None else ""),
        band=tuple(_band_parts(plant)) if plant is not None else (),
        assumed_count=len(result.assumed),
        assumed_worst=tuple(worst_assumptions(result.assumed)),
        extrapolated=tuple(_extrapolated(result)),
        money=tuple(_money(result.budget)),
        hazards=tuple(_hazard(caution) for caution in result.cautions),
        state=result.about.get("status", "draft"),
        revision=result.about.get("revision", ""),
        signatures=(
            ("prepared", result.about.get("prepared_by", "")),
            ("checked", result.about.get("checked_by", "")),
            ("approved", ""),
        ),
    )


def _answer(result: CampaignResult) -> str:
    """The answer in one sentence; without a plant, the headline's line after the title."""
    if result.heap is not None:
        return _heap_answer(result.heap)
    if result.tank is not None:
        return _tank_answer(result.tank)
    finals = _finals(result)
    if not finals:
        return "No extraction could be computed: see what was noticed."
    return f"Final extraction: {'; '.join(finals)}."


def _finals(result: CampaignResult) -> list[str]:
    """Range of the last extractions by domain and metal, on the best head there is."""
    found: dict[str, list[float]] = {}
    for key, balances in result.balances.items():
        if key in result.kinetics or not result.kinetics:
            found[key] = [value for b in balances if (value := _final(b)) is not None]
    for key, stage in result.kinetics.items():
        if key not in result.balances:
            found[key] = [float(one.value[-1]) for one in stage.observed]
    return [f"{key} {_range_words(values)}" for key, values in found.items() if values]


def _final(balance: MetalBalance) -> float | None:
    calculated = balance.final_on_calculated_head
    return balance.final_on_assay_head if calculated is None else calculated


def _range_words(values: Sequence[float]) -> str:
    low, high = 100 * min(values), 100 * max(values)
    if len(values) == 1:
        return f"{low:.1f} % in one test"
    return f"{low:.1f} to {high:.1f} % in {len(values)} tests"


def _heap_answer(stage: HeapStage) -> str:
    metal = stage.key.rpartition("/")[2]
    recovered, left = (100 * float(band.value[-1]) for band in (stage.recovered, stage.in_solution))
    return (
        f"{_percent(stage.extracted.at(-1))} of total {metal} extracted at "
        f"{stage.cycle_d:.4g} d and {float(stage.m3_per_t[-1]):.3g}\u00a0m\u00b3/t; by that day "
        f"{recovered:.1f} recovered and {left:.1f} in solution in the heap."
    )


def _tank_answer(stage: TankStage) -> str:
    metal = stage.key.rpartition("/")[2]
    hours = sum(stage.residence_times_h)
    return (
        f"{_percent(stage.extraction.at(-1))} of total {metal} extracted in "
        f"{len(stage.residence_times_h)} tanks of {hours:.3g} h in all."
    )


def _percent(quantity: Quantity) -> str:
    if quantity.value is None:
        return "an unknown share"
    text = f"{100 * quantity.value:.1f} %"
    if quantity.low is None or quantity.high is None:
        return text
    return f"{text} ({100 * quantity.low:.1f} to {100 * quantity.high:.1f})"


def worst_assumptions(assumed: Sequence[Assumption]) -> list[str]:
    """Return the assumptions that could move a figure most, in words: widest ranges first."""
    numbers = [row for row in assumed if not isinstance(row.value, str)]
    ranged = [row for row in numbers if np.isfinite(row.relative_width) and row.relative_width > 0]
    bare = [row for row in numbers if not np.isfinite(row.relative_width)]
    ordered = sorted(ranged, key=lambda row: -row.relative_width) + bare
    return [_assumption_words(row) for row in ordered[:_WORST]]


def rule_words(rule: str, reagent: str) -> str:
    """Return what rules in the user's words: the supply of the reagent, or the rock."""
    return {"reagent": f"{reagent} supply", "particles": "rock"}.get(rule, rule)


def _assumption_words(row: Assumption) -> str:
    value = row.value if isinstance(row.value, str) else f"{row.value:.3g}"
    text = f"{row.key} = {value} {row.unit}".rstrip()
    if row.low is not None and row.high is not None:
        text += f" ({row.low:.3g} to {row.high:.3g})"
    return f"{text}: {row.why}" if row.why else text


def _whose(result: CampaignResult) -> Iterator[str]:
    keys = list(result.kinetics) or list(result.balances)
    if keys:
        yield f"ore domain and metal: {', '.join(keys)}"
    if result.tests:
        provisional = {b.test for rows in result.balances.values() for b in rows if b.provisional}
        yield f"{len(result.tests)} tests, {len(provisional)} of them provisional"
    yield f"{len(result.excluded)} readings excluded"
    if result.tests or result.heap is not None or result.tank is not None:
        yield f"reagent {result.about.get('reagent', 'not stated')}"


def _basis(result: CampaignResult) -> str:
    plant = result.heap or result.tank
    if plant is None:
        return "Extraction is of all the metal in dry ore; see each table for its head."
    metal = plant.key.rpartition("/")[2]
    band = plant.extracted if isinstance(plant, HeapStage) else plant.extraction
    words = band_words(band.level, ()) if band.low is not None else "no band"
    outside = outside_words(plant.outside)
    return (
        f"% of total {metal} in dry ore; extracted, in solution and recovered are three figures; "
        f"reagents at 100 % unless said otherwise. Band: {words}."
        + (f" {outside[:1].upper()}{outside[1:]}." if outside else "")
    )


def _rules(result: CampaignResult) -> Iterator[str]:
    reagent = result.about.get("reagent", "reagent")
    if result.heap is not None:
        yield _heap_rules(result.heap, reagent)
        yield _heap_supply(result.heap, reagent)
    if result.tank is not None:
        starved = bool(np.any(result.tank.train.starved))
        yield (
            f"Tanks: {reagent} runs out before the last tank."
            if starved
            else f"Tanks: {reagent} is left in every tank; residence time and rock rule."
        )


def _heap_rules(stage: HeapStage, reagent: str) -> str:
    rules, days = list(stage.result.rules), stage.days
    parts, start = [], 0
    for i in range(1, len(rules) + 1):
        if i < len(rules) and rules[i] == rules[start]:
            continue
        end = float(days[min(i, len(days)) - 1])
        parts.append(f"{rule_words(rules[start], reagent)} to day {end:.0f}")
        start = i
    return f"Heap: {', then '.join(parts)}."


def _heap_supply(stage: HeapStage, reagent: str) -> str:
    brought, taken = stage.supplied_kg_per_t.value[-1], stage.taken_kg_per_t.value[-1]
    return (
        f"{reagent} per dry tonne, 100 %: {float(brought):.3g} kg brought by irrigation and "
        f"{stage.cure_kg_per_t:.3g} kg by cure, {float(taken):.3g} kg taken."
    )


def _undecided(result: CampaignResult) -> Iterator[str]:
    for stage in result.kinetics.values():
        if stage.ranking is not None:
            yield f"{stage.key}: {stage.ranking.verdict}{_evidence_words(stage)}"
    for plant in (result.heap, result.tank):
        if plant is not None and plant.law_verdict:
            yield plant.law_verdict


def _evidence_words(stage: KineticsStage) -> str:
    """The independent lines in a sentence: which agree, which contradict, which tell nothing."""
    lines = None if stage.evidence is None else stage.evidence.lines
    if lines is None:
        return ""
    by_score: dict[str, list[str]] = {score: [] for score in _SCORES}
    for line in lines.lines:
        by_score[line.score].append(f"{line.line} (a hint)" if line.hint_only else line.line)
    said = [f"{_SCORES[score]}: {', '.join(names)}" for score, names in by_score.items() if names]
    return f" Evidence {lines.score}: {'; '.join(said)}."


def _extrapolated(result: CampaignResult) -> Iterator[str]:
    """Where each plant leaves its tests; which plant, where there are two."""
    plants = [("heap", result.heap), ("tanks", result.tank)]
    done = [(name, plant) for name, plant in plants if plant is not None]
    for name, plant in done:
        for line in plant.outside:
            yield f"{name}: {line}" if len(done) > 1 else line


def _next_test(result: CampaignResult) -> Iterator[str]:
    if result.next_test:
        yield from result.next_test
        return
    heap = result.heap
    if heap is not None and heap.grade != "COLUMN":
        yield (
            "A column of this ore, better two of different height: contact, delivery and "
            "diffusion length are judgements until then."
        )
        return
    widest = _widest_parameter(result)
    if widest:
        yield widest


def _widest_parameter(result: CampaignResult) -> str:
    """A sentence on the fitted constant that is known least."""
    found = [
        ((p.high - p.low) / abs(p.value), p.name, stage.key)
        for stage in result.kinetics.values()
        if stage.fit is not None
        for p in stage.fit.parameters
        if p.low is not None and p.high is not None and p.value
    ]
    if not found:
        return ""
    width, name, key = max(found)
    return (
        f"Tests that bear on {name} of {key}: its interval is {100 * width:.0f} % of its value, "
        "the widest of the fit."
    )


def _band_parts(plant: HeapStage | TankStage) -> Iterator[BandPart]:
    held = plant.contains
    fit = [text for text in held if "fit" in text.split() and not text.startswith("no ")]
    ranges = [text for text in held if "range" in text and not text.startswith("no ")]
    fit_words = ", ".join(fit) or "the fit is not in it"
    yield BandPart("fit", bool(fit), fit_words + _alone(plant, "fit"))
    others = plant.other_laws
    named = ", ".join(f"{law.law} {100 * law.extraction:.1f} %" for law in others)
    drawn = bool(others and plant.band_parts)
    among = f"{1 + len(others)} laws by AICc weight" if drawn else "one law"
    alone = next((part.holds for part in plant.band_parts if part.cause == "law"), "")
    law_words = f"one law; {alone or 'no draws were made'}"
    if named:
        law_words = f"{among}; others not rejected: {named}"
    yield BandPart("law", drawn, law_words + _alone(plant, "law"))
    range_words = "; ".join(ranges) or "no range was stated"
    yield BandPart("scale-up", bool(ranges), range_words + _alone(plant, "scale-up"))
    yield BandPart("ore", False, "one ore as sampled: its variability is not in it")


def _alone(plant: HeapStage | TankStage, cause: str) -> str:
    """The ends that one cause alone would give the figure."""
    figures = [part.figure for part in plant.band_parts if part.cause == cause]
    if not figures or figures[0].low is None or figures[0].high is None:
        return ""
    return f"; alone {100 * figures[0].low:.1f} to {100 * figures[0].high:.1f} %"


def _hazard(caution: Caution) -> HazardLine:
    number = ""
    if caution.number is not None:
        number = f"{format_number(caution.number, 3)} {caution.unit}".strip()
    return HazardLine(
        name=caution.name,
        state=caution.state,
        kind="present" if caution.state == "present" else "other",
        number=number,
        text=_sentence(caution.text),
        limit=_sentence(caution.limit),
        defer_to=_sentence(caution.defer_to),
    )


def _sentence(text: str) -> str:
    stripped = text.strip().rstrip(".")
    return f"{stripped[:1].upper()}{stripped[1:]}." if stripped else ""


def _money(stage: BudgetStage | None) -> Iterator[str]:
    if stage is None:
        return
    dates = sorted({row.product.date or "" for row in stage.budget.rows if row.product} - {""})
    priced = f" Prices of {' and '.join(dates)}." if dates else " No price has a date."
    if stage.cost_per_month.value is None:
        missing = "; ".join(f"{name}: {why}" for name, why in stage.budget.incomplete)
        yield f"Reagent budget INCOMPLETE, so there is no total: {missing}.{priced}"
        return
    costs = [
        (stage.cost_per_month, "a month"),
        (stage.cost_per_t_ore, "per dry tonne"),
        (stage.cost_per_kg_metal, "per kg recovered"),
    ]
    words = [f"{_money_words(q)} {stage.currency} {per}" for q, per in costs if q.value is not None]
    outside = f" Quantities {text}." if (text := outside_words(stage.outside)) else ""
    yield f"Reagents cost {', '.join(words)}.{priced}{outside}"


def _money_words(quantity: Quantity) -> str:
    value = _grouped(float(quantity.value or 0.0))
    if quantity.low is None or quantity.high is None:
        return value
    return f"{value} ({_grouped(quantity.low)} to {_grouped(quantity.high)})"


def _grouped(amount: float) -> str:
    """Three digits, thousands apart by a thin space."""
    text = format_number(amount, 3)
    return f"{int(text):,}".replace(",", "\u202f") if text.lstrip("-").isdigit() else text
