"""``leachkin next-tests``."""

from __future__ import annotations

from collections.abc import Mapping

import click

from leachkin.cli.options import campaign_argument, json_option, run_options
from leachkin.errors import nearest_names

_AIMS = (
    "heap",
    "tank",
    "activation-energy",
    "ultimate",
    "times",
    "order",
    "stirring",
    "constants",
    "mechanism",
)


def _known_aim(ctx: click.Context, param: click.Parameter, value: str | None) -> str | None:
    if value is None or value in _AIMS:
        return value
    near = nearest_names(value, _AIMS)
    hint = f" Did you mean {' or '.join(near)}?" if near else ""
    raise click.BadParameter(f"{value!r} is none of {', '.join(_AIMS)}.{hint}", ctx, param)


@click.command("next-tests")
@campaign_argument
@click.option(
    "--for",
    "aim",
    metavar="AIM",
    callback=_known_aim,
    help=f"What the tests are to tell: {', '.join(_AIMS)}. Left out: the plant of the campaign, "
    "else the mechanism where it is not settled, else all constants.",
)
@click.option(
    "--count",
    type=click.IntRange(min=0, max=20),
    default=3,
    show_default=True,
    help="Size of the set that is chosen, one test after the other.",
)
@run_options
@json_option
def next_tests(
    campaign: str,
    aim: str | None,
    count: int,
    seed: int,
    draws: int,
    level: float,
    settings: Mapping[str, str],
    as_json: bool,
) -> None:
    """Which further tests would tell most, before any of them is run.

    Judges the candidates under [[candidates]], or without them a set made from the tests: how much
    each would narrow an interval, or the chance to tell apart laws that the present tests cannot.
    """
    from leachkin.campaign import (
        campaign_next_tests,
        candidate_problems,
        read_campaign,
        run_campaign,
        stage_behind,
    )
    from leachkin.cli.output import (
        print_json,
        print_problems,
        print_tables,
        progress_line,
        remark,
    )
    from leachkin.problems import stop_if_any

    read = read_campaign(campaign, settings)
    stop_if_any(candidate_problems(read))
    upto, progress = stage_behind(read, aim), progress_line()
    result = run_campaign(read, upto, seed=seed, draws=draws, level=level, progress=progress)
    found = campaign_next_tests(read, result, aim, count=count, seed=seed)
    if as_json:
        print_json(found.to_dict())
    else:
        for line in found.advice:
            click.echo(line)
        if found.tables:
            click.echo()
        print_tables(found.tables)
    for note in found.notes:
        remark(note)
    print_problems(result.problems)
    remark(f"next: leachkin fit {campaign} when the tests are in")
