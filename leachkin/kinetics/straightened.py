"""Straightened curves g(X), a diagnostic only: straightening bends the errors of the points."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics.fit_remarks import PLATEAU
from leachkin.kinetics.particle_law import ParticleLaw
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]

STRAIGHTENED_LAWS = ("film", "ash_layer", "chemical")


@dataclass(frozen=True)
class StraightenedTest:
    """One test, straightened by every law.

    Attributes
    ----------
    test : str
    time_h : ndarray, shape (m,)
    conversion : ndarray, shape (m,)
        Measured extraction over the fitted ultimate extraction of the test.
    g : mapping of law to ndarray, shape (m,)
        NaN from the plateau on, where g tells of the noise only.
    slope_per_h : mapping of law to float
        Of the line through the origin; NaN with fewer than two points.
    """

    test: str
    time_h: Array
    conversion: Array
    g: Mapping[str, Array]
    slope_per_h: Mapping[str, float]


def straightened(conversion: ArrayLike, law: str) -> Array:
    """Return g(X), which is t/tau of a sphere under one resistance.

    Film: X. Ash (product) layer: 1 - 3 (1-X)^(2/3) + 2 (1-X). Chemical reaction:
    1 - (1-X)^(1/3) [levenspiel1999].

    Parameters
    ----------
    conversion : array_like, shape (m,)
    law : "film", "ash_layer" or "chemical"

    Returns
    -------
    ndarray, shape (m,)
        NaN below 0 and at or above 1, where no straight line can be drawn.

    Raises
    ------
    InputProblems
        For another law.

    Examples
    --------
    >>> straightened([0.875], "chemical").tolist()
    [0.5]
    """
    if law not in STRAIGHTENED_LAWS:
        raise argument_error("law", law, ", ".join(STRAIGHTENED_LAWS))
    X = np.atleast_1d(np.asarray(conversion, dtype=np.float64))
    g = np.full(X.shape, np.nan)
    inside = (X >= 0.0) & (X < 1.0)
    if inside.any():
        film, ash_layer, chemical = (float(law == name) for name in STRAIGHTENED_LAWS)
        alone = ParticleLaw(film, ash_layer, chemical)
        g[inside] = alone.time(X[inside])
    return g


def slope_through_origin(time: ArrayLike, g: ArrayLike) -> float:
    """Return the least-squares slope of g against time through the origin, NaN left out.

    Parameters
    ----------
    time, g : array_like, shape (m,)

    Returns
    -------
    float
        NaN with fewer than two points.
    """
    t, values = np.asarray(time, dtype=np.float64), np.asarray(g, dtype=np.float64)
    known = np.isfinite(values) & (t > 0.0)
    if int(known.sum()) < 2:
        return float("nan")
    return float(t[known] @ values[known] / (t[known] @ t[known]))


def straightened_test(
    observed: Observed, head_kg_per_t: float, fitted: Array, ultimate: Array
) -> StraightenedTest:
    """Return a test straightened by every law.

    Parameters
    ----------
    observed : Observed
    head_kg_per_t : float
        The fitted one.
    fitted, ultimate : ndarray, shape (m,)
        Fitted extraction and ultimate extraction at the readings.
    """
    time_h, extraction = measured_extraction(observed, head_kg_per_t, fitted)
    at = np.searchsorted(observed.time_h, time_h)
    conversion = extraction / ultimate[at]
    late = np.cumsum(conversion >= PLATEAU) > 0
    rising = np.where(late, np.nan, conversion)
    g = {law: straightened(rising, law) for law in STRAIGHTENED_LAWS}
    slopes = {law: slope_through_origin(time_h, values) for law, values in g.items()}
    return StraightenedTest(observed.test, time_h, conversion, g, slopes)


def measured_extraction(
    observed: Observed, head_kg_per_t: float, fitted: Array
) -> tuple[Array, Array]:
    """Return the extraction that the solution assays (or plain extractions) of a test say.

    ``value = head (operator @ E + offset) + brought`` solved for E at the readings that were
    assayed; at the others, and where only a limit is known, the fitted extraction stands in.

    Parameters
    ----------
    observed : Observed
    head_kg_per_t : float
    fitted : ndarray, shape (m,)

    Returns
    -------
    time_h, extraction : ndarray, shape (k,)
        After time 0.
    """
    rows = [
        i
        for i, kind in enumerate(observed.row_kind)
        if kind != "tail" and observed.bound[i] == 0 and observed.row_time_h[i] > 0.0
    ]
    at = np.searchsorted(observed.time_h, observed.row_time_h[rows])
    dissolved = (observed.value[rows] - observed.brought[rows]) / head_kg_per_t
    right = dissolved - observed.offset[rows]
    operator = observed.operator[rows]
    known = np.zeros(observed.time_h.size, dtype=bool)
    known[at] = True
    right = right - operator[:, ~known] @ fitted[~known]
    extraction = np.linalg.lstsq(operator[:, at], right, rcond=None)[0] if rows else right
    return observed.row_time_h[rows], np.asarray(extraction)
