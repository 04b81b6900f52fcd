"""What testwork hands on: tests, assays, balances and the observed values (frozen, no files)."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import Problem
from leachkin.testwork.sizes import SizeDistribution

Array = NDArray[np.float64]
AliquotPolicy = Literal[
    "replaced by reagent solution",
    "replaced by water",
    "not replaced",
    "returned",
    "made up with reagent solution",
    "made up with water",
]


@dataclass(frozen=True)
class Assays:
    """Assays of one analyte at the times of a test.

    Attributes
    ----------
    value : ndarray, shape (m,)
        Concentration [g/L]; NaN where the cell was empty.
    sd : ndarray, shape (m,)
        One standard deviation [g/L].
    bound : ndarray of int, shape (m,)
        0 for a value, -1 for "less than value", +1 for "greater than value".
    rows : tuple of int
        Row of each assay in its file, as a person counts.
    """

    value: Array
    sd: Array
    bound: NDArray[np.int64]
    rows: tuple[int, ...] = ()


@dataclass(frozen=True)
class History:
    """Conditions of a test against time, piecewise linear between the given times.

    Attributes
    ----------
    time_h, temperature_K : ndarray, shape (j,)
    reagent_g_per_L : ndarray, shape (j,), or None
        None where no reagent strength is known.
    others : mapping of str to ndarray, shape (j,)
        Everything else that was read in the solution [g/L], and "pH".
    """

    time_h: Array
    temperature_K: Array
    reagent_g_per_L: Array | None = None
    others: Mapping[str, Array] = field(default_factory=dict)


@dataclass(frozen=True)
class VesselLog:
    """What was weighed or measured in the vessel beside the assays; all of it may be absent.

    Attributes
    ----------
    volume_mL : ndarray, shape (m,), or None
        Solution before each sample as measured or weighed, NaN where it was not: what the ledger
        of aliquots and make-up misses has evaporated.
    evaporated_mL : ndarray, shape (m,), or None
        Water lost since the reading before, where it was written down.
    returned_mL, decanted_mL : ndarray, shape (m,), or None
        Part of each aliquot that went back; solution poured off beside it.
    solids_g : ndarray, shape (m,), or None
        Dry solids that left with each sample of slurry.
    solids_assays : mapping of analyte to Assays
        Grade of those solids [kg/t].
    carbon_g : float
        Carbon or resin in the vessel while it leaches.
    """

    volume_mL: Array | None = None
    evaporated_mL: Array | None = None
    returned_mL: Array | None = None
    decanted_mL: Array | None = None
    solids_g: Array | None = None
    solids_assays: Mapping[str, Assays] = field(default_factory=dict)
    carbon_g: float = 0.0


@dataclass(frozen=True)
class Head:
    """Head assay of one analyte in one domain or test.

    Attributes
    ----------
    value_kg_per_t, sd_kg_per_t : float
        Mean of the replicates and the standard deviation of that mean.
    replicates : int
    scatter_kg_per_t : float
        Standard deviation of one charge's head about the mean of its domain.
    values_kg_per_t, sds_kg_per_t : tuple of float
        Every assay and its stated precision, one standard deviation.
    rows : tuple of int
        Row of each assay in its file.
    """

    value_kg_per_t: float
    sd_kg_per_t: float
    replicates: int = 1
    scatter_kg_per_t: float = 0.0
    values_kg_per_t: tuple[float, ...] = ()
    sds_kg_per_t: tuple[float, ...] = ()
    rows: tuple[int, ...] = field(default=(), compare=False)

    @property
    def charge_sd_kg_per_t(self) -> float:
        """Standard deviation of one charge's head about the assay, both parts together."""
        return float(np.hypot(self.sd_kg_per_t, self.scatter_kg_per_t))


