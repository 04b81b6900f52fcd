"""The figures of the tests and of the fit, from a result of a run."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign import CampaignResult, KineticsStage
from leachkin.kinetics import FitResult, RateLaw
from leachkin.report.diagnostic_figures import (
    forest_figure,
    further_figures,
    residual_figure,
)
from leachkin.report.figures.evidence import closure_plot
from leachkin.report.figures.kinetics import (
    Panel,
    TemperatureLine,
    arrhenius_plot,
    extraction_panels,
)
from leachkin.report.figures.style import ReportFigure
from leachkin.report.words import celsius, file_word, size_words
from leachkin.testwork import MetalBalance, Observed, SizeDistribution

Array = NDArray[np.float64]
_DRAWS = 200
_HEAD_WORDS = ", on the calculated head where there is a tail"
_ERROR_WORDS = ", with two standard deviations of the assay"
_NAMES = {
    "film": "film",
    "ash_layer": "ash (product) layer",
    "chemical": "chemical reaction",
    "clock": "clock of the law",
}


def kinetics_figures(result: CampaignResult) -> Iterator[ReportFigure]:
    """Yield closure, extraction, residuals, parameters, temperature, and what stands folded."""
    for key, balances in result.balances.items():
        if any(balance.closure is not None for balance in balances):
            yield _closure(key, balances)
    for key, stage in result.kinetics.items():
        if stage.observed:
            yield _extraction(result, key, stage)
        if stage.fit is not None and stage.fit.converged:
            if stage.diagnostics is not None:
                yield residual_figure(key, stage.diagnostics)
            yield forest_figure(key, stage, stage.fit)
            yield from _temperature(result, key, stage)
            if stage.diagnostics is not None:
                yield from further_figures(key, stage, stage.fit, stage.diagnostics)


def _closure(key: str, balances: Sequence[MetalBalance]) -> ReportFigure:
    name = f"closure_{file_word(key)}"
    limits = (0.95, 1.05)
    svg = closure_plot(
        name,
        [balance.test for balance in balances],
        [balance.closure for balance in balances],
        [balance.sd.get("closure") for balance in balances],
        limits,
        key,
    )
    caption = (
        f"Calculated head over head assay, {key}; bars are two standard deviations. The grey band "
        f"is {limits[0]:g} to {limits[1]:g} (common practice for base metals); squares lie "
        "outside it."
    )
    return ReportFigure(name, "evidence", f"Do the balances close? {key}", caption, svg)


def _extraction(result: CampaignResult, key: str, stage: KineticsStage) -> ReportFigure:
    name = f"extraction_{file_word(key)}"
    by_test = {balance.test: balance for balance in result.balances.get(key, ())}
    draws = _draws(stage.fit, result.run.seed)
    stated = stage.fit is None or stage.fit.estimate.stated
    curves = _Curves(stage.law, draws, _ends(stage.fit), stated)
    panels = [_panel(curves, one, by_test.get(one.test)) for one in stage.observed]
    level = f"{100 * stage.fit.level:g} %" if stage.fit is not None else "no"
    label = f"{level} band of the fitted curve" if draws is not None else ""
    caption = (
        f"Extraction of all the {stage.metal} against time, {key}. Points: measured"
        f"{_HEAD_WORDS if by_test else ''}{_ERROR_WORDS if stated else ''}. Line: "
        f"{stage.law.name}, all tests fitted together. The band is the {level} confidence of the "
        "curve, not of the next bottle."
    )
    svg = extraction_panels(name, panels, stage.metal, label)
    return ReportFigure(name, "kinetics", f"Extraction against time, {key}", caption, svg)


@dataclass(frozen=True)
class _Curves:
    """The fitted law, its draws, and the quantiles of the band."""

    law: RateLaw
    draws: RateLaw | None
    ends: tuple[float, float]
    stated: bool = True


def _panel(curves: _Curves, one: Observed, balance: MetalBalance | None) -> Panel:
    time_h, extraction, sd = _measured(one, balance, curves.stated)
    grid = np.linspace(0.0, 1.04 * float(time_h.max()), 90) if len(time_h) else np.linspace(0, 1, 2)
    low = high = None
    if curves.draws is not None:
        low, high = np.quantile(_curve(curves.draws, grid, one), curves.ends, axis=0)
    return Panel(
        test=one.test,
        size=size_words(one.sizes),
        temperature=celsius(one.temperature_K),
        time_h=time_h,
        extraction=extraction,
        sd=sd,
        fit_time_h=grid,
        fit=_curve(curves.law, grid, one),
        low=low,
        high=high,
        ultimate=_ultimate(curves.law, one),
    )


def _measured(
    one: Observed, balance: MetalBalance | None, stated: bool
) -> tuple[Array, Array, Array]:
    """Times, extractions and their standard deviations from the assays."""
    if balance is None:
        return one.row_time_h, one.value, one.sd if stated else np.zeros_like(one.sd)
    rows = [i for i, kind in enumerate(one.row_kind) if kind == "solution"]
    relative = dict(
        zip(one.row_time_h[rows], one.sd[rows] / np.maximum(one.value[rows], 1e-300), strict=True)
    )
    extraction = balance.extraction_on_calculated_head
    if not np.any(np.isfinite(extraction)):
        extraction = balance.extraction_on_assay_head
    keep = np.isfinite(extraction)
    time_h = balance.time_h[keep]
    part = np.array([relative.get(t, 0.0) for t in time_h])
    return time_h, extraction[keep], part * extraction[keep]


def _curve(law: RateLaw, time_h: Array, one: Observed) -> Array:
    sizes = one.sizes or SizeDistribution.single(law.reference.size_mm)
    return np.asarray(law.extraction(time_h, sizes, one.temperature_K, one.reagent_g_per_L))


def _ultimate(law: RateLaw, one: Observed) -> float | None:
    if one.sizes is None:
        return float(np.mean(law.ultimate))
    return float(np.asarray(law.ultimate_at(one.sizes.size_mm)) @ one.sizes.metal_share)


def _draws(fit: FitResult | None, seed: int) -> RateLaw | None:
    return fit.draw(_DRAWS, seed) if fit is not None and fit.converged else None


def _ends(fit: FitResult | None) -> tuple[float, float]:
    """Quantiles of the band at the level of the fit."""
    level = fit.level if fit is not None else 0.95
    return 0.5 * (1.0 - level), 0.5 * (1.0 + level)


def _temperature(result: CampaignResult, key: str, stage: KineticsStage) -> Iterator[ReportFigure]:
    tested = sorted({one.temperature_K for one in stage.observed})
    draws = _draws(stage.fit, result.run.seed)
    if len(tested) < 2 or draws is None or not _has_times(stage.law):
        return
    used = [
        (word, place.temperature_K)
        for word, place in (("heap", result.heap), ("tanks", result.tank))
        if place is not None
    ]
    ends = [*tested, *(kelvin for _, kelvin in used)]
    grid = np.linspace(min(ends) - 3.0, max(ends) + 3.0, 60)
    name = f"temperature_{file_word(key)}"
    curves = _Curves(stage.law, draws, _ends(stage.fit))
    svg = arrhenius_plot(name, grid, list(_lines(curves, grid)), tested, used)
    caption = (
        f"Time for complete conversion of {stage.law.reference.size_mm:g} mm against temperature, "
        f"{key}, from the fit of all tests together, with its band. Dotted: temperatures that "
        "were tested; what lies outside them is extrapolated."
    )
    yield ReportFigure(name, "kinetics", f"Temperature, {key}", caption, svg)


def _has_times(law: RateLaw) -> bool:
    return any(resistance.kind != "clock" for resistance in law.resistances)


def _lines(curves: _Curves, grid: Array) -> Iterator[TemperatureLine]:
    size = np.array([curves.law.reference.size_mm])
    for resistance in curves.law.resistances:
        kind = resistance.kind
        median = [_time_of(curves.law, kind, size, kelvin).item() for kelvin in grid]
        ends = [
            np.quantile(_time_of(curves.draws, kind, size, kelvin), curves.ends)
            if curves.draws is not None
            else (median[i], median[i])
            for i, kelvin in enumerate(grid)
        ]
        low, high = np.array(ends).T
        yield TemperatureLine(_NAMES[kind], np.array(median), low, high)


def _time_of(law: RateLaw, kind: str, size_mm: Array, temperature_K: float) -> Array:
    times = law.times(size_mm, temperature_K=temperature_K)
    return np.asarray(getattr(times, kind))
