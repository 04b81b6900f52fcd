import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import RateLaw, ReagentDemand, Reference, Resistance
from leachkin.scaleup import batch_leach
from leachkin.testwork import SizeDistribution

ONE = SizeDistribution.single(1.0)


def chemical_curve(order=1.0, ultimate=1.0):
    law = RateLaw(
        "chemical", (Resistance("chemical", 0.0, order=order),), Reference(298.15, 10.0, 1.0),
        [1.0], [ultimate],
    )  # fmt: skip
    return law.ore_curve(ONE)


def test_reagent_exactly_enough():
    """Elementary integral: t/tau = ((1-X)^(-2/3) - 1)/2, so X = 0.875 at 1.5."""
    X = np.array([0.1, 0.5, 0.875, 0.99])
    times = ((1.0 - X) ** (-2.0 / 3.0) - 1.0) / 2.0
    batch = batch_leach(
        chemical_curve(), times, ReagentDemand(1.0, 100.0), 10.0, solids_kg_per_m3=100.0
    )
    assert_allclose(times[2], 1.5, rtol=1e-14)
    assert_allclose(batch.extraction, X, rtol=0, atol=2e-6)


def test_with_plenty_of_reagent_the_batch_follows_the_curve():
    curve = chemical_curve()
    times = np.array([0.1, 0.4, 0.9])
    batch = batch_leach(curve, times, ReagentDemand(1.0, 1e-6), 10.0, solids_kg_per_m3=1.0)
    assert_allclose(batch.extraction, curve(times), rtol=1e-8)


def test_the_reagent_balance_closes():
    batch = batch_leach(
        chemical_curve(0.6), [0.3, 1.0, 3.0], ReagentDemand(1.5, 40.0), 8.0, solids_kg_per_m3=80.0
    )
    assert_allclose(8.0 - batch.reagent_g_per_L, 0.08 * batch.taken_kg_per_t, rtol=1e-12)
    assert_allclose(batch.taken_kg_per_t, 60.0 * batch.extraction, rtol=1e-12)


def test_starvation_is_not_the_ultimate():
    batch = batch_leach(
        chemical_curve(0.8), [1.0, 50.0], ReagentDemand(1.5, 100.0), 5.0, solids_kg_per_m3=100.0
    )
    assert batch.starved
    assert_allclose(batch.extraction[-1], 5.0 / 15.0, rtol=0, atol=5e-3)
    assert any("starvation, not the ultimate" in words for words in batch.warnings)


@pytest.mark.parametrize(("enough_for", "starved"), [(0.9, True), (0.97, True), (0.999, False)])
def test_starved_only_where_leachable_metal_is_left(enough_for, starved):
    """Reagent for a share of the leachable metal, all of it used in the end."""
    batch = batch_leach(
        chemical_curve(0.5, 0.8), [500.0], ReagentDemand(1.0, 100.0), enough_for * 8.0,
        solids_kg_per_m3=100.0,
    )  # fmt: skip
    assert_allclose(batch.extraction, 0.8 * enough_for, rtol=0, atol=1e-6)
    assert bool(batch.starved) is starved
    assert bool(batch.warnings) is starved


def test_many_draws_are_each_alone():
    feeds = np.array([6.0, 10.0, 20.0])
    demand = ReagentDemand(1.5, 60.0)
    many = batch_leach(chemical_curve(), [0.5, 2.0], demand, feeds, solids_kg_per_m3=90.0)
    for i, feed in enumerate(feeds):
        one = batch_leach(chemical_curve(), [0.5, 2.0], demand, feed, solids_kg_per_m3=90.0)
        assert_allclose(many.extraction[i], one.extraction, rtol=1e-12)


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"time_h": [-1.0]}, "time_h"),
        ({"feed_g_per_L": 0.0}, "feed_g_per_L.*above 0"),
        ({"solids_kg_per_m3": np.nan}, "solids_kg_per_m3"),
    ],
)
def test_refusals(changed, message):
    arguments = {
        "time_h": [1.0],
        "demand": ReagentDemand(1.0, 10.0),
        "feed_g_per_L": 5.0,
        "solids_kg_per_m3": 100.0,
    } | changed
    with pytest.raises(InputProblems, match=message):
        batch_leach(chemical_curve(), **arguments)
