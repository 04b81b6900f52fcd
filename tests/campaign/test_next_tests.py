"""Candidates of a campaign: given, made from the tests, judged for its plant and its constants."""

import json
import re
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from leachkin.campaign import (
    campaign_next_tests,
    candidate_problems,
    check_campaign,
    read_campaign,
    run_campaign,
)
from leachkin.campaign.next_tests_advice import longer_advice
from leachkin.campaign.next_tests_bench import patterns_of
from leachkin.campaign.next_tests_default import PlantConditions, default_candidates
from leachkin.campaign.plant_ore import plant_ore
from leachkin.campaign.settings import Setting
from leachkin.campaign.stage_heap import heap_end
from leachkin.campaign.stage_tank import tank_end
from leachkin.errors import InputProblems
from leachkin.kinetics import Bottle, Candidate, ParticleLaw, fit_tests, next_tests
from leachkin.testwork import SizeDistribution, observed_from_extraction

COPPER = Path(__file__).parents[2] / "example_runs" / "copper_heap" / "campaign.toml"
RANGES = """
contacted_fraction = { value = 0.85, low = 0.75, high = 0.95, source = "none", by = "tester" }
"""
ASSUMED = """
[[assumed]]
parameter = "activation_energy_ash_layer"
value = "25 kJ/mol"
low = "15 kJ/mol"
high = "45 kJ/mol"
source = "print"
by = "tester"
"""
TANK = """
[tank]
residence_times = ["6 h", "6 h"]
solids = "400 kg/m3"
temperature = "35 degC"
feed_reagent = "20 g/L"
[tank.sizes]
single = "1.416 mm"
"""


def add(folder, text):
    path = folder / "campaign.toml"
    path.write_text(path.read_text(encoding="utf-8") + text, encoding="utf-8")
    return path


def judged(path, aim=None, upto=None, **more):
    campaign = read_campaign(path)
    result = run_campaign(campaign, upto or "fit", draws=100)
    return campaign_next_tests(campaign, result, aim, **more)


@pytest.fixture
def one_temperature(folder):
    """The two bottles at 25 degC alone."""
    for name in ("tests.csv", "readings.csv", "closeout.csv"):
        lines = (folder / name).read_text(encoding="utf-8").splitlines()
        kept = [line for line in lines if not line.startswith("Q")]
        (folder / name).write_text("\n".join(kept) + "\n", encoding="utf-8")
    return folder


@pytest.fixture(scope="module")
def four(tmp_path_factory, sheet_texts):
    """The four bottles as they are, fitted."""
    place = tmp_path_factory.mktemp("four")
    for name, text in sheet_texts.items():
        (place / name).write_text(text, encoding="utf-8")
    campaign = read_campaign(place / "campaign.toml")
    return campaign, run_campaign(campaign, "fit", draws=0)


@pytest.fixture(scope="module")
def copper():
    campaign = read_campaign(COPPER)
    return campaign, run_campaign(campaign, seed=1, draws=400)


# candidates made from the tests


def test_a_set_is_made_from_the_tests(four):
    campaign, result = four
    patterns = patterns_of(result.kinetics["oxide/Cu"], campaign.tests)
    made = default_candidates(patterns)
    assert [c.name for c in made] == [
        "P1 again",
        "Q1 again",
        "5 degC, 1.42 mm",
        "65 degC, 1.42 mm",
        "25 degC, 0.708 mm",
        "25 degC, 2.83 mm",
        "Q1 earlier",
        "P1 longer",
        "P1 at 10 g/L",
        "P1 at 40 g/L",
    ]
    by_name = {c.name: c for c in made}
    assert by_name["P1 longer"].bottle.time_h[-1] == pytest.approx(120.0)
    assert by_name["Q1 earlier"].bottle.time_h[0] == pytest.approx(0.25)
    assert by_name["65 degC, 1.42 mm"].bottle.solution_mL == 1000.0
    assert by_name["65 degC, 1.42 mm"].bottle.aliquot_mL == 20.0
    plant = PlantConditions(
        "heap", 290.15, 12.0, SizeDistribution.from_classes([1.0, 6.7, 12.5], [0.5, 0.5])
    )
    more = {c.name: c.why for c in default_candidates(patterns, plant)}
    assert more["17 degC, 1.42 mm"] == "temperature of the heap"
    assert more["17 degC, 9.15 mm"] == "temperature, coarsest class of the heap"
    assert more["P1 at 12 g/L"] == "strength fed to the heap"
    assert "25 degC, 2.83 mm" not in more
    fewer = default_candidates(patterns, plant, with_strength=False, with_size=False)
    assert not [c for c in fewer if "g/L" in c.name or "9.15" in c.name or "0.708" in c.name]


