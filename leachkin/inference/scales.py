"""The scale a quantity is fitted on: as it is, as its logarithm, or as its log-odds.

A fitted vector holds every quantity on its scale; people read the natural one.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

Scale = Literal["linear", "log", "logit"]
Array = NDArray[np.float64]


def to_natural(scale: Scale, fitted: ArrayLike) -> Array:
    """Return the natural value of a fitted one: itself, exp, or 1/(1+exp(-x)).

    Examples
    --------
    >>> float(to_natural("logit", 0.0))
    0.5
    """
    x = np.asarray(fitted, dtype=np.float64)
    if scale == "linear":
        return x
    if scale == "log":
        return np.asarray(np.exp(x))
    return np.asarray(0.5 * (1.0 + np.tanh(0.5 * x)))


def from_natural(scale: Scale, value: ArrayLike) -> Array:
    """Return the fitted value of a natural one; the inverse of :func:`to_natural`."""
    v = np.asarray(value, dtype=np.float64)
    if scale == "linear":
        return v
    if scale == "log":
        return np.asarray(np.log(v))
    return np.asarray(np.log(v) - np.log1p(-v))


def natural_slope(scale: Scale, fitted: ArrayLike) -> Array:
    """Return d(natural)/d(fitted) at a fitted value."""
    x = np.asarray(fitted, dtype=np.float64)
    if scale == "linear":
        return np.ones_like(x)
    if scale == "log":
        return np.asarray(np.exp(x))
    odds = np.tanh(0.5 * x)
    return np.asarray(0.25 * (1.0 - odds * odds))
