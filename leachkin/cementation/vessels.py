"""Vessels for a target barren: launder, packed or moving bed, stirred tanks, dust with a filter."""

from __future__ import annotations

import numpy as np

from leachkin.cementation.charge import METAL_DENSITY_kg_per_m3, piece_area_m2_per_kg
from leachkin.cementation.middle import middle
from leachkin.cementation.rate_law import CementationLaw
from leachkin.cementation.result import CementationDemand
from leachkin.cementation.vessel_parts import (
    S_PER_H,
    CementationVessel,
    Rate,
    VesselTask,
    check_above_zero,
    check_voids,
    kelvin_of,
    plug_contact_h,
    target_ion,
    vessel_of,
    vessel_rate,
    vessel_task,
)
from leachkin.chemistry import packed_bed, suspended_dust
from leachkin.problems import argument_error

VESSEL_KINDS = ("launder", "packed bed", "moving bed", "stirred tanks", "dust and filter")


def launder(
    demand: CementationDemand,
    rate: Rate,
    *,
    width_m: float,
    depth_m: float,
    area_m2_per_m3: float,
    voids: float,
    piece_thickness_mm: float | None = None,
    metal: str | None = None,
    temperature_K: float | None = None,
) -> CementationVessel:
    """Return a launder of scrap in plug flow for the barren of a demand.

    Parameters
    ----------
    demand : CementationDemand
        With a flow; its barren is the target.
    rate : CementationLaw or float
        A fitted law, or a transfer coefficient [m/s].
    width_m, depth_m : float
        Of the liquor.
    area_m2_per_m3 : float
        Surface of scrap over the volume of the launder.
    voids : float
        Share of the launder that is liquor, above 0 to 1.
    piece_thickness_mm : float, optional
        Of sheet scrap, for the charge.
    metal : str, optional
        The first one that is put out where left out.
    temperature_K : float, optional
        Of the liquor, for a law with an activation energy.

    Returns
    -------
    CementationVessel

    Raises
    ------
    InputProblems
        If there is no flow, a number has no meaning, or the barren cannot be reached.
    """
    task = vessel_task(demand, metal)
    check_above_zero(width_m=width_m, depth_m=depth_m, area_m2_per_m3=area_m2_per_m3)
    check_voids(voids)
    per_liquor = area_m2_per_m3 / voids
    found = vessel_rate(rate, per_liquor, temperature_K)
    contact = plug_contact_h(task, found)
    liquor = task.flow * contact
    volume = liquor / voids
    area = area_m2_per_m3 * volume
    charge = None
    if piece_thickness_mm is not None:
        charge = area / piece_area_m2_per_kg(demand.precipitant.metal, piece_thickness_mm)
    return vessel_of(
        task, "launder", found, contact, liquor, volume, area=area,
        length_m=volume / (width_m * depth_m), charge_kg=charge,
    )  # fmt: skip


def bed(
    demand: CementationDemand,
    rate: Rate | None = None,
    *,
    piece_mm: float,
    cross_section_m2: float,
    voids: float,
    moving: bool = False,
    turning_factor: float = 1.0,
    metal: str | None = None,
    temperature_K: float | None = None,
) -> CementationVessel:
    """Return a packed bed, or a moving one (drum, cone), in plug flow for the barren of a demand.

    Parameters
    ----------
    demand : CementationDemand
    rate : CementationLaw or float, optional
        Without it the coefficient comes from the correlation of packed beds, at the flow over the
        cross-section.
    piece_mm : float
        Size of the pieces, taken as spheres of this diameter.
    cross_section_m2 : float
    voids : float
    moving : bool
        A drum or a cone.
    turning_factor : float
        What moving the bed makes of the coefficient, from a test of it; 1 for none.
    metal, temperature_K
        As in :func:`launder`.

    Returns
    -------
    CementationVessel

    Raises
    ------
    InputProblems
        As :func:`launder`.
    """
    task = vessel_task(demand, metal)
    check_above_zero(
        piece_mm=piece_mm, cross_section_m2=cross_section_m2, turning_factor=turning_factor
    )
    check_voids(voids)
    size = piece_mm / 1e3
    per_bed = 6.0 * (1.0 - voids) / size
    velocity = task.flow / cross_section_m2 / S_PER_H
    transfer = None
    if rate is None:
        transfer = packed_bed(
            velocity, size, voids, target_ion(task), kelvin_of(task, temperature_K)
        )
        rate = float(transfer.k_m_per_s)
    found = vessel_rate(rate, per_bed / voids, temperature_K, transfer, turning_factor)
    contact = plug_contact_h(task, found)
    liquor = task.flow * contact
    volume = liquor / voids
    density = METAL_DENSITY_kg_per_m3[demand.precipitant.metal]
    return vessel_of(
        task, "moving bed" if moving else "packed bed", found, contact, liquor, volume,
        area=per_bed * volume, length_m=volume / cross_section_m2,
        charge_kg=(1.0 - voids) * volume * density,
    )  # fmt: skip


