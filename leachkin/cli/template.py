"""``leachkin template``."""

from __future__ import annotations

import click

#: The kinds are listed again so that help imports nothing; a test compares them.
KINDS = ("bottle-rolls", "copper-heap", "gold-tanks", "acid-tanks")


@click.command()
@click.argument("directory", metavar="DIR")
@click.option(
    "--kind", type=click.Choice(KINDS), required=True, help="The kind of job the workbook is for."
)
def template(directory: str, kind: str) -> None:
    """Write a workbook to fill in: settings, tests, readings, heads and close-out.

    Each sheet has a row that shows how to fill it in; such rows are never read. The filled
    workbook is a campaign by itself: leachkin run WORKBOOK --out DIR.
    """
    from leachkin.campaign import write_template_workbook
    from leachkin.cli.output import remark

    path = write_template_workbook(directory, kind)
    click.echo(path.as_posix())
    remark(f"fill it in, then: leachkin check {path.as_posix()}")
