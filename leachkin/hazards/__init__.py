"""Hazards: cautions raised by the data, each with its number, limit, source and who decides."""

from leachkin.hazards.caution import (
    GENERAL_CAUTION,
    Caution,
    cautions_table,
    common_rule,
    limit_value,
    limits_of,
)
from leachkin.hazards.cautions import RULES, cautions
from leachkin.hazards.facts import Facts, facts_with_cementation
from leachkin.hazards.gas_rules import carbon_dioxide_L
from leachkin.hazards.reagent_rules import ammonia_share, gas_reagents, sulphur_dioxide_share

__all__ = [
    "GENERAL_CAUTION",
    "RULES",
    "Caution",
    "Facts",
    "ammonia_share",
    "carbon_dioxide_L",
    "cautions",
    "cautions_table",
    "common_rule",
    "facts_with_cementation",
    "gas_reagents",
    "limit_value",
    "limits_of",
    "sulphur_dioxide_share",
]
