"""A plant figure as a function of the law, and what its band holds beside the fit."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.campaign import Campaign
from leachkin.campaign.next_tests_default import PlantConditions
from leachkin.campaign.plant_ore import COLUMN, plant_ore
from leachkin.campaign.plant_sizes import plant_sizes
from leachkin.campaign.result import CampaignResult
from leachkin.campaign.settings import Settings
from leachkin.campaign.stage_heap import heap_end
from leachkin.campaign.stage_results import HeapStage, TankStage
from leachkin.campaign.stage_tank import tank_end
from leachkin.kinetics import DataBox, FitResult, NextTests
from leachkin.kinetics.next_tests_targets import Prediction
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]
PLANTS = ("heap", "tank")
FIGURE = {
    "heap": "extracted at the end of the cycle",
    "tank": "extracted at the last tank",
}
#: Least standard deviation of an ultimate that was not tested, and where one size was.
LEAST_SD = 0.01
ONE_SIZE_SD = 0.05
#: Unit of a plant figure.
UNIT = "% of total metal"
PERCENT = 100.0


@dataclass(frozen=True)
class PlantBand:
    """What the band of a plant figure holds, in % of total metal.

    Attributes
    ----------
    plant : "heap" or "tank"
    column : bool
        Whether a column stands behind the law.
    other_variance : float
        Of everything but the constants of the law: its choice, scale-up ranges, gangue, head.
    law_variance : float
        Of the choice between laws that the data do not reject, in ``other_variance``.
    scale_up : tuple of str
        Keys whose stated ranges are in it.
    drawn : bool
        False without draws: then the fit is all that is known of the band.
    conditions : PlantConditions
    box : DataBox or None
        Of the tests.
    """

    plant: str
    column: bool
    other_variance: float
    law_variance: float
    scale_up: tuple[str, ...]
    drawn: bool
    conditions: PlantConditions
    box: DataBox | None

    @property
    def scale_up_unknown(self) -> bool:
        """Whether bottles alone stand behind a heap whose scale-up has no stated range."""
        return self.plant == "heap" and not self.column and not self.scale_up

    def whole_half(self, fit_half: float, multiplier: float) -> float:
        """Return the half-width of the whole band where the fit's part has one."""
        return float(np.hypot(fit_half, multiplier * np.sqrt(self.other_variance)))


def plant_of(campaign: Campaign, result: CampaignResult) -> str:
    """Return the plant of a campaign that was worked out, "" for none."""
    del campaign
    return "heap" if result.heap is not None else "tank" if result.tank is not None else ""


def conditions_of(settings: Settings, plant: str) -> PlantConditions:
    """Return what a plant asks of the law; nothing where there is no plant."""
    if not plant:
        return PlantConditions()
    return PlantConditions(
        plant,
        settings.get(f"{plant}.temperature"),
        settings.get(f"{plant}.feed_reagent"),
        plant_sizes(settings, plant),
    )


def prediction_of(campaign: Campaign, result: CampaignResult, plant: str) -> Prediction:
    """Return the plant figure [% of total metal] as a function of a law, or of a batch."""
    ore = plant_ore(campaign, result.kinetics, plant, 0, 0)
    end = heap_end if plant == "heap" else tank_end
    extracted = end(campaign, ore, result.gangue)
    return lambda law: PERCENT * extracted(law)


def stage_of(result: CampaignResult, plant: str) -> HeapStage | TankStage | None:
    """Return the stage of a plant."""
    return result.heap if plant == "heap" else result.tank


def plant_band(
    campaign: Campaign,
    result: CampaignResult,
    plant: str,
    fit_sd: float,
    box: DataBox | None,
) -> PlantBand:
    """Return what the band of a plant figure holds.

    Parameters
    ----------
    fit_sd : float
        Standard deviation of the figure by the fit alone [% of total metal].
    box : DataBox or None
        Of the tests.
    """
    stage = stage_of(result, plant)
    drawn = None
    if isinstance(stage, HeapStage) and stage.draws is not None:
        drawn = np.asarray(stage.draws.extracted)[..., -1]
    elif isinstance(stage, TankStage) and stage.draws is not None:
        drawn = np.asarray(stage.draws.extraction)[..., -1]
    variance = 0.0 if drawn is None else PERCENT**2 * float(np.var(drawn))
    other = max(variance - fit_sd**2, 0.0) if drawn is not None else 0.0
    ranges = campaign.settings.ranged(plant)
    return PlantBand(
        plant=plant,
        column=stage is not None and stage.grade == COLUMN,
        other_variance=other,
        law_variance=min(_law_variance(stage), other),
        scale_up=tuple(setting.key.split(".", 1)[1] for setting in ranges),
        drawn=drawn is not None,
        conditions=conditions_of(campaign.settings, plant),
        box=box,
    )


