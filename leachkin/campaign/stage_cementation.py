"""The cementation stage: the solution of heap or tanks, or a given one, onto iron or zinc."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.bands import Quantity, quantity_of
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.cementation_site import site_behind_demand, taken_by_mixed_potential
from leachkin.campaign.settings import Settings, draw_setting
from leachkin.campaign.stage_results import CementationStage, HeapStage, TankStage
from leachkin.cementation import (
    CementationDemand,
    Precipitant,
    Solution,
    as_received,
    cementation_demand,
)
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.errors import InputProblems
from leachkin.problems import Problem, argument_error

Array = NDArray[np.float64]

HEAP_BASIS = (
    "mean over the cycle after drain-down: metal extracted at the end of the cycle over all "
    "solution put on; single pass, barren metal not returned"
)
TANK_BASIS = "solution at the last tank's outlet, before any wash; single pass"
GIVEN_BASIS = "solution as given in the campaign file; single pass"
_g_per_kg = 1000.0


@dataclass(frozen=True)
class _Liquor:
    """Metals of the solution, stated and drawn, its flow and what it rests on."""

    stated: Mapping[str, float]
    drawn: Mapping[str, Array | float]
    flow_m3_per_h: float | None
    m3_per_t: float | None
    m3_per_t_drawn: Array | float | None
    basis: str


def cementation_stage(
    campaign: Campaign,
    heap: HeapStage | None,
    tank: TankStage | None,
    draws: int,
    seed: int,
    level: float,
) -> CementationStage:
    """Return the cementation of a campaign, per pass.

    Raises
    ------
    InputProblems
        If no solution is known, or the precipitant cannot put the metal out.
    """
    settings = campaign.settings
    liquor = _liquor(settings, heap, tank, draws, seed)
    precipitant = Precipitant(
        str(settings.get("cementation.precipitant")),
        purity=settings.get("cementation.purity"),
        fines=settings.number("cementation.fines"),
    )
    solution = _solution(settings, liquor.stated, liquor.flow_m3_per_h, _stated)
    site = site_behind_demand(settings, solution, precipitant)
    taken = taken_by_mixed_potential(settings, site)
    demand = _demand(settings, solution, precipitant, _stated, taken)
    drawn = _drawn(settings, liquor, precipitant, taken, draws, seed) if draws else None
    found = _stage(settings, liquor, demand, drawn, level, draws, seed)
    return found if site is None else replace(found, site=site)


def _liquor(
    settings: Settings, heap: HeapStage | None, tank: TankStage | None, draws: int, seed: int
) -> _Liquor:
    given = settings.free.get("cementation.metals")
    flow = settings.get("cementation.flow")
    if given:
        drawn = {
            name: draw_setting(one, draws, seed) if draws else one.value
            for name, one in given.items()
        }
        plant = heap or tank
        m3_per_t = settings.get("budget.solution") if plant is None else _m3_per_t(plant)
        return _Liquor(
            {name: float(one.value) for name, one in given.items()},
            {k: v for k, v in drawn.items() if v is not None},
            flow,
            m3_per_t,
            m3_per_t,
            GIVEN_BASIS,
        )
    if heap is not None:
        return _of_heap(heap, flow)
    if tank is not None and tank.solution_m3_per_t is not None:
        return _of_tank(tank, flow)
    raise InputProblems(
        [
            Problem(
                "",
                None,
                "cementation.metals",
                "ask",
                "no solution is known",
                "a heap, tanks with solids, or metals given",
                'add [cementation.metals] with Cu = "2 g/L"',
            )
        ]
    )


def _m3_per_t(plant: HeapStage | TankStage) -> float | None:
    return float(plant.m3_per_t[-1]) if isinstance(plant, HeapStage) else plant.solution_m3_per_t


def _of_heap(heap: HeapStage, flow: float | None) -> _Liquor:
    metal, stated = heap.key.rpartition("/")[2], float(heap.mean_pls_g_per_L.value or 0.0)
    m3_per_t = float(heap.m3_per_t[-1])
    drawn: Array | float = stated
    m3_drawn: Array | float = m3_per_t
    if heap.draws is not None and heap.metal_extracted_draws is not None:
        m3_drawn = np.asarray(heap.draws.m3_per_t)[..., -1]
        drawn = heap.metal_extracted_draws / m3_drawn
    return _Liquor(
        {metal: stated}, {metal: drawn}, flow or heap.flow_m3_per_h, m3_per_t, m3_drawn, HEAP_BASIS
    )


def _of_tank(tank: TankStage, flow: float | None) -> _Liquor:
    metal, m3_per_t = tank.key.rpartition("/")[2], float(tank.solution_m3_per_t or 0.0)
    stated = float(tank.extraction.value[-1]) * tank.head_kg_per_t / m3_per_t
    drawn: Array | float = stated
    if tank.draws is not None:
        drawn = np.asarray(tank.draws.extraction)[..., -1] * tank.head_kg_per_t / m3_per_t
    return _Liquor(
        {metal: stated}, {metal: drawn}, flow or tank.flow_m3_per_h, m3_per_t, m3_per_t, TANK_BASIS
    )


def _stated(settings: Settings, key: str) -> Any:
    return settings.get(key)


def _solution(
    settings: Settings, metals: Mapping[str, Any], flow: float | None, get: Any
) -> Solution:
    return Solution(
        dict(metals),
        flow_m3_per_h=flow,
        ferric_g_per_L=get(settings, "cementation.ferric"),
        iron_g_per_L=settings.get("cementation.iron"),
        acid_g_per_L=settings.get("cementation.free_acid"),
        oxygen_mg_per_L=get(settings, "cementation.dissolved_oxygen"),
        free_cyanide_g_per_L=settings.get("cementation.free_cyanide"),
        pH=settings.get("cementation.pH"),
        arsenic_mg_per_L=settings.get("cementation.As"),
        antimony_mg_per_L=settings.get("cementation.Sb"),
        mercury_mg_per_L=settings.get("cementation.Hg"),
        temperature_K=settings.get("cementation.temperature") or STANDARD_TEMPERATURE_K,
    )


def _demand(
    settings: Settings,
    solution: Solution,
    precipitant: Precipitant,
    get: Any,
    taken: Mapping[str, Any],
) -> CementationDemand:
    given = {"acid_taken_g_per_L": get(settings, "cementation.acid_taken"), **taken}
    return cementation_demand(
        solution,
        precipitant,
        recovery=_recovery(settings, solution, get),
        stoichiometry=str(settings.get("cementation.stoichiometry")),
        **given,
    )


def _recovery(settings: Settings, solution: Solution, get: Any) -> Any:
    """Recovery of every metal as stated, that of the first by its barren where one is given."""
    stated = get(settings, "cementation.recovery")
    barren = get(settings, "cementation.barren")
    if barren is None:
        return stated
    by_metal = dict.fromkeys(solution.metals, stated)
    first = next(iter(solution.metals))
    feed = solution.grade(first)
    if np.any(np.asarray(barren) >= feed):
        raise argument_error(
            "cementation.barren",
            f"{float(np.max(barren)):.3g} g/L left of {float(np.min(feed)):.3g} g/L {first}",
            "less than the feed holds",
        )
    return by_metal | {first: 1.0 - np.asarray(barren) / feed}


def _drawn(
    settings: Settings,
    liquor: _Liquor,
    precipitant: Precipitant,
    taken: Mapping[str, Any],
    draws: int,
    seed: int,
) -> CementationDemand | None:
    def get(source: Settings, key: str) -> Any:
        return source.draw(key, draws, seed)

    keys = ("ferric", "acid_taken", "dissolved_oxygen", "recovery", "barren")
    moving = [get(settings, f"cementation.{key}") for key in keys]
    if all(np.ndim(value) == 0 for value in (*moving, *liquor.drawn.values())):
        return None
    solution = _solution(settings, liquor.drawn, liquor.flow_m3_per_h, get)
    return _demand(settings, solution, precipitant, get, taken)


def _stage(
    settings: Settings,
    liquor: _Liquor,
    demand: CementationDemand,
    drawn: CementationDemand | None,
    level: float,
    draws: int,
    seed: int,
) -> CementationStage:
    def quantity(name: str, unit: str) -> Quantity:
        return _quantity(getattr(demand, name), getattr(drawn, name, None), unit, level)

    net, net_draws = demand.net_kg_per_m3, None if drawn is None else drawn.net_kg_per_m3
    per_tonne = _per_tonne(settings, liquor, demand, drawn, level, draws, seed)
    gross = _gross(settings, demand, drawn, draws, seed)
    return CementationStage(
        solution=demand.solution,
        precipitant=demand.precipitant,
        demand=demand,
        recovery=_first_recovery(demand, settings),
        basis=liquor.basis,
        flow_m3_per_h=liquor.flow_m3_per_h,
        solution_m3_per_t=liquor.m3_per_t,
        net_kg_per_m3=_with_sink_range(
            _quantity(net, net_draws, "kg/m3", level), demand.net_high_kg_per_m3
        ),
        net_kg_per_kg=quantity("net_factor", "kg/kg"),
        gross_kg_per_kg=_quantity(demand.gross_factor, gross, "kg/kg", level),
        **per_tonne,
        contains=_contains(settings, drawn is not None),
        notes=(*demand.missing, *demand.warnings, *demand.defaults),
        drawn=drawn,
    )


def _first_recovery(demand: CementationDemand, settings: Settings) -> float:
    """Share of the first metal that is recovered."""
    first = next(iter(demand.barren_g_per_L), None)
    if first is None or settings.get("cementation.barren") is None:
        return settings.number("cementation.recovery")
    feed = float(np.median(demand.solution.grade(first)))
    return 1.0 - float(np.median(demand.barren_g_per_L[first])) / feed


def _quantity(value: Any, drawn: Any, unit: str, level: float) -> Quantity:
    if value is None:
        return Quantity(None, unit)
    return quantity_of(float(np.asarray(value)), drawn, unit, level)


def _with_sink_range(quantity: Quantity, high: Any) -> Quantity:
    """Where sinks are a range and nothing is drawn, the range stands instead of a band."""
    if quantity.low is not None or high is None or quantity.value is None:
        return quantity
    top = float(np.asarray(high))
    if top <= quantity.value * (1.0 + 1e-9):
        return quantity
    return replace(quantity, low=quantity.value, high=top)


def _gross(
    settings: Settings,
    demand: CementationDemand,
    drawn: CementationDemand | None,
    draws: int,
    seed: int,
) -> Any:
    if not draws or settings.get("cementation.purity") is None:
        return None
    purity = settings.draw("cementation.purity", draws, seed)
    fines = settings.draw("cementation.fines", draws, seed)
    factor = (demand if drawn is None else drawn).net_factor
    if factor is None or purity is None or fines is None:
        return None
    if drawn is None and np.ndim(purity) == 0 and np.ndim(fines) == 0:
        return None
    return as_received(factor, purity * (1.0 - fines))


def _per_tonne(
    settings: Settings,
    liquor: _Liquor,
    demand: CementationDemand,
    drawn: CementationDemand | None,
    level: float,
    draws: int,
    seed: int,
) -> dict[str, Any]:
    names = ("recovered_kg_per_t", "precipitant_kg_per_t", "acid_taken_kg_per_t")
    m3 = liquor.m3_per_t
    if m3 is None:
        return dict.fromkeys(names) | {"draws": {}}
    acid = settings.get("cementation.acid_taken")
    acid_drawn = settings.draw("cementation.acid_taken", draws, seed) if draws else None
    stated = (demand.metal_kg_per_m3, demand.net_kg_per_m3, acid)
    moving = (
        (None, None, None)
        if drawn is None
        else (drawn.metal_kg_per_m3, drawn.net_kg_per_m3, acid_drawn)
    )
    quantities, kept = {}, {}
    for name, value, one in zip(names, stated, moving, strict=True):
        scaled = None if one is None else np.asarray(one, dtype=float) * liquor.m3_per_t_drawn
        quantities[name] = (
            None if value is None else _quantity(np.asarray(value) * m3, scaled, "kg/t", level)
        )
        if scaled is not None and scaled.ndim:
            kept[name] = scaled
    return quantities | {"draws": kept}


def _contains(settings: Settings, has_band: bool) -> tuple[str, ...]:
    ranged = settings.ranged("cementation")
    words = [f"stated ranges of {', '.join(s.key.split('.', 1)[1] for s in ranged)}"]
    return (*(["what the plant band holds"] if has_band else []), *(words if ranged else []))
