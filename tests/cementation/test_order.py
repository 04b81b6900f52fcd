"""Couples of a solution in order of potential at its own activities, and what is left."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import (
    Precipitant,
    Solution,
    complex_share,
    equilibrium_residual_g_per_L,
    liquor_state,
    solution_order,
)
from leachkin.chemistry import (
    acid_pH,
    complexed_potential,
    molar_mass,
    nernst,
    potential_range,
    speciate,
)
from leachkin.errors import InputProblems

IRON, ZINC, COPPER = Precipitant("iron"), Precipitant("zinc"), Precipitant("copper")
COPPER_LIQUOR = Solution(
    {"Cu": 2.036, "Ni": 0.1, "Zn": 1.0}, ferric_g_per_L=0.9, acid_g_per_L=5.0, oxygen_mg_per_L=6.0
)
GOLD_LIQUOR = Solution(
    {"Au": 0.71e-3, "Ag": 16.2e-3, "Cu": 0.066}, oxygen_mg_per_L=0.4, free_cyanide_g_per_L=0.25,
    pH=10.5,
)  # fmt: skip


def test_copper_liquor_on_iron():
    found = solution_order(COPPER_LIQUOR, IRON, 2.57)
    assert found.metals == ("Cu", "Ni", "Zn")
    assert [row.couple for row in found.rows][:2] == ["O2,H+/H2O", "Fe3+/Fe2+"]
    assert found.of("Cu").verdict == "put out"
    assert found.of("Zn").verdict == "stays"
    assert found.of("Fe").role == "precipitant"
    assert "surface reaction" in found.of("Ni").note
    assert found.of("Cu").residual_high_g_per_L < 1e-20


def test_cadmium_on_iron_depends_on_the_source():
    """Cadmium -0.40 V, iron -0.41 to -0.47 V by source."""
    found = solution_order(Solution({"Cd": 0.5}, pH=3.0), IRON, 0.5)
    assert found.of("Cd").verdict == "depends on the source"
    assert found.of("Cd").residual_low_g_per_L < 0.5 * found.of("Cd").residual_high_g_per_L


def test_gold_liquor_on_zinc_at_its_free_cyanide():
    found = solution_order(GOLD_LIQUOR, ZINC, 0.01)
    assert found.metals == ("Ag", "Au", "Cu")
    assert all(found.of(metal).verdict == "put out" for metal in found.metals)
    assert found.of("Au").low_V < found.of("Au").high_V


def test_potentials_are_nernst_at_the_activity():
    plain = solution_order(COPPER_LIQUOR, IRON, activities=False)
    expected = nernst(0.3394, 2, molar_mass("Cu") / 2.036)
    assert_allclose(plain.of("Cu").potential_V, expected, rtol=0, atol=1e-12)
    state = liquor_state(COPPER_LIQUOR, IRON)
    ion = state.metals["Cu"]
    assert ion.activity < ion.mol_per_L
    assert_allclose(
        ion.potential.value_V, potential_range("Cu2+/Cu", ion.activity).value_V, rtol=1e-14
    )


def test_residual_is_where_the_metal_meets_the_precipitant():
    state = liquor_state(COPPER_LIQUOR, IRON, 2.57)
    left = equilibrium_residual_g_per_L(
        state.metals["Ni"], state.precipitant.potential.value_V, 298.15
    )
    met = Solution({"Cu": 2.036, "Ni": float(left), "Zn": 1.0}, ferric_g_per_L=0.9,
                   acid_g_per_L=5.0)  # fmt: skip
    again = liquor_state(met, IRON, 2.57)
    assert_allclose(
        again.metals["Ni"].potential.value_V, again.precipitant.potential.value_V, atol=2e-4, rtol=0
    )


@pytest.mark.parametrize("strength", [0.1, 1.0])
def test_zinc_in_cyanide_is_at_the_potential_of_its_bare_ion(strength):
    zinc = Solution({"Ag": 0.02, "Zn": 0.05}, free_cyanide_g_per_L=strength, pH=11.0)
    state = liquor_state(zinc, ZINC, activities=False)
    ligand = float(state.cyanide_mol_per_L)
    side = 1 + sum(10.0**b * ligand**n for n, b in {2: 11.071, 3: 16.048, 4: 16.715}.items())
    bare = nernst(-0.7623, 2, side / (0.05 / molar_mass("Zn")))
    assert_allclose(state.precipitant.potential.value_V, bare, rtol=0, atol=1e-3)


def test_complex_shares_are_those_of_speciation():
    found = speciate({"CN-": 0.02, "Cu+": 1e-3}, 10.8, activities=False)
    share = complex_share("Cu(CN)3 2-", found.of("CN-"))
    assert_allclose(share, found.of("Cu(CN)3 2-") / 1e-3, rtol=1e-8)
    assert complex_share("Cu2+", 0.1) == 1.0


def test_copper_in_cyanide_is_at_the_potential_of_its_bare_ion():
    state = liquor_state(Solution({"Cu": 0.066}, free_cyanide_g_per_L=0.25, pH=10.5), ZINC,
                         activities=False)  # fmt: skip
    ion = state.metals["Cu"]
    by_complex = complexed_potential(ion.couple, ion.activity, state.cyanide_mol_per_L)
    beta = {2: 21.9145, 3: 27.2145, 4: 28.7145}
    side = 1 + sum(10.0**b * float(state.cyanide_mol_per_L) ** n for n, b in beta.items())
    bare = nernst(0.5182, 1, side / (0.066 / molar_mass("Cu")))
    assert_allclose(by_complex.value_V, bare, rtol=0, atol=1e-3)


def test_acid_of_a_liquor_agrees_with_the_full_speciation():
    state = liquor_state(COPPER_LIQUOR, IRON)
    cations = 2.036 / molar_mass("Cu") + 0.1 / molar_mass("Ni") + 1.0 / molar_mass("Zn")
    other = cations + 1.5 * 0.9 / molar_mass("Fe")
    assert_allclose(state.pH, acid_pH(5.0, other).pH, rtol=0, atol=0.01)
    assert_allclose(
        state.hydrogen_mol_per_L + state.bisulphate_mol_per_L, 2 * 5.0 / molar_mass("H2SO4"),
        rtol=1e-12,
    )  # fmt: skip


def test_what_is_not_known_is_said():
    bare = solution_order(Solution({"Cu": 2.0}), IRON)
    assert bare.pH is None
    assert any("no hydrogen is counted" in note for note in bare.notes)
    gold = solution_order(Solution({"Au": 1e-3}), ZINC)
    assert any("potentials stand at 1 mol/L" in note for note in gold.notes)
    assert any("pH is not known" in note for note in gold.notes)


def test_a_pH_that_the_acid_contradicts_is_said():
    found = solution_order(Solution({"Cu": 2.0}, acid_g_per_L=5.0, pH=3.0), IRON)
    assert any("the acid is used" in note for note in found.notes)


def test_strong_liquors_say_where_activities_end():
    found = solution_order(Solution({"Cu": 0.5, "Zn": 140.0}, pH=4.0), ZINC)
    assert any("end at 0.5 mol/L" in note for note in found.notes)


def test_arrays_go_through_and_tables_show_every_couple():
    many = Solution({"Cu": np.linspace(0.5, 3.0, 5)}, ferric_g_per_L=1.0, pH=np.full(5, 2.0))
    state = liquor_state(many, IRON, np.linspace(0.0, 2.0, 5))
    assert state.metals["Cu"].potential.value_V.shape == (5,)
    table = solution_order(COPPER_LIQUOR, IRON).table()
    assert len(table.rows) == 7
    assert "noblest first" in table.caption


@pytest.mark.parametrize(
    ("call", "message"),
    [(lambda: solution_order(GOLD_LIQUOR, IRON), "iron in a solution of the kind 'cyanide'"),
     (lambda: solution_order(COPPER_LIQUOR, IRON).of("Ag"), "metal: Ag")],
)  # fmt: skip
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
