"""Vessels for a target barren, their charge, and the grade of the deposit."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import (
    CementationLaw,
    Precipitant,
    Solution,
    bed,
    cementation_demand,
    deposit_grade,
    dust_and_filter,
    fit_cementation,
    launder,
    piece_area_m2_per_kg,
    stirred_tanks,
)
from leachkin.chemistry import packed_bed, suspended_dust
from leachkin.errors import InputProblems

IRON = Precipitant("iron", purity=0.96, fines=0.05)
ZINC = Precipitant("zinc", purity=0.97, metallic=0.96)


def copper(recovery=0.95, **changes):
    given = {"metals": {"Cu": 2.036}, "flow_m3_per_h": 797.0, "ferric_g_per_L": 0.9,
             "oxygen_mg_per_L": 6.0}  # fmt: skip
    return cementation_demand(
        Solution(**(given | changes)), IRON, recovery=recovery, acid_taken_g_per_L=0.7
    )


def gold(**changes):
    given = {"metals": {"Au": 0.71e-3, "Ag": 16.2e-3}, "flow_m3_per_h": 120.0,
             "oxygen_mg_per_L": 0.4, "free_cyanide_g_per_L": 0.25, "pH": 10.5}  # fmt: skip
    return cementation_demand(Solution(**(given | changes)), ZINC, recovery=0.99)


def test_launder_by_hand():
    """Plug flow: area = Q ln(C0/C) / k; length = volume over section."""
    found = launder(copper(), 2e-5, width_m=2.0, depth_m=1.0, area_m2_per_m3=60.0, voids=0.9)
    area = 797.0 / 3600 * np.log(20.0) / 2e-5
    assert_allclose(found.area_m2, area, rtol=1e-12)
    assert_allclose(found.vessel_m3, area / 60.0, rtol=1e-12)
    assert_allclose(found.length_m, area / 60.0 / 2.0, rtol=1e-12)
    assert_allclose(found.contact_h, 0.9 * found.vessel_m3 / 797.0, rtol=1e-12)
    assert_allclose(found.barren_g_per_L, 0.05 * 2.036, rtol=1e-12)


def test_replenishment_is_the_demand_and_a_charge_lasts_so_long():
    demand = copper()
    found = launder(demand, 2e-5, width_m=2.0, depth_m=1.0, area_m2_per_m3=60.0, voids=0.9,
                    piece_thickness_mm=0.5)  # fmt: skip
    assert_allclose(found.refill_kg_per_h, demand.received_kg_per_h, rtol=1e-14)
    assert_allclose(found.charge_kg, found.area_m2 / piece_area_m2_per_kg("Fe", 0.5), rtol=1e-14)
    assert_allclose(found.charge_days, found.charge_kg / found.refill_kg_per_h / 24, rtol=1e-14)
    assert_allclose(found.hydrogen_Nm3_per_h, 128, rtol=5e-3)


def test_half_millimetre_sheet_has_half_a_square_metre_a_kilogram():
    assert_allclose(piece_area_m2_per_kg("Fe", 0.5), 2 / (7870 * 0.5e-3), rtol=1e-12)


def test_bed_takes_its_coefficient_from_the_correlation():
    found = bed(copper(), piece_mm=20.0, cross_section_m2=20.0, voids=0.6)
    transfer = packed_bed(797.0 / 20 / 3600, 0.020, 0.6, "Cu2+")
    assert_allclose(found.k_m_per_s, transfer.k_m_per_s, rtol=1e-12)
    assert "wakao1978" in found.correlation
    area = 797.0 / 3600 * np.log(20.0) / float(transfer.k_m_per_s)
    assert_allclose(found.area_m2, area, rtol=1e-9)
    assert_allclose(found.area_m2, 6 * 0.4 / 0.020 * found.vessel_m3, rtol=1e-9)
    assert_allclose(found.charge_kg, 0.4 * found.vessel_m3 * 7870, rtol=1e-12)


def test_turning_a_bed_shortens_it_by_its_factor():
    still = bed(copper(), piece_mm=20.0, cross_section_m2=20.0, voids=0.5)
    moving = bed(
        copper(), piece_mm=20.0, cross_section_m2=20.0, voids=0.5, moving=True, turning_factor=2.0
    )
    assert_allclose(still.length_m / moving.length_m, 2.0, rtol=1e-12)
    assert moving.kind == "moving bed"


def test_one_mixed_tank_and_many():
    """One tank: t = (C0/C - 1)/k; many come to plug flow."""
    one = stirred_tanks(copper(), 2e-5, tanks=1, area_m2_per_m3=60.0)
    assert_allclose(one.contact_h * one.rate_per_h, 19.0, rtol=1e-12)
    many = stirred_tanks(copper(), 2e-5, tanks=5000, area_m2_per_m3=60.0)
    assert_allclose(many.contact_h * many.rate_per_h, np.log(20.0), rtol=1e-3)
    assert one.area_m2 > many.area_m2


def test_a_fitted_law_sizes_a_vessel():
    times = np.array([0.0, 0.1, 0.2, 0.4, 0.6, 0.8])
    fit = fit_cementation(times, 2.0 * np.exp(-3.6 * times), area_m2_per_m3=50.0)
    assert_allclose(fit.law.k, 3.6 / 3600 / 50, rtol=1e-6)
    found = launder(copper(), fit.law, width_m=2.0, depth_m=1.0, area_m2_per_m3=60.0, voids=0.8)
    assert_allclose(found.rate_per_h, 3.6 * (60 / 0.8) / 50, rtol=1e-6)
    assert_allclose(found.contact_h, np.log(20.0) / found.rate_per_h, rtol=1e-6)
    assert found.correlation == "fitted to tests"


def test_a_two_stage_law_in_plug_flow_is_exact():
    law = CementationLaw(
        "two_stage", np.asarray(1e-5), "m/s", {"break": np.asarray(1.0), "ratio": np.asarray(2.0)}
    )
    found = launder(copper(), law, width_m=2.0, depth_m=1.0, area_m2_per_m3=90.0, voids=0.9)
    expected = (1.0 + (np.log(20.0) - 1.0) / 2.0) / (3600 * 1e-5 * 100.0)
    assert_allclose(found.contact_h, expected, rtol=1e-9)


def test_a_rate_from_another_temperature_is_marked():
    law = CementationLaw("first_order", np.asarray(1e-5), "m/s",
                         activation_energy_kJ_per_mol=np.asarray(15.0),
                         temperature_range_K=(293.0, 313.0))  # fmt: skip
    found = launder(copper(), law, width_m=2.0, depth_m=1.0, area_m2_per_m3=60.0, voids=0.9,
                    temperature_K=285.0)  # fmt: skip
    assert any("lies outside the tests" in note for note in found.notes)
    warm = launder(copper(), law, width_m=2.0, depth_m=1.0, area_m2_per_m3=60.0, voids=0.9,
                   temperature_K=305.0)  # fmt: skip
    assert warm.length_m < found.length_m


def test_dust_in_a_pipe_and_the_cake_behind_it():
    demand = gold()
    found = dust_and_filter(demand, grain_um=7.0, cake_voids=0.5, pipe_contact_s=20.0,
                            excess_g_per_m3=6.0, filter_m2=60.0)  # fmt: skip
    k = float(suspended_dust(7e-6, 7140.0, "Au(CN)2-").k_m_per_s)
    assert_allclose(found.k_m_per_s, k, rtol=1e-12)
    left = np.exp(-found.rate_per_h * 20.0 / 3600)
    cake = 120.0 / 3600 * np.log(left / 0.01) / k
    assert_allclose(found.charge_kg, cake / (6 / (7140 * 7e-6)), rtol=1e-9)
    assert any("the pipe takes out" in note for note in found.notes)
    assert found.length_m > 0.0


def test_enough_dust_in_a_long_pipe_needs_no_cake():
    found = dust_and_filter(
        gold(), grain_um=3.0, cake_voids=0.5, pipe_contact_s=3600.0, excess_g_per_m3=50.0
    )
    assert found.charge_kg == 0.0
    assert any("the pipe alone reaches the barren" in note for note in found.notes)


def test_deposit_grade_by_hand():
    """Fines and what is not metal stay in the cement: 1.934 of 2.182 kg/m3."""
    grade = deposit_grade(copper())
    fines = 2.5693417 * (1 / 0.95 - 1)
    lost = 2.5693417 * (1 / (0.96 * 0.95) - 1)
    assert_allclose(grade.low, 1.9342 / (1.9342 + lost), rtol=1e-6)
    assert_allclose(grade.high, 1.9342 / (1.9342 + fines), rtol=1e-6)
    assert_allclose(grade.deposit_kg_per_h, (1.9342 + lost) * 797.0, rtol=1e-6)
    assert 0.0 < grade.precipitant_share < 0.1


def test_pure_iron_without_fines_makes_pure_copper():
    demand = cementation_demand(
        Solution({"Cu": 2.0}, ferric_g_per_L=0, oxygen_mg_per_L=0), Precipitant("iron", 1.0),
        recovery=0.9, acid_taken_g_per_L=0,
    )  # fmt: skip
    grade = deposit_grade(demand)
    assert grade.low == grade.high == 1.0


def test_what_is_provisional_says_so_and_the_table_shows_no_unknowns():
    demand = cementation_demand(
        Solution({"Cu": 2.0}, flow_m3_per_h=100.0), Precipitant("iron"), recovery=0.9
    )
    found = stirred_tanks(demand, 2e-5, area_m2_per_m3=60.0)
    assert any("PROVISIONAL" in note for note in found.notes)
    assert found.refill_kg_per_h is None
    items = [row["item"] for row in found.table().to_records()]
    assert "Replenishment, as received" not in items
    assert "Contact" in items


SECOND = CementationLaw("growing_area", np.ones(()), "1/h", {"power": np.asarray(1.5)})
FLOOR = CementationLaw("back_dissolution", np.ones(()), "m/s", {"back": np.asarray(0.2)})
LAUNDER = {"width_m": 2.0, "depth_m": 1.0, "area_m2_per_m3": 60.0, "voids": 0.9}
REFUSED = [
    (lambda: launder(copper(flow_m3_per_h=None), 2e-5, **LAUNDER), "no flow"),
    (lambda: launder(copper(), 0.0, **LAUNDER), "rate: 0"),
    (lambda: launder(copper(), 2e-5, **(LAUNDER | {"width_m": -1.0})), "width_m: -1"),
    (lambda: launder(copper(), 2e-5, **(LAUNDER | {"voids": 1.0})), "voids: 1"),
    (lambda: launder(copper(1.0), 2e-5, **LAUNDER), "no vessel takes out all"),
    (lambda: launder(copper(), 2e-5, **LAUNDER, metal="Ag"), "metal: Ag"),
    (lambda: launder(copper(), FLOOR, **LAUNDER), "longer contact does not help"),
    (lambda: stirred_tanks(copper(), SECOND), "growing_area in a mixed tank"),
    (lambda: stirred_tanks(copper(), 2e-5), "no area"),
    (lambda: stirred_tanks(copper(), 2e-5, tanks=0, area_m2_per_m3=1.0), "tanks: 0"),
    (lambda: bed(copper(), piece_mm=0.0, cross_section_m2=20.0, voids=0.5), "piece_mm: 0"),
    (lambda: dust_and_filter(gold(), grain_um=7.0, cake_voids=0.5, pipe_contact_s=0.0),
     "pipe_contact_s: 0"),
    (lambda: piece_area_m2_per_kg("Al", 0.5), "metal: Al"),
    (lambda: piece_area_m2_per_kg("Fe", 0.0), "thickness_mm: 0 mm"),
]  # fmt: skip


@pytest.mark.parametrize(("call", "message"), REFUSED)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()


def test_a_barren_below_equilibrium_is_refused_with_both_numbers():
    lead = cementation_demand(
        Solution({"Ni": 0.1, "Zn": 100.0}, flow_m3_per_h=50.0, ferric_g_per_L=0.0,
                 oxygen_mg_per_L=0.0), Precipitant("iron", 1.0),
        barren_g_per_L={"Ni": 1e-9, "Zn": 100.0}, acid_taken_g_per_L=0.0,
    )  # fmt: skip
    with pytest.raises(InputProblems, match="equilibrium leaves"):
        stirred_tanks(lead, 2e-5, area_m2_per_m3=60.0, metal="Ni")
