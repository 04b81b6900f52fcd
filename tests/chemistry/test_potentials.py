"""Potentials, their temperature coefficients, complexes, and cells."""

import csv
from importlib import resources

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.chemistry import (
    SOURCE_ORDER,
    cell,
    cell_from_potentials,
    gibbs_from_potential,
    hcn_headspace_ppm,
    hcn_pKa,
    hcn_share,
    known_couples,
    ln_equilibrium_constant,
    nernst,
    potential_from_formation,
    potential_from_gibbs,
    potentials_of,
    residual_mol_per_L,
    standard_potential,
    temperature_coefficient_from_entropies,
)
from leachkin.errors import InputProblems
from leachkin.tables import read_table

METALS = ["Cu2+/Cu", "Zn2+/Zn", "Ag+/Ag", "Fe2+/Fe", "Pb2+/Pb", "Cd2+/Cd", "Ni2+/Ni", "Co2+/Co",
          "Hg2+/Hg", "Al3+/Al", "Mg2+/Mg", "Cu+/Cu"]  # fmt: skip


@pytest.mark.parametrize(
    ("couple", "potential", "slope"),
    [("Cu2+/Cu", 0.3394, 0.011), ("Zn2+/Zn", -0.7623, 0.119), ("Ag+/Ag", 0.7991, -0.989)],
)
def test_potential_and_slope_from_gibbs_energies_and_entropies(couple, potential, slope):
    """NBS 1982 as printed in the CRC Handbook."""
    assert_allclose(potential_from_formation(couple), potential, rtol=0, atol=5e-5)
    assert_allclose(temperature_coefficient_from_entropies(couple), slope, rtol=0, atol=5e-4)


@pytest.mark.parametrize("couple", METALS + ["Fe3+/Fe2+", "Cu2+/Cu+"])
def test_default_table_is_the_computed_set(couple):
    default = potentials_of(couple).default
    assert default.source == "nbs1982_crc"
    assert_allclose(potential_from_formation(couple), default.E0_V, rtol=0, atol=1e-4)
    assert_allclose(
        temperature_coefficient_from_entropies(couple), default.dE0_dT_mV_per_K, rtol=0, atol=1e-3
    )


def test_gibbs_energies_agree_with_an_independent_library():
    """The library ``chemicals`` carries the CRC table of aqueous ions: E0 to 0.5 mV."""
    name = "CRC Thermodynamic Properties of Aqueous Ions.tsv"
    folder = resources.files("chemicals").joinpath("Electrolytes")
    lines = folder.joinpath(name).read_text(encoding="utf-8").splitlines()
    gibbs = {row["Formula"]: row["Gf(aq)"] for row in csv.DictReader(lines, delimiter="\t")}
    for couple in METALS:
        ion = couple.split("/")[0]
        digits = ion.strip("+").lstrip("ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz")
        key = ion if not digits else f"{ion[: -len(digits) - 1]}+{digits}"
        energy_J, electrons = float(gibbs[key]), int(digits or 1)
        assert_allclose(
            standard_potential(couple), energy_J / (electrons * 96485.33212), rtol=0, atol=5e-4
        )


def test_potential_and_gibbs_energy_are_inverses():
    volts = np.array([-1.3, 0.0, 0.8])
    assert_allclose(potential_from_gibbs(gibbs_from_potential(volts, 3), 3), volts, rtol=1e-15)


def test_chlorine_from_brine():
    """dG +422 kJ with two electrons is -2.2 V: a fact of the trade."""
    assert_allclose(potential_from_gibbs(422.0, 2), -2.2, rtol=0, atol=0.05)


def test_temperature_moves_the_potential_along_its_slope():
    assert standard_potential("Zn2+/Zn", 298.15) == -0.7623
    assert_allclose(standard_potential("Zn2+/Zn", 308.15), -0.7623 + 0.00119, rtol=1e-12)


def test_every_source_of_the_iron_couple_and_its_spread():
    spread = potentials_of("Fe2+/Fe")
    assert {row.source for row in spread.rows} == {
        "nbs1982_crc", "llnl", "crc_handbook", "bratsch1989"
    }  # fmt: skip
    assert (spread.low_V, spread.high_V) == (-0.4743, -0.4089)
    assert_allclose(spread.spread_V, 0.0654, rtol=1e-12)
    assert spread.table().column("source")[0] == spread.default.source


