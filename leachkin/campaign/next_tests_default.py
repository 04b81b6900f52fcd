"""The candidates that are judged where the campaign names none: made from the tests that are there.

Each corner again, colder and hotter, finer and coarser, earlier readings, a longer test, half and
twice the strength, another stirring speed where speeds are known, and the conditions of the plant.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.next_tests_bench import Pattern, distinct, is_one_of, nearest
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.kinetics import Candidate
from leachkin.testwork import SizeDistribution

#: Step in temperature where one was tested [K], and where water boils and freezes too near.
ONE_TEMPERATURE_STEP_K = 15.0
COLDEST_K, HOTTEST_K = 278.15, 363.15
#: Ratio of sizes where one was tested.
ONE_SIZE_RATIO = 2.0
#: A plant size is coarser than the tests beyond this ratio.
COARSER = 1.05
#: Shares of the first reading that are read too, none before the time that sampling a bottle takes
#: [h], and multiples of the last reading.
EARLIER = (0.25, 0.5)
EARLIEST_H = 1.0 / 12.0
LONGER = (1.5, 2.0)


@dataclass(frozen=True)
class PlantConditions:
    """What a plant asks of the law.

    Attributes
    ----------
    name : str
        "heap" or "tank", "" for none.
    temperature_K, reagent_g_per_L : float or None
    sizes : SizeDistribution or None
    """

    name: str = ""
    temperature_K: float | None = None
    reagent_g_per_L: float | None = None
    sizes: SizeDistribution | None = field(default=None)

    @property
    def coarsest_mm(self) -> float | None:
        """Size of the coarsest class."""
        return None if self.sizes is None else float(np.max(self.sizes.size_mm))


@dataclass(frozen=True)
class _Tested:
    """What the tests differ in."""

    patterns: tuple[Pattern, ...]
    temperatures_K: list[float]
    sizes_mm: list[float]
    strengths_g_per_L: list[float]
    sized: bool

    @classmethod
    def of(cls, patterns: Sequence[Pattern], sized: bool) -> _Tested:
        return cls(
            tuple(patterns),
            distinct([p.bottle.temperature_K for p in patterns]),
            distinct([p.size_mm for p in patterns]),
            distinct([p.bottle.reagent_g_per_L for p in patterns]),
            sized,
        )

    @property
    def end_sizes(self) -> list[float]:
        return distinct([self.sizes_mm[0], self.sizes_mm[-1]])

    @property
    def end_temperatures(self) -> list[float]:
        return distinct([self.temperatures_K[0], self.temperatures_K[-1]])

    @property
    def step_K(self) -> float:
        """Mean step between the temperatures."""
        several = len(self.temperatures_K) > 1
        return float(np.mean(np.diff(self.temperatures_K))) if several else ONE_TEMPERATURE_STEP_K

    @property
    def ratio(self) -> float:
        """Mean ratio between the sizes."""
        several = len(self.sizes_mm) > 1
        return float(np.exp(np.mean(np.diff(np.log(self.sizes_mm))))) if several else ONE_SIZE_RATIO


def default_candidates(
    patterns: Sequence[Pattern],
    plant: PlantConditions | None = None,
    *,
    with_strength: bool = True,
    with_size: bool = True,
) -> tuple[Candidate, ...]:
    """Return candidates made from the tests, each once.

    Parameters
    ----------
    patterns : sequence of Pattern
    plant : PlantConditions, optional
    with_strength, with_size : bool
        False where no strength, or no size, is known of the tests.
    """
    tested, at = _Tested.of(patterns, with_size), plant or PlantConditions()
    found = [
        *_repeats(tested),
        *_temperatures(tested, at),
        *(_sizes(tested, at) if with_size else ()),
        *_times(tested),
        *(_strengths(tested, at) if with_strength else ()),
        *_stirring(tested),
    ]
    once: dict[str, Candidate] = {}
    for candidate in found:
        once.setdefault(candidate.name, candidate)
    return tuple(once.values())


def in_words(candidates: Sequence[Candidate]) -> str:
    """Return what a set made from the tests holds."""
    return (
        f"no [[candidates]] in the campaign: {len(candidates)} made from the tests are judged "
        "(corners again, colder, hotter, finer, coarser, earlier, longer, other strengths, plant "
        "conditions)"
    )


def _repeats(tested: _Tested) -> Iterator[Candidate]:
    for kelvin in tested.end_temperatures:
        for size in tested.end_sizes:
            like = nearest(tested.patterns, kelvin, size)
            yield like.candidate(f"{like.name} again", why="a corner again")


def _temperatures(tested: _Tested, plant: PlantConditions) -> Iterator[Candidate]:
    lowest, highest = tested.temperatures_K[0], tested.temperatures_K[-1]
    cold, hot = lowest - tested.step_K, highest + tested.step_K
    asked: list[tuple[float, str]] = []
    at = plant.temperature_K
    if at is not None and not is_one_of(at, tested.temperatures_K):
        asked.append((at, f"temperature of the {plant.name}"))
    if cold >= COLDEST_K:
        asked.append((cold, f"{tested.step_K:.3g} K colder"))
    if hot <= max(HOTTEST_K, highest):
        asked.append((hot, f"{tested.step_K:.3g} K hotter"))
    for kelvin, why in asked:
        for size in tested.end_sizes:
            like = nearest(tested.patterns, kelvin, size)
            size_words = f", {like.size_mm:.3g} mm" if tested.sized else ""
            yield like.candidate(f"{_degC(kelvin)}{size_words}", temperature_K=kelvin, why=why)


def _sizes(tested: _Tested, plant: PlantConditions) -> Iterator[Candidate]:
    finest, coarsest = tested.sizes_mm[0], tested.sizes_mm[-1]
    middle = nearest(tested.patterns).bottle.temperature_K
    asked = [(middle, finest / tested.ratio, "finer")]
    top, at = plant.coarsest_mm, plant.temperature_K
    if top is not None and top > COARSER * coarsest:
        why = f"coarsest class of the {plant.name}"
        asked.append((middle, top, why))
        if at is not None and not is_one_of(at, tested.temperatures_K):
            asked.append((at, top, f"temperature, coarsest class of the {plant.name}"))
    elif top is None:
        asked.append((middle, coarsest * tested.ratio, "coarser"))
    for kelvin, size, why in asked:
        like = nearest(tested.patterns, kelvin, size)
        name = f"{_degC(kelvin)}, {size:.3g} mm"
        sizes = SizeDistribution.single(size)
        times = _longer(like) if size > coarsest else None
        yield like.candidate(name, temperature_K=kelvin, sizes=sizes, time_h=times, why=why)


def _times(tested: _Tested) -> Iterator[Candidate]:
    fast = nearest(tested.patterns, tested.temperatures_K[-1], tested.sizes_mm[0])
    own = fast.bottle.time_h
    before = own[0] * np.array(EARLIER)
    early = np.concatenate([before[before >= EARLIEST_H], own])
    if early.size > own.size:
        why = f"readings from {early[0]:.2g} h on"
        yield fast.candidate(f"{fast.name} earlier", time_h=early, why=why)
    slow = nearest(tested.patterns, tested.temperatures_K[0], tested.sizes_mm[-1])
    late = _longer(slow)
    why = f"run to {late[-1]:.3g} h"
    yield slow.candidate(f"{slow.name} longer", time_h=late, why=why)


def _longer(like: Pattern) -> NDArray[np.float64]:
    own = like.bottle.time_h
    return np.concatenate([own, own[-1] * np.array(LONGER)])


def _strengths(tested: _Tested, plant: PlantConditions) -> Iterator[Candidate]:
    like = nearest(tested.patterns)
    weak, strong = 0.5 * tested.strengths_g_per_L[0], 2.0 * tested.strengths_g_per_L[-1]
    asked = [(weak, "half the strength"), (strong, "twice the strength")]
    at = plant.reagent_g_per_L
    if at and not is_one_of(at, [*tested.strengths_g_per_L, weak, strong]):
        asked.append((at, f"strength fed to the {plant.name}"))
    for strength, why in asked:
        name = f"{like.name} at {strength:.3g} g/L"
        yield like.candidate(name, reagent_g_per_L=strength, why=why)


def _stirring(tested: _Tested) -> Iterator[Candidate]:
    speeds = distinct([p.stirring_rpm for p in tested.patterns if p.stirring_rpm])
    if not speeds:
        return
    like = nearest([p for p in tested.patterns if p.stirring_rpm])
    for speed, why in ((0.5 * speeds[0], "half the speed"), (2.0 * speeds[-1], "twice the speed")):
        yield like.candidate(f"{like.name} at {speed:.3g} rpm", stirring_rpm=speed, why=why)


def _degC(kelvin: float) -> str:
    return f"{kelvin - ZERO_CELSIUS_K:.3g} degC"
