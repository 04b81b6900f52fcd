"""What each stage of a run hands on (frozen; no files, no text for people beyond notes)."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.bands import Band, Quantity
from leachkin.cementation import CementationDemand, Precipitant, SiteFit, Solution
from leachkin.kinetics import (
    Evidence,
    FitResult,
    GangueFit,
    GangueLaw,
    GangueReadings,
    KineticDiagnostics,
    LeftOut,
    NestedTest,
    Ranking,
    RateLaw,
    ReagentDemand,
    ResidualChecks,
    TermTest,
    TwoStepArrhenius,
)
from leachkin.reagents import Budget
from leachkin.scaleup import HeapResult, TankTrain
from leachkin.testwork import Observed, SizeDistribution

Array = NDArray[np.float64]


@dataclass(frozen=True)
class LawEvidence:
    """What speaks for and against the law of a metal.

    Attributes
    ----------
    lines : Evidence or None
        Ranking, size exponent, stirring and activation energy, each scored; None for an empirical
        law.
    nested : tuple of NestedTest
        Each law of the ranking against each that it contains.
    left_out : tuple of LeftOut
        How well laws predict each test from the others; empty for too few or too many tests.
    residuals : ResidualChecks or None
        Runs of one sign, and a trend; None for too few readings.
    terms : tuple of TermTest
        Further terms, and whether the data ask for them.
    """

    lines: Evidence | None
    nested: tuple[NestedTest, ...]
    left_out: tuple[LeftOut, ...]
    residuals: ResidualChecks | None
    terms: tuple[TermTest, ...]


@dataclass(frozen=True)
class KineticsStage:
    """The rate law of one metal in one domain.

    Attributes
    ----------
    key : str
        "domain/metal".
    law : RateLaw
        The law that the plant uses.
    source : "fit" or "print"
    observed : tuple of Observed
        What was fitted; empty for a printed law.
    ranking : Ranking or None
    fit : FitResult or None
        The fit behind ``law``.
    excluded : tuple of str
        Readings kept out by the user: test, time, reason, name.
    notes : tuple of str
    two_step : TwoStepArrhenius or None
        Activation energies by a fit a temperature, beside the fit; None for one temperature.
    evidence : LawEvidence or None
    intervals : str
        Method of the intervals of ``fit``; "" for a printed law.
    alternatives : tuple of FitResult
        Other laws that the data do not reject, with intervals.
    diagnostics : KineticDiagnostics or None
        What the figures of the fit need.
    """

    key: str
    law: RateLaw
    source: str
    observed: tuple[Observed, ...] = ()
    ranking: Ranking | None = None
    fit: FitResult | None = None
    excluded: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    two_step: TwoStepArrhenius | None = None
    evidence: LawEvidence | None = None
    intervals: str = ""
    alternatives: tuple[FitResult, ...] = ()
    diagnostics: KineticDiagnostics | None = None

    @property
    def metal(self) -> str:
        """The metal of the key."""
        return self.key.rsplit("/", 1)[-1]


@dataclass(frozen=True)
class GangueStage:
    """Reagent taken by everything that is not the metal.

    Attributes
    ----------
    source : "fit" or "given"
    law : GangueLaw
    fit : GangueFit or None
    readings : tuple of GangueReadings
        What was fitted: reagent taken in each test less what its metal bound.
    notes : tuple of str
    """

    source: str
    law: GangueLaw
    fit: GangueFit | None = None
    readings: tuple[GangueReadings, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class CarriedLaw:
    """A law that the data do not reject, as fitted, and its share of the draws."""

    name: str
    law: RateLaw
    weight: float


@dataclass(frozen=True)
class PlantOre:
    """The ore as tanks and heap use it: law, head and reagent per metal, with their draws.

    Attributes
    ----------
    key : str
    law : RateLaw
    law_draws : RateLaw or None
        Batch shape (draws,); None without a fit or a stated range.
    head_kg_per_t : float
    head_draws : ndarray, shape (draws,), or float
    per_metal_kg_per_kg : float
    per_metal_draws : ndarray, shape (draws,), or float
    grade : str
        Grade of evidence of everything that follows.
    fit_in_band : bool
        True where ``law_draws`` come from a fit.
    fit_draws : RateLaw or None
        Draws of ``law`` alone, by the index that ``law_draws`` has.
    carried : tuple of CarriedLaw
        Every law that the data do not reject and that may be carried to the plant, ``law`` first.
    not_carried : tuple of str
        Laws not rejected either, without a theory of size and strength.
    described : bool
        False where no law that may be carried describes the tests.
    """

    key: str
    law: RateLaw
    law_draws: RateLaw | None
    head_kg_per_t: float
    head_draws: Array | float
    per_metal_kg_per_kg: float
    per_metal_draws: Array | float
    grade: str
    fit_in_band: bool
    fit_draws: RateLaw | None = None
    carried: tuple[CarriedLaw, ...] = ()
    not_carried: tuple[str, ...] = ()
    described: bool = True

    @property
    def metal(self) -> str:
        """The metal of the key."""
        return self.key.rsplit("/", 1)[-1]


@dataclass(frozen=True)
class LawElsewhere:
    """Another law that the data do not reject, carried to the plant; weight is of its draws."""

    law: str
    extraction: float
    changes_the_figure: bool
    weight: float = 0.0


@dataclass(frozen=True)
class BandPart:
    """How wide the plant figure would be from one cause alone.

    Attributes
    ----------
    cause : "fit", "law", "scale-up" or "all together"
    figure : Quantity
        Extraction at the end, with the ends that this cause gives it; none where it gives none.
    holds : str
        What is drawn, or why there is nothing.
    """

    cause: str
    figure: Quantity
    holds: str


@dataclass(frozen=True)
class TankStage:
    """A train of tanks.

    Attributes
    ----------
    key, grade : str
    train : TankTrain
    draws : TankTrain or None
        The same train for every draw.
    extraction : Band, shape (tanks,)
        Cumulative, fraction of the head.
    reagent_g_per_L : Band or None
    residence_times_h : tuple of float
    sizes : SizeDistribution
    temperature_K, head_kg_per_t : float
    solids_kg_per_m3, flow_m3_per_h, solution_m3_per_t, ore_rate_t_per_month : float or None
    demand : ReagentDemand or None
    metal_taken_kg_per_t, gangue_taken_kg_per_t : Quantity or None
        Reagent taken over the train.
    metal_taken_draws, gangue_taken_draws : ndarray, shape (draws,), or None
    gangue_known : bool
        False where no gangue demand stands behind the reagent taken.
    contains : tuple of str
        What the band holds.
    outside : tuple of str
        Where the plant lies outside the data.
    notes : tuple of str
    other_laws : tuple of LawElsewhere
    band_parts : tuple of BandPart
    law_verdict : str
        Whether the choice of law changes the figure.
    """

    key: str
    grade: str
    train: TankTrain
    draws: TankTrain | None
    extraction: Band
    reagent_g_per_L: Band | None
    residence_times_h: tuple[float, ...]
    sizes: SizeDistribution
    temperature_K: float
    head_kg_per_t: float
    solids_kg_per_m3: float | None
    flow_m3_per_h: float | None
    solution_m3_per_t: float | None
    ore_rate_t_per_month: float | None
    demand: ReagentDemand | None
    metal_taken_kg_per_t: Quantity | None
    gangue_taken_kg_per_t: Quantity | None
    metal_taken_draws: Array | None = None
    gangue_taken_draws: Array | None = None
    gangue_known: bool = True
    contains: tuple[str, ...] = ()
    outside: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    other_laws: tuple[LawElsewhere, ...] = ()
    band_parts: tuple[BandPart, ...] = ()
    law_verdict: str = ""


@dataclass(frozen=True)
class HeapStage:
    """A heap by plug flow.

    Attributes
    ----------
    key, grade : str
    result : HeapResult
        At the stated values.
    draws : HeapResult or None
        For every draw, through the same function.
    extracted, ore_limited, particles_alone, recovered, in_solution : Band, shape (days,)
        Fractions of the head; ``extracted`` is limited by ore and reagent, the answer.
    supplied_kg_per_t, taken_kg_per_t, pls_g_per_L : Band, shape (days,)
    sizes : SizeDistribution
    days : ndarray, shape (days,)
    m3_per_t : ndarray, shape (days,)
    ore_rate_t_per_month, area_m2, flow_m3_per_h, cycle_d : float
    head_kg_per_t, temperature_K, cure_kg_per_t : float
    metal_taken_kg_per_t, gangue_taken_kg_per_t : Quantity
        Reagent taken at the end of the cycle, by sink.
    metal_extracted_kg_per_t : Quantity
    mean_pls_g_per_L : Quantity
        Extracted at the end of the cycle over all solution put on, after drain-down.
    metal_extracted_draws, metal_taken_draws, gangue_taken_draws : ndarray, shape (draws,), or None
    gangue_known : bool
        False where no gangue demand stands behind the reagent taken.
    other_laws : tuple of LawElsewhere
    band_parts : tuple of BandPart
    law_verdict : str
        Whether the choice of law changes the figure.
    contains : tuple of str
        What the band holds.
    outside : tuple of str
        Where the heap lies outside the data.
    notes : tuple of str
    """

    key: str
    grade: str
    result: HeapResult
    draws: HeapResult | None
    extracted: Band
    ore_limited: Band
    particles_alone: Band
    recovered: Band
    in_solution: Band
    supplied_kg_per_t: Band
    taken_kg_per_t: Band
    pls_g_per_L: Band
    sizes: SizeDistribution
    days: Array
    m3_per_t: Array
    ore_rate_t_per_month: float
    area_m2: float
    flow_m3_per_h: float
    cycle_d: float
    head_kg_per_t: float
    temperature_K: float
    cure_kg_per_t: float
    metal_taken_kg_per_t: Quantity
    gangue_taken_kg_per_t: Quantity
    metal_extracted_kg_per_t: Quantity
    mean_pls_g_per_L: Quantity
    metal_extracted_draws: Array | None = None
    metal_taken_draws: Array | None = None
    gangue_taken_draws: Array | None = None
    gangue_known: bool = True
    other_laws: tuple[LawElsewhere, ...] = ()
    band_parts: tuple[BandPart, ...] = ()
    law_verdict: str = ""
    contains: tuple[str, ...] = ()
    outside: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class CementationStage:
    """Recovery of the metal from solution.

    Attributes
    ----------
    solution, precipitant : Solution, Precipitant
    demand : CementationDemand
        Per pass, at the stated values.
    recovery : float
    basis : str
        Where the solution comes from.
    flow_m3_per_h, solution_m3_per_t : float or None
    net_kg_per_m3, net_kg_per_kg, gross_kg_per_kg : Quantity
        Precipitant: 100 % metal, per cubic metre and per kilogram recovered; and as received.
    recovered_kg_per_t : Quantity or None
        Metal recovered per tonne of ore.
    precipitant_kg_per_t : Quantity or None
        Net, per tonne of ore.
    acid_taken_kg_per_t : Quantity or None
        Acid taken up in the vessels per tonne of ore.
    contains : tuple of str
    notes : tuple of str
    drawn : CementationDemand or None
        For every draw, through the same function.
    draws : mapping of str to ndarray, shape (draws,)
        Draws of the figures per tonne of ore, by field name.
    site : SiteFit or None
        The fitted mixed potential, where the demand rests on it.
    """

    solution: Solution
    precipitant: Precipitant
    demand: CementationDemand
    recovery: float
    basis: str
    flow_m3_per_h: float | None
    solution_m3_per_t: float | None
    net_kg_per_m3: Quantity
    net_kg_per_kg: Quantity
    gross_kg_per_kg: Quantity
    recovered_kg_per_t: Quantity | None
    precipitant_kg_per_t: Quantity | None
    acid_taken_kg_per_t: Quantity | None
    contains: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    drawn: CementationDemand | None = None
    draws: Mapping[str, Array] = field(default_factory=dict)
    site: SiteFit | None = None


@dataclass(frozen=True)
class BudgetStage:
    """Reagents in kg/t, t/month and money.

    Attributes
    ----------
    budget : Budget
        At the stated values.
    drawn : Budget or None
        For every draw, through the same function.
    currency : str
    allowance : float
        Share added as a line of its own.
    cost_per_month, cost_per_t_ore, cost_per_kg_metal : Quantity
        Value None where the budget is incomplete.
    basis : tuple of str
        Dry tonnes, recovered metal, single pass: what the figures rest on.
    outside : tuple of str
        Where the plant whose quantities these are lies outside the data.
    contains : tuple of str
    notes : tuple of str
    """

    budget: Budget
    drawn: Budget | None
    currency: str
    allowance: float
    cost_per_month: Quantity
    cost_per_t_ore: Quantity
    cost_per_kg_metal: Quantity
    basis: tuple[str, ...] = ()
    contains: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    outside: tuple[str, ...] = ()
