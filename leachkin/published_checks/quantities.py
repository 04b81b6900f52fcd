"""What each published case computes, with the program's own public functions."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from leachkin.chemistry import (
    cell_from_potentials,
    factor,
    ln_equilibrium_constant,
    potential_from_formation,
    potential_from_gibbs,
    temperature_coefficient_from_entropies,
)
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.errors import TableError, nearest_names
from leachkin.kinetics import (
    ArrheniusFit,
    ParticleLaw,
    activation_energy_of_slope,
    arrhenius_rate_constant,
    fit_arrhenius,
    fit_curve,
    straightened_time,
)
from leachkin.published_checks.bottle import bottle_balance
from leachkin.published_checks.cases import Case, read_data
from leachkin.published_checks.solution_quantities import SOLUTION_QUANTITIES
from leachkin.scaleup import tank_train


def quantity(name: str) -> Callable[[Case], float]:
    """Return the function that computes a quantity of the cases.

    Raises
    ------
    TableError
        If there is none of that name; the message names the nearest.
    """
    if name not in _QUANTITIES:
        near = ", ".join(nearest_names(name, _QUANTITIES))
        raise TableError(f"no published check computes {name!r}; nearest: {near}")
    return _QUANTITIES[name]


def _particle(law: str, tau: float | list[float]) -> ParticleLaw:
    resistances: dict[str, Any] = {law: np.asarray(tau, dtype=float)}
    return ParticleLaw(**resistances)


def _plug_flow_conversion(case: Case) -> float:
    law = _particle(case.text("law"), case.numbers("tau"))
    shares = np.array(case.numbers("shares"))
    conversion = law.conversion(np.array([case.number("time")]))[..., 0]
    return float(conversion @ shares)


def _unconverted(law: str, tau: float, mean_time: float, tanks: int) -> float:
    times = np.full(tanks, mean_time / tanks)
    return 1.0 - float(tank_train(_particle(law, tau), times).extraction[-1])


def _mixed_flow_unconverted(case: Case) -> float:
    return _unconverted(case.text("law"), case.number("tau"), case.number("mean_time"), 1)


def _mixed_flow_unconverted_mean(case: Case) -> float:
    laws = case.text("laws").split()
    tau, mean_time = case.number("tau"), case.number("mean_time")
    return float(np.mean([_unconverted(law, tau, mean_time, 1) for law in laws]))


def _tanks_unconverted(case: Case) -> float:
    tanks = int(case.number("tanks"))
    return _unconverted(case.text("law"), case.number("tau"), case.number("mean_time"), tanks)


def _fitted_time(case: Case) -> float:
    _, (time, conversion) = read_data(case.text("data"))
    law = case.text("law")
    return fit_curve(time, conversion, law, ultimate=1.0).parameter(f"tau_{law}").value


def _straightened_time(case: Case) -> float:
    _, (time, conversion) = read_data(case.text("data"))
    return float(straightened_time(time, conversion, case.text("law")))


def _arrhenius(case: Case) -> ArrheniusFit:
    _, (celsius, rate) = read_data(case.text("data"))
    return fit_arrhenius(np.array(celsius) + ZERO_CELSIUS_K, rate)


def _activation_energy(case: Case) -> float:
    return _arrhenius(case).activation_energy_kJ_per_mol


def _activation_energy_standard_error(case: Case) -> float:
    error = _arrhenius(case).standard_error_kJ_per_mol
    return float("nan") if error is None else error


def _activation_energy_of_slope(case: Case) -> float:
    return activation_energy_of_slope(case.number("slope_K"))


def _rate_constant_of_law(case: Case) -> float:
    rate = arrhenius_rate_constant(
        case.number("temperature_K"),
        case.number("prefactor"),
        case.number("activation_energy_kJ_per_mol"),
        case.number("gas_constant"),
    )
    return float(rate)


def _bottle_extraction(case: Case) -> float:
    balance = bottle_balance(case)
    return 100.0 * float(balance.extraction_on_calculated_head[int(case.number("reading")) - 1])


def _bottle_calculated_head(case: Case) -> float:
    return 1e3 * float(bottle_balance(case).head_calculated_kg_per_t or float("nan"))


def _ln_equilibrium_constant(case: Case) -> float:
    voltage, electrons = case.number("voltage_V"), case.number("electrons")
    return float(ln_equilibrium_constant(voltage, electrons, case.number("temperature_K")))


def _equilibrium_constant(case: Case) -> float:
    couples = cell_from_potentials(
        case.number("cathode_V"), case.number("anode_V"), int(case.number("electrons"))
    )
    return couples.equilibrium_constant


def _voltage_of_couples(case: Case) -> float:
    couples = cell_from_potentials(
        case.number("cathode_V"), case.number("anode_V"), int(case.number("electrons"))
    )
    return couples.voltage


def _gibbs_energy_of_couples(case: Case) -> float:
    couples = cell_from_potentials(
        case.number("cathode_V"), case.number("anode_V"), int(case.number("electrons"))
    )
    return couples.gibbs_kJ_per_mol


def _voltage_of_gibbs_energy(case: Case) -> float:
    return float(potential_from_gibbs(case.number("gibbs_kJ"), case.number("electrons")))


def _stoichiometric_mass(case: Case) -> float:
    per_mass = factor(case.text("reagent"), case.text("product"), case.number("moles"))
    return per_mass * case.number("product_mass")


def _standard_potential(case: Case) -> float:
    return potential_from_formation(case.text("couple"))


def _potential_slope(case: Case) -> float:
    return temperature_coefficient_from_entropies(case.text("couple"))


_QUANTITIES: dict[str, Callable[[Case], float]] = {
    "plug_flow_conversion": _plug_flow_conversion,
    "mixed_flow_unconverted": _mixed_flow_unconverted,
    "mixed_flow_unconverted_mean": _mixed_flow_unconverted_mean,
    "tanks_unconverted": _tanks_unconverted,
    "fitted_time": _fitted_time,
    "straightened_time": _straightened_time,
    "activation_energy": _activation_energy,
    "activation_energy_standard_error": _activation_energy_standard_error,
    "activation_energy_of_slope": _activation_energy_of_slope,
    "rate_constant_of_law": _rate_constant_of_law,
    "bottle_extraction": _bottle_extraction,
    "bottle_calculated_head": _bottle_calculated_head,
    "ln_equilibrium_constant": _ln_equilibrium_constant,
    "equilibrium_constant": _equilibrium_constant,
    "voltage_of_couples": _voltage_of_couples,
    "gibbs_energy_of_couples": _gibbs_energy_of_couples,
    "voltage_of_gibbs_energy": _voltage_of_gibbs_energy,
    "stoichiometric_mass": _stoichiometric_mass,
    "standard_potential": _standard_potential,
    "potential_slope": _potential_slope,
    **SOLUTION_QUANTITIES,
}
