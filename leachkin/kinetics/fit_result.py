"""What a fit gives: the law, its parameters with intervals, residuals, and draws."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.errors import InputProblems
from leachkin.inference import Estimate, Posterior, draw_vectors
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_layout import Layout
from leachkin.kinetics.rate_law import RateLaw
from leachkin.problems import unknown_name
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Parameter:
    """A parameter of a fitted law.

    Attributes
    ----------
    name, unit : str
    value : float
    standard_error, low, high : float or None
        None where nothing can be said; ``why_no_interval`` says why.
    level : float
        Of the interval.
    method : str
        How the interval was made; "held" for a value that was not fitted.
    remark : str
        Where another method tells something else.
    """

    name: str
    value: float
    unit: str
    standard_error: float | None
    low: float | None
    high: float | None
    level: float
    method: str
    why_no_interval: str = ""
    remark: str = ""


@dataclass(frozen=True)
class Residual:
    """One measured row beside what the fitted law expects.

    ``in_sd`` is (expected - measured) in standard deviations; for a limit it is the root of minus
    twice the log likelihood.
    """

    test: str
    kind: str
    time: float
    measured: float
    expected: float
    sd: float
    bound: int
    in_sd: float


def shares_told(layout: Layout, covariance: Array) -> tuple[float, ...]:
    """Return how far the tests tell each quantity that has a prior of its own, heads left out.

    One less the variance over that of the prior: 0 where the tests tell nothing, near 1 where the
    prior hardly counts.
    """
    return tuple(
        float(np.clip(1.0 - covariance[j, j] / q.prior_sd**2, 0.0, 1.0))
        for j, q in enumerate(layout.free)
        if q.prior_sd is not None and q.role != "head"
    )


@dataclass(frozen=True)
class FitResult:
    """A fitted rate law.

    Attributes
    ----------
    law : RateLaw
    parameters : tuple of Parameter
        Fitted and held ones, then the heads.
    names : tuple of str
        Of the fitted vector.
    vector, covariance : ndarray, shapes (p,) and (p, p)
        On the fitted scales (logarithms of times and heads, log-odds of ultimates).
    sum_of_squares : float
        Of the residuals in standard deviations; of plain residuals where no precision was given.
    aicc, bic : float
        Of ``criterion_points`` rows and ``criterion_quantities``: what is known of a parameter
        beforehand is no row, and a parameter counts as far as the tests tell it.
    degrees_of_freedom : int
    n_tests, n_points : int
        Tests, and measured values (head assays not counted).
    converged : bool
    message : str
        Why not, and what to look at; "" where it did.
    warnings : tuple of str
    residuals : tuple of Residual
    heads_kg_per_t : mapping of test to float
    not_needed : tuple of str
        Resistances below 1 % of the total everywhere in the data.
    layout : Layout
        How the vector becomes a law.
    estimate : Estimate
        The least-squares estimate behind it.
    design : FitDesign or None
        The residual function of the fit, for intervals that fit again.
    sampled : Posterior or None
        Draws of the posterior, where that was asked for.
    """

    law: RateLaw
    parameters: tuple[Parameter, ...]
    names: tuple[str, ...]
    vector: Array
    covariance: Array
    sum_of_squares: float
    aicc: float
    bic: float
    degrees_of_freedom: int
    n_tests: int
    n_points: int
    converged: bool
    message: str
    warnings: tuple[str, ...]
    residuals: tuple[Residual, ...]
    heads_kg_per_t: Mapping[str, float]
    not_needed: tuple[str, ...]
    level: float
    layout: Layout
    estimate: Estimate
    design: FitDesign | None = None
    sampled: Posterior | None = None
    criterion_points: int = 0
    criterion_quantities: float = 0.0

    @property
    def informed(self) -> float:
        """How many quantities the tests tell; one as wide as its prior counts nothing."""
        return len(self.names) - sum(1.0 - s for s in shares_told(self.layout, self.covariance))

    @property
    def law_name(self) -> str:
        """Name of the law."""
        return self.law.name

    @property
    def residual_sd(self) -> float:
        """Scatter of the residuals: in stated standard deviations, or in the unit of the data."""
        return float(np.sqrt(self.sum_of_squares / max(self.degrees_of_freedom, 1)))

    def parameter(self, name: str) -> Parameter:
        """Return a parameter by name.

        Raises
        ------
        InputProblems
            With the nearest names, if there is none such.
        """
        for parameter in self.parameters:
            if parameter.name == name:
                return parameter
        raise InputProblems([unknown_name("parameter", name, [p.name for p in self.parameters])])

    def draw_vectors(self, n: int, seed: int) -> Array:
        """Return n draws of the fitted vector, shape (n, p), seeded.

        Normal with the covariance where the precision was stated, Student's t where the scatter
        was estimated; a quantity at its bound or not held stays at its value. Where the posterior
        was sampled the draws are those.
        """
        if self.sampled is not None:
            return self.sampled.draw_vectors(n, seed)
        low = np.array([q.low for q in self.layout.free])
        high = np.array([q.high for q in self.layout.free])
        freedom = self.estimate.student_degrees
        degrees = None if freedom is None else max(freedom, 1)
        draws = draw_vectors(self.vector, self.covariance, n, seed, degrees)
        return np.asarray(np.clip(draws, low, high))

    def draw(self, n: int, seed: int) -> RateLaw:
        """Return the law with a batch of n draws of all its parameters together."""
        return self.layout.law(self.draw_vectors(n, seed))

    def predict(
        self,
        time: ArrayLike,
        sizes: SizeDistribution | None = None,
        temperature_K: float | None = None,
        reagent_g_per_L: float | None = None,
        draws: int = 0,
        seed: int = 1,
    ) -> Array:
        """Return the extraction of all the metal against time.

        Parameters
        ----------
        time : array_like, shape (t,)
        sizes : SizeDistribution, optional
            One class at the reference size where left out.
        temperature_K, reagent_g_per_L : float, optional
            The reference where left out.
        draws, seed : int
            draws > 0 gives draws of the mean curve (confidence, not the scatter of a next test).

        Returns
        -------
        ndarray, shape (t,) or (draws, t)
        """
        law = self.draw(draws, seed) if draws else self.law
        ore = sizes or SizeDistribution.single(self.layout.reference.size_mm)
        times = np.asarray(time, dtype=np.float64)
        return np.asarray(law.extraction(times, ore, temperature_K, reagent_g_per_L))

    def parameter_table(self) -> ResultTable:
        """Return the parameters with intervals, or the reason why there is none."""
        columns = (
            Column("parameter", "Parameter"),
            Column("value", "Value"),
            Column("unit", "Unit"),
            Column("standard_error", "Standard error", digits=2),
            Column("low", f"Low, {100 * self.level:g} %"),
            Column("high", f"High, {100 * self.level:g} %"),
            Column("method", "Interval"),
            Column("why_no_interval", "Remark"),
        )
        records = [
            {"parameter": p.name, **vars(p), "why_no_interval": _remark(p)}
            for p in self.parameters
            if not _is_filler(p)
        ]
        return ResultTable.from_records("parameters", columns, records)

    def residual_table(self) -> ResultTable:
        """Return every measured row beside the fitted one."""
        columns = (
            Column("test", "Test"),
            Column("kind", "Row"),
            Column("time", "Time", self.layout_time_unit),
            Column("measured", "Measured"),
            Column("expected", "Fitted"),
            Column("sd", "Standard deviation", digits=2),
            Column("bound", "Limit"),
            Column("in_sd", "Residual in standard deviations", digits=3),
        )
        return ResultTable.from_records("residuals", columns, [vars(r) for r in self.residuals])

    @property
    def layout_time_unit(self) -> str:
        """Unit of time of the fit; "" for a curve in a unit of its own."""
        units = {q.unit for q in self.layout.quantities if q.role == "time"}
        return units.pop().removeprefix("1/") if units else ""


def _remark(parameter: Parameter) -> str:
    said = (parameter.why_no_interval, parameter.remark)
    return "; ".join(text for text in said if text)


def _is_filler(parameter: Parameter) -> bool:
    """Whether a row only says that nothing was there to fit: a head or an energy left at rest."""
    if parameter.method != "held":
        return False
    at_rest = parameter.name.startswith("activation_energy") and parameter.value == 0.0
    return at_rest or parameter.name.startswith("head_")