def test_stirring_is_offered_where_speeds_are_written(four):
    campaign, result = four
    stage = result.kinetics["oxide/Cu"]
    stirred = replace(
        stage, observed=tuple(replace(one, stirring_rpm=200.0) for one in stage.observed)
    )
    made = {c.name: c for c in default_candidates(patterns_of(stirred, campaign.tests))}
    assert made["P1 at 400 rpm"].stirring_rpm == 400.0
    assert made["P1 again"].stirring_rpm == 200.0
    told = campaign_next_tests(
        campaign, replace(result, kinetics={"oxide/Cu": stirred}), "stirring"
    )
    assert told.found.best.name in ("P1 at 400 rpm", "P1 at 100 rpm")
    with pytest.raises(InputProblems, match="no stirring speed is written for any test"):
        campaign_next_tests(campaign, result, "stirring")


# candidates that the campaign names


def test_given_candidates_take_the_rest_from_the_nearest_test(folder):
    path = add(
        folder,
        """
[[candidates]]
name = "hot coarse"
temperature = "60 degC"
size_lower = "4.75 mm"
size_upper = "6.7 mm"
[[candidates]]
like = "P2"
repeats = 2
[[candidates]]
temperature = "10 degC"
reagent = "40 g/L"
times = ["1 h", "4 h", "1 d"]
""",
    )
    found = judged(path, "constants", count=0)
    rows = {row.name: row.candidate for row in found.found.rows}
    assert set(rows) == {"hot coarse", "P2 again", "10 degC, 40 g/L, to 24 h"}
    hot = rows["hot coarse"].bottle
    assert hot.temperature_K == pytest.approx(333.15)
    assert hot.sizes.mass_mean_mm == pytest.approx(np.sqrt(4.75 * 6.7))
    assert hot.time_h.tolist() == [1.0, 3.0, 8.0, 16.0, 30.0, 60.0]
    assert rows["hot coarse"].why == "strength, times as in Q1"
    assert rows["P2 again"].repeats == 2
    assert rows["10 degC, 40 g/L, to 24 h"].bottle.time_h.tolist() == [1.0, 4.0, 24.0]
    assert not found.notes


def test_cost_ranks_the_candidates_of_a_campaign(folder):
    text = '\n[[candidates]]\nname = "{}"\ntemperature = "{} degC"\ncost = {}\n'
    hot, cold = text.format("hot", 65, 900.0), text.format("cold", 5, 900.0)
    path = add(folder, hot + cold)
    first = judged(path, "activation-energy", count=0).found
    best, other = first.rows
    dearer = {"hot": hot, "cold": cold}[best.name]
    path.write_text(path.read_text().replace(dearer, dearer.replace("900.0", "9000.0")))
    again = judged(path, "activation-energy").found
    assert [row.name for row in again.rows] == [other.name, best.name]
    assert again.steps[0].name == other.name
    spent = sum(again.row(step.name).candidate.cost for step in again.steps)
    assert again.steps[-1].cost == pytest.approx(spent)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ('temprature = "40 degC"', r"row {n}.*unknown key 'temprature'.*did you mean temperature"),
        ("temperature = 40", r"row {n}.*has no unit"),
        ('temperature = "400 degC"', r"row {n}.*673.15 K"),
        ('like = "P3"', r"row {n}.*unknown test 'P3'.*P1, P2, Q1, Q2.*did you mean P"),
        ('size = "2 mm"\nsize_lower = "1 mm"', r"row {n}.*size and size_lower"),
        ('size_lower = "1 mm"', r"row {n}.*no size_upper.*both ends"),
        ('size_lower = "2 mm"\nsize_upper = "1 mm"', r"row {n}.*2 mm is not below size_upper 1 mm"),
        ('times = ["2 h", "1 h"]', r"row {n}.*times 2, 1 h.*rising"),
        ('times = "2 h"', r"row {n}.*a list with at least one entry"),
        ('like = "P1"\nrepeats = 0', r"0. Allowed: 1 or more"),
        ('like = "P1"\ncost = 0', r"above 0"),
        ("cost = 5.0", r"row {n}.*a candidate without conditions"),
        ('like = "P1"\n[[candidates]]\nlike = "P1"', r"row \d+.*two named P1 again"),
    ],
)
def test_a_candidate_without_meaning_stops_with_its_line(folder, four, text, message):
    row = len((folder / "campaign.toml").read_text().splitlines()) + 2
    path = add(folder, f"[[candidates]]\n{text}\n")
    with pytest.raises(InputProblems) as stopped:
        campaign_next_tests(read_campaign(path), four[1], "constants")
    assert re.search(message.format(n=row), str(stopped.value)), str(stopped.value)


