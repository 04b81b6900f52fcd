"""The mixed potential: balance, bracket, limits, and that no oxidant lowers the factor."""

import dataclasses
import math

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from leachkin.cementation import (
    NO_BUDGET,
    ElectrodeKinetics,
    Precipitant,
    Solution,
    electrode_kinetics,
    mixed_potential,
)
from leachkin.errors import InputProblems

IRON, ZINC = Precipitant("iron"), Precipitant("zinc")


def liquors(n, seed=1):
    generator = np.random.default_rng(seed)
    return {
        "metals": {"Cu": generator.uniform(0.02, 10.0, n)},
        "ferric_g_per_L": generator.uniform(0.0, 8.0, n),
        "oxygen_mg_per_L": generator.uniform(0.0, 9.0, n),
        "pH": generator.uniform(0.2, 7.0, n),
    }


def factor(given, **changes):
    solution = Solution(**(given | changes))
    return mixed_potential(solution, IRON, 1e-5, activities=False).factor_kg_per_kg


def test_currents_balance_and_the_potential_lies_in_its_bracket():
    solution = Solution(**liquors(20_000))
    found = mixed_potential(solution, IRON, 1e-5)
    assert found.imbalance.max() <= 1e-10
    total = sum(found.currents_A_per_m2.values())
    assert_allclose(total, found.anodic_A_per_m2, rtol=1e-10)
    own = found.state.precipitant.potential.value_V
    assert np.all(found.potential_V >= own)
    assert np.all(found.potential_V < 1.3)
    assert all(np.all(current >= 0.0) for current in found.currents_A_per_m2.values())


@pytest.mark.parametrize("seed", range(4))
def test_balance_over_wild_kinetics(seed):
    """Exchange currents over eight and more decades: the root is always found and balances."""
    generator = np.random.default_rng(seed)
    n = 3_000
    wild = ElectrodeKinetics(
        10.0 ** generator.uniform(-5, 3, n), generator.uniform(0.03, 0.2, n),
        10.0 ** generator.uniform(-9, 3, n), 10.0 ** generator.uniform(-9, 3, n),
        generator.uniform(0.03, 0.2, n), generator.uniform(0, 1, n),
        10.0 ** generator.uniform(-9, 3, n), generator.uniform(0.03, 0.2, n),
    )  # fmt: skip
    for precipitant, medium in ((IRON, {}), (ZINC, {}), (ZINC, CYANIDE)):
        given = liquors(n, seed) if not medium else medium | {"oxygen_mg_per_L": np.full(n, 3.0)}
        speeds = 10.0 ** generator.uniform(-7, -3, n)
        found = mixed_potential(Solution(**given), precipitant, speeds, wild)
        assert found.imbalance.max() <= 1e-10


CYANIDE = {"metals": {"Au": 2e-3, "Ag": 0.02}, "free_cyanide_g_per_L": 0.3, "pH": 10.5}


def test_limit_without_ferric_oxygen_and_acid():
    """Copper alone: 0.879 kg/kg."""
    solution = Solution({"Cu": 2.0}, ferric_g_per_L=0.0, oxygen_mg_per_L=0.0, pH=7.0)
    found = mixed_potential(solution, IRON, 1e-5)
    assert_allclose(found.factor_kg_per_kg, 0.879, rtol=0, atol=1e-3)
    assert_allclose(found.shares["Cu"], 1.0, rtol=0, atol=1e-3)


def test_feed_end_of_a_ferric_liquor():
    """1 g/L copper, 2 g/L ferric iron, pH 2, equal transfer: a factor near 1.9."""
    solution = Solution({"Cu": 1.0}, ferric_g_per_L=2.0, oxygen_mg_per_L=0.0, pH=2.0)
    assert_allclose(mixed_potential(solution, IRON, 1e-5).factor_kg_per_kg, 1.9, rtol=0, atol=0.05)


def test_more_of_any_oxidant_never_lowers_the_factor():
    """10,000 solutions at fixed activities."""
    given = liquors(10_000, 7)
    before = factor(given)
    more = {
        "ferric_g_per_L": given["ferric_g_per_L"] + 0.5,
        "oxygen_mg_per_L": given["oxygen_mg_per_L"] + 2.0,
        "pH": np.maximum(given["pH"] - 0.5, 0.0),
    }
    for name, value in more.items():
        after = factor(given, **{name: value})
        assert np.all(after >= before * (1.0 - 1e-12)), name
    assert np.all(factor(given, **more) > before)


