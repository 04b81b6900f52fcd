"""Activity coefficients of ions by Davies' equation, and where it ends."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.chemistry.water import water_relative_permittivity
from leachkin.constants import (
    ELEMENTARY_CHARGE_C,
    STANDARD_TEMPERATURE_K,
    AVOGADRO_per_mol,
    BOLTZMANN_J_per_K,
    VACUUM_PERMITTIVITY_F_per_m,
)
from leachkin.problems import argument_error

Array = NDArray[np.float64]

#: Ionic strength at which Davies' equation ends; beyond it its value there is held and said so.
DAVIES_ENDS_mol_per_L = 0.5
_DAVIES_LINEAR_TERM = 0.3
_L_PER_m3 = 1e3


def ionic_strength_mol_per_L(concentration_mol_per_L: ArrayLike, charges: ArrayLike) -> Array:
    """Return the ionic strength of a solution [mol/L].

    Parameters
    ----------
    concentration_mol_per_L : array_like, shape B + (s,)
    charges : array_like, shape (s,)

    Returns
    -------
    ndarray, shape B
        ``1/2 sum(z^2 c)``.

    Examples
    --------
    Half a mole of copper sulphate, both ions of charge two:

    >>> float(ionic_strength_mol_per_L([0.5, 0.5], [2, -2]))
    2.0
    """
    charge = np.asarray(charges, dtype=np.float64)
    return np.asarray(0.5 * np.asarray(concentration_mol_per_L, dtype=np.float64) @ charge**2)


def debye_hueckel_A(temperature_K: ArrayLike = STANDARD_TEMPERATURE_K) -> Array:
    """Return the slope of the limiting law of Debye and Hueckel, to base ten [(L/mol)^(1/2)].

    Parameters
    ----------
    temperature_K : array_like, shape B

    Returns
    -------
    ndarray, shape B
        For concentrations in mol/L, from the permittivity of water.

    Examples
    --------
    >>> round(float(debye_hueckel_A(298.15)), 4)
    0.5116
    """
    temperature = check_temperature(temperature_K)
    per_m3 = AVOGADRO_per_mol * _L_PER_m3
    energy = (
        VACUUM_PERMITTIVITY_F_per_m
        * water_relative_permittivity(temperature)
        * BOLTZMANN_J_per_K
        * temperature
    )
    slope = ELEMENTARY_CHARGE_C**3 * np.sqrt(2.0 * per_m3) / (8.0 * np.pi * energy**1.5)
    return np.asarray(slope / np.log(10.0))


def davies_log10_gamma(
    charge: ArrayLike,
    ionic_strength: ArrayLike,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> Array:
    """Return the logarithm of an ion's activity coefficient.

    Parameters
    ----------
    charge : array_like, shape broadcast with B
    ionic_strength : array_like, shape B
        0 mol/L or more; the value at 0.5 mol/L is held beyond it, where the equation ends.
    temperature_K : array_like, shape B

    Returns
    -------
    ndarray, shape B
        ``-A z^2 (sqrt(I) / (1 + sqrt(I)) - 0.3 I)`` [davies1962].

    Raises
    ------
    InputProblems
        If an ionic strength is negative or not finite.

    Examples
    --------
    >>> round(float(davies_log10_gamma(2, 0.1)), 3)
    -0.43
    """
    strength = np.asarray(ionic_strength, dtype=np.float64)
    if not np.all(np.isfinite(strength) & (strength >= 0.0)):
        raise argument_error("ionic_strength", f"{strength.min():g} mol/L", "0 mol/L or more")
    held = np.minimum(strength, DAVIES_ENDS_mol_per_L)
    root = np.sqrt(held)
    term = root / (1.0 + root) - _DAVIES_LINEAR_TERM * held
    square = np.asarray(charge, dtype=np.float64) ** 2
    return np.asarray(-debye_hueckel_A(temperature_K) * square * term)


def davies_holds(ionic_strength: ArrayLike) -> NDArray[np.bool_]:
    """Return whether an ionic strength lies where Davies' equation holds, shape B."""
    return np.asarray(np.asarray(ionic_strength) <= DAVIES_ENDS_mol_per_L)


def davies_remark(ionic_strength: ArrayLike) -> str:
    """Return a sentence where Davies' equation has ended, "" where it holds."""
    strongest = float(np.max(np.asarray(ionic_strength, dtype=np.float64), initial=0.0))
    if strongest <= DAVIES_ENDS_mol_per_L:
        return ""
    return (
        f"ionic strength {strongest:.2g} mol/L: activities by Davies end at "
        f"{DAVIES_ENDS_mol_per_L:g} mol/L and are held there; potentials of single ions may be off "
        "by tens of millivolts"
    )
