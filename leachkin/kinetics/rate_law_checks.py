"""Weights between knots, and what a rate law refuses."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.problems import argument_error

if TYPE_CHECKING:
    from leachkin.kinetics.rate_law import RateLaw

Array = NDArray[np.float64]


def knot_weights(size_mm: Array, knot_size_mm: Array) -> Array:
    """Return weights (c, k) of interpolation linear in ln d between knots, flat outside."""
    return linear_weights(np.log(size_mm), np.log(knot_size_mm))


def linear_weights(at: Array, knots: Array) -> Array:
    """Return weights, shape of ``at`` + (k,), of interpolation linear between rising knots."""
    return np.stack([np.interp(at, knots, unit) for unit in np.eye(knots.size)], axis=-1)


def above_zero(name: str, value: Array) -> Array:
    """Return finite numbers above 0, or stop."""
    if not np.all(np.isfinite(value)) or np.any(value <= 0.0):
        raise argument_error(name, f"{value}", "finite, above 0")
    return value


def check_ultimate(size_mm: Array, ultimate: Array, temperature_K: Array | None) -> None:
    """Stop at knots that do not rise, or ultimates that do not fit them."""
    above_zero("ultimate_size_mm", size_mm)
    knots, name = size_mm, "ultimate_size_mm"
    if temperature_K is not None:
        name = "ultimate_temperature_K"
        knots = above_zero(name, np.atleast_1d(np.asarray(temperature_K, dtype=float)))
    if np.any(np.diff(knots) <= 0.0):
        what = "rising sizes" if temperature_K is None else "rising temperatures"
        raise argument_error(name, f"{knots.tolist()}", what)
    if ultimate.shape[-1] != knots.size:
        what = "sizes" if temperature_K is None else "temperatures"
        raise argument_error(
            "ultimate", f"{ultimate.shape[-1]} values", f"one for each of {knots.size} {what}"
        )
    if not np.all(np.isfinite(ultimate)) or np.any(ultimate < 0.0):
        raise argument_error("ultimate", f"{ultimate}", "finite fractions, none below 0")


def check_slow(slow: RateLaw | None, share: Array) -> None:
    """Stop at a share outside 0 to 1, or a second fraction with terms of its own."""
    if not np.all((share >= 0.0) & (share <= 1.0)):
        raise argument_error("slow_share", f"{share}", "a fraction from 0 to 1")
    if slow is None and np.any(share):
        raise argument_error("slow_share", f"{share}", "0 where there is no second fraction")
    if slow is not None and not (slow.is_plain and not np.any(slow.lag_h)):
        raise argument_error("slow", "a law with terms of its own", "a plain law")


def no_clock() -> InputProblems:
    """Return the error of a law without one equivalent leach time."""
    return argument_error(
        "law",
        "its resistances differ in reagent order, or in activation energy under a changing "
        "temperature: no single equivalent leach time serves them",
        "one order, and one temperature or one activation energy",
        "follow the grains step by step: law.advance or extraction_along",
    )
