import numpy as np
import pytest
import statsmodels.api as sm
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.inference import correlation_matrix, leverage_of, standardised_residuals

X = np.array([0.4, 1.1, 1.9, 3.2, 4.1, 5.3, 6.0, 7.7])
Y = np.array([2.1, 2.9, 3.2, 5.2, 5.4, 7.1, 7.4, 9.6])
SD = np.array([0.1, 0.1, 0.2, 0.1, 0.3, 0.2, 0.2, 0.4])
COLUMNS = np.stack([np.ones_like(X), X, X**2], axis=1)


def test_leverage_and_standardised_residuals_are_those_of_weighted_least_squares():
    """Against statsmodels, an implementation of its own."""
    weighted, target = COLUMNS / SD[:, None], Y / SD
    found = sm.OLS(target, weighted).fit()
    outside = found.get_influence()
    leverage = leverage_of(weighted)
    assert_allclose(leverage, outside.hat_matrix_diag, rtol=1e-10)
    assert_allclose(
        standardised_residuals(found.resid, leverage, float(np.sqrt(found.mse_resid))),
        outside.resid_studentized_internal,
        rtol=1e-9,
    )


def test_the_leverage_of_a_straight_line_is_the_textbook_one():
    """1/n + (x - mean)^2 / sum (x - mean)^2 [belsley1980]."""
    off = X - X.mean()
    expected = 1 / X.size + off**2 / np.sum(off**2)
    assert_allclose(leverage_of(COLUMNS[:, :2]), expected, rtol=1e-12)


def test_what_cannot_be_told_apart_counts_once():
    twice = np.stack([X, 3e7 * X, np.zeros_like(X)], axis=1)
    assert_allclose(leverage_of(twice), X**2 / np.sum(X**2), rtol=1e-12)
    assert leverage_of(twice).sum() == pytest.approx(1.0)


def test_nothing_to_hold_gives_no_leverage():
    assert_allclose(leverage_of(np.zeros((3, 2))), 0.0)


def test_a_row_that_is_followed_whatever_it_says_has_no_standardised_residual():
    alone = np.array([[1.0, 0.0], [0.0, 1.0], [0.0, 1.0]])
    leverage = leverage_of(alone)
    assert_allclose(leverage, [1.0, 0.5, 0.5])
    found = standardised_residuals(np.array([0.0, 0.3, -0.3]), leverage, 0.5)
    assert np.isnan(found[0])
    assert_allclose(found[1:], [0.6 / np.sqrt(0.5), -0.6 / np.sqrt(0.5)])


def test_correlations_come_from_a_covariance():
    sd = np.array([0.2, 30.0, 0.0])
    covariance = np.outer(sd, sd) * np.array([[1, -0.8, 0], [-0.8, 1, 0], [0, 0, 1]])
    found = correlation_matrix(covariance)
    assert_allclose(found[:2, :2], [[1, -0.8], [-0.8, 1]])
    assert np.isnan(found[2, :2]).all() and found[2, 2] == 1.0


def test_bad_input_is_refused():
    with pytest.raises(InputProblems, match="rows by quantities"):
        leverage_of(X)
    with pytest.raises(InputProblems, match="scatter_sd"):
        standardised_residuals(Y, X, 0.0)
