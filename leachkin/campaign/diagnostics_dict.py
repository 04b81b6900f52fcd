"""Diagnostics of a fit as plain types for results.json; what is not finite is null."""

from __future__ import annotations

from typing import Any

from leachkin.campaign.bands import plain_number
from leachkin.inference import Posterior
from leachkin.kinetics import KineticDiagnostics, RatePlot


def diagnostics_dict(found: KineticDiagnostics | None) -> dict[str, Any] | None:
    """Return leverage, correlation and rates of single tests."""
    if found is None:
        return None
    rows = found.rows
    return {
        "rows": [
            {
                "test": test,
                "kind": kind,
                "time_h": plain_number(time),
                "leverage": plain_number(leverage),
                "standardised_residual": plain_number(residual),
            }
            for test, kind, time, leverage, residual in zip(
                rows.test, rows.kind, rows.time_h, rows.leverage, rows.standardised, strict=True
            )
        ],
        "correlation": {
            "parameters": list(found.correlated),
            "matrix": [[plain_number(value) for value in row] for row in found.correlation],
        },
        "rates_by_size_mm": _rates(found.by_size),
        "rates_by_strength_g_per_L": _rates(found.by_strength),
    }


def _rates(plot: RatePlot | None) -> list[dict[str, Any]] | None:
    if plot is None:
        return None
    return [
        {
            "test": one.test,
            "at": plain_number(at),
            "rate_per_h": plain_number(rate),
            "low": plain_number(low),
            "high": plain_number(high),
        }
        for one, at, rate, low, high in zip(
            plot.tests, plot.at, plot.rate, plot.low, plot.high, strict=True
        )
    ]


def posterior_dict(found: Posterior | None) -> dict[str, Any] | None:
    """Return how a posterior was sampled; its draws stay in memory."""
    if found is None:
        return None
    return {
        "walkers": found.walkers,
        "steps": found.steps,
        "burn_in": found.burn_in,
        "acceptance": plain_number(found.acceptance),
        "autocorrelation_steps": plain_number(found.longest_autocorrelation),
        "autocorrelation_times": plain_number(found.times_walked),
        "long_enough": found.long_enough,
    }
