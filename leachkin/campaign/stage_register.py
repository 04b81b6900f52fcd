"""The register of a run: what the file assumed, and what the stages had to assume besides."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from leachkin.campaign.assumed_values import assumed_priors
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.settings import Assumption
from leachkin.campaign.stage_gangue import reagent_per_metal
from leachkin.errors import InputProblems

#: Tables whose defaults matter only where the stage was done.
_STAGE_OF = {
    "heap": "heap",
    "tank": "tank",
    "cementation": "cementation",
    "budget": "budget",
    "gangue": "gangue",
}


def register_of_run(campaign: Campaign, found: Mapping[str, Any]) -> tuple[Assumption, ...]:
    """Return the assumptions behind the figures of a run.

    Those of stages that were not done are left out; what a stage took from molar masses or from
    the law itself is added.
    """
    drawn = _drawn_assumptions(campaign, found)
    rows = [
        replace(row, in_band=True) if row.key in drawn else row
        for row in campaign.assumed
        if _used(row, found) and not _acts_nowhere(row, campaign)
    ]
    rows += _reagent_rows(campaign, found)
    rows += _order_rows(campaign, found)
    rows += _tank_size_rows(found, campaign)
    return tuple(dict.fromkeys(rows))


def _drawn_assumptions(campaign: Campaign, found: Mapping[str, Any]) -> tuple[str, ...]:
    """The assumed values of the fit whose range is in the band of a plant figure."""
    plants = [found[name] for name in ("heap", "tank") if found.get(name) is not None]
    fitted = [p for p in plants if p.draws is not None and "fit" in p.contains]
    return tuple(assumed_priors(campaign.settings)) if fitted else ()


def _used(row: Assumption, found: Mapping[str, Any]) -> bool:
    stage = _STAGE_OF.get(row.key.split(".")[0])
    return stage is None or found.get(stage) is not None


def _acts_nowhere(row: Assumption, campaign: Campaign) -> bool:
    """A default recovery beside a barren; the precision of solids where none was tested."""
    if row.key in ("precision.tail", "precision.head", "precision.residue"):
        return bool(campaign.cementation_tests) and not campaign.tests and not campaign.observed
    barren = campaign.settings.get("cementation.barren")
    return row.key == "cementation.recovery" and barren is not None


def _reagent_rows(campaign: Campaign, found: Mapping[str, Any]) -> list[Assumption]:
    plants = [found.get("heap"), found.get("tank")]
    metals = {plant.key.rpartition("/")[2] for plant in plants if plant is not None}
    rows = []
    for metal in sorted(metals):
        try:
            value, why = reagent_per_metal(campaign.settings, metal)
        except InputProblems:
            continue
        given = metal in campaign.settings.free.get("campaign.reagent_per_metal", {})
        rows.append(
            Assumption(
                f"{campaign.reagent} per {metal}",
                value,
                "kg/kg",
                why=why,
                by="the campaign file" if given else "default of the program",
            )
        )
    return rows


def _order_rows(campaign: Campaign, found: Mapping[str, Any]) -> list[Assumption]:
    """A plant with its own strengths rests on the order; one strength tested does not show it."""
    stated = {
        group["parameter"].value
        for group in campaign.settings.repeated.get("assumed", ())
        if "parameter" in group
    }
    if "reagent_order" in stated or "fit.reagent_order" not in campaign.settings.values:
        return []
    setting = campaign.settings.values["fit.reagent_order"]
    plant = found.get("heap") is not None or found.get("tank") is not None
    if not setting.given or not plant or not isinstance(setting.value, float):
        return []
    return [
        Assumption(
            "fit.reagent_order", setting.value, "", why="held, not fitted", by="the campaign file"
        )
    ]


def _tank_size_rows(found: Mapping[str, Any], campaign: Campaign) -> list[Assumption]:
    tank = found.get("tank")
    if tank is None or campaign.settings.has("tank.sizes"):
        return []
    return [
        Assumption(
            "tank.sizes",
            float(tank.sizes.size_mm[0]),
            "mm",
            why="no size table: the reference size of the law",
        )
    ]
