"""Formation constants of aqueous species and solubility products, as the tables hold them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.cyanide import StabilityConstant
from leachkin.chemistry.formulas import charge_of
from leachkin.constants import STANDARD_TEMPERATURE_K, GAS_CONSTANT_J_per_mol_K
from leachkin.errors import InputProblems
from leachkin.problems import unknown_name
from leachkin.tables import Row, read_table

Array = NDArray[np.float64]

_TABLES = ("stability_constants", "hydrolysis_constants")
WATER = "H2O"


@dataclass(frozen=True)
class SolubilityProduct:
    """A solid and what it dissolves to, at 25 degC.

    Attributes
    ----------
    solid, ion, ligand : str
    ligands : int
    log10_Ksp : float
    low, high : float
        Equal to it where the table gives no range.
    source, status, note : str
    """

    solid: str
    ion: str
    ligand: str
    ligands: int
    log10_Ksp: float
    low: float
    high: float
    source: str
    status: str
    note: str


@cache
def formation_constants() -> dict[str, tuple[StabilityConstant, ...]]:
    """Return every constant held by species, the preferred first."""
    found: dict[str, tuple[StabilityConstant, ...]] = {}
    for table in _TABLES:
        for row in read_table(table).rows:
            species = row.text("species")
            found[species] = (*found.get(species, ()), _constant(row))
    return found


@cache
def solubility_products() -> dict[str, tuple[SolubilityProduct, ...]]:
    """Return every solubility product held by solid, the preferred first."""
    found: dict[str, tuple[SolubilityProduct, ...]] = {}
    for row in read_table("solubility_products").rows:
        solid = row.text("solid")
        found[solid] = (*found.get(solid, ()), _product(row))
    return found


def species_of(components: Sequence[str]) -> tuple[StabilityConstant, ...]:
    """Return the preferred constant of every species made of these components, water left out."""
    available = {*components, "H+", "OH-"}
    return tuple(
        constants[0]
        for species, constants in formation_constants().items()
        if species != WATER and constants[0].ion in available and constants[0].ligand in available
    )


def known_components() -> tuple[str, ...]:
    """Return every component that a species or solid of the tables is made of."""
    names: dict[str, None] = {}
    for constants in formation_constants().values():
        names |= dict.fromkeys((constants[0].ion, constants[0].ligand))
    for solids in solubility_products().values():
        names |= dict.fromkeys((solids[0].ion, solids[0].ligand))
    names.pop("OH-", None)
    return tuple(names)


def log10_beta_at(
    constant: StabilityConstant, temperature_K: ArrayLike, given: float | None = None
) -> Array:
    """Return a constant moved from 25 degC by its enthalpy; held where none is known.

    Parameters
    ----------
    constant : StabilityConstant
    temperature_K : array_like, shape B
    given : float, optional
        A value at 25 degC in place of the table's.

    Returns
    -------
    ndarray, shape B
        ``log beta + dH / (R ln 10) (1/298.15 - 1/T)``.
    """
    value = constant.log10_beta if given is None else given
    slope = (constant.dH_kJ_per_mol or 0.0) * 1e3 / (np.log(10.0) * GAS_CONSTANT_J_per_mol_K)
    step = 1.0 / STANDARD_TEMPERATURE_K - 1.0 / np.asarray(temperature_K, dtype=np.float64)
    return np.asarray(value + slope * step)


def log10_water_product(temperature_K: ArrayLike = STANDARD_TEMPERATURE_K) -> Array:
    """Return the logarithm of the ion product of water, -14.0 at 25 degC [nbs1982_crc].

    Examples
    --------
    >>> round(float(log10_water_product()), 1)
    -14.0
    """
    return -log10_beta_at(formation_constants()[WATER][0], temperature_K)


def checked_constants(given: Mapping[str, float] | None) -> dict[str, float]:
    """Return the user's own constants by species.

    Raises
    ------
    InputProblems
        If a species is unknown; the nearest are named.
    """
    known = formation_constants()
    for species in given or {}:
        if species not in known:
            raise InputProblems([unknown_name("species", species, known, column="constants")])
    return dict(given or {})


def charges_of(species: Sequence[str]) -> Array:
    """Return the charges of species, shape (s,)."""
    return np.array([charge_of(name) for name in species], dtype=np.float64)


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


def _product(row: Row) -> SolubilityProduct:
    value = row.number("log10_Ksp")
    low, high = row.number_or_none("low"), row.number_or_none("high")
    return SolubilityProduct(
        row.text("solid"),
        row.text("ion"),
        row.text("ligand"),
        int(row.number("ligands")),
        value,
        value if low is None else low,
        value if high is None else high,
        row.text("source"),
        row.text("status"),
        row.text("note"),
    )
