import math
from fractions import Fraction

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.errors import InputProblems
from leachkin.kinetics import activation_energy_of_slope, arrhenius_rate_constant, fit_arrhenius

#: Decomposition of hydrogen iodide [mcmurry_fay, ch. 12].
IODIDE_K = 273.15 + np.array([283.0, 356, 393, 427, 508])
IODIDE_RATE = [3.52e-7, 3.02e-5, 2.19e-4, 1.16e-3, 3.95e-2]


def test_hydrogen_iodide():
    fit = fit_arrhenius(IODIDE_K, IODIDE_RATE)
    assert_allclose(fit.activation_energy_kJ_per_mol, 186.3, rtol=0, atol=0.05)
    assert_allclose(fit.standard_error_kJ_per_mol, 3.0, rtol=0, atol=0.05)
    assert fit.degrees_of_freedom == 3
    # 95 % point of t with 3 degrees, as in any table: 3.182
    half = 3.182 * fit.standard_error_kJ_per_mol
    assert_allclose(fit.high - fit.activation_energy_kJ_per_mol, half, rtol=2e-4)
    assert_allclose(fit.rate_at(IODIDE_K), fit.fitted)


def test_colemanite_slope():
    # slope 4938.7 K, 41.07 printed with a rounded gas constant [kubilay2008]
    assert_allclose(activation_energy_of_slope(4938.7), 41.06, rtol=0, atol=0.005)


def test_phosphate_law_with_the_printed_gas_constant():
    # [ashraf_succinic]: k0 1.47e6, Ea 64.92 kJ/mol, R = 8.314
    k = arrhenius_rate_constant([313.0, 333, 353], 1.47e6, 64.92, 8.314)
    assert_allclose(k, [2.1519e-5, 9.6283e-5, 3.6352e-4], rtol=2.5e-5)
    fit = fit_arrhenius([313.0, 333, 353], k)
    scale = GAS_CONSTANT_J_per_mol_K / 8.314
    assert_allclose(fit.activation_energy_kJ_per_mol, 64.92 * scale, rtol=1e-10)
    assert_allclose(math.exp(fit.ln_prefactor), 1.47e6, rtol=1e-8)


def test_agrees_with_exact_rational_least_squares():
    rng = np.random.default_rng(7)
    T = np.array([288.15, 298.15, 308.15, 318.15, 333.15])
    k = np.exp(15 - 5000 / T + 0.05 * rng.standard_normal(5))
    error = k * rng.uniform(0.01, 0.2, 5)
    fit = fit_arrhenius(T, k, error)
    x = [Fraction(v) for v in (1.0 / T).tolist()]
    y = [Fraction(math.log(v)) for v in k.tolist()]
    w = [Fraction(v) for v in ((k / error) ** 2).tolist()]
    rows = list(zip(x, y, w, strict=True))
    s, sx, sy = sum(w), sum(c * a for a, _, c in rows), sum(c * b for _, b, c in rows)
    sxx, sxy = sum(c * a * a for a, _, c in rows), sum(c * a * b for a, b, c in rows)
    slope = (s * sxy - sx * sy) / (s * sxx - sx * sx)
    intercept = (sy - slope * sx) / s
    squares = sum(c * (b - intercept - slope * a) ** 2 for a, b, c in rows)
    variance = float(squares / 3 * s / (s * sxx - sx * sx))
    R = GAS_CONSTANT_J_per_mol_K / 1000
    assert_allclose(fit.activation_energy_kJ_per_mol, -float(slope) * R, rtol=1e-12)
    assert_allclose(fit.standard_error_kJ_per_mol, math.sqrt(variance) * R, rtol=1e-12)
    assert_allclose(fit.ln_prefactor, float(intercept), rtol=1e-12)


def test_three_temperatures_use_twelve_point_seven():
    fit = fit_arrhenius([298.15, 313.15, 328.15], [0.10, 0.22, 0.42])
    half = fit.high - fit.activation_energy_kJ_per_mol
    assert_allclose(half / fit.standard_error_kJ_per_mol, 12.706, atol=5e-4)
    assert any("one degree of freedom" in w for w in fit.warnings)


def test_five_percent_scatter_at_three_temperatures_by_hand():
    # half-width t R s / sqrt(sum (1/T - mean)^2); 25, 40, 55 degC with s = 0.05 give 24 kJ/mol
    T = np.array([298.15, 313.15, 328.15])
    spread = np.sqrt(np.sum((1 / T - np.mean(1 / T)) ** 2))
    assert_allclose(12.706 * 8.314e-3 * 0.05 / spread, 24, atol=0.5)
    normal = np.array([1.0, 0.0, 0.0])  # any residual with s = 0.05 about the line
    x = 1 / T - np.mean(1 / T)
    normal = normal - normal.mean() - x * (x @ normal) / (x @ x)
    normal *= 0.05 / np.sqrt(normal @ normal)
    fit = fit_arrhenius(T, np.exp(-5000 * x + normal))
    half = fit.high - fit.activation_energy_kJ_per_mol
    assert_allclose(half, 12.706 * GAS_CONSTANT_J_per_mol_K * 1e-3 * 0.05 / spread, rtol=1e-4)


def test_two_temperatures_have_no_interval_unless_errors_are_given():
    fit = fit_arrhenius([298.15, 328.15], [0.1, 0.4])
    assert fit.low is None and fit.high is None and "no scatter" in fit.why_no_interval
    given = fit_arrhenius([298.15, 328.15], [0.1, 0.4], [0.005, 0.02])
    assert given.low < given.activation_energy_kJ_per_mol < given.high
    by_hand = GAS_CONSTANT_J_per_mol_K * 1e-3 * math.hypot(0.05, 0.05)
    by_hand /= 1 / 298.15 - 1 / 328.15
    assert_allclose(given.standard_error_kJ_per_mol, by_hand, rtol=1e-12)


@pytest.mark.parametrize(
    "T, k, match",
    [
        ([298.15], [0.1], "two or more"),
        ([298.15, 298.15], [0.1, 0.2], "1 different temperature"),
        ([25.0, 40.0], [0.1, 0.2], "add 273.15"),
        ([298.15, 313.15], [0.1, -0.2], "above 0"),
        ([298.15, 313.15], [0.1, np.nan], "finite numbers above 0"),
        ([298.15, 313.15], [0.1], "one a temperature"),
    ],
)
def test_input_without_meaning_is_refused(T, k, match):
    with pytest.raises(InputProblems, match=match):
        fit_arrhenius(T, k)


def test_table_holds_the_points():
    assert fit_arrhenius(IODIDE_K, IODIDE_RATE).table().column("rate_constant") == IODIDE_RATE