@dataclass(frozen=True)
class Product:
    """A product weighed or measured and assayed when a test is closed out.

    Attributes
    ----------
    name : str
        filtrate, wash, residue, carbon, slurry solids, ...
    is_solution : bool
    amount : float or None
        Mass [g] or volume [mL]; None where it was not written down.
    grade : mapping of analyte to (value, sd of the value, count)
        Mean of the replicates, kg/t for a solid, g/L for a solution.
    bound : mapping of analyte to int
        -1 where every replicate was below its limit, +1 above; absent for values.
    values : mapping of analyte to tuple of float
        Every replicate, in the unit of the grade.
    rows : mapping of analyte to tuple of int
        Row of each replicate in its file.
    """

    name: str
    is_solution: bool
    amount: float | None
    grade: Mapping[str, tuple[float, float, int]]
    bound: Mapping[str, int] = field(default_factory=dict)
    values: Mapping[str, tuple[float, ...]] = field(default_factory=dict)
    rows: Mapping[str, tuple[int, ...]] = field(default_factory=dict, compare=False)

    @property
    def is_dissolved_metal(self) -> bool:
        """True for solutions, and for carbon or resin, which took their metal from solution."""
        return self.is_solution or self.is_carbon

    @property
    def is_carbon(self) -> bool:
        """True for carbon and resin."""
        words = self._words
        return not self.is_solution and ("carbon" in words or "resin" in words)

    @property
    def is_before_leach(self) -> bool:
        """True for a gravity concentrate, which was taken out before the leach.

        One made from the residue (its name says tail or residue) is part of what stayed.
        """
        words = self._words
        after = {"tail", "tails", "tailings", "residue"} & words
        return not self.is_solution and "gravity" in words and not after

    @property
    def is_undissolved_metal(self) -> bool:
        """True for what stayed in solids through the leach."""
        return not self.is_dissolved_metal and not self.is_before_leach

    @property
    def _words(self) -> set[str]:
        return set(self.name.casefold().replace("-", " ").replace("_", " ").split())


@dataclass(frozen=True)
class Exclusion:
    """A point or a whole test that the user keeps out of the fits, with the reason.

    Attributes
    ----------
    test : str
    time_h : float or None
        None for the whole test.
    reason, by : str
    """

    test: str
    time_h: float | None
    reason: str
    by: str


