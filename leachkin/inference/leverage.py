"""Which rows hold a fit: leverage, standardised residuals, and how quantities move together."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from leachkin.inference.covariance import COLUMN_FLOOR, SINGULAR_FLOOR
from leachkin.problems import argument_error

Array = NDArray[np.float64]

#: A row that takes all of a quantity for itself: nothing is left to judge it by.
ALL_BUT_ONE = 1.0 - 1e-9


def leverage_of(jacobian: Array) -> Array:
    """Return the leverage of every row of a fit: the diagonal of the hat matrix.

    Parameters
    ----------
    jacobian : ndarray, shape (n, p)
        Derivatives of the weighted residuals by the quantities that are free, at the minimum.

    Returns
    -------
    ndarray, shape (n,)
        From 0 (the row does not matter) to 1 (the fit follows it whatever it says); the sum is the
        number of quantities that the rows hold.

    Raises
    ------
    InputProblems
        For an array that is not two-dimensional.

    Notes
    -----
    ``H = J (J'J)^-1 J'`` [belsley1980], by the singular vectors of the column-scaled Jacobian, so
    that quantities that cannot be told apart count once. Twice the mean is the usual mark above
    which a row is looked at.

    Examples
    --------
    >>> leverage_of(np.ones((4, 1))).tolist()
    [0.25, 0.25, 0.25, 0.25]
    """
    J = np.asarray(jacobian, dtype=np.float64)
    if J.ndim != 2:
        raise argument_error("jacobian", f"shape {J.shape}", "rows by quantities")
    norms = np.linalg.norm(J, axis=0)
    alive = norms > COLUMN_FLOOR
    if not alive.any():
        return np.zeros(J.shape[0])
    basis, singular, _ = np.linalg.svd(J[:, alive] / norms[alive], full_matrices=False)
    basis = basis[:, singular > SINGULAR_FLOOR * singular.max()]
    return np.asarray(np.clip(np.sum(basis**2, axis=1), 0.0, 1.0))


def standardised_residuals(residuals: Array, leverage: Array, scatter_sd: float) -> Array:
    """Return residuals over their own standard deviation ``s sqrt(1 - h)`` [belsley1980].

    Parameters
    ----------
    residuals, leverage : ndarray, shape (n,)
    scatter_sd : float
        Of one residual, above 0.

    Returns
    -------
    ndarray, shape (n,)
        NaN for a row that the fit follows whatever it says.

    Raises
    ------
    InputProblems
        For a scatter that is not above 0.
    """
    if not scatter_sd > 0.0:
        raise argument_error("scatter_sd", f"{scatter_sd:g}", "above 0")
    left = np.where(leverage < ALL_BUT_ONE, 1.0 - leverage, np.nan)
    return np.asarray(residuals / (scatter_sd * np.sqrt(left)))


def correlation_matrix(covariance: Array) -> Array:
    """Return the correlations of a covariance, shape (p, p).

    Rows of zeros (a quantity that is not free) give NaN, the diagonal 1.
    """
    sd = np.sqrt(np.diag(covariance))
    scale = np.where(sd > 0.0, sd, np.nan)
    found = covariance / np.outer(scale, scale)
    np.fill_diagonal(found, 1.0)
    return np.asarray(np.clip(found, -1.0, 1.0))