def test_check_lists_wrong_candidates_before_anything_is_run(folder):
    path = add(folder, '[[candidates]]\nlike = "P3"\n[[candidates]]\ntimes = ["2 h", "1 h"]\n')
    outcome = check_campaign(path)
    assert outcome.stops == 2
    assert len(candidate_problems(read_campaign(path))) == 2
    assert any("did you mean" in line for line in outcome.paste)


# quantities


def test_one_temperature_gets_its_first_energy(one_temperature):
    found = judged(one_temperature / "campaign.toml", "activation-energy")
    assert "gives activation_energy_ash_layer a first interval" in found.advice[0]
    assert any("judged at 40 kJ/mol" in note for note in found.notes)
    opened = {r.name for r in found.found.rows if r.outlooks[0].opened}
    assert opened == {"10 degC, 1.42 mm", "40 degC, 1.42 mm"}


def test_an_assumed_energy_is_the_present_interval(one_temperature):
    """A triangle from 15 to 45 with its peak at 25: standard deviation by its closed form."""
    found = judged(add(one_temperature, ASSUMED), "activation-energy").found
    now = found.now("activation_energy_ash_layer")
    variance = (15**2 + 25**2 + 45**2 - 15 * 25 - 15 * 45 - 25 * 45) / 18
    assert now.value == pytest.approx(25.0)
    assert now.half_width == pytest.approx(1.95996 * variance**0.5, rel=1e-4)


def test_without_an_aim_the_constants_are_judged(four):
    found = campaign_next_tests(*four)
    assert found.aim == "constants"
    assert "tells most" in found.advice[0]
    assert "A set of 3" in found.advice[1]
    assert [t.name for t in found.tables] == ["next_tests", "next_test_intervals", "next_test_set"]
    shown = next(t for t in found.tables if t.name == "next_test_intervals")
    data = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert len(data["next_test_intervals"]) > len(shown.rows)
    assert data["key"] == "oxide/Cu"


def test_a_settled_mechanism_needs_no_test(four):
    found = campaign_next_tests(*four, "mechanism")
    assert found.found is None
    assert found.advice[0].startswith("The ranking is settled")
    assert "No stirring speed is written" in found.advice[1]


def test_laws_that_are_left_get_a_chance_to_be_told_apart(four):
    campaign, result = four
    stage = result.kinetics["oxide/Cu"]
    left = replace(stage, ranking=replace(stage.ranking, mechanisms=("ash_layer", "chemical")))
    found = campaign_next_tests(campaign, replace(result, kinetics={"oxide/Cu": left}))
    assert found.aim == "mechanism"
    assert found.found.laws == ("ash_layer", "chemical")
    assert "would tell ash_layer and chemical apart" in found.advice[0]
    assert [t.name for t in found.tables] == ["next_test_separation"]


def test_extraction_alone_is_judged_too(tmp_path):
    path = tmp_path / "rolls.csv"
    rows = "".join(
        f"B{kelvin},{kelvin},{t},{100 * (1 - (1 - min(t / tau, 1)) ** 3) + 0.3 * (-1) ** i:.2f}\n"
        for kelvin, tau in ((25, 40.0), (45, 20.0))
        for i, t in enumerate((2, 4, 8, 12, 16, 30))
    )
    path.write_text("test,temperature (degC),time (h),extraction (%)\n" + rows)
    found = judged(path, "activation-energy")
    assert found.found.best.shrink > 0.05
    names = {row.name for row in found.found.rows}
    assert names == {
        "B25 again",
        "B45 again",
        "5 degC",
        "65 degC",
        "B45 earlier",
        "B25 longer",
    }


