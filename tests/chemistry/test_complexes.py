"""Potentials at actual activities, complexes at the free ligand that is there, and their spread."""

import csv
from importlib import resources

import chemicals
import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.chemistry import (
    complexed_potential,
    electrons_of,
    ion_of,
    is_complex,
    is_metal_couple,
    nernst,
    potential_range,
    potentials_of,
    speciate,
    standard_potential,
)
from leachkin.errors import InputProblems

#   couple, registry number of the metal, key of the ion, charge
METALS = [("Cu2+/Cu", "7440-50-8", "Cu+2", 2), ("Zn2+/Zn", "7440-66-6", "Zn+2", 2),
          ("Ag+/Ag", "7440-22-4", "Ag+", 1), ("Fe2+/Fe", "7439-89-6", "Fe+2", 2),
          ("Pb2+/Pb", "7439-92-1", "Pb+2", 2), ("Cd2+/Cd", "7440-43-9", "Cd+2", 2),
          ("Ni2+/Ni", "7440-02-0", "Ni+2", 2), ("Co2+/Co", "7440-48-4", "Co+2", 2),
          ("Hg2+/Hg", "7439-97-6", "Hg+2", 2), ("Al3+/Al", "7429-90-5", "Al+3", 3),
          ("Mg2+/Mg", "7439-95-4", "Mg+2", 2)]  # fmt: skip


def ion_entropies():
    name = "CRC Thermodynamic Properties of Aqueous Ions.tsv"
    text = resources.files("chemicals").joinpath("Electrolytes", name).read_text(encoding="utf-8")
    rows = csv.DictReader(text.splitlines(), delimiter="\t")
    return {row["Formula"]: float(row["S(aq)"]) for row in rows if row["S(aq)"]}


@pytest.mark.parametrize(("couple", "metal", "ion", "charge"), METALS)
def test_slopes_from_entropies_of_an_independent_library(couple, metal, ion, charge):
    """``chemicals``: CRC entropies of ions and elements; dE0/dT = dS/(n F)."""
    solid = chemicals.S0s(metal) or chemicals.S0l(metal)
    change = solid - ion_entropies()[ion] - 0.5 * charge * chemicals.S0g("1333-74-0")
    expected = 1e3 * change / (charge * 96485.33212)
    assert_allclose(potentials_of(couple).default.dE0_dT_mV_per_K, expected, rtol=0, atol=2e-3)


def test_silver_cyanide_from_the_bare_ion_and_its_constant():
    """-0.41 V at 1 mol/L of each; the printed -0.31 V takes no part."""
    found = complexed_potential("Ag(CN)2-/Ag", 1.0, 1.0)
    assert_allclose(found.value_V, -0.41, rtol=0, atol=0.005)
    assert found.high_V < -0.40


def test_complex_at_the_free_ligand_is_the_bare_ion_at_its_activity():
    """The same metal by the complex and by what speciation leaves of the bare ion."""
    found = speciate({"CN-": np.geomspace(1e-3, 0.1, 7), "Ag+": 1e-4}, pH=10.8)
    by_complex = complexed_potential(
        "Ag(CN)2-/Ag", found.activity_of("Ag(CN)2-"), found.activity_of("CN-")
    )
    by_ion = potential_range("Ag+/Ag", found.activity_of("Ag+"))
    assert_allclose(by_complex.value_V, by_ion.value_V, rtol=0, atol=1e-9)


def test_more_free_cyanide_lowers_silver_by_two_slopes_a_decade():
    low, high = complexed_potential("Ag(CN)2-/Ag", 1e-4, [1e-3, 1e-2]).value_V
    assert_allclose(low - high, 2 * 0.05916, rtol=0, atol=1e-4)


def test_gold_takes_the_printed_value_and_carries_the_constants_from_memory_as_spread():
    gold = complexed_potential("Au(CN)2-/Au", 1.0, 1.0)
    assert gold.value_V == -0.60
    assert gold.high_V - gold.low_V > 0.1
    assert "from_memory" in gold.sources


def test_range_over_sources_moves_with_the_activity():
    one, thin = potential_range("Fe2+/Fe"), potential_range("Fe2+/Fe", 1e-4)
    assert (one.low_V, one.high_V) == (-0.4743, -0.4089)
    assert_allclose(one.value_V - thin.value_V, 4 * 0.05916 / 2, rtol=0, atol=1e-4)
    assert_allclose(thin.high_V - thin.low_V, one.high_V - one.low_V, rtol=1e-12)


def test_range_is_nernst_at_the_default():
    kelvin = np.array([283.15, 298.15, 323.15])
    found = potential_range("Fe3+/Fe2+", 0.02, 0.001, kelvin)
    standard = [standard_potential("Fe3+/Fe2+", T) for T in kelvin]
    assert_allclose(found.value_V, nernst(standard, 1, 0.05, kelvin), rtol=0, atol=1e-12)


def test_a_source_without_slope_is_held_and_said():
    assert any("held at its value" in note for note in
               complexed_potential("Au(CN)2-/Au", 1.0, 1.0, 310.0).notes)  # fmt: skip
    assert potential_range("Cu2+/Cu", 1.0, 1.0, 310.0).notes == ()


def test_what_a_couple_is():
    assert ion_of("O2,H+/H2O") == "O2"
    assert is_complex("Cu(CN)3 2-/Cu")
    assert not is_complex("Cu2+/Cu")
    assert is_metal_couple("Zn(CN)4 2-/Zn")
    assert not is_metal_couple("Fe3+/Fe2+")
    assert electrons_of("Al3+/Al") == 3


@pytest.mark.parametrize(
    ("call", "message"),
    [(lambda: potential_range("Cu2+/Cu", 0.0), "oxidised_activity: 0"),
     (lambda: complexed_potential("Cu2+/Cu", 1.0, 1.0), "without stability constants"),
     (lambda: complexed_potential("Ag(CN)2-/Ag", 1.0, -1.0), "free_ligand_activity"),
     (lambda: potential_range("Cu2+/Ca"), "did you mean Cu2")],
)  # fmt: skip
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
