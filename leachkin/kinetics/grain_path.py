"""Extraction along a history of temperature and reagent, grain by grain."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics.rate_law import RateLaw
from leachkin.problems import argument_error
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]
Condition = Callable[[float], float] | float | None


def extraction_along(
    law: RateLaw,
    sizes: SizeDistribution,
    time_h: ArrayLike,
    temperature_K: Condition = None,
    reagent_g_per_L: Condition = None,
    steps_per_interval: int = 16,
) -> Array:
    """Return the extraction of all the metal along a history of conditions.

    Parameters
    ----------
    law : RateLaw
    sizes : SizeDistribution
    time_h : array_like, shape (t,)
        Rising, not negative; the history starts at 0.
    temperature_K, reagent_g_per_L : callable (time_h) -> number, or a number, or None
        None is the reference state of the law.
    steps_per_interval : int
        Equal steps between one time and the next.

    Returns
    -------
    ndarray, shape B + (t,)

    Notes
    -----
    Each step holds the conditions of its middle, exact for the grains: second order in the step,
    and exact where the conditions are constant.
    """
    times = np.asarray(time_h, dtype=float)
    if times.ndim != 1 or not np.all(np.isfinite(times)) or np.any(times < 0.0):
        raise argument_error("time_h", "times below 0 or not finite", "a list of hours from 0 up")
    if np.any(np.diff(times) <= 0.0):
        raise argument_error("time_h", "times that do not rise", "rising hours")
    if steps_per_interval < 1:
        raise argument_error("steps_per_interval", str(steps_per_interval), "1 or more")
    depth = law.initial_depth(sizes)
    found = np.empty((*law.batch_shape, times.size))
    now = 0.0
    for j, until in enumerate(times):
        step = (until - now) / steps_per_interval
        for i in range(steps_per_interval if step > 0.0 else 0):
            middle = now + (i + 0.5) * step
            warmth, strength = _at(temperature_K, middle), _at(reagent_g_per_L, middle)
            depth = law.advance(depth, step, sizes, warmth, strength)
        now = float(until)
        found[..., j] = law.extraction_of_depth(depth, sizes)
    return found


def _at(condition: Condition, time_h: float) -> float | None:
    return condition(time_h) if callable(condition) else condition
