"""``leachkin run``."""

from __future__ import annotations

from collections.abc import Mapping

import click

from leachkin.cli.options import campaign_argument, run_options


@click.command()
@campaign_argument
@click.option("--out", required=True, metavar="DIR", help="Folder for the results: new or empty.")
@click.option("--overwrite", is_flag=True, help="Replace a folder of earlier results.")
@run_options
def run(
    campaign: str,
    out: str,
    overwrite: bool,
    seed: int,
    draws: int,
    level: float,
    settings: Mapping[str, str],
) -> None:
    """Run every stage whose table is there and write the report.

    CAMPAIGN is a campaign.toml, its folder, or one CSV of extraction against time. DIR gets
    report.html, results.json, results.xlsx, tables/*.csv and figures/*.svg, all or nothing.
    """
    from leachkin.campaign import read_campaign, run_campaign
    from leachkin.cli.output import progress_line, remark, say_what_was_assumed
    from leachkin.report import check_out, write_report

    check_out(out, overwrite)
    read = read_campaign(campaign, settings)
    result = run_campaign(read, seed=seed, draws=draws, level=level, progress=progress_line())
    folder = write_report(result, out, overwrite=overwrite)
    for line in result.headline():
        click.echo(line)
    say_what_was_assumed(result)
    remark(f"open {(folder / 'report.html').as_posix()}")