@dataclass(frozen=True)
class Test:
    """One test as read from the sheets, in base units.

    Attributes
    ----------
    name, domain, kind : str
        kind is "bottle roll", "stirred tank" or "column".
    solids_g, solution_mL : float
        Dry solids and starting solution.
    sizes : SizeDistribution or None
    temperature_K : float
    reagent_g_per_L : float or None
        Starting strength of the campaign's reagent.
    stirring_rpm : float or None
    history : History
    aliquots : AliquotPolicy or None
        None where the sheet does not say; then the balance is provisional.
    time_h, aliquot_mL : ndarray, shape (m,)
    makeup_mL : ndarray, shape (m,)
        Made up after each reading; NaN where not written, then the policy says it: as much as the
        aliquot where it is replaced, and nothing otherwise.
    solution : mapping of analyte to Assays
    reagent_added_g : ndarray, shape (m,), or None
        Reagent added at or after each reading [g].
    free_reagent_g_per_L : ndarray, shape (m,), or None
    pH : ndarray, shape (m,), or None
    products : tuple of Product
    heads : mapping of analyte to Head
        The assay heads that apply to this test.
    residue_mass_sd_relative : float
        Relative standard deviation of a weighed residue.
    rows : mapping of file name to tuple of int
        Where the test was read from.
    problems : tuple of Problem
    reagent : str or None
        What reagent_g_per_L, reagent_added_g and free_reagent_g_per_L are of.
    start_metal_g_per_L : mapping of analyte to float
        Metal in the starting solution.
    makeup_metal_g_per_L : mapping of analyte to ndarray, shape (m,)
        Metal in what was made up after each reading.
    added_g : mapping of reagent to ndarray, shape (m,)
        Every reagent added, the campaign's own among them [g].
    sizes_by_analyte : mapping of analyte to SizeDistribution
        Where sieve fractions were assayed.
    exclusions : tuple of Exclusion
    files : mapping of str to str
        File that each kind of row came from: "tests", "readings", "closeout".
    logged : mapping of str to ndarray, shape (m,)
        What else was read at the times of the test, by name with its unit: "Eh_mV_SHE",
        "DO_mg_per_L".
    vessel : VesselLog
        Volumes as weighed or measured, what was put back, slurry samples, carbon.
    free_g_per_L : mapping of reagent to ndarray, shape (m,)
        Every titration, the campaign's reagent among them.
    start_g_per_L : mapping of reagent to float
        Every starting strength that was written.
    set_point_g_per_L : float or None
        Strength that the campaign's reagent is to be brought back to; the starting one if None.
    planned_h : tuple of float
        Times at which samples are planned.
    started : str
        When the test was started, as written.
    """

    __test__ = False  # not a test case for pytest

    name: str
    domain: str
    kind: str
    solids_g: float
    solution_mL: float
    sizes: SizeDistribution | None
    temperature_K: float
    reagent_g_per_L: float | None
    stirring_rpm: float | None
    history: History
    aliquots: AliquotPolicy | None
    time_h: Array
    aliquot_mL: Array
    makeup_mL: Array
    solution: Mapping[str, Assays]
    reagent_added_g: Array | None = None
    free_reagent_g_per_L: Array | None = None
    pH: Array | None = None
    products: tuple[Product, ...] = ()
    heads: Mapping[str, Head] = field(default_factory=dict)
    residue_mass_sd_relative: float = 0.003
    rows: Mapping[str, tuple[int, ...]] = field(default_factory=dict)
    problems: tuple[Problem, ...] = ()
    reagent: str | None = None
    start_metal_g_per_L: Mapping[str, float] = field(default_factory=dict)
    makeup_metal_g_per_L: Mapping[str, Array] = field(default_factory=dict)
    added_g: Mapping[str, Array] = field(default_factory=dict)
    sizes_by_analyte: Mapping[str, SizeDistribution] = field(default_factory=dict)
    exclusions: tuple[Exclusion, ...] = ()
    files: Mapping[str, str] = field(default_factory=dict)
    logged: Mapping[str, Array] = field(default_factory=dict)
    vessel: VesselLog = field(default_factory=VesselLog)
    free_g_per_L: Mapping[str, Array] = field(default_factory=dict)
    start_g_per_L: Mapping[str, float] = field(default_factory=dict)
    set_point_g_per_L: float | None = None
    planned_h: tuple[float, ...] = ()
    started: str = ""

    @property
    def is_excluded(self) -> bool:
        """True where the user keeps the whole test out of the fits."""
        return any(exclusion.time_h is None for exclusion in self.exclusions)

    @property
    def is_closed_out(self) -> bool:
        """True where a solid product that holds what did not dissolve has been assayed."""
        return any(p.is_undissolved_metal and p.grade for p in self.products)

    def has_carbon(self, analyte: str) -> bool:
        """Return True where carbon takes this metal out of the solution while it leaches.

        Carbon that is not assayed yet may hold any of them.
        """
        loaded = {a for p in self.products if p.is_carbon for a in p.grade}
        return analyte in loaded if loaded else self.vessel.carbon_g > 0.0

    @property
    def state(self) -> str:
        """One of "excluded", "waiting for an answer", "no readings", "running" or "ready"."""
        if self.is_excluded:
            return "excluded"
        if any(problem.level == "ask" for problem in self.problems):
            return "waiting for an answer"
        if not self.time_h.size:
            return "no readings"
        return "ready" if self.is_closed_out else "running"


