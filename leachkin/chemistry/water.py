"""Water at 1 atm: density, viscosity, relative permittivity, and where each formula ends."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.constants import STANDARD_TEMPERATURE_K, ZERO_CELSIUS_K

Array = NDArray[np.float64]

#: Range in which each formula was fitted [degC]; density is carried on to 60 degC, where it
#: still agrees with steam tables to 0.003 %.
DENSITY_RANGE_degC = (0.0, 60.0)
VISCOSITY_RANGE_degC = (5.0, 100.0)
PERMITTIVITY_RANGE_degC = (0.0, 100.0)

_VISCOSITY_AT_20_degC_Pa_s = 1.0020e-3


def water_density_kg_per_m3(temperature_K: ArrayLike = STANDARD_TEMPERATURE_K) -> Array:
    """Return the density of air-free water at 1 atm [kg/m3].

    Parameters
    ----------
    temperature_K : array_like, shape B
        0 to 60 degC.

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If a temperature lies outside 250 to 650 K.

    Notes
    -----
    ``a5 (1 - (t + a1)^2 (t + a2) / (a3 (t + a4)))`` [tanaka2001]. Liquors of high strength are
    denser: give their density where it matters.

    Examples
    --------
    >>> round(float(water_density_kg_per_m3(298.15)), 2)
    997.05
    """
    t = check_temperature(temperature_K) - ZERO_CELSIUS_K
    shrink = (t - 3.983035) ** 2 * (t + 301.797) / (522528.9 * (t + 69.34881))
    return np.asarray(999.974950 * (1.0 - shrink))


def water_viscosity_Pa_s(temperature_K: ArrayLike = STANDARD_TEMPERATURE_K) -> Array:
    """Return the viscosity of water at 1 atm [Pa s].

    Parameters
    ----------
    temperature_K : array_like, shape B
        5 to 100 degC.

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If a temperature lies outside 250 to 650 K.

    Notes
    -----
    ``log10(eta / eta_20) = (1.1709 (20 - t) - 0.001827 (t - 20)^2) / (t + 89.93)`` [korson1969].

    Examples
    --------
    >>> round(1e3 * float(water_viscosity_Pa_s(298.15)), 4)
    0.8903
    """
    t = check_temperature(temperature_K) - ZERO_CELSIUS_K
    exponent = (1.1709 * (20.0 - t) - 0.001827 * (t - 20.0) ** 2) / (t + 89.93)
    return np.asarray(_VISCOSITY_AT_20_degC_Pa_s * 10.0**exponent)


def water_kinematic_viscosity_m2_per_s(temperature_K: ArrayLike = STANDARD_TEMPERATURE_K) -> Array:
    """Return viscosity over density of water [m2/s]; arguments as :func:`water_viscosity_Pa_s`."""
    return np.asarray(water_viscosity_Pa_s(temperature_K) / water_density_kg_per_m3(temperature_K))


def water_relative_permittivity(temperature_K: ArrayLike = STANDARD_TEMPERATURE_K) -> Array:
    """Return the relative permittivity of water at 1 atm.

    Parameters
    ----------
    temperature_K : array_like, shape B
        0 to 100 degC.

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If a temperature lies outside 250 to 650 K.

    Notes
    -----
    A cubic in temperature [malmberg1956].

    Examples
    --------
    >>> round(float(water_relative_permittivity(298.15)), 2)
    78.3
    """
    t = check_temperature(temperature_K) - ZERO_CELSIUS_K
    return np.asarray(87.740 - 0.40008 * t + 9.398e-4 * t**2 - 1.410e-6 * t**3)
