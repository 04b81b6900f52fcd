"""Ranking of laws where only the 80 % size of each test is known: the spread is fitted as well."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from leachkin.inference import corrected_aic, schwarz_bic
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.rank import Ranking, rank_by
from leachkin.problems import argument_error
from leachkin.testwork import Observed, SizeDistribution

#: Spreads searched: standard deviation over mean of a log-normal distribution by mass.
SPREAD_BOUNDS = (0.1, 1.6)
SPREAD_STEP = 0.04
SPREAD_FITS = 8
SPREAD_CLASSES = 31
#: Deviate of the normal distribution below which 80 % lies.
DEVIATE_80 = 0.8416212335729143


def log_normal_of_p80(p80_mm: float, spread: float) -> SizeDistribution:
    """Return log-normal classes of which 80 % of the mass passes a size.

    Parameters
    ----------
    p80_mm : float
        Size that 80 % passes [mm].
    spread : float
        Standard deviation over mean.
    """
    median = p80_mm * math.exp(-DEVIATE_80 * math.sqrt(math.log1p(spread**2)))
    return SizeDistribution.log_normal(median, spread, SPREAD_CLASSES)


def rank_tests_by_p80(
    observed: Sequence[Observed],
    p80_mm: Sequence[float],
    laws: Sequence[str] | None = None,
    within: float = 2.0,
    **same: Any,
) -> Ranking:
    """Return laws ranked on all tests, one spread of sizes in every test fitted with each law.

    A spread held at a wrong value looks like another mechanism; fitted, it costs one quantity. The
    sizes are taken as log-normal: where they are not, a wrong law may be named. Sieve if you can.

    Parameters
    ----------
    observed : sequence of Observed
        Their own sizes are not used.
    p80_mm : sequence of float
        Size that 80 % of the mass of each test passes [mm].
    laws, within, **same
        As in ``rank_tests``.

    Returns
    -------
    Ranking
        The warnings of each fit give the spread found.
    """
    sizes = np.asarray(p80_mm, dtype=float)
    if sizes.shape != (len(observed),) or not (np.isfinite(sizes).all() and (sizes > 0).all()):
        raise argument_error("p80_mm", repr(list(p80_mm)), "one finite size above 0 for each test")

    def fit(law: str) -> FitResult:
        return _fit_with_spread(observed, sizes.tolist(), law, same)

    return rank_by(fit, laws, within)


def _fit_with_spread(
    observed: Sequence[Observed], p80_mm: list[float], law: str, same: dict[str, Any]
) -> FitResult:
    from scipy.optimize import minimize_scalar

    fits: dict[float, FitResult] = {}

    def squares(ln_spread: float) -> float:
        spread = math.exp(ln_spread)
        tests = [
            replace(o, sizes=log_normal_of_p80(p80, spread))
            for o, p80 in zip(observed, p80_mm, strict=True)
        ]
        fits[spread] = fit_tests(tests, law, **same)
        return fits[spread].sum_of_squares

    bounds = (math.log(SPREAD_BOUNDS[0]), math.log(SPREAD_BOUNDS[1]))
    options = {"xatol": SPREAD_STEP, "maxiter": SPREAD_FITS}
    minimize_scalar(squares, bounds=bounds, method="bounded", options=options)
    spread, found = min(fits.items(), key=lambda item: item[1].sum_of_squares)
    return _counted(found, spread)


def _counted(fit: FitResult, spread: float) -> FitResult:
    """Return a fit that counts the spread among its quantities and says what it is."""
    squares = fit.sum_of_squares
    count = fit.n_points if fit.design is None else fit.design.residual_count
    asked = round((fit.bic - schwarz_bic(squares, count, 0)) / math.log(count)) + 1
    said = f"spread of sizes within a test, fitted: standard deviation over mean {spread:.2g}"
    return replace(
        fit,
        aicc=corrected_aic(squares, count, asked),
        bic=schwarz_bic(squares, count, asked),
        degrees_of_freedom=fit.degrees_of_freedom - 1,
        warnings=(*fit.warnings, said),
    )
