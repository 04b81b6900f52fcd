"""Where a plant leaves its tests: said beside every figure that rests on it."""

from __future__ import annotations

import pytest

from leachkin.campaign import outside_words, read_campaign, run_campaign
from leachkin.campaign.plant_words import outside_the_data
from leachkin.kinetics import DataBox, RateLaw, Reference, Resistance
from leachkin.testwork import SizeDistribution

BOX = DataBox((298.15, 298.15), (1.0, 4.0), (1.0, 48.0), (10.0, 10.0))
LAW = RateLaw(
    "chemical", (Resistance("chemical", 3.0, 45.0),), Reference(298.15, 10.0, 2.0), [2.0], [0.9]
)
TANKS = """format = 1
[campaign]
title = "Tanks"
metals = ["Zn"]
reagent = "H2SO4"
[rate_law]
law = "chemical"
domain = "calcine"
head = "58 %"
tau_chemical = "13 min"
activation_energy_chemical = "28 kJ/mol"
reagent_order = 1
reference_temperature = "50 degC"
reference_reagent = "55 g/L"
reference_size = "0.09 mm"
ultimate = 0.9
temperature_range = ["40 degC", "60 degC"]
size_range = ["0.05 mm", "0.1 mm"]
time_range = ["1 min", "120 min"]
[tank]
residence_times = ["15 min", "15 min"]
solids = "60 kg/m3"
temperature = "70 degC"
feed_reagent = "55 g/L"
demand = "0.5 kg/kg"
ore_rate = "1000 t/month"
[gangue]
fast = "1 kg/t"
slow = "0 kg/t"
[budget]
currency = "USD"
[budget.prices.H2SO4]
purity = "98 %"
price = 100
per = "t"
date = "2026-11-30"
delivered = true
"""


def test_what_an_assumed_value_reaches_is_still_outside_and_says_so():
    law = RateLaw(
        LAW.name, LAW.resistances, LAW.reference, LAW.ultimate_size_mm, LAW.ultimate, box=BOX
    )
    sizes = SizeDistribution.single(2.0)
    assumed = ("activation_energy_chemical", "reagent_order")
    lines = outside_the_data(law, sizes, 290.15, [5.0, 10.0], 24.0, "the tanks", assumed)
    assert lines == (
        "temperature 17 degC is outside the tests (25 degC only), carried by the assumed "
        "activation_energy_chemical",
        "reagent 5 g/L is outside the tests (10 g/L only), carried by the assumed reagent_order",
    )
    assert outside_words(lines) == "outside the tests in temperature and reagent"
    bare = outside_the_data(law, sizes, 290.15, [10.0], 24.0, "the tanks")
    assert bare == ("temperature 17 degC is outside the tests (25 degC only)",)


def test_without_a_box_nobody_knows():
    lines = outside_the_data(LAW, SizeDistribution.single(2.0), 298.15, 10.0, 24.0, "the heap")
    assert outside_words(lines) == "nobody knows whether inside the tests"
    assert outside_words(()) == ""


@pytest.fixture(scope="module")
def tanks(tmp_path_factory):
    path = tmp_path_factory.mktemp("tanks") / "campaign.toml"
    path.write_text(TANKS, encoding="utf-8")
    return run_campaign(read_campaign(path), draws=0)


def test_every_strength_of_the_train_is_looked_at(tanks):
    """The feed is at the strength tested; the acid that the ore takes leaves the tanks weaker."""
    weakest = float(tanks.tank.reagent_g_per_L.value.min())
    assert weakest < 55.0
    assert any(line.startswith(f"reagent {weakest:.4g} g/L is") for line in tanks.tank.outside)


def test_tank_and_budget_carry_it_to_every_page(tanks):
    words = "outside the tests in temperature and reagent"
    assert outside_words(tanks.tank.outside) == words
    said = tanks.headline()
    assert any("extracted in 2 tanks" in line and words in line for line in said)
    assert any(line.startswith("Reagents:") and f"Quantities {words}." in line for line in said)
    captions = {table.name: table.caption for table in tanks.tables()}
    assert words in captions["tank"].lower()
    assert f"quantities {words}" in captions["budget_totals"]
    assert tanks.to_dict()["budget"]["outside_the_data"] == list(tanks.tank.outside)
