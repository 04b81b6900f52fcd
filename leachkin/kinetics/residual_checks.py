"""Whether residuals look like chance: runs of one sign, and a trend with time."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics.fit_result import FitResult
from leachkin.problems import argument_error

Array = NDArray[np.float64]

#: With no more residuals of one sign than this the chance is counted, not approximated.
EXACT_UP_TO = 20
#: Points a trend needs.
LEAST_POINTS = 4


@dataclass(frozen=True)
class RunsTest:
    """The Wald-Wolfowitz test of signs in order.

    Attributes
    ----------
    runs, positive, negative : int
        Zeros are left out.
    expected : float
        Runs expected by chance.
    chance : float
        Two-sided: twice the smaller tail.
    method : str
        "exact", "normal", or "none" where all signs agree and nothing can be said.
    """

    runs: int
    positive: int
    negative: int
    expected: float
    chance: float
    method: str


@dataclass(frozen=True)
class ResidualChecks:
    """Runs within the tests and the trend of measured less fitted with time.

    Attributes
    ----------
    runs : RunsTest
        Over all tests: runs are counted within each and added.
    slope, slope_error : float
        Of measured less fitted, in standard deviations, against the logarithm of time.
    trend_chance : float
        Of so large a slope. Approximate, as the fit has used up part of any trend.
    says : str
    """

    runs: RunsTest
    slope: float
    slope_error: float
    trend_chance: float
    says: str


def count_runs(residuals: ArrayLike) -> tuple[int, int, int]:
    """Return (runs, positive, negative) of values in order, zeros left out.

    Examples
    --------
    >>> count_runs([1, 2, -1, -3, 0, 4])
    (3, 3, 2)
    """
    values = np.asarray(residuals, dtype=np.float64)
    if values.ndim != 1 or not np.isfinite(values).all():
        raise argument_error("residuals", f"shape {values.shape}", "a list of finite numbers")
    signs = np.sign(values[values != 0])
    runs = int(np.sum(signs[1:] != signs[:-1])) + int(signs.size > 0)
    return runs, int(np.sum(signs > 0)), int(np.sum(signs < 0))


def chance_of_runs(runs: int, positive: int, negative: int) -> float:
    """Return the exact chance of just so many runs [wald_wolfowitz1940].

    Examples
    --------
    >>> round(6 * chance_of_runs(2, 2, 2), 12)
    2.0
    """

    def split(count: int, parts: int) -> int:
        return math.comb(count - 1, parts - 1) if 1 <= parts <= count else 0

    half = runs // 2
    if runs % 2 == 0:
        ways = 2 * split(positive, half) * split(negative, half)
    else:
        ways = split(positive, half + 1) * split(negative, half)
        ways += split(positive, half) * split(negative, half + 1)
    return ways / math.comb(positive + negative, positive)


def runs_test(residuals: ArrayLike) -> RunsTest:
    """Return the runs test of residuals in order.

    Parameters
    ----------
    residuals : array_like, shape (n,)

    Returns
    -------
    RunsTest
        Exact up to 20 residuals of either sign, by the normal distribution above.

    Raises
    ------
    InputProblems
        For values that are not finite.
    """
    runs, positive, negative = count_runs(residuals)
    if not positive or not negative:
        return RunsTest(runs, positive, negative, float(runs), 1.0, "none")
    mean, variance = _moments(positive, negative)
    if max(positive, negative) > EXACT_UP_TO:
        chance = _normal_chance(runs, mean, variance)
        return RunsTest(runs, positive, negative, mean, chance, "normal")
    every = [chance_of_runs(r, positive, negative) for r in range(positive + negative + 1)]
    tails = (sum(every[: runs + 1]), sum(every[runs:]))
    return RunsTest(runs, positive, negative, mean, min(1.0, 2.0 * min(tails)), "exact")


def pooled_runs(groups: Sequence[ArrayLike]) -> RunsTest:
    """Return the runs test of several lists: runs within each, added; by the normal distribution.

    One list with both signs gives its own exact test.
    """
    counted = [count_runs(group) for group in groups]
    useful = [i for i, (_, positive, negative) in enumerate(counted) if positive and negative]
    if len(useful) == 1:
        return runs_test(groups[useful[0]])
    runs, positive, negative = (sum(c[k] for c in counted) for k in range(3))
    if not useful:
        return RunsTest(runs, positive, negative, float(runs), 1.0, "none")
    moments = np.array([_moments(counted[i][1], counted[i][2]) for i in useful])
    mean, variance = moments.sum(axis=0).tolist()
    chance = _normal_chance(sum(counted[i][0] for i in useful), mean, variance)
    alone = sum(counted[i][0] for i in range(len(counted)) if i not in useful)
    return RunsTest(runs, positive, negative, mean + alone, chance, "normal")


def _moments(positive: int, negative: int) -> tuple[float, float]:
    """Return mean and variance of the number of runs."""
    n, product = positive + negative, 2 * positive * negative
    return 1.0 + product / n, product * (product - n) / (n * n * (n - 1.0))


def _normal_chance(runs: int, mean: float, variance: float) -> float:
    """Return the two-sided chance, half a run nearer to the mean."""
    if variance <= 0.0:
        return 1.0
    away = max(abs(runs - mean) - 0.5, 0.0)
    return math.erfc(away / math.sqrt(2.0 * variance))


def trend(x: ArrayLike, y: ArrayLike) -> tuple[float, float, float]:
    """Return (slope, its standard error, two-sided chance) of a straight line.

    Raises
    ------
    InputProblems
        For fewer than four points or one value of x.
    """
    from scipy.stats import linregress

    abscissa, ordinate = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if abscissa.size < LEAST_POINTS or np.ptp(abscissa) == 0:
        raise argument_error("x", f"{abscissa.size} points", "four or more, not all at one value")
    line = linregress(abscissa, ordinate)
    return float(line.slope), float(line.stderr), float(line.pvalue)


def residual_checks(fit: FitResult, level: float = 0.95) -> ResidualChecks:
    """Return the runs test and the trend with time of a fit's residuals.

    Parameters
    ----------
    fit : FitResult
        Limits ("<" and ">") and the start at time 0 are left out.
    level : float
        Beyond which the words speak of a pattern.

    Returns
    -------
    ResidualChecks
    """
    used = [r for r in fit.residuals if r.bound == 0 and r.time > 0 and r.kind != "tail"]
    names = dict.fromkeys(r.test for r in used)
    groups = [
        [-r.in_sd for r in sorted(used, key=lambda r: r.time) if r.test == name] for name in names
    ]
    runs = pooled_runs(groups)
    slope, error, chance = trend([math.log(r.time) for r in used], [-r.in_sd for r in used])
    return ResidualChecks(runs, slope, error, chance, _words(runs, slope, chance, 1.0 - level))


def _words(runs: RunsTest, slope: float, trend_chance: float, limit: float) -> str:
    said = []
    if runs.chance < limit:
        few = "few" if runs.runs < runs.expected else "many"
        said.append(
            f"{runs.runs} runs of one sign where chance gives {runs.expected:.0f}: too {few}"
        )
    if trend_chance < limit:
        side = "more" if slope > 0 else "less"
        said.append(f"late readings show {side} than the law, early ones the reverse")
    return "; ".join(said) or "no pattern beyond chance"
