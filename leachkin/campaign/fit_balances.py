"""The reagent of tests that nobody titrated, followed by its balance inside the fit."""

from __future__ import annotations

import numpy as np

from leachkin.campaign.campaign import Campaign
from leachkin.campaign.settings import Settings
from leachkin.campaign.stage_gangue import given_gangue, reagent_per_metal
from leachkin.kinetics import GangueLaw, ReagentBalance
from leachkin.testwork import Test, reagent_use


def fit_balances(campaign: Campaign, metal: str) -> dict[str, ReagentBalance]:
    """Return a reagent balance for every test without titrations, by test.

    Empty unless ``fit.reagent_history`` asks for it. The gangue is that of the ``[gangue]``
    table; without one only the metal takes reagent, and the register says so.
    """
    settings = campaign.settings
    if settings.get("fit.reagent_history") != "balance":
        return {}
    per_metal = reagent_per_metal(settings, metal)[0]
    gangue = _gangue(settings)
    return {
        test.name: _balance(test, per_metal, gangue)
        for test in campaign.tests
        if test.reagent_g_per_L and reagent_use(test) is None and test.time_h.size
    }


def _gangue(settings: Settings) -> GangueLaw | None:
    return given_gangue(settings).law if settings.has("gangue") else None


def _balance(test: Test, per_metal_kg_per_kg: float, gangue: GangueLaw | None) -> ReagentBalance:
    policy = test.aliquots or ""
    replaced = policy.startswith(("replaced", "made up"))
    share = np.nan_to_num(test.aliquot_mL) / test.solution_mL if replaced else None
    fresh = test.reagent_g_per_L if policy.endswith("reagent solution") else 0.0
    return ReagentBalance(
        start_g_per_L=float(test.reagent_g_per_L or 0.0),
        solids_kg_per_m3=1000.0 * test.solids_g / test.solution_mL,
        per_metal_kg_per_kg=per_metal_kg_per_kg,
        gangue=gangue,
        temperature_K=test.temperature_K,
        refreshed_share=share,
        fresh_g_per_L=float(fresh or 0.0),
    )
