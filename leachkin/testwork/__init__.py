"""Testwork: sheets become tests, metal balances and observed values."""

from leachkin.testwork.records import (
    AliquotPolicy,
    Assays,
    Head,
    History,
    MetalBalance,
    Observed,
    Product,
    Test,
)
from leachkin.testwork.sizes import SizeDistribution

__all__ = [
    "AliquotPolicy",
    "Assays",
    "Head",
    "History",
    "MetalBalance",
    "Observed",
    "Product",
    "SizeDistribution",
    "Test",
]
