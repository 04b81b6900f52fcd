"""``leachkin tank``, ``heap``, ``cementation`` and ``budget``: one stage, as tables."""

from __future__ import annotations

from collections.abc import Mapping

import click

from leachkin.cli.options import campaign_argument, json_option, run_options, vary_option
from leachkin.cli.stage import run_stage


def _stage_command(name: str, text: str) -> click.Command:
    """Return the command of one stage; all of them take the same options."""

    @click.command(name, help=text)
    @campaign_argument
    @run_options
    @vary_option
    @json_option
    def command(
        campaign: str,
        seed: int,
        draws: int,
        level: float,
        settings: Mapping[str, str],
        vary: Mapping[str, tuple[str, ...]],
        as_json: bool,
    ) -> None:
        run_stage(
            name,
            campaign,
            settings,
            vary,
            as_json=as_json,
            seed=seed,
            draws=draws,
            level=level,
        )

    return command


tank = _stage_command(
    "tank",
    "Extraction and reagent tank by tank.\n\nNeeds [tank], and tests or [rate_law].",
)
heap = _stage_command(
    "heap",
    "Heap extraction by day, supply against demand, and which rules.\n\nNeeds [heap], and tests "
    'or [rate_law]. For a what-if: --set heap.cure="8 kg/t", or --vary lift_height="4,6,8 m" for '
    "one row a value.",
)
cementation = _stage_command(
    "cementation",
    "Scrap iron or zinc dust by sink, hydrogen, couples in order, rates, vessel and barren.\n\n"
    "Needs [cementation], or cementation_tests under [tables] for rates alone. The solution is "
    "stated there or comes from the heap or the tanks. [cementation.vessel] sizes a vessel, "
    "[cementation.mixed_potential] ranks the sinks along it, [cementation.site] fits that to a "
    "barren.",
)
budget = _stage_command(
    "budget",
    "Reagents by use: kg/t, as received, tonnes a month and cost.\n\nNeeds [budget]. A line "
    "without a price, its date or a purity makes the total INCOMPLETE and is named.",
)
