"""Cementation beyond the demand: order, rates, vessel, mixed potential, barren, site."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from functools import partial
from typing import Any

import numpy as np

from leachkin.campaign.cementation_site import (
    first_metal,
    mixed_settings,
    recovery_of,
    site_fit,
)
from leachkin.campaign.cementation_vessel import cementation_vessel
from leachkin.campaign.settings import Settings
from leachkin.cementation import (
    BarrenDrift,
    CementationDemand,
    CementationRanking,
    CementationTest,
    CementationVessel,
    CyanideWindow,
    FactorReconciliation,
    LeadSalt,
    MixedCourse,
    SiteFit,
    SolutionOrder,
    barren_drift,
    cyanide_window,
    deaeration_table,
    lead_salt,
    mixed_course,
    rank_cementation_tests,
    reconcile_factor,
    solution_order,
)
from leachkin.errors import InputProblems
from leachkin.problems import Problem
from leachkin.result_table import ResultTable

#: Barren that the way of the mixed potential goes to where all of a metal is asked for.
_DEEPEST_SHARE = 1e-3


@dataclass(frozen=True)
class CementationMore:
    """Cementation beyond the demand; what was not asked for or could not be done is None.

    Attributes
    ----------
    order : SolutionOrder or None
        Couples at the activities of the solution.
    rankings : mapping of str to CementationRanking
        Laws of the cementation tests, by metal.
    site : SiteFit or None
        The mixed potential, fitted where [cementation.site] is there.
    course : MixedCourse or None
        The same, or unfitted.
    vessel : CementationVessel or None
    barren : BarrenDrift or None
    reconciliation : FactorReconciliation or None
    deaeration : ResultTable or None
    window : CyanideWindow or None
    lead : LeadSalt or None
    problems : tuple of Problem
        Parts that could not be done, with their reasons.
    notes : tuple of str
    """

    order: SolutionOrder | None = None
    rankings: Mapping[str, CementationRanking] = field(default_factory=dict)
    site: SiteFit | None = None
    course: MixedCourse | None = None
    vessel: CementationVessel | None = None
    barren: BarrenDrift | None = None
    reconciliation: FactorReconciliation | None = None
    deaeration: ResultTable | None = None
    window: CyanideWindow | None = None
    lead: LeadSalt | None = None
    problems: tuple[Problem, ...] = ()
    notes: tuple[str, ...] = ()

    @property
    def sources(self) -> tuple[str, ...]:
        """Source keys behind what is there."""
        keys: list[str] = []
        if self.course is not None:
            keys += ["wagner1938", *self.course.kinetics.sources]
        if self.order is not None:
            keys.append("davies1962")
        if self.vessel is not None and "[" in self.vessel.correlation:
            keys.append(self.vessel.correlation.split("[")[1].split("]")[0])
        return tuple(dict.fromkeys(keys))

    def tables(self) -> tuple[ResultTable, ...]:
        """Return every table, in reading order."""
        parts = (self.reconciliation, self.barren, self.order)
        found = [part.table() for part in parts if part is not None]
        for metal, ranking in self.rankings.items():
            found += [
                replace(ranking.best.parameter_table(), name=f"cementation_rate_{metal}"),
                replace(ranking.table(), name=f"cementation_rate_ranking_{metal}"),
                replace(ranking.best.residual_table(), name=f"residuals_cementation_{metal}"),
            ]
        if self.vessel is not None:
            found.append(self.vessel.table())
        if self.course is not None:
            found += [self.course.sink_table(), self.course.way_table()]
        if self.site is not None and self.site.parameters:
            found.append(self.site.table())
        if self.deaeration is not None:
            found.append(self.deaeration)
        if self.window is not None:
            found.append(self.window.table())
        return tuple(found)


def cementation_more(
    settings: Settings,
    tests: tuple[CementationTest, ...],
    demand: CementationDemand | None,
    level: float,
    site: SiteFit | None = None,
) -> CementationMore:
    """Return what can be told of a cementation beyond its demand; each part stands alone.

    Parameters
    ----------
    settings : Settings
    tests : tuple of CementationTest
    demand : CementationDemand or None
        None where only tests are there.
    level : float
    site : SiteFit, optional
        Where the demand rests on it already.
    """
    problems: list[Problem] = []

    def part(name: str, make: Callable[[], Any]) -> Any:
        try:
            return make()
        except InputProblems as error:
            problems.extend(_not_done(name, p) for p in error.problems if isinstance(p, Problem))
            return None

    rankings: dict[str, CementationRanking] = {}
    for metal in dict.fromkeys(test.metal for test in tests):
        ranking = part("rate", partial(_ranking, settings, tests, metal, level))
        if ranking is not None:
            rankings[metal] = ranking
    found = CementationMore(rankings=rankings)
    if demand is not None:
        found = _with_demand(found, settings, demand, site, part)
    return replace(found, problems=tuple(problems), notes=tuple(_notes(found)))


def _with_demand(
    found: CementationMore,
    settings: Settings,
    demand: CementationDemand,
    site: SiteFit | None,
    part: Callable[[str, Callable[[], Any]], Any],
) -> CementationMore:
    if site is None:
        site = part("site", lambda: site_fit(settings, demand.solution, demand.precipitant))
    way = None if site is not None else part("way", lambda: _course(settings, demand))
    return replace(
        found,
        order=part("order", lambda: _order(demand)),
        site=site,
        course=way if site is None else site.course,
        vessel=part("vessel", lambda: _vessel(settings, demand, found.rankings)),
        barren=part("barren", lambda: barren_drift(demand)),
        reconciliation=part("plant_factor", lambda: _reconciliation(settings, demand)),
        **_zinc_parts(settings, demand, part),
    )


def _not_done(part: str, problem: Problem) -> Problem:
    return replace(
        problem,
        column=problem.column or f"cementation.{part}",
        level="ask",
        found=f"cementation {part} not done: {problem.found}",
    )


def _order(demand: CementationDemand) -> SolutionOrder:
    gain = float(np.median(demand.precipitant_gain_g_per_L))
    return solution_order(demand.solution, demand.precipitant, gain)


def _ranking(
    settings: Settings, tests: tuple[CementationTest, ...], metal: str, level: float
) -> CementationRanking:
    own = [test for test in tests if test.metal == metal]
    laws = settings.get("cementation.rate_laws")
    return rank_cementation_tests(own, laws or None, level=level)


def _course(settings: Settings, demand: CementationDemand) -> MixedCourse | None:
    if not settings.has("cementation.mixed_potential"):
        return None
    solution, precipitant = demand.solution, demand.precipitant
    metal = first_metal(solution, precipitant)
    feed = float(np.median(solution.grade(metal)))
    left = float(np.median(demand.barren_g_per_L.get(metal, np.zeros(()))))
    barren = {metal: max(left, _DEEPEST_SHARE * feed)}
    transfer, kinetics = mixed_settings(settings, solution, precipitant, metal)
    return mixed_course(solution, precipitant, transfer, barren, kinetics)


def _vessel(
    settings: Settings, demand: CementationDemand, rankings: Mapping[str, CementationRanking]
) -> CementationVessel | None:
    metal = first_metal(demand.solution, demand.precipitant)
    fitted = rankings[metal].best.law if metal in rankings else None
    return cementation_vessel(settings, demand, metal, fitted)


def _reconciliation(settings: Settings, demand: CementationDemand) -> FactorReconciliation | None:
    plant = settings.get("cementation.plant_factor")
    if plant is None:
        return None
    basis = "as received" if demand.gross_factor is not None else "net"
    return reconcile_factor(demand, float(plant), basis)


def _zinc_parts(
    settings: Settings, demand: CementationDemand, part: Callable[[str, Callable[[], Any]], Any]
) -> dict[str, Any]:
    if demand.medium != "cyanide":
        return {}
    found = {"deaeration": part("deaeration", lambda: _deaeration(settings, demand))}
    if settings.has("cementation.mixed_potential") and demand.solution.pH is not None:
        found["window"] = part("cyanide window", lambda: _window(settings, demand))
    dose, flow = settings.get("cementation.lead_nitrate"), demand.solution.flow_m3_per_h
    if dose is not None:
        per_h = None if flow is None else float(np.median(np.asarray(flow)))
        found["lead"] = part("lead salt", lambda: lead_salt(dose, per_h))
    return found


def _deaeration(settings: Settings, demand: CementationDemand) -> ResultTable:
    return deaeration_table(
        demand.solution,
        demand.precipitant,
        recovery_of(demand),
        altitude_m=settings.get("cementation.altitude") or 0.0,
        stoichiometry=str(settings.get("cementation.stoichiometry")),
    )


def _window(settings: Settings, demand: CementationDemand) -> CyanideWindow:
    solution, precipitant = demand.solution, demand.precipitant
    metal = first_metal(solution, precipitant)
    transfer, _ = mixed_settings(settings, solution, precipitant, metal)
    gain = float(np.median(demand.precipitant_gain_g_per_L))
    return cyanide_window(solution, precipitant, transfer, gain)


def _notes(found: CementationMore) -> list[str]:
    notes: list[str] = []
    if found.site is not None:
        notes.append(found.site.text)
    elif found.course is not None:
        notes.append(found.course.remark)
    if found.course is not None:
        notes += found.course.notes
        notes += [f"mixed potential: {text}" for text in found.course.kinetics.defaults]
    if found.order is not None:
        notes += found.order.notes
    for metal, ranking in found.rankings.items():
        notes += [f"{metal} cementation tests: {ranking.verdict}"]
        notes += [f"{metal}: {text}" for text in ranking.best.control]
    for part in (found.vessel, found.barren):
        notes += part.notes if part is not None else ()
    if found.reconciliation is not None:
        notes.append(f"Site: {found.reconciliation.text}.")
    if found.lead is not None:
        notes.append(_lead_words(found.lead))
    return list(dict.fromkeys(notes))


def _lead_words(lead: LeadSalt) -> str:
    text = (
        f"lead nitrate {lead.dose_g_per_m3:g} g/m3: {lead.lead_g_per_m3:.3g} g/m3 of lead, which "
        f"takes {lead.zinc_g_per_m3:.3g} g/m3 of zinc beside the demand"
    )
    if lead.kg_per_month is not None:
        text += f"; {lead.kg_per_month:.4g} kg a month"
    return f"{text}; {lead.note}"
