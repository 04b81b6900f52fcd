"""The arithmetic of a budget as plain functions on arrays."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


def received_kg_per_t(net_kg_per_t: ArrayLike, useful_share: ArrayLike) -> Array:
    """Return the product to be bought for a net consumption [kg/t].

    Parameters
    ----------
    net_kg_per_t : array_like, shape B
    useful_share : array_like, shape B
        Purity less losses, above 0 to 1.

    Returns
    -------
    ndarray, shape B
    """
    return np.asarray(np.asarray(net_kg_per_t) / np.asarray(useful_share), dtype=np.float64)


def t_per_month(kg_per_t: ArrayLike, ore_t_per_month: ArrayLike) -> Array:
    """Return tonnes by the month from kg by the tonne of ore.

    Parameters
    ----------
    kg_per_t, ore_t_per_month : array_like, shape B

    Returns
    -------
    ndarray, shape B
    """
    return np.asarray(np.asarray(kg_per_t) * np.asarray(ore_t_per_month) / 1e3)


def band(values: ArrayLike, level: float) -> tuple[float, float, float]:
    """Return low, median and high of draws.

    Parameters
    ----------
    values : array_like, shape B
        A single figure gives itself three times.
    level : float
        Share of the draws between low and high.

    Returns
    -------
    tuple of float

    Examples
    --------
    >>> [round(value, 9) for value in band(range(101), 0.8)]
    [10.0, 50.0, 90.0]
    """
    quantiles = (0.5 - 0.5 * level, 0.5, 0.5 + 0.5 * level)
    low, middle, high = np.quantile(np.asarray(values, dtype=np.float64), quantiles)
    return float(low), float(middle), float(high)
