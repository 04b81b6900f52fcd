"""What the published cases on solutions and cementation compute."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from leachkin.cementation import (
    Precipitant,
    Solution,
    cementation_demand,
    fit_cementation,
    mixed_potential,
)
from leachkin.chemistry import (
    apparent_activation_energy_kJ_per_mol,
    complexed_potential,
    diffusion_coefficient_m2_per_s,
    hcn_share,
    rotating_disc,
    water_density_kg_per_m3,
    water_viscosity_Pa_s,
)
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.published_checks.cases import Case

_G_PER_KG = 1e3


def _cementation_rate(case: Case) -> float:
    """First-order rate constant of one reading [1/min]."""
    left = 1.0 - case.number("removed_percent") / 100.0
    fit = fit_cementation([case.number("minutes") / 60.0], [left], start=1.0)
    return fit.parameter("k").value / 60.0


def _iron_factor(case: Case) -> float:
    """Net iron per copper where so much acid is taken, at a recovery [kg/kg]."""
    solution = Solution(
        {"Cu": case.number("copper_g_per_L")},
        ferric_g_per_L=case.number("ferric_g_per_L"),
        oxygen_mg_per_L=0.0,
    )
    demand = cementation_demand(
        solution,
        Precipitant("iron"),
        recovery=case.number("recovery"),
        acid_taken_g_per_L=case.number("acid_taken_g_per_L"),
    )
    return float(np.nan if demand.net_factor is None else demand.net_factor)


def _zinc_demand(case: Case) -> float:
    """Net zinc of a gold liquor by the 2:1 couple [g/m3]."""
    solution = Solution(
        {"Au": case.number("gold_g_per_m3") / _G_PER_KG},
        oxygen_mg_per_L=case.number("oxygen_mg_per_L"),
        medium="cyanide",
    )
    demand = cementation_demand(solution, Precipitant("zinc"), recovery=1.0, stoichiometry="2:1")
    return _G_PER_KG * float(demand.net_kg_per_m3)


def _hcn_share_percent(case: Case) -> float:
    return 100.0 * float(hcn_share(case.number("pH")))


def _complexed_potential(case: Case) -> float:
    found = complexed_potential(
        case.text("couple"), case.number("complex_mol_per_L"), case.number("ligand_mol_per_L")
    )
    return float(found.value_V)


def _water_viscosity_mPa_s(case: Case) -> float:
    return 1e3 * float(water_viscosity_Pa_s(case.number("celsius") + ZERO_CELSIUS_K))


def _water_density(case: Case) -> float:
    return float(water_density_kg_per_m3(case.number("celsius") + ZERO_CELSIUS_K))


def _diffusion_1e9(case: Case) -> float:
    kelvin = case.number("celsius") + ZERO_CELSIUS_K
    return 1e9 * float(diffusion_coefficient_m2_per_s(case.text("species"), kelvin))


def _disc_activation_energy(case: Case) -> float:
    """Apparent activation energy of transport to a disc, every five degrees [kJ/mol]."""
    low, high = case.numbers("celsius")
    kelvin = np.arange(low, high + 1.0, 5.0) + ZERO_CELSIUS_K
    k = rotating_disc(400.0, 0.01, temperature_K=kelvin).k_m_per_s
    return apparent_activation_energy_kJ_per_mol(kelvin, k)


def _mixed_potential_factor(case: Case) -> float:
    """Iron per copper at one place, equal transfer [kg/kg]."""
    solution = Solution(
        {"Cu": case.number("copper_g_per_L")},
        ferric_g_per_L=case.number("ferric_g_per_L"),
        oxygen_mg_per_L=0.0,
        pH=case.number("pH"),
    )
    return float(mixed_potential(solution, Precipitant("iron"), 1e-5).factor_kg_per_kg)


SOLUTION_QUANTITIES: dict[str, Callable[[Case], float]] = {
    "cementation_rate": _cementation_rate,
    "iron_factor": _iron_factor,
    "zinc_demand": _zinc_demand,
    "hcn_share_percent": _hcn_share_percent,
    "complexed_potential": _complexed_potential,
    "water_viscosity_mPa_s": _water_viscosity_mPa_s,
    "water_density": _water_density,
    "diffusion_1e9": _diffusion_1e9,
    "disc_activation_energy": _disc_activation_energy,
    "mixed_potential_factor": _mixed_potential_factor,
}
