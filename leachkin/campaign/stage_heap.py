"""The heap stage: stated values and draws through the same heap function."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.assumed_values import assumed_in_fit
from leachkin.campaign.bands import band_of, quantity_of
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.plant_ore import SCOPING
from leachkin.campaign.plant_sizes import plant_sizes
from leachkin.campaign.plant_split import End, band_parts, other_laws, plant_verdict
from leachkin.campaign.plant_words import band_contents, outside_the_data, ultimate_note
from leachkin.campaign.printed_law import (
    at_temperature,
    has_ash_layer,
    lengthened,
    with_ultimate_knots,
)
from leachkin.campaign.settings import Settings, is_drawn
from leachkin.campaign.stage_gangue import demand_at, gangue_draws
from leachkin.campaign.stage_results import BandPart, GangueStage, HeapStage, PlantOre
from leachkin.constants import DAYS_PER_MONTH, HOURS_PER_DAY
from leachkin.errors import InputProblems
from leachkin.kinetics import GangueLaw, RateLaw
from leachkin.problems import Problem
from leachkin.scaleup import HeapResult, heap
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]

#: Longest list of days before the steps become longer than a day.
MOST_DAYS = 181
#: Days on which the draws are evaluated: enough for a smooth band.
BAND_DAYS = 31
_CONDITIONS = (
    "bulk_density",
    "irrigation",
    "temperature",
    "feed_reagent",
    "cure",
    "moisture",
    "contacted_fraction",
    "delivery_factor",
    "length_factor",
)


@dataclass(frozen=True)
class _Bed:
    """What every run of the heap function of one campaign shares."""

    settings: Settings
    sizes: SizeDistribution
    gangue: GangueStage | None
    lift_m: float

    @property
    def stated_gangue(self) -> GangueLaw | None:
        """The gangue at its stated or fitted values."""
        return None if self.gangue is None else self.gangue.law

    def run(
        self,
        law: RateLaw,
        ore: tuple[Any, Any],
        condition: Mapping[str, Any],
        gangue: GangueLaw | None,
        days: Array,
        knots: tuple[int, int],
    ) -> HeapResult:
        """Return the heap for one set of values or a batch of them."""
        per_metal, head = ore
        law = with_ultimate_knots(law, self.settings, "heap.sizes.ultimate", *knots)
        law = lengthened(law, condition["length_factor"])
        temperature = condition["temperature"]
        curve = at_temperature(law, temperature).ore_curve(self.sizes)
        return heap(
            curve,
            days,
            lift_m=self.lift_m,
            irrigation_L_per_h_m2=condition["irrigation"],
            bulk_density_t_per_m3=condition["bulk_density"],
            feed_g_per_L=condition["feed_reagent"],
            demand=demand_at(gangue, temperature, per_metal, head),
            cure_kg_per_t=condition["cure"],
            contacted_fraction=condition["contacted_fraction"],
            delivery_factor=condition["delivery_factor"],
            moisture_m3_per_t=condition["moisture"],
        )


def heap_days(cycle_d: float) -> Array:
    """Return the days that the heap is reported on: whole days, and the end of the cycle."""
    step = max(1.0, np.ceil(cycle_d / (MOST_DAYS - 1)))
    days = np.arange(step, cycle_d, step)
    return np.append(days, cycle_d)


def heap_stage(
    campaign: Campaign,
    ore: PlantOre,
    gangue: GangueStage | None,
    draws: int,
    seed: int,
    level: float,
) -> HeapStage:
    """Return the heap of a campaign, with bands where draws are asked for.

    Raises
    ------
    InputProblems
        If the size distribution is missing, or the law cannot be used by plug flow.
    """
    settings = campaign.settings
    bed = _bed(campaign, gangue)
    days = heap_days(settings.number("heap.cycle"))
    stated = {name: settings.number(f"heap.{name}") for name in _CONDITIONS}
    result = bed.run(
        ore.law,
        (ore.per_metal_kg_per_kg, ore.head_kg_per_t),
        stated,
        bed.stated_gangue,
        days,
        (0, seed),
    )
    drawn = _drawn(bed, ore, days, draws, seed) if draws else None
    stage = _stage(bed, ore, stated, days, result, drawn, level)
    return _with_laws(stage, bed, ore, stated, draws, seed)


def heap_end(
    campaign: Campaign, ore: PlantOre, gangue: GangueStage | None
) -> Callable[[RateLaw], Array]:
    """Return the extraction at the end of the cycle as a function of a law, or a batch of them.

    Raises
    ------
    InputProblems
        As :func:`heap_stage`.
    """
    bed = _bed(campaign, gangue)
    settings = campaign.settings
    stated = {name: settings.number(f"heap.{name}") for name in _CONDITIONS}
    run = _end(bed, ore, stated, np.array([settings.number("heap.cycle")]), 0, 0)
    return lambda law: run(law, False)


def _bed(campaign: Campaign, gangue: GangueStage | None) -> _Bed:
    settings = campaign.settings
    sizes = plant_sizes(settings, "heap")
    if sizes is None:
        raise InputProblems([_no_sizes("heap")])
    return _Bed(settings, sizes, gangue, settings.number("heap.lift_height"))


def _no_sizes(stage: str) -> Problem:
    return Problem(
        "",
        None,
        f"{stage}.sizes",
        "ask",
        "there is no size distribution of the plant feed",
        "gates_gaudin_schuhmann, rosin_rammler, class_edges_mm with mass_shares, or single",
        f'add [{stage}.sizes] with gates_gaudin_schuhmann = {{ top = "19 mm", slope = 0.65 }}',
    )


def _drawn(bed: _Bed, ore: PlantOre, days: Array, draws: int, seed: int) -> HeapResult | None:
    """Return the heap of every draw; None where nothing in it is drawn."""
    condition = {name: bed.settings.draw(f"heap.{name}", draws, seed) for name in _CONDITIONS}
    gangue = gangue_draws(bed.gangue, bed.settings, draws, seed)
    per_metal_and_head = (ore.per_metal_draws, ore.head_draws)
    moving = [*condition.values(), *per_metal_and_head]
    fixed = ore.law_draws is None and gangue is None
    if fixed and not any(is_drawn(value) for value in moving):
        return None
    law = ore.law if ore.law_draws is None else ore.law_draws
    taken = bed.stated_gangue if gangue is None else gangue
    return bed.run(law, per_metal_and_head, condition, taken, days, (draws, seed))


def _stage(
    bed: _Bed,
    ore: PlantOre,
    stated: Mapping[str, float],
    days: Array,
    result: HeapResult,
    drawn: HeapResult | None,
    level: float,
) -> HeapStage:
    settings = bed.settings
    rate = settings.number("heap.ore_rate")
    m3_per_t = np.broadcast_to(np.asarray(result.m3_per_t, dtype=float), days.shape)
    cycle = float(days[-1])

    def band(name: str, unit: str = "1") -> Any:
        return band_of(getattr(result, name), getattr(drawn, name, None), unit, level)

    sinks = _sinks(ore, result, drawn, level, bed.gangue is not None)
    tonnes_per_m2 = bed.lift_m * stated["bulk_density"]
    return HeapStage(
        key=ore.key,
        grade=ore.grade,
        result=result,
        draws=drawn,
        extracted=band("extracted"),
        ore_limited=band("ore_limited"),
        particles_alone=band("particles_alone"),
        recovered=band("recovered"),
        in_solution=band("in_solution"),
        supplied_kg_per_t=band("supplied_kg_per_t", "kg/t"),
        taken_kg_per_t=band("taken_kg_per_t", "kg/t"),
        pls_g_per_L=band("pls_g_per_L", "g/L"),
        sizes=bed.sizes,
        days=days,
        m3_per_t=m3_per_t,
        ore_rate_t_per_month=rate,
        area_m2=rate * cycle / DAYS_PER_MONTH / tonnes_per_m2,
        flow_m3_per_h=rate / DAYS_PER_MONTH / HOURS_PER_DAY * float(m3_per_t[-1]),
        cycle_d=cycle,
        head_kg_per_t=ore.head_kg_per_t,
        temperature_K=stated["temperature"],
        cure_kg_per_t=stated["cure"],
        **sinks,
        gangue_known=bed.gangue is not None,
        contains=band_contents(ore, bed.gangue, settings, "heap", drawn is not None),
        outside=_outside(bed, ore, stated, cycle),
        notes=_notes(bed, ore, result),
    )


def _sinks(
    ore: PlantOre,
    result: HeapResult,
    drawn: HeapResult | None,
    level: float,
    gangue_known: bool,
) -> dict[str, Any]:
    """Reagent by sink and metal at the end of the cycle, per tonne of ore.

    Where no gangue demand is known its part is nothing, without a band of rounding.
    """
    end = float(np.asarray(result.extracted)[-1])
    metal = end * ore.head_kg_per_t
    bound = metal * ore.per_metal_kg_per_kg
    gangue = float(np.asarray(result.taken_kg_per_t)[-1]) - bound if gangue_known else 0.0
    m3_per_t = float(np.broadcast_to(np.asarray(result.m3_per_t), np.shape(result.extracted))[-1])
    metal_d = bound_d = gangue_d = pls_d = None
    if drawn is not None:
        metal_d = np.asarray(drawn.extracted)[..., -1] * ore.head_draws
        bound_d = metal_d * ore.per_metal_draws
        if gangue_known:
            gangue_d = np.asarray(drawn.taken_kg_per_t)[..., -1] - bound_d
        pls_d = metal_d / np.asarray(drawn.m3_per_t)[..., -1]
    return {
        "metal_taken_kg_per_t": quantity_of(bound, bound_d, "kg/t", level),
        "gangue_taken_kg_per_t": quantity_of(gangue, gangue_d, "kg/t", level),
        "metal_extracted_kg_per_t": quantity_of(metal, metal_d, "kg/t", level),
        "mean_pls_g_per_L": quantity_of(metal / m3_per_t, pls_d, "g/L", level),
        "metal_extracted_draws": metal_d,
        "metal_taken_draws": bound_d,
        "gangue_taken_draws": gangue_d,
    }


def _with_laws(
    stage: HeapStage,
    bed: _Bed,
    ore: PlantOre,
    stated: Mapping[str, float],
    draws: int,
    seed: int,
) -> HeapStage:
    """Return the stage with every other law at the end of the cycle, and what makes the band."""
    end = _end(bed, ore, stated, stage.days[-1:], draws, seed)
    others = other_laws(ore, end)
    figure = stage.extracted.at(-1)
    where = f"extracted at {stage.cycle_d:.4g} d"
    parts: tuple[BandPart, ...] = ()
    if stage.draws is not None and figure.level is not None:
        names = tuple(s.key.split(".", 1)[1] for s in bed.settings.ranged("heap"))
        parts = band_parts(ore, end, others, figure, ore.fit_draws, names, figure.level)
    verdict = plant_verdict(ore, others, figure, where)
    return replace(stage, other_laws=others, band_parts=parts, law_verdict=verdict)


def _end(
    bed: _Bed, ore: PlantOre, stated: Mapping[str, float], last: Array, draws: int, seed: int
) -> End:
    """Return the extraction at the end of the cycle as a function of law and scale-up."""
    metal = (ore.per_metal_kg_per_kg, ore.head_kg_per_t)

    def end(law: RateLaw, scale_up: bool) -> Array:
        condition: Mapping[str, Any] = stated
        if scale_up:
            condition = {n: bed.settings.draw(f"heap.{n}", draws, seed) for n in _CONDITIONS}
        knots = (0, 0) if not scale_up else (draws, seed)
        result = bed.run(law, metal, condition, bed.stated_gangue, last, knots)
        return np.asarray(result.extracted)[..., -1]

    return end


def _outside(
    bed: _Bed, ore: PlantOre, stated: Mapping[str, float], cycle: float
) -> tuple[str, ...]:
    return outside_the_data(
        ore.law,
        bed.sizes,
        stated["temperature"],
        stated["feed_reagent"],
        cycle * HOURS_PER_DAY,
        "the heap",
        assumed_in_fit(bed.settings),
    )


def _notes(bed: _Bed, ore: PlantOre, result: HeapResult) -> tuple[str, ...]:
    notes = list(ultimate_note(ore.law, bed.sizes, bed.settings, "heap"))
    if ore.grade == SCOPING:
        notes.append(
            "SCOPING: only bottles stand behind this heap; contact, delivery and diffusion "
            "length are judgements until columns are run."
        )
    factor = bed.settings.values.get("heap.length_factor")
    if (
        factor is not None
        and not has_ash_layer(ore.law)
        and (factor.has_range or factor.value != 1)
    ):
        notes.append(
            f"length_factor has no effect: {ore.law.name} has no ash layer to diffuse through."
        )
    if bed.gangue is None:
        notes.append(
            "No gangue demand is known: reagent is taken by the metal alone, so the "
            "supply looks better than it is."
        )
    return (*notes, *_as_text(getattr(result, "warnings", ())))


def _as_text(lines: Sequence[Any]) -> tuple[str, ...]:
    return tuple(str(line) for line in lines)
