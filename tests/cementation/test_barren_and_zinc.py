"""The barren, the line to the plant's factor, deaeration, the cyanide window, lead salt."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import (
    Precipitant,
    Solution,
    air_saturation_mg_per_L,
    barren_drift,
    cementation_demand,
    cyanide_window,
    deaeration_table,
    lead_salt,
    reconcile_factor,
)
from leachkin.chemistry import acid_pH
from leachkin.errors import InputProblems

IRON = Precipitant("iron", purity=0.96, fines=0.05)
ZINC = Precipitant("zinc", purity=0.97, metallic=0.96)
GOLD = Solution({"Au": 0.71e-3, "Ag": 16.2e-3}, flow_m3_per_h=120.0, oxygen_mg_per_L=0.4,
                free_cyanide_g_per_L=0.25, pH=10.5)  # fmt: skip


def copper(**changes):
    given = {"metals": {"Cu": 2.036}, "flow_m3_per_h": 797.0, "ferric_g_per_L": 0.9,
             "oxygen_mg_per_L": 6.0, "acid_g_per_L": 5.0}  # fmt: skip
    return cementation_demand(
        Solution(**(given | changes)), IRON, recovery=0.95, acid_taken_g_per_L=0.7
    )


def test_iron_and_acid_of_the_copper_scenario():
    drift = barren_drift(copper())
    assert_allclose(drift.precipitant_gain_g_per_L, 2.57, rtol=1e-3)
    assert_allclose(drift.ferrous_rise_g_per_L, 2.569 + 0.9, rtol=1e-3)
    assert_allclose(drift.acid_by_oxygen_g_per_L, 0.006 * 2 * 98.072 / 31.998, rtol=1e-4)
    assert_allclose(drift.acid_out_g_per_L, 5.0 - 0.7 - drift.acid_by_oxygen_g_per_L, rtol=1e-12)
    assert drift.pH_out > drift.pH_in


def test_what_the_iron_costs_later():
    """0.878 kg H2SO4 and 0.143 kg O2 per kg Fe; back 2.634 as hydroxide, 1.756 as jarosite."""
    drift = barren_drift(copper())
    rise = drift.ferrous_rise_g_per_L
    found = (
        drift.reoxidation_acid_g_per_L / rise,
        drift.reoxidation_oxygen_g_per_L / rise,
        drift.returned_as_hydroxide_g_per_L / rise,
        drift.returned_as_jarosite_g_per_L / rise,
    )
    assert_allclose(found, [0.878, 0.143, 2.634, 1.756], rtol=0, atol=6e-4)


def test_pH_of_the_feed_is_that_of_its_acid_and_sulphate():
    other = 2.036 / 63.546 + 1.5 * 0.9 / 55.845
    assert_allclose(barren_drift(copper()).pH_in, acid_pH(5.0, other).pH, rtol=0, atol=0.01)


def test_ferric_that_will_not_stay_dissolved_is_said():
    drift = barren_drift(copper(acid_g_per_L=0.75))
    assert drift.pH_out > 2.0
    assert any("the rest precipitates" in note for note in drift.notes)


def test_unknown_acid_gives_no_pH_out():
    drift = barren_drift(copper(acid_g_per_L=None, pH=1.8))
    assert drift.pH_in == 1.8
    assert drift.pH_out is None
    assert drift.acid_out_g_per_L is None
    items = [row["item"] for row in drift.table().to_records()]
    assert "pH out" not in items


def test_zinc_makes_hydroxide_in_cyanide():
    drift = barren_drift(cementation_demand(GOLD, ZINC, recovery=0.99))
    assert drift.ferrous_rise_g_per_L is None
    assert drift.pH_out > drift.pH_in == 10.5
    assert drift.acid_by_oxygen_g_per_L == 0.0


def test_reconciliation_line_adds_up():
    line = reconcile_factor(copper(), 1.9)
    assert_allclose(line.computed_kg_per_kg, 1.457, rtol=1e-3)
    assert_allclose(line.computed_kg_per_kg + line.unexplained_kg_per_kg, 1.9, rtol=1e-12)
    assert_allclose(
        line.unexplained_kg_per_m3, line.unexplained_kg_per_kg * 0.95 * 2.036, rtol=1e-9
    )
    monthly = line.unexplained_kg_per_m3 * 797.0 * 24 * 30.4 / 1e3
    assert_allclose(line.unexplained_t_per_month, monthly, rtol=1e-12)
    assert "23 % of the plant's 1.9 kg/kg is not explained" in line.text
    assert "agree within 5 %" in reconcile_factor(copper(), 1.48).text
    assert "less than the sinks take" in reconcile_factor(copper(), 1.2).text


def test_a_plant_factor_inside_the_range_leaves_nothing_open():
    solution = Solution({"Cu": 2.0}, iron_g_per_L=3.0, acid_g_per_L=3.0, oxygen_mg_per_L=6.0)
    ranged = cementation_demand(solution, IRON, recovery=0.95)
    line = reconcile_factor(ranged, 1.9)
    assert line.computed_kg_per_kg < 1.9 < line.computed_high_kg_per_kg
    assert line.unexplained_kg_per_kg == 0.0
    assert "nothing follows yet" in line.text
    above = reconcile_factor(ranged, 6.0)
    assert_allclose(above.unexplained_kg_per_kg, 6.0 - above.computed_high_kg_per_kg, rtol=1e-12)


def test_deaeration_in_zinc():
    """33.8 g/m3 for 8.26 mg/L of oxygen, 2.0 for 0.5 mg/L."""
    rows = deaeration_table(GOLD, ZINC, 0.99).to_records()
    zinc = {row["oxygen_mg_per_L"]: row["to_oxygen"] for row in rows}
    assert_allclose(zinc[8.26], 33.8, rtol=0, atol=0.05)
    assert_allclose(zinc[0.5], 2.0, rtol=0, atol=0.05)
    own = next(row for row in rows if row["note"] == "as the solution stands")
    assert own["oxygen_mg_per_L"] == 0.4
    assert own["saved"] == 0.0
    assert [row["net"] for row in rows] == sorted((row["net"] for row in rows), reverse=True)
    best = rows[-1]
    assert_allclose(best["saved_month"], best["saved"] * 120 * 24 * 30.4 / 1e3, rtol=1e-12)


def test_oxygen_falls_with_altitude_and_warmth():
    """At 3,500 m about two thirds of sea level, a fact of the trade."""
    assert_allclose(air_saturation_mg_per_L(298.15, 3500.0) / 8.26, 2 / 3, rtol=0, atol=0.03)
    assert air_saturation_mg_per_L(308.15) < air_saturation_mg_per_L(298.15)
    assert_allclose(air_saturation_mg_per_L(298.15), 8.26, rtol=1e-9)


def test_cyanide_window_opens_between_supply_and_water():
    window = cyanide_window(GOLD, ZINC, {"CN-": 3e-5}, 0.01)
    assert window.low_g_per_L < 0.25
    assert "lies inside" in window.text
    starved = Solution({"Au": 0.02, "Ag": 0.4}, oxygen_mg_per_L=8.0, free_cyanide_g_per_L=0.02,
                       pH=10.5)  # fmt: skip
    poor = cyanide_window(starved, ZINC, {"CN-": 3e-5}, 0.2)
    assert poor.low_g_per_L > window.low_g_per_L
    assert "is below" in poor.text
    rich = Solution({"Au": 5e-4}, oxygen_mg_per_L=0.1, free_cyanide_g_per_L=4.0, pH=11.0)
    assert "most zinc goes to water" in cyanide_window(rich, ZINC, {"CN-": 3e-5}).text
    assert window.defaults


def test_cyanide_supply_end_by_hand():
    """Two cyanides for each electron of zinc: C_CN = 2 sum(n k C) / k_CN at the limits."""
    solution = Solution({"Ag": 0.2}, oxygen_mg_per_L=0.0, free_cyanide_g_per_L=0.5, pH=9.0)
    window = cyanide_window(solution, ZINC, 1e-5)
    share = 1 / (1 + 10 ** (9.21 - 9.0))
    expected = 2 * (0.2 / 107.8682) * 26.017 / share
    assert_allclose(window.by_supply_g_per_L, expected, rtol=0.05)


def test_lead_salt_is_a_dose_with_its_zinc():
    """Pb + Zn by molar masses: 10 g of nitrate hold 6.26 g of lead and take 1.97 g of zinc."""
    dose = lead_salt(10.0, 120.0)
    assert_allclose(dose.lead_g_per_m3, 10 * 207.2 / 331.208, rtol=1e-4)
    assert_allclose(dose.zinc_g_per_m3, 10 * 65.38 / 331.208, rtol=1e-4)
    assert_allclose(dose.kg_per_h, 1.2, rtol=1e-12)
    assert "passivates" in lead_salt(40.0).note
    assert "passivates" not in dose.note


def test_windows_and_tables_can_be_shown():
    assert barren_drift(copper()).table().rows
    assert reconcile_factor(copper(), 1.9).table().caption
    assert cyanide_window(GOLD, ZINC, {"CN-": 3e-5}).table().rows


REFUSED = [
    (lambda: reconcile_factor(copper(), 0.0), "plant_kg_per_kg: 0"),
    (lambda: reconcile_factor(copper(), 1.9, "gross"), "basis: 'gross'"),
    (lambda: reconcile_factor(
        cementation_demand(Solution({"Cu": 2.0}), Precipitant("iron"), recovery=0.9), 1.9
     ), "no factor as received"),
    (lambda: lead_salt(-1.0), "dose_g_per_m3: -1"),
    (lambda: cyanide_window(Solution({"Cu": 2.0}, pH=2.0), ZINC, 1e-5), "no cyanide solution"),
    (lambda: air_saturation_mg_per_L(298.15, 9000.0), "altitude_m: 9000 m"),
    (lambda: air_saturation_mg_per_L(350.0), "0 to 60 degC"),
]  # fmt: skip


@pytest.mark.parametrize(("call", "message"), REFUSED)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()


def test_draws_give_medians():
    demand = copper(metals={"Cu": np.array([1.8, 2.036, 2.3])})
    assert_allclose(
        barren_drift(demand).precipitant_gain_g_per_L, np.median(demand.net_kg_per_m3), rtol=1e-12
    )
