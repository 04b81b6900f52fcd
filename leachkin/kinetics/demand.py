"""Reagent taken by a tonne of ore on the same clock as its extraction."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics.ore_curve import OreCurve
from leachkin.problems import argument_error

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ReagentDemand:
    """Reagent taken by the metal and by a fast and a slow part of the gangue.

    Attributes
    ----------
    per_metal_kg_per_kg : float or ndarray, shape B
        Reagent per metal dissolved.
    head_kg_per_t : float or ndarray, shape B
    fast_kg_per_t, slow_kg_per_t : float or ndarray, shape B
        What the fast and the slow gangue can take in all.
    fast_h, slow_h : float or ndarray, shape B
        Their time constants in equivalent hours; an infinite one takes nothing.

    Raises
    ------
    InputProblems
        If a number is negative or not finite (the time constants may be infinite, not 0).
    """

    per_metal_kg_per_kg: Array | float
    head_kg_per_t: Array | float
    fast_kg_per_t: Array | float = 0.0
    fast_h: Array | float = np.inf
    slow_kg_per_t: Array | float = 0.0
    slow_h: Array | float = np.inf

    def __post_init__(self) -> None:
        for name in ("per_metal_kg_per_kg", "head_kg_per_t", "fast_kg_per_t", "slow_kg_per_t"):
            array = np.asarray(getattr(self, name), dtype=float)
            if not np.all(np.isfinite(array)) or np.any(array < 0.0):
                raise argument_error(name, f"{array}", "finite, not below 0")
            object.__setattr__(self, name, array)
        for name in ("fast_h", "slow_h"):
            array = np.asarray(getattr(self, name), dtype=float)
            if not np.all(array > 0.0):
                raise argument_error(name, f"{array}", "above 0 h, or infinite")
            object.__setattr__(self, name, array)

    def kg_per_t(self, curve: OreCurve, equivalent_h: ArrayLike) -> Array:
        """Return the reagent taken [kg/t] by an equivalent leach time.

        Parameters
        ----------
        curve : OreCurve
            Batch shape B or ().
        equivalent_h : array_like, shape (s,) or B + (s,), or one number

        Returns
        -------
        ndarray, shape B + (s,)
        """
        s = np.asarray(equivalent_h, dtype=float)
        return self.metal_kg_per_t(curve, s) + self.gangue_kg_per_t(s)

    def metal_kg_per_t(self, curve: OreCurve, equivalent_h: ArrayLike) -> Array:
        """Return the part taken by the metal [kg/t]; shapes as :meth:`kg_per_t`."""
        s = np.asarray(equivalent_h, dtype=float)
        most = np.asarray(self.per_metal_kg_per_kg) * self.head_kg_per_t
        return _against(most, s) * curve(s)

    def gangue_kg_per_t(self, equivalent_h: ArrayLike) -> Array:
        """Return the part taken by the gangue [kg/t]; shapes as :meth:`kg_per_t`."""
        s = np.asarray(equivalent_h, dtype=float)
        fast = -_against(self.fast_kg_per_t, s) * np.expm1(-s / _against(self.fast_h, s))
        slow = -_against(self.slow_kg_per_t, s) * np.expm1(-s / _against(self.slow_h, s))
        return fast + slow

    def derivative(self, curve: OreCurve, equivalent_h: ArrayLike) -> Array:
        """Return d(kg/t)/d(equivalent h); shapes as :meth:`kg_per_t`."""
        s = np.asarray(equivalent_h, dtype=float)
        most = np.asarray(self.per_metal_kg_per_kg) * self.head_kg_per_t
        slope = _against(most, s) * curve.derivative(s)
        for amount, tau in ((self.fast_kg_per_t, self.fast_h), (self.slow_kg_per_t, self.slow_h)):
            at = _against(tau, s)
            slope = slope + _against(amount, s) / at * np.exp(-s / at)
        return np.asarray(slope)

    def select(self, index: int) -> ReagentDemand:
        """Return one member of a batch; fields without a batch stay."""
        names = self.__dataclass_fields__
        held = {name: np.asarray(getattr(self, name)) for name in names}
        return replace(self, **{n: (v[index] if v.ndim else v) for n, v in held.items()})


def _against(value: Array | float, s: Array) -> Array:
    """Give a batch value a last axis where the times have one."""
    array = np.asarray(value, dtype=float)
    return array[..., None] if s.ndim and array.ndim else array
