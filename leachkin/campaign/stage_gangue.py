"""The gangue stage: reagent taken by what is not the metal, given or fitted from the readings."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.assumed_values import assumed_in_fit
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.gangue_readings import gangue_readings
from leachkin.campaign.settings import Settings, is_drawn
from leachkin.campaign.stage_results import GangueStage
from leachkin.chemistry import factor
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.errors import InputProblems
from leachkin.kinetics import GangueLaw, ReagentDemand, fit_gangue
from leachkin.problems import Problem
from leachkin.run_record import stage_seed
from leachkin.testwork import reagent_use

Array = NDArray[np.float64]

#: Moles of reagent bound per mole of metal where the campaign does not say: oxide, carbonate or
#: silicate minerals for acid, the usual complex for cyanide.
_MOLES_PER_MOLE = {
    ("H2SO4", "Cu"): 1.0,
    ("H2SO4", "Zn"): 1.0,
    ("H2SO4", "Ni"): 1.0,
    ("H2SO4", "Co"): 1.0,
    ("H2SO4", "Mn"): 1.0,
    ("NaCN", "Au"): 2.0,
    ("NaCN", "Ag"): 2.0,
    ("NaCN", "Cu"): 3.0,
}
_KEYS = ("fast", "fast_time", "slow", "slow_rate", "activation_energy")
#: Time constant of a slow part that is not there [h].
_NEVER_h = 1e12


def reagent_per_metal(settings: Settings, metal: str) -> tuple[float, str]:
    """Return the reagent bound per kilogram of metal [kg/kg], and why.

    Raises
    ------
    InputProblems
        If the campaign does not say and there is no usual reaction.
    """
    given = settings.free.get("campaign.reagent_per_metal", {}).get(metal)
    if given is not None:
        return float(given.value), given.source or "stated in the campaign file"
    reagent = str(settings.get("campaign.reagent"))
    moles = _MOLES_PER_MOLE.get((reagent, metal))
    if moles is None:
        raise InputProblems(
            [
                Problem(
                    "",
                    None,
                    "campaign.reagent_per_metal",
                    "ask",
                    f"how much {reagent} a kilogram of {metal} binds is not known",
                    "kg of reagent per kg of metal",
                    f'add {metal} = "1.5 kg/kg" under [campaign.reagent_per_metal]',
                )
            ]
        )
    why = f"{moles:g} mol of {reagent} per mol of {metal}, by molar masses"
    return factor(reagent, metal, moles_reagent=moles), why


def given_gangue(settings: Settings) -> GangueStage:
    """Return the gangue stage of the ``[gangue]`` table."""
    value = {key: settings.get(f"gangue.{key}") for key in _KEYS}
    if value["slow"] > 0.0:
        settings.number("gangue.slow_rate")
    return GangueStage("given", _law(value, settings.number("gangue.reference_temperature")))


def _law(value: Mapping[str, Any], reference_K: float) -> GangueLaw:
    rate = value["slow_rate"]
    return GangueLaw(
        fast_kg_per_t=value["fast"],
        fast_h=value["fast_time"],
        slow_kg_per_t=value["slow"],
        slow_h=_NEVER_h if rate is None or np.all(np.asarray(rate) == 0.0) else 1.0 / rate,
        activation_energy_kJ_per_mol=value["activation_energy"],
        reference_temperature_K=reference_K,
    )


def gangue_draws(
    stage: GangueStage | None, settings: Settings, count: int, seed: int
) -> GangueLaw | None:
    """Return the gangue of every draw, or None where nothing in it is drawn.

    From the fit where it was fitted, over the stated ranges where it was given.
    """
    if stage is None or not count:
        return None
    if stage.fit is not None:
        return stage.fit.draw(count, stage_seed(seed, "gangue"))
    value = {key: settings.draw(f"gangue.{key}", count, seed) for key in _KEYS}
    if not any(is_drawn(drawn) for drawn in value.values()):
        return None
    return _law(value, stage.law.reference_temperature_K)


def demand_at(
    law: GangueLaw | None,
    temperature_K: Array | float,
    per_metal: Array | float,
    head_kg_per_t: Array | float,
) -> ReagentDemand:
    """Return the reagent demand of the ore at a temperature; the metal alone without a law.

    Every argument may be an array of draws, shape (n,).
    """
    if law is None:
        return ReagentDemand(per_metal, head_kg_per_t)
    return law.demand(temperature_K, per_metal, head_kg_per_t)  # type: ignore[arg-type]


def fitted_gangue(campaign: Campaign, domain: str, level: float) -> GangueStage | None:
    """Return the gangue of a domain fitted from the titrations; None where there are none.

    Raises
    ------
    InputProblems
        If there are titrations and they cannot be fitted.
    """
    settings = campaign.settings
    if not any(reagent_use(test) is not None for test in campaign.tests):
        return None
    per_metal = {metal: reagent_per_metal(settings, metal)[0] for metal in campaign.metals}
    readings = gangue_readings(campaign.tests, domain, per_metal)
    if not readings:
        return None
    reference = settings.get("fit.reference_temperature")
    fit = fit_gangue(
        readings,
        reference_temperature_K=STANDARD_TEMPERATURE_K if reference is None else reference,
        activation_energy_kJ_per_mol=assumed_in_fit(settings).get("activation_energy_gangue"),
        level=level,
    )
    return GangueStage("fit", fit.law, fit, readings, fit.warnings)
