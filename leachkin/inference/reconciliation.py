"""Data reconciliation: measurements moved as little as their precision asks until balances close.

Weighted least squares under constraints (Kuehn & Davidson 1961, Chem. Eng. Prog. 57 (6) 44), by
successive linearisation where a constraint is not linear (Knepper & Gorman 1980, AIChE J. 26, 260).
Tests of gross errors: the global test, a chi-square of the constraint residuals, and the
measurement test of greatest power (Tamhane & Mah 1985, Technometrics 27, 409), which for
independent errors is the generalised likelihood ratio of one error (Narasimhan & Mah 1987, AIChE J.
33, 1514).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.inference.distributions import chi_square_upper_tail
from leachkin.problems import argument_error

Array = NDArray[np.float64]
#: Residuals and Jacobian of the constraints at given values, shapes (k,) and (k, n).
Constraints = Callable[[Array], tuple[Array, Array]]

_RANK = 1e-10  #: relative; constraints that say the same count once
_REDUNDANT = 1e-10  #: a measurement with less redundancy than this is not checked by any other
_STEPS, _CLOSED = 30, 1e-12
#: Drop of the likelihood ratio (chi-square of one, 95 %) within which two suspects are alike.
ALIKE = 3.841458820694124


@dataclass(frozen=True)
class Reconciled:
    """Measurements and what they become.

    Attributes
    ----------
    measured, sd, adjusted : ndarray, shape (n,)
    covariance : ndarray, shape (n, n)
        Of the adjusted values.
    in_sd : ndarray, shape (n,)
        Adjustment over the standard deviation of the measurement.
    redundancy : ndarray, shape (n,)
        Share of a measurement's error that its adjustment takes out: 0 where nothing checks it,
        near 1 where the others know better.
    statistic : ndarray, shape (n,)
        The measurement test: adjustment over its own standard deviation, standard normal without a
        gross error; NaN where nothing checks the measurement.
    likeness : ndarray, shape (n, n)
        Correlation of the statistics: 1 in size where two measurements cannot be told apart.
    chi_square : float
    degrees_of_freedom : int
        Independent constraints.
    """

    measured: Array
    sd: Array
    adjusted: Array
    covariance: Array
    in_sd: Array
    redundancy: Array
    statistic: Array
    likeness: Array
    chi_square: float
    degrees_of_freedom: int

    @property
    def chance(self) -> float:
        """Chance of a chi-square as large without a gross error; 1 without a constraint."""
        if not self.degrees_of_freedom:
            return 1.0
        return chi_square_upper_tail(self.chi_square, self.degrees_of_freedom)

    def suspects(self, drop: float = ALIKE) -> tuple[int, ...]:
        """Return the measurements that one gross error may be in, likeliest first.

        Those whose likelihood ratio is within ``drop`` of the greatest; the same statistic says
        that nothing tells them apart.
        """
        squares = np.nan_to_num(self.statistic) ** 2
        checked = np.flatnonzero(~np.isnan(self.statistic))
        if not checked.size:
            return ()
        kept = [int(i) for i in checked if squares[i] > squares[checked].max() - drop]
        return tuple(sorted(kept, key=lambda i: -squares[i]))


def reconcile(measured: ArrayLike, sd: ArrayLike, constraints: Constraints) -> Reconciled:
    """Return measurements adjusted so that the constraints hold.

    Parameters
    ----------
    measured, sd : array_like, shape (n,)
        Independent measurements and their standard deviations, all above 0.
    constraints : callable
        Values to residuals and Jacobian; all residuals are 0 where the balances close.

    Returns
    -------
    Reconciled
        Tests and covariance are those of the last linearisation.

    Raises
    ------
    InputProblems
        If a standard deviation is not above 0, or the constraints cannot be closed.
    """
    y, s = np.asarray(measured, dtype=float), np.asarray(sd, dtype=float)
    if not (s > 0.0).all() or not np.isfinite(y).all():
        raise argument_error("sd", f"{s.min():g}", "finite values with a precision above 0")
    x = y.copy()
    for _ in range(_STEPS):
        residual, jacobian = constraints(x)
        scaled = _row_scaled(jacobian * s, residual + jacobian @ (y - x))
        basis, moved = _least_move(*scaled)
        before, x = x, y + s * moved
        if np.abs((x - before) / s).max(initial=0.0) < _CLOSED:
            break
    else:
        raise argument_error("constraints", "balances that do not close", "consistent balances")
    return _result(y, s, x, moved, basis)


def linear_constraints(matrix: ArrayLike, target: ArrayLike | None = None) -> Constraints:
    """Return the constraints ``matrix @ x = target``, target 0 where not given.

    Examples
    --------
    >>> found = reconcile([5.0, 3.2, 2.0], [0.1, 0.1, 0.1], linear_constraints([[1, -1, -1]]))
    >>> found.adjusted.round(4).tolist(), found.degrees_of_freedom
    ([5.0667, 3.1333, 1.9333], 1)
    """
    A = np.asarray(matrix, dtype=float)
    b = np.zeros(A.shape[0]) if target is None else np.asarray(target, dtype=float)
    return lambda x: (A @ x - b, A)


def _row_scaled(rows: Array, residual: Array) -> tuple[Array, Array]:
    """Constraints in standard deviations of their own residual."""
    size = np.linalg.norm(rows, axis=1)
    size = np.where(size > 0.0, size, 1.0)
    return rows / size[:, None], residual / size


def _least_move(rows: Array, residual: Array) -> tuple[Array, Array]:
    """An orthonormal basis of the constrained directions, and the shortest move that closes."""
    u, singular, directions = np.linalg.svd(rows, full_matrices=False)
    kept = singular > _RANK * singular.max(initial=0.0)
    u, singular, directions = u[:, kept], singular[kept], directions[kept]
    return directions, -directions.T @ ((u.T @ residual) / singular)


def _result(y: Array, s: Array, x: Array, moved: Array, basis: Array) -> Reconciled:
    projection = basis.T @ basis
    redundancy = np.clip(np.diag(projection), 0.0, 1.0)
    root = np.sqrt(redundancy)
    checked = redundancy > _REDUNDANT
    statistic = np.full(y.size, np.nan)
    statistic[checked] = moved[checked] / root[checked]
    likeness = np.zeros_like(projection)
    both = np.ix_(checked, checked)
    likeness[both] = projection[both] / np.outer(root[checked], root[checked])
    return Reconciled(
        measured=y,
        sd=s,
        adjusted=x,
        covariance=np.asarray((np.eye(y.size) - projection) * np.outer(s, s)),
        in_sd=moved,
        redundancy=redundancy,
        statistic=statistic,
        likeness=likeness,
        chi_square=float(moved @ moved),
        degrees_of_freedom=int(basis.shape[0]),
    )
