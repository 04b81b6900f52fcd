"""Reagent demand: parts by hand, limits, slope, batch."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import RateLaw, ReagentDemand, Reference, Resistance
from leachkin.testwork import SizeDistribution

ORE = SizeDistribution.single(1.0)
CURVE = RateLaw(
    "chemical", (Resistance("chemical", np.log(10.0)),), Reference(), [1.0], [0.9]
).ore_curve(ORE)
DEMAND = ReagentDemand(1.543, 6.8, 9.0, 0.8, 14.0, 170.0)


def test_by_hand():
    metal = 1.543 * 6.8 * 0.9 * (1 - 0.5**3)
    gangue = 9.0 * (1 - np.exp(-5.0 / 0.8)) + 14.0 * (1 - np.exp(-5.0 / 170.0))
    assert_allclose(DEMAND.metal_kg_per_t(CURVE, 5.0), metal, rtol=1e-6)
    assert_allclose(DEMAND.gangue_kg_per_t(5.0), gangue, rtol=1e-14)
    assert_allclose(DEMAND.kg_per_t(CURVE, 5.0), metal + gangue, rtol=1e-6)


def test_ends():
    assert DEMAND.kg_per_t(CURVE, 0.0) == 0.0
    assert_allclose(DEMAND.kg_per_t(CURVE, 1e5), 1.543 * 6.8 * 0.9 + 23.0, rtol=1e-12)


def test_without_gangue_it_is_the_metal():
    alone = ReagentDemand(1.543, 6.8)
    s = np.linspace(0.0, 20.0, 9)
    assert_allclose(alone.kg_per_t(CURVE, s), 1.543 * 6.8 * CURVE(s), rtol=1e-15)
    assert_allclose(alone.derivative(CURVE, s), 1.543 * 6.8 * CURVE.derivative(s), rtol=1e-15)


def test_derivative_against_differences():
    s = np.array([0.05, 0.4, 3.0, 9.0])
    h = 1e-6 * s
    up, down = DEMAND.kg_per_t(CURVE, s + h), DEMAND.kg_per_t(CURVE, s - h)
    assert_allclose(DEMAND.derivative(CURVE, s), (up - down) / (2 * h), rtol=1e-6)


def test_batch_is_the_loop():
    many = ReagentDemand(1.543, np.array([6.8, 7.2]), 9.0, 0.8, np.array([14.0, 10.0]), 170.0)
    s = np.linspace(0.0, 20.0, 9)
    assert many.kg_per_t(CURVE, s).shape == (2, 9)
    assert many.kg_per_t(CURVE, 3.0).shape == (2,)
    for i in range(2):
        one = many.select(i)
        assert_allclose(one.kg_per_t(CURVE, s), many.kg_per_t(CURVE, s)[i], rtol=1e-15)
        assert_allclose(one.derivative(CURVE, s), many.derivative(CURVE, s)[i], rtol=1e-15)


@pytest.mark.parametrize(
    "arguments, message",
    [
        ((-1.0, 6.8), "per_metal_kg_per_kg: -1"),
        ((1.5, float("nan")), "head_kg_per_t: nan"),
        ((1.5, 6.8, 9.0, 0.0), "fast_h: 0.0. Allowed: above 0 h"),
        ((1.5, 6.8, 9.0, 1.0, -2.0), "slow_kg_per_t: -2"),
    ],
)
def test_what_has_no_meaning_is_refused(arguments, message):
    with pytest.raises(InputProblems, match=message):
        ReagentDemand(*arguments)