def stirred_tanks(
    demand: CementationDemand,
    rate: Rate,
    *,
    tanks: int = 1,
    area_m2_per_m3: float | None = None,
    piece_thickness_mm: float | None = None,
    metal: str | None = None,
    temperature_K: float | None = None,
) -> CementationVessel:
    """Return equal ideally mixed tanks for the barren of a demand.

    Parameters
    ----------
    demand : CementationDemand
    rate : CementationLaw or float
        First order only: other laws depend on the age of a surface that mixing makes one.
    tanks : int
    area_m2_per_m3 : float, optional
        Surface over the volume of liquor; needed for a coefficient in m/s.
    piece_thickness_mm : float, optional
    metal, temperature_K
        As in :func:`launder`.

    Returns
    -------
    CementationVessel

    Raises
    ------
    InputProblems
        As :func:`launder`, and for a law that is not first order.
    """
    task = vessel_task(demand, metal)
    if tanks < 1:
        raise argument_error("tanks", f"{tanks}", "1 or more")
    if isinstance(rate, CementationLaw) and rate.name != "first_order":
        raise argument_error(
            "rate",
            f"{rate.name} in a mixed tank",
            "first_order",
            "take a vessel in plug flow, or fit first_order to the early readings",
        )
    found = vessel_rate(rate, area_m2_per_m3, temperature_K)
    each = (task.share ** (-1.0 / tanks) - 1.0) / found.per_h
    contact = tanks * each
    liquor = task.flow * contact
    area = None if area_m2_per_m3 is None else area_m2_per_m3 * liquor
    charge = None
    if area is not None and piece_thickness_mm is not None:
        charge = area / piece_area_m2_per_kg(demand.precipitant.metal, piece_thickness_mm)
    return vessel_of(
        task, "stirred tanks", found, contact, liquor, liquor, area=area, tanks=tanks,
        charge_kg=charge,
    )  # fmt: skip


def dust_and_filter(
    demand: CementationDemand,
    *,
    grain_um: float,
    pipe_contact_s: float,
    cake_voids: float,
    filter_m2: float | None = None,
    excess_g_per_m3: float = 0.0,
    rate: float | None = None,
    metal: str | None = None,
    temperature_K: float | None = None,
) -> CementationVessel:
    """Return dust in a pipe, and the cake of the filter behind it, for the barren of a demand.

    Parameters
    ----------
    demand : CementationDemand
        Its dust as received, with the excess, is what is dosed.
    grain_um : float
        Diameter of the grains.
    pipe_contact_s : float
        From the dosing point to the filter.
    cake_voids : float
    filter_m2 : float, optional
        Area of the filter, for the depth and the age of the cake.
    excess_g_per_m3 : float
        Dust beside what is used up, that the cake holds.
    rate : float, optional
        Transfer coefficient [m/s]; that of falling grains where left out.
    metal, temperature_K
        As in :func:`launder`.

    Returns
    -------
    CementationVessel
        ``contact_h`` is that in the pipe; ``area_m2`` is the dust in the pipe and in the cake that
        the barren needs; the notes say what each of the two takes out.

    Raises
    ------
    InputProblems
        As :func:`launder`, and where there is no dust to dose.
    """
    task = vessel_task(demand, metal)
    check_above_zero(grain_um=grain_um, pipe_contact_s=pipe_contact_s)
    check_voids(cake_voids)
    size, kelvin = grain_um / 1e6, kelvin_of(task, temperature_K)
    density = METAL_DENSITY_kg_per_m3[demand.precipitant.metal]
    transfer = None
    if rate is None:
        transfer = suspended_dust(size, density, target_ion(task), kelvin)
        rate = float(transfer.k_m_per_s)
    dose = _dose_kg_per_m3(demand) + excess_g_per_m3 / 1e3
    if dose <= 0.0:
        raise argument_error("demand", "no dust to dose", "a demand above 0")
    per_kg = 6.0 / (density * size)
    per_liquor = per_kg * _mean_area_kg(dose, middle(demand.net_kg_per_m3))
    found = vessel_rate(rate, per_liquor, None, transfer)
    in_pipe = float(np.exp(-found.per_h * pipe_contact_s / S_PER_H))
    pipe_m3 = task.flow * pipe_contact_s / S_PER_H
    cake_m2, depth, notes = _cake(task, rate, in_pipe, per_kg, density, cake_voids, filter_m2)
    taken = max(1.0 - in_pipe, 0.0)
    notes = (f"the pipe takes out {100 * taken:.3g} % of the {task.metal}", *notes)
    return vessel_of(
        task, "dust and filter", found, pipe_contact_s / S_PER_H, pipe_m3,
        pipe_m3 + (depth * filter_m2 if depth is not None and filter_m2 is not None else 0.0),
        area=per_liquor * pipe_m3 + cake_m2, length_m=depth, charge_kg=cake_m2 / per_kg,
        notes=notes,
    )  # fmt: skip


def _cake(
    task: VesselTask,
    k_m_per_s: float,
    left_by_pipe: float,
    area_per_kg: float,
    density: float,
    voids: float,
    filter_m2: float | None,
) -> tuple[float, float | None, tuple[str, ...]]:
    """Area of dust in the cake that does the rest, its depth, and what to say of it."""
    rest = left_by_pipe / task.share
    if rest <= 1.0:
        return 0.0, None, ("the pipe alone reaches the barren; the cake is a reserve",)
    area = task.flow / S_PER_H * float(np.log(rest)) / k_m_per_s
    mass = area / area_per_kg
    note = f"the cake has to hold {mass:.3g} kg of working dust for the rest"
    if filter_m2 is None:
        return area, None, (note,)
    check_above_zero(filter_m2=filter_m2)
    return area, mass / (density * (1.0 - voids)) / filter_m2, (note,)


def _dose_kg_per_m3(demand: CementationDemand) -> float:
    received = demand.received_kg_per_m3
    return middle(demand.net_kg_per_m3 if received is None else received)


def _mean_area_kg(dose: float, used: float) -> float:
    """Dust that would show the mean area of a dose of which a part is used up."""
    left = max(1.0 - used / dose, 0.0)
    return float(dose * 0.5 * (1.0 + left ** (2.0 / 3.0)))
