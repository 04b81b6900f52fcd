"""Which metals a precipitant can put out, and what equilibrium leaves."""

import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import (
    Precipitant,
    Solution,
    cementation_demand,
    feasibility,
    feasibility_table,
)
from leachkin.errors import InputProblems


def test_metals_come_noblest_first():
    solution = Solution({"Zn": 1.0, "Pb": 1.0, "Cu": 1.0, "Ag": 0.1, "Ni": 0.5})
    found = feasibility(solution, Precipitant("iron"))
    assert [item.metal for item in found] == ["Ag", "Cu", "Pb", "Ni", "Zn"]
    assert [item.verdict for item in found][-1] == "infeasible"


def test_precipitant_nobler_than_the_metal_is_refused_with_both_potentials():
    solution = Solution({"Cu": 2.0, "Zn": 1.0})
    message = r"iron cannot put out Zn: Zn2\+/Zn stands at -0.762 V, Fe2\+/Fe at -0.409 V"
    with pytest.raises(InputProblems, match=message):
        cementation_demand(solution, Precipitant("iron"), recovery=0.95)


def test_a_metal_left_in_solution_need_not_be_feasible():
    solution = Solution({"Cu": 2.0, "Zn": 1.0}, ferric_g_per_L=0, oxygen_mg_per_L=0)
    demand = cementation_demand(
        solution, Precipitant("iron"), recovery={"Cu": 0.95}, acid_taken_g_per_L=0
    )
    assert_allclose(demand.barren_g_per_L["Zn"], 1.0)
    assert [item.metal for item in demand.feasibility] == ["Cu"]


def test_the_spread_of_the_sources_may_leave_a_pair_open():
    (item,) = feasibility(Solution({"Cu": 1.0}), Precipitant("copper"))
    assert item.cell.low_V < 0 < item.cell.high_V
    assert item.verdict == "depends on the source of the potentials"


def test_cadmium_by_iron_stops_at_equilibrium():
    """A few millivolts between them: Cd2+/Cd at -0.402, Fe2+/Fe at -0.409 V."""
    (item,) = feasibility(Solution({"Cd": 1.0}), Precipitant("iron"))
    assert_allclose(item.cell.voltage, 0.0068, rtol=0, atol=1e-12)
    solution = Solution({"Cd": 1.0}, ferric_g_per_L=0, oxygen_mg_per_L=0)
    demand = cementation_demand(solution, Precipitant("iron"), recovery=0.95, acid_taken_g_per_L=0)
    assert any("more than the 0.05 g/L asked for" in text for text in demand.warnings)


def test_residual_falls_with_the_voltage_and_copper_is_put_out_whole():
    solution = Solution({"Cu": 2.0, "Pb": 1.0})
    copper, lead = feasibility(solution, Precipitant("iron"), dissolved_mol_per_L=0.05)
    assert copper.residual_g_per_L < 1e-20 < lead.residual_g_per_L < 1e-6
    assert copper.residual_mol_per_L < lead.residual_mol_per_L


def test_without_dissolved_precipitant_there_is_no_residual():
    (item,) = feasibility(Solution({"Cu": 2.0}), Precipitant("iron"))
    assert item.residual_mol_per_L is None


def test_gold_and_silver_by_zinc_in_cyanide():
    solution = Solution({"Au": 0.001, "Ag": 0.016}, free_cyanide_g_per_L=0.25)
    found = feasibility(solution, Precipitant("zinc"))
    assert [item.cell.anode for item in found] == ["Zn(CN)4 2-/Zn"] * 2
    gold = next(item for item in found if item.metal == "Au")
    assert_allclose(gold.cell.voltage, 0.66, rtol=0, atol=0.005)


def test_table_shows_both_potentials_and_sources():
    table = feasibility_table(feasibility(Solution({"Cu": 2.0}), Precipitant("iron")))
    (row,) = table.to_records()
    assert (row["metal_V"], row["precipitant_V"]) == (0.3394, -0.4089)
    assert row["low_V"] < row["voltage_V"] < row["high_V"]
    assert row["sources"] == "nbs1982_crc"


def test_unknown_metal_names_the_nearest():
    with pytest.raises(InputProblems, match="'Cuu'.*did you mean Cu"):
        feasibility(Solution({"Cu": 1.0}), Precipitant("iron"), ["Cuu"])


def test_zinc_in_a_solution_of_unstated_kind_is_said():
    solution = Solution({"Cu": 1.0}, ferric_g_per_L=0, oxygen_mg_per_L=0)
    demand = cementation_demand(solution, Precipitant("zinc"), recovery=0.9)
    assert any("taken for an acid solution" in text for text in demand.warnings)


def test_another_temperature_moves_the_potentials():
    warm = feasibility(Solution({"Cu": 2.0}, temperature_K=290.15), Precipitant("iron"))[0]
    assert_allclose(
        warm.cell.voltage, 0.7483 + 1e-3 * (0.011 - 0.178) * (290.15 - 298.15), rtol=1e-9
    )
