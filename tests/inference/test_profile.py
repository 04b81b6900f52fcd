from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm
from numpy.testing import assert_allclose
from scipy.optimize import brentq
from scipy.stats import t as student

from leachkin.errors import InputProblems
from leachkin.inference import (
    LeastSquaresProblem,
    least_squares,
    profile_interval,
    refit_by_solver,
    refit_held,
)

X = np.array([0.4, 1.1, 1.9, 3.2, 4.1, 5.3, 6.0, 7.7])
Y = np.array([2.1, 2.9, 3.2, 5.2, 5.4, 7.1, 7.4, 9.6])
PRESSURE = "77.6 114.9 141.1 190.8 239.9 289.0 332.8 378.4 434.8 477.3 536.8 593.1 689.1 760.0"
VOLUME = "10.07 14.73 17.94 23.93 29.61 35.18 40.02 44.82 50.76 55.05 61.01 66.40 75.47 81.78"


def problem_of(evaluate, start, low=None, high=None, scales=(), stated=False):
    p = len(start)
    wide = np.full(p, np.inf)
    return LeastSquaresProblem(
        tuple(f"b{i + 1}" for i in range(p)),
        np.array(start, dtype=float),
        -wide if low is None else np.array(low, dtype=float),
        wide if high is None else np.array(high, dtype=float),
        evaluate,
        scales,
        stated,
    )


def linear(columns, y):
    return lambda v: (columns @ v - y, columns)


def straight(x=X, y=Y, **more):
    columns = np.stack([np.ones_like(x), x], axis=1)
    return problem_of(linear(columns, y), [0.0, 0.0], **more)


def misra1a():
    """Misra1a of the NIST StRD sets: b1 (1 - exp(-b2 x))."""
    x, y = (np.array(text.split(), dtype=float) for text in (PRESSURE, VOLUME))

    def evaluate(v):
        gone = np.exp(-v[1] * x)
        return v[0] * (1 - gone) - y, np.stack([1 - gone, v[0] * x * gone], axis=1)

    return problem_of(evaluate, [250.0, 5e-4], low=[0, 0], high=[1e4, 1.0])


@pytest.mark.parametrize("stated", [True, False])
@pytest.mark.parametrize("level", [0.5, 0.95, 0.999])
def test_a_linear_problem_gives_the_linearised_interval(stated, level):
    columns = np.stack([np.ones_like(X), X, np.sin(X), 1e4 * X**2], axis=1)
    problem = problem_of(linear(columns, Y), [0.0] * 4, stated=stated)
    found = least_squares(problem)
    for j in range(4):
        ends, line = profile_interval(problem, found, j, level), found.interval(j, level)
        half = 0.5 * (line.high - line.low)
        assert_allclose([ends.low, ends.high], [line.low, line.high], rtol=0, atol=1e-8 * half)
        assert ends.method == "profile likelihood"
        assert ends.standard_error == pytest.approx(line.standard_error)
        assert not ends.why_not


def test_ends_follow_a_change_of_scale_where_linearised_ones_do_not():
    plain = straight()
    slope = least_squares(plain).interval(1)

    def evaluate(v):
        columns = np.stack([np.ones_like(X), X * np.exp(v[1])], axis=1)
        return v[0] + X * np.exp(v[1]) - Y, columns

    problem = problem_of(evaluate, [0.0, 0.0], scales=("linear", "log"))
    found = least_squares(problem)
    ends = profile_interval(problem, found, 1)
    assert_allclose([ends.low, ends.high], [slope.low, slope.high], rtol=1e-9)
    assert abs(found.interval(1).high / slope.high - 1) > 1e-5


def crossing(x, y):
    """y = b2 (x - b1): the profile of b1 is the interval of Fieller, in closed form."""

    def evaluate(v):
        return v[1] * (x - v[0]) - y, np.stack([np.full_like(x, -v[1]), x - v[0]], axis=1)

    return problem_of(evaluate, [0.0, 1.0])


def test_the_crossing_of_a_line_has_the_interval_of_fieller():
    line = sm.OLS(Y, sm.add_constant(X)).fit()
    (a, b), V, t = line.params, line.cov_params(), student.ppf(0.975, X.size - 2)
    quadratic = [b**2 - t**2 * V[1, 1], 2 * (a * b - t**2 * V[0, 1]), a**2 - t**2 * V[0, 0]]
    expected = np.sort(np.roots(quadratic))
    problem = crossing(X, Y)
    ends = profile_interval(problem, least_squares(problem), 0)
    assert_allclose([ends.low, ends.high], expected, rtol=1e-8)
    assert ends.value - ends.low > 1.05 * (ends.high - ends.value)  # skew