def test_silver_cyanide_comes_from_the_constants_not_from_the_old_table():
    """-0.41 V from the bare ion and log beta; the printed -0.31 V contradicts them."""
    assert_allclose(standard_potential("Ag(CN)2-/Ag"), -0.41, rtol=0, atol=0.005)
    old = [row for row in potentials_of("Ag(CN)2-/Ag").rows if not row.usable]
    assert [row.E0_V for row in old] == [-0.31]
    assert potentials_of("Ag(CN)2-/Ag").low_V > -0.42


def test_zinc_cyanide_from_constants_agrees_with_print():
    """CRC Handbook: -1.26 V."""
    assert_allclose(standard_potential("Zn(CN)4 2-/Zn"), -1.26, rtol=0, atol=0.005)


def test_slope_of_a_complex_is_the_derivative_of_its_potential():
    """Bare ion slope and van 't Hoff of the constant, by a finite difference."""
    R, F, T, step = 8.31446261815324, 96485.33212331001, 298.15, 0.01
    beta, enthalpy = 20.48, -137e3

    def complex_V(temperature):
        log_beta = beta + enthalpy / (np.log(10) * R) * (1 / T - 1 / temperature)
        bare = 0.7991 - 0.989e-3 * (temperature - T)
        return bare - R * temperature * np.log(10) * log_beta / F

    slope = (complex_V(T + step) - complex_V(T - step)) / (2 * step)
    assert_allclose(
        1e3 * slope, potentials_of("Ag(CN)2-/Ag").default.dE0_dT_mV_per_K, rtol=0, atol=1e-5
    )


def test_memory_is_never_a_default_where_print_exists():
    for couple in known_couples():
        rows = potentials_of(couple).rows
        if any(row.status != "from memory" and row.usable for row in rows):
            assert rows[0].status != "from memory"
        assert rows[0].usable
        assert all(row.source in SOURCE_ORDER for row in rows)


@pytest.mark.parametrize("written", ["Cu+2/Cu", " Cu2+ / Cu ", "Cu2+/Cu"])
def test_spellings_of_a_couple(written):
    assert standard_potential(written) == 0.3394


def test_unknown_couple_names_the_nearest():
    with pytest.raises(InputProblems, match=r"unknown couple 'Cu2\+/Cd'.*did you mean Cu2\+/Cu"):
        standard_potential("Cu2+/Cd")


def test_unknown_source_names_what_there_is():
    with pytest.raises(InputProblems, match="unknown source of Cu2"):
        standard_potential("Cu2+/Cu", source="zumdahl9")


def test_a_source_without_a_slope_refuses_another_temperature():
    with pytest.raises(InputProblems, match="gives no temperature coefficient"):
        standard_potential("Cu2+/Cu", 320.0, source="crc_handbook")
    assert standard_potential("Cu2+/Cu", source="crc_handbook") == 0.3419


@pytest.mark.parametrize("temperature", [25.0, np.nan, 900.0])
def test_temperature_without_meaning_is_refused(temperature):
    with pytest.raises(InputProblems, match="temperature_K"):
        standard_potential("Cu2+/Cu", temperature)


def test_zinc_and_copper_at_1_10_V():
    """General chemistry texts: ln K 85.6, K 1.5e37."""
    daniell = cell_from_potentials(1.10, 0.0, 2)
    assert_allclose(daniell.ln_K, 85.6, rtol=0, atol=0.05)
    assert_allclose(daniell.equilibrium_constant, 1.5e37, rtol=0.04, atol=0)


def test_iron_and_copper():
    """General chemistry texts: K 2.3e26 from 0.34 and -0.44 V."""
    assert_allclose(
        cell_from_potentials(0.34, -0.44, 2).equilibrium_constant, 2.3e26, rtol=0.025, atol=0
    )


def test_gold_cyanide_and_zinc():
    """Zumdahl, 9th ed., ch. 21: 0.66 V and -127.4 kJ."""
    gold = cell_from_potentials(-0.60, -1.26, 2)
    assert_allclose(gold.voltage, 0.66, rtol=1e-12)
    assert_allclose(gold.gibbs_kJ_per_mol, -127.4, rtol=0, atol=0.05)


def test_cell_of_named_couples_carries_the_spread():
    pair = cell("Cu2+/Cu", "Fe2+/Fe")
    assert_allclose(pair.voltage, 0.3394 + 0.4089, rtol=1e-12)
    assert_allclose((pair.low_V, pair.high_V), (0.3386 + 0.4089, 0.3419 + 0.4743), rtol=1e-12)
    assert pair.feasible
    assert not cell("Fe2+/Fe", "Cu2+/Cu").feasible


