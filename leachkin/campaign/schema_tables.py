"""Every table of the campaign file, in the order of its reference page.

The tables themselves hold every default of the program and why it is so; each default that a run
uses becomes a row of its assumption register.
"""

from __future__ import annotations

from leachkin.campaign.schema import Schema
from leachkin.campaign.schema_bench import (
    ASSUMED,
    CAMPAIGN,
    EXCLUDE,
    FIT,
    GANGUE,
    PRECISION,
    REAGENT_PER_METAL,
    TABLES,
)
from leachkin.campaign.schema_candidates import CANDIDATES
from leachkin.campaign.schema_cementation import MORE_TABLES as CEMENTATION_MORE
from leachkin.campaign.schema_money import (
    BUDGET,
    BUDGET_CONSUMPTION,
    BUDGET_LINES,
    BUDGET_PRICES,
    CEMENTATION,
    CEMENTATION_METALS,
)
from leachkin.campaign.schema_plant import HEAP, TANK, size_tables, solution_table
from leachkin.campaign.schema_print import RATE_LAW, RATE_LAW_ULTIMATE
from leachkin.campaign.schema_sheets import ALL as SHEETS

SCHEMA = Schema(
    (
        CAMPAIGN,
        REAGENT_PER_METAL,
        TABLES,
        *SHEETS,
        PRECISION,
        FIT,
        EXCLUDE,
        ASSUMED,
        CANDIDATES,
        GANGUE,
        RATE_LAW,
        RATE_LAW_ULTIMATE,
        TANK,
        *size_tables("tank"),
        solution_table("tank"),
        HEAP,
        *size_tables("heap"),
        solution_table("heap"),
        CEMENTATION,
        CEMENTATION_METALS,
        *CEMENTATION_MORE,
        BUDGET,
        BUDGET_PRICES,
        BUDGET_CONSUMPTION,
        BUDGET_LINES,
    )
)
