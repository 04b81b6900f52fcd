"""Formulas, molar masses and stoichiometric factors against print and an independent library."""

import periodictable
import pytest
from numpy.testing import assert_allclose

from leachkin.chemistry import (
    canonical_species,
    charge_of,
    electron_factor,
    factor,
    hydrogen_Nm3_per_kg,
    molar_mass,
    named_factor,
    parse_formula,
    stoichiometric_uses,
    stoichiometry_table,
)
from leachkin.errors import InputProblems
from leachkin.tables import read_table

FORMULAS = ["H2SO4", "Ca(OH)2", "NaCN", "KAl3(SO4)2(OH)6", "CuFeS2", "Al2O3", "NaClO3", "Pb(NO3)2"]


@pytest.mark.parametrize("formula", FORMULAS)
def test_molar_mass_agrees_with_an_independent_library(formula):
    assert_allclose(molar_mass(formula), periodictable.formula(formula).mass, rtol=2e-4, atol=0)


def test_every_atomic_mass_agrees_with_an_independent_library():
    for row in read_table("atomic_masses").rows:
        other = getattr(periodictable, row.text("element"))
        assert_allclose(row.number("mass_g_per_mol"), other.mass, rtol=2e-4, atol=0)
        assert row.text("name") == {"aluminum": "aluminium", "cesium": "caesium"}.get(
            other.name, other.name
        )


def test_sulfur_is_32_06():
    assert molar_mass("S") == 32.06


def test_hydrates_and_nested_brackets():
    assert parse_formula("CuSO4.5H2O") == {"Cu": 1, "S": 1, "O": 9, "H": 10}
    assert parse_formula("Fe4(Fe(CN)6)3") == {"Fe": 7, "C": 18, "N": 18}


@pytest.mark.parametrize(
    ("species", "charge"),
    [("Cu2+", 2), ("Ag+", 1), ("Ag(CN)2-", -1), ("Cu(CN)3 2-", -2), ("SO4 2-", -2), ("OH-", -1),
     ("Hg2 2+", 2), ("H2O", 0), ("Fe(CN)6^4-", -4)],
)  # fmt: skip
def test_charges(species, charge):
    assert charge_of(species) == charge


def test_a_charge_moves_no_mass():
    assert molar_mass("Cu(CN)3 2-") == molar_mass("Cu(CN)3")
    assert molar_mass("Fe3+") == molar_mass("Fe")


@pytest.mark.parametrize(
    ("written", "canonical"),
    [("Cu+2", "Cu2+"), ("Cu(CN)3-2", "Cu(CN)3 2-"), ("Zn(CN)4^2-", "Zn(CN)4 2-"), ("H+1", "H+")],
)
def test_other_spellings_of_ions(written, canonical):
    assert canonical_species(written) == canonical


@pytest.mark.parametrize("text", ["", "h2so4", "Ca(OH", "Ca)OH(2", "H2SO4?", "Ca()2.", "()"])
def test_what_is_no_formula_is_refused(text):
    with pytest.raises(InputProblems, match="formula"):
        molar_mass(text)


def test_unknown_element_names_the_nearest():
    with pytest.raises(InputProblems, match=r"unknown element 'Zm'.*Zn"):
        molar_mass("Zm")


def test_a_charge_run_into_a_subscript_is_refused():
    with pytest.raises(InputProblems, match='write a charge after a space, as "SO4 2-"'):
        molar_mass("SO42-")


