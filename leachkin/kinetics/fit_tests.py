"""Fit one rate law to all tests together."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import (
    Estimate,
    Interval,
    LeastSquaresProblem,
    corrected_aic,
    least_squares,
    one_sided_reach,
    schwarz_bic,
)
from leachkin.kinetics.drive import DriveForm
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_layout import Layout, Quantity
from leachkin.kinetics.fit_open import Side, open_sides
from leachkin.kinetics.fit_options import FitOptions
from leachkin.kinetics.fit_remarks import remarks, what_to_look_at
from leachkin.kinetics.fit_result import FitResult, Parameter, Residual, shares_told
from leachkin.kinetics.fit_setup import layout_of
from leachkin.kinetics.fit_start import several_minima, start_vectors
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.kinetics.resistance import Reference
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: A resistance below this share of the total in every test is not needed.
NOT_NEEDED_SHARE = 0.01
#: Where such a resistance is put: far too small to matter.
ABSENT_SHARE = 1e-6


def fit_tests(
    observed: Sequence[Observed],
    law: str,
    free: Collection[str] | None = None,
    fixed: Mapping[str, float] | None = None,
    *,
    priors: Mapping[str, tuple[float, float]] | None = None,
    ultimate: float | Literal["by size", "by temperature", "by test", "one"] = "by size",
    reference: Reference | None = None,
    size_exponents: Literal["theory", "free"] = "theory",
    reagent_order: float | Literal["free"] | Mapping[str, float | str] = 1.0,
    drive: DriveForm | str = "power",
    terms: Collection[str] = (),
    slow_law: str | None = None,
    spread: float | Literal["free"] | None = None,
    size_family: str = "log_normal",
    balances: Mapping[str, ReagentBalance] | None = None,
    level: float = 0.95,
) -> FitResult:
    """Return one rate law fitted to all tests together.

    Solution assays, tails and heads are fitted as they were measured, each with its precision;
    every test has its own head about the assay head.

    Parameters
    ----------
    observed : sequence of Observed
        Tests of one ore and one metal.
    law : str
        ``film``, ``ash_layer``, ``chemical``, sums by ``+``, ``series`` for all three, or an
        empirical law.
    free : collection of str, optional
        Names of parameters to fit that are held by default.
    fixed : mapping of str to float, optional
        Parameters held at a value, such as ``{"activation_energy_chemical": 46.0}``.
    priors : mapping of str to (value, standard deviation), optional
        What is known of parameters beforehand (from print, from sequential assays), each a row of
        the likelihood of its own: where the tests tell nothing the interval is that of the prior.
    ultimate : "by size", "by temperature", "by test", "one" or float
        Ultimate extraction: one for each test size (linear in ln d between), temperature or test
        (the law then has their mean), one for all, or held.
    reference : Reference, optional
        State the times refer to; the middle of the tests where left out.
    size_exponents : "theory" or "free"
    reagent_order : float, "free", or mapping of resistance to either
        Common order of all resistances in reagent, or one for each (1 for those left out).
    drive : DriveForm or str
        What advances the clock, as a function of the solution; see :mod:`drive`.
    terms : collection of str
        Optional terms: "lag", "soluble" (a share that dissolves at once), "fade" (passivation),
        "loss" (from solution, up to a capacity), "renewal" (of the reagent, with a balance).
    slow_law : str, optional
        Law of a second, slower fraction of the leachable metal.
    spread : float or "free", optional
        Of tests with one size each, taken as the one that 80 % of the mass passes: standard
        deviation over mean of a log-normal distribution, or the slope of another family. Left
        out, that size is all there is.
    size_family : "log_normal", "gates_gaudin_schuhmann" or "rosin_rammler"
    balances : mapping of test to ReagentBalance, optional
        Where the strength was not titrated: it follows from the extraction itself.
    level : float
        Of the intervals.

    Returns
    -------
    FitResult
        Not converged: ``.converged`` is False, there are no intervals, ``.message`` says why.

    Raises
    ------
    InputProblems
        For no tests, an unknown law or name, values that are not finite, fewer rows than
        quantities.

    Notes
    -----
    With one drive for all resistances a reagent history enters exactly, as the sum of the drive up
    to each reading, and so does a logged temperature for a law of one resistance. Otherwise the
    grains are followed in steps (second order). Adding resistances is itself exact for first order
    only.
    """
    options = FitOptions(
        law=law,
        free=tuple(free or ()),
        fixed=dict(fixed or {}),
        priors=dict(priors or {}),
        ultimate=ultimate,
        reference=reference,
        size_exponents=size_exponents,
        reagent_order=reagent_order,
        drive=DriveForm(drive) if isinstance(drive, str) else drive,
        terms=tuple(terms),
        slow_law=slow_law,
        spread=spread,
        size_family=size_family,
        balances=dict(balances or {}),
        level=level,
    )
    return fit_with_options(observed, options)


def fit_with_options(observed: Sequence[Observed], options: FitOptions) -> FitResult:
    """Return the fit that options ask for; ``fit_tests`` and ``fit_curve`` both end here."""
    tests, assumed = _with_rows(tuple(observed))
    _check_tests(tests)
    stated = all(o.sd_given for o in tests)
    if options.priors and not stated:
        tests = _with_scatter(tests, options)
    layout, more = layout_of(options, tests)
    assumed = (*assumed, *more)
    design = FitDesign.of(layout, tests, options.balances)
    _check_count(design)
    estimate = _best_estimate(design, stated)
    if (
        options.priors and estimate.widening > 1.0
    ):  # the readings are less sure, the priors as stated
        tests = tuple(replace(o, sd=estimate.widening * o.sd) for o in tests)
        assumed = (*assumed, _less_sure(estimate.widening))
        design = FitDesign.of(layout, tests, options.balances)
        estimate = least_squares(_problem(design, estimate.vector, stated))
    asked = len(layout.free) - _with_own_prior(layout)
    dropped = _not_needed(design, estimate)
    if dropped:
        layout = _without(layout, dropped, design, estimate)
        design = FitDesign.of(layout, tests, options.balances)
        estimate = least_squares(_problem(design, _within(layout, estimate), stated))
    return _result(tests, design, estimate, options, assumed, dropped, asked)


def _with_rows(tests: tuple[Observed, ...]) -> tuple[tuple[Observed, ...], tuple[str, ...]]:
    """Return the tests that have measured rows, and which were left out."""
    empty = [o.test for o in tests if not o.value.size]
    said = (f"no measured value left in {', '.join(empty)}: left out of the fit",) if empty else ()
    return tuple(o for o in tests if o.value.size), said


def _with_scatter(tests: tuple[Observed, ...], options: FitOptions) -> tuple[Observed, ...]:
    """Return tests whose deviations are the scatter about a fit with the priors' values held.

    Where no precision is stated a prior could not be weighed against the readings otherwise.
    """
    held = {name: centre for name, (centre, _) in options.priors.items()}
    alone = replace(options, priors={}, fixed={**options.fixed, **held})
    scatter = fit_with_options(tests, alone).residual_sd
    if not scatter > 0.0:
        return tests
    return tuple(replace(o, sd=scatter * o.sd) for o in tests)


def _less_sure(widening: float) -> str:
    return (
        f"the scatter is {widening:.2g} times the stated precision (chance below 1 %): the "
        "readings were weighed so against the priors; look for an odd test or row, or a law that "
        "does not fit"
    )


def _check_tests(tests: tuple[Observed, ...]) -> None:
    if not tests:
        raise argument_error("observed", "no tests", "one test or more")
    names = [o.test for o in tests]
    if len(set(names)) < len(names):
        raise argument_error("observed", "two tests of one name", "a name of its own for each test")
    for o in tests:
        for name in ("time_h", "value", "sd", "operator", "offset", "brought"):
            if not np.isfinite(getattr(o, name)).all():
                raise argument_error(
                    f"test {o.test}", f"{name} with a value that is not a number", "finite numbers"
                )
        if not (o.sd > 0).all():
            raise argument_error(f"test {o.test}", "a standard deviation of 0", "above 0")
        if not o.head_kg_per_t > 0:
            raise argument_error(f"test {o.test}", f"head {o.head_kg_per_t:g} kg/t", "above 0")
        if not (o.time_h > 0).any():
            raise argument_error(f"test {o.test}", "no reading after time 0", "one or more")


def _check_count(design: FitDesign) -> None:
    free = len(design.layout.free)
    if design.residual_count < free:
        names = ", ".join(q.name for q in design.layout.free)
        raise argument_error(
            "points",
            f"{design.residual_count} measured values for {free} quantities to fit ({names})",
            f"{free} values or more",
            "a smaller law, ultimate= held at a number, or more readings",
        )


def _problem(design: FitDesign, start: Array, stated: bool) -> LeastSquaresProblem:
    free = design.layout.free
    return LeastSquaresProblem(
        names=tuple(q.name for q in free),
        start=start,
        low=np.array([q.low for q in free]),
        high=np.array([q.high for q in free]),
        residuals_and_jacobian=design.residuals_and_jacobian,
        scales=tuple(q.scale for q in free),
        stated=stated,
    )


def _best_estimate(design: FitDesign, stated: bool) -> Estimate:
    """Return the best estimate of a few starts; a clean first one is enough."""
    if not design.layout.free:
        return least_squares(_problem(design, np.zeros(0), stated))
    found: list[Estimate] = []
    for start in start_vectors(design):
        found.append(least_squares(_problem(design, start, stated)))
        clean = found[-1].converged and all(state == "free" for state in found[-1].states)
        if clean and not several_minima(design.layout):
            break
    best = min(e.sum_of_squares for e in found)
    near = [e for e in found if e.sum_of_squares <= best * (1 + 1e-9) + 1e-300]
    return max(near, key=lambda e: e.converged)


def _not_needed(design: FitDesign, estimate: Estimate) -> tuple[str, ...]:
    """Return the fitted resistances that are below 1 % of the total in every test."""
    layout = design.layout
    if len(layout.kinds) < 2:
        return ()
    full = layout.expand(estimate.vector)
    times = {kind: np.exp(design.ln_times(full, kind)) for kind in layout.kinds}
    total = sum(times.values())
    free = {q.which for q in layout.free if q.role == "time"}
    return tuple(
        kind
        for kind in layout.kinds
        if kind in free and float(np.max(times[kind] / total)) < NOT_NEEDED_SHARE
    )


def _without(
    layout: Layout, dropped: tuple[str, ...], design: FitDesign, estimate: Estimate
) -> Layout:
    """Return the layout with resistances that are not needed held far too small to matter."""
    full = layout.expand(estimate.vector)
    kept = [kind for kind in layout.kinds if kind not in dropped]
    smallest = min(float(np.min(design.ln_times(full, kind))) for kind in kept)

    def held(quantity: Quantity) -> Quantity:
        if quantity.which not in dropped or quantity.role == "head":
            return quantity
        if quantity.role == "time":
            return replace(quantity, start=smallest + float(np.log(ABSENT_SHARE)), free=False)
        start = 0.0 if quantity.role == "activation_energy" and quantity.free else quantity.start
        return replace(quantity, start=start, free=False)

    return replace(layout, quantities=tuple(held(q) for q in layout.quantities))


def _within(layout: Layout, estimate: Estimate) -> Array:
    """Return the part of an estimate that a smaller layout still fits."""
    values = dict(zip(estimate.names, estimate.vector.tolist(), strict=True))
    return np.array([values[q.name] for q in layout.free])


def _with_own_prior(layout: Layout) -> int:
    """How many quantities but heads have a prior: that row is no datum, laws differ in it."""
    return sum(q.prior_sd is not None and q.role != "head" for q in layout.free)


def _result(
    tests: tuple[Observed, ...],
    design: FitDesign,
    estimate: Estimate,
    options: FitOptions,
    assumed: tuple[str, ...],
    dropped: tuple[str, ...],
    asked: int,
) -> FitResult:
    layout = design.layout
    count = design.residual_count - _with_own_prior(layout)
    counted = asked + sum(shares_told(layout, estimate.covariance))
    message = estimate.message
    if not estimate.converged:
        message = f"{message}. Look at: {what_to_look_at(tests, design, estimate)}"
    said = [*assumed, *remarks(tests, design, estimate, options.level)]
    said += [f"{kind} resistance not needed: below 1 % of the total" for kind in dropped]
    opened = open_sides(tests, design, estimate, options.level)
    said += [f"{name}: {why}" for name, (_, why) in opened.items()]
    heads = layout.heads(estimate.vector)
    return FitResult(
        law=layout.law(estimate.vector),
        parameters=_parameters(design, estimate, options.level, dropped, opened),
        names=estimate.names,
        vector=estimate.vector,
        covariance=estimate.covariance,
        sum_of_squares=estimate.sum_of_squares,
        aicc=corrected_aic(estimate.sum_of_squares, count, counted),
        bic=schwarz_bic(estimate.sum_of_squares, count, counted),
        criterion_points=count,
        criterion_quantities=counted,
        degrees_of_freedom=estimate.degrees_of_freedom,
        n_tests=len(tests),
        n_points=design.value.size,
        converged=estimate.converged,
        message=message,
        warnings=tuple(said),
        residuals=_residuals(tests, design, estimate),
        heads_kg_per_t={name: float(value) for name, value in heads.items()},
        not_needed=dropped,
        level=options.level,
        layout=layout,
        estimate=estimate,
        design=design,
    )


def _parameters(
    design: FitDesign,
    estimate: Estimate,
    level: float,
    dropped: tuple[str, ...],
    opened: Mapping[str, tuple[Side, str]],
) -> tuple[Parameter, ...]:
    layout = design.layout
    full = layout.expand(estimate.vector)
    found = []
    fitted = 0
    for i, quantity in enumerate(layout.quantities):
        if quantity.free:
            parameter = _from_interval(quantity, estimate.interval(fitted, level))
            found.append(_opened(parameter, opened.get(quantity.name)))
            fitted += 1
        elif quantity.role == "time" and quantity.which in dropped:
            found.append(_absent(design, estimate, quantity, level))
        elif quantity.which not in dropped:
            value = float(layout.natural(full, i))
            found.append(_held(quantity, value, level))
    if layout.law_name == "two_rate":
        found.append(_fast_rate(layout, estimate, level))
    return tuple(found)


def _from_interval(quantity: Quantity, interval: Interval) -> Parameter:
    known = quantity.prior_sd is not None and quantity.role != "head" and interval.low is not None
    return Parameter(
        quantity.name,
        interval.value,
        quantity.unit,
        interval.standard_error,
        interval.low,
        interval.high,
        interval.level,
        f"{interval.method}, with a prior" if known else interval.method,
        interval.why_not,
    )


def _opened(parameter: Parameter, side: tuple[Side, str] | None) -> Parameter:
    """Return a parameter without the end of its interval that the data leave open."""
    if side is None:
        return parameter
    end, why = side
    return replace(
        parameter,
        standard_error=None,
        low=None if end == "low" else parameter.low,
        high=None if end == "high" else parameter.high,
        method="one-sided, linearised",
        why_no_interval=why,
    )


def _held(quantity: Quantity, value: float, level: float) -> Parameter:
    return Parameter(quantity.name, value, quantity.unit, None, None, None, level, "held", "held")


def _absent(design: FitDesign, estimate: Estimate, quantity: Quantity, level: float) -> Parameter:
    """Return a resistance that is not needed, with how large it could be."""
    layout = design.layout
    quantities = tuple(
        replace(q, free=True) if q.name == quantity.name else q for q in layout.quantities
    )
    wider = replace(design, layout=replace(layout, quantities=quantities))
    vector = layout.expand(estimate.vector)[wider.layout.free_index]
    residuals, jacobian = wider.residuals_and_jacobian(vector)
    j = [q.name for q in wider.layout.free].index(quantity.name)
    column = jacobian[:, j] / np.exp(vector[j])
    others = np.delete(jacobian, j, axis=1)
    high = None
    if estimate.converged and estimate.degrees_of_freedom > 0:
        allowance = estimate.multiplier(level, sides=1) ** 2 * estimate.scatter_variance
        reach = one_sided_reach(residuals, others, column, allowance)
        high = reach if np.isfinite(reach) else None
    return Parameter(
        quantity.name,
        0.0,
        quantity.unit,
        None,
        None,
        high,
        level,
        "one-sided, linearised" if high is not None else "none",
        "not needed: below 1 % of the total",
    )


def _fast_rate(layout: Layout, estimate: Estimate, level: float) -> Parameter:
    """Return k_fast = k_slow * ratio with its interval."""
    weight = np.array([float(q.name in ("k_slow", "ratio")) for q in layout.free])
    held = sum(q.start for q in layout.quantities if not q.free and q.name in ("k_slow", "ratio"))
    ln_rate = float(weight @ estimate.vector) + held
    value = float(np.exp(ln_rate))
    unit = next(q.unit for q in layout.quantities if q.role == "time")
    used = [s for s, w in zip(estimate.states, weight, strict=True) if w]
    if not estimate.converged or estimate.degrees_of_freedom < 1 or "not held" in used:
        why = "k_slow or ratio has none"
        return Parameter("k_fast", value, unit, None, None, None, level, "none", why)
    sd = float(np.sqrt(weight @ estimate.covariance @ weight))
    half = estimate.multiplier(level) * sd
    low, high = value * np.exp(-half), value * np.exp(half)
    return Parameter(
        "k_fast", value, unit, value * sd, float(low), float(high), level, estimate.method
    )


def _residuals(
    tests: tuple[Observed, ...], design: FitDesign, estimate: Estimate
) -> tuple[Residual, ...]:
    expected = design.expected(estimate.vector)
    found = []
    for observed, part in zip(tests, design.slices, strict=True):
        rows = range(part.rows.start, part.rows.stop)
        for row, i in enumerate(rows):
            found.append(
                Residual(
                    observed.test,
                    observed.row_kind[row],
                    float(observed.row_time_h[row]),
                    float(observed.value[row]),
                    float(expected[i]),
                    float(observed.sd[row]),
                    int(observed.bound[row]),
                    float(estimate.residuals[i]),
                )
            )
    return tuple(found)
