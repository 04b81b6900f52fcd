"""Hydrogen cyanide against pH, and stability constants of the cyanide complexes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.formulas import canonical_species, molar_mass
from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.constants import STANDARD_TEMPERATURE_K, GAS_CONSTANT_J_per_mol_K
from leachkin.problems import argument_error
from leachkin.tables import Row, read_table


@dataclass(frozen=True)
class StabilityConstant:
    """Overall constant of ``ion + n ligand -> species`` at 25 degC.

    Attributes
    ----------
    species, ion, ligand : str
    ligands : int
    log10_beta : float
        At zero ionic strength.
    dH_kJ_per_mol : float or None
    source, status, note : str
    """

    species: str
    ion: str
    ligand: str
    ligands: int
    log10_beta: float
    dH_kJ_per_mol: float | None
    source: str
    status: str
    note: str


def stability_constants(species: str) -> tuple[StabilityConstant, ...]:
    """Return every constant held for a complex, the preferred first.

    Parameters
    ----------
    species : str
        As ``"Ag(CN)2-"``.

    Returns
    -------
    tuple of StabilityConstant
        Empty where none is held.
    """
    rows = read_table("stability_constants").where("species", canonical_species(species))
    return tuple(_constant(row) for row in rows)


def hcn_share(
    pH: ArrayLike,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
    pKa: float | None = None,
) -> NDArray[np.float64]:
    """Return the share of free cyanide that is hydrogen cyanide.

    Parameters
    ----------
    pH : array_like, shape B
        0 to 14.
    temperature_K : array_like, shape B
        Moves pKa by its enthalpy; not used where pKa is given.
    pKa : float, optional
        9.21 at 25 degC by default [nist46]; other tables print up to 9.24.

    Returns
    -------
    ndarray, shape B
        ``1 / (1 + 10^(pH - pKa))``.

    Raises
    ------
    InputProblems
        If pH lies outside 0 to 14 or a number is not finite.

    Examples
    --------
    >>> [round(100 * float(hcn_share(pH)), 1) for pH in (9.5, 10, 10.5, 11)]
    [33.9, 14.0, 4.9, 1.6]
    """
    acidity = check_pH(pH)
    constant = hcn_pKa(temperature_K) if pKa is None else np.asarray(pKa, dtype=np.float64)
    return np.asarray(1.0 / (1.0 + 10.0 ** (acidity - constant)))


def hcn_pKa(temperature_K: ArrayLike = STANDARD_TEMPERATURE_K) -> NDArray[np.float64]:
    """Return pKa of hydrogen cyanide, moved from 25 degC by its enthalpy [nist46].

    Parameters
    ----------
    temperature_K : array_like, shape B

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If a temperature lies outside 250 to 650 K.
    """
    temperature = check_temperature(temperature_K)
    constant = stability_constants("HCN")[0]
    slope = (constant.dH_kJ_per_mol or 0.0) * 1e3 / (np.log(10.0) * GAS_CONSTANT_J_per_mol_K)
    shift = slope * (1.0 / STANDARD_TEMPERATURE_K - 1.0 / temperature)
    return np.asarray(constant.log10_beta + shift)


def hcn_headspace_ppm(
    sodium_cyanide_g_per_L: ArrayLike, pH: ArrayLike, henry_mol_per_L_atm: float | None = None
) -> NDArray[np.float64]:
    """Return hydrogen cyanide in the gas above a solution in a closed space, at 25 degC [ppm].

    Parameters
    ----------
    sodium_cyanide_g_per_L, pH : array_like, shape B
        Strength 0 or more; pH 0 to 14.
    henry_mol_per_L_atm : float, optional
        9.02 by default, from memory: an editable figure.

    Returns
    -------
    ndarray, shape B
        Parts per million by volume at 1 atm, at equilibrium, the solution not run down.

    Raises
    ------
    InputProblems
        If a strength is negative or not finite, or pH lies outside 0 to 14.

    Examples
    --------
    >>> [round(float(hcn_headspace_ppm(0.5, pH))) for pH in (10, 10.5, 11)]
    [158, 55, 18]
    """
    strength = np.asarray(sodium_cyanide_g_per_L, dtype=np.float64)
    if not np.all(np.isfinite(strength) & (strength >= 0.0)):
        raise argument_error(
            "sodium_cyanide_g_per_L", f"{strength.min():g} g/L", "0 g/L or more", ""
        )
    henry = henry_mol_per_L_atm
    if henry is None:
        henry = read_table("henry_constants").first("species", "HCN").number("henry_mol_per_L_atm")
    dissolved = strength / molar_mass("NaCN") * hcn_share(pH)
    return np.asarray(1e6 * dissolved / henry)


def check_pH(pH: ArrayLike) -> NDArray[np.float64]:
    """Return pH as an array.

    Parameters
    ----------
    pH : array_like, shape B

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If one is not finite or lies outside 0 to 14.
    """
    acidity = np.asarray(pH, dtype=np.float64)
    if not np.all((acidity >= 0.0) & (acidity <= 14.0)):
        raise argument_error(
            "pH",
            f"{acidity.min():g} to {acidity.max():g}",
            "0 to 14",
            "give acid below pH 0 in g/L",
        )
    return acidity


def _constant(row: Row) -> StabilityConstant:
    return StabilityConstant(
        row.text("species"),
        row.text("ion"),
        row.text("ligand"),
        int(row.number("ligands")),
        row.number("log10_beta"),
        row.number_or_none("dH_kJ_per_mol"),
        row.text("source"),
        row.text("status"),
        row.text("note"),
    )
