"""Demand for iron and zinc by sink."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import (
    Precipitant,
    Solution,
    as_received,
    cementation_demand,
    water_demand,
)
from leachkin.errors import InputProblems

IRON = Precipitant("iron", purity=0.96, fines=0.05)
PURE_IRON = Precipitant("iron", purity=1.0)
ZINC = Precipitant("zinc", purity=1.0)


def copper_liquor(**changes):
    given = {"metals": {"Cu": 2.036}, "flow_m3_per_h": 797.0, "ferric_g_per_L": 0.9,
             "oxygen_mg_per_L": 6.0}  # fmt: skip
    return Solution(**(given | changes))


def copper_demand(**changes):
    return cementation_demand(copper_liquor(**changes), IRON, recovery=0.95, acid_taken_g_per_L=0.7)


#   Cu g/L, then the net factor at Fe3+ 0, 0.5, 1, 2 and 4 g/L; 95 % of the copper, 0.70 g/L acid
#   taken, no oxygen (computed from molar masses)
IRON_FACTORS = [
    (0.5, "1.72 2.25 2.77 3.83 5.93"),
    (1.0, "1.30 1.56 1.83 2.35 3.41"),
    (2.0, "1.09 1.22 1.35 1.62 2.14"),
    (4.0, "0.98 1.05 1.12 1.25 1.51"),
]


@pytest.mark.parametrize(("copper", "factors"), IRON_FACTORS)
def test_iron_factor_against_ferric_and_grade(copper, factors):
    acid = 0.4 / 0.5694285830818174
    ferric = np.array([0.0, 0.5, 1.0, 2.0, 4.0])
    solution = Solution({"Cu": copper}, ferric_g_per_L=ferric, oxygen_mg_per_L=0.0)
    demand = cementation_demand(solution, PURE_IRON, recovery=0.95, acid_taken_g_per_L=acid)
    expected = [float(factor) for factor in factors.split()]
    assert_allclose(demand.net_factor, expected, rtol=0, atol=0.0051)


def test_copper_scenario_line_by_line():
    demand = copper_demand()
    kilograms = {line.name: float(line.low_kg_per_m3) for line in demand.sinks}
    assert_allclose(kilograms["Cu"], 0.8788 * 0.95 * 2.036, rtol=1e-4)
    assert_allclose(kilograms["Fe3+"], 0.45, rtol=1e-12)
    assert_allclose(kilograms["H2SO4"], 0.5694 * 0.7, rtol=1e-4)
    assert_allclose(kilograms["O2"], 3.4905 * 0.006, rtol=1e-4)
    assert_allclose(demand.net_kg_per_m3, 2.569, rtol=1e-3)
    assert_allclose(demand.net_factor, 1.328, rtol=1e-3)
    assert_allclose(demand.gross_factor, 1.457, rtol=1e-3)
    assert_allclose(demand.received_t_per_month(2.327 * 250_000), 1639, rtol=1e-3)
    assert_allclose(demand.hydrogen_Nm3_per_h, 128, rtol=5e-3)
    assert_allclose(demand.precipitant_gain_g_per_L, 2.57, rtol=1e-3)
    assert_allclose(demand.ferrous_rise_g_per_L, 2.569 + 0.9, rtol=1e-3)
    assert not demand.provisional


def test_sinks_add_up_to_the_total_and_the_table_to_what_is_bought():
    demand = copper_demand()
    assert_allclose(sum(line.low_kg_per_m3 for line in demand.sinks), demand.net_kg_per_m3)
    rows = {row["sink"]: row["low_kg_per_m3"] for row in demand.table().to_records()}
    assert_allclose(
        rows["net"] + rows["not metal"] + rows["fines and rust"], demand.received_kg_per_m3
    )
    assert_allclose(rows["as received"], as_received(2.569341747, 0.96, 0.05), rtol=1e-9)
    assert len(demand.tables()) == 3


def test_pure_copper_alone_takes_0_879():
    clean = Solution({"Cu": 2.0}, ferric_g_per_L=0, oxygen_mg_per_L=0)
    demand = cementation_demand(clean, PURE_IRON, recovery=0.9, acid_taken_g_per_L=0)
    assert_allclose(demand.net_factor, 0.879, rtol=0, atol=5e-4)
    assert float(demand.hydrogen_Nm3_per_m3) == 0.0
    assert demand.hydrogen_Nm3_per_h is None


def gold_liquor(**changes):
    given = {"metals": {"Au": 0.71e-3, "Ag": 16.2e-3, "Cu": 0.066}, "oxygen_mg_per_L": 0.4,
             "free_cyanide_g_per_L": 0.25, "pH": 10.5}  # fmt: skip
    return Solution(**(given | changes))


def test_gold_scenario_zinc_window():
    demand = cementation_demand(gold_liquor(), ZINC, recovery={"Au": 1.0, "Ag": 1.0})
    kilograms = {line.kind: line for line in demand.sinks}
    metals = sum(line.low_kg_per_m3 for line in demand.sinks if line.kind == "metal")
    assert_allclose(1e3 * metals, 5.0, rtol=0, atol=0.05)
    both = metals + kilograms["water"].high_kg_per_m3
    assert_allclose(1e3 * both, 10.1, rtol=0, atol=0.05)
    assert_allclose(1e3 * kilograms["oxygen"].low_kg_per_m3, 1.6, rtol=0, atol=0.05)
    assert_allclose(1e3 * demand.net_kg_per_m3, 6.7, rtol=0, atol=0.05)
    assert_allclose(1e3 * demand.net_high_kg_per_m3, 11.7, rtol=0, atol=0.05)


def test_copper_left_in_the_gold_solution_would_take_more():
    """0.066 g/L of copper would take 34 to 68 g/m3 more."""
    metals = {"Au": 1.0, "Ag": 1.0}
    left = cementation_demand(gold_liquor(), ZINC, recovery=metals)
    taken = cementation_demand(gold_liquor(), ZINC, recovery=metals | {"Cu": 1.0})
    assert_allclose(1e3 * (taken.net_kg_per_m3 - left.net_kg_per_m3), 34, rtol=0, atol=0.5)
    more = taken.net_high_kg_per_m3 - left.net_high_kg_per_m3
    assert_allclose(1e3 * more, 68, rtol=0, atol=0.5)
    assert_allclose(left.barren_g_per_L["Cu"], 0.066)


@pytest.mark.parametrize(
    ("stoichiometry", "zinc_per_gold", "zinc_per_silver"),
    [("2:1", 0.166, 0.303), ("1:1", 0.332, 0.606)],
)
def test_both_stoichiometries_in_print(stoichiometry, zinc_per_gold, zinc_per_silver):
    for metal, factor in (("Au", zinc_per_gold), ("Ag", zinc_per_silver)):
        solution = Solution({metal: 0.005}, oxygen_mg_per_L=0.0, medium="cyanide")
        demand = cementation_demand(solution, ZINC, recovery=1.0, stoichiometry=stoichiometry)
        assert_allclose(demand.net_factor, factor, rtol=0, atol=5e-4)
        assert_allclose(demand.net_kg_per_m3, demand.net_high_kg_per_m3)


@pytest.mark.parametrize(
    ("metal", "grams_per_m3", "oxygen_mg_per_L", "zinc_g_per_m3"),
    [("Au", 5.0, 0.0, 0.83), ("Au", 0.0, 8.26, 33.8), ("Au", 0.0, 0.5, 2.0)],
)
def test_zinc_for_gold_and_for_oxygen(metal, grams_per_m3, oxygen_mg_per_L, zinc_g_per_m3):
    solution = Solution(
        {metal: grams_per_m3 / 1e3}, oxygen_mg_per_L=oxygen_mg_per_L, medium="cyanide"
    )
    demand = cementation_demand(solution, ZINC, recovery=1.0, stoichiometry="2:1")
    half_digit = 0.05 if zinc_g_per_m3 > 1 else 0.005
    assert_allclose(1e3 * demand.net_kg_per_m3, zinc_g_per_m3, rtol=0, atol=half_digit)


def test_190_g_of_gold_take_31_5_g_of_zinc():
    """Gilbert et al., Chemistry: The Science in Context, ch. 3."""
    solution = Solution({"Au": 0.190}, oxygen_mg_per_L=0.0)
    demand = cementation_demand(solution, ZINC, recovery=1.0, stoichiometry="2:1")
    assert_allclose(1e3 * demand.net_kg_per_m3, 31.5 * 1.0, rtol=0, atol=0.05)


def test_zinc_electrolyte_scenario():
    """Cu 0.55, Cd 0.35, Co 0.018, Ni 0.006 g/L: 0.796 g/L of zinc, 159 kg/h at 200 m3/h."""
    metals = {"Cu": 0.55, "Cd": 0.35, "Co": 0.018, "Ni": 0.006}
    solution = Solution(
        metals, flow_m3_per_h=200.0, ferric_g_per_L=0, oxygen_mg_per_L=0, acid_g_per_L=0.1
    )
    demand = cementation_demand(solution, ZINC, recovery=1.0, acid_taken_g_per_L=0)
    parts = {line.name: float(line.low_kg_per_m3) for line in demand.sinks}
    assert_allclose([parts[m] for m in metals], [0.566, 0.204, 0.020, 0.007], rtol=0, atol=5e-4)
    assert_allclose(demand.net_kg_per_m3, 0.796, rtol=1e-3)
    assert_allclose(demand.received_kg_per_h, 159, rtol=0, atol=0.5)
    assert sum("equilibrium is a poor guide" in warning for warning in demand.warnings) == 2


def test_hydrogen_share_between_the_two():
    assert_allclose(water_demand(1.0, [0.0, 0.25, 0.5]), [0.0, 1 / 3, 1.0], rtol=1e-15)
    demand = cementation_demand(
        gold_liquor(metals={"Au": 0.005}), ZINC, recovery=1.0, hydrogen_share=0.25
    )
    assert_allclose(demand.hydrogen_Nm3_per_m3 * 65.38 / 22.414,
                    demand.net_kg_per_m3 - 4.0866 * 0.0004 - 0.005 * 65.38 / 2 / 196.96657,
                    rtol=1e-3)  # fmt: skip


def test_what_was_not_measured_is_named_and_not_zero():
    bare = Solution({"Cu": 2.0})
    demand = cementation_demand(bare, Precipitant("iron"), recovery=0.95)
    states = {line.name: line.state for line in demand.sinks}
    assert states["Fe3+"] == states["H2SO4"] == states["O2"] == "not measured"
    assert demand.provisional
    assert demand.net_high_kg_per_m3 is None
    assert demand.received_kg_per_m3 is None
    assert demand.gross_factor is None
    text = "; ".join(demand.missing)
    for word in ("ferric iron not measured", "acid taken", "oxygen not measured", "purity"):
        assert word in text
    assert "PROVISIONAL" in demand.table().caption
    assert any("arsenic not measured" in warning for warning in demand.warnings)
    assert demand.defaults


def test_ranges_where_a_bound_is_known():
    solution = Solution({"Cu": 2.0}, iron_g_per_L=3.0, acid_g_per_L=5.0)
    demand = cementation_demand(solution, PURE_IRON, recovery=0.95)
    widest = 0.5 * 3.0 + 0.5694286 * 5.0 + 3.4905307 * 0.00826
    assert_allclose(demand.net_high_kg_per_m3 - demand.net_kg_per_m3, widest, rtol=1e-6)
    assert demand.provisional


def test_draws_go_through_elementwise():
    generator = np.random.default_rng(7)
    copper, ferric = generator.uniform(1, 3, 20), generator.uniform(0, 2, 20)
    taken, recovery = generator.uniform(0, 1, 20), generator.uniform(0.8, 0.99, 20)
    batch = cementation_demand(
        copper_liquor(metals={"Cu": copper}, ferric_g_per_L=ferric),
        IRON,
        recovery={"Cu": recovery},
        acid_taken_g_per_L=taken,
    )
    assert batch.net_kg_per_m3.shape == batch.gross_factor.shape == (20,)
    for i in (0, 7, 19):
        one = cementation_demand(
            copper_liquor(metals={"Cu": copper[i]}, ferric_g_per_L=ferric[i]),
            IRON,
            recovery={"Cu": recovery[i]},
            acid_taken_g_per_L=taken[i],
        )
        assert_allclose(batch.net_kg_per_m3[i], one.net_kg_per_m3, rtol=1e-15)
        assert_allclose(batch.hydrogen_Nm3_per_h[i], one.hydrogen_Nm3_per_h, rtol=1e-15)
        assert_allclose(batch.gross_factor[i], one.gross_factor, rtol=1e-15)
    assert batch.table().rows


def test_more_of_any_sink_never_lowers_the_factor():
    generator = np.random.default_rng(11)
    n = 10_000
    base = {"metals": {"Cu": generator.uniform(0.1, 10, n)},
            "ferric_g_per_L": generator.uniform(0, 5, n),
            "oxygen_mg_per_L": generator.uniform(0, 9, n)}  # fmt: skip
    acid = generator.uniform(0, 3, n)

    def factor(**changes):
        more_acid = changes.pop("acid", acid)
        solution = Solution(**(base | changes))
        return cementation_demand(
            solution, IRON, recovery=0.95, acid_taken_g_per_L=more_acid
        ).net_factor

    before = factor()
    assert np.all(factor(acid=acid + 1.0) > before)
    assert np.all(factor(ferric_g_per_L=base["ferric_g_per_L"] + 1.0) > before)
    assert np.all(factor(oxygen_mg_per_L=base["oxygen_mg_per_L"] + 1.0) > before)


def test_recovery_and_barren_say_the_same():
    by_recovery = copper_demand()
    by_barren = cementation_demand(
        copper_liquor(), IRON, barren_g_per_L={"Cu": 0.05 * 2.036}, acid_taken_g_per_L=0.7
    )
    assert_allclose(by_barren.net_kg_per_m3, by_recovery.net_kg_per_m3, rtol=1e-12)
    assert_allclose(by_barren.barren_g_per_L["Cu"], by_recovery.barren_g_per_L["Cu"], rtol=1e-12)


def test_nothing_put_out_has_no_factor():
    demand = cementation_demand(copper_liquor(), IRON, recovery=0.0, acid_taken_g_per_L=0.7)
    assert demand.net_factor is None
    assert demand.gross_factor is None
    assert demand.net_kg_per_m3 > 0


def test_users_own_excess_is_a_line_and_dissolves_nowhere():
    plain = copper_demand()
    more = cementation_demand(
        copper_liquor(), IRON, recovery=0.95, acid_taken_g_per_L=0.7, excess_kg_per_m3=0.5
    )
    assert_allclose(more.net_kg_per_m3 - plain.net_kg_per_m3, 0.5, rtol=1e-12)
    assert_allclose(more.precipitant_gain_g_per_L, plain.precipitant_gain_g_per_L, rtol=1e-12)


def test_silver_by_copper_needs_no_acid_line():
    silver = Solution({"Ag": 1.0}, ferric_g_per_L=0.0, oxygen_mg_per_L=0.0)
    demand = cementation_demand(silver, Precipitant("copper", 0.99), recovery=0.99)
    assert [line.name for line in demand.sinks] == ["Ag", "Fe3+", "O2"]
    assert_allclose(demand.net_factor, 63.546 / 2 / 107.8682, rtol=1e-6)


def test_zinc_dust_oxide_counts_as_not_metal():
    dust = Precipitant("zinc dust", purity=0.97, metallic=0.96)
    assert_allclose(dust.active_share, 0.97 * 0.96, rtol=1e-15)
    assert (dust.kind, dust.metal) == ("zinc", "Zn")


def test_results_are_frozen():
    with pytest.raises(dataclasses.FrozenInstanceError):
        copper_demand().missing = ()


REFUSED = [
    (lambda: Solution({"Cu": -1.0}), r"metals\['Cu'\]: -1 g/L.*0 g/L or more"),
    (lambda: Solution({"Cu": np.nan}), "not a finite number"),
    (lambda: Solution({"Cu": 1.0}, flow_m3_per_h=0.0), "flow_m3_per_h: 0 m3/h.*above 0"),
    (lambda: Solution({"Cu": 1.0}, pH=14.5), "pH: 14.5.*0 to 14"),
    (lambda: Solution({"Cu": 1.0}, oxygen_mg_per_L=-2), "oxygen_mg_per_L: -2 mg/L"),
    (lambda: Solution({"Xx": 1.0}), "unknown metal in a solution of the kind 'acid': 'Xx'"),
    (lambda: Solution({"Cu": 1.0}, ferric_g_per_L=2, iron_g_per_L=1), "more ferric iron than iron"),
    (lambda: Solution({"Cu": 1.0}, medium="ammonia"), "medium: 'ammonia'"),
    (lambda: Precipitant("irn"), "unknown precipitant 'irn'.*did you mean iron"),
    (lambda: Precipitant("iron", purity=96.0), "purity: 96.0.*write 96 % as 0.96"),
    (lambda: Precipitant("iron", fines=1.0), "fines: 1.0"),
    (lambda: cementation_demand(copper_liquor(), IRON), "no recovery, no barren"),
    (lambda: cementation_demand(copper_liquor(), IRON, recovery=95.0), "95 for Cu.*95 % is 0.95"),
    (lambda: cementation_demand(copper_liquor(), IRON, recovery={"Zn": 0.5}), "unknown metal of"),
    (lambda: cementation_demand(copper_liquor(), IRON, barren_g_per_L={"Cu": 3.0}), "3 g/L Cu"),
    (lambda: cementation_demand(copper_liquor(acid_g_per_L=0.5), IRON, recovery=0.9,
                                acid_taken_g_per_L=0.7), "up to the free acid"),
    (lambda: cementation_demand(copper_liquor(), IRON, recovery=0.9, acid_taken_g_per_L=-1),
     "acid_taken_g_per_L: -1 g/L"),
    (lambda: cementation_demand(copper_liquor(), IRON, recovery=0.9, ferric_taken=1.5),
     "ferric_taken: 1.5"),
    (lambda: cementation_demand(gold_liquor(), ZINC, recovery=0.9, stoichiometry="3:1"),
     "unknown stoichiometry '3:1'"),
    (lambda: cementation_demand(gold_liquor(), ZINC, recovery=0.9, hydrogen_share=1.0),
     "hydrogen_share: 1.0"),
    (lambda: cementation_demand(gold_liquor(), IRON, recovery=0.9),
     "iron in a solution of the kind 'cyanide'. Allowed: zinc"),
    (lambda: copper_demand().received_t_per_month(0.0), "solution_m3_per_month: 0 m3"),
]  # fmt: skip


@pytest.mark.parametrize(("call", "message"), REFUSED)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
