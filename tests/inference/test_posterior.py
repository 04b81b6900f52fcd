import sys
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import norm, truncnorm, uniform
from scipy.stats import t as student

from leachkin.errors import InputProblems, MissingExtraError
from leachkin.inference import LeastSquaresProblem, least_squares, sample_posterior
from leachkin.inference.posterior import autocorrelation_times, open_ends

X = np.array([0.4, 1.1, 1.9, 3.2, 4.1, 5.3, 6.0, 7.7])
Y = np.array([2.1, 2.9, 3.2, 5.2, 5.4, 7.1, 7.4, 9.6])
COLUMNS = np.stack([np.ones_like(X), X], axis=1)


def problem_of(columns=COLUMNS, y=Y, stated=False, low=-50.0, high=50.0):
    p = columns.shape[1]
    return LeastSquaresProblem(
        tuple(f"b{i + 1}" for i in range(p)),
        np.full(p, 0.5),
        np.broadcast_to(np.asarray(low, dtype=float), (p,)).copy(),
        np.broadcast_to(np.asarray(high, dtype=float), (p,)).copy(),
        lambda v: (columns @ v - y, columns),
        stated=stated,
    )


def sampled(problem, columns=COLUMNS, y=Y, seed=5, walkers=100, **more):
    pytest.importorskip("emcee", reason="emcee is not installed: pip install 'leachkin[posterior]'")
    found = least_squares(problem)

    def squares(vectors):
        return np.sum((vectors @ columns.T - y) ** 2, axis=1)

    return found, sample_posterior(problem, found, squares, seed=seed, walkers=walkers, **more)


def assert_quantiles(draws, law, independent):
    """Quantiles within five of their own standard deviations, by the independent draws."""
    for q in (0.025, 0.16, 0.5, 0.84, 0.975):
        expected = law.ppf(q)
        error = np.sqrt(q * (1 - q) / independent) / law.pdf(expected)
        assert abs(np.quantile(draws, q) - expected) < 5 * error, (q, expected)


def test_without_the_package_the_message_says_what_to_install(monkeypatch):
    monkeypatch.setitem(sys.modules, "emcee", None)
    problem = problem_of()
    with pytest.raises(MissingExtraError, match=r"pip install 'leachkin\[posterior\]'"):
        sample_posterior(problem, least_squares(problem), seed=1)


def test_an_estimated_scatter_gives_students_t():
    """The posterior of a straight line with 1/sigma beforehand [gelman2013]."""
    found, posterior = sampled(problem_of())
    assert posterior.long_enough
    for j in range(2):
        sd = np.sqrt(found.covariance[j, j])
        law = student(found.degrees_of_freedom, found.vector[j], sd)
        assert_quantiles(posterior.draws[:, j], law, posterior.independent_draws)
        ends, line = posterior.interval(j), found.interval(j)
        assert ends.method == "posterior" and not ends.why_not
        assert_allclose([ends.low, ends.high], [line.low, line.high], atol=0.25 * sd)


def test_a_stated_precision_gives_a_normal_law():
    scaled, y = COLUMNS / 0.3, Y / 0.3
    found, posterior = sampled(problem_of(scaled, y, stated=True), scaled, y)
    assert found.widening == 1.0
    slope = norm(found.vector[1], np.sqrt(found.covariance[1, 1]))
    assert_quantiles(posterior.draws[:, 1], slope, posterior.independent_draws)
    assert_allclose(
        np.corrcoef(posterior.draws.T)[0, 1],
        found.covariance[0, 1] / np.sqrt(found.covariance[0, 0] * found.covariance[1, 1]),
        atol=5 / np.sqrt(posterior.independent_draws),
    )


def test_at_a_bound_the_law_is_cut_and_the_interval_one_sided():
    ones, y = np.ones((4, 1)), np.array([-1.2, 0.4, -0.8, 0.2])  # mean -0.35, variance 1/4
    found, posterior = sampled(problem_of(ones, y, stated=True, low=0.0), ones, y)
    assert found.states == ("at its low bound",)
    law = truncnorm(0.7, 100.7, loc=-0.35, scale=0.5)
    assert_quantiles(posterior.draws[:, 0], law, posterior.independent_draws)
    ends = posterior.interval(0)
    assert ends.low is None and ends.standard_error is None
    assert ends.method == "one-sided, posterior" and "end of its range" in ends.why_not
    assert ends.high == pytest.approx(law.ppf(0.95), rel=0.05)


def test_a_quantity_that_the_data_do_not_hold_keeps_its_whole_range():
    columns = np.column_stack([COLUMNS, np.zeros_like(X)])
    found, posterior = sampled(problem_of(columns, high=[50.0, 50.0, 9.0]), columns)
    assert found.states[2] == "not held"
    assert posterior.draws[:, 2].min() < -45 and posterior.draws[:, 2].max() > 8
    ends = posterior.interval(2)
    assert (ends.low, ends.high, ends.method) == (None, None, "none")
    assert "whole range" in ends.why_not
    assert posterior.interval(1).low is not None


