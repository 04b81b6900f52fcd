"""The hazards stage: what the campaign's own numbers say could hurt."""

from __future__ import annotations

from typing import Any

from leachkin.campaign.campaign import Campaign
from leachkin.campaign.settings import Settings
from leachkin.campaign.stage_results import CementationStage, HeapStage
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.hazards import Caution, Facts, cautions, facts_with_cementation, gas_reagents

ACIDS = ("H2SO4", "HCl", "HNO3")
CYANIDES = ("NaCN", "KCN", "CN")
#: Headings of an assay of sulphide sulphur; total sulphur holds sulphate too and is none.
SULPHIDE = ("sulphide S", "sulfide S")
_mg_per_kg_per_kg_per_t = 1000.0
_kg_per_t_of_ore = 1000.0


def hazards_stage(
    campaign: Campaign, heap: HeapStage | None, cementation: CementationStage | None
) -> tuple[Caution, ...]:
    """Return the cautions of a campaign; what was not measured says so."""
    facts = Facts(**_facts(campaign, heap))
    if cementation is not None:
        facts = facts_with_cementation(facts, cementation.demand)
    return cautions(facts)


def _facts(campaign: Campaign, heap: HeapStage | None) -> dict[str, Any]:
    settings, reagent = campaign.settings, campaign.reagent
    leached = bool(campaign.tests) or heap is not None or settings.has("tank")
    acid, cyanide = leached and reagent in ACIDS, leached and reagent in CYANIDES
    strongest = _strongest(campaign)
    known: dict[str, Any] = {
        "acid": acid,
        "cyanide": cyanide,
        "heap": heap is not None,
        "acid_g_per_L": strongest if acid else None,
        "cyanide_g_per_L": strongest if cyanide else None,
        "pH": _lowest_pH(campaign) if cyanide else None,
        "temperature_K": _temperature(campaign),
        "lift_m": settings.get("heap.lift_height") if heap is not None else None,
        "solution_m3_per_h": heap.flow_m3_per_h if heap is not None else None,
        "bottle_solids_g": _bottle_g(campaign),
    }
    known |= {
        "arsenic_mg_per_kg": _head(campaign, "As", _mg_per_kg_per_kg_per_t),
        "antimony_mg_per_kg": _head(campaign, "Sb", _mg_per_kg_per_kg_per_t),
        "mercury_mg_per_kg": _head(campaign, "Hg", _mg_per_kg_per_kg_per_t),
        "carbonate_share": _head(campaign, "CaCO3", 1.0 / _kg_per_t_of_ore),
        "sulphide_share": _sulphide(campaign),
        "reagents": gas_reagents(_reagent_names(settings)) or None,
    }
    return {name: value for name, value in known.items() if value is not None}


def _reagent_names(settings: Settings) -> set[str]:
    """Every reagent that the campaign names: prices, consumption, own lines."""
    names = {*settings.named.get("budget.prices", {}), *settings.free.get("budget.consumption", {})}
    for group in settings.repeated.get("budget.lines", ()):
        names |= {str(group["name"].value)} if "name" in group else set()
    return names


def _strongest(campaign: Campaign) -> float | None:
    strengths = [t.reagent_g_per_L for t in campaign.tests if t.reagent_g_per_L is not None]
    strengths += [
        value
        for stage in ("heap", "tank")
        if (value := campaign.settings.get(f"{stage}.feed_reagent")) is not None
    ]
    return max(strengths) if strengths else None


def _lowest_pH(campaign: Campaign) -> float | None:
    import numpy as np

    lowest = [
        float(np.nanmin(t.pH))
        for t in campaign.tests
        if t.pH is not None and np.isfinite(t.pH).any()
    ]
    given = campaign.settings.get("cementation.pH")
    return min([*lowest, *([given] if given is not None else [])], default=None)


def _temperature(campaign: Campaign) -> float:
    warm = [t.temperature_K for t in campaign.tests]
    warm += [
        value
        for stage in ("heap", "tank")
        if (value := campaign.settings.get(f"{stage}.temperature")) is not None
    ]
    return max(warm, default=STANDARD_TEMPERATURE_K)


def _head(campaign: Campaign, analyte: str, scale: float) -> float | None:
    heads = [t.heads[analyte].value_kg_per_t for t in campaign.tests if analyte in t.heads]
    return max(heads) * scale if heads else None


def _sulphide(campaign: Campaign) -> float | None:
    found = [_head(campaign, name, 1.0 / _kg_per_t_of_ore) for name in SULPHIDE]
    return max((share for share in found if share is not None), default=None)


def _bottle_g(campaign: Campaign) -> float | None:
    bottles = [t.solids_g for t in campaign.tests if t.kind == "bottle roll"]
    return max(bottles) if bottles else None
