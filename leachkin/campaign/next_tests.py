"""Which further tests would tell most in a campaign: about its plant, its constants, its law."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from leachkin.campaign.assumed_values import assumed_deviations
from leachkin.campaign.campaign import Campaign
from leachkin.campaign.next_tests_advice import (
    law_advice,
    left_out_advice,
    longer_advice,
    no_law_advice,
    plant_advice,
    quantity_advice,
    sentence,
    stirring_advice,
    untested_advice,
)
from leachkin.campaign.next_tests_bench import is_one_of, patterns_of
from leachkin.campaign.next_tests_default import default_candidates, in_words
from leachkin.campaign.next_tests_given import given_candidates
from leachkin.campaign.next_tests_plant import (
    FIGURE,
    PLANTS,
    UNIT,
    assumed_ultimates,
    conditions_of,
    plant_band,
    plant_of,
    plant_table,
    prediction_of,
    stage_of,
)
from leachkin.campaign.result import CampaignResult
from leachkin.campaign.stage_results import KineticsStage
from leachkin.errors import InputProblems, LeachkinError
from leachkin.inference import normal_multiplier
from leachkin.kinetics import Candidate, FitResult, NextTests, next_tests
from leachkin.kinetics.next_tests_layout import knot_of, new_knot_name
from leachkin.problems import Problem, argument_error, unknown_name
from leachkin.result_table import ResultTable

#: What may be asked for, and the quantities that it means.
AIMS: Mapping[str, tuple[str, ...]] = {
    "heap": (),
    "tank": (),
    "activation-energy": ("activation energy",),
    "ultimate": ("ultimate",),
    "times": ("times",),
    "order": ("order",),
    "stirring": ("stirring",),
    "constants": ("activation energy", "times", "ultimate"),
    "mechanism": (),
}
#: Activation energy at which a first test at a second temperature is judged where none is assumed
#: [kJ/mol]: between diffusion and a chemical step [common practice].
ENERGY_TO_JUDGE_AT = 40.0
DEFAULT_COUNT = 3
MOST_TESTS = 20
#: Sentences on the first page of the report.
ON_THE_FIRST_PAGE = 3
#: Candidates whose intervals are shown to people; JSON holds all.
INTERVALS_SHOWN = 3


@dataclass(frozen=True)
class CampaignNextTests:
    """What further tests would tell in a campaign.

    Attributes
    ----------
    aim : str
        One of :data:`AIMS`.
    key : str
        "domain/metal".
    found : NextTests or None
        None where there is nothing to judge: a mechanism that is settled.
    advice : tuple of str
        What to do, in sentences; the first one is the answer.
    notes : tuple of str
        What was assumed on the way.
    tables : tuple of ResultTable
    """

    aim: str
    key: str
    found: NextTests | None
    advice: tuple[str, ...]
    notes: tuple[str, ...]
    tables: tuple[ResultTable, ...]

    def to_dict(self) -> dict[str, Any]:
        """Return the result as plain types."""
        return {
            "aim": self.aim,
            "key": self.key,
            "law": None if self.found is None else self.found.law,
            "level": None if self.found is None else self.found.level,
            "advice": list(self.advice),
            "notes": list(self.notes),
            **{table.name: table.to_records() for table in self.tables},
            **self._every_interval(),
        }

    def _every_interval(self) -> dict[str, Any]:
        if self.found is None or not self.found.present:
            return {}
        table = self.found.interval_table()
        return {table.name: table.to_records()}


def campaign_next_tests(
    campaign: Campaign,
    result: CampaignResult,
    aim: str | None = None,
    *,
    count: int = DEFAULT_COUNT,
    seed: int = 1,
) -> CampaignNextTests:
    """Return what further tests would tell in a campaign, best first.

    Parameters
    ----------
    campaign : Campaign
    result : CampaignResult
        Of a run of it, up to the plant where that is the aim.
    aim : str, optional
        One of :data:`AIMS`; the plant where left out, else the mechanism where it is not settled,
        else all constants.
    count : int
        Size of the set that is chosen, one test after the other.
    seed : int
        Of the draws behind the separation of laws.

    Returns
    -------
    CampaignNextTests

    Raises
    ------
    InputProblems
        For an unknown aim, no fit, no such plant, or candidates without meaning.
    """
    if aim is not None and aim not in AIMS:
        raise InputProblems([unknown_name("aim", aim, AIMS, column="for")])
    if isinstance(count, bool) or not 0 <= count <= MOST_TESTS:
        raise argument_error("count", f"{count}", f"0 to {MOST_TESTS}")
    plant = aim if aim in PLANTS else "" if aim else plant_of(campaign, result)
    if aim in PLANTS and getattr(result, aim) is None:
        raise _no_plant(campaign, result, aim)
    stage, fit = _fit_of(result, plant)
    asked = _Asked(campaign, result, stage, fit, plant, aim or _aim(stage, plant), count, seed)
    return asked.answer()


def _aim(stage: KineticsStage, plant: str) -> str:
    if plant:
        return plant
    named = stage.ranking.mechanisms if stage.ranking is not None else ()
    return "mechanism" if len(named) > 1 else "constants"


def _no_plant(campaign: Campaign, result: CampaignResult, plant: str) -> InputProblems:
    asked = [p for p in result.problems if p.found.startswith(f"{plant} not done")]
    there = campaign.settings.has(plant)
    found = f"the {plant} could not be worked out" if there else f"there is no table [{plant}]"
    why = Problem(
        campaign.file,
        None,
        plant,
        "stop",
        found,
        f"[{plant}] with its keys",
        f"leachkin {plant} says why" if there else f"--for {', '.join(AIMS)}",
    )
    return InputProblems([*asked, why])


def _fit_of(result: CampaignResult, plant: str) -> tuple[KineticsStage, FitResult]:
    """Return the fit that is asked about: that of the plant, else the first one."""
    stages = list(result.kinetics.values())
    at = getattr(result, plant) if plant else None
    if at is not None:
        stages = [result.kinetics[at.key]]
    for stage in stages:
        if stage.fit is not None and stage.fit.converged:
            return stage, stage.fit
    asked = [p for p in result.problems if isinstance(p, Problem) and p.level == "ask"]
    nothing = Problem(
        "",
        None,
        "fit",
        "stop",
        "no fit of tests: a further test is judged beside the present ones",
        "tests that a law was fitted to",
        "leachkin fit says why",
    )
    raise InputProblems([*asked, nothing])


def _check_stirring(campaign: Campaign, stage: KineticsStage) -> None:
    if any(one.stirring_rpm for one in stage.observed):
        return
    raise InputProblems(
        [
            Problem(
                campaign.file,
                None,
                "stirring",
                "stop",
                "no stirring speed is written for any test",
                "a column stirring (rpm) in the tests sheet",
                "write the speed of each test; another speed then has something to stand beside",
            )
        ]
    )


@dataclass(frozen=True)
class _Asked:
    """What is asked of one campaign."""

    campaign: Campaign
    result: CampaignResult
    stage: KineticsStage
    fit: FitResult
    plant: str
    aim: str
    count: int
    seed: int

    def answer(self) -> CampaignNextTests:
        if self.aim == "stirring":
            _check_stirring(self.campaign, self.stage)
        candidates, notes = self._candidates()
        rivals = self._rivals()
        if self.aim == "mechanism" and not rivals:
            settled = tuple(no_law_advice(self.stage))
            return CampaignNextTests(self.aim, self.stage.key, None, settled, (), ())
        if self.aim in PLANTS:
            return self._for_plant(candidates, rivals, notes)
        found = self._next_tests(
            candidates, rivals if self.aim == "mechanism" else (), self._assumed_of_fit()
        )
        said = [*longer_advice(self.fit, found), *quantity_advice(found)]
        if self.aim == "mechanism":
            said = [*law_advice(found), *stirring_advice(self.stage)]
        remarks = [r for r in found.remarks if sentence(r) not in said]
        return CampaignNextTests(
            self.aim,
            self.stage.key,
            found,
            tuple(said),
            (*notes, *remarks),
            _shown_tables(found),
        )

    def _candidates(self) -> tuple[tuple[Candidate, ...], list[str]]:
        patterns = patterns_of(self.stage, self.campaign.tests)
        given = given_candidates(self.campaign.settings, self.campaign.file, patterns)
        if given:
            return given, []
        strength = any(one.reagent_g_per_L for one in self.stage.observed)
        size = any(one.sizes is not None for one in self.stage.observed)
        at = conditions_of(self.campaign.settings, self.plant or plant_of_settings(self.campaign))
        made = default_candidates(patterns, at, with_strength=strength, with_size=size)
        return made, [in_words(made)]

    def _rivals(self) -> tuple[FitResult, ...]:
        """Return the fits of the other mechanisms that may be named."""
        ranking = self.stage.ranking
        if ranking is None or len(ranking.mechanisms) < 2:
            return ()
        fits = [ranking.fit_of(law) for law in ranking.mechanisms if law != self.fit.law_name]
        return tuple(fit for fit in fits if fit is not None and fit.converged)

    def _next_tests(
        self,
        candidates: Sequence[Candidate],
        rivals: Sequence[FitResult],
        assumed: Mapping[str, tuple[float, float | None]],
        **more: Any,
    ) -> NextTests:
        words = AIMS[self.aim]
        return next_tests(
            self.stage.observed,
            self.fit,
            candidates,
            of=words or None,
            rivals=rivals,
            assumed=assumed,
            ultimate="one" if self.campaign.settings.get("fit.ultimate") == "one" else "by size",
            count=self.count,
            level=self.result.level,
            seed=self.seed,
            **more,
        )

    def _assumed_of_fit(self) -> dict[str, tuple[float, float | None]]:
        """Return what is assumed of quantities that the fit holds: stated ranges, or a value."""
        stated = assumed_deviations(self.campaign.settings)
        found: dict[str, tuple[float, float | None]] = {}
        tested = {one.temperature_K for one in self.stage.observed}
        asked_order = self.aim in ("order", *PLANTS)
        one_temperature = is_one_of(min(tested), [max(tested)])
        for quantity in self.fit.layout.quantities:
            if quantity.free or quantity.which in self.fit.not_needed:
                continue
            if quantity.role == "activation_energy" and one_temperature:
                held = quantity.start or ENERGY_TO_JUDGE_AT
                found[quantity.name] = stated.get(quantity.name, (held, None))
            elif quantity.role == "order" and asked_order and quantity.name in stated:
                found[quantity.name] = stated[quantity.name]
        return found

    def _new_ultimates(self, candidates: Sequence[Candidate]) -> dict[str, tuple[float, float]]:
        """Return what is thought of the ultimates at conditions that only candidates have."""
        layout = self.fit.layout
        free = any(q.role == "ultimate" and q.free for q in layout.quantities)
        one = self.campaign.settings.get("fit.ultimate") == "one"
        if not free or one:
            return {}
        if layout.knot_temperature_K is not None:
            known = [*layout.knot_temperature_K.tolist()]
        else:
            known = [*layout.knot_size_mm.tolist()]
            known += [o.sizes.mass_mean_mm for o in self.stage.observed if o.sizes is not None]
        asked = [knot_of(layout, candidate) for candidate in candidates]
        new = {new_knot_name(layout, at): at for at in asked if not is_one_of(at, known)}
        return assumed_ultimates(self.fit, new)

    def _for_plant(
        self, candidates: Sequence[Candidate], rivals: Sequence[FitResult], notes: Sequence[str]
    ) -> CampaignNextTests:
        prediction = prediction_of(self.campaign, self.result, self.plant)
        own = self._assumed_of_fit()
        untested = self._new_ultimates(candidates)
        named = {"prediction": prediction, "prediction_names": [FIGURE[self.plant]]}
        named["prediction_unit"] = UNIT
        found = self._next_tests(candidates, rivals, {**own, **untested}, **named)
        multiplier = normal_multiplier(self.result.level)
        fit_sd = self._fit_sd(candidates, own, untested, found, named, multiplier)
        band = plant_band(self.campaign, self.result, self.plant, fit_sd, self.fit.law.box)
        laws = law_advice(found, stage_of(self.result, self.plant))
        matters = any("it matters" in said for said in laws)
        figure = plant_advice(found, band, multiplier)
        advice = [
            *longer_advice(self.fit, found),
            *([*laws, *figure] if matters else [*figure, *laws]),
            *untested_advice(self.plant, untested),
            *self._left_out_advice(found, candidates, own),
        ]
        remarks = (r for r in found.remarks if "no test tells it" not in r)
        said = [*notes, *(r for r in remarks if sentence(r) not in advice)]
        if not band.drawn:
            said.append("no draws: the whole band is that of the fit alone")
        table = plant_table(found, band, multiplier)
        rest = [t for t in found.tables() if t.name not in ("next_tests", "next_test_intervals")]
        return CampaignNextTests(
            self.aim, self.stage.key, found, tuple(advice), tuple(said), (table, *rest)
        )

    def _left_out_advice(
        self,
        found: NextTests,
        candidates: Sequence[Candidate],
        own: Mapping[str, tuple[float, float | None]],
    ) -> list[str]:
        """Name the test that tells what is assumed and in no band, as the order in the reagent."""
        if not found.left_out:
            return []
        held = {name: own[name] for name in found.left_out}
        told = next_tests(
            self.stage.observed, self.fit, candidates, of=found.left_out, assumed=held
        )
        return left_out_advice(self.plant, told)

    def _fit_sd(
        self,
        candidates: Sequence[Candidate],
        own: Mapping[str, tuple[float, float | None]],
        untested: Mapping[str, object],
        found: NextTests,
        named: Mapping[str, Any],
        multiplier: float,
    ) -> float:
        """Return the standard deviation of the figure by what the draws of the plant hold."""
        half = found.present[0].half_width
        if untested or "reagent_order" in own:
            again = [replace(candidates[0], bottle=self._tested_bottle(candidates[0]))]
            held = {name: value for name, value in own.items() if name != "reagent_order"}
            half = self._next_tests(again, (), held, **named).present[0].half_width
        return 0.0 if half is None else half / multiplier

    def _tested_bottle(self, candidate: Candidate) -> Any:
        """Return a bottle that was run: it sets nothing free."""
        pattern = patterns_of(self.stage, self.campaign.tests)[0]
        return replace(pattern.bottle, name=candidate.name)


def stage_behind(campaign: Campaign, aim: str | None) -> str:
    """Return the stage up to which a campaign is run before its next tests are judged."""
    if aim in PLANTS:
        return str(aim)
    return (plant_of_settings(campaign) or "fit") if aim is None else "fit"


def plant_of_settings(campaign: Campaign) -> str:
    """Return the plant that a campaign asks for, "" for none."""
    return next((plant for plant in PLANTS if campaign.settings.has(plant)), "")


def _shown_tables(found: NextTests) -> tuple[ResultTable, ...]:
    """Return the tables that people read: intervals of the best few only."""
    return tuple(
        found.interval_table(INTERVALS_SHOWN) if t.name == "next_test_intervals" else t
        for t in found.tables()
    )


def next_test_lines(campaign: Campaign, result: CampaignResult) -> tuple[str, ...]:
    """Return the sentences of the first page on the next test, none where nothing can be said."""
    if not any(stage.fit is not None for stage in result.kinetics.values()):
        return ()
    try:
        return campaign_next_tests(campaign, result, count=0).advice[:ON_THE_FIRST_PAGE]
    except LeachkinError:
        return ()
