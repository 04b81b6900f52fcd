"""Covariance from the singular values of the column-scaled Jacobian.

Quantities that the data do not hold are found one by one, so that the others keep their intervals.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: A singular value this much smaller than the largest, columns scaled, carries no information.
SINGULAR_FLOOR = 1e-8
#: Columns below this are zero but for underflow.
COLUMN_FLOOR = 1e-150
#: Share of an unheld direction above which a quantity is called not held.
SHARE_IN_DIRECTION = 1e-3


@dataclass(frozen=True)
class Held:
    """Unscaled covariance (J'J)^-1 of the quantities that the data hold.

    Attributes
    ----------
    covariance : ndarray, shape (p, p)
        Rows of zeros for those not held.
    held : ndarray of bool, shape (p,)
    partners : tuple of tuple of int
        For each quantity, the others that share its unheld direction.
    """

    covariance: Array
    held: NDArray[np.bool_]
    partners: tuple[tuple[int, ...], ...]


def held_covariance(jacobian: Array) -> Held:
    """Return the unscaled covariance of a Jacobian of shape (n, p), and what it does not hold."""
    p = jacobian.shape[1]
    norms = np.linalg.norm(jacobian, axis=0)
    alive = norms > COLUMN_FLOOR
    scale = np.where(alive, norms, 1.0)
    _, singular, rows = np.linalg.svd(jacobian[:, alive] / scale[alive], full_matrices=False)
    null = singular <= SINGULAR_FLOOR * singular.max(initial=0.0)
    missing = _missing_directions(rows, null, alive, p)
    kept = rows[~null] / singular[~null, None]
    covariance = np.zeros((p, p))
    covariance[np.ix_(alive, alive)] = kept.T @ kept / np.outer(scale[alive], scale[alive])
    involved = np.abs(missing) > SHARE_IN_DIRECTION
    held = alive & ~involved.any(axis=0)
    covariance[~held] = 0.0
    covariance[:, ~held] = 0.0
    partners = tuple(_partners(involved, j) for j in range(p))
    return Held(covariance, held, partners)


def _missing_directions(rows: Array, null: NDArray[np.bool_], alive: Array, p: int) -> Array:
    """Return the unheld directions among the columns that are not zero, shape (d, p)."""
    found = np.zeros((int(null.sum()), p))
    found[:, np.asarray(alive, dtype=bool)] = rows[null]
    return found


def _partners(involved: NDArray[np.bool_], j: int) -> tuple[int, ...]:
    shared = involved[involved[:, j]].any(axis=0) if involved.size else np.zeros(0, dtype=bool)
    return tuple(int(i) for i in np.flatnonzero(shared) if i != j)


def one_sided_reach(residuals: Array, others: Array, column: Array, allowance: float) -> float:
    """Return how far a quantity may move from its bound before the fit is too much worse.

    The others are fitted again (linearised).

    Parameters
    ----------
    residuals : ndarray, shape (n,)
    others : ndarray, shape (n, q)
        Jacobian of the quantities that are free.
    column : ndarray, shape (n,)
        Derivative for a move away from the bound.
    allowance : float
        Rise of the sum of squares allowed.

    Returns
    -------
    float
        The reach; infinite where the data say nothing about it.
    """
    if others.size:
        basis, singular, _ = np.linalg.svd(others, full_matrices=False)
        basis = basis[:, singular > SINGULAR_FLOOR * singular.max(initial=0.0)]
        column = column - basis @ (basis.T @ column)
        residuals = residuals - basis @ (basis.T @ residuals)
    curvature = float(column @ column)
    slope = max(float(column @ residuals), 0.0)
    if curvature <= 0.0:
        return float("inf")
    return float((np.sqrt(slope * slope + curvature * allowance) - slope) / curvature)
