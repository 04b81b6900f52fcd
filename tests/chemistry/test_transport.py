"""Diffusion coefficients against print, correlations by their limits, ranges and temperature."""

import csv
from importlib import resources

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.chemistry import (
    apparent_activation_energy_kJ_per_mol,
    charge_of,
    diffusion_coefficient_m2_per_s,
    falling_velocity_m_per_s,
    flat_plate,
    packed_bed,
    rotating_cylinder,
    rotating_disc,
    suspended_dust,
    transfer_ratio,
    water_kinematic_viscosity_m2_per_s,
)
from leachkin.errors import InputProblems
from leachkin.tables import read_table

KELVIN = np.arange(10.0, 61.0, 5.0) + 273.15
R, F = 8.31446261815324, 96485.33212331001


def crc_conductivities():
    folder = resources.files("chemicals").joinpath("Electrolytes")
    text = folder.joinpath("CRC conductivity infinite dilution.tsv").read_text(encoding="utf-8")
    rows = csv.DictReader(text.splitlines(), delimiter="\t")
    return {row["Formula"]: float(row["lambda"]) for row in rows}


@pytest.mark.parametrize("ion", ["Cu2+", "Fe3+", "Zn2+", "Ag+", "H+", "CN-", "OH-"])
def test_diffusion_from_conductivities_of_an_independent_library(ion):
    """``chemicals`` carries the CRC table, per equivalent: D = R T lambda / (z F^2)."""
    charge = charge_of(ion)
    body = ion.rstrip("+-0123456789") if abs(charge) > 1 else ion[:-1]
    sign = "+" if charge > 0 else "-"
    key = f"{body}{sign}{abs(charge)}" if abs(charge) > 1 else f"{body}{sign}"
    expected = R * 298.15 * crc_conductivities()[key] / (abs(charge) * F * F)
    assert_allclose(diffusion_coefficient_m2_per_s(ion), expected, rtol=2e-3)


def test_every_diffusion_row_lies_in_its_range_and_has_its_charge():
    for row in read_table("diffusion_coefficients").rows:
        assert row.number("low") <= row.number("D_1e9_m2_per_s") <= row.number("high")
        assert int(row.number("charge")) == charge_of(row.text("species"))


def test_stokes_and_einstein_in_print():
    """Copper 0.4620, 0.8105 and 1.5221e-9 m2/s at 10, 30 and 60 degC from 0.714 at 25 degC."""
    found = diffusion_coefficient_m2_per_s("Cu2+", np.array([10.0, 30.0, 60.0]) + 273.15)
    assert_allclose(1e9 * found, [0.4620, 0.8105, 1.5221], rtol=0, atol=6e-5)


@pytest.mark.parametrize(
    "transfer",
    [lambda T: rotating_disc(400.0, 0.01, temperature_K=T),
     lambda T: flat_plate(0.1, 0.2, temperature_K=T)],
)  # fmt: skip
def test_apparent_activation_energy_of_transport(transfer):
    """15.05 kJ/mol over 10 to 60 degC from D^(2/3) nu^(-1/6)."""
    found = apparent_activation_energy_kJ_per_mol(KELVIN, transfer(KELVIN).k_m_per_s)
    assert_allclose(found, 15.05, rtol=0, atol=0.05)


def test_apparent_activation_energies_of_still_water_and_of_beds():
    """18.6 kJ/mol for Sh = 2, 16.6 for beds with Re^0.6, where the constant 2 is small."""
    still = apparent_activation_energy_kJ_per_mol(
        KELVIN, diffusion_coefficient_m2_per_s("Cu2+", KELVIN)
    )
    assert_allclose(still, 18.6, rtol=0, atol=0.05)
    bed = packed_bed(0.05, 0.02, temperature_K=KELVIN)
    assert bed.correlation == "packed bed"
    without_two = bed.k_m_per_s - 2 * diffusion_coefficient_m2_per_s("Cu2+", KELVIN) / 0.02
    assert_allclose(
        apparent_activation_energy_kJ_per_mol(KELVIN, without_two), 16.6, rtol=0, atol=0.05
    )


