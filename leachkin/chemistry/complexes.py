"""Potentials at actual activities: complexes at the free ligand that is there, and the spread."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.cyanide import stability_constants
from leachkin.chemistry.formulas import charge_of
from leachkin.chemistry.potentials import (
    Potential,
    PotentialSpread,
    complex_potential,
    potentials_of,
)
from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.constants import (
    STANDARD_TEMPERATURE_K,
    FARADAY_C_per_mol,
    GAS_CONSTANT_J_per_mol_K,
)
from leachkin.problems import argument_error

Array = NDArray[np.float64]


@dataclass(frozen=True)
class PotentialRange:
    """A potential with what the sources make of it.

    Attributes
    ----------
    couple : str
    value_V : ndarray, shape B
        By the default source.
    low_V, high_V : ndarray, shape B
        Over every usable source of the bare ion and every stability constant.
    sources : tuple of str
    notes : tuple of str
    """

    couple: str
    value_V: Array
    low_V: Array
    high_V: Array
    sources: tuple[str, ...]
    notes: tuple[str, ...] = ()


def potential_range(
    couple: str,
    oxidised_activity: ArrayLike = 1.0,
    reduced_activity: ArrayLike = 1.0,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> PotentialRange:
    """Return the potential of a couple at given activities, with the range over its sources.

    Parameters
    ----------
    couple : str
        As in :func:`standard_potential`; of a complex at 1 mol/L of free ligand.
    oxidised_activity, reduced_activity : array_like, shape B
        Above 0; a metal has activity 1.
    temperature_K : array_like, shape B

    Returns
    -------
    PotentialRange

    Raises
    ------
    InputProblems
        If the couple is unknown or an activity is not above 0.

    Examples
    --------
    >>> copper = potential_range("Cu2+/Cu", 0.01)
    >>> round(float(copper.value_V), 4)
    0.2802
    """
    spread = potentials_of(couple)
    temperature = check_temperature(temperature_K)
    quotient = _positive("oxidised_activity", oxidised_activity) / _positive(
        "reduced_activity", reduced_activity
    )
    shift = _slope_V(temperature, spread.default.electrons) * np.log(quotient)
    usable = [_at(row, temperature) + shift for row in spread.rows if row.usable]
    return _range(spread, usable, _held(spread, temperature))


def complexed_potential(
    couple: str,
    complex_activity: ArrayLike,
    free_ligand_activity: ArrayLike,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> PotentialRange:
    """Return the potential of a complex at the free ligand that is there, with its spread.

    Parameters
    ----------
    couple : str
        As ``"Ag(CN)2-/Ag"``; its bare ion and stability constants must be held.
    complex_activity, free_ligand_activity : array_like, shape B
        Above 0 [mol/L].
    temperature_K : array_like, shape B

    Returns
    -------
    PotentialRange
        By the bare ion and its constant, or by a printed potential of the complex where the
        constant is from memory; the range is over every source of both. A printed potential that
        the constants contradict takes no part.

    Raises
    ------
    InputProblems
        If no constant is held for the complex, or an activity is not above 0.

    Notes
    -----
    ``E = E0(ion) - R T ln(beta) / (n F) + R T / (n F) ln(a_complex / a_ligand^p)``.

    Examples
    --------
    >>> round(float(complexed_potential("Ag(CN)2-/Ag", 1.0, 1.0).value_V), 2)
    -0.41
    >>> round(float(complexed_potential("Ag(CN)2-/Ag", 1e-4, 0.01).value_V), 2)
    -0.41
    """
    spread = potentials_of(couple)
    species, metal = spread.couple.split("/")
    constants = [one for one in stability_constants(species) if one.ion != "H+"]
    if not constants:
        raise argument_error(
            "couple", f"{couple}, a couple without stability constants", "a complex of the tables"
        )
    temperature = check_temperature(temperature_K)
    held = _positive("complex_activity", complex_activity)
    ligand = _positive("free_ligand_activity", free_ligand_activity)
    bare = potentials_of(f"{constants[0].ion}/{metal}")
    ln_quotient = np.log(held) - constants[0].ligands * np.log(ligand)
    shift = _slope_V(temperature, bare.default.electrons) * ln_quotient
    derived = [
        complex_potential(ion, constant)
        for ion in bare.rows
        if ion.usable
        for constant in constants
    ]
    tabulated = [row for row in spread.rows if row.usable and " by " not in row.note]
    rows = sorted([*derived, *tabulated], key=lambda row: row.status == "from memory")
    values = [_at(row, temperature) + shift for row in rows]
    found = PotentialSpread(spread.couple, tuple(rows))
    return _range(found, values, _held(found, temperature))


def electrons_of(couple: str) -> int:
    """Return the electrons of a couple as written."""
    return potentials_of(couple).default.electrons


def ion_of(couple: str) -> str:
    """Return the oxidised species of a couple, without what stands beside it."""
    return potentials_of(couple).couple.split("/")[0].split(",")[0]


def is_complex(couple: str) -> bool:
    """Return whether the tables hold stability constants for the oxidised species of a couple."""
    return any(one.ion != "H+" for one in stability_constants(ion_of(couple)))


def is_metal_couple(couple: str) -> bool:
    """Return whether the reduced side is a metal."""
    reduced = potentials_of(couple).couple.split("/")[1]
    return charge_of(reduced) == 0 and reduced.isalpha() and len(reduced) <= 2


def _at(row: Potential, temperature: Array) -> Array:
    slope = 0.0 if row.dE0_dT_mV_per_K is None else 1e-3 * row.dE0_dT_mV_per_K
    return np.asarray(row.E0_V + slope * (temperature - STANDARD_TEMPERATURE_K))


def _held(spread: PotentialSpread, temperature: Array) -> tuple[str, ...]:
    if np.all(temperature == STANDARD_TEMPERATURE_K):
        return ()
    if spread.default.dE0_dT_mV_per_K is not None:
        return ()
    return (
        f"{spread.couple} held at its value for 298.15 K: {spread.default.source} gives no "
        "temperature coefficient",
    )


def _range(spread: PotentialSpread, usable: list[Array], notes: tuple[str, ...]) -> PotentialRange:
    stacked = np.stack(np.broadcast_arrays(*usable))
    return PotentialRange(
        spread.couple,
        np.asarray(stacked[0]),
        np.asarray(stacked.min(axis=0)),
        np.asarray(stacked.max(axis=0)),
        tuple(dict.fromkeys(row.source for row in spread.rows if row.usable)),
        notes,
    )


def _slope_V(temperature: Array, electrons: int) -> Array:
    return np.asarray(GAS_CONSTANT_J_per_mol_K * temperature / (electrons * FARADAY_C_per_mol))


def _positive(name: str, values: ArrayLike) -> Array:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array > 0.0)):
        raise argument_error(name, f"{array.min():g}", "above 0", "what is absent has no potential")
    return array
