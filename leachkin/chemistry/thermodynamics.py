"""Plain relations between potential, Gibbs energy, entropy and equilibrium; arrays welcome."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.formulas import canonical_species, charge_of
from leachkin.constants import (
    STANDARD_TEMPERATURE_K,
    FARADAY_C_per_mol,
    GAS_CONSTANT_J_per_mol_K,
)
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.tables import read_table


def potential_from_gibbs(gibbs_kJ_per_mol: ArrayLike, electrons: float) -> NDArray[np.float64]:
    """Return the potential of a reaction from its Gibbs energy [V].

    Parameters
    ----------
    gibbs_kJ_per_mol : array_like, shape B
    electrons : float
        Electrons of the reaction as written, above 0.

    Returns
    -------
    ndarray, shape B
        ``E = -dG / (n F)``; below 0 where the reaction has to be driven.

    Raises
    ------
    InputProblems
        If a number is not finite or electrons is not above 0.

    Examples
    --------
    Chlorine and caustic from brine, +422 kJ with two electrons (common practice):

    >>> round(float(potential_from_gibbs(422.0, 2)), 1)
    -2.2
    """
    _check_electrons(electrons)
    energy = _finite("gibbs_kJ_per_mol", gibbs_kJ_per_mol)
    return np.asarray(-1e3 * energy / (electrons * FARADAY_C_per_mol))


def gibbs_from_potential(potential_V: ArrayLike, electrons: float) -> NDArray[np.float64]:
    """Return the Gibbs energy of a reaction from its potential [kJ/mol], ``dG = -n F E``.

    Parameters
    ----------
    potential_V : array_like, shape B
    electrons : float
        Above 0.

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If a number is not finite or electrons is not above 0.
    """
    _check_electrons(electrons)
    potential = _finite("potential_V", potential_V)
    return np.asarray(-electrons * FARADAY_C_per_mol * potential / 1e3)


def ln_equilibrium_constant(
    potential_V: ArrayLike, electrons: float, temperature_K: ArrayLike = STANDARD_TEMPERATURE_K
) -> NDArray[np.float64]:
    """Return the logarithm of the equilibrium constant, ``ln K = n F E / (R T)``.

    Parameters
    ----------
    potential_V, temperature_K : array_like, shape B
    electrons : float
        Above 0.

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If a number is not finite, or electrons or temperature is not above 0.

    Examples
    --------
    >>> round(float(ln_equilibrium_constant(1.10, 2)), 1)
    85.6
    """
    _check_electrons(electrons)
    potential = _finite("potential_V", potential_V)
    temperature = check_temperature(temperature_K)
    return np.asarray(
        electrons * FARADAY_C_per_mol * potential / (GAS_CONSTANT_J_per_mol_K * temperature)
    )


def nernst(
    standard_potential_V: ArrayLike,
    electrons: float,
    reaction_quotient: ArrayLike,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> NDArray[np.float64]:
    """Return the potential of a couple at given activities [V].

    Parameters
    ----------
    standard_potential_V : array_like, shape B
        At the same temperature.
    electrons : float
        Above 0.
    reaction_quotient : array_like, shape B
        Activities of the reduced side over those of the oxidised side, above 0.
    temperature_K : array_like, shape B

    Returns
    -------
    ndarray, shape B
        ``E = E0 - R T / (n F) ln Q``.

    Raises
    ------
    InputProblems
        If a number is not finite, or electrons, quotient or temperature is not above 0.

    Examples
    --------
    Copper at 0.01 mol/L:

    >>> round(float(nernst(0.3394, 2, 1 / 0.01)), 4)
    0.2802
    """
    _check_electrons(electrons)
    standard = _finite("standard_potential_V", standard_potential_V)
    quotient = _finite("reaction_quotient", reaction_quotient)
    if np.any(quotient <= 0.0):
        raise argument_error(
            "reaction_quotient",
            f"{quotient.min():g}",
            "above 0",
            "activities of the reduced side over those of the oxidised side",
        )
    temperature = check_temperature(temperature_K)
    slope = GAS_CONSTANT_J_per_mol_K * temperature / (electrons * FARADAY_C_per_mol)
    return np.asarray(standard - slope * np.log(quotient))


def potential_from_formation(couple: str) -> float:
    """Return E0 of a couple from Gibbs energies of formation at 298.15 K [V].

    Parameters
    ----------
    couple : str
        Oxidised and reduced form of one element, as ``"Cu2+/Cu"`` or ``"Fe3+/Fe2+"``.

    Returns
    -------
    float

    Raises
    ------
    InputProblems
        If the couple is not of that kind or a species is not in the table.

    Notes
    -----
    ``E0 = -dG/(n F)`` for the reduction by hydrogen, hydrogen and its ion being 0 [nbs1982_crc].

    Examples
    --------
    >>> round(potential_from_formation("Zn2+/Zn"), 4)
    -0.7623
    """
    oxidised, reduced, electrons = split_couple(couple)
    energy = _gibbs_of_formation(reduced) - _gibbs_of_formation(oxidised)
    return float(potential_from_gibbs(energy, electrons))


def temperature_coefficient_from_entropies(couple: str) -> float:
    """Return dE0/dT of a couple from entropies at 298.15 K [mV/K].

    Parameters
    ----------
    couple : str
        As in :func:`potential_from_formation`.

    Returns
    -------
    float

    Raises
    ------
    InputProblems
        As :func:`potential_from_formation`.

    Notes
    -----
    ``dE0/dT = dS/(n F)`` of ``ox + n/2 H2 -> red + n H+``, in which the ion H+ has entropy 0 by
    convention and hydrogen its own [nbs1982_crc, crc_thermochemistry].

    Examples
    --------
    >>> round(temperature_coefficient_from_entropies("Ag+/Ag"), 3)
    -0.989
    """
    oxidised, reduced, electrons = split_couple(couple)
    change = _entropy(reduced) - _entropy(oxidised)
    change += electrons * (_entropy("H+") - 0.5 * _entropy("H2"))
    return 1e3 * change / (electrons * FARADAY_C_per_mol)


def split_couple(couple: str) -> tuple[str, str, int]:
    """Return oxidised form, reduced form and electrons of a couple of one element.

    Parameters
    ----------
    couple : str

    Returns
    -------
    tuple of (str, str, int)

    Raises
    ------
    InputProblems
        If there are not two forms or their charges do not differ the right way.
    """
    parts = [canonical_species(part) for part in couple.split("/")]
    electrons = charge_of(parts[0]) - charge_of(parts[1]) if len(parts) == 2 else 0
    if electrons < 1:
        raise argument_error(
            "couple",
            f"{couple!r}",
            "oxidised and reduced form of one element, as Cu2+/Cu or Fe3+/Fe2+",
            "write the form of higher charge first",
        )
    return parts[0], parts[1], electrons


def check_temperature(temperature_K: ArrayLike) -> NDArray[np.float64]:
    """Return temperatures as an array [K].

    Parameters
    ----------
    temperature_K : array_like, shape B
        Liquid water under a roof: 250 to 650 K.

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If one is not finite or lies outside 250 to 650 K.
    """
    temperature = _finite("temperature_K", temperature_K)
    if np.any((temperature < 250.0) | (temperature > 650.0)):
        raise argument_error(
            "temperature_K",
            f"{float(temperature.min()):g} to {float(temperature.max()):g} K",
            "250 to 650 K",
            "give kelvin: 25 degC is 298.15 K",
        )
    return temperature


def _gibbs_of_formation(species: str) -> float:
    if charge_of(species) == 0:
        return 0.0
    return _species_number("gibbs_energies", species, "dfG_kJ_per_mol")


def _entropy(species: str) -> float:
    table = "entropies" if charge_of(species) == 0 else "gibbs_energies"
    return _species_number(table, species, "S_J_per_mol_K")


def _species_number(table: str, species: str, column: str) -> float:
    rows = {row.text("species"): row for row in read_table(table).rows}
    if species not in rows:
        raise InputProblems([unknown_name("species", species, rows, column="couple")])
    return rows[species].number(column)


def _check_electrons(electrons: float) -> None:
    if not (np.isfinite(electrons) and electrons > 0.0):
        raise argument_error(
            "electrons", f"{electrons}", "a number above 0", "electrons of the reaction as written"
        )


def _finite(name: str, values: ArrayLike) -> NDArray[np.float64]:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array)):
        raise argument_error(name, "a value that is not a finite number", "finite numbers", "")
    return array