def test_levich_law_and_its_scaling():
    w, D = 2 * np.pi * 400 / 60, diffusion_coefficient_m2_per_s("Ag+")
    nu = water_kinematic_viscosity_m2_per_s()
    found = rotating_disc(400.0, 0.01, "Ag+")
    assert_allclose(found.k_m_per_s, 0.62 * D ** (2 / 3) * nu ** (-1 / 6) * w**0.5, rtol=1e-10)
    assert_allclose(rotating_disc(1600.0, 0.01, "Ag+").k_m_per_s / found.k_m_per_s, 2.0, rtol=1e-12)
    assert_allclose(rotating_disc(400.0, 0.02, "Ag+").k_m_per_s, found.k_m_per_s, rtol=1e-12)
    assert (found.source, found.status, found.outside) == ("levich1962", "printed", ())


def test_cylinder_speed_power_is_0_7():
    slow, fast = (rotating_cylinder(rpm, 0.02).k_m_per_s for rpm in (200.0, 400.0))
    assert_allclose(np.log2(fast / slow), 0.7, rtol=1e-12)


def test_plate_turns_turbulent_with_length():
    assert flat_plate(0.5, 0.1).correlation == "flat plate laminar"
    assert flat_plate(0.5, 3.0).correlation == "flat plate turbulent"


def test_slow_beds_have_their_own_law_and_tighter_beds_more_transfer():
    slow = packed_bed(1e-4, 0.01)
    assert slow.correlation == "packed bed slow"
    assert packed_bed(1e-4, 0.01, voids=0.3).k_m_per_s > slow.k_m_per_s


def test_fine_dust_is_diffusion_alone_and_coarse_dust_is_not():
    D = diffusion_coefficient_m2_per_s("Au(CN)2-")
    fine = suspended_dust(1e-6, 7140.0, "Au(CN)2-")
    assert_allclose(fine.k_m_per_s, 2.0 * D / 1e-6, rtol=0.02)
    assert suspended_dust(1e-3, 7140.0).sherwood > 20.0
    by_power = suspended_dust([1e-5, 1e-4], 7140.0, power_W_per_kg=1.0)
    assert by_power.correlation == "suspended by power"
    assert np.all(by_power.sherwood > 2.0)


def test_small_grains_fall_by_stokes_and_large_ones_slower():
    """Stokes: g (rho_s - rho) d^2 / (18 eta)."""
    stokes = 9.80665 * (7140 - 997.05) * 1e-12 / (18 * 0.8903e-3)
    assert_allclose(falling_velocity_m_per_s(1e-6, 7140.0), stokes, rtol=1e-3)
    assert falling_velocity_m_per_s(1e-3, 7140.0) < 0.2 * stokes * 1e6


def test_falling_velocity_solves_the_drag_law():
    size, nu = 3e-4, water_kinematic_viscosity_m2_per_s()
    v = falling_velocity_m_per_s(size, 7870.0)
    Re = v * size / nu
    drag = 24 / Re * (1 + 0.15 * Re**0.687)
    assert_allclose(4 * 9.80665 * size * (7870 / 997.047 - 1) / (3 * drag), v**2, rtol=1e-6)


def test_outside_its_range_a_correlation_says_so():
    assert any("Reynolds number" in text for text in rotating_disc(60_000.0, 0.05).outside)
    assert any("Reynolds number" in text for text in rotating_cylinder(1.0, 0.01).outside)


def test_transfer_ratio_is_the_two_thirds_power_of_diffusion():
    assert_allclose(transfer_ratio("H+", "Cu2+"), (9.311 / 0.714) ** (2 / 3), rtol=1e-12)


@pytest.mark.parametrize(
    ("call", "message"),
    [(lambda: rotating_disc(0.0, 0.01), "rotation_rpm: 0"),
     (lambda: packed_bed(0.01, -0.01), "piece_diameter_m"),
     (lambda: packed_bed(0.01, 0.01, voids=1.0), "voids: 1.0"),
     (lambda: suspended_dust(np.nan, 7140.0), "grain_diameter_m"),
     (lambda: diffusion_coefficient_m2_per_s("Cu3+"), "did you mean"),
     (lambda: apparent_activation_energy_kJ_per_mol([300.0, 310.0], [1.0, 0.0]), "rate_constant")],
)  # fmt: skip
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
