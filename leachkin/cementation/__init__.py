"""Cementation: what a precipitant does to a solution, and how much of it that takes."""

from leachkin.cementation.demand import STOICHIOMETRIES, cementation_demand
from leachkin.cementation.feasibility import Feasibility, feasibility, feasibility_table
from leachkin.cementation.law import as_received, net_demand, taken_by_recovery, water_demand
from leachkin.cementation.result import CementationDemand, SinkLine
from leachkin.cementation.solution import Precipitant, Solution, metal_couples

__all__ = [
    "STOICHIOMETRIES",
    "CementationDemand",
    "Feasibility",
    "Precipitant",
    "SinkLine",
    "Solution",
    "as_received",
    "cementation_demand",
    "feasibility",
    "feasibility_table",
    "metal_couples",
    "net_demand",
    "taken_by_recovery",
    "water_demand",
]
