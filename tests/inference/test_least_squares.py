import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.inference import LeastSquaresProblem, draw_vectors, held_covariance, least_squares


def decay_problem(t, y, start=(0.0, 0.0), sd=None, **bounds):
    """y = exp(a) exp(-exp(b) t), both on a log scale."""
    weight = 1.0 if sd is None else 1.0 / sd

    def evaluate(v):
        a, b = np.exp(v)
        curve = a * np.exp(-b * t)
        return weight * (curve - y), weight * np.stack([curve, -b * t * curve], axis=1)

    low = np.array(bounds.get("low", (-20.0, -20.0)))
    high = np.array(bounds.get("high", (20.0, 20.0)))
    return LeastSquaresProblem(
        ("a", "b"), np.array(start), low, high, evaluate, ("log", "log"), sd is not None
    )


def misra1a():
    """Misra1a of the NIST StRD nonlinear regression sets: b1 (1 - exp(-b2 x))."""
    y = "10.07 14.73 17.94 23.93 29.61 35.18 40.02 44.82 50.76 55.05 61.01 66.40 75.47 81.78"
    x = "77.6 114.9 141.1 190.8 239.9 289.0 332.8 378.4 434.8 477.3 536.8 593.1 689.1 760.0"
    x, y = (np.array(text.split(), dtype=float) for text in (x, y))

    def evaluate(v):
        gone = np.exp(-v[1] * x)
        return v[0] * (1 - gone) - y, np.stack([1 - gone, v[0] * x * gone], axis=1)

    return evaluate


@pytest.mark.parametrize("start", [(500.0, 1e-4), (250.0, 5e-4)])
def test_certified_set_misra1a(start):
    # certified: 238.94212918 (sd 2.7070075241), 5.5015643181e-4 (sd 7.2668688436e-6)
    problem = LeastSquaresProblem(
        ("b1", "b2"), np.array(start), np.zeros(2), np.array([1e4, 1.0]), misra1a()
    )
    found = least_squares(problem)
    assert found.converged, found.message
    assert_allclose(found.vector, [238.94212918, 5.5015643181e-4], rtol=1e-9)
    errors = [found.standard_error(0), found.standard_error(1)]
    assert_allclose(errors, [2.7070075241, 7.2668688436e-6], rtol=1e-6)
    assert_allclose(found.sum_of_squares, 0.12455138894, rtol=1e-9)
    assert found.degrees_of_freedom == 12


def test_exact_data_come_back_from_a_poor_start():
    t = np.linspace(0.1, 5, 12)
    found = least_squares(decay_problem(t, 3.0 * np.exp(-0.7 * t), start=(3.0, 2.0)))
    assert found.converged
    assert_allclose([found.natural(0), found.natural(1)], [3.0, 0.7], rtol=1e-9)


def test_intervals_are_normal_with_stated_precision_and_t_without():
    t = np.linspace(0.1, 5, 12)
    wave = 0.01 * np.cos(7 * t)
    stated = least_squares(decay_problem(t, 3 * np.exp(-0.7 * t) + wave, sd=0.01))
    plain = least_squares(decay_problem(t, 3 * np.exp(-0.7 * t) + wave))
    assert stated.student_degrees is None and plain.student_degrees == 10
    half = np.log(stated.interval(0).high / stated.interval(0).value)
    assert_allclose(half, 1.959964 * np.sqrt(stated.covariance[0, 0]), rtol=1e-6)
    half = np.log(plain.interval(0).high / plain.interval(0).value)
    assert_allclose(half, 2.228139 * np.sqrt(plain.covariance[0, 0]), rtol=1e-6)


def test_scatter_larger_than_stated_widens():
    t = np.linspace(0.1, 5, 12)
    wave = 0.05 * np.cos(7 * t)
    found = least_squares(decay_problem(t, 3 * np.exp(-0.7 * t) + wave, sd=0.01))
    assert found.widening > 2 and found.student_degrees == 10
    assert_allclose(found.widening**2, found.sum_of_squares / 10)


