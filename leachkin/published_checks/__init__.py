"""Published values and facts of the trade, recomputed by this program's own functions."""

from __future__ import annotations

from leachkin.published_checks.cases import Case, read_cases
from leachkin.published_checks.runner import CheckOutcome, check, outcomes_table, verify

__all__ = ["Case", "CheckOutcome", "check", "outcomes_table", "read_cases", "verify"]
