"""Cementation: what a precipitant does to a solution, how much of it, how fast, in which vessel.

Demand by measured sinks; potentials in order at the activities of a solution; rate laws from tests;
the mixed potential, which explains and ranks sinks; vessels; the barren and the plant's own factor.
"""

from leachkin.cementation.barren import (
    BarrenDrift,
    FactorReconciliation,
    barren_drift,
    reconcile_factor,
)
from leachkin.cementation.charge import (
    DepositGrade,
    METAL_DENSITY_kg_per_m3,
    deposit_grade,
    piece_area_m2_per_kg,
)
from leachkin.cementation.course import MixedCourse, mixed_course
from leachkin.cementation.demand import STOICHIOMETRIES, cementation_demand
from leachkin.cementation.electrode import ElectrodeKinetics, electrode_kinetics
from leachkin.cementation.feasibility import Feasibility, feasibility, feasibility_table
from leachkin.cementation.law import as_received, net_demand, taken_by_recovery, water_demand
from leachkin.cementation.liquor_state import LiquorState, MetalIon, complex_share, liquor_state
from leachkin.cementation.mixed_potential import NO_BUDGET, MixedPotential, mixed_potential
from leachkin.cementation.order import (
    CoupleInSolution,
    SolutionOrder,
    equilibrium_residual_g_per_L,
    solution_order,
)
from leachkin.cementation.rate_fit import fit_cementation, fit_cementation_tests
from leachkin.cementation.rate_law import CementationLaw
from leachkin.cementation.rate_laws import CEMENTATION_LAWS, share_left
from leachkin.cementation.rate_rank import (
    CementationRanking,
    RankedRate,
    rank_cementation,
    rank_cementation_tests,
)
from leachkin.cementation.rate_result import CementationFit, RateResidual
from leachkin.cementation.rate_tests import CementationTest, cementation_test
from leachkin.cementation.result import CementationDemand, SinkLine
from leachkin.cementation.site_fit import SiteBarren, SiteFit, fit_to_barren
from leachkin.cementation.solution import Precipitant, Solution, metal_couples
from leachkin.cementation.vessel_parts import CementationVessel
from leachkin.cementation.vessels import (
    VESSEL_KINDS,
    bed,
    dust_and_filter,
    launder,
    stirred_tanks,
)
from leachkin.cementation.zinc_practice import (
    CyanideWindow,
    LeadSalt,
    air_saturation_mg_per_L,
    cyanide_window,
    deaeration_table,
    lead_salt,
)

__all__ = [
    "CEMENTATION_LAWS",
    "METAL_DENSITY_kg_per_m3",
    "NO_BUDGET",
    "STOICHIOMETRIES",
    "VESSEL_KINDS",
    "BarrenDrift",
    "CementationDemand",
    "CementationFit",
    "CementationLaw",
    "CementationRanking",
    "CementationTest",
    "CementationVessel",
    "CoupleInSolution",
    "CyanideWindow",
    "DepositGrade",
    "ElectrodeKinetics",
    "Feasibility",
    "LeadSalt",
    "LiquorState",
    "MetalIon",
    "MixedCourse",
    "MixedPotential",
    "Precipitant",
    "RankedRate",
    "RateResidual",
    "FactorReconciliation",
    "SinkLine",
    "SiteBarren",
    "SiteFit",
    "Solution",
    "SolutionOrder",
    "air_saturation_mg_per_L",
    "as_received",
    "barren_drift",
    "bed",
    "cementation_demand",
    "cementation_test",
    "complex_share",
    "cyanide_window",
    "deaeration_table",
    "deposit_grade",
    "dust_and_filter",
    "electrode_kinetics",
    "equilibrium_residual_g_per_L",
    "feasibility",
    "feasibility_table",
    "fit_cementation",
    "fit_cementation_tests",
    "fit_to_barren",
    "launder",
    "lead_salt",
    "liquor_state",
    "metal_couples",
    "mixed_course",
    "mixed_potential",
    "net_demand",
    "piece_area_m2_per_kg",
    "rank_cementation",
    "rank_cementation_tests",
    "reconcile_factor",
    "share_left",
    "solution_order",
    "stirred_tanks",
    "taken_by_recovery",
    "water_demand",
]
