"""The box of conditions that a law was fitted in, and what lies outside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.problems import argument_error

Range = tuple[float, float]
#: A condition counts as outside only beyond this, relative: tests are not run at exact values.
_SLACK = 1e-6


@dataclass(frozen=True)
class DataBox:
    """Lowest and highest condition of the tests behind a law.

    Attributes
    ----------
    temperature_K, size_mm, time_h : (low, high)
    reagent_g_per_L : (low, high) or None
        None where no strength was recorded.
    """

    temperature_K: Range
    size_mm: Range
    time_h: Range
    reagent_g_per_L: Range | None = None

    def __post_init__(self) -> None:
        for name in ("temperature_K", "size_mm", "time_h", "reagent_g_per_L"):
            given = getattr(self, name)
            if given is None and name == "reagent_g_per_L":
                continue
            if not np.all(np.isfinite(given)) or given[0] > given[1]:
                raise argument_error(name, f"{given}", "a finite (low, high)")

    def outside(
        self,
        *,
        temperature_K: ArrayLike | None = None,
        size_mm: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        time_h: ArrayLike | None = None,
    ) -> tuple[str, ...]:
        """Return one sentence for each condition that lies outside the box.

        Examples
        --------
        >>> DataBox((298.15, 328.15), (1.4, 10.9), (2.0, 240.0)).outside(time_h=2880.0)
        ('time 2880 h is outside the tests (2 to 240 h)',)
        """
        asked = (
            ("temperature", temperature_K, self.temperature_K, "K"),
            ("size", size_mm, self.size_mm, "mm"),
            ("reagent", reagent_g_per_L, self.reagent_g_per_L, "g/L"),
            ("time", time_h, self.time_h, "h"),
        )
        return tuple(
            sentence
            for name, value, held, unit in asked
            if value is not None and held is not None
            for sentence in _sentences(name, np.asarray(value, dtype=float), held, unit)
        )


def _sentences(name: str, value: np.ndarray, held: Range, unit: str) -> list[str]:
    low, high = float(np.min(value)), float(np.max(value))
    found = []
    if low < held[0] - _SLACK * abs(held[0]):
        found.append(low)
    if high > held[1] + _SLACK * abs(held[1]) and high not in found:
        found.append(high)
    shift, shown = (ZERO_CELSIUS_K, "degC") if unit == "K" else (0.0, unit)
    ends = dict.fromkeys(f"{end - shift:.4g}" for end in held)
    tested = f"{' to '.join(ends)} {shown}" + (" only" if len(ends) == 1 else "")
    return [f"{name} {x - shift:.4g} {shown} is outside the tests ({tested})" for x in found]
