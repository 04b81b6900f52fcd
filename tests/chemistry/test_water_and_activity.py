"""Water against steam tables, Davies' equation and where it ends."""

import iapws
import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.chemistry import (
    DAVIES_ENDS_mol_per_L,
    davies_holds,
    davies_log10_gamma,
    davies_remark,
    debye_hueckel_A,
    ionic_strength_mol_per_L,
    water_density_kg_per_m3,
    water_kinematic_viscosity_m2_per_s,
    water_relative_permittivity,
    water_viscosity_Pa_s,
)
from leachkin.errors import InputProblems

CELSIUS = np.arange(5.0, 61.0, 5.0)


@pytest.mark.parametrize("celsius", CELSIUS)
def test_water_agrees_with_steam_tables(celsius):
    """IAPWS formulations in the library ``iapws``."""
    kelvin = celsius + 273.15
    steam = iapws.IAPWS97(T=kelvin, P=0.101325)
    assert_allclose(water_density_kg_per_m3(kelvin), steam.rho, rtol=5e-5)
    assert_allclose(water_viscosity_Pa_s(kelvin), steam.mu, rtol=3e-3)
    assert_allclose(water_relative_permittivity(kelvin), steam.epsilon, rtol=2e-3)


#   degC, viscosity [mPa s], density [kg/m3], kinematic viscosity [1e-6 m2/s], as printed:
#   Korson et al. 1969 and Tanaka et al. 2001
PRINTED = [(20, 1.0020, 998.21, 1.0038), (25, 0.8903, 997.05, 0.8929), (40, 0.6531, 992.22, 0.6583),
           (60, 0.4666, 983.18, 0.4746)]  # fmt: skip


@pytest.mark.parametrize(("celsius", "viscosity", "density", "kinematic"), PRINTED)
def test_water_as_printed(celsius, viscosity, density, kinematic):
    kelvin = celsius + 273.15
    assert_allclose(1e3 * water_viscosity_Pa_s(kelvin), viscosity, rtol=0, atol=6e-5)
    assert_allclose(water_density_kg_per_m3(kelvin), density, rtol=0, atol=6e-3)
    assert_allclose(1e6 * water_kinematic_viscosity_m2_per_s(kelvin), kinematic, rtol=0, atol=6e-5)


@pytest.mark.parametrize("kelvin", [283.15, 298.15, 323.15])
def test_limiting_slope_by_the_textbook_form(kelvin):
    """``A = 1.8248e6 (rho / (eps T)^3)^(1/2)``, rho in g/mL: the form that textbooks print."""
    steam = iapws.IAPWS97(T=kelvin, P=0.101325)
    textbook = 1.8248e6 / (steam.epsilon * kelvin) ** 1.5
    assert_allclose(debye_hueckel_A(kelvin), textbook, rtol=3e-3)


def test_ionic_strength_by_hand():
    """0.1 mol/L Na2SO4: (0.2 + 4 * 0.1) / 2 = 0.3."""
    assert_allclose(ionic_strength_mol_per_L([0.2, 0.1], [1, -2]), 0.3, rtol=1e-15)
    batch = ionic_strength_mol_per_L(np.full((4, 2), 0.1), [1, -1])
    assert batch.shape == (4,)


def test_gamma_falls_to_the_limiting_law_in_dilute_solution():
    assert davies_log10_gamma(1, 0.0) == 0.0
    thin = 1e-6
    assert_allclose(davies_log10_gamma(2, thin), -4 * debye_hueckel_A() * np.sqrt(thin), rtol=2e-3)
    assert davies_log10_gamma(0, 0.3) == 0.0


def test_gamma_of_sodium_chloride_at_a_tenth_molar():
    """0.778, the measured mean activity coefficient that physical chemistry texts print."""
    assert_allclose(10.0 ** davies_log10_gamma(1, 0.1), 0.778, rtol=0, atol=0.005)


def test_davies_ends_and_says_so():
    ends = DAVIES_ENDS_mol_per_L
    assert_allclose(davies_log10_gamma(2, [ends, 3.0]), davies_log10_gamma(2, ends), rtol=1e-15)
    assert davies_holds([0.1, 0.6]).tolist() == [True, False]
    assert davies_remark([0.1, 0.4]) == ""
    assert "end at 0.5 mol/L and are held there" in davies_remark([0.1, 2.0])


@pytest.mark.parametrize("strength", [-0.1, np.nan])
def test_ionic_strength_without_meaning_is_refused(strength):
    with pytest.raises(InputProblems, match="ionic_strength"):
        davies_log10_gamma(1, strength)
