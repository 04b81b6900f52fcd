"""How each test alone would have the times of a fit: one factor a test, for pictures and checks.

All times of the law are multiplied by one factor and the test's own head is fitted with it; law,
shares of the resistances and ultimate extraction stay as all tests together gave them. Where a
covariate is well described, the factors do not follow it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import LeastSquaresProblem, held_covariance, least_squares
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_layout import Layout, Quantity
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.other_laws import ClockLaw
from leachkin.kinetics.rate_law import RateLaw
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Beyond this factor either way a test says nothing of its time.
LARGEST_LN_FACTOR = 5.0


@dataclass(frozen=True)
class TimeFactor:
    """The time of one test over that of the fit.

    Attributes
    ----------
    test : str
    size_mm : float or None
        Mass mean of the test.
    temperature_K : float
    reagent_g_per_L : float or None
    factor, low, high : float or None
        None where the test does not tell; ``why`` says why.
    """

    test: str
    size_mm: float | None
    temperature_K: float
    reagent_g_per_L: float | None
    factor: float | None
    low: float | None
    high: float | None
    why: str = ""


def time_factors(
    fit: FitResult,
    observed: Sequence[Observed],
    balances: Mapping[str, ReagentBalance] | None = None,
) -> tuple[TimeFactor, ...]:
    """Return the time of each test alone over that of all tests together.

    Parameters
    ----------
    fit : FitResult
        Of ``fit_tests``, converged.
    observed : sequence of Observed
        The tests that were fitted.
    balances : mapping of test to ReagentBalance, optional
        As given to the fit.

    Returns
    -------
    tuple of TimeFactor
        Intervals by the scatter and the level of the fit; what all tests share is taken as known.

    Raises
    ------
    InputProblems
        For a test that was not fitted.
    """
    fitted = set(fit.heads_kg_per_t)
    for test in observed:
        if test.value.size and test.test not in fitted:
            raise argument_error("observed", f"test {test.test!r}", ", ".join(sorted(fitted)))
    return tuple(_factor(fit, test, balances or {}) for test in observed if test.value.size)


def _factor(fit: FitResult, test: Observed, balances: Mapping[str, ReagentBalance]) -> TimeFactor:
    problem = _problem(fit, test, balances)
    found = least_squares(problem)
    held = held_covariance(found.jacobian)
    at_end = abs(float(found.vector[0])) > 0.999 * LARGEST_LN_FACTOR
    size = None if test.sizes is None else float(test.sizes.mass_mean_mm)
    where = (test.test, size, test.temperature_K, test.reagent_g_per_L)
    if not found.converged or not held.held[0] or at_end:
        return TimeFactor(*where, None, None, None, "its readings do not tell its time")
    sd = float(np.sqrt(held.covariance[0, 0] * fit.estimate.scatter_variance))
    half = fit.estimate.multiplier(fit.level) * sd if fit.degrees_of_freedom > 0 else np.nan
    ends = np.exp(float(found.vector[0]) + half * np.array([-1.0, 0.0, 1.0]))
    if not np.isfinite(ends).all():
        return TimeFactor(*where, float(ends[1]), None, None, "no scatter to judge by")
    return TimeFactor(*where, float(ends[1]), float(ends[0]), float(ends[2]))


def _problem(
    fit: FitResult, test: Observed, balances: Mapping[str, ReagentBalance]
) -> LeastSquaresProblem:
    """Return the problem of one test: the logarithm of its factor, and its head if that is free."""
    layout = _of_one_test(fit, test.test)
    mine = {name: b for name, b in balances.items() if name == test.test}
    design = FitDesign.of(layout, (test,), mine)
    times = np.array([float(q.role == "time") for q in layout.free])
    signs = times * np.array([-1.0 if q.which.endswith("clock") else 1.0 for q in layout.free])
    heads = [q for q in layout.free if q.role == "head"]
    start = np.array([q.start for q in layout.free])
    into = np.stack([signs, *np.eye(len(layout.free))[times == 0.0]])

    def evaluate(part: Array) -> tuple[Array, Array]:
        vector = start + (part - own_start) @ into
        residuals, jacobian = design.residuals_and_jacobian(vector)
        return residuals, jacobian @ into.T

    own_start = np.array([0.0, *(q.start for q in heads)])
    return LeastSquaresProblem(
        names=("factor", *(q.name for q in heads)),
        start=own_start,
        low=np.array([-LARGEST_LN_FACTOR, *(q.low for q in heads)]),
        high=np.array([LARGEST_LN_FACTOR, *(q.high for q in heads)]),
        residuals_and_jacobian=evaluate,
        stated=fit.estimate.stated,
    )


def _of_one_test(fit: FitResult, test: str) -> Layout:
    """Return the layout in which only the times and the head of one test are free."""
    full = fit.layout.expand(fit.vector)
    kept: list[Quantity] = []
    for quantity, value in zip(fit.layout.quantities, full.tolist(), strict=True):
        if quantity.role == "time":
            kept.append(replace(quantity, start=value, free=True, prior_sd=None))
        elif quantity.role != "head":
            kept.append(replace(quantity, start=value, free=False))
        elif quantity.which == test:
            # its assay stays where it is: the start of a head is what is known of it beforehand
            kept.append(quantity if quantity.free else replace(quantity, start=value))
    return replace(fit.layout, quantities=tuple(kept))


def total_time(
    law: RateLaw,
    size_mm: Array,
    temperature_K: float | None = None,
    reagent_g_per_L: float | None = None,
) -> Array:
    """Return the time for complete conversion of grains, all resistances together [h].

    Of a law with one clock it is 1/k, of two fractions that of the first.

    Parameters
    ----------
    law : RateLaw
    size_mm : ndarray, shape (c,)
    temperature_K, reagent_g_per_L : float, optional
        The reference where left out.

    Returns
    -------
    ndarray, shape (c,)
    """
    times = law.times(size_mm, temperature_K, reagent_g_per_L)
    if isinstance(times, ClockLaw):
        return np.asarray(times.tau)
    parts = [np.asarray(getattr(times, one.kind)) for one in law.resistances]
    return np.asarray(np.sum(np.broadcast_arrays(*parts), axis=0))