def test_electrons_of_unlike_couples():
    assert cell("Ag+/Ag", "Al3+/Al").electrons == 3
    assert cell("Cu2+/Cu", "Al3+/Al").electrons == 6


def test_gold_cell_at_another_temperature_says_what_is_held():
    assert any("held at its value" in note for note in cell("Au(CN)2-/Au", "Zn2+/Zn", 290.0).notes)
    assert cell("Cu2+/Cu", "Zn2+/Zn", 290.0).notes == ()


def test_residual_is_where_both_potentials_are_equal():
    for cathode, anode in [("Cu2+/Cu", "Fe2+/Fe"), ("Ag+/Ag", "Cu2+/Cu"), ("Cd2+/Cd", "Al3+/Al")]:
        pair, ion = cell(cathode, anode, 310.0), 0.05
        left = float(pair.residual_mol_per_L(ion))
        upper = nernst(pair.cathode_V, pair.cathode_electrons, 1 / left, 310.0)
        lower = nernst(pair.anode_V, pair.anode_electrons, 1 / ion, 310.0)
        assert_allclose(upper, lower, rtol=0, atol=1e-12)


def test_residual_takes_arrays_and_refuses_none_dissolved():
    assert residual_mol_per_L(np.array([0.5, 0.6]), 2, 2, 0.1).shape == (2,)
    with pytest.raises(InputProblems, match="anode_ion_mol_per_L"):
        residual_mol_per_L(0.5, 2, 2, 0.0)


def test_equilibrium_constant_beyond_a_float_is_infinite():
    assert cell_from_potentials(5.0, -5.0, 2).equilibrium_constant == np.inf
    assert_allclose(ln_equilibrium_constant(10.0, 2), 778.4, rtol=0, atol=0.1)


@pytest.mark.parametrize(
    ("call", "name"),
    [(lambda: nernst(0.3, 0, 1.0), "electrons"), (lambda: nernst(0.3, 2, 0.0), "quotient"),
     (lambda: nernst(np.nan, 2, 1.0), "standard_potential_V"),
     (lambda: cell_from_potentials(np.inf, 0.0, 2), "cathode_V"),
     (lambda: cell_from_potentials(1.0, 0.0, 0), "electrons"),
     (lambda: potential_from_formation("Cu/Cu2+"), "couple"),
     (lambda: potential_from_formation("Sn2+/Sn"), "species")],
)  # fmt: skip
def test_what_has_no_meaning_is_refused(call, name):
    with pytest.raises(InputProblems, match=name):
        call()


def test_hydrogen_cyanide_share_by_pH():
    """pKa 9.21 [nist46]: 33.9, 14.0, 4.9 and 1.6 % at pH 9.5, 10, 10.5 and 11."""
    share = 100 * hcn_share([9.5, 10.0, 10.5, 11.0])
    assert_allclose(share, [33.9, 14.0, 4.9, 1.6], rtol=0, atol=0.05)
    assert_allclose(hcn_share(9.21), 0.5, rtol=1e-12)


def test_hydrogen_cyanide_pKa_falls_with_temperature():
    assert_allclose(hcn_pKa(298.15), 9.21, rtol=1e-15)
    assert hcn_pKa(323.15) < hcn_pKa(298.15) < hcn_pKa(283.15)


def test_hydrogen_cyanide_in_a_closed_space():
    """0.5 g/L NaCN at pH 10, 10.5 and 11 with 9.02 mol/(L atm): 158, 55 and 18 ppm."""
    ppm = hcn_headspace_ppm(0.5, [10.0, 10.5, 11.0], henry_mol_per_L_atm=9.02)
    assert_allclose(ppm, [158, 55, 18], rtol=0, atol=0.5)


@pytest.mark.parametrize("acidity", [-0.1, 14.5, np.nan])
def test_pH_outside_its_range_is_refused(acidity):
    with pytest.raises(InputProblems, match="pH"):
        hcn_share(acidity)


def test_negative_strength_is_refused():
    with pytest.raises(InputProblems, match="sodium_cyanide_g_per_L"):
        hcn_headspace_ppm(-1.0, 10.0)


@pytest.mark.parametrize(
    "table", ["atomic_masses", "electrode_potentials", "stability_constants", "gibbs_energies",
              "entropies", "stoichiometry", "exposure_limits", "henry_constants",
              "cementation_couples", "solution_defaults"],
)  # fmt: skip
def test_every_row_has_a_known_source_and_status(table):
    assert read_table(table).rows
