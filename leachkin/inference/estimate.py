"""What a least-squares fit found, with intervals or the reason why there is none."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.inference.distributions import normal_multiplier, student_multiplier
from leachkin.inference.scales import Scale, natural_slope, to_natural

Array = NDArray[np.float64]
State = Literal["free", "at its low bound", "at its high bound", "not held"]

#: A standard error of a logarithm above this says no more than an order of magnitude.
LARGEST_LOG_ERROR = 2.0


@dataclass(frozen=True)
class Interval:
    """An estimate on its natural scale, with what can be said about its uncertainty.

    low or high is None on the side where nothing can be said; ``why_not`` then says why.
    """

    value: float
    standard_error: float | None
    low: float | None
    high: float | None
    level: float
    method: str
    why_not: str = ""


@dataclass(frozen=True)
class Estimate:
    """The result of :func:`leachkin.inference.least_squares`.

    Attributes
    ----------
    names : tuple of str
    scales : tuple of "linear", "log", "logit"
    vector : ndarray, shape (p,)
        On the fitted scales.
    covariance : ndarray, shape (p, p)
        Of the fitted vector, widening included; zero rows where a quantity is not free.
    states, reasons : tuple of str
        Why a quantity is not free, "" where it is.
    reach : ndarray, shape (p,)
        For one at a bound: how far its natural value may lie from there at the given level for a
        unit allowance of the sum of squares; NaN elsewhere.
    residuals : ndarray, shape (n,)
    jacobian : ndarray, shape (n, p)
    sum_of_squares : float
    degrees_of_freedom : int
        Residuals less quantities that are free.
    stated : bool
        True where residuals are in units of stated standard deviations: normal intervals.
    widening : float
        Factor on the standard errors because the scatter is larger than stated; 1 for none.
    converged : bool
    message : str
    evaluations : int
    """

    names: tuple[str, ...]
    scales: tuple[Scale, ...]
    vector: Array
    covariance: Array
    states: tuple[State, ...]
    reasons: tuple[str, ...]
    residuals: Array
    jacobian: Array
    sum_of_squares: float
    degrees_of_freedom: int
    stated: bool
    widening: float
    converged: bool
    message: str
    evaluations: int

    @property
    def student_degrees(self) -> int | None:
        """Degrees of freedom of t intervals and draws; None where they are normal."""
        return None if self.stated and self.widening == 1.0 else self.degrees_of_freedom

    @property
    def scatter_variance(self) -> float:
        """Variance of one residual that the intervals use."""
        if self.stated:
            return self.widening**2
        return self.sum_of_squares / max(self.degrees_of_freedom, 1)

    def natural(self, j: int) -> float:
        """Return quantity j on its natural scale."""
        return float(to_natural(self.scales[j], self.vector[j]))

    def standard_error(self, j: int) -> float | None:
        """Return the standard error of quantity j on its natural scale, by its slope there."""
        if not self._has_interval(j):
            return None
        slope = float(natural_slope(self.scales[j], self.vector[j]))
        return float(np.sqrt(self.covariance[j, j])) * slope

    def multiplier(self, level: float, sides: int = 2) -> float:
        """Return the normal or Student multiplier of the intervals."""
        freedom = self.student_degrees
        if freedom is None:
            return normal_multiplier(level, sides)
        return student_multiplier(level, freedom, sides)

    def interval(self, j: int, level: float = 0.95) -> Interval:
        """Return the interval of quantity j, made on the fitted scale and carried back.

        Symmetric intervals in a logarithm are ratios; those of a share stay between 0 and 1.
        """
        value = self.natural(j)
        if not self._has_interval(j):
            return self._without(j, value, level)
        half = self.multiplier(level) * float(np.sqrt(self.covariance[j, j]))
        ends = to_natural(self.scales[j], self.vector[j] + half * np.array([-1.0, 1.0]))
        return Interval(
            value, self.standard_error(j), float(ends[0]), float(ends[1]), level, self.method
        )

    @property
    def method(self) -> str:
        """How intervals were made, in words."""
        if self.student_degrees is None:
            return "linearised, normal, stated precision"
        return f"linearised, Student t with {self.degrees_of_freedom} degrees of freedom"

    def _has_interval(self, j: int) -> bool:
        if not self.converged or self.states[j] != "free" or self.degrees_of_freedom < 1:
            return False
        return self.scales[j] == "linear" or self.covariance[j, j] < LARGEST_LOG_ERROR**2

    def _without(self, j: int, value: float, level: float) -> Interval:
        low = high = None
        at_bound = self.states[j] in ("at its low bound", "at its high bound")
        if self.converged and self.degrees_of_freedom > 0 and at_bound:
            low, high = self._one_sided(j, value, level)
        method = "one-sided, linearised" if low is not None or high is not None else "none"
        return Interval(value, None, low, high, level, method, self._reason(j))

    def _one_sided(self, j: int, value: float, level: float) -> tuple[float | None, float | None]:
        from leachkin.inference.covariance import one_sided_reach

        inward = 1.0 if self.states[j] == "at its low bound" else -1.0
        free = [i for i, state in enumerate(self.states) if state == "free"]
        slope = float(natural_slope(self.scales[j], self.vector[j]))
        column = inward * self.jacobian[:, j] / slope
        allowance = self.multiplier(level, sides=1) ** 2 * self.scatter_variance
        reach = one_sided_reach(self.residuals, self.jacobian[:, free], column, allowance)
        end = value + inward * reach
        if not _possible(self.scales[j], end):
            return None, None
        return (None, end) if inward > 0 else (end, None)

    def _reason(self, j: int) -> str:
        if not self.converged:
            return "the fit did not converge"
        if self.reasons[j]:
            return self.reasons[j]
        if self.degrees_of_freedom < 1:
            return "as many quantities as points: no scatter to judge by"
        return "the data say no more than its order of magnitude"


def _possible(scale: Scale, value: float) -> bool:
    """Return whether a natural value can stand on a scale: a share lies between 0 and 1."""
    if scale == "linear":
        return bool(np.isfinite(value))
    return bool(np.isfinite(value)) and value > 0.0 and (scale == "log" or value < 1.0)
