"""What is asked of a fit, what its tests differ in, and the bounds of its quantities."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.box import DataBox
from leachkin.kinetics.drive import DriveForm
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.kinetics.resistance import Reference
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Two test sizes, temperatures or strengths closer than this, relative, are the same.
SAME = 1e-3

#: Bounds on the natural scale.
ENERGY_BOUNDS_kJ_per_mol = (-100.0, 400.0)
EXPONENT_BOUNDS = (-2.0, 6.0)
ORDER_BOUNDS = (-1.0, 4.0)
ULTIMATE_BOUNDS = (0.005, 0.99995)
LN_TIME_MARGIN = 14.0
LN_HEAD_MARGIN = 1.0


@dataclass(frozen=True)
class FitOptions:
    """What is asked of a fit of several tests; see ``fit_tests`` for the meaning."""

    law: str
    free: Collection[str] = ()
    fixed: Mapping[str, float] = field(default_factory=dict)
    priors: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    ultimate: float | Literal["by size", "by temperature", "by test", "one"] = "by size"
    reference: Reference | None = None
    size_exponents: Literal["theory", "free"] = "theory"
    reagent_order: float | Literal["free"] | Mapping[str, float | str] = 1.0
    drive: DriveForm = field(default_factory=DriveForm)
    terms: Collection[str] = ()
    slow_law: str | None = None
    spread: float | Literal["free"] | None = None
    size_family: str = "log_normal"
    balances: Mapping[str, ReagentBalance] = field(default_factory=dict)
    level: float = 0.95
    time_unit: str = "h"
    one_curve: bool = False


@dataclass(frozen=True)
class Spread:
    """Which conditions the tests differ in."""

    sizes_mm: tuple[float, ...]
    temperatures_K: tuple[float, ...]
    strengths_g_per_L: tuple[float, ...]
    stirring_rpm: tuple[float, ...] = ()

    @classmethod
    def of(cls, tests: Sequence[Observed]) -> Spread:
        """Collect the distinct sizes, temperatures, strengths and stirring speeds."""
        return cls(
            _distinct([o.sizes.mass_mean_mm for o in tests if o.sizes is not None]),
            _distinct([o.temperature_K for o in tests]),
            _distinct([o.reagent_g_per_L for o in tests if o.reagent_g_per_L is not None]),
            _distinct([o.stirring_rpm for o in tests if o.stirring_rpm]),
        )


def _distinct(values: Sequence[float]) -> tuple[float, ...]:
    found: list[float] = []
    for value in sorted(values):
        if not found or value > found[-1] * (1.0 + SAME):
            found.append(float(value))
    return tuple(found)


def reference_of(spread: Spread) -> Reference:
    """Return the middle of the tests: the reference where none is asked for."""
    sizes = spread.sizes_mm or (1.0,)
    strengths = spread.strengths_g_per_L or (1.0,)
    return Reference(
        temperature_K=float(np.mean(spread.temperatures_K)),
        reagent_g_per_L=_middle(strengths),
        size_mm=_middle(sizes),
        stirring_rpm=_middle(spread.stirring_rpm) if spread.stirring_rpm else None,
    )


def _middle(values: Sequence[float]) -> float:
    return float(np.exp(np.mean(np.log(values))))


def box_of(tests: Sequence[Observed], spread: Spread, reference: Reference) -> DataBox:
    """Return the box of the data: what a prediction may use without leaving it."""
    sizes = [size for o in tests if o.sizes is not None for size in o.sizes.size_mm]
    sizes = sizes or [reference.size_mm]
    times = np.concatenate([o.time_h for o in tests])
    strengths = spread.strengths_g_per_L
    return DataBox(
        temperature_K=(spread.temperatures_K[0], spread.temperatures_K[-1]),
        size_mm=(float(min(sizes)), float(max(sizes))),
        reagent_g_per_L=(strengths[0], strengths[-1]) if strengths else None,
        time_h=(float(times[times > 0].min()), float(times.max())),
    )
