"""Mass transfer to metal in a liquor: disc, cylinder, plate, packed bed, suspended dust.

Every correlation has the form ``Sh = constant + coefficient Re^a Sc^b``, and stands in a table with
its source and its range.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.diffusion import diffusion_coefficient_m2_per_s
from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.chemistry.water import water_density_kg_per_m3, water_kinematic_viscosity_m2_per_s
from leachkin.constants import (
    STANDARD_TEMPERATURE_K,
    GAS_CONSTANT_J_per_mol_K,
    GRAVITY_m_per_s2,
)
from leachkin.problems import argument_error
from leachkin.tables import Row, read_table

Array = NDArray[np.float64]

#: Plates turn turbulent here.
PLATE_TURNS_TURBULENT = 5e5
#: Beds flow slowly below this Reynolds number, where the correlation of slow beds serves.
SLOW_BED_REYNOLDS = 55.0


@dataclass(frozen=True)
class Transfer:
    """A mass-transfer coefficient with what it rests on.

    Attributes
    ----------
    k_m_per_s : ndarray, shape B
    reynolds, schmidt, sherwood : ndarray, shape B
    correlation, source, status : str
    outside : tuple of str
        Where Reynolds or Schmidt number leave the range of the correlation.
    """

    k_m_per_s: Array
    reynolds: Array
    schmidt: Array
    sherwood: Array
    correlation: str
    source: str
    status: str
    outside: tuple[str, ...] = ()


def rotating_disc(
    rotation_rpm: ArrayLike,
    radius_m: ArrayLike,
    species: str = "Cu2+",
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> Transfer:
    """Return transfer to a rotating disc [levich1962], laminar.

    Parameters
    ----------
    rotation_rpm, radius_m, temperature_K : array_like, shape B
    species : str

    Returns
    -------
    Transfer
        ``k = 0.62 D^(2/3) nu^(-1/6) w^(1/2)``.

    Raises
    ------
    InputProblems
        If a number is not above 0 or the species is unknown.

    Examples
    --------
    >>> round(1e5 * float(rotating_disc(400.0, 0.01).k_m_per_s), 2)
    3.27
    """
    radius = _positive("radius_m", radius_m)
    speed = 2.0 * np.pi * _positive("rotation_rpm", rotation_rpm) / 60.0 * radius
    return _transfer("rotating disc", speed, radius, species, temperature_K)


def rotating_cylinder(
    rotation_rpm: ArrayLike,
    diameter_m: ArrayLike,
    species: str = "Cu2+",
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> Transfer:
    """Return transfer to a rotating cylinder [eisenberg1954], turbulent; coefficients from memory.

    Parameters, errors and result as :func:`rotating_disc`; ``St = 0.0791 Re^-0.3 Sc^-0.644``.
    """
    diameter = _positive("diameter_m", diameter_m)
    speed = np.pi * diameter * _positive("rotation_rpm", rotation_rpm) / 60.0
    return _transfer("rotating cylinder", speed, diameter, species, temperature_K)


def flat_plate(
    velocity_m_per_s: ArrayLike,
    length_m: ArrayLike,
    species: str = "Cu2+",
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> Transfer:
    """Return the mean transfer to a plate along the flow [schlichting1979].

    Laminar below a Reynolds number of 500,000, turbulent above; parameters of one batch share the
    regime of their median.
    """
    length = _positive("length_m", length_m)
    speed = _positive("velocity_m_per_s", velocity_m_per_s)
    reynolds = speed * length / water_kinematic_viscosity_m2_per_s(temperature_K)
    turbulent = float(np.median(reynolds)) > PLATE_TURNS_TURBULENT
    name = "flat plate turbulent" if turbulent else "flat plate laminar"
    return _transfer(name, speed, length, species, temperature_K)


def packed_bed(
    velocity_m_per_s: ArrayLike,
    piece_diameter_m: ArrayLike,
    voids: float = 0.4,
    species: str = "Cu2+",
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> Transfer:
    """Return transfer in a bed of pieces by the velocity in the empty vessel.

    Parameters
    ----------
    velocity_m_per_s, piece_diameter_m, temperature_K : array_like, shape B
    voids : float
        Share of the bed that is liquid, above 0 to below 1; used where the flow is slow.
    species : str

    Returns
    -------
    Transfer
        Slow beds in liquids [wilson1966] up to a Reynolds number of 55, then [wakao1978].

    Raises
    ------
    InputProblems
        If a number has no meaning or the species is unknown.
    """
    if not 0.0 < voids < 1.0:
        raise argument_error("voids", f"{voids}", "above 0 and below 1", "0.4 for close pieces")
    size = _positive("piece_diameter_m", piece_diameter_m)
    speed = _positive("velocity_m_per_s", velocity_m_per_s)
    reynolds = speed * size / water_kinematic_viscosity_m2_per_s(temperature_K)
    if float(np.median(reynolds)) > SLOW_BED_REYNOLDS:
        return _transfer("packed bed", speed, size, species, temperature_K)
    slow = _transfer("packed bed slow", speed, size, species, temperature_K)
    return replace(slow, k_m_per_s=slow.k_m_per_s / voids, sherwood=slow.sherwood / voids)


def suspended_dust(
    grain_diameter_m: ArrayLike,
    metal_density_kg_per_m3: float,
    species: str = "Cu2+",
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
    power_W_per_kg: ArrayLike | None = None,
) -> Transfer:
    """Return transfer to suspended dust.

    Parameters
    ----------
    grain_diameter_m, temperature_K : array_like, shape B
    metal_density_kg_per_m3 : float
        7,140 for zinc, 7,870 for iron.
    species : str
    power_W_per_kg : array_like, optional
        Power of the agitator per mass of liquor; without it the grains fall freely.

    Returns
    -------
    Transfer
        By the falling velocity [ranz1952], or by the power [armenante1989]; never below Sh = 2.

    Raises
    ------
    InputProblems
        If a number is not above 0 or the species is unknown.

    Examples
    --------
    Dust of 6 micrometres: little more than diffusion alone, Sh = 2.

    >>> 2.0 < float(suspended_dust(6e-6, 7140.0).sherwood) < 2.5
    True
    """
    size = _positive("grain_diameter_m", grain_diameter_m)
    viscosity = water_kinematic_viscosity_m2_per_s(temperature_K)
    if power_W_per_kg is None:
        speed = falling_velocity_m_per_s(size, metal_density_kg_per_m3, temperature_K)
        return _transfer("suspended by slip", speed, size, species, temperature_K)
    power = _positive("power_W_per_kg", power_W_per_kg)
    speed = (power * size**4 / viscosity**3) ** (1.0 / 3.0) * viscosity / size
    return _transfer("suspended by power", speed, size, species, temperature_K)


def falling_velocity_m_per_s(
    grain_diameter_m: ArrayLike,
    metal_density_kg_per_m3: float,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> Array:
    """Return the velocity at which a sphere falls in water [m/s].

    Parameters
    ----------
    grain_diameter_m, temperature_K : array_like, shape B
    metal_density_kg_per_m3 : float

    Returns
    -------
    ndarray, shape B
        Stokes' law with the drag of [schiller1933], for Reynolds numbers up to 800.

    Raises
    ------
    InputProblems
        If a number is not above 0.

    Examples
    --------
    Ten micrometres of zinc, by Stokes' law alone 0.375 mm/s:

    >>> round(1e3 * float(falling_velocity_m_per_s(10e-6, 7140.0)), 3)
    0.375
    """
    size = _positive("grain_diameter_m", grain_diameter_m)
    density = water_density_kg_per_m3(temperature_K)
    viscosity = water_kinematic_viscosity_m2_per_s(temperature_K)
    excess = float(_positive("metal_density_kg_per_m3", metal_density_kg_per_m3)) / density - 1.0
    stokes = np.maximum(excess, 0.0) * GRAVITY_m_per_s2 * size**2 / (18.0 * viscosity)
    velocity = np.asarray(stokes)
    for _ in range(100):
        drag = 1.0 + 0.15 * (velocity * size / viscosity) ** 0.687
        velocity = np.sqrt(velocity * stokes / drag)
    return np.asarray(velocity)


def apparent_activation_energy_kJ_per_mol(
    temperature_K: ArrayLike, rate_constant: ArrayLike
) -> float:
    """Return the slope of ln k against 1/T as an activation energy [kJ/mol], equal weights.

    Parameters
    ----------
    temperature_K, rate_constant : array_like, shape (n,)
        Two or more, constants above 0.

    Returns
    -------
    float

    Examples
    --------
    What transport to a disc shows over 10 to 60 degC:

    >>> kelvin = np.arange(10.0, 61.0, 5.0) + 273.15
    >>> k = rotating_disc(400.0, 0.01, temperature_K=kelvin).k_m_per_s
    >>> round(apparent_activation_energy_kJ_per_mol(kelvin, k), 2)
    15.05
    """
    inverse = 1.0 / check_temperature(temperature_K)
    ln_k = np.log(_positive("rate_constant", rate_constant))
    centred = inverse - inverse.mean()
    slope = float((centred @ ln_k) / (centred @ centred))
    return -slope * GAS_CONSTANT_J_per_mol_K / 1e3


def transfer_ratio(
    species: str, reference: str, temperature_K: ArrayLike = STANDARD_TEMPERATURE_K
) -> Array:
    """Return the transfer of a species over that of another at the same flow.

    Parameters
    ----------
    species, reference : str
    temperature_K : array_like, shape B

    Returns
    -------
    ndarray, shape B
        ``(D / D_reference)^(2/3)``, as all correlations of developed flow have it.

    Raises
    ------
    InputProblems
        If a species is unknown.
    """
    ratio = diffusion_coefficient_m2_per_s(species, temperature_K) / diffusion_coefficient_m2_per_s(
        reference, temperature_K
    )
    return np.asarray(ratio ** (2.0 / 3.0))


def _transfer(
    name: str, speed: Array, length: Array, species: str, temperature_K: ArrayLike
) -> Transfer:
    row = read_table("transport_correlations").first("name", name)
    viscosity = water_kinematic_viscosity_m2_per_s(temperature_K)
    diffusion = diffusion_coefficient_m2_per_s(species, temperature_K)
    reynolds, schmidt = np.asarray(speed * length / viscosity), np.asarray(viscosity / diffusion)
    sherwood = row.number("constant") + row.number("coefficient") * reynolds ** row.number(
        "reynolds_power"
    ) * schmidt ** row.number("schmidt_power")
    return Transfer(
        np.asarray(sherwood * diffusion / length),
        reynolds,
        schmidt,
        np.asarray(sherwood),
        name,
        row.text("source"),
        row.text("status"),
        _outside(row, reynolds, schmidt),
    )


def _outside(row: Row, reynolds: Array, schmidt: Array) -> tuple[str, ...]:
    said = []
    for name, values, key in (
        ("Reynolds", reynolds, "reynolds"),
        ("Schmidt", schmidt, "schmidt"),
    ):
        low, high = row.number_or_none(f"{key}_low"), row.number_or_none(f"{key}_high")
        smallest, largest = float(values.min()), float(values.max())
        if (low is not None and smallest < low) or (high is not None and largest > high):
            ends = f"{low if low is not None else 0:g} to {'any' if high is None else f'{high:g}'}"
            said.append(
                f"{row.text('name')}: {name} number {smallest:.3g} to {largest:.3g} outside {ends}"
            )
    return tuple(said)


def _positive(name: str, values: ArrayLike) -> Array:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array > 0.0)):
        raise argument_error(name, f"{array.min():g}", "above 0", "look at the unit in the name")
    return array
