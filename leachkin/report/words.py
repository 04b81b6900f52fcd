"""Words that figures and the page share: bands, file names, temperatures, sizes."""

from __future__ import annotations

import re
from collections.abc import Sequence

from leachkin.campaign import CampaignResult
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.testwork import SizeDistribution

#: What the model knows, by stage, and what no stage knows.
_IN_MODEL = {
    "kinetics": "film, ash (product) layer and chemical resistance of grains by size, temperature "
    "and reagent strength, ultimate extraction by size",
    "gangue": "reagent taken by gangue in a fast and a slow part",
    "tank": "ideally mixed tanks in series with their reagent balance",
    "heap": "plug flow through a lift with cure, contacted fraction, delivery factor and moisture",
    "cementation": "stoichiometric and stated losses of the precipitant, one pass",
    "cementation_more": "couples at the activities of the solution; sinks by the mixed potential, "
    "which sets no budget until it is fitted to a barren of the site",
}
_NOT_IN_MODEL = (
    "biology and heat balance",
    "channelling, slump and permeability",
    "precipitation, preg-robbing and passivation",
    "side slopes, rest and rinse",
    "build-up in closed circuits",
)


def scope_line(result: CampaignResult) -> str:
    """Return which phenomena are in the model of a run and which are in none."""
    done = [words for stage, words in _IN_MODEL.items() if getattr(result, stage)]
    inside = "; ".join(done) or "metal balances only"
    return f"In the model: {inside}. Not in the model: {', '.join(_NOT_IN_MODEL)}."


def file_word(text: str) -> str:
    """Return a text as a word for file names and ids.

    Examples
    --------
    >>> file_word("ore/Cu")
    'ore_Cu'
    """
    return re.sub(r"[^A-Za-z0-9]+", "_", text).strip("_") or "x"


def band_words(level: float | None, contains: Sequence[str]) -> str:
    """Return what a band is: ``P10 (low) to P90: fit, scale-up ranges``."""
    if level is None:
        return "; ".join(contains) or "no band: no draws were made"
    low = 50 * (1 - level)
    ends = f"P{low:.3g} (low) to P{100 - low:.3g}"
    return f"{ends}: {', '.join(contains)}" if contains else ends


def celsius(temperature_K: float) -> str:
    """Return a temperature in words, as ``17 \u00b0C``."""
    return f"{temperature_K - ZERO_CELSIUS_K:.3g} \u00b0C"


def size_words(sizes: SizeDistribution | None) -> str:
    """Return a size distribution in a few words."""
    if sizes is None:
        return ""
    if len(sizes.size_mm) == 1:
        return f"{float(sizes.size_mm[0]):.3g} mm"
    return f"mean {float(sizes.mass_mean_mm):.3g} mm, {len(sizes.size_mm)} classes"
