"""The mixed potential of a campaign: its settings, its fit to a site, and what the demand takes."""

from __future__ import annotations

from typing import Any

import numpy as np

from leachkin.campaign.settings import Settings
from leachkin.cementation import (
    CementationDemand,
    ElectrodeKinetics,
    Precipitant,
    SiteBarren,
    SiteFit,
    Solution,
    electrode_kinetics,
    fit_to_barren,
    metal_couples,
)
from leachkin.chemistry import factor, ion_of
from leachkin.problems import argument_error

BY_MIXED = "mixed potential"


def site_behind_demand(
    settings: Settings, solution: Solution, precipitant: Precipitant
) -> SiteFit | None:
    """Return the site's fit where the demand is to rest on it."""
    if settings.get("cementation.demand") != BY_MIXED:
        return None
    return site_fit(settings, solution, precipitant)


def site_fit(settings: Settings, solution: Solution, precipitant: Precipitant) -> SiteFit | None:
    """Return the mixed potential fitted to the site's barren; None where no site is given."""
    if not settings.has("cementation.site"):
        return None
    metal = first_metal(solution, precipitant)
    barren = SiteBarren(
        {metal: settings.number("cementation.site.barren")},
        ferric_g_per_L=settings.get("cementation.site.ferric"),
        iron_gain_g_per_L=settings.get("cementation.site.iron_gain"),
        acid_taken_g_per_L=settings.get("cementation.site.acid_taken"),
        relative_error=settings.number("cementation.site.precision"),
    )
    transfer, kinetics = mixed_settings(settings, solution, precipitant, metal)
    return fit_to_barren(solution, precipitant, transfer, barren, kinetics)


def taken_by_mixed_potential(settings: Settings, site: SiteFit | None) -> dict[str, Any]:
    """Return acid, ferric iron and oxygen taken, where the demand rests on a fitted site.

    Raises
    ------
    InputProblems
        If the demand is to rest on a mixed potential that was not fitted.
    """
    if settings.get("cementation.demand") != BY_MIXED:
        return {}
    if site is None or not site.course.fitted:
        why = "no [cementation.site]" if site is None else site.text
        raise argument_error(
            "cementation.demand",
            f"mixed potential, and it is not fitted: {why}",
            "measured sinks, or a barren of the site with iron gain or acid taken",
            "add [cementation.site] with barren and iron_gain, or leave demand out",
        )
    course = site.course
    hydrogen = course.taken_kg_per_m3["hydrogen"][..., -1]
    return {
        "acid_taken_g_per_L": hydrogen * factor("H2SO4", course.precipitant.metal),
        "ferric_taken": _gone(course.ferric_g_per_L),
        "oxygen_taken": _gone(course.oxygen_mg_per_L),
    }


def mixed_settings(
    settings: Settings, solution: Solution, precipitant: Precipitant, metal: str
) -> tuple[dict[str, float], ElectrodeKinetics]:
    """Return transfer by species and kinetics, as [cementation.mixed_potential] has them.

    Raises
    ------
    InputProblems
        If the table is missing.
    """
    transfer = settings.get("cementation.mixed_potential.transfer")
    if transfer is None:
        raise argument_error(
            "cementation.mixed_potential",
            "no transfer coefficient",
            "[cementation.mixed_potential]",
            "add the table; its keys have defaults",
        )
    grades = {
        m: float(np.median(solution.grade(m))) for m in solution.metals if m != precipitant.metal
    }
    kinetics = electrode_kinetics(
        precipitant,
        grades,
        medium=solution.kind,
        deposit_share=settings.number("cementation.mixed_potential.deposit_share"),
    )
    ion = ion_of(metal_couples(solution.kind)[metal].text("couple"))
    return {ion: float(transfer)}, kinetics


def first_metal(solution: Solution, precipitant: Precipitant) -> str:
    """Return the first metal that is not the precipitant's own.

    Raises
    ------
    InputProblems
        If there is none.
    """
    metals = [metal for metal in solution.metals if metal != precipitant.metal]
    if not metals:
        raise argument_error("cementation.metals", "no metal to put out", "one or more")
    return metals[0]


def recovery_of(demand: CementationDemand) -> dict[str, float]:
    """Return the share of each metal that a demand puts out, medians of draws."""
    return {
        metal: float(np.median(1.0 - left / np.maximum(demand.solution.grade(metal), 1e-300)))
        for metal, left in demand.barren_g_per_L.items()
    }


def _gone(series: Any) -> float:
    start = float(np.asarray(series)[..., 0])
    return 1.0 if start <= 0.0 else float(1.0 - np.asarray(series)[..., -1] / start)
