"""Sides on which the data leave a parameter open, found by fitting again with it held there.

A linearised interval cannot see that a curve which has not bent allows any ultimate extraction,
or that a curve which was over before the first readings allows any shorter time.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import Estimate, LeastSquaresProblem, least_squares
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_remarks import FEW_POINTS, PLATEAU, shares_dissolved
from leachkin.testwork import Observed

Array = NDArray[np.float64]
Side = Literal["low", "high"]

#: An ultimate extraction seen by fewer readings on the plateau than this is tried at its end.
PLATEAU_READINGS = 2
#: A time is tried at this share of the first reading.
FAR_BELOW = 0.02
OPEN_ULTIMATE = "the readings do not exclude an ultimate extraction of 1: run longer"
OPEN_TIME = "over before the first readings: any shorter time fits as well"


def open_sides(
    tests: Sequence[Observed], design: FitDesign, estimate: Estimate, level: float
) -> dict[str, tuple[Side, str]]:
    """Return the open side of each parameter that has one, by name, and the reason."""
    if not estimate.converged or estimate.degrees_of_freedom < 1:
        return {}
    shares = shares_dissolved(design, estimate.vector)
    found: dict[str, tuple[Side, str]] = {}
    for j, quantity in enumerate(design.layout.free):
        if estimate.states[j] != "free":
            continue
        if quantity.role == "ultimate" and _plateau(design, shares, int(quantity.which)):
            if _allows(design, estimate, j, quantity.high, level):
                found[quantity.name] = ("high", OPEN_ULTIMATE)
        elif quantity.role == "time" and _few_rising(tests, shares, design):
            first = min(float(o.time_h[o.time_h > 0].min()) for o in tests)
            short = float(np.log(FAR_BELOW * first))
            clock = quantity.which.endswith("clock")
            if _allows(design, estimate, j, -short if clock else short, level):
                found[quantity.name] = ("high" if clock else "low", OPEN_TIME)
    return found


def _plateau(design: FitDesign, shares: list[Array], knot: int) -> bool:
    """Return whether too few readings that weigh on a knot have reached their plateau."""
    weight = design.knot_weight(knot)
    share = np.concatenate(shares)
    return int(np.sum((share > PLATEAU) & (weight > 0.5))) < PLATEAU_READINGS


def _few_rising(tests: Sequence[Observed], shares: list[Array], design: FitDesign) -> bool:
    rising = sum(
        int(np.sum((o.time_h > 0) & (share < PLATEAU)))
        for o, share in zip(tests, shares, strict=True)
    )
    return rising <= FEW_POINTS and len(design.layout.kinds) == 1


def _allows(design: FitDesign, estimate: Estimate, j: int, value: float, level: float) -> bool:
    """Return whether the data allow a quantity at a value, the others fitted again."""
    layout = design.layout
    name = layout.free[j].name
    quantities = tuple(
        replace(q, start=value, free=False) if q.name == name else q for q in layout.quantities
    )
    held = replace(design, layout=replace(layout, quantities=quantities))
    free = held.layout.free
    again = least_squares(
        LeastSquaresProblem(
            names=tuple(q.name for q in free),
            start=_carried(design, held, estimate, j, value),
            low=np.array([q.low for q in free]),
            high=np.array([q.high for q in free]),
            residuals_and_jacobian=held.residuals_and_jacobian,
            scales=tuple(q.scale for q in free),
            stated=estimate.stated,
        )
    )
    rise = again.sum_of_squares - estimate.sum_of_squares
    return rise <= estimate.multiplier(level) ** 2 * estimate.scatter_variance


def _carried(design: FitDesign, held: FitDesign, estimate: Estimate, j: int, value: float) -> Array:
    """Return the best start for the others: as they are, or times longer for a higher ultimate."""
    base = np.delete(estimate.vector, j)
    if design.layout.free[j].role != "ultimate":
        return base
    ratio = value - float(estimate.vector[j])
    times = np.array([float(q.role == "time") for q in held.layout.free])
    sign = np.array([-1.0 if q.which.endswith("clock") else 1.0 for q in held.layout.free])
    tries = base + np.linspace(0.0, max(ratio, 1.0) + 3.0, 40)[:, None] * times * sign
    return np.asarray(tries[int(np.argmin(held.squares(tries)))])
