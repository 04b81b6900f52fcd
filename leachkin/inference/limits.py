"""Assays below or above a limit in a least-squares fit.

The likelihood of "less than L" about an expected value m is Phi((L - m)/sd); as a residual it is
sqrt(-2 ln Phi), so that its square adds to the sum of squares as any other [tobin1958].
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]
_LN_ROOT_TWO_PI = 0.5 * np.log(2.0 * np.pi)


def below_limit_residual(distance: ArrayLike) -> tuple[Array, Array]:
    """Return the residual of a value known only to lie below a limit, and its derivative.

    Parameters
    ----------
    distance : array_like
        (limit - expected) / sd; for "greater than", (expected - limit) / sd.

    Returns
    -------
    residual, derivative : ndarray
        residual >= 0, falling to 0 well inside the limit; derivative with respect to distance.

    Examples
    --------
    >>> residual, _ = below_limit_residual([-6.0, 0.0, 6.0])
    >>> residual.round(3).tolist()
    [6.44, 1.177, 0.0]
    """
    from scipy.special import log_ndtr

    z = np.asarray(distance, dtype=np.float64)
    log_share = log_ndtr(z)
    residual = np.sqrt(-2.0 * log_share)
    log_density = -0.5 * z * z - _LN_ROOT_TWO_PI
    tiny = residual < 1e-150
    derivative = -np.exp(log_density - log_share) / np.where(tiny, 1.0, residual)
    return np.asarray(residual), np.asarray(np.where(tiny, 0.0, derivative))
