"""Species of cyanide and sulphate liquors: balances, known cases, and an independent root."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from leachkin.chemistry import (
    acid_pH,
    ferric_limit_g_per_L,
    formation_constants,
    free_cyanide,
    hcn_share,
    log10_water_product,
    molar_mass,
    saturation_indices,
    solve_mass_balances,
    speciate,
)
from leachkin.errors import InputProblems

COUNTS = {"CN-": {"CN-": 1, "HCN": 1, "Cu(CN)2-": 2, "Cu(CN)3 2-": 3, "Cu(CN)4 3-": 4,
                  "Ag(CN)2-": 2, "Ag(CN)3 2-": 3, "Zn(CN)2": 2, "Zn(CN)3-": 3, "Zn(CN)4 2-": 4,
                  "Au(CN)2-": 2},
          "Cu+": {"Cu+": 1, "Cu(CN)2-": 1, "Cu(CN)3 2-": 1, "Cu(CN)4 3-": 1},
          "Ag+": {"Ag+": 1, "Ag(CN)2-": 1, "Ag(CN)3 2-": 1},
          "Au+": {"Au+": 1, "Au(CN)2-": 1},
          "Zn2+": {"Zn2+": 1, "Zn(CN)2": 1, "Zn(CN)3-": 1, "Zn(CN)4 2-": 1, "ZnOH+": 1,
                   "Zn(OH)3-": 1, "Zn(OH)4 2-": 1}}  # fmt: skip


def cyanide_liquors(n=2_000):
    generator = np.random.default_rng(5)
    totals = {name: 10.0 ** generator.uniform(-7, -2, n) for name in COUNTS}
    totals["CN-"] = totals["CN-"] * 100.0
    return totals, generator.uniform(7.0, 12.5, n), generator.uniform(278.0, 323.0, n)


def test_every_mass_balance_closes():
    totals, pH, temperature = cyanide_liquors()
    found = speciate(totals, pH, temperature)
    assert found.converged.all()
    for component, counts in COUNTS.items():
        held = sum(count * found.of(species) for species, count in counts.items())
        assert_allclose(held, totals[component], rtol=1e-9)
    assert np.all(found.concentration_mol_per_L > 0.0)


def test_every_species_is_in_equilibrium():
    totals, pH, temperature = cyanide_liquors(50)
    found = speciate(totals, pH, temperature)
    R = 8.31446261815324
    for name in ("HCN", "Cu(CN)3 2-", "Ag(CN)2-", "Zn(CN)4 2-"):
        one = formation_constants()[name][0]
        shift = 1e3 * one.dH_kJ_per_mol / (R * np.log(10)) * (1 / 298.15 - 1 / temperature)
        ratio = np.log10(found.activity_of(name)) - np.log10(found.activity_of(one.ion))
        ratio -= one.ligands * np.log10(found.activity_of(one.ligand))
        assert_allclose(ratio, one.log10_beta + shift, rtol=0, atol=1e-7)


def test_free_cyanide_against_a_root_finder():
    """One unknown, the free cyanide: copper and silver by their constants, without activities."""
    pH, total, copper, silver = 10.5, 0.01, 2e-3, 5e-4
    beta = [(1, 2, 21.9145), (1, 3, 27.2145), (1, 4, 28.7145)]
    silver_beta = [(1, 2, 20.48), (1, 3, 21.7)]

    def left(log_ligand):
        ligand = 10.0**log_ligand
        bound = ligand * (1 + 10.0 ** (9.21 - pH))
        for metal, constants in ((copper, beta), (silver, silver_beta)):
            terms = [(n, 10.0 ** (b + n * log_ligand)) for _, n, b in constants]
            bound += metal * sum(n * t for n, t in terms) / (1 + sum(t for _, t in terms))
        return bound - total

    root = 10.0 ** brentq(left, -12, -1, xtol=1e-14)
    found = speciate({"CN-": total, "Cu+": copper, "Ag+": silver}, pH, activities=False)
    assert_allclose(found.of("CN-"), root, rtol=1e-9)


def test_hydrogen_cyanide_share_is_that_of_the_plain_formula():
    """33.9, 14.0, 4.9 and 1.6 % at pH 9.5, 10, 10.5 and 11, pKa 9.21 [nist46]."""
    found = speciate({"CN-": 0.01}, pH=[9.5, 10.0, 10.5, 11.0], activities=False)
    assert_allclose(100 * found.of("HCN") / 0.01, [33.9, 14.0, 4.9, 1.6], rtol=0, atol=0.05)
    warm = speciate({"CN-": 0.01}, pH=10.0, temperature_K=308.15, activities=False)
    assert_allclose(warm.of("HCN") / 0.01, hcn_share(10.0, 308.15), rtol=1e-10)


def test_free_and_bound_cyanide_add_up_and_copper_binds_three():
    found = free_cyanide(0.5, {"Cu": 0.1}, pH=10.5)
    assert_allclose(found.free_g_per_L + found.bound_g_per_L, 0.5, rtol=1e-10)
    per_copper = found.bound_g_per_L / molar_mass("CN") / (0.1 / molar_mass("Cu"))
    assert 2.9 < per_copper < 4.0
    assert_allclose(found.hcn_share, found.speciation.of("HCN") * molar_mass("CN")
                    / found.free_g_per_L, rtol=1e-12)  # fmt: skip


def test_less_cyanide_than_copper_binds_leaves_little_free_and_flags_the_solid():
    found = free_cyanide(0.02, {"Cu": 0.1}, pH=10.0)
    assert found.free_g_per_L < 1e-3
    assert saturation_indices(found.speciation)["CuCN"][0] > 0.0


def test_no_metal_and_no_cyanide_are_exact_zeros():
    found = speciate({"CN-": [0.0, 0.01], "Cu+": [1e-3, 0.0]}, pH=10.5)
    assert found.of("HCN")[0] == 0.0
    assert found.of("Cu(CN)3 2-").tolist() == [0.0, 0.0]
    assert_allclose(found.of("Cu+")[0], 1e-3, rtol=1e-9)


def test_bisulphate_by_the_quadratic():
    """Without activities: H = s + y, SO4 = s - y... of c mol/L acid, K2 from its pK 1.997."""
    c, K = 0.05, 10.0**-1.997
    dissociated = (-(c + K) + np.sqrt((c + K) ** 2 + 4 * K * c)) / 2
    found = speciate({"H+": 2 * c, "SO4 2-": c}, activities=False)
    assert_allclose(found.of("SO4 2-"), dissociated, rtol=1e-6)
    assert_allclose(found.of("HSO4-"), c - dissociated, rtol=1e-6)
    assert_allclose(10.0**-found.pH, c + dissociated, rtol=1e-6)


def test_more_acid_lowers_the_pH_and_more_sulphate_raises_it():
    grams = np.array([0.1, 1.0, 5.0, 20.0])
    plain = acid_pH(grams).pH
    assert np.all(np.diff(plain) < 0.0)
    assert np.all(acid_pH(grams, other_sulphate_mol_per_L=0.1).pH > plain)
    assert any("Davies" in text for text in acid_pH(80.0).warnings)


def test_pure_water_is_neutral():
    found = speciate({"H+": 1e-12, "SO4 2-": 1e-12}, activities=False)
    assert_allclose(found.pH, -0.5 * log10_water_product(), rtol=0, atol=1e-4)


def test_ferric_limit_falls_with_pH_and_rises_with_sulphate():
    value, low, high = ferric_limit_g_per_L([0.5, 1.0, 3.0])
    assert np.all((low < value) & (value < high))
    assert_allclose(value[0] / value[1], 10.0**1.5, rtol=0.2)
    assert np.all(ferric_limit_g_per_L([1.0, 3.0], 0.1)[0] > 10 * value[1:])


def test_own_constants_take_the_place_of_the_tables():
    weak = speciate({"CN-": 0.004, "Zn2+": 1e-3}, 11.0)
    strong = speciate({"CN-": 0.004, "Zn2+": 1e-3}, 11.0, constants={"Zn(CN)4 2-": 19.62})
    assert strong.of("Zn(CN)4 2-") > weak.of("Zn(CN)4 2-")
    assert strong.of("CN-") < weak.of("CN-")


def test_constants_without_enthalpy_say_that_they_are_held():
    assert any("held at 25 degC" in text
               for text in speciate({"CN-": 0.01, "Au+": 1e-6}, 10.5, 310.0).warnings)  # fmt: skip
    assert speciate({"CN-": 0.01}, 10.5).warnings == ()


def test_newton_from_a_poor_start_finds_the_same():
    constants, matrix, totals = [0.0, 0.0, np.log(1e12)], [[1, 0], [0, 1], [2, 1]], [1e-3, 1e-4]
    cold = solve_mass_balances(constants, matrix, totals)
    for start in ([-60.0, -60.0], [5.0, 5.0], [-60.0, 5.0]):
        poor = solve_mass_balances(constants, matrix, totals, start)
        assert poor.converged
        assert_allclose(poor.species, cold.species, rtol=1e-9)


@pytest.mark.parametrize(
    ("call", "message"),
    [(lambda: speciate({"CN-": 0.01}), "no pH and no H"),
     (lambda: speciate({"Xx+": 0.01}, 10.0), "unknown component 'Xx"),
     (lambda: speciate({"CN-": -0.01}, 10.0), "-0.01 mol/L"),
     (lambda: speciate({"CN-": 0.01}, 14.5), "pH"),
     (lambda: speciate({"CN-": 0.01}, 10.0, constants={"HCM": 9.0}), "unknown species 'HCM'"),
     (lambda: speciate({"CN-": 0.01}, 10.0).of("HCM"), "did you mean HCN"),
     (lambda: free_cyanide(0.5, {"Pb": 0.1}, 10.5), "unknown metal 'Pb'"),
     (lambda: free_cyanide(-0.5, {}, 10.5), "total_cyanide_g_per_L"),
     (lambda: acid_pH(-1.0), "acid_g_per_L"),
     (lambda: ferric_limit_g_per_L(15.0), "pH")],
)  # fmt: skip
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