def test_a_share_without_data_is_as_likely_anywhere():
    """Uniform between its bounds, and not in its log-odds, which would pile up at the ends."""
    columns = np.column_stack([COLUMNS, np.zeros_like(X)])
    problem = replace(
        problem_of(columns, low=[-50, -50, -4.0], high=[50, 50, 8.0]),
        scales=("linear", "linear", "logit"),
    )
    _, posterior = sampled(problem, columns)
    low, high = 1 / (1 + np.exp([4.0, -8.0]))
    share = 1 / (1 + np.exp(-posterior.draws[:, 2]))
    assert_quantiles(share, uniform(low, high - low), posterior.independent_draws)
    ends = posterior.interval(2)
    assert (ends.low, ends.high) == (None, None) and "whole range" in ends.why_not


def test_a_chain_that_is_not_long_enough_says_so():
    generator = np.random.default_rng(3)
    columns, y = generator.standard_normal((40, 12)), generator.standard_normal(40)
    _, posterior = sampled(problem_of(columns, y), columns, y, walkers=26, most_steps=500)
    assert not posterior.long_enough
    assert "not long enough, 50 are needed" in posterior.said()
    assert posterior.interval(0).method == "posterior, chain not long enough"
    assert 0.0 < posterior.acceptance < 1.0
    assert (posterior.steps, posterior.burn_in) == (400, 100)


def test_one_seed_gives_one_chain_and_progress_is_told():
    told = []
    _, first = sampled(problem_of(), most_steps=500, progress=lambda *a: told.append(a))
    _, again = sampled(problem_of(), most_steps=500)
    _, other = sampled(problem_of(), most_steps=500, seed=6)
    assert_allclose(first.draws, again.draws, rtol=0, atol=0)
    assert not np.array_equal(first.draws, other.draws)
    assert told[-1] == (500, 500)
    picked = first.draw_vectors(first.draws.shape[0], 2)
    assert_allclose(np.sort(picked[:, 0]), np.sort(first.draws[:, 0]), rtol=0, atol=0)
    assert first.draw_vectors(3 * first.draws.shape[0], 2).shape == (3 * len(first.draws), 2)


def test_autocorrelation_times_are_those_of_a_first_order_process():
    """(1 + phi)/(1 - phi) for x' = phi x + noise [sokal1997]."""
    generator = np.random.default_rng(1)
    phi = np.array([0.0, 0.5, 0.9])
    x = np.zeros((4000, 40, 3))
    for i in range(1, 4000):
        x[i] = phi * x[i - 1] + generator.standard_normal((40, 3))
    assert_allclose(autocorrelation_times(x), (1 + phi) / (1 - phi), rtol=0.08)
    emcee = pytest.importorskip("emcee", reason="emcee is not installed")
    outside = emcee.autocorr.integrated_time(x, c=5, tol=0)
    assert_allclose(autocorrelation_times(x), outside, rtol=0.02)


def test_a_walker_that_stands_still_counts_as_one_draw_a_step():
    assert_allclose(autocorrelation_times(np.ones((10, 4, 1))), 1.0)


def test_open_sides_are_those_where_the_density_has_not_fallen():
    generator = np.random.default_rng(2)
    normal = generator.standard_normal(20000)
    assert open_ends(normal, -8.0, 8.0) == (False, False)
    assert open_ends(normal, -8.0, np.inf) == (False, False)
    cut = normal[(normal > -1.5)]  # the density there is still 32 % of the highest
    assert open_ends(cut, -1.5, 8.0) == (True, False)
    cut = normal[normal < 2.5]  # 4 %: outside a 95 % interval, inside a 99.5 % one
    assert open_ends(cut, -8.0, 2.5) == (False, False)
    assert open_ends(cut, -8.0, 2.5, 0.995) == (False, True)


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ({"walkers": 5}, "an even number, 6 or more"),
        ({"most_steps": 10}, "500 or more"),
    ],
)
def test_bad_numbers_are_refused(more, words):
    with pytest.raises(InputProblems, match=words):
        sampled(problem_of(), **{"walkers": 100, **more})


def test_what_has_no_posterior_is_refused():
    pytest.importorskip("emcee", reason="emcee is not installed")
    exact = problem_of(COLUMNS[:2], Y[:2])
    with pytest.raises(InputProblems, match="no scatter"):
        sample_posterior(exact, least_squares(exact), seed=1)
    open_problem = problem_of(high=np.inf)
    with pytest.raises(InputProblems, match="not finite"):
        sample_posterior(open_problem, least_squares(open_problem), seed=1)
    _, posterior = sampled(problem_of(), most_steps=500)
    with pytest.raises(InputProblems, match="0 to 1"):
        posterior.interval(2)
    with pytest.raises(InputProblems, match="1 draw"):
        posterior.draw_vectors(0, 1)
