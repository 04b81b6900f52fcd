"""``leachkin extraction``."""

from __future__ import annotations

from collections.abc import Mapping

import click

from leachkin.cli.options import campaign_argument, json_option, set_option


@click.command()
@campaign_argument
@click.option("--explain", metavar="TEST", help="Print one test's arithmetic line by line.")
@click.option("--metal", metavar="METAL", help="Analyte to explain; all of them if left out.")
@set_option
@json_option
def extraction(
    campaign: str,
    explain: str | None,
    metal: str | None,
    settings: Mapping[str, str],
    as_json: bool,
) -> None:
    """Metal balance of every test: three final extractions, heads, closure.

    The three are solution over calculated head, solution over assay head, and assay head less
    tail. --explain TEST prints the arithmetic of one test: aliquots, make-up, tail, heads.
    """
    from leachkin.cli.stage import print_stage, say_next, stage_result

    if metal is not None and explain is None:
        raise click.UsageError("--metal goes with --explain TEST.")
    if explain is not None:
        _explain(campaign, settings, explain, metal)
        return
    result = stage_result("extraction", campaign, settings, draws=0)
    print_stage("extraction", result, as_json=as_json)
    say_next("extraction", campaign)


def _explain(campaign: str, settings: Mapping[str, str], name: str, metal: str | None) -> None:
    from leachkin.campaign import read_campaign
    from leachkin.cli.output import remark
    from leachkin.errors import InputProblems
    from leachkin.problems import unknown_name
    from leachkin.testwork import explain_balance

    tests = {test.name: test for test in read_campaign(campaign, settings).tests}
    if name not in tests:
        raise InputProblems([unknown_name("test", name, tests, column="--explain")])
    analytes = tests[name].solution if metal is None else [metal]
    for position, analyte in enumerate(analytes):
        if position:
            click.echo()
        for line in explain_balance(tests[name], analyte):
            click.echo(line)
    remark(f"next: leachkin extraction {campaign}, or leachkin fit {campaign}")
