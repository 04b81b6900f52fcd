"""Control charts of standards and duplicates over jobs (Shewhart 1931), and their signals.

Individuals with moving ranges where a standard is assayed once a batch; ranges of pairs for
duplicates. Signals by the zone rules of the Western Electric handbook (1956).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from leachkin.problems import argument_error
from leachkin.testwork.records import Array

#: Mean and standard deviation of the range of two normal values, over their own: 2/sqrt(pi) ...
d2 = 2.0 / np.sqrt(np.pi)
d3 = np.sqrt(2.0 - 4.0 / np.pi)
#: Points below which limits are shown as trial limits.
FEWEST_FOR_LIMITS = 8

BEYOND = "beyond the action limit"
TWO_OF_THREE = "two of three beyond the warning limit"
FOUR_OF_FIVE = "four of five beyond one standard deviation"
EIGHT = "eight in a row on one side"


@dataclass(frozen=True)
class ControlChart:
    """A chart of single values.

    Attributes
    ----------
    value : ndarray, shape (n,)
        In the order of time.
    centre, sd : float
        ``sd`` is that between neighbours: the mean moving range over 1.128.
    warning, action : (low, high)
        2 and 3 standard deviations from the centre.
    in_sd : ndarray, shape (n,)
    signals : tuple of str
        "" where a point gives none.
    is_trial : bool
        True with fewer than eight points: the limits will still move.
    """

    value: Array
    centre: float
    sd: float
    warning: tuple[float, float]
    action: tuple[float, float]
    in_sd: Array
    signals: tuple[str, ...]
    is_trial: bool


@dataclass(frozen=True)
class RangeChart:
    """A chart of the ranges of pairs, relative to their means.

    Attributes
    ----------
    relative_range : ndarray, shape (n,)
    centre : float
    warning, action : float
        Upper limits: 1 + 2 d3/d2 and 1 + 3 d3/d2 (3.267) times the centre.
    signals : tuple of str
    """

    relative_range: Array
    centre: float
    warning: float
    action: float
    signals: tuple[str, ...]

    @property
    def relative_sd(self) -> float:
        """Relative standard deviation of one assay: the mean range over 1.128."""
        return float(self.centre / d2)


def individuals_chart(
    values: ArrayLike, target: float | None = None, sd: float | None = None
) -> ControlChart | None:
    """Return the chart of values that come one at a time.

    Parameters
    ----------
    values : array_like, shape (n,)
        In the order of time.
    target : float, optional
        Certified value; the mean where not given.
    sd : float, optional
        Stated standard deviation of one assay; from the moving ranges where not given.

    Returns
    -------
    ControlChart or None
        None with fewer than two values, or where no two neighbours differ and no sd is given.

    Raises
    ------
    InputProblems
        If a value is not finite or the sd not above 0.
    """
    x = np.asarray(values, dtype=float).ravel()
    if not np.isfinite(x).all():
        raise argument_error("values", "a value that is not finite", "finite numbers")
    if sd is not None and not sd > 0.0:
        raise argument_error("sd", f"{sd:g}", "above 0")
    if x.size < 2:
        return None
    spread = sd if sd is not None else float(np.abs(np.diff(x)).mean() / d2)
    if spread == 0.0:
        return None
    centre = float(x.mean()) if target is None else float(target)
    z = (x - centre) / spread
    return ControlChart(
        x,
        centre,
        spread,
        (centre - 2.0 * spread, centre + 2.0 * spread),
        (centre - 3.0 * spread, centre + 3.0 * spread),
        z,
        zone_signals(z),
        x.size < FEWEST_FOR_LIMITS,
    )


def zone_signals(in_sd: ArrayLike) -> tuple[str, ...]:
    """Return what each point signals with those before it, "" for nothing.

    One point beyond 3 standard deviations; two of three beyond 2, four of five beyond 1 and eight
    in a row, each on one side.

    Examples
    --------
    >>> zone_signals([0.1, 2.4, 0.3, 2.2, -3.5])[3:]
    ('two of three beyond the warning limit', 'beyond the action limit')
    """
    z = np.asarray(in_sd, dtype=float)
    found = []
    for i in range(z.size):
        side = np.sign(z[i])
        near = side * z[: i + 1][::-1]
        signal = ""
        if near[0] > 3.0:
            signal = BEYOND
        elif near[0] > 2.0 and (near[:3] > 2.0).sum() >= 2:
            signal = TWO_OF_THREE
        elif near[0] > 1.0 and (near[:5] > 1.0).sum() >= 4:
            signal = FOUR_OF_FIVE
        elif near.size >= 8 and (near[:8] > 0.0).all():
            signal = EIGHT
        found.append(signal)
    return tuple(found)


def range_chart(first: ArrayLike, second: ArrayLike) -> RangeChart | None:
    """Return the chart of pairs of duplicates by their relative ranges.

    Parameters
    ----------
    first, second : array_like, shape (n,)
        In the order of time, one unit; pairs whose mean is not above 0 do not count.

    Returns
    -------
    RangeChart or None
        None with fewer than two pairs, or where no pair differs.
    """
    one, other = np.asarray(first, dtype=float), np.asarray(second, dtype=float)
    good = np.isfinite(one + other) & (one + other > 0.0)
    relative = np.abs(one - other)[good] / (0.5 * (one + other)[good])
    if relative.size < 2 or not relative.any():
        return None
    centre = float(relative.mean())
    warning, action = (centre * (1.0 + k * d3 / d2) for k in (2.0, 3.0))
    signals = tuple(BEYOND if r > action else "" for r in relative)
    return RangeChart(relative, centre, float(warning), float(action), signals)
