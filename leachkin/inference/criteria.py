"""Information criteria for least squares with an unknown variance.

``AICc = n ln(SSE/n) + 2 K + 2 K (K + 1) / (n - K - 1)`` [akaike1974; hurvich1989] and
``BIC = n ln(SSE/n) + K ln n`` [schwarz1978]; K counts the variance.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

#: Residuals below this, in the unit of the weights, are rounding and not evidence for a law.
ROUNDING_RESIDUAL = 1e-7


def _fit_term(sum_of_squares: float, points: int) -> float:
    floor = points * ROUNDING_RESIDUAL**2
    return points * math.log(max(sum_of_squares, floor) / points)


def corrected_aic(sum_of_squares: float, points: int, fitted: float) -> float:
    """Return AICc; infinite where there are too few points for the correction.

    Parameters
    ----------
    sum_of_squares : float
        Weighted sum of squares.
    points : int
        Residuals.
    fitted : float
        Quantities fitted (the variance is added here); one that is half known beforehand is half.

    Examples
    --------
    >>> round(corrected_aic(0.01, 10, 2), 4)
    -59.0776
    """
    k = fitted + 1
    if points - k - 1 <= 0:
        return math.inf
    return _fit_term(sum_of_squares, points) + 2 * k + 2 * k * (k + 1) / (points - k - 1)


def schwarz_bic(sum_of_squares: float, points: int, fitted: float) -> float:
    """Return BIC; see :func:`corrected_aic` for the arguments."""
    return _fit_term(sum_of_squares, points) + (fitted + 1) * math.log(points)


def akaike_weights(values: ArrayLike) -> NDArray[np.float64]:
    """Return the weights exp(-delta/2), scaled to sum 1; an infinite criterion weighs nothing."""
    aicc = np.asarray(values, dtype=np.float64)
    if not np.isfinite(aicc).any():
        return np.full(aicc.shape, 1.0 / max(aicc.size, 1))
    weights = np.exp(-0.5 * (aicc - aicc[np.isfinite(aicc)].min()))
    return np.asarray(weights / weights.sum())