def test_less_copper_raises_the_factor():
    given = liquors(2_000, 3)
    given["ferric_g_per_L"] = given["ferric_g_per_L"] + 0.1
    assert np.all(factor(given, metals={"Cu": 0.5 * given["metals"]["Cu"]}) > factor(given))


def test_against_a_scalar_root_finder():
    """The same balance written again in plain floats, by brentq."""
    given = liquors(40, 9)
    found = mixed_potential(Solution(**given), IRON, 1e-5, activities=False)
    held = found.kinetics
    F, RT_F, ln10 = 96485.33212331001, 8.31446261815324 * 298.15 / 96485.33212331001, math.log(10)
    iron = 1e-6
    own = -0.4089 + RT_F / 2 * math.log(iron)
    beta, betaH = held.dissolution_slope_V / ln10, held.hydrogen_slope_V / ln10
    i_H = float(held.hydrogen_A_per_m2)
    for i in range(40):
        cu, fe = given["metals"]["Cu"][i] / 63.546, given["ferric_g_per_L"][i] / 55.845
        ox, pH = given["oxygen_mg_per_L"][i] / 31.998e3, given["pH"][i]
        e_cu = 0.3394 + RT_F / 2 * math.log(cu)

        def gap(E, cu=cu, fe=fe, ox=ox, pH=pH, e_cu=e_cu):
            anodic = held.dissolution_A_per_m2 * math.exp((E + 0.4089) / beta)
            anodic *= 1 - math.exp(-2 * (E - own) / RT_F)
            i_cu = 2 * F * 0.01 * cu * max(0.0, 1 - math.exp(2 * (E - e_cu) / RT_F))
            i_fe = F * 0.01 * fe * max(0.0, 1 - math.exp((E - 0.769) / RT_F))
            tafel = i_H * math.exp((-ln10 * RT_F * pH - E) / betaH)
            limit = F * 0.01 * 10.0**-pH
            i_h = tafel / (1 + tafel / limit)
            i_h += i_H * math.exp((-ln10 * RT_F * 13.998 - E) / betaH)
            e_o = 1.2287 - ln10 * RT_F * pH
            drive = held.oxygen_A_per_m2 * math.exp((e_o - E) / (held.oxygen_slope_V / ln10))
            i_o = 4 * F * 0.01 * ox
            i_o = i_o * drive / (drive + i_o) if i_o else 0.0
            return anodic - i_cu - i_fe - i_h - i_o

        root = brentq(gap, own, 1.5, xtol=1e-14, rtol=1e-14)
        assert_allclose(found.potential_V[i], root, rtol=0, atol=2e-7)


def test_hydrogen_is_slow_on_bare_zinc_and_faster_on_the_deposit():
    solution = Solution({"Cu": 0.5}, pH=3.5, ferric_g_per_L=0.0, oxygen_mg_per_L=0.0)
    shares = [
        float(mixed_potential(solution, ZINC, 1e-6, electrode_kinetics(ZINC, {"Cu": 1.0}, share))
              .shares["hydrogen"])
        for share in (0.0, 0.1, 1.0)
    ]  # fmt: skip
    assert shares[0] < shares[1] < shares[2]


def test_more_free_cyanide_sends_more_zinc_to_water():
    """Viramontes Gamboa et al. 2005: at high free cyanide half of the zinc goes to water."""
    levels = np.geomspace(0.05, 5.0, 20)
    given = CYANIDE | {"free_cyanide_g_per_L": levels, "oxygen_mg_per_L": 0.1}
    found = mixed_potential(Solution(**given), ZINC, {"CN-": 3e-5})
    assert np.all(np.diff(found.shares["hydrogen"]) > 0.0)


def test_too_little_cyanide_lets_the_potential_rise():
    few = Solution(**(CYANIDE | {"free_cyanide_g_per_L": 1e-3, "pH": 9.0, "oxygen_mg_per_L": 8.0}))
    many = Solution(**(CYANIDE | {"oxygen_mg_per_L": 8.0}))
    assert (
        mixed_potential(few, ZINC, 2e-5).potential_V
        > mixed_potential(many, ZINC, 2e-5).potential_V + 0.2
    )


