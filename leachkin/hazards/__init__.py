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

__all__ = [
    "GENERAL_CAUTION",
    "RULES",
    "Caution",
    "Facts",
    "carbon_dioxide_L",
    "cautions",
    "cautions_table",
    "common_rule",
    "facts_with_cementation",
    "limit_value",
    "limits_of",
]