# the plant


def test_plant_figures_are_functions_of_the_law(folder, heap_text):
    campaign = read_campaign(add(folder, heap_text + TANK))
    result = run_campaign(campaign, "heap", draws=0)
    for plant, end, value in (
        ("heap", heap_end, result.heap.extracted.value[-1]),
        ("tank", tank_end, result.tank.extraction.value[-1]),
    ):
        ore = plant_ore(campaign, result.kinetics, plant, 0, 0)
        of_law = end(campaign, ore, result.gangue)
        assert float(of_law(ore.law)) == pytest.approx(float(value), rel=1e-9)
        drawn = result.kinetics["oxide/Cu"].fit.draw(3, 1)
        assert of_law(drawn).shape == (3,)


def test_the_fits_part_is_the_spread_of_its_draws(copper):
    """The derivatives against 400 laws drawn from the fit and sent through the heap."""
    campaign, result = copper
    fit = result.kinetics["oxide/Cu"].fit
    ore = plant_ore(campaign, result.kinetics, "heap", 0, 0)
    drawn = 100 * heap_end(campaign, ore, result.gangue)(fit.draw(400, 5))
    like = {"like": Setting("candidates.0.like", "A25")}
    repeated = {**campaign.settings.repeated, "candidates": (like,)}
    given = replace(campaign, settings=replace(campaign.settings, repeated=repeated))
    found = campaign_next_tests(given, result, "heap", count=0)
    assert [row.name for row in found.found.rows] == ["A25 again"]
    half = found.found.present[0].half_width
    assert half == pytest.approx(1.96 * np.std(drawn), rel=0.12)


def test_a_heap_of_bottles_asks_for_a_column(copper):
    campaign, result = copper
    found = campaign_next_tests(campaign, result)
    assert found.aim == "heap"
    assert re.match(
        r"No further bottle narrows the heap's band by more than 1\.\d %", found.advice[0]
    )
    assert "not another bottle: most of the band comes from" in found.advice[1]
    assert "contacted_fraction and delivery_factor" in found.advice[1]
    assert "17 degC (tests 25 to 55) and 15.4 mm (tests to 10.9)" in found.advice[2]
    assert "check the law there by 17 degC, 15.4 mm" in found.advice[2]
    assert any("reagent_order is assumed and in no band" in said for said in found.advice)
    table = found.tables[0].to_records()
    band = 50 * (result.heap.extracted.high[-1] - result.heap.extracted.low[-1])
    assert table[0]["whole_half"] == pytest.approx(band, rel=0.12)
    halves = [row["fit_half"] for row in table[1:]]
    assert halves == sorted(halves)
    assert max(halves) <= table[0]["fit_half"] * (1 + 1e-9)
    assert found.found.best.name == "40 degC, 15.4 mm"
    assert table[1]["shrink"] < table[1]["shrink_4"]


def test_the_first_page_has_the_computed_answer(copper, four):
    from leachkin.report.first_page import first_page

    campaign, result = copper
    assert result.next_test == campaign_next_tests(campaign, result, count=0).advice[:3]
    assert first_page(result).next_test == result.next_test
    assert four[1].next_test == ()


def test_a_heap_without_ranges_says_so(folder, heap_text):
    found = judged(add(folder, heap_text), upto="heap")
    assert found.aim == "heap"
    assert any("No range of the scale-up is stated" in said for said in found.advice)


def test_a_range_of_the_scale_up_rules_the_band(folder, heap_text):
    path = add(folder, heap_text.replace("[heap.sizes]", f"{RANGES}[heap.sizes]"))
    found = judged(path, upto="heap")
    table = found.tables[0].to_records()
    assert table[0]["whole_half"] > table[0]["fit_half"]
    assert not any("No range of the scale-up" in said for said in found.advice)


