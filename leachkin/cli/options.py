"""Options and arguments that several commands share."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Any, TypeVar

import click

Decorated = TypeVar("Decorated", bound=Callable[..., Any])

DEFAULT_SEED = 1
DEFAULT_DRAWS = 400
DEFAULT_LEVEL = 0.95
INTERVAL_METHODS = ("linearised", "profile", "bootstrap", "posterior")


def campaign_argument(function: Decorated) -> Decorated:
    """Add the CAMPAIGN argument."""
    return click.argument("campaign", metavar="CAMPAIGN")(function)


def set_option(function: Decorated) -> Decorated:
    """Add --set."""
    return click.option(
        "--set",
        "settings",
        multiple=True,
        metavar="KEY=VALUE",
        callback=_read_settings,
        help='Set a key of the campaign for this run, as heap.lift_height="4 m". Repeatable.',
    )(function)


def run_options(function: Decorated) -> Decorated:
    """Add --seed, --draws, --level and --set."""
    function = set_option(function)
    function = click.option(
        "--level",
        type=click.FloatRange(0.5, 0.999),
        default=DEFAULT_LEVEL,
        show_default=True,
        help="Level of intervals and bands.",
    )(function)
    function = click.option(
        "--draws",
        type=click.IntRange(min=0),
        default=DEFAULT_DRAWS,
        show_default=True,
        help="Draws behind a band; 0 for none.",
    )(function)
    return click.option(
        "--seed",
        type=click.IntRange(min=0),
        default=DEFAULT_SEED,
        show_default=True,
        help="Seed of every random step.",
    )(function)


def vary_option(function: Decorated) -> Decorated:
    """Add --vary."""
    return click.option(
        "--vary",
        multiple=True,
        metavar="KEY=A,B,C",
        callback=_read_variations,
        help='One row for each value, as heap.lift_height="4,6,8 m". Repeatable: every '
        "combination.",
    )(function)


def json_option(function: Decorated) -> Decorated:
    """Add --json."""
    return click.option(
        "--json", "as_json", is_flag=True, help="Print results.json instead of tables."
    )(function)


def _read_settings(
    ctx: click.Context, param: click.Parameter, value: tuple[str, ...]
) -> dict[str, str]:
    del ctx
    return dict(_split(text, param) for text in value)


def _read_variations(
    ctx: click.Context, param: click.Parameter, value: tuple[str, ...]
) -> dict[str, tuple[str, ...]]:
    variations = {}
    for text in value:
        key, listed = _split(text, param)
        values = tuple(part.strip() for part in listed.split(","))
        if not all(values):
            raise click.BadParameter(f"{text!r}: an empty value between commas.", ctx, param)
        variations[key] = _with_last_unit(values)
    return variations


def _with_last_unit(values: tuple[str, ...]) -> tuple[str, ...]:
    """Give bare numbers the unit of the last value: ``4,6,8 m`` is ``4 m,6 m,8 m``."""
    match = re.fullmatch(r"[-+0-9.eE]+\s*([^0-9\s].*)", values[-1])
    if match is None:
        return values
    bare = re.compile(r"[-+]?[0-9.]+(?:[eE][-+]?[0-9]+)?")
    return tuple(f"{v} {match.group(1)}" if bare.fullmatch(v) else v for v in values)


def _split(text: str, param: click.Parameter) -> tuple[str, str]:
    key, sign, value = text.partition("=")
    if not sign or not key.strip() or not value.strip():
        raise click.BadParameter(
            f'{text!r} is not KEY=VALUE; write it as heap.lift_height="4 m".', param=param
        )
    return key.strip(), value.strip()
