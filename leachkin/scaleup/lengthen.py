"""A longer way for diffusion in the heap than in the grain of the bottle."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike

from leachkin.kinetics import ParticleLaw, RateLaw
from leachkin.problems import argument_error
from leachkin.scaleup.checks import above_zero


def lengthen(law: ParticleLaw | RateLaw, length_factor: ArrayLike) -> ParticleLaw | RateLaw:
    """Return a law whose ash layer is diffused through over a longer way.

    Parameters
    ----------
    law : ParticleLaw or RateLaw
    length_factor : array_like, shape () or (n,)
        Effective diffusion length over the grain's own; above zero. 1 returns the law.

    Returns
    -------
    ParticleLaw or RateLaw
        The same kind, its batch shape broadcast with the factor.

    Raises
    ------
    InputProblems
        If the factor is not above zero, or it is not 1 and the law has no ash layer.

    Notes
    -----
    The time through an ash layer goes with the square of its length, whatever size exponent was
    fitted between size classes; the film round the grain and the reaction at the core do not
    know the length, and keep their times. Heaps have behaved as if the length were up to ten times
    the largest rock (common practice): fit the factor to columns, it is not a constant.

    Examples
    --------
    >>> lengthen(ParticleLaw(ash_layer=7.0, chemical=3.0), 2.0).ash_layer.item()
    28.0
    """
    factor = above_zero("length_factor", length_factor, "")
    if np.all(factor == 1.0):
        return law
    if isinstance(law, ParticleLaw):
        if not np.any(law.ash_layer):
            raise _no_ash("the particle law")
        return replace(law, ash_layer=law.ash_layer * factor**2)
    if not any(resistance.kind == "ash_layer" for resistance in law.resistances):
        raise _no_ash(law.name)
    return replace(
        law,
        resistances=tuple(
            replace(resistance, ln_tau=resistance.ln_tau + 2.0 * np.log(factor))
            if resistance.kind == "ash_layer"
            else resistance
            for resistance in law.resistances
        ),
    )


def _no_ash(name: str) -> Exception:
    return argument_error(
        "length_factor",
        f"a factor other than 1 with a law without an ash layer ({name})",
        "1, or a law with an ash layer: only its time depends on a diffusion length",
        "a law such as ash_layer+chemical, or slow the whole bed with delivery_factor",
    )
