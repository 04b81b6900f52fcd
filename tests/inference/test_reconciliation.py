"""Data reconciliation against print, exact rational algebra and an independent library."""

from fractions import Fraction

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.inference import linear_constraints, reconcile

#: Heat exchanger with a bypass: split, exchanger, valve, mixer; six flows, all of one precision.
FLOWS = [
    [1, -1, -1, 0, 0, 0],
    [0, 1, 0, -1, 0, 0],
    [0, 0, 1, 0, -1, 0],
    [0, 0, 0, 1, 1, -1],
]
#: Narasimhan & Jordache (2000), Data Reconciliation and Gross Error Detection, Gulf: example 1-1,
#: and example 7-1 with an error of 4 in the second flow.
WITHOUT = [101.91, 64.45, 34.65, 64.20, 36.44, 98.88]
WITH_ERROR = [101.91, 68.45, 34.65, 64.20, 36.44, 98.88]


def test_flows_round_a_heat_exchanger():
    found = reconcile(WITHOUT, np.ones(6), linear_constraints(FLOWS))
    printed = [100.22, 64.50, 35.72, 64.50, 35.72, 100.22]
    assert_allclose(found.adjusted, printed, rtol=0, atol=5e-3)
    assert found.degrees_of_freedom == 4


def test_global_test_of_a_flow_with_an_error():
    found = reconcile(WITH_ERROR, np.ones(6), linear_constraints(FLOWS))
    assert_allclose(found.chi_square, 16.674, rtol=0, atol=5e-4)  # above the 9.488 of 5 %
    assert found.chance < 0.05
    assert int(np.argmax(np.abs(found.statistic))) == 1
    assert found.suspects()[0] == 1


def exactly(matrix, values, sds):
    """The same by exact rational algebra: x = y - S A' (A S A')^-1 A y."""
    A = [[Fraction(c) for c in row] for row in matrix]
    y, s2 = [Fraction(v) for v in values], [Fraction(s) ** 2 for s in sds]
    k, n = len(A), len(y)
    V = [[sum(A[i][m] * s2[m] * A[j][m] for m in range(n)) for j in range(k)] for i in range(k)]
    r = [sum(A[i][m] * y[m] for m in range(n)) for i in range(k)]
    rows = [[*V[i], r[i]] for i in range(k)]
    for i in range(k):
        pivot = next(j for j in range(i, k) if rows[j][i] != 0)
        rows[i], rows[pivot] = rows[pivot], rows[i]
        rows[i] = [c / rows[i][i] for c in rows[i]]
        for j in range(k):
            if j != i:
                rows[j] = [a - rows[j][i] * b for a, b in zip(rows[j], rows[i], strict=True)]
    weights = [row[-1] for row in rows]
    x = [y[m] - s2[m] * sum(A[i][m] * weights[i] for i in range(k)) for m in range(n)]
    return x, sum(w * q for w, q in zip(weights, r, strict=True))


@pytest.mark.parametrize(
    ("matrix", "values", "sds"),
    [
        (FLOWS, ["101.91", "64.45", "34.65", "64.20", "36.44", "98.88"], ["1"] * 6),
        (FLOWS, ["101.91", "64.45", "34.65", "64.20", "36.44", "98.88"],
         ["2", "1/2", "3/10", "7/10", "1/5", "1"]),
        ([[1, -1, -1]], ["6.8", "4.9", "2.1"], ["0.14", "0.07", "0.06"]),
    ],
)  # fmt: skip
def test_against_exact_rational_algebra(matrix, values, sds):
    x, chi_square = exactly(matrix, values, sds)
    numbers = [float(Fraction(v)) for v in values], [float(Fraction(s)) for s in sds]
    found = reconcile(*numbers, linear_constraints(matrix))
    assert_allclose(found.adjusted, [float(v) for v in x], rtol=1e-13)
    assert_allclose(found.chi_square, float(chi_square), rtol=1e-11)
    assert_allclose(np.array(matrix) @ found.adjusted, 0.0, atol=1e-12)


