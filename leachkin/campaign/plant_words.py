"""Sentences about a plant figure: what its band holds, where it lies outside the data."""

from __future__ import annotations

from collections.abc import Collection, Sequence

import numpy as np
from numpy.typing import ArrayLike

from leachkin.campaign.assumed_values import assumed_priors
from leachkin.campaign.bands import listed
from leachkin.campaign.printed_law import flat_sizes, with_ultimate_knots
from leachkin.campaign.settings import Settings
from leachkin.campaign.stage_results import GangueStage, PlantOre
from leachkin.kinetics import RateLaw
from leachkin.testwork import SizeDistribution

#: What an assumed parameter carries a law along, by its first word.
_REACHES = {
    "temperature": "activation_energy",
    "size": "size_exponent",
    "reagent": "reagent_order",
}
NO_SCALE_UP = "no scale-up range is stated, so nothing of the scale-up is in the band"
NO_BAND = "no band: nothing behind this figure has a range"


def band_contents(
    ore: PlantOre,
    gangue: GangueStage | None,
    settings: Settings,
    stage: str,
    has_band: bool,
) -> tuple[str, ...]:
    """Return what a band holds, in words; the last entry says it where ranges are missing."""
    if not has_band:
        return (NO_BAND,)
    held = []
    if ore.fit_in_band:
        held.append("fit")
        if len(ore.carried) > 1:
            held.append(f"{len(ore.carried)} laws not rejected, by AICc weight")
        assumed = assumed_priors(settings)
        held += [f"assumed ranges of {', '.join(assumed)}"] if assumed else []
    if gangue is not None and gangue.source == "fit":
        held.append("gangue fit")
    printed = settings.ranged("rate_law", "gangue")
    if printed:
        held.append(f"stated ranges of {len(printed)} constants")
    scale_up = settings.ranged(stage)
    if scale_up:
        names = ", ".join(setting.key.split(".", 1)[1] for setting in scale_up)
        return (*held, f"scale-up ranges of {names}")
    return (*held, NO_SCALE_UP)


def outside_the_data(
    law: RateLaw,
    sizes: SizeDistribution,
    temperature_K: float,
    reagent_g_per_L: ArrayLike | None,
    time_h: float,
    plant: str,
    assumed: Collection[str] = (),
) -> tuple[str, ...]:
    """Return a sentence for each way in which a plant lies outside the data of its law.

    Parameters
    ----------
    law : RateLaw
    sizes : SizeDistribution
    temperature_K, time_h : float
    reagent_g_per_L : array_like or None
        Every strength that the plant works at.
    plant : str
        As "the heap".
    assumed : collection of str
        Assumed parameters: what carries the law where the tests do not reach is then said.
    """
    if law.box is None:
        return (
            f"The range of the data behind the law is not known, so nobody can say where "
            f"{plant} extrapolates.",
        )
    lines = law.box.outside(
        temperature_K=temperature_K,
        size_mm=np.asarray(sizes.size_mm, dtype=float),
        reagent_g_per_L=reagent_g_per_L,
        time_h=time_h,
    )
    return tuple(f"{line}{_carried_by(line, assumed)}" for line in lines)


def _carried_by(line: str, assumed: Collection[str]) -> str:
    """Say which assumed value reaches where the tests do not; no test stands behind it."""
    stem = _REACHES.get(line.split(" ", 1)[0])
    own = [name for name in assumed if stem is not None and name.startswith(stem)]
    return f", carried by the assumed {' and '.join(own)}" if own else ""


def outside_words(outside: Sequence[str]) -> str:
    """Return in which conditions a plant leaves its tests, for beside the figure.

    Examples
    --------
    >>> outside_words(["size 15 mm is outside the tests (1 to 11 mm)"])
    'outside the tests in size'
    """
    names = [line.split(" ", 1)[0] for line in outside if " is outside the tests" in line]
    if names:
        return f"outside the tests in {listed(list(dict.fromkeys(names)))}"
    return "nobody knows whether inside the tests" if outside else ""


def ultimate_note(
    law: RateLaw, sizes: SizeDistribution, settings: Settings, stage: str
) -> tuple[str, ...]:
    """Return a sentence where the ultimate extraction of the nearest tested size is held."""
    merged = with_ultimate_knots(law, settings, f"{stage}.sizes.ultimate", 0, 0)
    flat = flat_sizes(merged, np.asarray(sizes.size_mm, dtype=float))
    if not flat:
        return ()
    listed = ", ".join(f"{size:.3g}" for size in flat)
    return (
        f"Ultimate extraction at {listed} mm was not tested: that of the nearest size tested is "
        f"held. Set [{stage}.sizes] ultimate where it is known.",
    )
