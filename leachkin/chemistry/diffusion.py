"""Diffusion coefficients of ions and oxygen in water, moved in temperature by viscosity."""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.formulas import canonical_species
from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.chemistry.water import water_viscosity_Pa_s
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.errors import InputProblems
from leachkin.problems import unknown_name
from leachkin.tables import Row, read_table

Array = NDArray[np.float64]
_M2_PER_S = 1e-9


def diffusion_coefficient_m2_per_s(
    species: str, temperature_K: ArrayLike = STANDARD_TEMPERATURE_K
) -> Array:
    """Return the diffusion coefficient of a species in water at infinite dilution [m2/s].

    Parameters
    ----------
    species : str
        As ``"Cu2+"``, ``"O2"``, ``"Au(CN)2-"``.
    temperature_K : array_like, shape B

    Returns
    -------
    ndarray, shape B
        ``D_25 (T / 298.15 K) (eta_25 / eta)``: Stokes and Einstein.

    Raises
    ------
    InputProblems
        If the species is unknown (with the nearest names) or the temperature has no meaning.

    Examples
    --------
    >>> float(diffusion_coefficient_m2_per_s("Cu2+"))
    7.14e-10
    """
    temperature = check_temperature(temperature_K)
    moved = temperature / STANDARD_TEMPERATURE_K * water_viscosity_Pa_s(STANDARD_TEMPERATURE_K)
    at_25 = diffusion_row(species).number("D_1e9_m2_per_s") * _M2_PER_S
    return np.asarray(at_25 * moved / water_viscosity_Pa_s(temperature))


def diffusion_row(species: str) -> Row:
    """Return the row of the table: value, range, source and status.

    Raises
    ------
    InputProblems
        If the species is unknown; the nearest are named.
    """
    rows = _rows()
    name = canonical_species(species)
    if name not in rows:
        raise InputProblems([unknown_name("diffusing species", species, rows, column="species")])
    return rows[name]


@cache
def _rows() -> dict[str, Row]:
    return {row.text("species"): row for row in read_table("diffusion_coefficients").rows}
