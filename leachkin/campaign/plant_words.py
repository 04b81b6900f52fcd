"""Sentences about a plant figure: what its band holds, where it lies outside the data."""

from __future__ import annotations

import numpy as np

from leachkin.campaign.assumed_values import assumed_priors
from leachkin.campaign.printed_law import flat_sizes, with_ultimate_knots
from leachkin.campaign.settings import Settings
from leachkin.campaign.stage_results import GangueStage, PlantOre
from leachkin.kinetics import RateLaw
from leachkin.testwork import SizeDistribution

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
    reagent_g_per_L: float | None,
    time_h: float,
    plant: str,
) -> tuple[str, ...]:
    """Return a sentence for each way in which a plant lies outside the data of its law."""
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
    return tuple(str(line) for line in lines)


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