def test_against_generalised_least_squares():
    """The free flows as parameters of a weighted regression: same values, same covariance."""
    from statsmodels.regression.linear_model import WLS

    sds = np.array([2.0, 0.5, 0.3, 0.7, 0.2, 1.0])
    design = np.array([[1, 1], [1, 0], [0, 1], [1, 0], [0, 1], [1, 1]], dtype=float)
    fit = WLS(WITHOUT, design, weights=sds**-2).fit(cov_type="fixed scale")
    found = reconcile(WITHOUT, sds, linear_constraints(FLOWS))
    assert_allclose(found.adjusted, design @ fit.params, rtol=1e-12)
    covariance = design @ fit.normalized_cov_params @ design.T
    assert_allclose(found.covariance, covariance, rtol=1e-9, atol=1e-12)
    assert_allclose(found.chi_square, fit.ssr, rtol=1e-10)


def test_a_product_is_closed_too():
    """Mass times grade against metal, by a multiplier that a root finder gives."""
    from scipy.optimize import fsolve

    y, s = np.array([10.0, 2.0, 21.0]), np.array([0.3, 0.05, 0.4])

    def conditions(z):
        x, weight = z[:3], z[3]
        slope = np.array([x[1], x[0], -1.0])
        return [*((x - y) / s**2 + weight * slope), x[0] * x[1] - x[2]]

    expected = fsolve(conditions, [*y, 0.0], xtol=1e-13)[:3]
    found = reconcile(
        y, s, lambda x: (np.array([x[0] * x[1] - x[2]]), np.array([[x[1], x[0], -1.0]]))
    )
    assert_allclose(found.adjusted, expected, rtol=1e-6)  # the last linearisation is not curved
    assert_allclose(found.adjusted[0] * found.adjusted[1], found.adjusted[2], rtol=1e-12)


def test_one_constraint_cannot_name_a_measurement():
    found = reconcile([6.8, 4.9, 2.1], [0.14, 0.07, 0.06], linear_constraints([[1, -1, -1]]))
    assert_allclose(np.abs(found.statistic), np.abs(found.statistic[0]), rtol=1e-12)
    assert_allclose(np.abs(found.likeness), 1.0, rtol=1e-12)
    assert set(found.suspects()) == {0, 1, 2}
    assert_allclose(found.statistic[0] ** 2, found.chi_square, rtol=1e-12)


def test_what_nothing_checks_stays_as_it_is():
    found = reconcile([1.0, 2.0, 5.0], [0.1, 0.1, 0.1], linear_constraints([[1, -1, 0]]))
    assert found.adjusted[2] == 5.0
    assert np.isnan(found.statistic[2])
    assert 2 not in found.suspects()
    free = reconcile([1.0], [0.1], linear_constraints(np.zeros((0, 1))))
    assert (free.degrees_of_freedom, free.chance, free.suspects()) == (0, 1.0, ())


def test_constraints_that_repeat_each_other_count_once():
    once = reconcile([6.8, 4.9, 2.1], np.full(3, 0.1), linear_constraints([[1, -1, -1]]))
    twice = reconcile(
        [6.8, 4.9, 2.1], np.full(3, 0.1), linear_constraints([[1, -1, -1], [2, -2, -2]])
    )
    assert twice.degrees_of_freedom == 1
    assert_allclose(twice.adjusted, once.adjusted, rtol=1e-13)


def test_adjustments_have_the_spread_they_are_said_to_have():
    generator = np.random.default_rng(11)
    truth, sds = np.array([100.0, 64, 36, 64, 36, 100]), np.array([2.0, 0.5, 0.3, 0.7, 0.2, 1.0])
    drawn = truth + sds * generator.standard_normal((4000, 6))
    found = [reconcile(row, sds, linear_constraints(FLOWS)) for row in drawn]
    statistic = np.array([f.statistic for f in found])
    assert_allclose(statistic.std(axis=0), 1.0, rtol=0.05)
    chances = np.array([f.chance for f in found])
    assert_allclose(np.mean(chances < 0.05), 0.05, atol=0.012)
    spread = np.array([f.adjusted for f in found]).std(axis=0)
    assert_allclose(spread, np.sqrt(np.diag(found[0].covariance)), rtol=0.05)


@pytest.mark.parametrize(("values", "sds"), [([1.0, 2.0], [0.1, 0.0]), ([1.0, np.nan], [0.1, 0.1])])
def test_no_precision_no_reconciliation(values, sds):
    with pytest.raises(InputProblems, match="finite values with a precision above 0"):
        reconcile(values, sds, linear_constraints([[1, -1]]))
