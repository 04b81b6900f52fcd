"""The charge of a vessel and what comes out of it: area of scrap, grade of the deposit."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leachkin.cementation.law import as_received
from leachkin.cementation.middle import middle
from leachkin.cementation.result import CementationDemand
from leachkin.problems import argument_error

#: Densities of the metals that are put into solutions, facts of physics [kg/m3].
METAL_DENSITY_kg_per_m3 = {"Fe": 7870.0, "Zn": 7140.0, "Cu": 8960.0}


@dataclass(frozen=True)
class DepositGrade:
    """What leaves a vessel as cement, dry and before it oxidises.

    Attributes
    ----------
    low, high : float
        Share of the metals put out: with all that is bought and does not dissolve, and with the
        fines alone.
    deposit_kg_per_m3 : float
        At the low grade.
    deposit_kg_per_h : float or None
    precipitant_share : float
        Of undissolved precipitant in the deposit at the low grade.
    """

    low: float
    high: float
    deposit_kg_per_m3: float
    deposit_kg_per_h: float | None
    precipitant_share: float


def piece_area_m2_per_kg(metal: str, thickness_mm: float) -> float:
    """Return the area of sheet scrap per mass, both faces [m2/kg].

    Parameters
    ----------
    metal : str
        Fe, Zn or Cu.
    thickness_mm : float

    Returns
    -------
    float
        ``2 / (density thickness)``.

    Raises
    ------
    InputProblems
        If the thickness is not above 0 or the metal is another one.

    Examples
    --------
    >>> round(piece_area_m2_per_kg("Fe", 0.5), 2)
    0.51
    """
    if metal not in METAL_DENSITY_kg_per_m3:
        raise argument_error("metal", metal, ", ".join(METAL_DENSITY_kg_per_m3))
    if not (np.isfinite(thickness_mm) and thickness_mm > 0.0):
        raise argument_error("thickness_mm", f"{thickness_mm:g} mm", "above 0 mm")
    return 2.0 / (METAL_DENSITY_kg_per_m3[metal] * thickness_mm / 1e3)


def deposit_grade(demand: CementationDemand) -> DepositGrade:
    """Return the grade of the deposit of a demand, by what is put out and what stays undissolved.

    Parameters
    ----------
    demand : CementationDemand
        Of draws, the medians.

    Returns
    -------
    DepositGrade
        Without a purity the fines alone count and both ends are one.

    Examples
    --------
    >>> from leachkin.cementation import Precipitant, Solution, cementation_demand
    >>> liquor = Solution({"Cu": 2.0}, ferric_g_per_L=0.5, oxygen_mg_per_L=0.0)
    >>> iron = Precipitant("iron", purity=0.96, fines=0.05)
    >>> found = deposit_grade(
    ...     cementation_demand(liquor, iron, recovery=0.95, acid_taken_g_per_L=0.0)
    ... )
    >>> 0.85 < found.low < found.high < 1.0
    True
    """
    metal, net = middle(demand.metal_kg_per_m3), middle(demand.net_kg_per_m3)
    precipitant = demand.precipitant
    fines = float(as_received(net, 1.0, precipitant.fines)) - net
    lost = fines
    if precipitant.purity is not None:
        share = precipitant.purity * precipitant.metallic
        lost = float(as_received(net, share, precipitant.fines)) - net
    whole = metal + lost
    flow = demand.solution.flow_m3_per_h
    per_h = None if flow is None else whole * middle(flow)
    if whole <= 0.0:
        return DepositGrade(0.0, 0.0, 0.0, per_h, 0.0)
    high = metal / (metal + fines) if metal + fines > 0.0 else 0.0
    return DepositGrade(metal / whole, high, whole, per_h, fines / whole)
