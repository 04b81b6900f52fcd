"""Bootstrap by group: whole groups (bottles) drawn again with replacement and fitted again.

Readings of one bottle share its charge and its errors, so bottles are drawn and not readings
[efron1993].
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.inference.distributions import check_level
from leachkin.inference.estimate import Interval
from leachkin.problems import argument_error

Array = NDArray[np.float64]
Refit = Callable[[tuple[int, ...]], Mapping[str, float] | None]

#: Fewer groups than this cannot show how groups differ.
LEAST_GROUPS = 4
#: Resamples that must lie beyond each end of an interval.
LEAST_BEYOND = 5
#: Below this share of resamples that gave a quantity, those that did are a selection.
LEAST_SHARE = 0.5


@dataclass(frozen=True)
class Bootstrap:
    """What resamples gave.

    Attributes
    ----------
    names : tuple of str
    values : ndarray, shape (p,)
        Of the groups as they are.
    draws : ndarray, shape (converged, p)
        One row a resample that converged; NaN where it did not hold that quantity.
    groups, asked : int
        Groups, and resamples asked for.
    """

    names: tuple[str, ...]
    values: Array
    draws: Array
    groups: int
    asked: int

    @property
    def converged(self) -> int:
        """How many resamples converged."""
        return int(self.draws.shape[0])

    def gave(self, name: str) -> int:
        """Return how many resamples gave a quantity."""
        return int(np.isfinite(self._column(name)).sum())

    def interval(self, name: str, level: float = 0.95) -> Interval:
        """Return the percentile interval of a quantity, or the reason why there is none."""
        check_level(level)
        column = self._column(name)
        column = column[np.isfinite(column)]
        value = float(self.values[self.names.index(name)])
        why = self._why_none(column.size, level)
        if why:
            return Interval(value, None, None, None, level, "none", why)
        low, high = np.quantile(column, [0.5 * (1.0 - level), 0.5 * (1.0 + level)])
        method = (
            f"bootstrap of {self.groups} groups, {column.size} of {self.asked} resamples gave it"
        )
        error = float(column.std(ddof=1))
        return Interval(value, error, float(low), float(high), level, method)

    def _column(self, name: str) -> Array:
        if name not in self.names:
            raise argument_error("name", name, ", ".join(self.names))
        return np.asarray(self.draws[:, self.names.index(name)])

    def _why_none(self, count: int, level: float) -> str:
        if self.groups < LEAST_GROUPS:
            return f"{self.groups} groups are too few to draw again: {LEAST_GROUPS} or more"
        if count < LEAST_SHARE * self.asked:
            return f"only {count} of {self.asked} resamples gave it"
        needed = int(np.ceil(2.0 * LEAST_BEYOND / (1.0 - level) - 1e-9))
        if count < needed:
            return f"{count} resamples gave it, {needed} are needed at this level"
        return ""


def bootstrap_intervals(refit: Refit, groups: int, n: int, seed: int) -> Bootstrap:
    """Return n refits of groups drawn with replacement.

    Parameters
    ----------
    refit : callable
        Positions of groups (with repeats) -> natural values by name, or None where the fit did
        not converge. A name may be missing where a resample does not hold it.
    groups : int
    n, seed : int
        Resamples, and the seed of the draws.

    Returns
    -------
    Bootstrap

    Raises
    ------
    InputProblems
        Where the groups as they are could not be fitted, or numbers below 1.

    Notes
    -----
    With few groups percentile intervals are somewhat short, by about sqrt((groups - 1)/groups).
    """
    if groups < 1 or n < 1:
        raise argument_error("n", f"{n} resamples of {groups} groups", "1 or more of each")
    whole = refit(tuple(range(groups)))
    if whole is None:
        raise argument_error(
            "refit", "groups whose fit does not converge", "a fit that does before it is resampled"
        )
    names = tuple(whole)
    generator = np.random.default_rng(seed)
    picks = generator.integers(groups, size=(n, groups))
    found = (refit(tuple(int(i) for i in np.sort(pick))) for pick in picks)
    rows = [[one.get(name, np.nan) for name in names] for one in found if one is not None]
    draws = np.array(rows, dtype=np.float64).reshape(-1, len(names))
    return Bootstrap(names, np.array([whole[name] for name in names]), draws, groups, n)
