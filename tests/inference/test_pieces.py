import math
from fractions import Fraction

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from leachkin.errors import InputProblems
from leachkin.inference import (
    akaike_weights,
    below_limit_residual,
    corrected_aic,
    from_natural,
    natural_slope,
    normal_multiplier,
    schwarz_bic,
    student_multiplier,
    to_natural,
    weighted_line,
)


def exact_line(x, y, w):
    """Slope, intercept and slope standard error squared in rational arithmetic."""
    x, y, w = ([Fraction(v) for v in values] for values in (x, y, w))
    rows = list(zip(x, y, w, strict=True))
    s, sx, sy = sum(w), sum(c * a for a, _, c in rows), sum(c * b for _, b, c in rows)
    sxx, sxy = sum(c * a * a for a, _, c in rows), sum(c * a * b for a, b, c in rows)
    det = s * sxx - sx * sx
    slope, intercept = (s * sxy - sx * sy) / det, (sxx * sy - sx * sxy) / det
    squares = sum(c * (b - intercept - slope * a) ** 2 for a, b, c in rows)
    variance = squares / (len(x) - 2)
    return slope, intercept, variance * s / det, variance * sxx / det


@pytest.mark.parametrize("points", [3, 5, 12])
def test_line_agrees_with_rational_arithmetic(points):
    rng = np.random.default_rng(points)
    x = (1 / np.linspace(298.15, 328.15, points)).tolist()
    y = (20 - 5000 * np.array(x) + 0.05 * rng.standard_normal(points)).tolist()
    w = rng.uniform(0.5, 500, points).tolist()
    line = weighted_line(x, y, w)
    slope, intercept, slope_var, intercept_var = (float(v) for v in exact_line(x, y, w))
    assert_allclose(line.slope, slope, rtol=1e-12)
    assert_allclose(line.intercept, intercept, rtol=1e-12)
    assert_allclose(line.slope_standard_error, math.sqrt(slope_var), rtol=1e-11)
    assert_allclose(line.intercept_standard_error, math.sqrt(intercept_var), rtol=1e-11)


def test_two_points_have_no_standard_error():
    line = weighted_line([1.0, 2.0], [3.0, 5.0])
    assert line.slope == 2.0 and line.slope_standard_error is None


def test_line_refuses_one_x_and_bad_weights():
    with pytest.raises(InputProblems, match="1 different values"):
        weighted_line([1.0, 1.0], [3.0, 5.0])
    with pytest.raises(InputProblems, match="weights"):
        weighted_line([1.0, 2.0], [3.0, 5.0], [1.0, 0.0])


@pytest.mark.parametrize("freedom, printed", [(1, "12.706"), (3, "3.182"), (10, "2.228")])
def test_student_table(freedom, printed):
    # two-sided 95 % points as in any printed table of t
    assert_allclose(student_multiplier(0.95, freedom), float(printed), rtol=0, atol=5e-4)


def test_levels_are_fractions():
    assert_allclose(normal_multiplier(0.95, sides=1), 1.6449, atol=1e-4)
    with pytest.raises(InputProblems, match="level=0.95 for 95 %"):
        normal_multiplier(95)


def test_criteria_by_hand():
    # n = 10, SSE = 0.01, two quantities: K = 3; 10 ln 0.001 + 6 + 24/6
    assert_allclose(corrected_aic(0.01, 10, 2), 10 * math.log(0.001) + 10, rtol=1e-14)
    assert_allclose(schwarz_bic(0.01, 10, 2), 10 * math.log(0.001) + 3 * math.log(10))
    assert corrected_aic(0.01, 4, 2) == math.inf
    assert math.isfinite(corrected_aic(0.0, 10, 2))


def test_weights_sum_to_one():
    weights = akaike_weights([0.0, 2.0, math.inf])
    assert_allclose(weights, [1 / (1 + math.exp(-1)), math.exp(-1) / (1 + math.exp(-1)), 0])


@pytest.mark.parametrize("scale, value", [("linear", -3.0), ("log", 0.02), ("logit", 0.9)])
def test_scales_invert_and_have_the_right_slope(scale, value):
    fitted = from_natural(scale, value)
    assert_allclose(to_natural(scale, fitted), value, rtol=1e-14)
    step = 1e-6
    numeric = (to_natural(scale, fitted + step) - to_natural(scale, fitted - step)) / (2 * step)
    assert_allclose(natural_slope(scale, fitted), numeric, rtol=1e-8)


def test_below_limit_residual_is_the_likelihood():
    z = np.array([-30.0, -3.0, -0.5, 0.0, 0.5, 3.0, 9.0])
    residual, slope = below_limit_residual(z)
    assert_allclose(residual**2, -2 * stats.norm.logcdf(z), rtol=1e-12)
    step = 1e-5
    numeric = (below_limit_residual(z + step)[0] - below_limit_residual(z - step)[0]) / (2 * step)
    assert_allclose(slope, numeric, rtol=1e-6, atol=1e-12)
    residual, slope = below_limit_residual([50.0])
    assert residual[0] == 0 and slope[0] == 0
