"""Reagent taken by gangue in each test: what the ore took, less what its metals bound."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.kinetics import GangueReadings
from leachkin.testwork import Test, metal_balance, reagent_use

Array = NDArray[np.float64]
_g_per_kg = 1000.0


def gangue_readings(
    tests: Sequence[Test], domain: str, per_metal_kg_per_kg: Mapping[str, float]
) -> tuple[GangueReadings, ...]:
    """Return the reagent taken by gangue in every titrated test of a domain.

    Parameters
    ----------
    tests : sequence of Test
    domain : str
    per_metal_kg_per_kg : mapping of metal to float
        What each metal binds, taken off.
    """
    found = []
    for test in tests:
        use = reagent_use(test) if test.domain == domain else None
        if use is None:
            continue
        by_gangue = use.taken_kg_per_t - _bound_kg_per_t(test, per_metal_kg_per_kg)
        keep = np.isfinite(by_gangue) & (use.time_h > 0.0)
        if keep.any():
            found.append(
                GangueReadings(test.name, use.time_h[keep], by_gangue[keep], test.temperature_K)
            )
    return tuple(found)


def _bound_kg_per_t(test: Test, per_metal: Mapping[str, float]) -> Array:
    total = np.zeros(len(test.time_h))
    for metal, kg_per_kg in per_metal.items():
        if metal not in test.solution:
            continue
        try:
            dissolved_g = metal_balance(test, metal).dissolved_g
        except InputProblems:
            return np.full(len(test.time_h), np.nan)
        total = total + kg_per_kg * dissolved_g * _g_per_kg / test.solids_g
    return total
