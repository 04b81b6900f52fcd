"""The budget stage: consumption of every stage and the user's own lines, in tonnes and money."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.bands import Quantity, quantity_of
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.settings import Group, Settings, draw_setting
from leachkin.campaign.stage_results import BudgetStage, CementationStage, HeapStage, TankStage
from leachkin.cementation import CementationDemand
from leachkin.errors import InputProblems
from leachkin.problems import Problem
from leachkin.reagents import (
    Budget,
    BudgetLine,
    Product,
    cementation_lines,
    reagent_budget,
)

Array = NDArray[np.float64]
Plant = HeapStage | TankStage

_KILOGRAMS_IN = {"g": 1e-3, "kg": 1.0, "t": 1e3}
_DRIVER_OF = {"t ore": "t ore", "m3 solution": "m3", "kg metal": "kg metal", "month": "month"}
SINGLE_PASS = (
    "Single pass: reagent left in the solution goes back with the barren and is not bought again; "
    "iron build-up and bleed are not in it."
)


@dataclass(frozen=True)
class _Sources:
    """Where the lines of a budget come from."""

    campaign: Campaign
    heap: HeapStage | None
    tank: TankStage | None
    cementation: CementationStage | None
    draws: int
    seed: int

    @property
    def settings(self) -> Settings:
        """The settings of the campaign."""
        return self.campaign.settings

    @property
    def plant(self) -> Plant | None:
        """The plant whose reagent and ore rate count: the heap before the tanks."""
        return self.heap or self.tank


def budget_stage(
    campaign: Campaign,
    heap: HeapStage | None,
    tank: TankStage | None,
    cementation: CementationStage | None,
    draws: int,
    seed: int,
    level: float,
) -> BudgetStage:
    """Return the reagent budget of a campaign.

    A line without price, date or purity stays in it and makes the total INCOMPLETE.

    Raises
    ------
    InputProblems
        If the ore rate is not known, or there is nothing to budget.
    """
    sources = _Sources(campaign, heap, tank, cementation, draws, seed)
    lines = tuple(_lines(sources, drawn=False))
    if not lines:
        raise InputProblems(
            [
                Problem(
                    "",
                    None,
                    "budget",
                    "ask",
                    "no consumption is known",
                    "a heap, tanks, cementation, [budget.consumption] or [[budget.lines]]",
                    'add [budget.consumption] with H2SO4 = "20 kg/t"',
                )
            ]
        )
    budget = _budget(sources, lines, level, drawn=False)
    moving = None
    if draws and _is_drawn(sources):
        moving = _budget(sources, tuple(_lines(sources, drawn=True)), level, drawn=True)
    return _stage(sources, budget, moving, level)


def _is_drawn(sources: _Sources) -> bool:
    lines = _lines(sources, drawn=True)
    recovered = _recovered(sources, drawn=True) or {}
    return any(np.ndim(line.amount) for line in lines) or any(map(np.ndim, recovered.values()))


def _budget(sources: _Sources, lines: tuple[BudgetLine, ...], level: float, drawn: bool) -> Budget:
    settings = sources.settings
    return reagent_budget(
        lines,
        tuple(_products(sources)),
        ore_t_per_month=_ore_rate(sources),
        currency=str(settings.get("budget.currency")),
        recovered_kg_per_t=_recovered(sources, drawn),
        metal_basis=_metal_basis(sources),
        solution_m3_per_t=_solution(sources, drawn),
        allowance=settings.number("budget.allowance"),
        level=level,
    )


def _ore_rate(sources: _Sources) -> float:
    given = sources.settings.get("budget.ore_rate")
    rate = given if given is not None else getattr(sources.plant, "ore_rate_t_per_month", None)
    if rate is None:
        raise InputProblems(
            [
                Problem(
                    "",
                    None,
                    "budget.ore_rate",
                    "ask",
                    "the ore rate is not known",
                    "t/month of dry ore",
                    'add ore_rate = "250000 t/month" under [budget]',
                )
            ]
        )
    return float(rate)


def _metal(sources: _Sources) -> str:
    if sources.plant is not None:
        return sources.plant.key.rpartition("/")[2]
    cemented = sources.settings.free.get("cementation.metals", {})
    return next(iter((*sources.campaign.metals, *cemented)), "metal")


def _recovered(sources: _Sources, drawn: bool) -> dict[str, Any] | None:
    given = sources.settings.get("budget.recovered")
    if given is not None:
        return {_metal(sources): given}
    cementation = sources.cementation
    if cementation is not None and cementation.recovered_kg_per_t is not None:
        stated = cementation.recovered_kg_per_t.value
        moving = cementation.draws.get("recovered_kg_per_t") if drawn else None
        return {_metal(sources): stated if moving is None else moving}
    heap = sources.heap
    if heap is None:
        return None
    moving = heap.metal_extracted_draws if drawn else None
    return {_metal(sources): heap.metal_extracted_kg_per_t.value if moving is None else moving}


def _metal_basis(sources: _Sources) -> str:
    given = sources.settings.get("budget.recovered") is not None
    cemented = sources.cementation is not None
    return "recovered" if given or cemented or sources.heap is None else "extracted"


def _solution(sources: _Sources, drawn: bool) -> Any:
    given = sources.settings.get("budget.solution")
    if given is not None:
        return given
    heap, tank = sources.heap, sources.tank
    if heap is not None:
        if drawn and heap.draws is not None:
            return np.asarray(heap.draws.m3_per_t)[..., -1]
        return float(heap.m3_per_t[-1])
    if tank is not None and tank.solution_m3_per_t is not None:
        return tank.solution_m3_per_t
    cementation = sources.cementation
    if cementation is None or cementation.flow_m3_per_h is None:
        return None
    return cementation.solution_m3_per_t


def _lines(sources: _Sources, drawn: bool) -> Iterator[BudgetLine]:
    yield from _leach_lines(sources, drawn)
    yield from _cementation(sources, drawn)
    for name, setting in sources.settings.free.get("budget.consumption", {}).items():
        moving = draw_setting(setting, sources.draws, sources.seed) if drawn else None
        amount = setting.value if moving is None else moving
        yield BudgetLine(name, "as stated", amount, source=setting.source or "campaign file")
    for group in sources.settings.repeated.get("budget.lines", ()):
        if {"name", "amount", "driver"} <= set(group):
            yield _own_line(group)


def _leach_lines(sources: _Sources, drawn: bool) -> Iterator[BudgetLine]:
    """Reagent of heap or tanks by sink; an unknown gangue keeps the total open."""
    plant, reagent = sources.plant, sources.campaign.reagent
    if plant is None or plant.metal_taken_kg_per_t is None:
        return
    metal = _metal(sources)
    for sink, quantity, moving in (
        (metal, plant.metal_taken_kg_per_t, plant.metal_taken_draws),
        ("gangue", plant.gangue_taken_kg_per_t, plant.gangue_taken_draws),
    ):
        if quantity is None or quantity.value is None:
            continue
        amount = moving if drawn and moving is not None else quantity.value
        missing = (
            ("the gangue's demand is not known",)
            if (sink == "gangue" and not plant.gangue_known)
            else ()
        )
        yield BudgetLine(
            reagent,
            sink,
            np.maximum(amount, 0.0),
            missing=missing,
            source=f"{plant.grade}, {plant.key}",
        )


def _cementation(sources: _Sources, drawn: bool) -> Iterator[BudgetLine]:
    stage = sources.cementation
    if stage is None:
        return
    if stage.acid_taken_kg_per_t is not None:
        moving = stage.draws.get("acid_taken_kg_per_t") if drawn else None
        amount = stage.acid_taken_kg_per_t.value if moving is None else moving
        if amount is not None:
            yield BudgetLine("H2SO4", "cementation vessels", amount, source=stage.basis)
    demand: CementationDemand = stage.drawn if drawn and stage.drawn is not None else stage.demand
    name = str(sources.settings.get("cementation.precipitant"))
    for line in cementation_lines(demand, name, source=stage.basis):
        yield line if sources.plant is not None else _per_month(line, stage, sources)


def _per_month(line: BudgetLine, stage: CementationStage, sources: _Sources) -> BudgetLine:
    """Without ore the solution's own flow carries the line, by the month."""
    from leachkin.constants import DAYS_PER_MONTH, HOURS_PER_DAY

    if stage.flow_m3_per_h is None or sources.settings.get("budget.solution") is not None:
        return line
    m3_per_month = stage.flow_m3_per_h * HOURS_PER_DAY * DAYS_PER_MONTH
    return replace(line, amount=np.asarray(line.amount) * m3_per_month, driver="month")


