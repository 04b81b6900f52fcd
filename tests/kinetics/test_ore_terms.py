"""Lag, soluble share, fade, loss and a second fraction."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from leachkin.errors import InputProblems
from leachkin.kinetics import RateLaw, Reference, Resistance, extraction_along
from leachkin.kinetics.ore_terms import effective_hours, hours_until, loss_step
from leachkin.scaleup import tank_train
from leachkin.testwork import SizeDistribution

ORE = SizeDistribution.from_classes([0.25, 1.0, 4.0], [0.4, 0.6])
HOURS = np.array([0.0, 0.3, 1.0, 4.0, 20.0])


def law(**more) -> RateLaw:
    parts = (Resistance("chemical", 2.0), Resistance("ash_layer", 1.0))
    return RateLaw("ash_layer+chemical", parts, Reference(), [1.0], [0.9], **more)


def slow_law() -> RateLaw:
    return RateLaw("chemical", (Resistance("chemical", 4.0),), Reference(), [1.0], [0.9])


@pytest.mark.parametrize("fade", [0.0, 1e-6, 0.03, 2.0])
def test_effective_hours_and_their_derivatives(fade):
    at = np.array([1.5, 3.0, 40.0])
    found = effective_hours(at, 1.0, fade)
    expected = at - 1.0 if fade == 0.0 else -np.expm1(-fade * (at - 1.0)) / fade
    assert_allclose(found.hours, expected, rtol=1e-8)
    h = 1e-6
    by_hours = (effective_hours(at + h, 1.0, fade).hours - found.hours) / h
    by_lag = (effective_hours(at, 1.0 + h, fade).hours - found.hours) / h
    by_fade = (effective_hours(at, 1.0, fade + h).hours - found.hours) / h
    assert_allclose(found.by_hours, by_hours, rtol=1e-4, atol=1e-8)
    assert_allclose(found.by_lag, by_lag, rtol=1e-4, atol=1e-8)
    assert_allclose(found.by_fade, by_fade, rtol=2e-4, atol=1e-8)


def test_nothing_counts_before_the_lag():
    found = effective_hours(np.array([0.0, 0.5, 1.0]), 1.0, 0.2)
    assert_allclose(found.hours, 0.0)
    assert_allclose(found.by_lag, 0.0)


def test_hours_until_is_the_inverse():
    for lag, fade in ((0.0, 0.0), (2.0, 0.05)):
        hours = hours_until(np.array([0.5, 7.0]), lag, fade, 30.0)
        assert_allclose(effective_hours(hours, lag, fade).hours, [0.5, 7.0], rtol=1e-12)
    assert_allclose(hours_until(np.array(50.0), 1.0, 0.1, 30.0), 1.0 + 300.0)


@pytest.mark.parametrize("dissolved", [0.02, 0.1, 0.1 + 1e-9, 0.6])
def test_loss_against_an_integrator(dissolved):
    capacity, rate = 0.1, 0.7

    def slope(_t, lost):
        return rate * (dissolved - lost) * (1.0 - lost / capacity)

    by_steps = solve_ivp(slope, (0.0, 5.0), [0.01], rtol=1e-11, atol=1e-13).y[0, -1]
    lost = np.asarray(0.01)
    for _ in range(5):  # exact for a constant E, so that steps may be of any length
        lost, _ = loss_step(lost, np.asarray(dissolved), np.asarray(capacity), np.asarray(rate))
    assert lost == pytest.approx(by_steps, rel=1e-9)


def test_loss_derivatives_against_differences():
    at = [np.asarray(v) for v in (0.02, 0.5, 0.1, 1.3)]
    slopes = loss_step(*at)[1]
    for j, slope in enumerate(slopes):
        h = 1e-7
        up, down = list(at), list(at)
        up[j], down[j] = up[j] + h, down[j] - h
        by = (loss_step(*up)[0] - loss_step(*down)[0]) / (2 * h)
        assert slope == pytest.approx(by, rel=1e-6, abs=1e-9)


def test_no_more_is_lost_than_there_is_or_fits():
    for dissolved in (0.05, 0.5):
        lost, _ = loss_step(np.zeros(()), np.asarray(dissolved), np.asarray(0.1), np.asarray(1e3))
        assert lost == pytest.approx(min(dissolved, 0.1), rel=1e-3)


def test_a_soluble_share_is_there_at_once():
    plain, sweet = law().extraction(HOURS, ORE), law(soluble_share=0.3).extraction(HOURS, ORE)
    assert_allclose(sweet, 0.3 * 0.9 + 0.7 * plain, rtol=1e-14)
    assert sweet[0] == pytest.approx(0.27)


def test_two_fractions_add_by_their_shares():
    both = law(slow=slow_law(), slow_share=0.25)
    alone = 0.75 * law().extraction(HOURS, ORE) + 0.25 * slow_law().extraction(HOURS, ORE)
    assert_allclose(both.extraction(HOURS, ORE), alone, rtol=1e-13, atol=1e-15)
    assert not both.is_plain


@pytest.mark.parametrize(
    "terms",
    [
        {"soluble_share": 0.3},
        {"fade_per_h": 0.05},
        {"lag_h": 0.7, "fade_per_h": 0.02, "soluble_share": 0.1},
        {"slow": slow_law(), "slow_share": 0.25},
    ],
)
def test_the_ore_curve_carries_every_term(terms):
    whole = law(**terms)
    curve = whole.ore_curve(ORE)
    at = np.geomspace(0.8, 0.9 * curve.end_h, 40)
    assert_allclose(curve(at), whole.extraction(at, ORE), atol=3e-5)
    assert float(curve(1e9)) == pytest.approx(float(whole.extraction(1e9, ORE)), abs=1e-9)


def test_a_fade_leaves_metal_behind():
    faded = law(fade_per_h=0.2)
    assert float(faded.extraction(1e6, ORE)) == pytest.approx(float(law().extraction(5.0, ORE)))
    assert float(law(fade_per_h=0.2).ore_curve(ORE)(1e6)) < 0.85


def test_grains_step_through_two_fractions_and_a_soluble_share():
    whole = law(slow=slow_law(), slow_share=0.25, soluble_share=0.1)
    assert_allclose(extraction_along(whole, ORE, HOURS[1:]), whole.extraction(HOURS[1:], ORE))


def test_a_batch_has_no_other_answer_than_its_members():
    many = law(
        soluble_share=np.array([0.0, 0.2]),
        fade_per_h=np.array([0.01, 0.0]),
        slow=slow_law(),
        slow_share=np.array([0.3, 0.1]),
    )
    found = many.extraction(HOURS, ORE)
    for i in range(2):
        assert_allclose(found[i], many.select(i).extraction(HOURS, ORE), rtol=1e-14)
    curve = many.ore_curve(ORE)
    assert_allclose(curve([3.0])[1], many.select(1).ore_curve(ORE)([3.0]), atol=1e-5)


def test_a_tank_against_the_integral_of_the_curve():
    """One stirred tank: the mean of E over exponential residence times."""
    whole = law(slow=slow_law(), slow_share=0.25, soluble_share=0.1, fade_per_h=0.02)
    found = tank_train(whole, [6.0], sizes=ORE).extraction
    nodes, weights = np.polynomial.laguerre.laggauss(120)
    expected = weights @ whole.extraction(6.0 * nodes, ORE)
    assert float(found[0]) == pytest.approx(float(expected), abs=2e-5)


def test_ultimate_by_temperature():
    warm = RateLaw(
        "chemical",
        (Resistance("chemical", 2.0),),
        Reference(),
        [1.0],
        [0.7, 0.9],
        ultimate_temperature_K=np.array([290.0, 310.0]),
    )
    assert_allclose(warm.extraction(1e6, ORE, [280.0, 300.0, 320.0]), [0.7, 0.8, 0.9])
    curve = warm.ore_curve(ORE, 295.0)
    assert float(curve.ultimate) == pytest.approx(0.75)
    in_tank = tank_train(warm, [1e7], sizes=ORE, temperature_K=295.0).extraction
    assert float(in_tank[0]) == pytest.approx(0.75, abs=1e-5)


@pytest.mark.parametrize(
    ("terms", "message"),
    [
        ({"soluble_share": 1.2}, "soluble_share: .*fraction from 0 to 1"),
        ({"fade_per_h": -0.1}, "fade_per_h: .*not below 0"),
        ({"slow_share": 0.2}, "slow_share: .*no second fraction"),
        ({"slow": law(soluble_share=0.1), "slow_share": 0.2}, "terms of its own"),
    ],
)
def test_wrong_terms_stop(terms, message):
    with pytest.raises(InputProblems, match=message):
        law(**terms)
