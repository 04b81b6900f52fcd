"""A lift in plug flow against a march through mixed cells that shares no code with it.

Per cell and order one, solution that enters at strength C_in leaves at C_out with
``C_ref F ds = C_out dt`` and ``flux (C_in - C_out) dt = dD``. Over any time both add up to
``C_ref F (s - s0) + (D(s) - D(s0))/flux = integral of C_in dt`` and
``integral of C_out dt = C_ref F (s - s0)``: the march is exact in time, and first order in cells.
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.kinetics import RateLaw, ReagentDemand, Reference, Resistance
from leachkin.scaleup import heap
from leachkin.testwork import SizeDistribution

EDGES = np.array([19, 12.5, 9.5, 6.7, 4.75, 2.36, 1.18, 0.6, 0.3, 0.05])
KNOTS_MM, ULTIMATE = [1.416, 5.641, 10.90, 15.4], [0.88, 0.84, 0.79, 0.77]
DAYS = np.array([10.0, 30.0, 60.0, 90.0, 120.0])
T_PER_M2, CONTACTED, FACTOR, FEED = 9.9, 0.85, 3.0, 20.0
HOURS = np.concatenate([[0.0], np.geomspace(1e-9, 4000.0, 6000)])


def faster(energy_kJ_per_mol):
    return np.exp(energy_kJ_per_mol * 1e3 / 8.314462618 * (1 / 290.15 - 1 / 298.15))


SLOW_RATE = 0.006 / faster(35.0)


def extraction_by_halving():
    """Extraction of the crushed ore at HOURS, grain by grain, by halving the reacted depth."""
    size = np.append(np.sqrt(EDGES[:-1] * EDGES[1:]), EDGES[-1])
    passing = (EDGES / EDGES[0]) ** 0.65
    mass = np.append(passing[:-1] - passing[1:], passing[-1])
    ultimate = np.interp(np.log(size), np.log(KNOTS_MM), ULTIMATE)
    chemical = 3.0 * faster(46.0) * size / 1.416
    ash = 7.0 * faster(19.0) * (size / 1.416) ** 2
    low, high = np.zeros((len(HOURS), len(size))), np.ones((len(HOURS), len(size)))
    for _ in range(52):
        depth = 0.5 * (low + high)
        late = ash * depth**2 * (3.0 - 2.0 * depth) + chemical * depth > HOURS[:, None]
        low, high = np.where(late, low, depth), np.where(late, depth, high)
    return (1.0 - (1.0 - low) ** 3) @ (mass * ultimate)


@pytest.fixture(scope="module")
def by_hour():
    """Extraction, and reagent taken per tonne of the whole lift, at HOURS."""
    extraction = extraction_by_halving()
    gangue = -9.0 * np.expm1(-HOURS / 0.8) - 14.0 * np.expm1(-SLOW_RATE * HOURS)
    return extraction, CONTACTED * (1.543 * 6.8 * extraction + gangue)


def march(by_hour, cells, cure):
    """Mean extraction and reagent taken after DAYS, shape (5,) each."""
    extraction, taken = by_hour
    flux = 8.0 * cells / (1000.0 * T_PER_M2)
    start = np.interp(cure, taken, HOURS)
    begun = FEED * FACTOR * start + cure / flux
    entered = FEED * DAYS * 24.0
    keys = FEED * FACTOR * HOURS + taken / flux
    dissolved = used = 0.0
    for _ in range(cells):
        now = np.interp(begun + entered, keys, HOURS)
        dissolved = dissolved + CONTACTED * np.interp(now, HOURS, extraction) / cells
        used = used + np.interp(now, HOURS, taken) / cells
        entered = FEED * FACTOR * (now - start)
    return dissolved, used


def lift(cure):
    law = RateLaw(
        "ash_layer+chemical",
        (
            Resistance("ash_layer", np.log(7.0), activation_energy_kJ_per_mol=19.0),
            Resistance("chemical", np.log(3.0), activation_energy_kJ_per_mol=46.0),
        ),
        Reference(298.15, FEED, 1.416),
        KNOTS_MM,
        ULTIMATE,
    )
    curve = law.ore_curve(SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65, EDGES), 290.15)
    return heap(
        curve,
        DAYS,
        lift_m=6.0,
        irrigation_L_per_h_m2=8.0,
        bulk_density_t_per_m3=1.65,
        feed_g_per_L=FEED,
        demand=ReagentDemand(1.543, 6.8, 9.0, 0.8, 14.0, 1.0 / SLOW_RATE),
        cure_kg_per_t=cure,
        contacted_fraction=CONTACTED,
        delivery_factor=FACTOR,
    )


@pytest.mark.parametrize("cure", [0.0, 12.0])
def test_four_hundred_cells_come_near(by_hour, cure):
    dissolved, used = march(by_hour, 400, cure)
    result = lift(cure)
    assert_allclose(dissolved, result.extracted, rtol=0, atol=1e-3)
    assert_allclose(used, result.taken_kg_per_t, rtol=0, atol=1e-2)


@pytest.mark.parametrize("cure", [0.0, 12.0])
def test_more_cells_close_in_at_first_order(by_hour, cure):
    coarse, fine = march(by_hour, 400, cure)[0], march(by_hour, 800, cure)[0]
    exact = lift(cure).extracted
    assert np.all(fine < exact)
    # on one day the first-order part is so small (1e-5) that the next order shows in its ratio
    assert_allclose((exact - coarse).max() / (exact - fine).max(), 2.0, rtol=0, atol=0.05)
    assert_allclose(2.0 * fine - coarse, exact, rtol=0, atol=2e-6)
