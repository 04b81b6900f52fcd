"""The tank stage: a train of ideally mixed tanks, stated values and draws through one function."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.assumed_values import assumed_in_fit
from leachkin.campaign.bands import band_of, quantity_of
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.plant_sizes import plant_sizes
from leachkin.campaign.plant_solution import holds_no_order
from leachkin.campaign.plant_split import End, band_parts, other_laws, plant_verdict
from leachkin.campaign.plant_words import band_contents, outside_the_data, ultimate_note
from leachkin.campaign.printed_law import with_ultimate_knots
from leachkin.campaign.settings import Settings, is_drawn
from leachkin.campaign.stage_gangue import demand_at, gangue_draws
from leachkin.campaign.stage_results import BandPart, GangueStage, PlantOre, TankStage
from leachkin.constants import DAYS_PER_MONTH, HOURS_PER_DAY
from leachkin.errors import InputProblems
from leachkin.kinetics import GangueLaw, RateLaw
from leachkin.problems import Problem
from leachkin.scaleup import TankTrain, tank_train
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]
_kg_per_t = 1000.0
#: A gangue part below this share of the metal's is rounding.
_ROUNDING = 1e-9


@dataclass(frozen=True)
class _Train:
    """What every run of the tank function of one campaign shares."""

    settings: Settings
    sizes: SizeDistribution
    gangue: GangueStage | None
    residence_times_h: tuple[float, ...]
    with_balance: bool
    draws: int
    seed: int

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
        knots: tuple[int, int],
    ) -> TankTrain:
        """Return the train for one set of values or a batch of them."""
        per_metal, head = ore
        law = with_ultimate_knots(law, self.settings, "tank.sizes.ultimate", *knots)
        temperature = condition["temperature"]
        if not self.with_balance:
            return tank_train(
                law, self.residence_times_h, sizes=self.sizes, temperature_K=temperature
            )
        return tank_train(
            law,
            self.residence_times_h,
            demand=demand_at(gangue, temperature, per_metal, head),
            feed_g_per_L=condition["feed_reagent"],
            solids_kg_per_m3=condition["solids"],
            sizes=self.sizes,
            temperature_K=temperature,
        )


def tank_stage(
    campaign: Campaign,
    ore: PlantOre,
    gangue: GangueStage | None,
    draws: int,
    seed: int,
    level: float,
) -> TankStage:
    """Return the tank train of a campaign, with bands where draws are asked for.

    Raises
    ------
    InputProblems
        If residence times cannot be worked out, or a reagent balance lacks the solids.
    """
    train, stated_ore, stated = _stated_train(campaign, ore, gangue, draws, seed)
    result = train.run(ore.law, stated_ore, stated, train.stated_gangue, (0, seed))
    drawn = _drawn(train, ore) if draws else None
    stage = _stage(train, ore, stated_ore, stated, result, drawn, level)
    return _with_laws(stage, train, ore, stated_ore, stated)


def _with_laws(
    stage: TankStage,
    train: _Train,
    ore: PlantOre,
    stated_ore: tuple[Any, Any],
    stated: Mapping[str, Any],
) -> TankStage:
    """Return the stage with every other law at the last tank, and what makes the band."""
    end = _end(train, stated_ore, stated)
    others = other_laws(ore, end)
    figure = stage.extraction.at(-1)
    where = f"extracted in {len(stage.residence_times_h)} tanks"
    parts: tuple[BandPart, ...] = ()
    if stage.draws is not None and figure.level is not None:
        names = tuple(s.key.split(".", 1)[1] for s in train.settings.ranged("tank"))
        parts = band_parts(ore, end, others, figure, ore.fit_draws, names, figure.level)
    verdict = plant_verdict(ore, others, figure, where)
    return replace(stage, other_laws=others, band_parts=parts, law_verdict=verdict)


def _end(train: _Train, stated_ore: tuple[Any, Any], stated: Mapping[str, Any]) -> End:
    """Return the extraction at the last tank as a function of law and scale-up."""

    def end(law: RateLaw, scale_up: bool) -> Array:
        condition = stated
        if scale_up:
            condition = {
                name: train.settings.draw(f"tank.{name}", train.draws, train.seed)
                for name in stated
            }
        knots = (0, 0) if not scale_up else (train.draws, train.seed)
        result = train.run(law, stated_ore, condition, train.stated_gangue, knots)
        return np.asarray(result.extraction)[..., -1]

    return end


def _stated_train(
    campaign: Campaign, ore: PlantOre, gangue: GangueStage | None, draws: int, seed: int
) -> tuple[_Train, tuple[Any, Any], dict[str, Any]]:
    """Return the train, reagent per metal and head, and its conditions at the stated values."""
    settings = campaign.settings
    times = residence_times(settings)
    sizes = plant_sizes(settings, "tank") or SizeDistribution.single(ore.law.reference.size_mm)
    with_balance = settings.get("tank.feed_reagent") is not None and not holds_no_order(ore.law)
    if with_balance and settings.get("tank.solids") is None:
        raise _ask(
            "tank.solids",
            "a reagent balance needs the solids",
            "kg/m3",
            'add solids = "400 kg/m3" under [tank]',
        )
    train = _Train(settings, sizes, gangue, times, with_balance, draws, seed)
    per_metal = settings.get("tank.demand")
    stated_ore = (ore.per_metal_kg_per_kg if per_metal is None else per_metal, ore.head_kg_per_t)
    stated = {
        name: settings.get(f"tank.{name}") for name in ("temperature", "feed_reagent", "solids")
    }
    return train, stated_ore, stated


def tank_end(
    campaign: Campaign, ore: PlantOre, gangue: GangueStage | None
) -> Callable[[RateLaw], Array]:
    """Return the extraction at the last tank as a function of a law, or a batch of them.

    Raises
    ------
    InputProblems
        As :func:`tank_stage`.
    """
    train, stated_ore, stated = _stated_train(campaign, ore, gangue, 0, 0)
    run = _end(train, stated_ore, stated)
    return lambda law: run(law, False)


def residence_times(settings: Settings) -> tuple[float, ...]:
    """Return the mean residence time of each tank [h], given or as volume over flow.

    Raises
    ------
    InputProblems
        If neither residence_times, nor volumes with a flow, is given.
    """
    times = settings.get("tank.residence_times")
    if times is not None:
        return tuple(times)
    volumes, flow = settings.get("tank.volumes"), settings.get("tank.flow")
    if volumes is None or flow is None:
        raise _ask(
            "tank",
            "no residence times",
            "residence_times, or volumes and flow",
            'add residence_times = ["6 h", "6 h"] under [tank]',
        )
    return tuple(volume / flow for volume in volumes)


def _ask(column: str, found: str, allowed: str, try_this: str) -> InputProblems:
    return InputProblems([Problem("", None, column, "ask", found, allowed, try_this)])


def _drawn(train: _Train, ore: PlantOre) -> TankTrain | None:
    settings, draws, seed = train.settings, train.draws, train.seed
    condition = {
        name: settings.draw(f"tank.{name}", draws, seed)
        for name in ("temperature", "feed_reagent", "solids")
    }
    gangue = gangue_draws(train.gangue, settings, draws, seed)
    per_metal = _per_metal_drawn(train, ore)
    moving = [*condition.values(), per_metal, ore.head_draws]
    fixed = ore.law_draws is None and gangue is None
    if fixed and not any(is_drawn(value) for value in moving):
        return None
    law = ore.law if ore.law_draws is None else ore.law_draws
    taken = train.stated_gangue if gangue is None else gangue
    return train.run(law, (per_metal, ore.head_draws), condition, taken, (draws, seed))


def _per_metal_drawn(train: _Train, ore: PlantOre) -> Array | float:
    demand = train.settings.draw("tank.demand", train.draws, train.seed)
    return ore.per_metal_draws if demand is None else demand


def _stage(
    train: _Train,
    ore: PlantOre,
    stated_ore: tuple[Any, Any],
    stated: Mapping[str, Any],
    result: TankTrain,
    drawn: TankTrain | None,
    level: float,
) -> TankStage:
    settings, solids = train.settings, stated["solids"]
    strengths = result.reagent_g_per_L
    drawn_strengths = None if drawn is None else drawn.reagent_g_per_L
    rate, flow = settings.get("tank.ore_rate"), settings.get("tank.flow")
    solution = None if solids is None else _kg_per_t / solids
    if rate is None and flow is not None and solids is not None:
        rate = flow * solids / _kg_per_t * HOURS_PER_DAY * DAYS_PER_MONTH
    elif flow is None and rate is not None and solution is not None:
        flow = rate * solution / HOURS_PER_DAY / DAYS_PER_MONTH
    sinks = _sinks(train, ore, stated_ore, result, drawn, level)
    total_h = float(np.sum(train.residence_times_h))
    return TankStage(
        key=ore.key,
        grade=ore.grade,
        train=result,
        draws=drawn,
        extraction=band_of(result.extraction, getattr(drawn, "extraction", None), "1", level),
        reagent_g_per_L=None
        if strengths is None
        else band_of(strengths, drawn_strengths, "g/L", level),
        residence_times_h=train.residence_times_h,
        sizes=train.sizes,
        temperature_K=stated["temperature"],
        head_kg_per_t=ore.head_kg_per_t,
        solids_kg_per_m3=solids,
        flow_m3_per_h=flow,
        solution_m3_per_t=solution,
        ore_rate_t_per_month=rate,
        demand=demand_at(train.stated_gangue, stated["temperature"], *stated_ore)
        if train.with_balance
        else None,
        **sinks,
        gangue_known=train.gangue is not None,
        contains=band_contents(ore, train.gangue, settings, "tank", drawn is not None),
        outside=outside_the_data(
            ore.law,
            train.sizes,
            stated["temperature"],
            _strengths(stated["feed_reagent"], strengths),
            total_h,
            "the tanks",
            assumed_in_fit(settings),
        ),
        notes=_notes(train, ore, result),
    )


def _strengths(feed_g_per_L: float | None, in_tanks: Array | None) -> Array | None:
    """Every strength of the train: the law is used at that of each tank."""
    if feed_g_per_L is None or in_tanks is None:
        return None
    return np.append(np.asarray(in_tanks, dtype=float), feed_g_per_L)


def _sinks(
    train: _Train,
    ore: PlantOre,
    stated_ore: tuple[Any, Any],
    result: TankTrain,
    drawn: TankTrain | None,
    level: float,
) -> dict[str, Any]:
    """Reagent taken over the train by metal and by gangue, per tonne of ore."""
    names = ("metal_taken_kg_per_t", "gangue_taken_kg_per_t")
    if not train.with_balance or result.taken_kg_per_t is None:
        return dict.fromkeys(names)
    per_metal, head = stated_ore
    metal = per_metal * head * float(np.asarray(result.extraction)[-1])
    gangue = float(np.asarray(result.taken_kg_per_t)[-1]) - metal
    metal_d = gangue_d = None
    if drawn is not None and drawn.taken_kg_per_t is not None:
        metal_d = (
            _per_metal_drawn(train, ore) * ore.head_draws * np.asarray(drawn.extraction)[..., -1]
        )
        if train.gangue is not None:
            gangue_d = np.asarray(drawn.taken_kg_per_t)[..., -1] - metal_d
    floor = 0.0 if train.gangue is None or abs(gangue) < _ROUNDING * metal else gangue
    return {
        "metal_taken_kg_per_t": quantity_of(metal, metal_d, "kg/t", level),
        "gangue_taken_kg_per_t": quantity_of(floor, gangue_d, "kg/t", level),
        "metal_taken_draws": metal_d,
        "gangue_taken_draws": gangue_d,
    }


def _notes(train: _Train, ore: PlantOre, result: TankTrain) -> tuple[str, ...]:
    notes = list(ultimate_note(ore.law, train.sizes, train.settings, "tank"))
    if not train.settings.has("tank.sizes"):
        notes.append(
            f"No [tank.sizes]: all the ore is taken at the reference size of the law, "
            f"{ore.law.reference.size_mm:.3g} mm."
        )
    if holds_no_order(ore.law):
        notes.append(
            "The solution is held as [tank.solution] says in every tank: no reagent balance."
        )
    elif not train.with_balance:
        notes.append(
            "No feed_reagent: the strength is held at the reference of the law in every tank."
        )
    if np.any(getattr(result, "starved", False)):
        notes.append(
            "STARVED: the reagent runs out in the train; the plateau is no ultimate extraction."
        )
    return (*notes, *(str(line) for line in getattr(result, "warnings", ())))
