"""Demand for a precipitant as plain functions on arrays: electrons in, electrons out."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


def taken_by_recovery(feed_g_per_L: ArrayLike, recovery: ArrayLike) -> Array:
    """Return the metal precipitated from a feed [g/L].

    Parameters
    ----------
    feed_g_per_L : array_like, shape B
    recovery : array_like, shape B
        Fraction of the metal in the feed.

    Returns
    -------
    ndarray, shape B
    """
    return np.asarray(np.asarray(feed_g_per_L) * np.asarray(recovery), dtype=np.float64)


def net_demand(taken_g_per_L: ArrayLike, factor_kg_per_kg: float) -> Array:
    """Return the pure precipitant that a sink takes [kg/m3].

    Parameters
    ----------
    taken_g_per_L : array_like, shape B
        What is reduced: metal, ferric iron, acid or oxygen.
    factor_kg_per_kg : float
        Precipitant per mass of it, by its electrons.

    Returns
    -------
    ndarray, shape B
    """
    return np.asarray(np.asarray(taken_g_per_L) * factor_kg_per_kg, dtype=np.float64)


def water_demand(metal_demand_kg_per_m3: ArrayLike, hydrogen_share: ArrayLike) -> Array:
    """Return the precipitant spent on water beside the metals [kg/m3].

    Parameters
    ----------
    metal_demand_kg_per_m3 : array_like, shape B
        What the metals alone take.
    hydrogen_share : array_like, shape B
        Share of the precipitant's electrons that go to water: 0 is the 2:1 couple of gold and
        silver with zinc, 0.5 the 1:1 reaction. Below 1.

    Returns
    -------
    ndarray, shape B
        ``metal * h / (1 - h)``.
    """
    share = np.asarray(hydrogen_share, dtype=np.float64)
    return np.asarray(np.asarray(metal_demand_kg_per_m3) * share / (1.0 - share))


def as_received(net_kg_per_m3: ArrayLike, purity: ArrayLike, fines: ArrayLike = 0.0) -> Array:
    """Return what has to be bought for a net demand [kg/m3].

    Parameters
    ----------
    net_kg_per_m3 : array_like, shape B
    purity : array_like, shape B
        Share of active metal in what is delivered, above 0 to 1.
    fines : array_like, shape B
        Share of that metal lost as fines or rust, 0 to below 1.

    Returns
    -------
    ndarray, shape B
    """
    useful = np.asarray(purity, dtype=np.float64) * (1.0 - np.asarray(fines, dtype=np.float64))
    return np.asarray(np.asarray(net_kg_per_m3) / useful)
