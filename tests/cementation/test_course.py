"""The way from feed to barren by the mixed potential, and its fit to a site."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import (
    NO_BUDGET,
    Precipitant,
    SiteBarren,
    Solution,
    electrode_kinetics,
    fit_to_barren,
    mixed_course,
)
from leachkin.chemistry import molar_mass
from leachkin.errors import InputProblems

IRON, ZINC = Precipitant("iron"), Precipitant("zinc")
FEED = Solution({"Cu": 2.0}, ferric_g_per_L=0.8, acid_g_per_L=3.0, oxygen_mg_per_L=6.0)
SLOW = electrode_kinetics(IRON, {"Cu": 1.0}, hydrogen_factor=0.0)


def test_transport_alone_is_first_order():
    """Without hydrogen each reactant falls as exp(-k A t / V), with one coefficient for all."""
    way = mixed_course(FEED, IRON, 1e-5, {"Cu": 0.1}, SLOW)
    expected = np.exp(-1e-5 * way.contact_s_per_m)
    assert_allclose(way.metals_g_per_L["Cu"], 2.0 * expected, rtol=1e-6)
    assert_allclose(way.ferric_g_per_L, 0.8 * expected, rtol=1e-6)
    assert_allclose(way.oxygen_mg_per_L, 6.0 * expected, rtol=1e-3)
    assert_allclose(way.contact_s_per_m[-1], np.log(20.0) / 1e-5, rtol=1e-6)


def test_iron_balances_its_sinks():
    way = mixed_course(FEED, IRON, 1e-5, {"Cu": 0.1})
    taken = {name: float(series[-1]) for name, series in way.taken_kg_per_m3.items()}
    assert_allclose(taken["Cu"], 0.87882 * 1.9, rtol=1e-5)
    left = way.ferric_g_per_L[-1]
    assert_allclose(taken["Fe3+"], 0.5 * (0.8 - left), rtol=1e-9)
    assert_allclose(way.net_kg_per_m3, sum(taken.values()), rtol=1e-12)
    assert_allclose(sum(way.shares.values()), 1.0, rtol=1e-12)
    assert_allclose(way.factor_kg_per_kg, way.net_kg_per_m3 / 1.9, rtol=1e-9)
    gas = taken["hydrogen"] / molar_mass("Fe") * 22.414
    assert_allclose(way.hydrogen_Nm3_per_m3, gas, rtol=1e-4)


def test_acid_taken_is_that_of_hydrogen_and_oxygen():
    way = mixed_course(FEED, IRON, 1e-5, {"Cu": 0.1})
    iron = way.taken_kg_per_m3["hydrogen"][-1] + way.taken_kg_per_m3["O2"][-1]
    expected = iron * molar_mass("H2SO4") / molar_mass("Fe")
    assert_allclose(way.acid_taken_g_per_L[-1], expected, rtol=2e-3)


def test_steps_converge_second_order():
    net = [
        float(mixed_course(FEED, IRON, 1e-5, {"Cu": 0.02}, steps=n).net_kg_per_m3)
        for n in (10, 20, 160)
    ]
    assert abs(net[1] - net[2]) < 0.4 * abs(net[0] - net[2]) + 1e-9


def test_the_barren_end_spends_more_iron_on_each_copper():
    deep, shallow = (mixed_course(FEED, IRON, 1e-5, {"Cu": left}) for left in (0.01, 0.5))
    assert deep.factor_kg_per_kg > shallow.factor_kg_per_kg
    assert deep.shares["hydrogen"] > shallow.shares["hydrogen"]


def test_gold_on_zinc_holds_pH_and_makes_no_acid_line():
    gold = Solution({"Au": 2e-3, "Ag": 0.02}, oxygen_mg_per_L=0.5, free_cyanide_g_per_L=0.3,
                    pH=10.8)  # fmt: skip
    way = mixed_course(gold, ZINC, {"CN-": 3e-5}, {"Au": 2e-5})
    assert way.reached
    assert np.all(way.acid_taken_g_per_L == 0.0)
    assert set(way.shares) == {"Au", "Ag", "O2", "hydrogen"}
    assert "acid_taken_g_per_L" not in [c.key for c in way.way_table().columns]


def test_a_metal_that_comes_to_an_end_says_so():
    """Cadmium on iron meets the potential of iron long before it is gone."""
    way = mixed_course(
        Solution({"Cd": 0.5}, ferric_g_per_L=0.0, oxygen_mg_per_L=0.0, pH=6.0), IRON, 1e-5,
        {"Cd": 1e-4},
    )  # fmt: skip
    assert not way.reached
    assert any("comes to an end" in note for note in way.notes)


def test_a_batch_of_feeds():
    grades = np.array([1.0, 2.0, 4.0])
    batch = mixed_course(
        Solution({"Cu": grades}, ferric_g_per_L=0.8, pH=2.0, oxygen_mg_per_L=6.0), IRON, 1e-5,
        {"Cu": 0.05},
    )  # fmt: skip
    assert batch.net_kg_per_m3.shape == (3,)
    assert np.all(np.diff(batch.factor_kg_per_kg) < 0.0)
    assert batch.sink_table().rows


def test_unfitted_it_says_that_it_sets_no_budget():
    way = mixed_course(FEED, IRON, 1e-5, {"Cu": 0.1})
    assert not way.fitted
    assert way.remark == NO_BUDGET
    assert NO_BUDGET in way.sink_table().caption
    assert NO_BUDGET in way.way_table().caption


@pytest.mark.slow
def test_a_site_fit_recovers_known_factors():
    true = electrode_kinetics(IRON, {"Cu": 1.0}, hydrogen_factor=40.0)
    way = mixed_course(FEED, IRON, {"Cu2+": 1e-5, "Fe3+": 1.5e-5}, {"Cu": 0.1}, true, steps=40)
    barren = SiteBarren(
        {"Cu": 0.1},
        ferric_g_per_L=float(way.ferric_g_per_L[-1]),
        iron_gain_g_per_L=float(way.net_kg_per_m3),
        acid_taken_g_per_L=float(way.acid_taken_g_per_L[-1]),
    )
    found = fit_to_barren(FEED, IRON, {"Cu2+": 1e-5, "Fe3+": 1e-5}, barren)
    values = {p.name: p.value for p in found.parameters}
    assert_allclose(values["hydrogen"], 40.0, rtol=1e-3)
    assert_allclose(values["ferric transfer"], 1.5, rtol=1e-3)
    assert found.course.fitted
    assert "Fitted to a barren of this site" in found.course.remark
    assert all(p.low is not None and p.low < p.value < p.high for p in found.parameters)
    assert_allclose(found.course.net_kg_per_m3, way.net_kg_per_m3, rtol=1e-4)
    assert "Fitted to iron gain" in found.table().caption


def test_a_barren_of_the_metal_alone_fits_nothing():
    found = fit_to_barren(FEED, IRON, 1e-5, SiteBarren({"Cu": 0.1}))
    assert found.parameters == ()
    assert not found.course.fitted
    assert NO_BUDGET in found.text


def test_a_site_that_contradicts_itself_is_said():
    contradiction = SiteBarren({"Cu": 0.1}, iron_gain_g_per_L=6.0, acid_taken_g_per_L=0.2)
    found = fit_to_barren(FEED, IRON, 1e-5, contradiction)
    assert "standard deviations" in found.text


REFUSED = [
    (lambda: mixed_course(FEED, IRON, 1e-5, {"Cu": 2.5}), "2.5 g/L of 2 g/L Cu"),
    (lambda: mixed_course(FEED, IRON, 1e-5, {"Cu": 0.0}), "above 0 and below the feed"),
    (lambda: mixed_course(FEED, IRON, 1e-5, {"Ag": 0.1}), "barren_g_per_L: Ag"),
    (lambda: mixed_course(FEED, IRON, 1e-5, {}), "0 metals"),
    (lambda: SiteBarren({"Cu": 0.1}, iron_gain_g_per_L=-1.0), "iron_gain_g_per_L: -1"),
    (lambda: SiteBarren({"Cu": 0.1}, relative_error=0.0), "relative_error"),
]


@pytest.mark.parametrize(("call", "message"), REFUSED)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
