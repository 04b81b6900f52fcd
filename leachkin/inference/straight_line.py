"""A weighted straight line by exact summation about the weighted mean."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from leachkin.problems import argument_error


@dataclass(frozen=True)
class StraightLine:
    """y = mean_y + slope (x - mean_x), the means weighted.

    Standard errors come from the scatter about the line and are None with two points.
    """

    slope: float
    mean_x: float
    mean_y: float
    slope_standard_error: float | None
    mean_standard_error: float | None
    sum_of_squares: float
    degrees_of_freedom: int
    weight_sum: float
    spread: float

    @property
    def intercept(self) -> float:
        """Value at x = 0."""
        return self.mean_y - self.slope * self.mean_x

    @property
    def intercept_standard_error(self) -> float | None:
        """Standard error of the value at x = 0."""
        if self.slope_standard_error is None or self.mean_standard_error is None:
            return None
        return math.hypot(self.mean_standard_error, self.slope_standard_error * self.mean_x)


def weighted_line(
    x: Sequence[float], y: Sequence[float], weights: Sequence[float] | None = None
) -> StraightLine:
    """Return the weighted least-squares line.

    Parameters
    ----------
    x, y : sequence of float, length n >= 2
    weights : sequence of float, optional
        Inverse variances, known but for a common factor; equal where left out.

    Returns
    -------
    StraightLine
        Slope and means accurate to some 1e-14: sums are exact and centred.

    Raises
    ------
    InputProblems
        With fewer than two different x, or weights that are not above 0.

    Examples
    --------
    >>> line = weighted_line([1.0, 2.0, 3.0], [2.0, 4.0, 6.0])
    >>> line.slope, line.intercept, line.degrees_of_freedom
    (2.0, 0.0, 1)
    """
    w = [1.0] * len(x) if weights is None else [float(v) for v in weights]
    if len(set(x)) < 2 or len(x) != len(y) or len(w) != len(x):
        raise argument_error("x", f"{len(set(x))} different values", "two or more, as many y")
    if not all(v > 0 and math.isfinite(v) for v in w):
        raise argument_error("weights", "one that is not above 0", "finite and above 0")
    total = math.fsum(w)
    mean_x = math.fsum(a * b for a, b in zip(w, x, strict=True)) / total
    mean_y = math.fsum(a * b for a, b in zip(w, y, strict=True)) / total
    dx = [v - mean_x for v in x]
    dy = [v - mean_y for v in y]
    slip_x = math.fsum(a * b for a, b in zip(w, dx, strict=True)) / total
    slip_y = math.fsum(a * b for a, b in zip(w, dy, strict=True)) / total
    spread = math.fsum(a * b * b for a, b in zip(w, dx, strict=True)) - total * slip_x**2
    cross = math.fsum(a * b * c for a, b, c in zip(w, dx, dy, strict=True))
    slope = (cross - total * slip_x * slip_y) / spread
    left = [c - slope * b for b, c in zip(dx, dy, strict=True)]
    squares = math.fsum(a * e * e for a, e in zip(w, left, strict=True))
    freedom = len(w) - 2
    variance = squares / freedom if freedom > 0 else None
    return StraightLine(
        slope=slope,
        mean_x=mean_x,
        mean_y=mean_y,
        slope_standard_error=None if variance is None else math.sqrt(variance / spread),
        mean_standard_error=None if variance is None else math.sqrt(variance / total),
        sum_of_squares=squares,
        degrees_of_freedom=freedom,
        weight_sum=total,
        spread=spread,
    )
