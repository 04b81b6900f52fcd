"""Limits of detection from blanks.

Currie (1968), Anal. Chem. 40, 586; Currie (1995), Pure Appl. Chem. 67, 1699.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from leachkin.inference import student_multiplier

#: Chance of either error: a blank called metal, metal at the limit called a blank.
ERROR_CHANCE = 0.05
_FEWEST = 2


@dataclass(frozen=True)
class DetectionLimit:
    """What blanks say about the smallest assay that means anything.

    Attributes
    ----------
    blanks : int
        Blanks with a value.
    below : int
        Blanks below the laboratory's own limit: they have no value and tell no spread.
    mean, sd : float
    critical : float
        An assay above it is more than a blank.
    detection : float
        The content whose assay is above the critical level 95 times of 100.
    """

    blanks: int
    below: int
    mean: float
    sd: float
    critical: float
    detection: float


def detection_limit(
    blanks: ArrayLike, below: int = 0, chance: float = ERROR_CHANCE
) -> DetectionLimit | None:
    """Return the critical level and the limit of detection of a single assay.

    Parameters
    ----------
    blanks : array_like, shape (n,)
        Blanks that were not corrected for a blank, in one unit.
    below : int
        Further blanks that were below a limit.
    chance : float
        Of either error.

    Returns
    -------
    DetectionLimit or None
        None with fewer than two blanks that have a value, or where none differs. With the spread
        known exactly the two lie 1.645 and 3.29 standard deviations above the mean of the blanks;
        with few blanks Student's t and the error of the mean widen them.

    Notes
    -----
    ``critical = mean + t s sqrt(1 + 1/n)``; ``detection = mean + 2 t s sqrt(1 + 1/n)``, t of one
    side with n - 1 degrees of freedom.

    Examples
    --------
    >>> found = detection_limit([0.8, 1.2, 1.0, 0.9, 1.1])
    >>> round(found.critical, 2), round(found.detection, 2)
    (1.37, 1.74)
    """
    values = np.asarray(blanks, dtype=float).ravel()
    values = values[np.isfinite(values)]
    if values.size < _FEWEST or np.ptp(values) == 0.0:
        return None
    mean, sd = float(values.mean()), float(values.std(ddof=1))
    t = student_multiplier(1.0 - chance, values.size - 1, sides=1)
    reach = t * sd * float(np.sqrt(1.0 + 1.0 / values.size))
    return DetectionLimit(int(values.size), below, mean, sd, mean + reach, mean + 2.0 * reach)
