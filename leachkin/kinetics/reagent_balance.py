"""The strength of a reagent in one test by its own balance, where nobody titrated.

``C V = C0 V + what was added - solids (metal's share of E + gangue)``, with the reagent renewed at
a first-order rate where something oxidises it back.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import argument_error

if TYPE_CHECKING:
    from leachkin.kinetics.gangue import GangueLaw

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ReagentBalance:
    """What a test's reagent is spent on, and what comes in.

    Attributes
    ----------
    start_g_per_L : float
        Strength at time 0; also what a renewed reagent returns to.
    solids_kg_per_m3 : float
        Dry solids per volume of solution.
    per_metal_kg_per_kg : float
        Reagent that the dissolved metal takes.
    gangue : GangueLaw or None
        Its hours pass in proportion to the strength.
    temperature_K : float
    refreshed_share : ndarray, shape (m,), or None
        Share of the solution replaced after each reading by one of ``fresh_g_per_L``.
    fresh_g_per_L : float
    added_g_per_L : ndarray, shape (m,), or None
        Reagent added after each reading, per volume of solution.
    renewal_per_h : float
        Rate at which spent reagent is renewed (air that oxidises Fe2+ back to Fe3+).

    Raises
    ------
    InputProblems
        For numbers that are negative or not finite, or a start of 0.
    """

    start_g_per_L: float
    solids_kg_per_m3: float
    per_metal_kg_per_kg: float
    gangue: GangueLaw | None = None
    temperature_K: float = 298.15
    refreshed_share: Array | None = None
    fresh_g_per_L: float = 0.0
    added_g_per_L: Array | None = None
    renewal_per_h: float = 0.0

    def __post_init__(self) -> None:
        names = ("solids_kg_per_m3", "per_metal_kg_per_kg", "fresh_g_per_L", "renewal_per_h")
        for name in names:
            value = getattr(self, name)
            if not (np.isfinite(value) and value >= 0.0):
                raise argument_error(name, f"{value:g}", "finite, not below 0")
        if not (np.isfinite(self.start_g_per_L) and self.start_g_per_L > 0.0):
            raise argument_error("start_g_per_L", f"{self.start_g_per_L:g}", "above 0 g/L")

    def start(self, batch: tuple[int, ...], head_kg_per_t: Array, extraction: Array) -> Strength:
        """Return the strength at time 0, what dissolves at once already spent.

        Parameters
        ----------
        batch : tuple of int
            Shape B.
        head_kg_per_t, extraction : ndarray, shape B
        """
        fresh = Strength(
            self,
            np.full(batch, self.start_g_per_L),
            np.zeros(batch),
            np.zeros(batch),
            head_kg_per_t,
        )
        return fresh.after(0.0, extraction, np.zeros(batch))


@dataclass(frozen=True, eq=False)
class Strength:
    """Reagent of one test at a moment; every field of shape B."""

    balance: ReagentBalance
    strength_g_per_L: Array
    extraction: Array
    gangue_h: Array
    head_kg_per_t: Array

    def after(self, hours: float, extraction: Array, renewal_per_h: Array) -> Strength:
        """Return the strength some hours later, with the extraction reached by then.

        Half of the renewal comes before what is taken and half after (second order in the step).
        """
        own = self.balance
        gangue_h = self.gangue_h + hours * self.strength_g_per_L / own.start_g_per_L
        taken = own.per_metal_kg_per_kg * self.head_kg_per_t * (extraction - self.extraction)
        if own.gangue is not None:
            both = np.stack([self.gangue_h, gangue_h], axis=-1)
            taken = taken + np.diff(own.gangue.taken_kg_per_t(both, own.temperature_K))[..., 0]
        spent = own.solids_kg_per_m3 * taken / 1000.0  # kg/m3 of reagent is g/L
        back = -np.expm1(-0.5 * hours * renewal_per_h)
        first = self.strength_g_per_L + back * (own.start_g_per_L - self.strength_g_per_L)
        left = np.maximum(first - spent, 0.0)
        left = left + back * (own.start_g_per_L - left)
        return replace(self, strength_g_per_L=left, extraction=extraction, gangue_h=gangue_h)

    def sampled(self, reading: int) -> Strength:
        """Return the strength after a reading's aliquot is replaced and reagent is added."""
        own = self.balance
        now = self.strength_g_per_L
        if own.refreshed_share is not None:
            now = now + float(own.refreshed_share[reading]) * (own.fresh_g_per_L - now)
        if own.added_g_per_L is not None:
            now = now + float(own.added_g_per_L[reading])
        return replace(self, strength_g_per_L=now)
