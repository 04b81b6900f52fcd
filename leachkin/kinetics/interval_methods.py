"""One way to ask for the intervals of a fit, whatever the method; each interval names it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from leachkin.errors import InputProblems
from leachkin.inference import from_natural
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_values import quantity_names
from leachkin.kinetics.intervals import profile_intervals
from leachkin.kinetics.posterior import posterior_tests
from leachkin.kinetics.resampled import bootstrap_fit, bootstrap_parameter
from leachkin.problems import unknown_name

Progress = Callable[[int, int], None]

INTERVAL_METHODS = ("linearised", "profile", "bootstrap", "posterior")
#: Ends that lie apart by more than this share of the linearised half width are said.
DIFFER_SHARE = 0.2


def fit_with_intervals(
    fit: FitResult,
    method: str,
    *,
    seed: int = 1,
    resamples: int = 400,
    most_steps: int = 20000,
    progress: Progress | None = None,
) -> FitResult:
    """Return a fit with the intervals of its parameters made by a method.

    Parameters
    ----------
    fit : FitResult
        Of ``fit_tests``, with linearised intervals. One that did not converge comes back as it is.
    method : "linearised", "profile", "bootstrap" or "posterior"
    seed : int
        Of the resamples and of the walkers.
    resamples, most_steps : int
        Of the bootstrap by bottle, and of the posterior.
    progress : callable, optional
        Called with (done, all).

    Returns
    -------
    FitResult
        Heads keep their linearised intervals. Linearised intervals are checked by profile; where a
        method differs from the linearised one the parameter's ``remark`` says so. ``.draw`` gives
        draws of the posterior where that was asked for; by the other methods it stays with the
        covariance. ``warnings`` say how it went.

    Raises
    ------
    InputProblems
        For an unknown method.
    MissingExtraError
        For a posterior without its extra.
    """
    if method not in INTERVAL_METHODS:
        raise InputProblems([unknown_name("method", method, list(INTERVAL_METHODS))])
    if not fit.converged or not fit.names:
        return fit
    if method == "linearised":
        others = {p.name: p for p in profile_intervals(fit)}
        return _checked(fit, others)
    if method == "profile":
        return _replaced(fit, {p.name: p for p in profile_intervals(fit)}, ())
    if method == "bootstrap":
        drawn = bootstrap_fit(fit, n=resamples, seed=seed, progress=progress)
        found = {name: bootstrap_parameter(fit, drawn, name) for name in drawn.names}
        said = (
            f"bootstrap of {drawn.groups} tests: {drawn.converged} of {drawn.asked} resamples "
            "converged",
        )
        return _replaced(fit, found, said)
    posterior = posterior_tests(fit, seed=seed, most_steps=most_steps, progress=progress)
    found = {p.name: p for p in posterior.parameters()}
    said = (f"posterior: {posterior.said()}",)
    return replace(_replaced(fit, found, said), sampled=posterior.sampled)


def _checked(fit: FitResult, by_profile: dict[str, Parameter]) -> FitResult:
    """Return a fit whose linearised intervals say where the profile differs."""
    parameters = tuple(
        replace(p, remark=f"profile differs: {_ends(by_profile[p.name])}")
        if p.name in by_profile and intervals_differ(fit, p, by_profile[p.name])
        else p
        for p in fit.parameters
    )
    return replace(fit, parameters=parameters)


def _replaced(fit: FitResult, found: dict[str, Parameter], said: tuple[str, ...]) -> FitResult:
    """Return a fit with other intervals, which say where they differ from the linearised ones."""
    parameters = tuple(
        _beside(fit, p, found[p.name]) if p.name in found else p for p in fit.parameters
    )
    return replace(fit, parameters=parameters, warnings=(*fit.warnings, *said))


def _beside(fit: FitResult, linearised: Parameter, other: Parameter) -> Parameter:
    """Return the other interval, with the reason of the fit where both lack the same end."""
    if intervals_differ(fit, linearised, other):
        return replace(other, remark=f"differs from linearised: {_ends(linearised)}")
    lacking = None in (linearised.low, linearised.high)
    if lacking and linearised.why_no_interval:
        return replace(other, why_no_interval=linearised.why_no_interval)
    return other


def intervals_differ(fit: FitResult, linearised: Parameter, other: Parameter) -> bool:
    """Return whether another interval tells something else than the linearised one.

    An end that one of them has and the other has not, or ends that lie apart by more than a fifth
    of the linearised half width, on the scale of the fit.
    """
    pairs = ((linearised.low, other.low), (linearised.high, other.high))
    if any((one is None) != (two is None) for one, two in pairs):
        return True
    at = quantity_names(fit.layout).get(linearised.name)
    if at is None or linearised.low is None or linearised.high is None:
        return False
    scale = fit.layout.free[at].scale
    ends = from_natural(scale, np.array(pairs, dtype=np.float64))
    half = 0.5 * float(ends[1, 0] - ends[0, 0])
    return bool(np.abs(ends[:, 1] - ends[:, 0]).max() > DIFFER_SHARE * half)


def _ends(parameter: Parameter) -> str:
    low, high = parameter.low, parameter.high
    if low is None and high is None:
        return f"none ({parameter.why_no_interval})"
    if low is None:
        return f"up to {high:.4g}"
    return f"from {low:.4g}" if high is None else f"{low:.4g} to {high:.4g}"
