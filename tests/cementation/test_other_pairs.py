"""Other pairs by the same functions: Cu, Cd, Ni, Co by zinc, Ag by copper or iron, Pb by iron."""

import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import (
    Precipitant,
    Solution,
    cementation_demand,
    mixed_course,
    mixed_potential,
    solution_order,
    stirred_tanks,
)
from leachkin.chemistry import cell
from leachkin.errors import InputProblems

#   metal, precipitant, kg of precipitant per kg of metal (molar masses), voltage range [V]
PAIRS = [
    ("Cu", "zinc", 1.029, (1.09, 1.11)),
    ("Cd", "zinc", 0.582, (0.35, 0.37)),
    ("Ag", "copper", 0.2946, (0.45, 0.47)),
    ("Ag", "iron", 0.2589, (1.20, 1.28)),
    ("Pb", "iron", 0.2695, (0.27, 0.36)),
    ("Ni", "zinc", 1.114, (0.50, 0.54)),
    ("Co", "zinc", 1.109, (0.47, 0.49)),
]


def clean(metal, grade=1.0, **more):
    given = {"ferric_g_per_L": 0.0, "oxygen_mg_per_L": 0.0, "acid_g_per_L": 0.05} | more
    return Solution({metal: grade}, flow_m3_per_h=10.0, medium="acid", **given)


@pytest.mark.parametrize(("metal", "precipitant", "factor", "volts"), PAIRS)
def test_factor_potential_and_order(metal, precipitant, factor, volts):
    kind = Precipitant(precipitant, 1.0)
    demand = cementation_demand(clean(metal), kind, recovery=0.99, acid_taken_g_per_L=0.0)
    assert_allclose(demand.net_factor, factor, rtol=0, atol=6e-4)
    assert volts[0] < demand.feasibility[0].cell.voltage < volts[1]
    assert solution_order(clean(metal), kind, 0.1).of(metal).verdict == "put out"


def test_silver_by_iron_in_print():
    """3.86 g of silver for a gram of iron (common practice)."""
    demand = cementation_demand(
        clean("Ag"), Precipitant("iron", 1.0), recovery=1.0, acid_taken_g_per_L=0.0
    )
    assert_allclose(1.0 / demand.net_factor, 3.86, rtol=0, atol=0.005)


@pytest.mark.parametrize(("metal", "precipitant", "factor", "volts"), PAIRS)
def test_the_mixed_potential_of_every_pair_balances(metal, precipitant, factor, volts):
    found = mixed_potential(clean(metal, oxygen_mg_per_L=4.0), Precipitant(precipitant), 1e-5)
    assert found.imbalance <= 1e-10
    assert found.factor_kg_per_kg > factor - 1e-3
    assert volts


def test_copper_goes_before_cadmium_on_zinc():
    liquor = Solution({"Cd": 0.35, "Cu": 0.55, "Zn": 140.0}, ferric_g_per_L=0.0,
                      oxygen_mg_per_L=0.0, pH=4.0)  # fmt: skip
    assert solution_order(liquor, Precipitant("zinc")).metals == ("Cu", "Cd")


@pytest.mark.parametrize("metal", ["Ni", "Co"])
def test_surface_control_makes_equilibrium_a_poor_guide(metal):
    zinc = Precipitant("zinc", 1.0)
    demand = cementation_demand(clean(metal), zinc, recovery=0.9, acid_taken_g_per_L=0.0)
    assert any("equilibrium is a poor guide" in warning for warning in demand.warnings)
    assert "poor guide" in solution_order(clean(metal), zinc, 0.1).of(metal).note


def test_zinc_spends_more_on_hydrogen_over_copper_than_over_cadmium():
    shares = {
        metal: float(mixed_course(clean(metal, acid_g_per_L=1.0), Precipitant("zinc"), 1e-5,
                                  {metal: 0.01}).shares["hydrogen"])
        for metal in ("Cu", "Cd")
    }  # fmt: skip
    assert shares["Cu"] > shares["Cd"]


def test_silver_on_copper_needs_a_vessel_like_any_other():
    demand = cementation_demand(clean("Ag"), Precipitant("copper", 0.99), recovery=0.99)
    found = stirred_tanks(demand, 1e-5, area_m2_per_m3=100.0)
    assert found.metal == "Ag"
    assert found.hydrogen_Nm3_per_h == 0.0


@pytest.mark.parametrize(
    ("metal", "precipitant"), [("Zn", "iron"), ("Cu", "copper"), ("Fe", "copper"), ("Mg", "zinc")]
)
def test_a_nobler_precipitant_is_refused_with_both_potentials(metal, precipitant):
    if metal == "Cu":
        assert not cell("Cu2+/Cu", "Cu2+/Cu").feasible
        return
    with pytest.raises(InputProblems, match=r"stands at -?\d\.\d+ V.* at -?\d\.\d+ V"):
        cementation_demand(clean(metal), Precipitant(precipitant), recovery=0.5)


def test_an_unknown_metal_names_the_nearest():
    with pytest.raises(InputProblems, match=r"unknown metal.*'Cx'.*did you mean C"):
        Solution({"Cx": 1.0}, medium="acid")
