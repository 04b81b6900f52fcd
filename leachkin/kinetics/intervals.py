"""Intervals of a fit by profile likelihood: they do not rest on a straightened model."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from leachkin.inference import LeastSquaresProblem, profile_interval
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_values import quantity_names, with_interval
from leachkin.problems import argument_error


def design_of(fit: FitResult) -> FitDesign:
    """Return the residual function of a fit.

    Raises
    ------
    InputProblems
        For a fit that does not carry it.
    """
    if fit.design is None:
        raise argument_error("fit", "a fit without its design", "a result of fit_tests")
    return fit.design


def fit_problem(fit: FitResult) -> LeastSquaresProblem:
    """Return the least-squares problem that a fit solved, started at its minimum.

    Raises
    ------
    InputProblems
        For a fit that does not carry its design.
    """
    design = design_of(fit)
    free = fit.layout.free
    return LeastSquaresProblem(
        names=tuple(q.name for q in free),
        start=fit.vector,
        low=np.array([q.low for q in free]),
        high=np.array([q.high for q in free]),
        residuals_and_jacobian=design.residuals_and_jacobian,
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
        names = list(quantity_names(fit.layout))
    problem = fit_problem(fit)
    found = []
    for name in names:
        parameter = fit.parameter(name)
        if name in free:
            interval = profile_interval(problem, fit.estimate, free[name], asked)
            parameter = with_interval(parameter, interval, error=False)
        found.append(parameter)
    return tuple(found)