#   use of the table, kg/kg as the trade prints it to the digits shown (from molar masses, S 32.06)
FACTORS = [
    ("H2SO4 per Cu", "1.543"), ("H2SO4 per Zn", "1.500"), ("H2SO4 per CaCO3", "0.980"),
    ("H2SO4 per Ni", "1.671"), ("H2SO4 per Mg", "4.035"), ("H2SO4 per Mn", "1.785"),
    ("H2SO4 per Al", "5.452"), ("H2SO4 per Fe3+ dissolved", "2.634"),
    ("H2SO4 returned per Fe as jarosite", "1.756"),
    ("CaO per H2SO4", "0.572"), ("Ca(OH)2 per H2SO4", "0.755"), ("CaCO3 per H2SO4", "1.021"),
    ("Fe3+ per Cu, Cu2S", "1.758"), ("Fe3+ per Cu, CuFeS2", "3.515"),
    ("Fe3+ per Zn, ZnS", "1.708"), ("Fe3+ per U", "0.469"),
    ("O2 per Fe2+ re-oxidised", "0.143"), ("H2SO4 per Fe2+ re-oxidised", "0.878"),
    ("MnO2 per Fe2+ oxidised", "0.778"), ("NaClO3 per Fe2+ oxidised", "0.318"),
    ("H2O2 per Fe2+ oxidised", "0.305"), ("H2SO4 per Fe2+ oxidised by MnO2", "1.756"),
    ("H2SO4 per Fe2+ oxidised by NaClO3", "0.878"), ("H2SO4 made per S", "3.06"),
    ("NaCN per Cu, Cu(CN)3 2-", "2.314"), ("NaCN per Cu, Cu2+ reduced", "2.70"),
    ("NaCN per Cu, Cu(CN)4 3-", "3.085"), ("NaCN per S to SCN-", "1.529"),
    ("NaCN per Fe to ferrocyanide", "5.265"), ("NaCN per Au", "0.498"), ("NaCN per Ag", "0.909"),
    ("NaCN per Zn", "2.998"), ("O2 per Au", "0.0406"),
    ("Fe per Cu", "0.879"), ("Fe per Fe3+", "0.500"), ("Fe per H2SO4", "0.569"),
    ("Fe per O2", "3.491"),
    ("Zn per Cu", "1.029"), ("Zn per Cd", "0.582"), ("Zn per Co", "1.109"),
    ("Zn per Ni", "1.114"), ("Zn per Au, 2:1", "0.166"), ("Zn per Ag, 2:1", "0.303"),
    ("Zn per Au, 1:1", "0.332"), ("Zn per Ag, 1:1", "0.606"), ("Zn per O2", "4.087"),
    ("Ag per Fe", "3.86"), ("CN per NaCN", "0.531"), ("NaCN per KCN", "0.753"),
    ("Ca(OH)2 per CaO", "1.321"), ("NaOH per Al2O3 in circulation", "0.785"),
]  # fmt: skip


@pytest.mark.parametrize(("use", "printed"), FACTORS)
def test_named_factors_to_the_digits_shown(use, printed):
    half_digit = 0.5 * 10.0 ** -len(printed.split(".")[1])
    assert_allclose(named_factor(use), float(printed), rtol=0, atol=half_digit * 1.000001)


def test_every_use_of_the_table_can_be_computed():
    uses = stoichiometric_uses()
    assert len({use.use for use in uses}) == len(uses)
    assert all(use.kg_per_kg > 0 for use in uses)
    assert len(stoichiometry_table().rows) == len(uses)


def test_unknown_use_names_the_nearest():
    with pytest.raises(InputProblems, match="did you mean .*H2SO4 per Cu"):
        named_factor("H2SO4 per Copper")


def test_factor_and_its_inverse():
    assert_allclose(factor("Fe", "Cu", 2, 3) * factor("Cu", "Fe", 3, 2), 1.0, rtol=1e-15)
    with pytest.raises(InputProblems, match="moles_reagent: 0"):
        factor("Fe", "Cu", 0)


def test_electron_balance_gives_the_same_factors():
    for use, metal, taker, electrons in [
        ("Fe per Cu", "Fe", "Cu", 2), ("Fe per Fe3+", "Fe", "Fe", 1),
        ("Fe per H2SO4", "Fe", "H2SO4", 2), ("Zn per O2", "Zn", "O2", 4),
        ("Zn per Au, 2:1", "Zn", "Au", 1), ("Zn per Cd", "Zn", "Cd", 2),
    ]:  # fmt: skip
        assert_allclose(electron_factor(metal, 2, taker, electrons), named_factor(use), rtol=1e-14)


def test_hydrogen_per_kilogram_of_iron():
    assert_allclose(hydrogen_Nm3_per_kg("Fe"), 0.401, rtol=0, atol=0.0005)