def _own_line(group: Group) -> BudgetLine:
    kilograms = float(group["amount"].value) * _KILOGRAMS_IN[str(group["unit"].value)]
    return BudgetLine(
        str(group["name"].value),
        "own line",
        kilograms,
        _DRIVER_OF[str(group["driver"].value)],
        source="campaign file",
    )


def _products(sources: _Sources) -> Iterator[Product]:
    settings = sources.settings
    prices = settings.named.get("budget.prices", {})
    precipitant = settings.get("cementation.precipitant")
    for name, group in prices.items():
        loss = settings.get("cementation.fines") if name == precipitant else None
        yield _product(name, group, loss or 0.0, _purity_elsewhere(settings, name))
    if precipitant is not None and precipitant not in prices:
        loss = float(settings.get("cementation.fines") or 0.0)
        yield Product(str(precipitant), _purity_elsewhere(settings, str(precipitant)), loss)
    for group in settings.repeated.get("budget.lines", ()):
        name = str(group["name"].value) if "name" in group else ""
        if name and name not in prices:
            yield _product(name, group, 0.0, None)


def _purity_elsewhere(settings: Settings, name: str) -> float | None:
    """The purity of a precipitant stands at the cementation as well."""
    purity = settings.get("cementation.purity")
    return (
        float(purity)
        if purity is not None and (name == settings.get("cementation.precipitant"))
        else None
    )


