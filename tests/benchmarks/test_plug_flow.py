"""Plug flow through a heap for many draws, against a quadrature and a root finder a draw."""

import time

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.optimize import brentq

from leachkin.kinetics import RateLaw, ReagentDemand, Reference, Resistance
from leachkin.scaleup import heap
from leachkin.testwork import SizeDistribution

DRAWS, SCALAR = 10_000, 3
DAYS = np.array([30.0, 120.0])
T_PER_M2 = 9.9


def one_by_one(curve, demand, fraction, factor, day):
    """The same bed by scipy: the bottom by a root of the depth integral, the mean by another."""

    def taken(s):
        return fraction * float(demand.kg_per_t(curve, s))

    capacity = 8.0 * 20.0 * factor / (1000.0 * T_PER_M2)
    top = day * 24.0 / factor

    def integral(function, low):
        """Over ln s, where the integrand is smooth."""
        value, _ = quad(
            lambda x: np.exp(x) * function(np.exp(x)), np.log(low), np.log(top), limit=400,
            epsrel=1e-9,
        )  # fmt: skip
        return value

    def depth(low):
        return capacity * integral(lambda s: 1.0 / taken(s), low) - 1.0

    low = 1e-9 * top
    bottom = low if depth(low) < 0.0 else brentq(depth, low, top * (1.0 - 1e-9), xtol=1e-9)
    return capacity * integral(lambda s: fraction * float(curve(s)) / taken(s), bottom)


@pytest.mark.benchmark
def test_many_draws_of_a_heap():
    law = RateLaw(
        "ash_layer+chemical",
        (Resistance("ash_layer", np.log(8.0)), Resistance("chemical", np.log(5.0))),
        Reference(290.15, 20.0, 1.416),
        [1.0],
        [0.85],
    )
    sizes = SizeDistribution.gates_gaudin_schuhmann(
        19.0, 0.65, [19, 12.5, 9.5, 6.7, 4.75, 2.36, 1.18, 0.6, 0.3, 0.05]
    )
    curve = law.ore_curve(sizes)
    demand = ReagentDemand(1.543, 6.8, 9.0, 0.8, 14.0, 200.0)
    generator = np.random.default_rng(3)
    fraction = generator.uniform(0.75, 0.95, DRAWS)
    factor = generator.uniform(2.0, 5.0, DRAWS)
    start = time.perf_counter()
    result = heap(
        curve, DAYS, lift_m=6.0, irrigation_L_per_h_m2=8.0, bulk_density_t_per_m3=1.65,
        feed_g_per_L=20.0, demand=demand, contacted_fraction=fraction, delivery_factor=factor,
    )  # fmt: skip
    ours = time.perf_counter() - start
    start = time.perf_counter()
    scalar = [
        [one_by_one(curve, demand, fraction[i], factor[i], day) for day in DAYS]
        for i in range(SCALAR)
    ]
    theirs = (time.perf_counter() - start) * DRAWS / SCALAR
    assert_allclose(result.extracted[:SCALAR], scalar, rtol=0, atol=1e-6)
    worst = np.abs(result.extracted[:SCALAR] - scalar).max()
    print(f"\nplug flow, {DRAWS} draws: {theirs / ours:.0f} times a quad and brentq loop")
    print(f"largest difference in extraction {worst:.1e}")
    assert theirs / ours > 100.0
