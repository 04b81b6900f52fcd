"""The ore as the plant stages use it: one metal's law, head and reagent, with draws of each."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from leachkin.campaign.campaign import Campaign
from leachkin.campaign.carried_laws import carried_fits, drawn_laws, is_particle, own_draws
from leachkin.campaign.plant_solution import in_solution
from leachkin.campaign.printed_law import law_from_print
from leachkin.campaign.settings import draw_setting
from leachkin.campaign.stage_gangue import reagent_per_metal
from leachkin.campaign.stage_results import CarriedLaw, KineticsStage, PlantOre
from leachkin.errors import InputProblems
from leachkin.kinetics import RateLaw
from leachkin.problems import Problem
from leachkin.testwork import Test

#: What stands behind the plant figures.
SCOPING, COLUMN, FROM_PRINT = "SCOPING", "COLUMN", "FROM PRINT"


def plant_ore(
    campaign: Campaign,
    kinetics: Mapping[str, KineticsStage],
    stage: str,
    draws: int,
    seed: int,
) -> PlantOre:
    """Return the ore that ``[heap]`` or ``[tank]`` asks for.

    Raises
    ------
    InputProblems
        If there is no law, no head grade or no reagent factor for it; the message says what is
        missing.
    """
    law_stage = _law_stage(campaign, kinetics, stage)
    _refuse_empirical(law_stage, stage)
    head, head_draws = _head(campaign, law_stage.key, stage, draws, seed)
    per_metal, per_metal_draws = _per_metal(campaign, law_stage.metal, draws, seed)
    law_draws = _law_draws(campaign, law_stage, draws, seed)
    ranking = law_stage.ranking
    carried = carried_fits(law_stage)
    ore = PlantOre(
        law_stage.key,
        law_stage.law,
        law_draws,
        head,
        head_draws,
        per_metal,
        per_metal_draws,
        grade_of(campaign, law_stage),
        law_stage.source == "fit" and law_draws is not None,
        law_draws if len(carried) < 2 else own_draws(law_stage, draws, seed),
        tuple(CarriedLaw(fit.law_name, fit.law, weight) for fit, weight in carried),
        ()
        if ranking is None
        else tuple(law for law in ranking.indistinguishable if not is_particle(law)),
        ranking is None or bool(ranking.mechanisms),
    )
    return in_solution(ore, campaign.settings, stage, draws, seed)


def _law_stage(
    campaign: Campaign, kinetics: Mapping[str, KineticsStage], stage: str
) -> KineticsStage:
    if not kinetics:
        raise _ask(
            stage,
            "there is no rate law",
            "tests or [rate_law]",
            "name the sheets under [tables], or write [rate_law]",
        )
    metal = campaign.settings.get(f"{stage}.metal") or next(iter(campaign.metals), None)
    domain = campaign.settings.get(f"{stage}.domain")
    for key, law_stage in kinetics.items():
        own_domain, _, own_metal = key.rpartition("/")
        if own_metal == metal and domain in (None, own_domain):
            return law_stage
    asked = f"{domain}/{metal}" if domain else str(metal)
    raise _ask(
        stage,
        f"there is no rate law for {asked}",
        ", ".join(kinetics),
        f"set {stage}.metal or {stage}.domain to one of them",
    )


def _ask(stage: str, found: str, allowed: str, try_this: str) -> InputProblems:
    return InputProblems([Problem("", None, stage, "ask", found, allowed, try_this)])


def _refuse_empirical(law_stage: KineticsStage, stage: str) -> None:
    name = law_stage.law.name
    if not is_particle(name) and law_stage.source == "fit":
        raise _ask(
            stage,
            f"{name} has no theory of size or strength, and it is the only law that fitted",
            "film, ash_layer, chemical, or a sum of them",
            "add one of these to fit.laws, or test the plant's own size and strength",
        )


def grade_of(campaign: Campaign, law_stage: KineticsStage) -> str:
    """Return the grade of evidence: the best kind of test behind the law."""
    if law_stage.source == "print":
        return FROM_PRINT
    domain = law_stage.key.rpartition("/")[0]
    kinds = {test.kind for test in campaign.tests if test.domain == domain}
    return COLUMN if "column" in kinds else SCOPING


def head_of_tests(tests: Sequence[Test], domain: str, metal: str) -> float | None:
    """Return the mean head assay of a domain [kg/t], each different head once; None without."""
    heads = {
        t.heads[metal].value_kg_per_t for t in tests if t.domain == domain and metal in t.heads
    }
    return float(np.mean(sorted(heads))) if heads else None


def _head(
    campaign: Campaign, key: str, stage: str, draws: int, seed: int
) -> tuple[float, np.ndarray | float]:
    for name in (f"{stage}.head", "rate_law.head"):
        setting = campaign.settings.values.get(name)
        if setting is not None:
            drawn = draw_setting(setting, draws, seed) if draws else setting.value
            return float(setting.value), setting.value if drawn is None else drawn
    domain, _, metal = key.rpartition("/")
    mean = head_of_tests(campaign.tests, domain, metal)
    if mean is None:
        raise _ask(
            stage,
            f"there is no head grade of {metal}",
            "kg/t or %",
            f'add head = "0.68 %" under [{stage}], or a heads sheet',
        )
    return mean, mean


def _per_metal(
    campaign: Campaign, metal: str, draws: int, seed: int
) -> tuple[float, np.ndarray | float]:
    value, _ = reagent_per_metal(campaign.settings, metal)
    given = campaign.settings.free.get("campaign.reagent_per_metal", {}).get(metal)
    drawn = draw_setting(given, draws, seed) if given is not None and draws else None
    return value, value if drawn is None else drawn


def _law_draws(
    campaign: Campaign, law_stage: KineticsStage, draws: int, seed: int
) -> RateLaw | None:
    if not draws:
        return None
    if law_stage.source == "print":
        drawn = law_from_print(campaign.settings, draws, seed)
        return drawn if drawn.batch_shape else None
    found = drawn_laws(law_stage, draws, seed)
    return None if found is None else found[0]
