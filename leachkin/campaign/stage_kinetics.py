"""The kinetics stage: which law each metal of each domain follows, from tests or from print."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from leachkin.campaign.assumed_values import assumed_priors
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.carried_laws import is_particle
from leachkin.campaign.fit_balances import fit_balances
from leachkin.campaign.printed_law import law_from_print
from leachkin.campaign.settings import Settings
from leachkin.campaign.sheets import exclusions
from leachkin.campaign.stage_evidence import with_evidence
from leachkin.campaign.stage_intervals import with_intervals
from leachkin.campaign.stage_results import KineticsStage
from leachkin.errors import InputProblems, LeachkinError
from leachkin.kinetics import (
    DriveForm,
    FitResult,
    Ranking,
    Reference,
    TwoStepArrhenius,
    arrhenius_two_step,
    rank_tests,
)
from leachkin.problems import Problem
from leachkin.testwork import Observed, observe

#: Fewest readings of all tests of a metal that a fit is tried on.
FEWEST_READINGS = 4


def kinetics_stage(
    campaign: Campaign, level: float, seed: int = 1
) -> tuple[dict[str, KineticsStage], tuple[Problem, ...]]:
    """Return the rate law of every metal and domain, by "domain/metal".

    A metal whose fit fails is a problem; the others still get theirs.
    """
    stages: dict[str, KineticsStage] = {}
    problems: list[Problem] = []
    observed, found = observed_by_key(campaign)
    problems += found
    printed = _printed_key(campaign)
    for key, tests in observed.items():
        if key == printed:
            problems.append(_print_wins(key))
            continue
        try:
            stages[key], found = _fitted(campaign, key, tests, level, seed)
            problems += found
        except LeachkinError as error:
            problems += _failed(key, error)
    if printed is not None:
        try:
            stages[printed] = _printed(campaign.settings, printed)
        except LeachkinError as error:
            problems += _failed(printed, error)
    return stages, tuple(problems)


def observed_by_key(
    campaign: Campaign,
) -> tuple[dict[str, list[Observed]], tuple[Problem, ...]]:
    """Return what the fits see, by "domain/metal": the metals of the campaign only."""
    found: dict[str, list[Observed]] = {}
    problems: list[Problem] = []
    for one in campaign.observed:
        found.setdefault(one.key, []).append(one)
    for test in campaign.tests:
        for metal in campaign.metals:
            if metal not in test.solution:
                problems.append(_not_assayed(test.name, metal))
                continue
            try:
                one = observe(test, metal)
            except InputProblems as error:
                problems += [p for p in error.problems if isinstance(p, Problem)]
                continue
            if one.value.size:
                found.setdefault(one.key, []).append(one)
    return found, tuple(problems)


def exclusion_texts(settings: Settings) -> tuple[str, ...]:
    """Return every exclusion in words."""
    texts = []
    for one in exclusions(settings):
        when = "all readings" if one.time_h is None else f"{one.time_h:g} h"
        texts.append(f"{one.test}, {when}: {one.reason} ({one.by})")
    return tuple(texts)


def _not_assayed(test: str, metal: str) -> Problem:
    return Problem("", None, "", "note", f"{test} has no {metal} assays: not in its fit")


def _print_wins(key: str) -> Problem:
    return Problem(
        "",
        None,
        "rate_law",
        "note",
        f"{key} has tests and a printed law: the plant uses the printed one",
        "one of them",
        "take [rate_law] out to use the tests",
    )


def _failed(key: str, error: LeachkinError) -> list[Problem]:
    if isinstance(error, InputProblems):
        return [
            Problem(
                p.file,
                p.row,
                p.column,
                "ask",
                f"no rate law for {key}: {p.found}",
                p.allowed,
                p.try_this,
            )
            for p in error.problems
            if isinstance(p, Problem)
        ]
    return [Problem("", None, "fit", "ask", f"no rate law for {key}: {error}")]


def _printed_key(campaign: Campaign) -> str | None:
    settings = campaign.settings
    if not settings.has("rate_law"):
        return None
    metal = settings.get("rate_law.metal") or next(iter(campaign.metals), "metal")
    return f"{settings.get('rate_law.domain')}/{metal}"


def _printed(settings: Settings, key: str) -> KineticsStage:
    source = settings.get("rate_law.source")
    note = f"constants from {source}" if source else "constants from print, no source stated"
    return KineticsStage(key, law_from_print(settings), "print", notes=(note,))


def _fitted(
    campaign: Campaign, key: str, tests: Sequence[Observed], level: float, seed: int
) -> tuple[KineticsStage, tuple[Problem, ...]]:
    readings = sum(len(one.value) for one in tests)
    if readings < FEWEST_READINGS:
        raise InputProblems(
            [
                Problem(
                    "",
                    None,
                    "",
                    "ask",
                    f"{readings} readings",
                    f"{FEWEST_READINGS} or more",
                    "add tests or readings",
                )
            ]
        )
    options = fit_options(campaign.settings, level)
    options["balances"] = fit_balances(campaign, key.rpartition("/")[2])
    priors = assumed_priors(campaign.settings)
    if priors:
        options["priors"] = priors
    ranking = rank_tests(tests, **options)
    fit = carried(ranking)
    two_step, notes = _two_step(tests, fit, options)
    stage = KineticsStage(
        key,
        fit.law,
        "fit",
        tuple(tests),
        ranking,
        fit,
        exclusion_texts(campaign.settings),
        notes,
        two_step,
    )
    stage = with_evidence(stage, options, campaign.settings.get("fit.try_terms"))
    method = campaign.settings.get("fit.intervals")
    return with_intervals(stage, method, seed, options["balances"])


def _two_step(
    tests: Sequence[Observed], fit: FitResult, options: dict[str, Any]
) -> tuple[TwoStepArrhenius | None, tuple[str, ...]]:
    """Return the energies in two steps, or why they cannot be had."""
    if len({round(one.temperature_K) for one in tests}) < 2:
        return None, ()
    same = {name: value for name, value in options.items() if name not in ("laws", "priors")}
    try:
        found = arrhenius_two_step(tests, fit.law.name, whole=fit, **same)
    except InputProblems as error:
        return None, (f"no activation energy by a fit a temperature: {error}",)
    return found, found.warnings


def fit_options(settings: Settings, level: float) -> dict[str, Any]:
    """Return the settings of a fit as the fitting functions take them."""
    options: dict[str, Any] = {
        "laws": settings.get("fit.laws"),
        "ultimate": settings.get("fit.ultimate"),
        "size_exponents": settings.get("fit.size_exponents"),
        "reagent_order": _orders(settings),
        "drive": _drive(settings),
        "terms": settings.get("fit.terms"),
        "slow_law": settings.get("fit.slow_law"),
        "spread": settings.get("fit.spread"),
        "reference": _reference(settings),
        "level": level,
    }
    return {name: value for name, value in options.items() if value is not None}


def _orders(settings: Settings) -> Any:
    """Return one order for all resistances, or one each where any has its own."""
    own = {kind: settings.get(f"fit.order_{kind}") for kind in ("film", "ash_layer", "chemical")}
    given = {kind: order for kind, order in own.items() if order is not None}
    return given or settings.get("fit.reagent_order")


def _drive(settings: Settings) -> DriveForm | None:
    kind = settings.get("fit.drive")
    if kind is None:
        return None
    names = {role: settings.get(f"fit.{role}") for role in ("second", "oxidised", "reduced")}
    return DriveForm(kind, {role: name for role, name in names.items() if name})


def _reference(settings: Settings) -> Reference | None:
    names = {"temperature_K": "temperature", "size_mm": "size", "reagent_g_per_L": "reagent"}
    given = {n: settings.get(f"fit.reference_{key}") for n, key in names.items()}
    stated = {name: value for name, value in given.items() if value is not None}
    return Reference(**stated) if len(stated) == len(names) else None


def carried(ranking: Ranking) -> FitResult:
    """Return the fit that the plant uses: the mechanism named first, if it can be carried there.

    Else the best law that has a theory of size and strength. Without any, the best one; the plant
    stages then say that they cannot use it elsewhere.
    """
    for law in ranking.mechanisms:
        named = ranking.fit_of(law)
        if named is not None and named.converged and is_particle(law):
            return named
    fits = [
        row.fit
        for row in sorted(ranking.rows, key=lambda row: row.delta)
        if row.fit is not None and row.fit.converged
    ]
    if not fits:
        raise InputProblems(
            [
                Problem(
                    "",
                    None,
                    "fit",
                    "ask",
                    "no law could be fitted",
                    "",
                    "look for a test that never bends over, or starts complete",
                )
            ]
        )
    return next((fit for fit in fits if is_particle(fit.law.name)), fits[0])
