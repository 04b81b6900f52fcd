import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import norm

from leachkin.errors import InputProblems
from leachkin.scaleup import bands


def test_of_normal_draws():
    """Ends of many normal draws are the quantiles of the distribution."""
    draws = 0.6 + 0.05 * np.random.default_rng(5).standard_normal(100_000)
    band = bands(draws, level=0.9)
    expected = 0.6 + 0.05 * norm.ppf([0.05, 0.5, 0.95])
    assert_allclose([band.low, band.median, band.high], expected, rtol=0, atol=1e-3)
    assert band.n == 100_000 and band.level == 0.9


def test_each_day_on_its_own():
    draws = np.random.default_rng(5).random((31, 4))
    band = bands(draws)
    assert band.low.shape == (4,)
    for day in range(4):
        alone = bands(draws[:, day])
        assert (alone.low, alone.median, alone.high) == (
            band.low[day], band.median[day], band.high[day],
        )  # fmt: skip


def test_low_is_the_low_number_and_wider_levels_hold_narrower_ones():
    draws = np.random.default_rng(5).random(50)
    narrow, wide = bands(-draws, level=0.5), bands(-draws, level=0.95)
    assert wide.low < narrow.low < narrow.median < narrow.high < wide.high
    assert (wide.low_name, wide.high_name) == ("P2.5 (low)", "P97.5 (high)")
    assert_allclose(bands(draws, level=0.5).high, -narrow.low, rtol=1e-14)


def test_equal_draws_have_no_width():
    band = bands(np.full(7, 0.3))
    assert band.low == band.median == band.high == 0.3


@pytest.mark.parametrize(
    ("values", "level", "message"),
    [
        ([0.1, np.nan], 0.8, "values: nan.*finite"),
        ([0.1, np.inf], 0.8, "values: inf.*finite"),
        (0.4, 0.8, "two draws or more"),
        (["a", "b"], 0.8, "values.*numbers"),
        ([0.1, 0.2], 0.0, "level: 0.*above 0 and below 1"),
        ([0.1, 0.2], 1.0, "level: 1.*above 0 and below 1"),
        ([0.1, 0.2], np.nan, "level: nan.*above 0 and below 1"),
    ],
)
def test_refusals(values, level, message):
    with pytest.raises(InputProblems, match=message):
        bands(values, level)