def _law_variance(stage: HeapStage | TankStage | None) -> float:
    """Return the variance of the figure over the laws that are not rejected, by their weights."""
    others = getattr(stage, "other_laws", ())
    if stage is None or not others:
        return 0.0
    own = stage.extracted if isinstance(stage, HeapStage) else stage.extraction
    weights = [getattr(law, "weight", 0.0) for law in others]
    values = PERCENT * np.array([float(own.value[-1]), *(law.extraction for law in others)])
    shares = np.array([max(1.0 - sum(weights), 0.0), *weights])
    return float(shares @ (values - shares @ values) ** 2)


def assumed_ultimates(
    fit: FitResult, new_knots: Mapping[str, float]
) -> dict[str, tuple[float, float]]:
    """Return what is thought of ultimates at untested sizes (or temperatures): value and deviation.

    The value is that of the law, flat outside the tests. Outside, the deviation is the change that
    the trend of the nearest two tested ones would make; inside, a quarter of the step between its
    neighbours; :data:`LEAST_SD` at least, and :data:`ONE_SIZE_SD` where one was tested.
    """
    law = fit.law
    by_temperature = law.ultimate_temperature_K is not None
    knots = law.ultimate_temperature_K if by_temperature else np.log(law.ultimate_size_mm)
    ultimate = np.asarray(law.ultimate, dtype=float)
    found = {}
    for name, at in new_knots.items():
        where = (law.reference.size_mm, at) if by_temperature else (at, None)
        value = float(law.ultimate_at(*where)[..., 0])
        sd = _ultimate_sd(np.asarray(knots), ultimate, at if by_temperature else float(np.log(at)))
        found[name] = (value, sd)
    return found


def _ultimate_sd(knots: Array, ultimate: Array, at: float) -> float:
    if knots.size < 2:
        return ONE_SIZE_SD
    if knots[0] < at < knots[-1]:
        left = int(np.searchsorted(knots, at)) - 1
        return max(0.25 * abs(float(ultimate[left + 1] - ultimate[left])), LEAST_SD)
    near, far = (0, 1) if at <= knots[0] else (-1, -2)
    slope = (ultimate[near] - ultimate[far]) / (knots[near] - knots[far])
    return max(abs(float(slope * (at - knots[near]))), LEAST_SD)


def plant_table(found: NextTests, band: PlantBand, multiplier: float) -> ResultTable:
    """Return the candidates with the band of the plant figure that each would leave."""
    several = any(row.candidate.repeats > 1 for row in found.rows)
    columns = [
        Column("candidate", "Test"),
        Column("temperature", "Temperature", "degC"),
        Column("size", "Size", "mm"),
        Column("reagent", "Reagent", "g/L"),
        Column("hours", "Last reading", "h"),
        *([Column("bottles", "Bottles")] if several else []),
        Column("fit_half", "Fit's part, +/-", UNIT, digits=2),
        Column("whole_half", "Whole band, +/-", UNIT, digits=2),
        Column("whole_shrink", "Band shrinks by", "%", digits=2),
        Column("shrink", "Fit's part shrinks by", "%", digits=2),
    ]
    ranked = found.ranking_table()
    more = [c for c in ranked.columns if c.key.startswith("shrink_")][-1:]
    priced = [c for c in ranked.columns if c.key in ("cost", "per_cost")]
    columns += [*more, *priced, Column("why", "What for")]
    now = found.present[0]
    records = [
        {"candidate": "the present tests", **_halves(now.half_width, None, band, multiplier)}
    ]
    for row, record in zip(found.rows, ranked.to_records(), strict=True):
        own = _halves(row.outlooks[0].half_width, now.half_width, band, multiplier)
        records.append({**record, **own})
    caption = f"{band.plant.capitalize()}: {now.value:.1f} % {FIGURE[band.plant]}; expected bands"
    return ResultTable.from_records("next_tests", columns, records, caption)


def _halves(
    half: float | None, now: float | None, band: PlantBand, multiplier: float
) -> dict[str, float | None]:
    if half is None:
        return {"fit_half": None, "whole_half": None, "whole_shrink": None}
    whole = band.whole_half(half, multiplier)
    shrink = None
    if now is not None:
        shrink = PERCENT * (1.0 - whole / band.whole_half(now, multiplier))
    return {
        "fit_half": half,
        "whole_half": whole,
        "whole_shrink": shrink,
    }
