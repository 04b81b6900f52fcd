from numpy.testing import assert_allclose

from leachkin import constants as c


def test_exact_constants_of_the_si():
    # BIPM, The International System of Units, 9th ed. (2019); CODATA 2018 exact derived values
    assert_allclose(c.GAS_CONSTANT_J_per_mol_K, 8.31446261815324, rtol=1e-14)
    assert_allclose(c.FARADAY_C_per_mol, 96485.33212331002, rtol=1e-14)


def test_normal_molar_volume():
    # CODATA 2018: molar volume of ideal gas at 273.15 K and 101.325 kPa, 22.41396954e-3 m3/mol
    assert_allclose(c.NORMAL_MOLAR_VOLUME_m3_per_mol, 22.41396954e-3, rtol=1e-9)
