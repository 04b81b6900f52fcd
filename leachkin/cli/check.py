"""``leachkin check``."""

from __future__ import annotations

from collections.abc import Mapping

import click

from leachkin.cli.options import campaign_argument, set_option


@click.command()
@campaign_argument
@set_option
@click.pass_context
def check(ctx: click.Context, campaign: str, settings: Mapping[str, str]) -> None:
    """List every problem with file, row, column, what is allowed and what to type.

    Reads everything and fits nothing. Counts the tests that are ready, still running, or waiting
    for an answer. Exit code 1 if something stops a run.
    """
    from leachkin.campaign import check_campaign
    from leachkin.cli.output import print_problems, remark

    outcome = check_campaign(campaign, settings)
    print_problems(outcome.problems, to_stdout=True)
    if outcome.paste:
        click.echo("To type:")
        for line in outcome.paste:
            click.echo(f"  {line}")
    if outcome.settings:
        workbook = campaign.lower().endswith((".xlsx", ".xlsm"))
        where = 'the sheet "settings" (key, value)' if workbook else "campaign.toml"
        click.echo(f"To paste into {where}, with your answer:")
        click.echo(outcome.settings_block(workbook))
    click.echo(outcome.summary)
    if outcome.stops:
        ctx.exit(1)
    remark(f"next: leachkin extraction {campaign}")
