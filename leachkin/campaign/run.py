"""Runs a campaign: the one place that knows the order of the stages.

    balance -> kinetics -> gangue -> tank -> heap -> cementation -> budget -> hazards

A stage runs if its table is there. One that cannot be done becomes a problem with its reason, and
the stages that do not need it still run.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

from leachkin.campaign.campaign import Campaign
from leachkin.campaign.next_tests import next_test_lines
from leachkin.campaign.plant_ore import plant_ore
from leachkin.campaign.result import CampaignResult
from leachkin.campaign.stage_balance import balance_stage
from leachkin.campaign.stage_budget import budget_stage
from leachkin.campaign.stage_cementation import cementation_stage
from leachkin.campaign.stage_cementation_more import CementationMore, cementation_more
from leachkin.campaign.stage_gangue import fitted_gangue, given_gangue
from leachkin.campaign.stage_hazards import hazards_stage
from leachkin.campaign.stage_heap import heap_stage
from leachkin.campaign.stage_kinetics import exclusion_texts, kinetics_stage
from leachkin.campaign.stage_register import register_of_run
from leachkin.campaign.stage_tank import tank_stage
from leachkin.errors import InputProblems, LeachkinError
from leachkin.problems import Problem, argument_error, unknown_name
from leachkin.run_record import RunRecord, program_version

STAGES = (
    "balance",
    "kinetics",
    "gangue",
    "tank",
    "heap",
    "cementation",
    "budget",
    "hazards",
)
_ALSO = {"extraction": "balance", "fit": "kinetics"}
#: Stages that need a table of their own name in the campaign file.
_OWN_TABLE = ("tank", "heap", "cementation", "budget")

DEFAULT_DRAWS = 400
DEFAULT_LEVEL = 0.95

Progress = Callable[[int, int], None]


@dataclass
class _Run:
    """What a run has found so far; it lives as long as the call."""

    campaign: Campaign
    draws: int
    seed: int
    level: float
    found: dict[str, Any] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)

    def attempt(self, stage: str, function: Callable[[], Any]) -> None:
        """Keep what a stage gives, or the reason why it could not be done."""
        try:
            self.found[stage] = function()
        except InputProblems as error:
            self.problems += [_not_done(stage, p) for p in error.problems if isinstance(p, Problem)]
        except LeachkinError as error:
            self.problems.append(Problem("", None, stage, "ask", f"{stage} not done: {error}"))


def _not_done(stage: str, problem: Problem) -> Problem:
    return Problem(
        problem.file,
        problem.row,
        problem.column or stage,
        "ask",
        f"{stage} not done: {problem.found}",
        problem.allowed,
        problem.try_this,
    )


def run_campaign(
    campaign: Campaign,
    upto: str | None = None,
    *,
    seed: int = 1,
    draws: int = DEFAULT_DRAWS,
    level: float = DEFAULT_LEVEL,
    progress: Progress | None = None,
    reuse: CampaignResult | None = None,
) -> CampaignResult:
    """Run the stages of a campaign whose tables are there.

    Parameters
    ----------
    campaign : Campaign
        From :func:`read_campaign`.
    upto : str, optional
        Last stage to run: balance (or extraction), kinetics (or fit), gangue, tank, heap,
        cementation, budget, hazards.
    seed : int
        0 or more; each random step spawns its own by name.
    draws : int
        Draws behind the bands; 0 for none. The draw index is kept from fit to budget.
    level : float
        Level of intervals and bands, between 0.5 and 1.
    progress : callable, optional
        Called with (stages done, stages in all).
    reuse : CampaignResult, optional
        An earlier result of the same tests and fit settings, whose balance, kinetics and gangue
        are taken over.

    Returns
    -------
    CampaignResult

    Raises
    ------
    InputProblems
        If an argument has no meaning, or the last stage asked for has no table in the campaign.
    """
    _check(campaign, upto, seed, draws, level)
    last = _ALSO.get(upto or "", upto) or STAGES[-1]
    todo = STAGES[: STAGES.index(last) + 1]
    run = _Run(campaign, draws, seed, level)
    for position, stage in enumerate(todo):
        _DO[stage](run, reuse)
        if progress is not None:
            progress(position + 1, len(todo))
    result = _result(run, upto)
    return result if upto else replace(result, next_test=next_test_lines(campaign, result))


def _check(campaign: Campaign, upto: str | None, seed: int, draws: int, level: float) -> None:
    names = [*STAGES, *_ALSO]
    if upto is not None and upto not in names:
        raise InputProblems([unknown_name("stage", upto, names, column="upto")])
    tests_alone = upto == "cementation" and bool(campaign.cementation_tests)
    if upto in _OWN_TABLE and not campaign.settings.has(upto) and not tests_alone:
        raise InputProblems(
            [
                Problem(
                    campaign.file,
                    None,
                    upto,
                    "stop",
                    f"there is no table [{upto}]",
                    f"[{upto}] with its keys",
                    "see docs/reference/campaign_file.md",
                )
            ]
        )
    if isinstance(seed, bool) or seed < 0:
        raise argument_error("seed", f"{seed}", "0 or more")
    if isinstance(draws, bool) or draws < 0 or draws == 1:
        raise argument_error("draws", f"{draws}", "0 for no bands, or 2 and more", "draws=400")
    if not 0.5 <= level < 1.0:
        raise argument_error("level", f"{level}", "0.5 to below 1", "level=0.95")


def _do_balance(run: _Run, reuse: CampaignResult | None) -> None:
    if reuse is not None:
        run.found["balance"] = reuse.balances
        return
    run.found["balance"], problems = balance_stage(run.campaign.tests)
    run.problems += problems


def _do_kinetics(run: _Run, reuse: CampaignResult | None) -> None:
    if reuse is not None:
        run.found["kinetics"] = reuse.kinetics
        return
    run.found["kinetics"], problems = kinetics_stage(run.campaign, run.level, run.seed)
    run.problems += problems


def _do_gangue(run: _Run, reuse: CampaignResult | None) -> None:
    campaign = run.campaign
    if reuse is not None:
        run.found["gangue"] = reuse.gangue
    elif campaign.settings.has("gangue"):
        run.attempt("gangue", lambda: given_gangue(campaign.settings))
    elif campaign.tests:
        domain = _plant_domain(run)
        run.attempt("gangue", lambda: fitted_gangue(campaign, domain, run.level))


def _plant_domain(run: _Run) -> str:
    settings = run.campaign.settings
    given = settings.get("heap.domain") or settings.get("tank.domain")
    return str(given or run.campaign.tests[0].domain)


def _do_tank(run: _Run, reuse: CampaignResult | None) -> None:
    del reuse
    if run.campaign.settings.has("tank"):
        run.attempt("tank", lambda: _tank(run))


def _tank(run: _Run) -> Any:
    ore = plant_ore(run.campaign, run.found.get("kinetics", {}), "tank", run.draws, run.seed)
    gangue = run.found.get("gangue")
    return tank_stage(run.campaign, ore, gangue, run.draws, run.seed, run.level)


def _do_heap(run: _Run, reuse: CampaignResult | None) -> None:
    del reuse
    if run.campaign.settings.has("heap"):
        run.attempt("heap", lambda: _heap(run))


def _heap(run: _Run) -> Any:
    kinetics = run.found.get("kinetics", {})
    ore = plant_ore(run.campaign, kinetics, "heap", run.draws, run.seed)
    gangue = run.found.get("gangue")
    return heap_stage(run.campaign, ore, gangue, run.draws, run.seed, run.level)


def _do_cementation(run: _Run, reuse: CampaignResult | None) -> None:
    del reuse
    if run.campaign.settings.has("cementation"):
        run.attempt(
            "cementation",
            lambda: cementation_stage(
                run.campaign,
                run.found.get("heap"),
                run.found.get("tank"),
                run.draws,
                run.seed,
                run.level,
            ),
        )
    if run.campaign.settings.has("cementation") or run.campaign.cementation_tests:
        run.attempt("cementation_more", lambda: _cementation_more(run))


def _cementation_more(run: _Run) -> CementationMore:
    stage, campaign = run.found.get("cementation"), run.campaign
    found = cementation_more(
        campaign.settings,
        campaign.cementation_tests,
        None if stage is None else stage.demand,
        run.level,
        None if stage is None else stage.site,
    )
    run.problems += found.problems
    return found


def _do_budget(run: _Run, reuse: CampaignResult | None) -> None:
    del reuse
    if run.campaign.settings.has("budget"):
        run.attempt(
            "budget",
            lambda: budget_stage(
                run.campaign,
                run.found.get("heap"),
                run.found.get("tank"),
                run.found.get("cementation"),
                run.draws,
                run.seed,
                run.level,
            ),
        )


def _do_hazards(run: _Run, reuse: CampaignResult | None) -> None:
    del reuse
    run.attempt(
        "hazards",
        lambda: hazards_stage(run.campaign, run.found.get("heap"), run.found.get("cementation")),
    )


_DO: dict[str, Callable[[_Run, CampaignResult | None], None]] = {
    "balance": _do_balance,
    "kinetics": _do_kinetics,
    "gangue": _do_gangue,
    "tank": _do_tank,
    "heap": _do_heap,
    "cementation": _do_cementation,
    "budget": _do_budget,
    "hazards": _do_hazards,
}


def _result(run: _Run, upto: str | None) -> CampaignResult:
    campaign, found = run.campaign, run.found
    problems = tuple(dict.fromkeys((*campaign.problems, *run.problems)))
    options = {
        "draws": run.draws,
        "level": run.level,
        "upto": upto,
        "set": dict(campaign.overrides),
    }
    return CampaignResult(
        title=campaign.title,
        about=_about(campaign),
        run=RunRecord(program_version(), run.seed, options, campaign.inputs, _sources(found)),
        tests=campaign.tests,
        balances=found.get("balance", {}),
        kinetics=found.get("kinetics", {}),
        gangue=found.get("gangue"),
        tank=found.get("tank"),
        heap=found.get("heap"),
        cementation=found.get("cementation"),
        budget=found.get("budget"),
        cautions=found.get("hazards", ()),
        assumed=register_of_run(campaign, found),
        excluded=exclusion_texts(campaign.settings),
        problems=problems,
        notes=_notes(found),
        level=run.level,
        cementation_more=found.get("cementation_more"),
    )


def _about(campaign: Campaign) -> dict[str, str]:
    names = ("prepared_by", "checked_by", "status", "revision", "reagent")
    given = {name: campaign.settings.get(f"campaign.{name}") for name in names}
    return {
        **{name: str(value) for name, value in given.items() if value},
        "metals": ", ".join(campaign.metals),
    }


def _notes(found: dict[str, Any]) -> tuple[str, ...]:
    notes: list[str] = []
    for stage in found.get("kinetics", {}).values():
        notes += [f"{stage.key}: {note}" for note in stage.notes]
    for name in ("gangue", "tank", "heap", "cementation", "cementation_more", "budget"):
        stage = found.get(name)
        if stage is not None:
            notes += [*stage.notes, *getattr(stage, "outside", ())]
    return tuple(dict.fromkeys(notes))


def _sources(found: dict[str, Any]) -> tuple[str, ...]:
    keys: set[str] = set()
    cementation = found.get("cementation")
    if cementation is not None:
        keys |= set(cementation.demand.sources)
    if found.get("cementation_more") is not None:
        keys |= set(found["cementation_more"].sources)
    for caution in found.get("hazards", ()):
        keys |= {key.strip() for key in caution.source.split(",") if key.strip()}
    if found.get("kinetics"):
        keys.add("levenspiel1999")
    return tuple(sorted(keys))
