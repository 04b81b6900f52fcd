"""Concentrations that fall: how much of it is dilution by make-up, and what is left to explain."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leachkin.testwork.records import Assays, Test
from leachkin.testwork.recursion import assays_for_balance, solution_ledger

#: A fall is remarked on above this many standard deviations.
_CLEAR_FALL_SD = 2.0


@dataclass(frozen=True)
class Fall:
    """A fall from the highest reading to the last, all shares of the highest.

    Attributes
    ----------
    from_h, to_h : float
    share : float
        Of the highest reading, by which the last one is lower.
    by_dilution : float
        What make-up and aliquots alone would have brought about.
    noise : float
        One standard deviation of the difference of the two readings.
    row : int or None
        Of the last reading.
    """

    from_h: float
    to_h: float
    share: float
    by_dilution: float
    noise: float
    row: int | None

    @property
    def unexplained(self) -> float:
        """What dilution does not account for; negative where it was still leaching."""
        return self.share - self.by_dilution

    @property
    def is_explained(self) -> bool:
        """True where the rest is within the precision of the two assays."""
        return self.unexplained <= _CLEAR_FALL_SD * self.noise

    @property
    def was_still_leaching(self) -> bool:
        """True where it fell by clearly less than dilution alone would have made it."""
        return self.unexplained < -_CLEAR_FALL_SD * self.noise


def fall_of(test: Test, analyte: str) -> Fall | None:
    """Return the fall of a concentration; None where it does not fall clearly, or is bounded.

    With carbon in the vessel a fall is what the carbon is there for: None too.
    """
    if analyte not in test.solution or test.time_h.size < 2 or test.has_carbon(analyte):
        return None
    used = assays_for_balance(test, analyte)
    if np.isnan(used.value).any() or (used.bound != 0).any():
        return None
    peak, last = int(np.argmax(used.value)), used.value.size - 1
    highest = float(used.value[peak])
    noise = float(np.hypot(used.sd[peak], used.sd[last]))
    fall = highest - float(used.value[last])
    if highest <= 0.0 or fall <= _CLEAR_FALL_SD * noise:
        return None
    diluted = _diluted(test, analyte, used, peak, last)
    return Fall(
        float(test.time_h[peak]),
        float(test.time_h[last]),
        fall / highest,
        (highest - diluted) / highest,
        noise / highest,
        used.rows[last] if used.rows else None,
    )


def _diluted(test: Test, analyte: str, used: Assays, first: int, last: int) -> float:
    """Concentration at a later reading if nothing leached in between [g/L]."""
    ledger = solution_ledger(test)
    strength = test.makeup_metal_g_per_L.get(analyte, np.zeros(test.time_h.size))
    concentration = float(used.value[first])
    for i in range(first, last):
        kept = concentration * (ledger.volume_mL[i] - ledger.removed_mL[i])
        came = float(np.nan_to_num(strength[i])) * ledger.makeup_mL[i]
        concentration = (kept + came) / ledger.volume_mL[i + 1]
    return float(concentration)