def _product(name: str, group: Group, loss: float, purity: float | None) -> Product:
    value: Mapping[str, Any] = {key: setting.value for key, setting in group.items()}
    return Product(
        name,
        purity=value.get("purity", purity),
        loss=loss,
        price=value.get("price"),
        per=value.get("per", "t"),
        date=value.get("date"),
        delivered=value.get("delivered"),
    )


def _stage(sources: _Sources, budget: Budget, moving: Budget | None, level: float) -> BudgetStage:
    currency = budget.basis.currency

    def quantity(value: Any, drawn: Any, unit: str) -> Quantity:
        if value is None:
            return Quantity(None, unit)
        return quantity_of(float(np.asarray(value)), drawn, unit, level)

    has = moving is not None
    return BudgetStage(
        budget=budget,
        drawn=moving,
        currency=currency,
        allowance=budget.allowance,
        cost_per_month=quantity(
            budget.total_per_month, moving.total_per_month if moving else None, f"{currency}/month"
        ),
        cost_per_t_ore=quantity(
            budget.total_per_t, moving.total_per_t if moving else None, f"{currency}/t"
        ),
        cost_per_kg_metal=quantity(
            budget.total_per_kg(), moving.total_per_kg() if moving else None, f"{currency}/kg"
        ),
        basis=_basis(sources, budget),
        contains=("quantities as in the plant band; prices are not drawn",) if has else (),
        notes=(*_purity_notes(sources), *budget.notes),
        outside=() if sources.plant is None else sources.plant.outside,
    )


def _basis(sources: _Sources, budget: Budget) -> tuple[str, ...]:
    words = [f"Basis: {_ore_rate(sources):,.0f} t/month of dry ore."]
    for metal, kilograms in budget.basis.recovered_kg_per_t.items():
        words.append(
            f"Metal: {float(np.asarray(kilograms)):.4g} kg/t {metal} {budget.basis.metal_basis}."
        )
    if sources.plant is not None:
        words.append(SINGLE_PASS)
    return tuple(words)


def _purity_notes(sources: _Sources) -> Iterator[str]:
    settings = sources.settings
    name, stated = settings.get("cementation.precipitant"), settings.get("cementation.purity")
    group = settings.named.get("budget.prices", {}).get(str(name), {})
    price = group["purity"].value if "purity" in group else None
    if stated is not None and price is not None and abs(stated - price) > 1e-9:
        yield (
            f"{name}: purity is {100 * stated:g} % under [cementation] and {100 * price:g} % "
            f"at its price; the budget uses the latter."
        )
