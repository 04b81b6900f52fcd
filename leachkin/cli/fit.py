"""``leachkin fit``."""

from __future__ import annotations

from collections.abc import Mapping

import click

from leachkin.cli.options import (
    INTERVAL_METHODS,
    campaign_argument,
    json_option,
    run_options,
    vary_option,
)


@click.command()
@campaign_argument
@run_options
@click.option(
    "--intervals",
    type=click.Choice(INTERVAL_METHODS),
    help="How the intervals of the parameters are made, as [fit] intervals.",
)
@vary_option
@json_option
def fit(
    campaign: str,
    seed: int,
    draws: int,
    level: float,
    settings: Mapping[str, str],
    intervals: str | None,
    vary: Mapping[str, tuple[str, ...]],
    as_json: bool,
) -> None:
    """Fit and rank rate laws on all tests together, with intervals and a verdict.

    CAMPAIGN may be one CSV with a time column, as "time (h)", and an extraction column, as
    "extraction (%)". Tests, temperatures and sizes may stand in columns of their own.
    """
    from leachkin.cli.stage import print_stage, run_stage, say_next, stage_result
    from leachkin.report import straightened_table

    if intervals is not None:
        settings = {**settings, "fit.intervals": intervals}
    if vary:
        run_stage("fit", campaign, settings, vary, as_json=as_json, seed=seed, draws=0, level=level)
        return
    result = stage_result("fit", campaign, settings, seed=seed, draws=draws, level=level)
    print_stage("fit", result, as_json=as_json)
    if not as_json:
        from leachkin.cli.output import print_tables, remark

        for key, stage in result.kinetics.items():
            if stage.ranking is not None:
                remark(f"{key}: {stage.ranking.verdict}")
            table = straightened_table(stage)
            if table is not None:
                click.echo()
                print_tables([table])
    say_next("fit", campaign)
