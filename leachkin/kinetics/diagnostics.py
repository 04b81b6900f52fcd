"""What the pictures of a fit need, as plain arrays: nothing is computed where it is drawn."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import (
    correlation_matrix,
    leverage_of,
    standardised_residuals,
    student_multiplier,
)
from leachkin.kinetics.arrhenius import ArrheniusFit
from leachkin.kinetics.arrhenius_two_step import TwoStepArrhenius
from leachkin.kinetics.fit_elements import thermal_covariate
from leachkin.kinetics.fit_options import Spread
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_values import quantity_names
from leachkin.kinetics.intervals import design_of
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.kinetics.straightened import StraightenedTest, straightened_test
from leachkin.kinetics.time_factors import TimeFactor, time_factors, total_time
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Points of a line in a picture, and how far it goes beyond the tests.
LINE_POINTS = 40
BEYOND = 1.3


@dataclass(frozen=True)
class RowChecks:
    """Every row of a fit: measured values, then head assays.

    Attributes
    ----------
    test, kind : tuple of str
        kind is "solution", "tail", "extraction" or "head".
    time_h : ndarray, shape (n,)
        NaN for a head.
    extraction : ndarray, shape (n,)
        Fitted extraction of all the metal at the time of the row; NaN for a head.
    standardised : ndarray, shape (n,)
        Fitted less measured over its own standard deviation ``s sqrt(1 - h)``; NaN for a limit.
    leverage : ndarray, shape (n,)
    mean_leverage : float
        Quantities that are free over rows.
    """

    test: tuple[str, ...]
    kind: tuple[str, ...]
    time_h: Array
    extraction: Array
    standardised: Array
    leverage: Array
    mean_leverage: float


@dataclass(frozen=True)
class RatePlot:
    """Rate constants of single tests against size or strength, carried to one state.

    Attributes
    ----------
    tests : tuple of TimeFactor
        Those that tell their time.
    at, rate, low, high : ndarray, shape (n,)
        Size [mm] or strength [g/L]; rate constants [1/h] at the reference state otherwise. low
        and high are NaN without an interval.
    line_at, line_rate : ndarray, shape (t,)
        The law of all tests together.
    left_out : tuple of str
        Tests that do not tell, with the reason.
    """

    tests: tuple[TimeFactor, ...]
    at: Array
    rate: Array
    low: Array
    high: Array
    line_at: Array
    line_rate: Array
    left_out: tuple[str, ...] = ()


@dataclass(frozen=True)
class ArrheniusPanel:
    """One rate constant against temperature: points of single fits, their line, the global line.

    Attributes
    ----------
    name : str
        As "tau_chemical" (its rate is 1/tau) or "k".
    temperature_K, ln_rate, ln_rate_sd : ndarray, shape (n,)
        ln of 1/h.
    line : ArrheniusFit
        Through the points.
    line_t : float or None
        Student's multiplier of its interval; None without a degree of freedom.
    shared : Parameter
        The activation energy of all tests together.
    shared_degrees_of_freedom : int
    shared_multiplier : float or None
        Normal or Student, of its linearised interval.
    grid_K, line_ln_rate, shared_ln_rate : ndarray, shape (t,)
    """

    name: str
    temperature_K: Array
    ln_rate: Array
    ln_rate_sd: Array
    line: ArrheniusFit
    line_t: float | None
    shared: Parameter
    shared_degrees_of_freedom: int
    shared_multiplier: float | None
    grid_K: Array
    line_ln_rate: Array
    shared_ln_rate: Array


@dataclass(frozen=True)
class KineticDiagnostics:
    """What the pictures of a fit need.

    Attributes
    ----------
    straightened : tuple of StraightenedTest
        Diagnostic only: not used for the choice of a law.
    rows : RowChecks
    correlated : tuple of str
        Names of the fitted parameters but the heads, in the order of ``correlation``.
    correlation : ndarray, shape (p, p)
    by_size, by_strength : RatePlot or None
        None with one size, one strength, or a drive that is no power of the strength.
    arrhenius : tuple of ArrheniusPanel
    """

    straightened: tuple[StraightenedTest, ...]
    rows: RowChecks
    correlated: tuple[str, ...]
    correlation: Array
    by_size: RatePlot | None = None
    by_strength: RatePlot | None = None
    arrhenius: tuple[ArrheniusPanel, ...] = ()


def kinetic_diagnostics(
    fit: FitResult,
    observed: Sequence[Observed],
    two_step: TwoStepArrhenius | None = None,
    balances: Mapping[str, ReagentBalance] | None = None,
) -> KineticDiagnostics:
    """Return what the pictures of a fit need.

    Parameters
    ----------
    fit : FitResult
        Converged.
    observed : sequence of Observed
        The tests that were fitted.
    two_step : TwoStepArrhenius, optional
    balances : mapping of test to ReagentBalance, optional
        As given to the fit.

    Raises
    ------
    InputProblems
        For a fit that does not carry its design.
    """
    used = [test for test in observed if test.value.size]
    positions = list(quantity_names(fit.layout).values())
    spread = Spread.of(used)
    power = fit.layout.drive_form.kind == "power"
    sizes, strengths = len(spread.sizes_mm) > 1, power and len(spread.strengths_g_per_L) > 1
    factors = time_factors(fit, used, balances) if sizes or strengths else ()
    return KineticDiagnostics(
        straightened=_straightened(fit, used),
        rows=row_checks(fit, used),
        correlated=tuple(quantity_names(fit.layout)),
        correlation=correlation_matrix(fit.covariance)[np.ix_(positions, positions)],
        by_size=rates_by_size(fit, factors) if sizes else None,
        by_strength=rates_by_strength(fit, factors) if strengths else None,
        arrhenius=() if two_step is None else arrhenius_panels(fit, two_step),
    )


def _straightened(fit: FitResult, observed: Sequence[Observed]) -> tuple[StraightenedTest, ...]:
    design = design_of(fit)
    fitted, limits = design.extractions(fit.vector), design.limits(fit.vector)
    return tuple(
        straightened_test(test, fit.heads_kg_per_t[test.test], E, limit)
        for test, E, limit in zip(observed, fitted, limits, strict=True)
    )


def row_checks(fit: FitResult, observed: Sequence[Observed]) -> RowChecks:
    """Return leverage and standardised residual of every row of a fit.

    Parameters
    ----------
    fit : FitResult
    observed : sequence of Observed
        The tests that were fitted, in order.
    """
    design, estimate = design_of(fit), fit.estimate
    free = [j for j, state in enumerate(estimate.states) if state == "free"]
    leverage = leverage_of(estimate.jacobian[:, free])
    scatter = 1.0 if estimate.stated else fit.residual_sd
    residuals = estimate.residuals
    standardised = np.full(residuals.shape, np.nan)
    if scatter > 0.0:
        standardised = standardised_residuals(residuals, leverage, scatter)
    standardised[: design.value.size][design.bound != 0] = np.nan
    kept = [*range(design.value.size), *(i for i, _ in _head_rows(fit))]
    heads = [name for _, name in _head_rows(fit)]
    E = [
        fitted[np.searchsorted(test.time_h, test.row_time_h)]
        for test, fitted in zip(observed, design.extractions(fit.vector), strict=True)
    ]
    none = np.full(len(heads), np.nan)
    return RowChecks(
        test=(*(test.test for test in observed for _ in test.row_kind), *heads),
        kind=(*(kind for test in observed for kind in test.row_kind), *("head" for _ in heads)),
        time_h=np.concatenate([*(test.row_time_h for test in observed), none]),
        extraction=np.concatenate([*E, none]),
        standardised=standardised[kept],
        leverage=leverage[kept],
        mean_leverage=len(free) / residuals.size,
    )


def _head_rows(fit: FitResult) -> list[tuple[int, str]]:
    """Return the rows of head assays among the residuals, with their tests."""
    known = [q for q in fit.layout.free if q.prior_sd is not None]
    first = design_of(fit).value.size
    return [(first + i, q.which) for i, q in enumerate(known) if q.role == "head"]


def rates_by_size(fit: FitResult, factors: Sequence[TimeFactor]) -> RatePlot:
    """Return rate constants of single tests at the reference temperature and strength, by size."""
    sized = [f for f in factors if f.size_mm is not None]
    at = np.array([f.size_mm for f in sized if f.factor is not None], dtype=np.float64)
    grid = _around(np.array([f.size_mm for f in sized], dtype=np.float64))
    return _rate_plot(sized, at, 1.0 / total_time(fit.law, at), grid, total_time(fit.law, grid))


def rates_by_strength(fit: FitResult, factors: Sequence[TimeFactor]) -> RatePlot:
    """Return rate constants of single tests at the reference temperature and size, by strength."""
    size = np.array([fit.law.reference.size_mm])

    def times(strengths: Array) -> Array:
        found = [total_time(fit.law, size, None, float(c)) for c in strengths]
        return np.array(found).reshape(-1)

    strong = [f for f in factors if f.reagent_g_per_L is not None]
    at = np.array([f.reagent_g_per_L for f in strong if f.factor is not None], dtype=np.float64)
    grid = _around(np.array([f.reagent_g_per_L for f in strong], dtype=np.float64))
    return _rate_plot(strong, at, 1.0 / times(at), grid, times(grid))


def _rate_plot(
    factors: Sequence[TimeFactor], at: Array, rate: Array, line_at: Array, line_time: Array
) -> RatePlot:
    told = tuple(f for f in factors if f.factor is not None)

    def over(values: Sequence[float | None]) -> Array:
        known = np.array([np.nan if v is None else v for v in values], dtype=np.float64)
        return np.asarray(rate / known)

    return RatePlot(
        tests=told,
        at=at,
        rate=over([f.factor for f in told]),
        low=over([f.high for f in told]),
        high=over([f.low for f in told]),
        line_at=line_at,
        line_rate=1.0 / line_time,
        left_out=tuple(f"{f.test}: {f.why}" for f in factors if f.factor is None),
    )


def _around(values: Array) -> Array:
    ends = np.log(values.min() / BEYOND), np.log(values.max() * BEYOND)
    return np.asarray(np.exp(np.linspace(*ends, LINE_POINTS)))


def arrhenius_panels(fit: FitResult, two_step: TwoStepArrhenius) -> tuple[ArrheniusPanel, ...]:
    """Return the two ways to an activation energy side by side, one panel a rate constant."""
    names = {p.name for p in fit.parameters}
    return tuple(
        _panel(fit, two_step, name, line)
        for name, line in zip(two_step.names, two_step.lines, strict=True)
        if _energy_name(name, names) in names and fit.parameter(name).value > 0.0
    )


def _panel(
    fit: FitResult, two_step: TwoStepArrhenius, name: str, line: ArrheniusFit
) -> ArrheniusPanel:
    energy = _energy_name(name, {p.name for p in fit.parameters})
    T = line.temperature_K
    found = {
        float(t): one.parameter(name)
        for t, one in zip(two_step.temperature_K, two_step.fits, strict=True)
    }
    parts = [found[float(t)] for t in T]
    grid = np.linspace(T.min() - 3.0, T.max() + 3.0, LINE_POINTS)
    freedom = fit.degrees_of_freedom
    return ArrheniusPanel(
        name=name,
        temperature_K=T,
        ln_rate=np.log(line.rate_constant),
        ln_rate_sd=np.array([(p.standard_error or np.nan) / p.value for p in parts]),
        line=line,
        line_t=_student(line),
        shared=fit.parameter(energy),
        shared_degrees_of_freedom=freedom,
        shared_multiplier=fit.estimate.multiplier(fit.level) if freedom > 0 else None,
        grid_K=grid,
        line_ln_rate=np.log(line.rate_at(grid)),
        shared_ln_rate=_shared_ln_rate(fit, name, energy, grid),
    )


def _student(line: ArrheniusFit) -> float | None:
    freedom = line.degrees_of_freedom
    return student_multiplier(line.level, freedom) if freedom > 0 else None


def _energy_name(name: str, names: set[str]) -> str:
    own = f"activation_energy_{name.removeprefix('tau_')}"
    return own if own in names else "activation_energy"


def _shared_ln_rate(fit: FitResult, name: str, energy: str, grid_K: Array) -> Array:
    """Return ln of the rate constant of all tests together at the reference size and strength."""
    value = fit.parameter(name).value
    at_reference = -np.log(value) if name.startswith("tau_") else np.log(value)
    thermal = thermal_covariate(grid_K, fit.law.reference.temperature_K)
    return np.asarray(at_reference - fit.parameter(energy).value * thermal)
