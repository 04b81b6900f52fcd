"""Cementation in a campaign: rate tests, vessel, mixed potential, site, zinc, bad input."""

import json
import runpy
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.campaign import read_campaign, read_leniently, run_campaign
from leachkin.cementation import NO_BUDGET
from leachkin.errors import InputProblems
from leachkin.report import write_report

EXAMPLE = Path(__file__).parents[2] / "example_runs" / "copper_cementation"
HEAD = """
format = 1
[campaign]
title = "cementation"
metals = ["Cu"]
reagent = "H2SO4"
"""
COPPER = (
    HEAD
    + """
[cementation]
precipitant = "scrap iron"
flow = "100 m3/h"
ferric = "1 g/L"
free_acid = "3 g/L"
acid_taken = "0.5 g/L"
dissolved_oxygen = "6 mg/L"
purity = "96 %"
{more}
[cementation.metals]
Cu = "2 g/L"
{tables}
"""
)
GOLD = """
format = 1
[campaign]
title = "gold"
metals = ["Au"]
reagent = "NaCN"
[cementation]
precipitant = "zinc dust"
flow = "120 m3/h"
recovery = "99 %"
dissolved_oxygen = "0.4 mg/L"
free_cyanide = "0.25 g/L"
pH = 10.5
purity = "97 %"
lead_nitrate = "10 g/m3"
altitude = "3500 m"
[cementation.metals]
Au = "0.71 mg/L"
Ag = "16.2 mg/L"
[cementation.mixed_potential]
transfer = "2e-5 m/s"
[cementation.vessel]
kind = "dust and filter"
grain_size = "7 um"
pipe_contact = "20 s"
voids = "50 %"
filter_area = "60 m2"
excess = "6 g/m3"
"""


def run(tmp_path, text, sheet=None, **options):
    (tmp_path / "campaign.toml").write_text(text)
    if sheet is not None:
        (tmp_path / "cementation_tests.csv").write_text(sheet)
    campaign = read_campaign(tmp_path / "campaign.toml")
    return run_campaign(campaign, seed=1, draws=0, **options)


def copper(tmp_path, more="", tables="", **rest):
    return run(tmp_path, COPPER.format(more=more, tables=tables), **rest)


@pytest.fixture(scope="module")
def example():
    return run_campaign(read_campaign(EXAMPLE / "campaign.toml"), seed=1, draws=50)


def test_the_example_finds_the_constants_behind_its_tests(example):
    fit = example.cementation_more.rankings["Cu"].best
    truth = {"activation_energy": 15.05, "stirring_power": 0.6}
    for name, value in truth.items():
        found = fit.parameter(name)
        assert abs(found.value - value) < 3.5 * found.standard_error, name
    k = fit.law.rate_per_h(298.15, 300.0, 1.0) / 3600
    assert abs(k - 1.2e-5) < 4 * fit.parameter("k").standard_error
    assert fit.law_name == "first_order"
    assert "as transport through liquid has it" in " ".join(example.notes)


def test_the_example_figures_have_not_moved(example):
    """Own output: it proves only that nothing moved."""
    expected = json.loads((EXAMPLE / "expected.json").read_text())
    result = example.to_dict()
    for dotted, value in expected.items():
        found = result
        for key in dotted.split(":"):
            found = found[int(key)] if isinstance(found, list) else found[key]
        assert_allclose(found, value, rtol=1e-4, err_msg=dotted)


def test_the_example_sheet_is_what_its_script_makes(tmp_path):
    runpy.run_path(str(EXAMPLE / "make_tests.py"))["main"](tmp_path)
    made = (tmp_path / "cementation_tests.csv").read_text()
    assert made == (EXAMPLE / "cementation_tests.csv").read_text()


def test_the_launder_is_as_long_as_its_law_says(example):
    more, stage = example.cementation_more, example.cementation
    law = more.rankings["Cu"].best.law
    per_h = law.rate_per_h(295.15, None, 60.0 / 0.9)
    assert_allclose(more.vessel.contact_h, np.log(20.0) / per_h, rtol=1e-9)
    assert_allclose(more.vessel.length_m, 800.0 * more.vessel.contact_h / 0.9 / 2.0, rtol=1e-9)
    assert_allclose(stage.demand.barren_g_per_L["Cu"], 0.1, rtol=1e-12)
    assert stage.recovery == pytest.approx(0.95)
    assert not any(row.key == "cementation.recovery" for row in example.assumed)


def test_site_line_and_arsine_stand_on_the_first_page(example):
    text = " ".join(example.headline())
    assert "of the plant's 1.9 kg/kg is not explained" in text
    assert "arsine (present, 0.4 mg/L)" in text
    assert "Sinks by the mixed potential: Cu" in text


def test_the_report_shows_it(example, tmp_path):
    write_report(example, tmp_path / "out")
    page = (tmp_path / "out" / "report.html").read_text()
    for words in ("How fast Cu goes down", "Sinks along the vessel", "Cementation order",
                  "Fitted to a barren of this site"):  # fmt: skip
        assert words in page
    assert (tmp_path / "out" / "tables" / "cementation_vessel.csv").is_file()
    assert (tmp_path / "out" / "figures" / "cementation_rate_Cu.svg").is_file()


