"""The figures by which a fit is checked, from a result of a run: arranged here, computed before."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from leachkin.campaign import KineticsStage
from leachkin.kinetics import ArrheniusPanel, FitResult, KineticDiagnostics, Parameter, RatePlot
from leachkin.report.figures.checks import (
    StraightPanel,
    correlation_squares,
    leverage_strips,
    residual_pair,
    straightened_panels,
)
from leachkin.report.figures.constants import (
    ForestRow,
    RatePoints,
    WaysPanel,
    arrhenius_ways,
    rate_loglog,
    value_forest,
)
from leachkin.report.figures.style import ReportFigure
from leachkin.report.numbers import format_number
from leachkin.report.words import celsius, file_word, size_words

_LAWS = {"film": "film", "ash_layer": "ash (product) layer", "chemical": "chemical reaction"}
#: Lines of the log-log plots: power of the rate constant, and what it stands for.
_SIZE_GUIDES = (
    (-1.0, "slope 1 (1/d: chemical reaction)"),
    (-2.0, "slope 2 (1/d\u00b2: ash layer)"),
)
_ORDER_GUIDES = ((0.5, "order 0.5"), (1.0, "order 1"))
#: A correlation beyond this: the tests hold two parameters only together.
_STRONG = 0.9


def residual_figure(key: str, found: KineticDiagnostics) -> ReportFigure:
    """Return standardised residuals against time and fitted extraction."""
    rows = found.rows
    shown = np.isfinite(rows.standardised) & (np.nan_to_num(rows.time_h) > 0.0)
    name = f"residuals_{file_word(key)}"
    svg = residual_pair(
        name,
        rows.time_h[shown],
        rows.extraction[shown],
        rows.standardised[shown],
        [test for test, seen in zip(rows.test, shown, strict=True) if seen],
    )
    caption = (
        f"Fitted less measured over its own standard deviation, {key}. About 95 % belong in the "
        "grey band, without a trend, and no test should lie on one side. A tail stands at the "
        "last time; limits and heads are not shown."
    )
    return ReportFigure(name, "kinetics", f"What the law leaves over, {key}", caption, svg)


def forest_figure(key: str, stage: KineticsStage, fit: FitResult) -> ReportFigure:
    """Return the parameters of all laws that are not rejected, each on its scale."""
    name = f"parameters_{file_word(key)}"
    fits = (fit, *stage.alternatives)
    rows = [row for one in fits for row in _forest_rows(one)]
    svg = value_forest(name, rows, [one.law.name for one in fits])
    methods = dict.fromkeys(
        p.method for one in fits for p in one.parameters if _shown(p) and p.method != "none"
    )
    others = "no other law is left by the data" if len(fits) == 1 else "laws not rejected"
    caption = (
        f"Fitted values with {100 * fit.level:g} % intervals, {key}; {others}. Intervals: "
        f"{'; '.join(methods) or 'none'}. {fit.degrees_of_freedom} degrees of freedom. An arrow: "
        "the data set no end on that side. The heads of the tests are fitted too and stand in the "
        "table."
    )
    return ReportFigure(name, "kinetics", f"How well each constant is known, {key}", caption, svg)


def _shown(parameter: Parameter) -> bool:
    """Whether a parameter was fitted, the heads left aside."""
    return not parameter.name.startswith("head_") and parameter.method != "held"


def _forest_rows(fit: FitResult) -> Iterator[ForestRow]:
    for p in fit.parameters:
        if _shown(p):
            percent = p.name.startswith("ultimate") or p.name.endswith("share")
            scale = 100.0 if percent else 1.0
            low, high = (None if end is None else scale * end for end in (p.low, p.high))
            ratio = p.name.startswith(("tau_", "k"))
            value = scale * p.value
            yield ForestRow(_group(p), _label(p), fit.law.name, value, low, high, ratio)


def _label(parameter: Parameter) -> str:
    name = parameter.name
    if name.startswith("ultimate_") and name.endswith("_mm"):
        return f"ultimate, {name.removeprefix('ultimate_').removesuffix('_mm')} mm"
    words = name.replace("activation_energy", "Ea").replace("_", " ")
    return words.replace("tau ", "\u03c4 ")


def _group(parameter: Parameter) -> str:
    name = parameter.name
    if name.startswith("tau_"):
        return f"time for complete conversion ({parameter.unit or '-'})"
    if name.startswith("activation_energy"):
        return "activation energy (kJ/mol)"
    if name.startswith("ultimate"):
        return "ultimate extraction (% of total metal)"
    if name.endswith("share"):
        return "share (%)"
    for start, words in (("size_exponent", "size exponent"), ("reagent_order", "order in reagent")):
        if name.startswith(start):
            return f"{words} (-)"
    if parameter.unit.startswith("1/"):
        return f"rate constant ({parameter.unit})"
    return f"other ({parameter.unit or '-'})"


def further_figures(
    key: str, stage: KineticsStage, fit: FitResult, found: KineticDiagnostics
) -> Iterator[ReportFigure]:
    """Yield the figures that stand folded: straightened, leverage, correlation, size, order, Ea."""
    yield _straightened(key, stage, found)
    yield _leverage(key, found)
    if len(found.correlated) > 1:
        yield _correlation(key, found)
    if found.by_size is not None and found.by_size.tests:
        yield _by_size(key, fit, found.by_size)
    if found.by_strength is not None and found.by_strength.tests:
        yield _by_strength(key, fit, found.by_strength)
    if found.arrhenius:
        yield _arrhenius(key, fit, found.arrhenius)


def _straightened(key: str, stage: KineticsStage, found: KineticDiagnostics) -> ReportFigure:
    name = f"straightened_{file_word(key)}"
    by_test = {one.test: one for one in stage.observed}
    panels = [
        StraightPanel(
            one.test,
            size_words(by_test[one.test].sizes),
            celsius(by_test[one.test].temperature_K),
            one.time_h,
            one.g,
            one.slope_per_h,
        )
        for one in found.straightened
    ]
    caption = (
        f"DIAGNOSTIC ONLY: not used for the choice, {key}. g(X) by film (X), ash layer "
        "(1 - 3(1-X)^(2/3) + 2(1-X)) and chemical reaction (1 - (1-X)^(1/3)), X the measured "
        "extraction over the fitted ultimate extraction, up to the plateau; lines through the "
        "origin. Straightening bends the errors, knows no sizes and no reagent that runs down, "
        "and so favours the ash layer."
    )
    svg = straightened_panels(name, panels, _LAWS)
    title = f"Straightened curves (diagnostic only), {key}"
    return ReportFigure(name, "kinetics", title, caption, svg, folded=True)


def _leverage(key: str, found: KineticDiagnostics) -> ReportFigure:
    rows = found.rows
    name = f"leverage_{file_word(key)}"
    svg = leverage_strips(
        name, rows.test, rows.kind, rows.time_h, rows.leverage, rows.mean_leverage
    )
    caption = (
        f"How much each measured row pulls the fit to itself, {key}: 0 not at all, 1 the fit "
        "follows it whatever it says. Rows above twice the mean hold a constant almost alone: "
        "check those assays first."
    )
    return ReportFigure(
        name, "kinetics", f"Which readings hold the fit, {key}", caption, svg, folded=True
    )


def _correlation(key: str, found: KineticDiagnostics) -> ReportFigure:
    name = f"correlation_{file_word(key)}"
    labels = [
        _label(Parameter(n, 0.0, "", None, None, None, 0.0, "", "")) for n in found.correlated
    ]
    strong = [
        f"{labels[i]} and {labels[j]} ({found.correlation[i, j]:+.2f})"
        for i in range(len(labels))
        for j in range(i)
        if abs(found.correlation[i, j]) > _STRONG
    ]
    said = f"Held mostly together: {'; '.join(strong)}." if strong else "None exceeds 0.9."
    caption = (
        f"Correlation of the fitted parameters on the fitted scales, {key} (linearised; heads are "
        f"fitted too and not shown). {said}"
    )
    svg = correlation_squares(name, labels, found.correlation)
    title = f"Which constants move together, {key}"
    return ReportFigure(name, "kinetics", title, caption, svg, folded=True)


def _points(plot: RatePlot, group: Sequence[str]) -> RatePoints:
    return RatePoints(
        tuple(group), plot.at, plot.rate, plot.low, plot.high, plot.line_at, plot.line_rate
    )


def _left_out(plot: RatePlot) -> str:
    return f" Left out: {'; '.join(plot.left_out)}." if plot.left_out else ""


def _by_size(key: str, fit: FitResult, plot: RatePlot) -> ReportFigure:
    name = f"size_{file_word(key)}"
    at = fit.law.reference
    svg = rate_loglog(
        name,
        _points(plot, [celsius(one.temperature_K) for one in plot.tests]),
        "size, mass mean of the test (mm), logarithmic",
        _SIZE_GUIDES,
    )
    caption = (
        f"Rate constant of each test alone against its size, {key}, carried to "
        f"{celsius(at.temperature_K)} and {at.reagent_g_per_L:.3g} g/L by the fit; bars: "
        f"{100 * fit.level:g} % of that test. Law: {fit.law.name}. Between the two slopes both "
        f"resistances count; tests of one size stand side by side.{_left_out(plot)}"
    )
    title = f"Rate against size, {key}"
    return ReportFigure(name, "kinetics", title, caption, svg, folded=True)


def _by_strength(key: str, fit: FitResult, plot: RatePlot) -> ReportFigure:
    name = f"order_{file_word(key)}"
    at = fit.law.reference
    svg = rate_loglog(
        name,
        _points(plot, [celsius(one.temperature_K) for one in plot.tests]),
        "reagent strength of the test (g/L), logarithmic",
        _ORDER_GUIDES,
    )
    caption = (
        f"Rate constant of each test alone against its reagent strength, {key}, carried to "
        f"{celsius(at.temperature_K)} and {at.size_mm:.3g} mm by the fit; bars: "
        f"{100 * fit.level:g} % of that test. The slope is the order.{_left_out(plot)}"
    )
    title = f"Rate against reagent strength, {key}"
    return ReportFigure(name, "kinetics", title, caption, svg, folded=True)


def _arrhenius(key: str, fit: FitResult, found: Sequence[ArrheniusPanel]) -> ReportFigure:
    name = f"arrhenius_{file_word(key)}"
    at = fit.law.reference
    normal = fit.estimate.student_degrees is None
    svg = arrhenius_ways(name, [_ways(panel, normal) for panel in found])
    caption = (
        f"Rate constants at {at.size_mm:.3g} mm and {at.reagent_g_per_L:.3g} g/L against "
        f"temperature, {key}, in two ways. The energy used is that of all tests together; a line "
        "through a fit a temperature keeps temperatures less two degrees of freedom, and t is the "
        f"multiplier of its {100 * fit.level:g} % interval."
    )
    title = f"Activation energy in two ways, {key}"
    return ReportFigure(name, "kinetics", title, caption, svg, folded=True)


def _ways(panel: ArrheniusPanel, normal: bool) -> WaysPanel:
    line = panel.line
    two = _energy(
        "two steps",
        line.activation_energy_kJ_per_mol,
        (line.low, line.high),
        line.degrees_of_freedom,
        panel.line_t,
    )
    shared = panel.shared
    together = _energy(
        "all tests",
        shared.value,
        (shared.low, shared.high),
        panel.shared_degrees_of_freedom,
        panel.shared_multiplier,
        "normal factor" if normal else "t =",
    )
    return WaysPanel(
        _rate_words(panel.name),
        two,
        together,
        panel.temperature_K,
        panel.ln_rate,
        panel.ln_rate_sd,
        panel.grid_K,
        panel.line_ln_rate,
        panel.shared_ln_rate,
    )


def _energy(
    way: str,
    value: float,
    ends: tuple[float | None, float | None],
    freedom: int,
    multiplier: float | None,
    factor_is: str = "t =",
) -> str:
    low, high = ends
    span = "no interval"
    if low is not None and high is not None:
        span = f"{format_number(low, 3)} to {format_number(high, 3)}"
    factor = "" if multiplier is None else f", {factor_is} {multiplier:.3g}"
    words = "degree" if freedom == 1 else "degrees"
    energy = f"{way}: {format_number(value, 3)} kJ/mol ({span})"
    return f"{energy}\n{freedom} {words} of freedom{factor}"


def _rate_words(name: str) -> str:
    if name.startswith("tau_"):
        return f"1/\u03c4, {_LAWS.get(name.removeprefix('tau_'), name)}"
    return name.replace("_", " ")
