"""What-ifs: one key, or several, varied; one row of key figures for each value."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

from leachkin.campaign.bands import Quantity
from leachkin.campaign.campaign import read_campaign
from leachkin.campaign.read_settings import split_dotted
from leachkin.campaign.result import CampaignResult
from leachkin.campaign.run import DEFAULT_DRAWS, DEFAULT_LEVEL, STAGES, Progress, run_campaign
from leachkin.campaign.schema_tables import SCHEMA
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

_PERCENT = 100.0
#: Tables whose keys leave the tests, the fit and the gangue as they are.
_AFTER_THE_FIT = ("heap", "tank", "cementation", "budget")
#: Keys of those tables that choose whose gangue is fitted.
_CHOOSE_THE_GANGUE = ("heap.domain", "tank.domain")
#: Most combinations that one call works out.
MOST_COMBINATIONS = 200


def what_if(
    path: str | Path,
    upto: str | None = None,
    *,
    vary: Mapping[str, Sequence[str]],
    set: Mapping[str, str] | None = None,
    seed: int = 1,
    draws: int = DEFAULT_DRAWS,
    level: float = DEFAULT_LEVEL,
    progress: Progress | None = None,
) -> ResultTable:
    """Return the key figures of a campaign for every combination of varied values.

    Parameters
    ----------
    path : str or Path
        The campaign file.
    upto : str, optional
        As in :func:`run_campaign`.
    vary : mapping of dotted key to sequence of str
        As ``{"heap.lift_height": ["4 m", "6 m"]}``; a value without unit takes that of the last
        one, and a key without a table is looked for in the stage asked for.
    set : mapping of dotted key to text, optional
        Values held for all combinations.
    seed, draws, level, progress
        As in :func:`run_campaign`; progress counts combinations.

    Returns
    -------
    ResultTable
        One column a varied key, then the key figures of the stages that ran; where a stage could
        not be done its figures are empty and a last column says why.

    Raises
    ------
    InputProblems
        If a key or a value has no meaning, or there are too many combinations.
    """
    named = {_full_key(key, upto): _with_units(values) for key, values in vary.items()}
    combinations = [
        dict(zip(named, values, strict=True)) for values in itertools.product(*named.values())
    ]
    if not 0 < len(combinations) <= MOST_COMBINATIONS:
        raise argument_error(
            "vary",
            f"{len(combinations)} combinations",
            f"1 to {MOST_COMBINATIONS}",
            "give fewer values",
        )
    earlier: CampaignResult | None = None
    records, columns = [], {key: Column(key, key) for key in named}
    for done, combination in enumerate(combinations, start=1):
        campaign = read_campaign(path, {**(set or {}), **combination})
        result = run_campaign(
            campaign,
            upto,
            seed=seed,
            draws=draws,
            level=level,
            reuse=earlier if _keeps_the_fit(named) else None,
        )
        earlier = result
        figures = tuple(key_figures(result))
        columns |= {column.key: column for column in _columns(figures)}
        records.append({**combination, **_cells(figures), **_not_done(result)})
        if progress is not None:
            progress(done, len(combinations))
    caption = f"{upto or 'all stages'}, varied: {', '.join(named)}"
    if any("not_done" in record for record in records):
        columns["not_done"] = Column("not_done", "Not done, and why")
    return ResultTable.from_records("what_if", columns.values(), records, caption)


def _not_done(result: CampaignResult) -> dict[str, str]:
    """Return the reasons of the stages that could not be done, as one cell; nothing without."""
    reasons = [
        problem.found
        for problem in result.problems
        if problem.found.startswith(tuple(f"{stage} not done: " for stage in STAGES))
    ]
    return {"not_done": "; ".join(reasons)} if reasons else {}


def _full_key(key: str, upto: str | None) -> str:
    if len(split_dotted(key)) > 1:
        return key
    known = {dotted for dotted, _ in SCHEMA.dotted_keys()}
    places = [f"{table}.{key}" for table in (upto, *_AFTER_THE_FIT) if table is not None]
    return next((place for place in places if place in known), key)


def _with_units(values: Sequence[str]) -> tuple[str, ...]:
    """Let "4", "6", "8 m" all be metres."""
    if not values:
        return ()
    last = values[-1].strip()
    _, _, unit = last.partition(" ")
    return tuple(
        f"{value.strip()} {unit}" if unit and _is_bare(value) else value.strip() for value in values
    )


def _is_bare(value: str) -> bool:
    try:
        float(value)
    except ValueError:
        return False
    return True


def _keeps_the_fit(named: Mapping[str, Any]) -> bool:
    return all(
        split_dotted(key)[0] in _AFTER_THE_FIT and key not in _CHOOSE_THE_GANGUE for key in named
    )


def key_figures(result: CampaignResult) -> Iterator[tuple[str, str, Quantity]]:
    """Yield the key figures of a result: key, heading, figure."""
    for figures in (_tank_figures, _heap_figures, _cementation_figures, _budget_figures):
        yield from figures(result)


Figures = Iterator[tuple[str, str, Quantity]]


def _scaled(quantity: Quantity, factor: float, unit: str) -> Quantity:
    value, low, high = (
        None if number is None else number * factor
        for number in (quantity.value, quantity.low, quantity.high)
    )
    return Quantity(value, unit, low, high, quantity.level)


def _tank_figures(result: CampaignResult) -> Figures:
    tank = result.tank
    if tank is None:
        return
    out = _scaled(tank.extraction.at(-1), _PERCENT, "%")
    yield "tank_extraction", "Extracted in the tanks", out
    if tank.reagent_g_per_L is not None:
        yield "tank_reagent", "Reagent at the last tank", tank.reagent_g_per_L.at(-1)


def _heap_figures(result: CampaignResult) -> Figures:
    heap = result.heap
    if heap is None:
        return
    yield "m3_per_t", "Solution applied", Quantity(float(heap.m3_per_t[-1]), "m3/t")
    yield "extracted", "Extracted", _scaled(heap.extracted.at(-1), _PERCENT, "%")
    yield "recovered_to_date", "Recovered to date", _scaled(heap.recovered.at(-1), _PERCENT, "%")
    yield "ore_limited", "If reagent never short", _scaled(heap.ore_limited.at(-1), _PERCENT, "%")
    yield "reagent_taken", "Reagent taken", heap.taken_kg_per_t.at(-1)
    yield "mean_pls", "Mean metal in solution", heap.mean_pls_g_per_L
    yield "area", "Area", Quantity(heap.area_m2, "m2")


def _cementation_figures(result: CampaignResult) -> Figures:
    stage = result.cementation
    if stage is None:
        return
    yield "precipitant_net", "Precipitant, net", stage.net_kg_per_m3
    yield "precipitant_gross", "Precipitant, as received", stage.gross_kg_per_kg


def _budget_figures(result: CampaignResult) -> Figures:
    budget = result.budget
    if budget is None:
        return
    yield "cost_per_month", "Reagents per month", budget.cost_per_month
    yield "cost_per_t", "Reagents per tonne", budget.cost_per_t_ore
    yield "cost_per_kg", "Reagents per kg of metal", budget.cost_per_kg_metal


def _columns(figures: Sequence[tuple[str, str, Quantity]]) -> Iterator[Column]:
    for key, heading, quantity in figures:
        yield Column(key, heading, quantity.unit)
        if quantity.low is not None:
            yield Column(f"{key}_low", f"{heading}, low", quantity.unit)
            yield Column(f"{key}_high", f"{heading}, high", quantity.unit)


def _cells(figures: Sequence[tuple[str, str, Quantity]]) -> dict[str, float | None]:
    cells: dict[str, float | None] = {}
    for key, _, quantity in figures:
        cells |= {key: quantity.value, f"{key}_low": quantity.low, f"{key}_high": quantity.high}
    return cells
