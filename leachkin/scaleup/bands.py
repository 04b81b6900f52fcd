"""Bands of draws: the low end, the median, the high end, and which percentile each is."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.problems import argument_error
from leachkin.scaleup.checks import finite

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Bands:
    """A band over draws.

    Attributes
    ----------
    low, median, high : ndarray
        The shape of one draw. ``low`` is the low number, whether low is good or bad.
    level : float
        Share of the draws between low and high.
    n : int
        Number of draws.
    """

    low: Array
    median: Array
    high: Array
    level: float
    n: int

    @property
    def low_name(self) -> str:
        """Name of the low end, "P10 (low)" for a level of 0.8."""
        return f"P{50.0 * (1.0 - self.level):g} (low)"

    @property
    def high_name(self) -> str:
        """Name of the high end, "P90 (high)" for a level of 0.8."""
        return f"P{50.0 * (1.0 + self.level):g} (high)"


def bands(values: ArrayLike, level: float = 0.8) -> Bands:
    """Return low end, median and high end over the first axis.

    Parameters
    ----------
    values : array_like, shape (n, ...)
        n draws, at least 2.
    level : float
        Share of draws inside, above 0 and below 1.

    Returns
    -------
    Bands

    Raises
    ------
    InputProblems
        If there are fewer than 2 draws, a value is not finite, or the level lies outside.

    Examples
    --------
    >>> band = bands([0.1, 0.2, 0.3, 0.4, 0.5], level=0.5)
    >>> band.low_name, float(band.low), float(band.median), float(band.high)
    ('P25 (low)', 0.2, 0.3, 0.4)
    """
    draws = finite("values", values)
    if not 0.0 < level < 1.0:
        raise argument_error("level", f"{level:g}", "above 0 and below 1", "0.8 for P10 to P90")
    if draws.ndim == 0 or len(draws) < 2:
        raise argument_error(
            "values", "a single set of numbers", "two draws or more", "draw the fit first"
        )
    low, median, high = np.quantile(draws, [(1 - level) / 2, 0.5, (1 + level) / 2], axis=0)
    return Bands(np.asarray(low), np.asarray(median), np.asarray(high), level, len(draws))