def test_a_heap_at_an_untested_temperature_rests_on_the_energy(one_temperature, heap_text):
    found = judged(add(one_temperature, heap_text), upto="heap")
    assert "The heap rests on activation_energy_ash_layer, which no test tells" in found.advice[0]
    assert found.found.best.outlooks[0].opened
    known = judged(add(one_temperature, ASSUMED), upto="heap")
    assert known.found.present[0].half_width is not None


def test_a_narrow_band_needs_no_bottle(folder):
    found = judged(add(folder, TANK), upto="tank")
    assert "already within" in found.advice[0]
    assert "no further bottle is needed" in found.advice[0]


# messages


@pytest.mark.parametrize(
    ("aim", "message"),
    [
        ("haep", "unknown aim 'haep'.*did you mean heap"),
        ("tank", r"there is no table \[tank\]"),
    ],
)
def test_an_aim_without_meaning_stops(four, aim, message):
    with pytest.raises(InputProblems, match=message):
        campaign_next_tests(*four, aim)


def test_a_count_without_meaning_stops(four):
    with pytest.raises(InputProblems, match="0 to 20"):
        campaign_next_tests(*four, count=21)


def test_a_law_from_print_has_no_tests_to_stand_beside(tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(
        """format = 1
[campaign]
metals = ["Zn"]
[rate_law]
law = "chemical"
domain = "calcine"
metal = "Zn"
head = "58 %"
tau_chemical = "13 min"
reference_temperature = "50 degC"
reference_reagent = "55 g/L"
reference_size = "0.0892 mm"
ultimate = 0.8938
source = "stated"
"""
    )
    with pytest.raises(InputProblems, match="no fit of tests"):
        judged(path)


def test_curves_that_do_not_bend_ask_for_a_longer_test():
    """Readings up to a tenth of the whole time: any ultimate extraction fits."""
    time_h = np.array([0.5, 1.0, 1.5, 2.0])
    E = 0.9 * ParticleLaw(chemical=20.0).conversion(time_h)
    size = SizeDistribution.single(1.0)
    tests = [observed_from_extraction(time_h, E, 0.02, test="A", sizes=size)]
    fit = fit_tests(tests, "chemical")
    bottles = [Bottle(n, size, 298.15, k * time_h, 1.0) for n, k in (("again", 1), ("longer", 10))]
    found = next_tests(tests, fit, [Candidate(b) for b in bottles])
    said = longer_advice(fit, found)
    assert "do not exclude an ultimate extraction of 1: a longer one (longer)" in said[0]
    late = np.array([1.0, 5.0, 10.0, 15.0, 20.0, 30.0, 40.0])
    whole = 0.9 * ParticleLaw(chemical=20.0).conversion(late)
    bent = [observed_from_extraction(late, whole, 0.01, test="A", sizes=size)]
    settled = fit_tests(bent, "chemical")
    assert not longer_advice(settled, next_tests(bent, settled, [Candidate(b) for b in bottles]))


def test_a_choice_of_law_that_moves_the_figure_comes_first(folder, heap_text):
    """Two laws with even weights, 10 % apart: their variance is that of two points."""
    from leachkin.campaign.next_tests_plant import plant_band

    campaign = read_campaign(add(folder, heap_text))
    result = run_campaign(campaign, "heap", draws=100)
    here = float(result.heap.extracted.value[-1])
    other = SimpleNamespace(
        law="chemical", extraction=here - 0.1, changes_the_figure=True, weight=0.5
    )
    spread = result.heap.draws.extracted + 0.1 * (np.arange(100) % 2 - 0.5)[:, None]
    heap = replace(
        result.heap,
        other_laws=(other,),
        draws=replace(result.heap.draws, extracted=spread),
    )
    stage = result.kinetics["oxide/Cu"]
    left = replace(stage, ranking=replace(stage.ranking, mechanisms=("ash_layer", "chemical")))
    moved = replace(result, heap=heap, kinetics={"oxide/Cu": left})
    band = plant_band(campaign, moved, "heap", 0.0, None)
    assert band.law_variance == pytest.approx(25.0, rel=1e-9)
    found = campaign_next_tests(campaign, moved)
    assert "would tell ash_layer and chemical apart" in found.advice[0]
    assert "chemical, not rejected, would give" in found.advice[1]
    assert "The choice of law makes" in found.advice[2]
