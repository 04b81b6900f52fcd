"""Questions a liquor raises: free cyanide of a total, pH of an acid, ferric iron at a pH."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.aqueous_constants import (
    log10_beta_at,
    log10_water_product,
    solubility_products,
    species_of,
)
from leachkin.chemistry.cyanide import check_pH
from leachkin.chemistry.formulas import molar_mass
from leachkin.chemistry.speciation import Speciation, speciate
from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name

Array = NDArray[np.float64]

#: Ion that each metal of a cyanide solution is counted as.
CYANIDE_IONS = {"Cu": "Cu+", "Ag": "Ag+", "Au": "Au+", "Zn": "Zn2+", "Cd": "Cd2+", "Ni": "Ni2+"}


@dataclass(frozen=True)
class FreeCyanide:
    """Cyanide of a solution, parted.

    Attributes
    ----------
    free_g_per_L : ndarray, shape B
        CN- and HCN together, as CN: what a titration calls free.
    cyanide_ion_mol_per_L : ndarray, shape B
    hcn_share : ndarray, shape B
        Of the free cyanide.
    bound_g_per_L : ndarray, shape B
        In complexes, as CN.
    speciation : Speciation
    """

    free_g_per_L: Array
    cyanide_ion_mol_per_L: Array
    hcn_share: Array
    bound_g_per_L: Array
    speciation: Speciation


def free_cyanide(
    total_cyanide_g_per_L: ArrayLike,
    metals_g_per_L: Mapping[str, ArrayLike],
    pH: ArrayLike,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
    *,
    constants: Mapping[str, float] | None = None,
) -> FreeCyanide:
    """Return the free cyanide of a solution from all its cyanide and its metals.

    Parameters
    ----------
    total_cyanide_g_per_L : array_like, shape B
        Free and in complexes of these metals, as CN; iron cyanides not counted.
    metals_g_per_L : mapping of str to array_like
        Cu, Ag, Au, Zn, Cd, Ni.
    pH, temperature_K : array_like, shape B
    constants : mapping of str to float, optional
        As in :func:`speciate`.

    Returns
    -------
    FreeCyanide

    Raises
    ------
    InputProblems
        If a metal is unknown, or a number has no meaning.

    Examples
    --------
    >>> found = free_cyanide(0.5, {"Cu": 0.1}, pH=10.5)
    >>> round(float(found.free_g_per_L), 3)
    0.36
    """
    ions = _ions(metals_g_per_L)
    cyanide = _not_negative("total_cyanide_g_per_L", total_cyanide_g_per_L) / molar_mass("CN")
    found = speciate({"CN-": cyanide, **ions}, pH, temperature_K, constants=constants)
    ion, acid = found.of("CN-"), found.of("HCN")
    free = ion + acid
    share = np.divide(acid, free, out=np.zeros_like(acid), where=free > 0.0)
    return FreeCyanide(
        free * molar_mass("CN"), ion, share, (cyanide - free) * molar_mass("CN"), found
    )


def acid_pH(
    acid_g_per_L: ArrayLike,
    other_sulphate_mol_per_L: ArrayLike = 0.0,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> Speciation:
    """Return the species, and with them the pH, of free sulphuric acid in a sulphate liquor.

    Parameters
    ----------
    acid_g_per_L : array_like, shape B
        Free H2SO4.
    other_sulphate_mol_per_L : array_like, shape B
        Sulphate of the metals: it takes up hydrogen as HSO4-.
    temperature_K : array_like, shape B

    Returns
    -------
    Speciation

    Raises
    ------
    InputProblems
        If a number is negative or not finite.

    Examples
    --------
    >>> round(float(acid_pH(5.0).pH), 1)
    1.3
    """
    acid = _not_negative("acid_g_per_L", acid_g_per_L) / molar_mass("H2SO4")
    other = _not_negative("other_sulphate_mol_per_L", other_sulphate_mol_per_L)
    totals = {"H+": 2.0 * acid, "SO4 2-": acid + other}
    # metal ions of charge two stand against their sulphate: the charges that are made up for in
    # the speciation count as ions of charge one, so that half of their strength is added here
    return speciate(totals, None, temperature_K, other_ions_mol_per_L=other)


def sulphuric_species(
    acid_mol_per_L: ArrayLike, other_sulphate_mol_per_L: ArrayLike, ln_K: ArrayLike
) -> tuple[Array, Array, Array]:
    """Return H+, HSO4- and SO4 2- of a sulphuric liquor in closed form [mol/L].

    Parameters
    ----------
    acid_mol_per_L, other_sulphate_mol_per_L : array_like, shape B
        Free acid, and the sulphate of the metals.
    ln_K : array_like, shape B
        Logarithm of ``[H+][SO4 2-]/[HSO4-]`` on concentrations.

    Returns
    -------
    tuple of ndarray, each shape B

    Examples
    --------
    >>> H, HSO4, SO4 = sulphuric_species(0.05, 0.0, np.log(0.01))
    >>> round(float(H * SO4 / HSO4), 12)
    0.01
    """
    acid = np.asarray(acid_mol_per_L, dtype=np.float64)
    other = np.asarray(other_sulphate_mol_per_L, dtype=np.float64)
    half = 0.5 * (3.0 * acid + other + np.exp(ln_K))
    product = 2.0 * acid * (acid + other)
    bisulphate = product / (half + np.sqrt(np.maximum(half * half - product, 0.0)))
    return 2.0 * acid - bisulphate, np.asarray(bisulphate), acid + other - bisulphate


def ferric_limit_g_per_L(
    pH: ArrayLike,
    sulphate_mol_per_L: ArrayLike = 0.0,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> tuple[Array, Array, Array]:
    """Return the ferric iron that a solution holds before hydroxide precipitates [g/L].

    Parameters
    ----------
    pH : array_like, shape B
        0 to 14.
    sulphate_mol_per_L : array_like, shape B
        Free sulphate: its complexes hold more ferric iron.
    temperature_K : array_like, shape B
        The solubility product is that of 25 degC.

    Returns
    -------
    tuple of ndarray, each shape B
        Value, low and high by the range of the solubility product, which is from memory.

    Raises
    ------
    InputProblems
        If a number has no meaning.

    Examples
    --------
    A pH unit takes away most of it:

    >>> value, low, high = ferric_limit_g_per_L([2.0, 3.0])
    >>> bool(value[0] > 100 * value[1]), bool(low[0] < value[0] < high[0])
    (True, True)
    """
    acidity, temperature = check_pH(pH), check_temperature(temperature_K)
    sulphate = _not_negative("sulphate_mol_per_L", sulphate_mol_per_L)
    hydroxide = 10.0 ** (log10_water_product(temperature) + acidity)
    ligands = {"OH-": hydroxide, "SO4 2-": sulphate}
    side = np.ones(np.broadcast_shapes(hydroxide.shape, sulphate.shape))
    for one in species_of(("Fe3+", "SO4 2-")):
        if one.ion == "Fe3+":
            beta = 10.0 ** log10_beta_at(one, temperature)
            side = side + beta * ligands[one.ligand] ** one.ligands
    solid = solubility_products()["Fe(OH)3"][0]
    grams = molar_mass("Fe") * side / hydroxide**solid.ligands
    value, low, high = (
        np.asarray(10.0**log10_Ksp * grams)
        for log10_Ksp in (solid.log10_Ksp, solid.low, solid.high)
    )
    return value, low, high


def _ions(metals: Mapping[str, ArrayLike]) -> dict[str, Array]:
    for metal in metals:
        if metal not in CYANIDE_IONS:
            raise InputProblems(
                [unknown_name("metal", metal, CYANIDE_IONS, column="metals_g_per_L")]
            )
    return {
        CYANIDE_IONS[metal]: _not_negative(f"metals_g_per_L[{metal!r}]", grams) / molar_mass(metal)
        for metal, grams in metals.items()
    }


def _not_negative(name: str, values: ArrayLike) -> Array:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array >= 0.0)):
        raise argument_error(name, f"{array.min():g}", "0 or more", "a code for below limit?")
    return array
