"""Tests of need between two fitted laws of which one contains the other."""

from __future__ import annotations

from dataclasses import dataclass

from leachkin.inference import chi_square_upper_tail
from leachkin.kinetics.fit_result import FitResult
from leachkin.problems import argument_error


@dataclass(frozen=True)
class NestedTest:
    """Whether the data ask for the larger of two laws.

    Attributes
    ----------
    larger, smaller : str
    kind : str
        "chi-square" where the stated precision explains the scatter, "F" where the scatter was
        estimated from the same data.
    statistic : float
        Fall of the sum of squares (chi-square), or its mean square over the scatter (F).
    extra, degrees_of_freedom : int
        Quantities more in the larger law that the tests tell, and degrees of freedom left there.
    chance : float
        Chance of so large a statistic if the smaller law is true. Conservative for a resistance,
        which cannot be negative.
    """

    larger: str
    smaller: str
    kind: str
    statistic: float
    extra: int
    degrees_of_freedom: int
    chance: float


def f_upper_tail(value: float, extra: int, degrees_of_freedom: int) -> float:
    """Return the chance of an F value at least this large.

    Examples
    --------
    >>> round(f_upper_tail(4.965, 1, 10), 3)
    0.05
    """
    from scipy.special import fdtrc

    return float(fdtrc(extra, degrees_of_freedom, max(value, 0.0)))


def nested_test(larger: FitResult, smaller: FitResult) -> NestedTest:
    """Return the test of a larger law against one it contains, fitted to the same data.

    Parameters
    ----------
    larger, smaller : FitResult

    Returns
    -------
    NestedTest
        Chance 1 where the larger law has dropped its extra part as not needed.

    Raises
    ------
    InputProblems
        If the fits are of different numbers of values, or one did not converge.
    """
    if larger.n_points != smaller.n_points or not (larger.converged and smaller.converged):
        raise argument_error(
            "larger", f"{larger.n_points} values", "two converged fits of the same values"
        )
    extra = round(larger.informed - smaller.informed)
    names = (larger.law_name, smaller.law_name)
    freedom = larger.degrees_of_freedom
    fall = max(smaller.sum_of_squares - larger.sum_of_squares, 0.0)
    estimate = larger.estimate
    known = estimate.stated and estimate.widening == 1.0
    kind = "chi-square" if known else "F"
    if extra < 1 or (not known and freedom < 1):
        return NestedTest(*names, kind, 0.0, max(extra, 0), freedom, 1.0)
    if known:
        chance = chi_square_upper_tail(fall, extra)
        return NestedTest(*names, kind, fall, extra, freedom, chance)
    scatter = max(larger.sum_of_squares / freedom, 1e-300)
    statistic = fall / extra / scatter
    return NestedTest(
        *names, kind, statistic, extra, freedom, f_upper_tail(statistic, extra, freedom)
    )