def test_a_quantity_at_its_bound_is_one_sided_and_the_other_keeps_its_interval():
    t = np.linspace(0.1, 5, 12)
    y = 3 * np.exp(-0.7 * t) + 0.01 * np.cos(7 * t)
    found = least_squares(decay_problem(t, y, low=(-20, np.log(0.75))))
    assert found.states == ("free", "at its low bound")
    held = found.interval(1)
    assert held.low is None and 0.75 < held.high < 0.9 and "end of its range" in held.why_not
    assert found.interval(0).low < found.interval(0).value < found.interval(0).high
    assert found.covariance[1, 1] == 0


def test_quantities_held_only_together_are_named_and_others_stand():
    def evaluate(v):
        x = np.linspace(0, 1, 9)
        jacobian = np.stack([x, x, np.ones(9)], axis=1)
        return jacobian @ v - (2 * x + 1 + 0.01 * np.cos(20 * x)), jacobian

    wide = np.full(3, 100.0)
    found = least_squares(LeastSquaresProblem(tuple("abc"), np.ones(3), -wide, wide, evaluate))
    assert found.states == ("not held", "not held", "free")
    assert found.reasons[0] == "the data hold it only together with b"
    assert found.interval(0).low is None and found.interval(2).low is not None


def test_a_quantity_without_any_effect_is_named():
    jacobian = np.column_stack([np.zeros(5), np.arange(1.0, 6.0)])
    found = held_covariance(jacobian)
    assert found.held.tolist() == [False, True] and found.partners[0] == ()
    assert_allclose(found.covariance[1, 1], 1 / 55)


def test_covariance_of_badly_scaled_columns():
    x = np.linspace(1, 2, 20)
    jacobian = np.stack([np.ones(20), x], axis=1)
    scale = np.array([1e9, 1e-9])
    plain = held_covariance(jacobian).covariance
    assert_allclose(held_covariance(jacobian * scale).covariance * np.outer(scale, scale), plain)


def test_too_few_evaluations_is_not_converged_and_has_no_interval():
    t = np.linspace(0.1, 5, 12)
    problem = decay_problem(t, 3 * np.exp(-0.7 * t), start=(5.0, 3.0))
    found = least_squares(problem, max_evaluations=2)
    assert not found.converged and "no minimum within 2 evaluations" in found.message
    assert found.interval(0).low is None and found.interval(0).why_not == "the fit did not converge"


def test_bounds_in_the_wrong_order_are_refused():
    with pytest.raises(InputProblems, match="low bound not below"):
        LeastSquaresProblem(("a",), np.ones(1), np.ones(1), np.ones(1), lambda v: (v, v))


def test_draws_have_the_covariance_and_repeat_with_the_seed():
    covariance = np.array([[4.0, 1.9, 0], [1.9, 1.0, 0], [0, 0, 0]])
    draws = draw_vectors(np.array([1.0, 2.0, 3.0]), covariance, 40_000, seed=3)
    assert_allclose(np.cov(draws.T), covariance, atol=0.12)
    assert (draws[:, 2] == 3.0).all()
    assert (draws == draw_vectors(np.array([1.0, 2.0, 3.0]), covariance, 40_000, seed=3)).all()


def test_student_draws_are_wider():
    draws = draw_vectors(np.zeros(1), np.eye(1), 100_000, seed=5, degrees_of_freedom=4)
    assert_allclose(np.quantile(draws, 0.975), 2.776, rtol=0.05)  # t of 4 degrees


@pytest.mark.parametrize("far", [np.nan, np.inf, 1e200])
def test_a_trial_step_out_of_the_domain_is_shortened(far):
    times = np.arange(1.0, 4.0)

    def evaluate(v):
        if v[0] <= 0:  # where the first full step from 100 lands
            return np.full(3, far), np.zeros((3, 1))
        return times * (np.log(v[0]) - np.log(0.01)), (times / v[0])[:, None]

    wide = np.array([np.inf])
    found = least_squares(LeastSquaresProblem(("v",), np.array([100.0]), -wide, wide, evaluate))
    assert found.converged, found.message
    assert_allclose(found.vector, [0.01], rtol=1e-9)
