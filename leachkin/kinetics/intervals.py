"""Intervals of a fit that do not rest on a straightened model: by profile, and by bottle."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from leachkin.errors import InputProblems
from leachkin.inference import (
    Bootstrap,
    Interval,
    LeastSquaresProblem,
    bootstrap_intervals,
    profile_interval,
)
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.problems import argument_error
from leachkin.testwork import Observed


def fit_problem(fit: FitResult) -> LeastSquaresProblem:
    """Return the least-squares problem that a fit solved, started at its minimum.

    Raises
    ------
    InputProblems
        For a fit that does not carry its design.
    """
    if fit.design is None:
        raise argument_error("fit", "a fit without its design", "a result of fit_tests")
    free = fit.layout.free
    return LeastSquaresProblem(
        names=tuple(q.name for q in free),
        start=fit.vector,
        low=np.array([q.low for q in free]),
        high=np.array([q.high for q in free]),
        residuals_and_jacobian=fit.design.residuals_and_jacobian,
        scales=tuple(q.scale for q in free),
        stated=fit.estimate.stated,
    )


def profile_intervals(
    fit: FitResult, names: Sequence[str] | None = None, level: float | None = None
) -> tuple[Parameter, ...]:
    """Return parameters of a fit with profile likelihood intervals.

    Parameters
    ----------
    fit : FitResult
    names : sequence of str, optional
        Parameters of the fit; all fitted ones but the heads where left out. One that was not
        fitted itself (held, not needed, or made of others) comes back as it stands in the fit.
    level : float, optional
        That of the fit where left out.

    Returns
    -------
    tuple of Parameter
        ``method`` "profile likelihood", or "one-sided, profile likelihood" with the reason.

    Raises
    ------
    InputProblems
        For a name that the fit does not have.
    """
    asked = fit.level if level is None else level
    free = {q.name: j for j, q in enumerate(fit.layout.free)}
    if names is None:
        names = [q.name for q in fit.layout.free if q.role != "head"]
    problem = fit_problem(fit)
    found = []
    for name in names:
        parameter = fit.parameter(name)
        if name in free:
            interval = profile_interval(problem, fit.estimate, free[name], asked)
            parameter = _with_interval(parameter, interval)
        found.append(parameter)
    return tuple(found)


def _with_interval(parameter: Parameter, interval: Interval) -> Parameter:
    return replace(
        parameter,
        standard_error=parameter.standard_error,
        low=interval.low,
        high=interval.high,
        level=interval.level,
        method=interval.method,
        why_no_interval=interval.why_not,
    )


def bootstrap_tests(
    observed: Sequence[Observed], law: str, *, n: int, seed: int, **options: Any
) -> Bootstrap:
    """Return fits of tests drawn again with replacement, all at the reference of the first fit.

    Parameters
    ----------
    observed : sequence of Observed
        Tests (bottles) of one ore and one metal.
    law : str
    n, seed : int
        Resamples, and their seed.
    **options
        As in ``fit_tests``.

    Returns
    -------
    Bootstrap
        Of all fitted parameters but the heads; ``.interval(name)`` gives the percentile interval.
        A resample that lacks a size or a temperature does not give the parameters that need it.

    Raises
    ------
    InputProblems
        As ``fit_tests``, or where the tests as they are do not converge.
    """
    tests = tuple(observed)
    first = fit_tests(tests, law, **options)
    options = {**options, "reference": first.layout.reference}
    whole = _fitted_values(first)

    def refit(picked: tuple[int, ...]) -> Mapping[str, float] | None:
        if picked == tuple(range(len(tests))):
            return whole
        try:
            return _fitted_values(fit_tests(_renamed(tests, picked), law, **options))
        except InputProblems:  # too few readings left, or a fixed= name that is not there
            return None

    return bootstrap_intervals(refit, len(tests), n, seed)


def _renamed(tests: tuple[Observed, ...], picked: tuple[int, ...]) -> tuple[Observed, ...]:
    """Return the tests drawn, repeats under names of their own: each keeps its own head."""
    return tuple(
        replace(tests[i], test=f"{tests[i].test} (draw {k + 1})") for k, i in enumerate(picked)
    )


def _fitted_values(fit: FitResult) -> Mapping[str, float] | None:
    """Return fitted parameters but the heads by name; None where the fit did not converge."""
    if not fit.converged:
        return None
    fitted = (q.name for q in fit.layout.free if q.role != "head")
    return {name: fit.parameter(name).value for name in fitted}
