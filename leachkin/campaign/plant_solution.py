"""The solution of a plant, for laws whose drive reads more than one reagent to a power."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from leachkin.campaign.settings import Settings
from leachkin.campaign.stage_results import PlantOre
from leachkin.errors import InputProblems
from leachkin.kinetics import DRIVE_READS, RateLaw
from leachkin.problems import Problem


def in_solution(ore: PlantOre, settings: Settings, stage: str, draws: int, seed: int) -> PlantOre:
    """Return an ore whose laws stand in the solution of ``[heap.solution]`` or ``[tank.solution]``.

    A law of one reagent to a power, or orders by resistance, is left as it is.

    Raises
    ------
    InputProblems
        Where the drive reads species and the campaign does not say what the plant holds.
    """
    drive = ore.law.drive
    if drive is None:
        return ore
    reads = DRIVE_READS[drive.kind]
    given = {n: settings.get(f"{stage}.solution.{n}") for n in reads}
    needed = [name for name in reads if name != "reagent" or drive.order is None]
    keeps_order = drive.kind in ("two_reagents", "solubility")
    missing = [n for n in needed if given[n] is None and not (n == "reagent" and keeps_order)]
    if missing:
        raise InputProblems([_not_said(stage, drive.kind, missing)])

    def held(law: RateLaw, count: int) -> RateLaw:
        solution: dict[str, Any] = {}
        for name, value in given.items():
            if value is None:
                continue
            drawn = settings.draw(f"{stage}.solution.{name}", count, seed) if count else None
            solution[name] = np.asarray(value if drawn is None else drawn, dtype=float)
        return law.held_at(solution)

    return replace(
        ore,
        law=held(ore.law, 0),
        law_draws=None if ore.law_draws is None else held(ore.law_draws, draws),
        fit_draws=None if ore.fit_draws is None else held(ore.fit_draws, 0),
        carried=tuple(replace(one, law=held(one.law, 0)) for one in ore.carried),
    )


def holds_no_order(law: RateLaw) -> bool:
    """Return True where the rate does not follow the strength of the reagent any more."""
    order = law.order
    return order is not None and bool(np.all(np.asarray(order) == 0.0))


def _not_said(stage: str, drive: str, missing: list[str]) -> Problem:
    names = ", ".join(missing)
    example = "1.5" if missing[0] == "pH" else '"8 mg/L"'
    return Problem(
        "",
        None,
        f"{stage}.solution",
        "ask",
        f"the law has the drive {drive!r} and the solution of the {stage} does not say {names}",
        names,
        f"add [{stage}.solution] with {missing[0]} = {example}",
    )
