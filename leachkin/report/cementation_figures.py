"""The figures of cementation tests and of the mixed potential, from a result of a run."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from leachkin.campaign import CampaignResult
from leachkin.cementation import CementationFit, CementationRanking, CementationTest, MixedCourse
from leachkin.report.figures.cementation import RateCurve, rate_curves, sinks_along
from leachkin.report.figures.style import ReportFigure
from leachkin.report.words import celsius, file_word

_POINTS = 120
_MIN_PER_H = 60.0


def cementation_figures(result: CampaignResult) -> Iterator[ReportFigure]:
    """Yield concentration against time of the tests, and sinks along the way."""
    found = result.cementation_more
    if found is None:
        return
    for metal, ranking in found.rankings.items():
        yield _rates(result, metal, ranking)
    if found.course is not None and found.course.contact_s_per_m.shape[-1] > 1:
        yield _sinks(found.course)


def _rates(result: CampaignResult, metal: str, ranking: CementationRanking) -> ReportFigure:
    fit = ranking.best
    name = f"cementation_rate_{file_word(metal)}"
    barren = _barren(result, metal)
    unit = fit.tests[0].unit or "as given"
    svg = rate_curves(name, [_curve(fit, test) for test in fit.tests], metal, unit, barren)
    caption = (
        f"{metal} left against contact, logarithmic, {len(fit.tests)} tests; lines: "
        f"{fit.law_name}, fitted to all together. {ranking.verdict} Open triangles are limits. "
        f"{fit.control[0].capitalize()}; {fit.control[1]}."
    )
    return ReportFigure(name, "solution", f"How fast {metal} goes down", caption, svg)


def _curve(fit: CementationFit, test: CementationTest) -> RateCurve:
    hours = np.linspace(0.0, float(test.time_h[-1]), _POINTS)
    conditions: dict[str, float] = {"temperature_K": test.temperature_K}
    if test.stirring_rpm is not None:
        conditions["stirring_rpm"] = test.stirring_rpm
    if fit.law.by_area and test.area_m2_per_m3 is not None:
        conditions["area_m2_per_m3"] = test.area_m2_per_m3
    start = test.start
    if start is None:
        start = fit.parameter(f"start {test.name}").value
    limit = np.zeros(test.time_h.shape, dtype=bool) if test.bound is None else test.bound != 0
    return RateCurve(
        _label(test),
        _MIN_PER_H * test.time_h,
        test.concentration,
        limit,
        _MIN_PER_H * hours,
        start * fit.law.left(hours, **conditions),
    )


def _label(test: CementationTest) -> str:
    speed = "" if test.stirring_rpm is None else f", {test.stirring_rpm:g} rpm"
    return f"{test.name}: {celsius(test.temperature_K)}{speed}"


def _barren(result: CampaignResult, metal: str) -> float | None:
    stage = result.cementation
    if stage is None or metal not in stage.demand.barren_g_per_L:
        return None
    return float(np.median(stage.demand.barren_g_per_L[metal])) or None


def _sinks(course: MixedCourse) -> ReportFigure:
    left = course.metals_g_per_L[course.metal]
    removed = np.asarray(1.0 - left / left[..., :1])
    kind = course.precipitant.kind
    svg = sinks_along(
        "cementation_way",
        removed,
        list(course.taken_kg_per_m3.items()),
        course.metal,
        f"kg of {kind} per m\u00b3",
    )
    caption = (
        f"What takes the {kind} from feed to barren, by the mixed potential, plug flow. "
        f"{course.remark}"
    )
    return ReportFigure("cementation_way", "solution", "Sinks along the vessel", caption, svg)
