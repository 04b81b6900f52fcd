"""What further tests mean for the work, in sentences that a metallurgist would say."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence

from leachkin.campaign.bands import listed
from leachkin.campaign.next_tests_default import COARSER
from leachkin.campaign.next_tests_plant import PlantBand
from leachkin.campaign.stage_results import HeapStage, KineticsStage, TankStage
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.kinetics import Candidate, CandidateGain, FitResult, NextTests

#: A whole band that would shrink by less than this share is not worth another bottle.
WORTH_A_BOTTLE = 0.05
#: A band within this half-width [% of total metal] needs no further bottle.
NARROW = 1.0
#: The rest of a band is named where it makes more than this share of the variance.
MOST_OF_IT = 0.5
#: A choice of law that makes more than this share of the variance comes first.
LAW_IS_MUCH = 0.2
#: Sizes closer than this, relative, are one.
SAME_SIZE = 1e-3
#: A test this near the plant's temperature stands for it [K].
NEAR_K = 1.0
_PERCENT = 100.0


def sentence(text: str) -> str:
    """Return a remark as a sentence."""
    return f"{text[:1].upper()}{text[1:].rstrip('.')}."


def quantity_advice(found: NextTests) -> list[str]:
    """Return the answer about quantities of the law: the best test, and a set."""
    best = found.best
    names = _few([outlook.target for outlook in found.present])
    opened = [outlook.target for outlook in best.outlooks if outlook.opened]
    if opened:
        said = [f"{_named(best)} gives {_few(opened)} a first interval."]
    elif best.shrink <= 0.0:
        return [f"No test here tells anything more about {names}."]
    else:
        share = _PERCENT * best.shrink
        said = [f"{_named(best)} tells most: it narrows {names} by {share:.0f} % in the mean."]
    said += [sentence(r) for r in found.remarks if r.startswith("nothing here helps")]
    if len(found.steps) > 1:
        chosen = ", then ".join(_steps(found))
        share = _PERCENT * found.steps[-1].shrink
        said.append(f"A set of {len(found.steps)}: {chosen}; together they take {share:.0f} %.")
    return said


def _steps(found: NextTests) -> Iterator[str]:
    seen: set[str] = set()
    for step in found.steps:
        yield f"{step.name} once more" if step.name in seen else step.name
        seen.add(step.name)


def _named(row: CandidateGain) -> str:
    return f"{row.name} ({row.candidate.why})" if row.candidate.why else row.name


def _few(names: Sequence[str]) -> str:
    return listed(list(names)) if len(names) <= 3 else f"{len(names)} constants"


def no_law_advice(stage: KineticsStage) -> list[str]:
    """Return what to say of a mechanism where no laws stand side by side."""
    ranking = stage.ranking
    if ranking is None or not ranking.mechanisms:
        verdict = "" if ranking is None else ranking.verdict
        return [
            f"No mechanism can be named: {verdict} Look at the data and the sizes first: a further "
            "test of the same kind would not tell."
        ]
    return [
        f"The ranking is settled: {ranking.verdict} No further test is needed to choose among the "
        "laws.",
        *stirring_advice(stage),
    ]


def stirring_advice(stage: KineticsStage) -> list[str]:
    """Say where the film was never asked, as the evidence does."""
    if any(one.stirring_rpm for one in stage.observed):
        return []
    return [
        "No stirring speed is written for any test: a pair at two speeds is the direct check of a "
        "film, which no ranking replaces."
    ]


def longer_advice(fit: FitResult, found: NextTests) -> list[str]:
    """Say that a longer test comes first where the curves do not bend over."""
    names = [q.name for q in fit.layout.quantities if q.role == "ultimate" and q.free]
    open_ended = [p for p in fit.parameters if p.name in names and p.high is None]
    if not open_ended:
        return []
    tested = fit.layout.knot_size_mm
    long = [
        (-float(row.candidate.bottle.time_h[-1]), row.name)
        for row in found.rows
        if any(abs(row.candidate.bottle.sizes.mass_mean_mm / d - 1.0) < SAME_SIZE for d in tested)
    ]
    which = f" ({min(long)[1]})" if long else ""
    values = listed([f"{p.name} at {p.value:.2f}" for p in open_ended])
    return [
        f"The tests do not exclude an ultimate extraction of 1: a longer one{which} comes first. "
        f"What follows takes {values}."
    ]


def law_advice(found: NextTests, plant: HeapStage | TankStage | None = None) -> list[str]:
    """Return which test would tell apart the laws that are left, and whether it matters."""
    said = [sentence(r) for r in found.remarks if " apart" in r]
    others = getattr(plant, "other_laws", ()) if said else ()
    for law in others:
        matters = "matters" if law.changes_the_figure else "does not matter"
        said.append(
            f"{law.law}, not rejected, would give {_PERCENT * law.extraction:.1f} % here: it "
            f"{matters}."
        )
    return said


def untested_advice(plant: str, untested: Mapping[str, tuple[float, float]]) -> list[str]:
    """Say what of the ultimate extraction was not tested and is taken within a trend."""
    if not untested:
        return []
    named = [
        f"{name.removeprefix('ultimate_').replace('_', ' ')} ({value:.2f} +/- {sd:.2f})"
        for name, (value, sd) in untested.items()
    ]
    return [
        f"The ultimate extraction at {listed(named)} was not tested: the fit's part here holds it, "
        f"within the trend of the tested ones; the {plant}'s own band does not."
    ]


def left_out_advice(plant: str, told: NextTests) -> list[str]:
    """Say what is assumed, in no band, and which test would tell it."""
    names = listed([outlook.target for outlook in told.present])
    share = _PERCENT * told.best.shrink
    return [
        f"{names} is assumed and in no band, because the {plant} takes no other value of it: "
        f"{told.best.name} would narrow it by {share:.0f} %."
    ]


def plant_advice(found: NextTests, band: PlantBand, multiplier: float) -> list[str]:
    """Return the answer about a plant figure: another bottle, a column, or a check."""
    now, best = found.present[0], found.best
    after = best.outlooks[0].half_width
    if now.half_width is None or after is None:
        gives = f"{_named(best)} gives its first interval" if after else "no test here tells it"
        said = [
            f"The {band.plant} rests on {listed(list(now.untold)) or 'a quantity'}, which no test "
            f"tells and no range is assumed for: {gives}."
        ]
        return [*said, *_unranged(band), *_checks(found, band)]
    return [*_band_advice(best, band, (now.half_width, after), multiplier), *_checks(found, band)]


def _band_advice(
    best: CandidateGain, band: PlantBand, fit_halves: tuple[float, float], multiplier: float
) -> list[str]:
    """Return what the best test does to the band, and what the rest of the band comes from."""
    whole, left = (band.whole_half(half, multiplier) for half in fit_halves)
    gain, share, law_share = 0.0, 0.0, 0.0
    if whole > 0.0:
        gain, share = 1.0 - left / whole, (fit_halves[0] / whole) ** 2
        law_share = multiplier**2 * band.law_variance / whole**2
    if law_share > LAW_IS_MUCH:
        first = (
            f"The choice of law makes {_PERCENT * law_share:.2g} % of the variance of the "
            f"{band.plant}'s band and the constants {_PERCENT * share:.2g} %: a test that tells "
            "the laws apart buys most."
        )
        return [first, *_unranged(band)]
    if band.scale_up_unknown:
        first = (
            f"{_named(best)} tells most of the fit's part: +/- {fit_halves[0]:.2g} to "
            f"+/- {fit_halves[1]:.2g} % of total metal."
        )
        return [first, *_unranged(band)]
    if whole < NARROW:
        return [
            f"The {band.plant}'s band is already within +/- {whole:.2g} % of total metal: no "
            "further bottle is needed for it."
        ]
    if gain < WORTH_A_BOTTLE:
        first = (
            f"No further bottle narrows the {band.plant}'s band by more than "
            f"{_PERCENT * gain:.2g} %: the fit makes {_PERCENT * share:.2g} % of its variance."
        )
        return [first, _rest(band, "not another bottle")]
    first = (
        f"{_named(best)} buys most: the {band.plant}'s band goes from +/- {whole:.2g} to "
        f"+/- {left:.2g} % of total metal."
    )
    return [first, _rest(band, "for the rest")] if 1.0 - share > MOST_OF_IT else [first]


def _unranged(band: PlantBand) -> list[str]:
    if not band.scale_up_unknown:
        return []
    return [
        "No range of the scale-up is stated, so nothing of it is in the band: contact, delivery "
        "and diffusion length are judgements until a column of this ore, better two of different "
        "height, is run."
    ]


def _rest(band: PlantBand, closing: str) -> str:
    named = listed(list(band.scale_up))
    if band.plant == "heap" and not band.column:
        return (
            f"A column of this ore, better two of different height, {closing}: most of the band "
            f"comes from the scale-up ranges ({named})."
        )
    if named:
        return f"Most of the band comes from the ranges of {named}: measure those, {closing}."
    return "What is left comes from the gangue, the head and stated ranges."


def _checks(found: NextTests, band: PlantBand) -> list[str]:
    """Name the tests that stand where the plant is and the present ones are not."""
    box, at = band.box, band.conditions
    if box is None:
        return []
    said = []
    kelvin, top = at.temperature_K, at.coarsest_mm
    low, high = (t - ZERO_CELSIUS_K for t in box.temperature_K)
    reaches: list[Callable[[Candidate], bool]] = []
    if kelvin is not None and not box.temperature_K[0] <= kelvin <= box.temperature_K[1]:
        tests = f"tests {low:.3g} to {high:.3g}" if high > low else f"tests at {low:.3g}"
        said.append(f"{kelvin - ZERO_CELSIUS_K:.3g} degC ({tests})")
        reaches.append(lambda c: abs(c.bottle.temperature_K - kelvin) <= NEAR_K)
    if top is not None and top > COARSER * box.size_mm[1]:
        said.append(f"{top:.3g} mm (tests to {box.size_mm[1]:.3g})")
        reaches.append(lambda c: c.bottle.sizes.mass_mean_mm >= top / COARSER)
    if not said:
        return []
    counted = [(-sum(reach(r.candidate) for reach in reaches), r.name) for r in found.rows]
    reached, name = min(counted, key=lambda pair: pair[0])
    check = f": check the law there by {name}" if reached < 0 else ": no test here checks that"
    return [
        f"The {band.plant} lies outside the tests, which no interval of a fit shows: "
        f"{listed(said)}{check}."
    ]