def test_demand_stays_on_measured_sinks_whatever_the_mixed_potential_says(tmp_path):
    plain = copper(tmp_path)
    mixed = copper(tmp_path, tables="[cementation.mixed_potential]")
    assert plain.cementation.net_kg_per_m3 == mixed.cementation.net_kg_per_m3
    assert not mixed.cementation_more.course.fitted
    assert NO_BUDGET in mixed.notes
    assert any(NO_BUDGET in line for line in mixed.headline())
    assert plain.cementation_more.course is None


SITE = """[cementation.mixed_potential]
[cementation.site]
barren = "0.1 g/L"
iron_gain = "2.3 g/L"
acid_taken = "0.4 g/L"
"""


def test_a_fitted_site_may_carry_the_demand(tmp_path):
    found = copper(tmp_path, more='demand = "mixed potential"', tables=SITE)
    course = found.cementation_more.course
    assert course.fitted
    assert_allclose(found.cementation.net_kg_per_m3.value, course.net_kg_per_m3, rtol=2e-3)


def test_an_unfitted_one_may_not(tmp_path):
    found = copper(
        tmp_path, more='demand = "mixed potential"', tables="[cementation.mixed_potential]"
    )
    assert found.cementation is None
    assert any("it is not fitted" in p.found for p in found.problems)
    only_metal = '[cementation.mixed_potential]\n[cementation.site]\nbarren = "0.1 g/L"\n'
    found = copper(tmp_path, more='demand = "mixed potential"', tables=only_metal)
    assert found.cementation is None


def test_rate_tests_alone_are_a_campaign(tmp_path):
    text = HEAD + '[tables]\ncementation_tests = "cementation_tests.csv"\n'
    found = run(tmp_path, text, (EXAMPLE / "cementation_tests.csv").read_text(), upto="cementation")
    assert found.cementation is None
    assert found.cementation_more.rankings["Cu"].best.converged
    assert [t.name for t in found.cementation_more.tables()] == [
        "cementation_rate_Cu", "cementation_rate_ranking_Cu", "residuals_cementation_Cu"
    ]  # fmt: skip
    assert not any(row.key == "precision.tail" for row in found.assumed)
    assert any(row.key == "precision.solution" for row in found.assumed)


def test_zinc_practice_of_a_gold_liquor(tmp_path):
    """8.26 mg/L of oxygen take 33.8 g/m3 of zinc at sea level; at 3,500 m two thirds of it."""
    found = run(tmp_path, GOLD).cementation_more
    rows = found.deaeration.to_records()
    saturated = next(row for row in rows if row["note"] == "saturated with air")
    assert_allclose(saturated["to_oxygen"], 33.8 * 0.649, rtol=2e-3)
    assert found.window.low_g_per_L < 0.25
    assert found.vessel.kind == "dust and filter"
    assert any("lead nitrate 10 g/m3" in note for note in found.notes)
    assert found.barren.pH_out > 10.5


def test_gold_scenario_demand_to_a_tenth_of_a_percent(tmp_path):
    """Zinc by molar masses: 65.38/(2 M) for gold and silver, 4.0865 for oxygen; g/m3."""
    text = GOLD.replace("99 %", "100 %").split("[cementation.mixed_potential]")[0]
    stage = run(tmp_path, text).cementation
    metals = 0.71 * 65.38 / (2 * 196.96657) + 16.2 * 65.38 / (2 * 107.8682)
    oxygen = 0.4 * 2 * 65.38 / 31.998
    assert_allclose(1e3 * stage.demand.net_kg_per_m3, metals + oxygen, rtol=1e-3)
    assert_allclose(1e3 * stage.demand.net_high_kg_per_m3, 2 * metals + oxygen, rtol=1e-3)


VESSELS = [
    ('kind = "packed bed"\npiece_size = "20 mm"\ncross_section = "10 m2"\nvoids = "50 %"',
     "packed bed"),
    ('kind = "moving bed"\npiece_size = "20 mm"\ncross_section = "10 m2"\nvoids = "50 %"\n'
     "turning_factor = 2.0", "moving bed"),
    ('kind = "stirred tanks"\ntanks = 3\ntransfer = "2e-5 m/s"\narea = "60 m2/m3"',
     "stirred tanks"),
    ('kind = "launder"\ntransfer = "2e-5 m/s"\narea = "60 m2/m3"\nwidth = "2 m"\ndepth = "1 m"\n'
     'voids = "90 %"', "launder"),
]  # fmt: skip


@pytest.mark.parametrize(("keys", "kind"), VESSELS)
def test_every_vessel_from_its_keys(tmp_path, keys, kind):
    found = copper(tmp_path, tables=f"[cementation.vessel]\n{keys}\n").cementation_more
    assert found.vessel.kind == kind
    assert found.vessel.vessel_m3 > 0.0


