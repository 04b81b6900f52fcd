"""The values of a fit by name: of one vector or of draws, those made of others among them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import Estimate, Interval, to_natural
from leachkin.kinetics.fit_layout import Layout
from leachkin.kinetics.fit_result import Parameter

Array = NDArray[np.float64]
#: The fast rate constant of two fractions is the slow one times their ratio.
FAST_RATE, FACTORS = "k_fast", ("k_slow", "ratio")
WITH_A_PRIOR = ", with a prior"


def natural_values(layout: Layout, vectors: Array) -> dict[str, Array]:
    """Return every fitted quantity but the heads on its natural scale, and the fast rate.

    Parameters
    ----------
    layout : Layout
    vectors : ndarray, shape B + (p,)
        Fitted vectors.

    Returns
    -------
    dict of str to ndarray, shape B
    """
    found = {
        q.name: to_natural(q.scale, vectors[..., j])
        for j, q in enumerate(layout.free)
        if q.role != "head"
    }
    if layout.law_name == "two_rate":
        full = layout.expand(vectors)
        parts = [layout.natural(full, layout.names.index(name)) for name in FACTORS]
        found[FAST_RATE] = parts[0] * parts[1]
    return found


def held_values(layout: Layout, estimate: Estimate, vector: Array) -> dict[str, float]:
    """Return the values that an estimate holds, by name.

    Parameters
    ----------
    layout : Layout
    estimate : Estimate
        Of some or all quantities of the layout.
    vector : ndarray, shape (p,)
        Of all of them.

    Returns
    -------
    dict of str to float
        Without what the data of this estimate do not hold.
    """
    held = {n for n, s in zip(estimate.names, estimate.states, strict=True) if s != "not held"}
    values = natural_values(layout, vector)
    if FAST_RATE in values:
        fitted = {q.name for q in layout.free}
        if all(name in held or name not in fitted for name in FACTORS):
            held.add(FAST_RATE)
    return {name: float(value) for name, value in values.items() if name in held}


def with_interval(parameter: Parameter, interval: Interval, error: bool = True) -> Parameter:
    """Return a parameter with another interval, its value as it stands.

    ``error`` takes over the standard error too. That a prior stands behind it stays said.
    """
    known = parameter.method.endswith(WITH_A_PRIOR) and interval.method != "none"
    return replace(
        parameter,
        standard_error=interval.standard_error if error else parameter.standard_error,
        low=interval.low,
        high=interval.high,
        level=interval.level,
        method=interval.method + (WITH_A_PRIOR if known else ""),
        why_no_interval=interval.why_not,
    )


def quantity_names(layout: Layout) -> Mapping[str, int]:
    """Return the position of every fitted quantity but the heads, by name."""
    return {q.name: j for j, q in enumerate(layout.free) if q.role != "head"}
