"""The present tests as patterns for further ones: charge, solution, aliquots, times, conditions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.stage_results import KineticsStage
from leachkin.kinetics import Bottle, Candidate
from leachkin.testwork import Observed, SizeDistribution, Test

Array = NDArray[np.float64]
#: Sizes, temperatures, strengths and speeds closer than this, relative, are the same.
SAME = 1e-3
#: Charge, solution and aliquot of a test whose sheet is not there: only its extraction is.
PLAIN = Bottle("", SizeDistribution.single(1.0), 298.15, np.ones(1), 1.0)


@dataclass(frozen=True)
class Pattern:
    """One present test as a pattern.

    Attributes
    ----------
    bottle : Bottle
    stirring_rpm : float or None
    """

    bottle: Bottle
    stirring_rpm: float | None

    @property
    def name(self) -> str:
        """Name of the test."""
        return self.bottle.name

    @property
    def size_mm(self) -> float:
        """Mean size by mass."""
        return self.bottle.sizes.mass_mean_mm

    def candidate(
        self,
        name: str,
        *,
        temperature_K: float | None = None,
        sizes: SizeDistribution | None = None,
        reagent_g_per_L: float | None = None,
        time_h: Array | None = None,
        stirring_rpm: float | None = None,
        repeats: int = 1,
        cost: float | None = None,
        why: str = "",
    ) -> Candidate:
        """Return a candidate like this test but for what is given."""
        own = self.bottle
        bottle = Bottle(
            name,
            own.sizes if sizes is None else sizes,
            own.temperature_K if temperature_K is None else temperature_K,
            own.time_h if time_h is None else time_h,
            own.reagent_g_per_L if reagent_g_per_L is None else reagent_g_per_L,
            own.solids_g,
            own.solution_mL,
            own.aliquot_mL,
            own.aliquots,
            own.domain,
        )
        speed = self.stirring_rpm if stirring_rpm is None else stirring_rpm
        return Candidate(bottle, repeats, cost, speed, why)


def patterns_of(stage: KineticsStage, tests: Sequence[Test]) -> tuple[Pattern, ...]:
    """Return the tests behind a fit as patterns, in the order of their names."""
    sheets = {test.name: test for test in tests}
    found = [_pattern(one, stage, sheets) for one in stage.observed if one.value.size]
    return tuple(sorted(found, key=lambda pattern: pattern.name))


def _pattern(one: Observed, stage: KineticsStage, sheets: Mapping[str, Test]) -> Pattern:
    reference = stage.law.reference
    sizes = SizeDistribution.single(reference.size_mm) if one.sizes is None else one.sizes
    reagent = one.reagent_g_per_L
    conditions = (
        sizes,
        one.temperature_K,
        one.time_h[one.time_h > 0.0],
        reagent or reference.reagent_g_per_L,
    )
    sheet = sheets.get(one.test)
    if sheet is None:
        made = (PLAIN.solids_g, PLAIN.solution_mL, PLAIN.aliquot_mL, PLAIN.aliquots)
    else:
        drawn = sheet.aliquot_mL[np.isfinite(sheet.aliquot_mL)]
        policy = sheet.aliquots or PLAIN.aliquots
        aliquot = float(np.median(drawn)) if drawn.size else 0.0
        made = (sheet.solids_g, sheet.solution_mL, aliquot, policy)
    domain = one.key.rpartition("/")[0]
    return Pattern(Bottle(one.test, *conditions, *made, domain), one.stirring_rpm)


def nearest(
    patterns: Sequence[Pattern],
    temperature_K: float | None = None,
    size_mm: float | None = None,
    reagent_g_per_L: float | None = None,
) -> Pattern:
    """Return the pattern nearest to conditions; the middle of the tests where one is left out."""

    def coordinates(kelvin: float, size: float, strength: float) -> list[float]:
        return [1.0 / kelvin, float(np.log(size)), float(np.log(strength))]

    every = np.array(
        [coordinates(p.bottle.temperature_K, p.size_mm, p.bottle.reagent_g_per_L) for p in patterns]
    )
    middle = 0.5 * (every.min(axis=0) + every.max(axis=0))
    asked = coordinates(temperature_K or 1.0, size_mm or 1.0, reagent_g_per_L or 1.0)
    given = [value is not None for value in (temperature_K, size_mm, reagent_g_per_L)]
    away = np.abs(every - np.where(given, asked, middle))
    scale = np.where(np.ptp(every, axis=0) > 0.0, np.ptp(every, axis=0), 1.0)
    distance = np.sum(away / scale, axis=1)
    ranked = zip(distance.round(9).tolist(), (p.name for p in patterns), patterns, strict=True)
    return min(ranked, key=lambda one: one[:2])[2]


def distinct(values: Sequence[float]) -> list[float]:
    """Return the different ones of some values, rising."""
    found: list[float] = []
    for value in sorted(values):
        if not found or value > found[-1] * (1.0 + SAME):
            found.append(float(value))
    return found


def is_one_of(value: float, values: Sequence[float]) -> bool:
    """Return whether a value is among others."""
    return any(abs(value - other) <= SAME * abs(other) for other in values)
