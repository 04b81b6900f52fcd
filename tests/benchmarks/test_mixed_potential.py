"""The mixed potential of 100,000 liquors at once, against a loop of a general root finder."""

import math
import time

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from leachkin.cementation import Precipitant, Solution, mixed_potential

COUNT, LOOPED = 100_000, 1_000
F = 96485.33212331001
RT_F = 8.31446261815324 * 298.15 / F
LN10 = math.log(10.0)


def one_by_one(given, held, i):
    """The same balance in plain floats, by brentq to the last digit."""
    copper, ferric = given["metals"]["Cu"][i] / 63.546, given["ferric_g_per_L"][i] / 55.845
    oxygen, pH = given["oxygen_mg_per_L"][i] / 31.998e3, given["pH"][i]
    own = -0.4089 + RT_F / 2 * math.log(1e-6)
    e_copper = 0.3394 + RT_F / 2 * math.log(copper)
    e_oxygen = 1.2287 - LN10 * RT_F * pH
    limits = [2 * F * 0.01 * copper, F * 0.01 * ferric, 4 * F * 0.01 * oxygen, F * 0.01 * 10**-pH]
    beta, beta_H = held.dissolution_slope_V / LN10, held.hydrogen_slope_V / LN10
    beta_O = held.oxygen_slope_V / LN10
    hydrogen = float(held.hydrogen_A_per_m2)

    def gap(E):
        anodic = held.dissolution_A_per_m2 * math.exp((E + 0.4089) / beta)
        anodic *= -math.expm1(-2 * (E - own) / RT_F)
        taken = limits[0] * max(0.0, -math.expm1(2 * (E - e_copper) / RT_F))
        taken += limits[1] * max(0.0, -math.expm1((E - 0.769) / RT_F))
        tafel = hydrogen * math.exp((-LN10 * RT_F * pH - E) / beta_H)
        taken += tafel / (1 + tafel / limits[3])
        taken += hydrogen * math.exp((-LN10 * RT_F * 13.998 - E) / beta_H)
        drive = held.oxygen_A_per_m2 * math.exp((e_oxygen - E) / beta_O)
        return anodic - taken - limits[2] * drive / (drive + limits[2])

    return brentq(gap, own, 1.5, xtol=1e-15, rtol=1e-15)


@pytest.mark.benchmark
def test_a_sweep_of_mixed_potentials():
    generator = np.random.default_rng(2)
    given = {
        "metals": {"Cu": generator.uniform(0.05, 10.0, COUNT)},
        "ferric_g_per_L": generator.uniform(0.01, 6.0, COUNT),
        "oxygen_mg_per_L": generator.uniform(0.01, 9.0, COUNT),
        "pH": generator.uniform(0.5, 5.0, COUNT),
    }
    solution, iron = Solution(**given), Precipitant("iron")
    found = mixed_potential(solution, iron, 1e-5, activities=False)
    start = time.perf_counter()
    looped = [one_by_one(given, found.kinetics, i) for i in range(LOOPED)]
    loop_s = (time.perf_counter() - start) * COUNT / LOOPED
    ours_s = min(_seconds(solution, iron) for _ in range(5))
    print(
        f"\nmixed potentials, {COUNT:,}: {ours_s:.3f} s here, {loop_s:.1f} s by a brentq loop: "
        f"{loop_s / ours_s:.0f} times"
    )
    print(f"largest imbalance {found.imbalance.max():.1e}")
    assert_allclose(found.potential_V[:LOOPED], looped, rtol=0, atol=1e-6)
    assert found.imbalance.max() <= 1e-10
    assert loop_s / ours_s >= 100.0


def _seconds(solution, iron):
    start = time.perf_counter()
    mixed_potential(solution, iron, 1e-5, activities=False)
    return time.perf_counter() - start