def test_transport_by_species_and_by_diffusion():
    solution = Solution({"Cu": 1.0}, ferric_g_per_L=1.0, oxygen_mg_per_L=6.0, pH=2.0)
    equal = mixed_potential(solution, IRON, 1e-5)
    scaled = mixed_potential(solution, IRON, {"Cu2+": 1e-5})
    assert_allclose(scaled.transport_m_per_s["Fe3+"], 1e-5 * (0.604 / 0.714) ** (2 / 3), rtol=1e-9)
    assert scaled.shares["Fe3+"] < equal.shares["Fe3+"]
    own = mixed_potential(solution, IRON, {"Cu2+": 1e-5, "Fe3+": 2e-5})
    assert own.shares["Fe3+"] > equal.shares["Fe3+"]


def test_doubling_transfer_keeps_the_shares_of_limited_sinks():
    solution = Solution({"Cu": 2.0}, ferric_g_per_L=1.0, oxygen_mg_per_L=6.0, pH=5.0)
    slow, fast = (mixed_potential(solution, IRON, k) for k in (1e-5, 2e-5))
    assert_allclose(fast.anodic_A_per_m2 / slow.anodic_A_per_m2, 2.0, rtol=1e-3)
    assert_allclose(fast.shares["Fe3+"], slow.shares["Fe3+"], rtol=1e-3)


def test_nothing_above_the_metal_means_nothing_flows():
    solution = Solution({"Zn": 1.0}, ferric_g_per_L=0.0, oxygen_mg_per_L=0.0)
    found = mixed_potential(solution, IRON, 1e-5)
    assert found.anodic_A_per_m2 == 0.0
    assert found.factor_kg_per_kg == np.inf
    assert found.imbalance == 0.0


def test_masses_follow_the_currents():
    solution = Solution({"Cu": 1.0}, ferric_g_per_L=1.0, oxygen_mg_per_L=0.0, pH=2.0)
    found = mixed_potential(solution, IRON, 1e-5)
    copper = found.currents_A_per_m2["Cu"] * 3600 * 63.546 / (2 * 96485.33212)
    assert_allclose(found.metal_g_per_h_m2["Cu"], copper, rtol=1e-7)
    assert_allclose(
        found.factor_kg_per_kg, found.precipitant_g_per_h_m2 / found.metal_g_per_h_m2["Cu"],
        rtol=1e-14,
    )  # fmt: skip


def test_the_result_says_that_it_sets_no_budget_and_what_was_not_measured():
    found = mixed_potential(Solution({"Cu": 1.0}, pH=2.0), IRON, 1e-5)
    assert NO_BUDGET in found.table().caption
    assert "sets no budget" in NO_BUDGET
    assert any("ferric iron not measured" in note for note in found.notes)
    assert any("oxygen not measured" in note for note in found.notes)
    assert found.kinetics.defaults
    rows = found.table().to_records()
    assert rows[0]["share"] >= rows[-1]["share"]


def test_a_batch_is_its_members():
    given = liquors(50, 4)
    batch = mixed_potential(Solution(**given), IRON, 1e-5)
    for i in (0, 17, 49):
        one = {name: value[i] for name, value in given.items() if name != "metals"}
        one["metals"] = {"Cu": given["metals"]["Cu"][i]}
        alone = mixed_potential(Solution(**one), IRON, 1e-5)
        assert_allclose(batch.potential_V[i], alone.potential_V, rtol=0, atol=1e-10)


REFUSED = [
    (lambda: mixed_potential(Solution({"Cu": 1.0}), IRON, 0.0), "transport_m_per_s: 0 m/s"),
    (lambda: mixed_potential(Solution({"Cu": 1.0}), IRON, {}), "an empty mapping"),
    (lambda: mixed_potential(Solution({"Cu": 1.0}), IRON, {"Cu3+": 1e-5}), "unknown species"),
    (lambda: mixed_potential(Solution(**CYANIDE), IRON, 1e-5), "iron in a solution of the kind"),
    (lambda: Solution({"Cu": 1.0}, pH=-1.0), "pH"),
    (lambda: electrode_kinetics(IRON, {"Cu": 1.0}, 1.5), "deposit_share: 1.5"),
    (lambda: dataclasses.replace(electrode_kinetics(IRON), dissolution_A_per_m2=0.0),
     "dissolution_A_per_m2: 0"),
    (lambda: dataclasses.replace(electrode_kinetics(IRON), hydrogen_factor=-1.0),
     "hydrogen_factor: -1"),
]  # fmt: skip


@pytest.mark.parametrize(("call", "message"), REFUSED)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
