"""``leachkin verify``."""

from __future__ import annotations

import click

from leachkin.cli.options import json_option


@click.command()
@json_option
@click.pass_context
def verify(ctx: click.Context, as_json: bool) -> None:
    """Recompute published values and show them beside the print.

    Exit code 1 if one of them differs by more than its tolerance.
    """
    from leachkin.cli.output import print_json, print_tables, remark
    from leachkin.published_checks import outcomes_table
    from leachkin.published_checks import verify as recompute
    from leachkin.tables import source_citation

    outcomes = recompute()
    if as_json:
        print_json([vars(outcome) for outcome in outcomes])
    else:
        print_tables([outcomes_table(outcomes)])
    for source in dict.fromkeys(outcome.source for outcome in outcomes):
        remark(f"{source}: {source_citation(source)}")
    differing = sum(not outcome.ok for outcome in outcomes)
    remark(f"{len(outcomes)} values, {differing} differ.")
    if differing:
        ctx.exit(1)
