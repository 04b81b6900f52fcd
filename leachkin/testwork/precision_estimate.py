"""Floor plus proportional precision from anything that was assayed more than once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from leachkin.testwork.records import Array

FEWEST_DEGREES = 3  #: below which no precision is given
DEGREES_FOR_FLOOR = 8  #: below which the floor is not told from the part
#: Levels that differ by less than this factor do not tell the floor from the part.
_APART = 3.0


@dataclass(frozen=True)
class DuplicatePrecision:
    """Standard deviation of one assay as floor + proportional * value.

    Attributes
    ----------
    floor, proportional : float
        The floor in the unit of the assays.
    pairs : int
        Pairs, or degrees of freedom of larger groups.
    """

    floor: float
    proportional: float
    pairs: int

    @property
    def relative_error(self) -> float:
        """Relative standard error of the precision itself, 1/sqrt(2 degrees of freedom)."""
        return float(1.0 / np.sqrt(2.0 * self.pairs))


def precision_of_groups(groups: Sequence[ArrayLike]) -> DuplicatePrecision | None:
    """Return the precision of one assay from groups of assays of the same material.

    Duplicates are groups of two, a standard that is assayed with every batch is one large group,
    and so are blanks, whose level is near 0: they tell the floor. Maximum likelihood of normal
    errors about each group's mean, with its degrees of freedom.

    Parameters
    ----------
    groups : sequence of array_like
        Assays in one unit; those that are not finite do not count.

    Returns
    -------
    DuplicatePrecision or None
        None with fewer than three degrees of freedom, or where nothing differs. The floor is 0
        where too few groups, or too like levels, cannot tell it.

    Examples
    --------
    >>> found = precision_of_groups([[1.00, 1.02], [2.00, 2.04], [4.00, 4.08]])
    >>> found.floor, round(found.proportional, 3)
    (0.0, 0.014)
    """
    cleaned = [a[np.isfinite(a)] for a in (np.asarray(g, dtype=float).ravel() for g in groups)]
    cleaned = [a for a in cleaned if a.size > 1]
    level = np.array([max(float(a.mean()), 0.0) for a in cleaned])
    squares = np.array([float(((a - a.mean()) ** 2).sum()) for a in cleaned])
    degrees = np.array([a.size - 1 for a in cleaned], dtype=float)
    return precision_of_squares(level, squares, degrees)


def precision_of_squares(level: Array, squares: Array, degrees: Array) -> DuplicatePrecision | None:
    """Return the precision from levels, sums of squares about them, and degrees of freedom."""
    total = float(degrees.sum())
    if total < FEWEST_DEGREES or not squares.any() or not level.any():
        return None
    above = level > 0.0
    relative = float(np.sqrt((squares[above] / level[above] ** 2).sum() / degrees[above].sum()))
    told = total >= DEGREES_FOR_FLOOR and level.max() > _APART * level.min()
    if not told:
        return DuplicatePrecision(0.0, relative, int(total))
    floor, part = _most_likely(level, squares, degrees)
    return DuplicatePrecision(floor, part, int(total))


def _most_likely(level: Array, squares: Array, degrees: Array) -> tuple[float, float]:
    """Floor and part of the greatest likelihood, both from 0 up."""
    from scipy.optimize import minimize

    scale = float(np.median(level[level > 0.0]))
    spread = float(np.sqrt(squares.sum() / degrees.sum())) / scale

    def cost(parameters: Array) -> float:
        sd = np.abs(parameters[0]) * scale + np.abs(parameters[1]) * level
        sd = np.maximum(sd, 1e-12 * scale)
        return float(np.sum(degrees * np.log(sd) + squares / (2.0 * sd**2)))

    starts = ([0.1 * spread, spread], [spread, 0.1 * spread], [0.0, spread], [spread, 0.0])
    options = {"xatol": 1e-7, "fatol": 1e-9, "maxiter": 2000}
    fits = [minimize(cost, s, method="Nelder-Mead", options=options) for s in starts]
    best = np.abs(min(fits, key=lambda fit: float(fit.fun)).x)
    return float(best[0]) * scale, float(best[1])
