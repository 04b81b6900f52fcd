"""``leachkin arrhenius``."""

from __future__ import annotations

import click

from leachkin.cli.options import DEFAULT_LEVEL, json_option


@click.command()
@click.argument("file", metavar="FILE")
@click.option(
    "--level",
    type=click.FloatRange(0.5, 0.999),
    default=DEFAULT_LEVEL,
    show_default=True,
    help="Level of the interval.",
)
@json_option
def arrhenius(file: str, level: float, as_json: bool) -> None:
    """Activation energy from rate constants against temperature.

    FILE is a CSV with the columns "temperature (degC)", "rate constant" in any unit, and, where
    you have it, "standard error" of the rate constant.
    """
    from leachkin.cli.output import print_json, print_tables, remark
    from leachkin.cli.rate_constants import read_rate_constants
    from leachkin.kinetics import fit_arrhenius
    from leachkin.report import arrhenius_table

    given = read_rate_constants(file)
    fit = fit_arrhenius(
        given.temperature_K, given.rate_constant, standard_error=given.standard_error, level=level
    )
    tables = (arrhenius_table(fit), fit.table())
    if as_json:
        print_json({table.name: table.to_records() for table in tables})
        return
    print_tables(tables)
    for warning in fit.warnings:
        remark(f"note: {warning}")
    weights = "equal weights on ln k" if given.standard_error is None else "weights 1/se^2"
    remark(f"assumed: {weights}; the interval uses {fit.degrees_of_freedom} degrees of freedom.")
    remark("next: leachkin fit CAMPAIGN fits all temperatures together, without a k for each.")