@dataclass(frozen=True)
class MetalBalance:
    """The metal balance of one analyte in one test.

    Extractions are fractions of the head named in the field. What cannot be had is None, and NaN
    in an array: at a reading without an assay of this analyte, or everywhere without that head.

    Attributes
    ----------
    test, key, analyte : str
        key is "domain/analyte".
    time_h : ndarray, shape (m,)
    dissolved_g : ndarray, shape (m,)
        Metal dissolved by each reading, aliquots taken before it included [g].
    uncorrected_g : ndarray, shape (m,)
        Concentration times starting volume, what a sheet without correction would say [g].
    extraction_on_assay_head, extraction_on_calculated_head : ndarray, shape (m,)
    final_on_assay_head, final_on_calculated_head, final_by_tail : float or None
        The three final extractions: solution over assay head, solution over calculated head,
        assay head less tail.
    head_assay_kg_per_t, head_calculated_kg_per_t : float or None
    closure : float or None
        Calculated head over assay head.
    tail_kg_per_t, residue_g : float or None
    sd : mapping of str to float
        One standard deviation of each final figure, by field name.
    provisional : bool
        True where a tail or a policy is missing; the reasons stand in problems.
    problems : tuple of Problem
    final_dissolved_g, final_undissolved_g : float or None
        Metal in all solutions and carbon, and in all other solids, at close-out [g]. Where samples
        of slurry were taken, as it would be for the whole charge.
    before_leach_g : float or None
        Metal that a gravity concentrate took out before the leach [g]. It is part of the heads and
        the closure; the extractions are of what the leach was fed.
    final_with_gravity : float or None
        Gravity concentrate and solution together, over the calculated head.
    """

    test: str
    key: str
    analyte: str
    time_h: Array
    dissolved_g: Array
    uncorrected_g: Array
    extraction_on_assay_head: Array
    extraction_on_calculated_head: Array
    final_on_assay_head: float | None
    final_on_calculated_head: float | None
    final_by_tail: float | None
    head_assay_kg_per_t: float | None
    head_calculated_kg_per_t: float | None
    closure: float | None
    tail_kg_per_t: float | None
    residue_g: float | None
    sd: Mapping[str, float]
    provisional: bool
    problems: tuple[Problem, ...] = ()
    final_dissolved_g: float | None = None
    final_undissolved_g: float | None = None
    before_leach_g: float | None = None
    final_with_gravity: float | None = None

    @property
    def correction_g(self) -> Array:
        """What the aliquot and make-up arithmetic adds to concentration times volume [g]."""
        return self.dissolved_g - self.uncorrected_g


@dataclass(frozen=True)
class Observed:
    """Measured values of one analyte in one test, as a fit needs them.

    The expected value of row i is ``head * (operator[i] @ E + offset[i]) + brought[i]`` with E the
    extraction of all the metal at the m times. Extraction-only input has the identity operator and
    a head held at 1.

    Attributes
    ----------
    test, key : str
        key is "domain/analyte".
    time_h : ndarray, shape (m,)
    operator : ndarray, shape (k, m)
    offset, brought : ndarray, shape (k,)
        offset in heads (a tail has head in it); brought is metal that came with make-up, in the
        unit of value.
    value, sd : ndarray, shape (k,)
        g/L for solutions, kg/t for solids, fractions for extraction-only input.
    bound : ndarray of int, shape (k,)
        0 value, -1 "less than", +1 "greater than".
    row_kind : tuple of str
        "solution", "tail" or "extraction" for each row; a tail may be of solids sampled while it
        leached.
    row_time_h : ndarray, shape (k,)
    head_kg_per_t, head_sd_kg_per_t : float
        Head assay and the standard deviation of this test's head about it (assay precision and
        charge-to-charge scatter). head_sd 0 holds the head. Without an assay the calculated head
        stands here with its own value as standard deviation, which tells a fit next to nothing.
    sizes : SizeDistribution or None
    temperature_K : float
    reagent_g_per_L, stirring_rpm : float or None
    history : History or None
    provisional : bool
    sd_given : bool
        False where no standard deviation is known and ``sd`` is 1 throughout (equal weights).
    rows : tuple of int
        Row in the file of each value, 0 where there is none.
    """

    test: str
    key: str
    time_h: Array
    operator: Array
    offset: Array
    brought: Array
    value: Array
    sd: Array
    bound: NDArray[np.int64]
    row_kind: tuple[str, ...]
    row_time_h: Array
    head_kg_per_t: float
    head_sd_kg_per_t: float
    sizes: SizeDistribution | None = None
    temperature_K: float = 298.15
    reagent_g_per_L: float | None = None
    stirring_rpm: float | None = None
    history: History | None = None
    provisional: bool = False
    sd_given: bool = True
    rows: tuple[int, ...] = ()

    def expected(self, extraction: Array, head_kg_per_t: float | None = None) -> Array:
        """Return the expected values for an extraction history.

        Parameters
        ----------
        extraction : ndarray, shape (..., m)
            Extraction of all the metal at ``time_h``.
        head_kg_per_t : float or None
            Head of this charge; the assay by default.

        Returns
        -------
        ndarray, shape (..., k)
        """
        head = self.head_kg_per_t if head_kg_per_t is None else head_kg_per_t
        linear = np.asarray(extraction) @ self.operator.T + self.offset
        return np.asarray(head * linear + self.brought)
