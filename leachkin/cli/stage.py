"""Running a campaign up to one stage and printing what it gives."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from leachkin.campaign import CampaignResult

#: What to do next, after each stage.
_NEXT = {
    "extraction": "leachkin fit {campaign}",
    "fit": "leachkin heap {campaign}, or leachkin run {campaign} --out DIR",
    "tank": "leachkin budget {campaign}, or leachkin run {campaign} --out DIR",
    "heap": 'leachkin heap {campaign} --vary lift_height="4,6,8 m", or leachkin budget {campaign}',
    "cementation": "leachkin budget {campaign}",
    "budget": "leachkin run {campaign} --out DIR",
}
_NEXT_OF_ONE_CSV = "leachkin run {campaign} --out DIR"


def run_stage(
    stage: str,
    campaign: str,
    settings: Mapping[str, str],
    vary: Mapping[str, tuple[str, ...]],
    *,
    as_json: bool,
    **options: Any,
) -> None:
    """Print one stage of a campaign, or one row for each combination of varied values."""
    full = {_full_key(stage, key): value for key, value in settings.items()}
    if vary:
        varied = {_full_key(stage, key): values for key, values in vary.items()}
        _print_variations(stage, campaign, full, varied, as_json=as_json, **options)
        return
    result = stage_result(stage, campaign, full, **options)
    print_stage(stage, result, as_json=as_json)
    say_next(stage, campaign)


def stage_result(
    stage: str, campaign: str, settings: Mapping[str, str], **options: Any
) -> CampaignResult:
    """Return a campaign run up to one stage; stop where that stage could not be done."""
    from leachkin.campaign import read_campaign, run_campaign
    from leachkin.cli.output import progress_line

    read = read_campaign(campaign, settings)
    return run_campaign(read, stage, progress=progress_line(), **options)


def print_stage(stage: str, result: CampaignResult, *, as_json: bool) -> None:
    """Print a stage's tables to stdout and what should be known to stderr."""
    from leachkin.cli.output import print_json, print_tables, say_what_was_assumed
    from leachkin.report import stage_tables

    stop_where_not_done(stage, result)
    if as_json:
        print_json(result.to_dict())
    else:
        print_tables(stage_tables(result, stage))
    say_what_was_assumed(result)


def stop_where_not_done(stage: str, result: CampaignResult) -> None:
    """Raise every question about a stage that was asked for and could not be done."""
    from leachkin.errors import InputProblems
    from leachkin.problems import Problem
    from leachkin.report import stage_tables

    if stage_tables(result, stage):
        return
    asked = [problem for problem in result.problems if problem.level == "ask"]
    found = f"there is nothing for leachkin {stage} in this campaign"
    hint = "give extraction against time to leachkin fit instead" if stage == "extraction" else ""
    nothing = Problem("", None, "", "stop", found, "test sheets under [tables]", hint)
    raise InputProblems(asked or [nothing])


def say_next(stage: str, campaign: str) -> None:
    """Suggest the next command on stderr."""
    from leachkin.cli.output import remark

    words = _NEXT_OF_ONE_CSV if campaign.lower().endswith(".csv") else _NEXT[stage]
    remark("next: " + words.format(campaign=campaign))


def _full_key(stage: str, key: str) -> str:
    """``lift_height`` after ``leachkin heap`` is ``heap.lift_height``."""
    return key if "." in key else f"{stage}.{key}"


def _print_variations(
    stage: str,
    campaign: str,
    settings: Mapping[str, str],
    vary: Mapping[str, tuple[str, ...]],
    *,
    as_json: bool,
    **options: Any,
) -> None:
    from leachkin.campaign import what_if
    from leachkin.cli.output import print_json, print_tables, progress_line

    table = what_if(campaign, stage, vary=vary, set=settings, progress=progress_line(), **options)
    if as_json:
        print_json(table.to_records())
    else:
        print_tables([table])
    say_next(stage, campaign)
