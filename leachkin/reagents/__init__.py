"""Reagents: consumption by sink and the budget that is made of it."""

from leachkin.reagents.budget import Basis, Budget, BudgetRow, reagent_budget
from leachkin.reagents.consumption import (
    CYANIDE_USES,
    acid_lines,
    acid_per_metal,
    cementation_lines,
    cyanide_kg_per_t,
    gangue_acid_kg_per_t,
)
from leachkin.reagents.law import band, received_kg_per_t, t_per_month
from leachkin.reagents.lines import DRIVERS, KILOGRAMS_PER, BudgetLine, Product
from leachkin.reagents.tables import (
    basis_table,
    budget_tables,
    incomplete_table,
    lines_table,
    reagent_table,
    sink_table,
    total_table,
    unit_consumption_table,
)

__all__ = [
    "CYANIDE_USES",
    "DRIVERS",
    "KILOGRAMS_PER",
    "Basis",
    "Budget",
    "BudgetLine",
    "BudgetRow",
    "Product",
    "acid_lines",
    "acid_per_metal",
    "band",
    "basis_table",
    "budget_tables",
    "cementation_lines",
    "cyanide_kg_per_t",
    "gangue_acid_kg_per_t",
    "incomplete_table",
    "lines_table",
    "reagent_budget",
    "reagent_table",
    "received_kg_per_t",
    "sink_table",
    "t_per_month",
    "total_table",
    "unit_consumption_table",
]
