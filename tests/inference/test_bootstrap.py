import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import binom

from leachkin.errors import InputProblems
from leachkin.inference import bootstrap_intervals

VALUES = np.array([3.1, 4.7, 2.2, 5.9, 4.1, 3.6, 6.4, 2.8])


def mean_of(values):
    return lambda picked: {"mean": float(np.mean(values[list(picked)]))}


def test_resampled_means_have_the_exact_bootstrap_spread():
    found = bootstrap_intervals(mean_of(VALUES), VALUES.size, n=4000, seed=1)
    exact = VALUES.std() / np.sqrt(VALUES.size)  # by enumeration of all resamples
    ends = found.interval("mean")
    assert_allclose(ends.standard_error, exact, rtol=0.05)  # 4.5 standard errors of a spread
    assert_allclose(found.draws.mean(), VALUES.mean(), atol=4.5 * exact / np.sqrt(4000))
    assert_allclose(
        [ends.low, ends.high], VALUES.mean() + 1.96 * exact * np.array([-1, 1]), rtol=0.05
    )
    assert ends.value == pytest.approx(VALUES.mean())
    assert ends.method == "bootstrap of 8 groups, 4000 of 4000 resamples gave it"


def test_resamples_that_fail_are_counted():
    def refit(picked):
        if 0 not in picked:
            return None
        return {"mean": 1.0, **({"last": 2.0} if 7 in picked else {})}

    found = bootstrap_intervals(refit, 8, n=1000, seed=2)
    share = 1 - (7 / 8) ** 8
    low, high = binom.ppf([1e-5, 1 - 1e-5], 1000, share)
    assert low <= found.converged <= high
    assert found.asked == 1000
    both = 1 - 2 * (7 / 8) ** 8 + (6 / 8) ** 8
    low, high = binom.ppf([1e-5, 1 - 1e-5], 1000, both)
    assert low <= found.gave("last") <= high
    assert found.gave("mean") == found.converged


def test_the_seed_repeats_a_bootstrap():
    first, second, other = (
        bootstrap_intervals(mean_of(VALUES), 8, n=50, seed=s) for s in (5, 5, 6)
    )
    assert np.array_equal(first.draws, second.draws)
    assert not np.array_equal(first.draws, other.draws)


def test_an_interval_is_absent_with_a_reason():
    few = bootstrap_intervals(mean_of(VALUES), 3, n=300, seed=1).interval("mean")
    assert few.low is None and "3 groups are too few" in few.why_not
    short = bootstrap_intervals(mean_of(VALUES), 8, n=100, seed=1)
    assert "200 are needed" in short.interval("mean").why_not
    assert short.interval("mean", level=0.9).low is not None

    def rarely(picked):
        return {"mean": 1.0} if picked[0] == picked[1] == 0 or picked == tuple(range(8)) else None

    selected = bootstrap_intervals(rarely, 8, n=300, seed=1).interval("mean")
    assert selected.low is None and "of 300 resamples gave it" in selected.why_not


def test_groups_that_cannot_be_fitted_as_they_are_are_refused():
    with pytest.raises(InputProblems, match="does not converge"):
        bootstrap_intervals(lambda picked: None, 8, n=10, seed=1)
    with pytest.raises(InputProblems, match="1 or more"):
        bootstrap_intervals(mean_of(VALUES), 8, n=0, seed=1)
    with pytest.raises(InputProblems, match="mean"):
        bootstrap_intervals(mean_of(VALUES), 8, n=9, seed=1).interval("median")