def test_a_side_that_the_data_leave_open_has_no_end_and_says_so():
    # with a slope that may be 0 the crossing may lie anywhere to the left
    y = np.array([2.1, 2.0, 2.5, 1.9, 2.4, 2.2, 2.6, 2.3])
    problem = crossing(X, y)
    start = replace(problem, start=np.array([-40.0, 0.05]))
    found = least_squares(start)
    ends = profile_interval(start, found, 0)
    assert ends.low is None and ends.high is not None
    line = sm.OLS(y, sm.add_constant(X)).fit()
    (a, b), V, t = line.params, line.cov_params(), student.ppf(0.975, X.size - 2)
    roots = np.roots([b**2 - t**2 * V[1, 1], 2 * (a * b - t**2 * V[0, 1]), a**2 - t**2 * V[0, 0]])
    assert_allclose(ends.high, roots.min(), rtol=1e-8)
    assert "the data allow it as far as was looked" in ends.why_not
    assert ends.method == "one-sided, profile likelihood"
    bounded = replace(start, low=np.array([-500.0, -10.0]))
    ends = profile_interval(bounded, least_squares(bounded), 0)
    assert ends.low is None
    assert "the data allow it as far as the end of its range" in ends.why_not


@pytest.mark.parametrize("level", [0.8, 0.95, 0.99])
def test_a_rate_has_the_ends_of_a_direct_scan(level):
    problem = misra1a()
    x, y = (np.array(text.split(), dtype=float) for text in (PRESSURE, VOLUME))

    def squares(rate):  # the amplitude is linear: its best value in closed form
        basis = 1 - np.exp(-rate * x)
        return np.sum((y - basis * (basis @ y) / (basis @ basis)) ** 2)

    found = least_squares(problem)
    least = found.sum_of_squares
    target = least * (1 + student.ppf(0.5 * (1 + level), 12) ** 2 / 12)
    best = found.vector[1]
    expected = [
        brentq(lambda k: squares(k) - target, *pair, xtol=1e-16)
        for pair in ((0.5 * best, best), (best, 2 * best))
    ]
    ends = profile_interval(problem, found, 1, level)
    assert_allclose([ends.low, ends.high], expected, rtol=1e-8)


def test_one_sided_at_a_bound():
    problem = straight(y=-Y, low=[-np.inf, 0.0], high=[np.inf, 5.0])
    found = least_squares(problem)
    assert found.states[1] == "at its low bound"
    ends, line = profile_interval(problem, found, 1), found.interval(1)
    assert ends.low is None
    assert_allclose(ends.high, line.high, rtol=1e-6)
    assert "end of its range" in ends.why_not


def test_no_interval_without_a_reason():
    twins = np.stack([X, X, np.ones_like(X)], axis=1)
    problem = problem_of(linear(twins, Y), [0.0, 0.0, 0.0])
    found = least_squares(problem)
    absent = profile_interval(problem, found, 0)
    assert (absent.low, absent.high, absent.method) == (None, None, "none")
    assert "only together with b2" in absent.why_not
    stopped = replace(found, converged=False)
    assert "did not converge" in profile_interval(problem, stopped, 2).why_not
    full = straight(x=X[:2], y=Y[:2])
    assert "as many quantities as points" in profile_interval(full, least_squares(full), 0).why_not


def test_a_lower_minimum_met_on_the_way_is_told():
    def evaluate(v):
        x = v[0]
        return np.array([1.5 * (x * x - 1), 0.5 * (x - 1)]), np.array([[3.0 * x], [0.5]])

    problem = problem_of(evaluate, [-1.2], stated=True)
    found = least_squares(problem)
    assert found.vector[0] < 0
    ends = profile_interval(problem, found, 0)
    assert ends.high is None and ends.low is not None
    assert "not at the lowest minimum" in ends.why_not


def test_warm_and_cold_fits_with_one_held_agree():
    problem = misra1a()
    found = least_squares(problem)
    for j, spread in ((0, 30.0), (1, 1e-4)):
        for value in found.vector[j] + spread * np.linspace(-1, 1, 7):
            warm, squares = refit_held(problem, j, value, found.vector, 1e-12)
            cold, expected = refit_by_solver(problem, j, value, problem.start)
            assert_allclose(squares, expected, rtol=1e-10)
            assert_allclose(warm, cold, rtol=1e-7)
            assert warm[j] == value


def test_a_position_or_a_level_that_does_not_exist_is_refused():
    problem = straight()
    found = least_squares(problem)
    with pytest.raises(InputProblems, match="0 to 1"):
        profile_interval(problem, found, 2)
    with pytest.raises(InputProblems, match="between 0 and 1"):
        profile_interval(problem, found, 0, level=95)


def test_a_side_out_of_the_domain_of_the_model_has_no_end_and_says_so():
    plain = straight()
    whole = profile_interval(plain, least_squares(plain), 1)
    wall = whole.value + 0.1 * (whole.high - whole.value)

    def evaluate(v):
        residuals, jacobian = plain.residuals_and_jacobian(v)
        return (residuals if v[1] < wall else np.full_like(residuals, np.nan)), jacobian

    problem = problem_of(evaluate, [0.0, 0.0])
    ends = profile_interval(problem, least_squares(problem), 1)
    assert ends.high is None
    assert_allclose(ends.low, whole.low, rtol=1e-9)
    assert "could not be fitted again" in ends.why_not