def test_tests_without_area_size_a_tank_by_the_hour(tmp_path):
    sheet = "test,time (min),Cu (g/L)\nA,0,2.0\nA,5,1.2\nA,10,0.7\nA,20,0.26\n"
    tables = '[tables]\ncementation_tests = "cementation_tests.csv"\n'
    tables += '[cementation.vessel]\nkind = "stirred tanks"\ntanks = 2\n'
    found = copper(tmp_path, tables=tables, sheet=sheet).cementation_more
    law = found.rankings["Cu"].best.law
    assert_allclose(found.vessel.rate_per_h, law.rate_per_h(298.15), rtol=1e-9)
    assert found.vessel.area_m2 is None


def test_reagents_of_the_budget_raise_their_cautions(tmp_path):
    prices = """[budget]
currency = "USD"
ore_rate = "1000 t/month"
solution = "2 m3/t"
[budget.prices."sodium chlorate"]
price = 900.0
"""
    found = copper(tmp_path, tables=prices)
    names = {caution.name: caution.state for caution in found.cautions}
    assert names["chlorine"] == "not measured"


def test_a_part_that_cannot_be_done_leaves_the_others(tmp_path):
    found = copper(tmp_path, tables='[cementation.vessel]\nkind = "launder"\nvoids = "90 %"\n')
    assert found.cementation is not None
    assert found.cementation_more.vessel is None
    assert found.cementation_more.barren is not None
    asked = [p for p in found.problems if "cementation vessel not done" in p.found]
    assert asked[0].level == "ask"
    no_table = copper(tmp_path, tables='[cementation.site]\nbarren = "0.1 g/L"\n')
    assert any("no transfer coefficient" in p.found for p in no_table.problems)


SHEET = "test,time (min),Cu (g/L)\nA,0,2.0\nA,5,1.2\nA,10,0.7\nA,20,<0.3\n"


def test_limits_and_units_of_the_sheet(tmp_path):
    text = HEAD + '[tables]\ncementation_tests = "cementation_tests.csv"\n'
    found = run(tmp_path, text, SHEET, upto="cementation").cementation_more.rankings["Cu"].best
    assert [r.bound for r in found.residuals] == [0, 0, 0, -1]
    in_mg = SHEET.replace("g/L", "mg/L").replace("2.0", "2000").replace("1.2", "1200")
    in_mg = in_mg.replace("0.7", "700").replace("<0.3", "<300")
    again = run(tmp_path, text, in_mg, upto="cementation").cementation_more.rankings["Cu"].best
    assert_allclose(again.law.k, found.law.k, rtol=1e-6)


BAD_SHEETS = [
    (SHEET.replace("time (min)", "minutes"), "no time column"),
    (SHEET.replace("Cu (g/L)", "Cu"), "no unit in the heading"),
    (SHEET.replace("Cu (g/L)", "grade"), "no column of a metal"),
    (SHEET.replace("10,0.7", "4,0.7"), "times that do not rise"),
    (SHEET.replace("1.2", "abc"), "not a number"),
    (SHEET.replace("1.2", "-1.2"), "a negative assay"),
]


@pytest.mark.parametrize(("sheet", "message"), BAD_SHEETS)
def test_bad_sheets_say_what_and_where(tmp_path, sheet, message):
    text = HEAD + '[tables]\ncementation_tests = "cementation_tests.csv"\n'
    (tmp_path / "campaign.toml").write_text(text)
    (tmp_path / "cementation_tests.csv").write_text(sheet)
    problems = read_leniently(tmp_path / "campaign.toml").problems
    found = [p for p in problems if message in str(p)]
    assert found, [str(p) for p in problems]
    assert found[0].file == "cementation_tests.csv"


@pytest.mark.parametrize(("more", "message"), [("pH = 15", "15"), ('barren = "-0.1 g/L"', "-0.1")])
def test_bad_settings_stop(tmp_path, more, message):
    with pytest.raises(InputProblems, match=message):
        copper(tmp_path, more=more)


def test_zero_flow_and_negative_grade_stop(tmp_path):
    base = COPPER.format(more="", tables="")
    with pytest.raises(InputProblems, match="flow"):
        run(tmp_path, base.replace("100 m3/h", "0 m3/h"))
    with pytest.raises(InputProblems, match="Cu"):
        run(tmp_path, base.replace('Cu = "2 g/L"', 'Cu = "-2 g/L"'))


def test_a_barren_above_the_feed_and_a_baser_metal_are_refused_with_numbers(tmp_path):
    found = copper(tmp_path, more='barren = "3 g/L"')
    assert any("3 g/L left of 2 g/L Cu" in p.found for p in found.problems)
    base = COPPER.format(more="", tables="").replace('Cu = "2 g/L"', 'Zn = "2 g/L"')
    found = run(tmp_path, base)
    assert found.cementation is None
    assert any("iron cannot put out Zn" in p.found and "V" in p.found for p in found.problems)
