"""What makes a plant band wide, and whether the laws that are not rejected change the figure."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.bands import Quantity, listed, quantity_of
from leachkin.campaign.stage_results import BandPart, LawElsewhere, PlantOre
from leachkin.kinetics import RateLaw

Array = NDArray[np.float64]
#: A difference between laws that is worth a word, as a fraction of the head.
WORTH_A_WORD = 0.01

#: Extraction at the end for a law (or a batch), with the scale-up drawn or stated.
End = Callable[[RateLaw, bool], Array]


def other_laws(ore: PlantOre, end: End) -> tuple[LawElsewhere, ...]:
    """Return what every other law that the data do not reject says at the end."""
    if len(ore.carried) < 2:
        return ()
    answer = float(end(ore.carried[0].law, False))
    found = []
    for one in ore.carried[1:]:
        extraction = float(end(one.law, False))
        moved = abs(extraction - answer) > WORTH_A_WORD
        found.append(LawElsewhere(one.name, extraction, moved, one.weight))
    return tuple(found)


def band_parts(
    ore: PlantOre,
    end: End,
    others: tuple[LawElsewhere, ...],
    together: Quantity,
    fit_draws: RateLaw | None,
    scale_up: tuple[str, ...],
    level: float,
) -> tuple[BandPart, ...]:
    """Return how wide the figure would be from the fit, the law and the scale-up alone.

    Parameters
    ----------
    ore : PlantOre
    end : callable
    others : tuple of LawElsewhere
    together : Quantity
        The figure with its whole band.
    fit_draws : RateLaw or None
        Draws of the carried law alone.
    scale_up : tuple of str
        Names of the stated scale-up ranges.
    level : float
    """
    value = together.value
    fit: Any = None if fit_draws is None else end(fit_draws, False)
    held = "constants of the law, as the tests hold them" if fit is not None else "no draws"
    parts = [BandPart("fit", quantity_of(value, fit, "1", level), held)]
    if others and value is not None:
        every = [value, *(one.extraction for one in others)]
        figure = Quantity(value, "1", min(every), max(every))
        names = listed([ore.carried[0].name, *(one.law for one in others)])
        parts.append(BandPart("law", figure, f"from one to the other: {names}"))
    else:
        why = "no other law is left" if ore.described else "no law describes the tests"
        parts.append(BandPart("law", Quantity(value, "1"), why))
    drawn = end(ore.law, True) if scale_up else None
    words = f"ranges of {', '.join(scale_up)}" if scale_up else "no scale-up range is stated"
    parts.append(BandPart("scale-up", quantity_of(value, drawn, "1", level), words))
    parts.append(BandPart("all together", together, "the band that is printed"))
    return tuple(parts)


def plant_verdict(
    ore: PlantOre, others: tuple[LawElsewhere, ...], together: Quantity, where: str
) -> str:
    """Return whether the mechanism matters to this plant, in a sentence."""
    if together.value is None:
        return ""
    rest = ""
    if ore.not_carried:
        names = listed(list(ore.not_carried))
        rest = f" Not rejected either, but without a theory that carries it to a plant: {names}."
    if not ore.described:
        return (
            f"No law that can be carried to a plant describes these tests: the plant figure rests "
            f"on {ore.law.name}, for want of a better one, and no band holds that.{rest}"
        )
    if not others:
        if not ore.carried:
            return ""
        return f"No other law is left that could change your plant figure.{rest}"
    every = [together.value, *(one.extraction for one in others)]
    low, high = 100.0 * min(every), 100.0 * max(every)
    laws = f"the {len(every)} laws not rejected give {low:.3g} to {high:.3g} % {where}"
    if any(one.changes_the_figure for one in others):
        return f"The choice of law does change your plant figure: {laws}.{rest}"
    much = f"{100 * WORTH_A_WORD:g} point"
    return f"The choice of law does not change your plant figure by {much}: {laws}.{rest}"
