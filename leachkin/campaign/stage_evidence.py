"""How sure the mechanism is: lines of evidence, tests of need, prediction of tests left out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from leachkin.campaign.carried_laws import carried_fits
from leachkin.campaign.stage_results import KineticsStage, LawEvidence
from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Evidence,
    FitResult,
    LeftOut,
    NestedTest,
    Ranking,
    ResidualChecks,
    TermTest,
    contains,
    gather_evidence,
    leave_one_out,
    nested_test,
    options_of_law,
    residual_checks,
    tests_of_need,
)

#: Leaving one test out costs a fit a test: done for so many tests and laws at most, and not where
#: a reagent is followed by its balance, whose fits take seconds.
MOST_TESTS, MOST_LAWS = 40, 3
#: Terms whose need is tested where nothing is said; a slow fraction is tried on request.
USUAL_TERMS = (
    "lag",
    "soluble",
    "fade",
    "loss",
    "reagent order",
    "size exponents",
    "ultimate by test",
)


def with_evidence(
    stage: KineticsStage, options: Mapping[str, Any], terms: tuple[str, ...] | None
) -> KineticsStage:
    """Return a fitted stage with what can be said for and against its law.

    Parameters
    ----------
    stage : KineticsStage
    options : mapping
        As the laws were ranked with.
    terms : tuple of str or None
        Further terms whose need is tested.
    """
    if stage.fit is None or stage.ranking is None or not stage.fit.converged:
        return stage
    law = stage.fit.law_name
    same = {name: value for name, value in options.items() if name != "laws"}
    own = options_of_law(law, same)
    found = LawEvidence(
        lines=_lines(stage, law, own),
        nested=_nested(stage.ranking),
        left_out=_left_out(stage, same),
        residuals=_residuals(stage.fit),
        terms=_terms(stage, law, own, terms),
    )
    return replace(stage, evidence=found)


def _lines(stage: KineticsStage, law: str, own: Mapping[str, Any]) -> Evidence | None:
    if stage.ranking is None:
        return None
    try:
        return gather_evidence(stage.observed, stage.ranking, law, **own)
    except InputProblems:  # an empirical law stands for no mechanism
        return None


def _residuals(fit: FitResult) -> ResidualChecks | None:
    try:
        return residual_checks(fit, fit.level)
    except InputProblems:
        return None


def _nested(ranking: Ranking) -> tuple[NestedTest, ...]:
    """Test every law of the ranking against each that it contains."""
    rows = [row for row in ranking.rows if row.fit is not None and row.fit.converged]
    found = []
    for larger in rows:
        for smaller in rows:
            if larger.fit is None or smaller.fit is None:
                continue
            if larger.law != smaller.law and contains(larger.law, smaller.law):
                found.append(nested_test(larger.fit, smaller.fit))
    return tuple(sorted(found, key=lambda test: test.chance))


def _left_out(stage: KineticsStage, same: Mapping[str, Any]) -> tuple[LeftOut, ...]:
    if not 3 <= len(stage.observed) <= MOST_TESTS or same.get("balances"):
        return ()
    names = [fit.law_name for fit, _ in carried_fits(stage)]
    ranked = () if stage.ranking is None else stage.ranking.rows
    names += [row.law for row in ranked if row.fit is not None and row.law not in names]
    found = []
    for law in names[:MOST_LAWS]:
        try:
            found.append(leave_one_out(stage.observed, law, **options_of_law(law, same)))
        except InputProblems:
            continue
    return tuple(found)


def _terms(
    stage: KineticsStage, law: str, own: Mapping[str, Any], asked: tuple[str, ...] | None
) -> tuple[TermTest, ...]:
    if own.get("balances") and asked is None:
        return ()  # each of these fits takes seconds: on request only
    try:
        return tests_of_need(stage.observed, law, asked or USUAL_TERMS, **own)
    except InputProblems:
        return ()
