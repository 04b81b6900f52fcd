"""Intervals of the fitted laws by the method that was asked for, and what their pictures need."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from math import ceil
from typing import Any

from leachkin.campaign.stage_results import KineticsStage
from leachkin.errors import InputProblems, LeachkinError, MissingExtraError
from leachkin.kinetics import (
    FitResult,
    fit_with_intervals,
    kinetic_diagnostics,
)
from leachkin.problems import Problem
from leachkin.run_record import stage_seed

#: Resamples of whole bottles: so many at least, and so many beyond both ends together.
RESAMPLES = 400
RESAMPLES_BEYOND = 20
#: Steps of each walker at most.
MOST_STEPS = 20000
#: Where none is asked for, where one cannot be had, and for laws beside the one that is used.
INSTEAD = "profile"
_NONE: tuple[Problem, ...] = ()


def with_intervals(
    stage: KineticsStage, asked: str | None, seed: int, balances: Mapping[str, Any]
) -> tuple[KineticsStage, tuple[Problem, ...]]:
    """Return a fitted stage with the intervals of a method, and with what its pictures need.

    Parameters
    ----------
    stage : KineticsStage
        From tests.
    asked : "linearised", "profile", "bootstrap", "posterior" or None
        None for profile, or linearised where a reagent is followed by its balance.
    seed : int
        Of the run.
    balances : mapping of test to ReagentBalance
        As given to the fit.

    Returns
    -------
    stage : KineticsStage
    problems : tuple of Problem
        Where the method could not be had, and what stands instead.
    """
    if stage.fit is None or not stage.fit.converged:
        return stage, ()
    method = asked or ("linearised" if balances else INSTEAD)
    fit, problems = stage.fit, _NONE
    if asked or not balances:  # fits by balance take seconds: as they are unless asked for
        fit, problems = _fit_by(stage.fit, method, stage_seed(seed, f"intervals {stage.key}"))
    two_step = stage.two_step
    if two_step is not None:
        two_step = replace(two_step, whole=fit)
    found = replace(
        stage,
        fit=fit,
        two_step=two_step,
        intervals=INSTEAD if problems else method,
        alternatives=_alternatives(stage, method if asked or not balances else ""),
        notes=(*stage.notes, *_differing(fit)),
    )
    try:
        diagnostics = kinetic_diagnostics(fit, stage.observed, two_step, balances)
    except LeachkinError as error:
        note = f"no diagnostic figures: {error}"
        return replace(found, notes=(*found.notes, note)), problems
    return replace(found, diagnostics=diagnostics), problems


def _fit_by(fit: FitResult, method: str, seed: int) -> tuple[FitResult, tuple[Problem, ...]]:
    resamples = max(RESAMPLES, ceil(RESAMPLES_BEYOND / (1.0 - fit.level) - 1e-9))
    try:
        found = fit_with_intervals(
            fit, method, seed=seed, resamples=resamples, most_steps=MOST_STEPS
        )
    except (MissingExtraError, InputProblems) as error:
        return fit_with_intervals(fit, INSTEAD), (_instead(method, str(error)),)
    return found, ()


def _instead(method: str, why: str) -> Problem:
    found = f"no intervals by {method}, {INSTEAD} likelihood stands instead: {why}"
    return Problem("", None, "fit.intervals", "ask", found)


def _alternatives(stage: KineticsStage, method: str) -> tuple[FitResult, ...]:
    """Return the other laws that the data do not reject, with intervals by a method, if any."""
    if stage.ranking is None:
        return ()
    own = method if method in ("linearised", INSTEAD) else INSTEAD
    return tuple(
        fit_with_intervals(row.fit, own) if method else row.fit
        for row in stage.ranking.rows
        if row.law in stage.ranking.indistinguishable
        and row.fit is not None
        and row.law != stage.law.name
        and row.fit.converged
    )


def _differing(fit: FitResult) -> tuple[str, ...]:
    """Return what to know of the bands where their draws and the intervals differ."""
    names = [p.name for p in fit.parameters if p.remark]
    if not names or fit.sampled is not None:
        return ()
    return (
        f"the linearised interval of {', '.join(names)} differs from the one by another method "
        "(parameter table): bands are drawn from the linearised covariance; "
        'intervals = "posterior" under [fit] draws them from the posterior',
    )
