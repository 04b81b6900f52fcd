"""A lift by day: rows of a made copper ore, the profile, the metal in the bed, odd corners."""

from dataclasses import fields

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from leachkin.errors import InputProblems
from leachkin.kinetics import ParticleLaw, RateLaw, ReagentDemand, Reference, Resistance
from leachkin.scaleup import bands, heap, lengthen
from leachkin.scaleup.bed import Bed, _time_at_depth, bed_front, course
from leachkin.testwork import SizeDistribution

CRUSH = SizeDistribution.gates_gaudin_schuhmann(
    19.0, 0.65, [19, 12.5, 9.5, 6.7, 4.75, 2.36, 1.18, 0.6, 0.3, 0.05]
)
T_PER_M2 = 6.0 * 1.65
DAYS = [10.0, 30.0, 60.0, 90.0, 120.0]
SLOW_RATE = 0.006 * np.exp(-35e3 / 8.314462618 * (1 / 290.15 - 1 / 298.15))


def ore(shift=0.0):
    shift = np.asarray(shift)
    law = RateLaw(
        "ash_layer+chemical",
        (
            Resistance("ash_layer", np.log(7.0) + shift, 19.0),
            Resistance("chemical", np.log(3.0) - shift, 46.0),
        ),
        Reference(298.15, 20.0, 1.416),
        [1.416, 5.641, 10.90, 15.4],
        [0.88, 0.84, 0.79, 0.77],
    )
    return law.ore_curve(CRUSH, 290.15)


def demand(per_metal=1.543):
    return ReagentDemand(per_metal, 6.8, 9.0, 0.8, 14.0, 1.0 / SLOW_RATE)


def lift(days=tuple(DAYS), curve=None, **changed):
    arguments = {
        "lift_m": 6.0,
        "irrigation_L_per_h_m2": 8.0,
        "bulk_density_t_per_m3": 1.65,
        "feed_g_per_L": 20.0,
        "demand": demand(),
        "contacted_fraction": 0.85,
        "delivery_factor": 3.0,
        "moisture_m3_per_t": 0.09,
    }
    return heap(ore() if curve is None else curve, days, **(arguments | changed))


def bed(moisture_m3_per_t=0.09, curve=None, needed=None):
    def one(value):
        return np.array([[float(value)]])

    flow = 8.0 / (1000.0 * T_PER_M2)
    return Bed(
        curve or ore(), needed or demand(), one(0.85), one(0.0), one(flow * 60.0), one(1 / 3),
        one(moisture_m3_per_t / flow),
    )  # fmt: skip


def test_rows_of_the_copper_lift():
    """Constants of a made ore; rows worked out beforehand by another program of the same model."""
    cured, plain = lift(cure_kg_per_t=12.0), lift()

    def near(found, expected, points):
        assert_allclose(found, expected, rtol=0, atol=points)

    near(100 * cured.particles_alone, [74.51, 81.54, 82.58, 82.58, 82.58], 0.01)
    near(100 * cured.ore_limited, [53.69, 63.33, 67.69, 69.31, 70.07], 0.01)
    near(100 * cured.extracted, [49.33, 59.90, 66.02, 68.52, 69.67], 0.01)
    near(100 * plain.extracted, [12.18, 35.95, 61.71, 66.94, 68.97], 0.01)
    near(cured.supplied_kg_per_t, [3.88, 11.64, 23.27, 34.91, 46.55], 0.006)
    near(cured.taken_kg_per_t, [15.14, 19.66, 23.69, 25.60, 26.42], 0.006)
    near(cured.m3_per_t[-1], 2.327, 5e-4)
    near(cured.first_solution_day, 4.64, 5e-3)
    near(cured.metal_kg_per_t[-1], 4.738, 1e-3)
    near(cured.drained_pls_g_per_L[-1], 2.036, 1e-3)
    assert cured.rules == ("reagent", "reagent", "reagent", "particles", "particles")
    assert plain.rules[:4] == ("reagent",) * 4


@pytest.mark.parametrize("law", ["root", "line"])
def test_profile_against_an_ode(law):
    """ds/dz = -(D(s) - D(0))/capacity from the top down, by a general solver."""
    if law == "root":
        curve, needed = ore(), demand()
    else:
        chemical = RateLaw("chemical", (Resistance("chemical", np.log(300.0)),),
                           Reference(290.15, 20.0, 1.0), [1.0], [0.9])  # fmt: skip
        curve = chemical.ore_curve(SizeDistribution.single(1.0))
        needed = ReagentDemand(3.0, 6.8, 5.0, 20.0)
    one = bed(curve=curve, needed=needed)
    hours, depth = 20.0 * 24.0, np.array([0.05, 0.15, 0.3, 0.5])
    capacity = float(one.capacity_kg_per_t_h[0, 0])
    flow = solve_ivp(
        lambda _, s: -one.taken_kg_per_t(np.maximum(s, 0.0)[None, :])[0] / capacity,
        (0.0, 0.5), [hours / 3.0], t_eval=depth, rtol=1e-10, atol=1e-12, method="DOP853",
    )  # fmt: skip
    table = bed_front(one, hours)
    found = _time_at_depth(one, table, np.full((1, 4), hours), depth[None, :])[0]
    expected = np.zeros(4)
    expected[: flow.y.shape[1]] = np.maximum(flow.y[0], 0.0)
    assert_allclose(found, expected, rtol=1e-7, atol=1e-7)


def test_where_extraction_rises_as_a_root_the_front_ends():
    ash = RateLaw("ash_layer", (Resistance("ash_layer", np.log(300.0)),),
                  Reference(290.15, 20.0, 1.0), [1.0], [0.8])  # fmt: skip
    curve = ash.ore_curve(SizeDistribution.single(1.0))
    needed = ReagentDemand(3.0, 6.8)
    one = bed(curve=curve, needed=needed)
    table = bed_front(one, 240.0)
    depth = np.linspace(0.0, 1.0, 201)[None, :]
    since = _time_at_depth(one, table, np.full_like(depth, 240.0), depth)[0]
    assert_allclose(since[0], 80.0, rtol=1e-12)
    assert since[-1] == 0.0 and np.all(np.diff(since) <= 0.0)
    # all the reagent so far has been taken behind the front
    brought = 20.0 * 8.0 * 240.0 / (1000.0 * T_PER_M2)
    result = lift([10.0], curve=curve, demand=needed)
    assert_allclose(result.taken_kg_per_t[0], brought, rtol=1e-12)
    assert_allclose(result.extracted[0], brought / (3.0 * 6.8), rtol=1e-9)


def test_metal_in_the_bed_by_parcels_of_solution():
    """Dissolved metal in the pores, parcel by parcel, without the profile at one clock time."""
    one, clock_h = bed(), 40.0 * 24.0
    filling = float(one.filling_h[0, 0])
    edges = np.linspace(clock_h - filling, clock_h, 401)
    place, weight = np.polynomial.legendre.leggauss(6)
    entry = (edges[:-1, None] + np.diff(edges)[:, None] * (1 + place) / 2).ravel()[None, :]
    depth = (clock_h - entry) / filling
    table = bed_front(one, clock_h)
    below = _time_at_depth(one, table, entry, depth)
    top = one.pace * entry
    rate = one.capacity_kg_per_t_h * one.pace * (table.gained(top) - table.gained(below))
    per_hour = (rate / table.taken(top)).reshape(-1, 6)
    inventory = float((per_hour * weight / 2).sum(axis=1) @ np.diff(edges))
    found = course(one, np.array([40.0]))
    held = found.extracted_by_clock - found.recovered
    assert_allclose(held[0, 0], inventory, rtol=0, atol=2e-5)


def test_metal_in_is_metal_out_and_left():
    result = lift(np.linspace(0.0, 200.0, 81), cure_kg_per_t=12.0)
    head = float(result.head_kg_per_t)
    out, held = head * result.recovered, head * result.in_solution
    rock = head * (1.0 - result.extracted_by_clock)
    assert_allclose(out + held + rock, head, rtol=1e-12, atol=0)
    assert np.all(result.in_solution >= 0.0)
    # what the last solution dissolved is out once the bed has been washed through
    shift = float(result.first_solution_day)
    later = lift([120.0 + shift], cure_kg_per_t=12.0)
    assert_allclose(later.recovered, lift([120.0], cure_kg_per_t=12.0).extracted, rtol=1e-12)


def test_reagent_that_is_not_taken_is_still_there():
    result = lift(np.linspace(1.0, 120.0, 30), cure_kg_per_t=12.0)
    free = result.supplied_kg_per_t + 12.0 - result.taken_kg_per_t
    assert np.all(free >= -1e-12)
    assert np.all(result.taken_kg_per_t <= result.wanted_kg_per_t + 1e-9)
    assert np.all(result.pls_reagent_g_per_L <= 20.0)


def test_without_moisture_both_times_are_one():
    result = lift(moisture_m3_per_t=0.0, cure_kg_per_t=12.0)
    assert_allclose(result.recovered, result.extracted, rtol=1e-12)
    assert_allclose(result.in_solution, 0.0, rtol=0, atol=1e-14)
    assert_allclose(result.mean_pls_g_per_L, result.drained_pls_g_per_L, rtol=1e-12)


def test_draws_of_the_curve_and_of_the_demand():
    shift, per_metal = np.array([-0.1, 0.0, 0.2]), np.array([1.5, 1.543, 1.7])
    curve = ore(shift)
    cure = np.array([0.0, 12.0, 4.0])
    together = lift(curve=curve, demand=demand(per_metal), cure_kg_per_t=cure)
    assert together.extracted.shape == (3, 5)
    for i in range(3):
        alone = lift(curve=curve.select(i), demand=demand(per_metal[i]), cure_kg_per_t=cure[i])
        assert_allclose(together.extracted[i], alone.extracted, rtol=1e-9, atol=0)
        assert_allclose(together.in_solution[i], alone.in_solution, rtol=0, atol=1e-6)


def test_no_reagent_in_the_feed_and_day_zero_stay_finite():
    result = lift([0.0, 5.0, 50.0], feed_g_per_L=0.0, cure_kg_per_t=12.0)
    numbers = [getattr(result, f.name) for f in fields(result)]
    assert all(np.all(np.isfinite(x)) for x in numbers if isinstance(x, np.ndarray))
    assert_allclose(result.extracted, result.extracted[0], rtol=1e-12)
    assert_allclose(result.taken_kg_per_t, 12.0, rtol=1e-9)
    assert "the feed holds no reagent" in result.warnings[0]
    start = lift([0.0])
    assert start.extracted[0] == 0.0 and start.pls_g_per_L[0] == 0.0


def test_an_impossible_supply_is_said():
    result = lift([10.0])
    assert any("at this irrigation that needs" in words for words in result.warnings)
    assert not any("that needs" in words for words in lift([120.0], cure_kg_per_t=12.0).warnings)


def test_a_cure_beyond_the_ore_in_some_draws_is_said_and_counted():
    result = lift([30.0], cure_kg_per_t=np.array([12.0, 40.0]))
    assert "in 1 of 2 draws: the cure is more than the ore can take" in result.warnings[0]
    assert np.all(np.isfinite(result.extracted))
    with pytest.raises(InputProblems, match="cure_kg_per_t: 40 kg/t"):
        lift([30.0], cure_kg_per_t=40.0)


@pytest.mark.parametrize("days", [[-1.0], [], 30.0, [np.inf]])
def test_days_without_meaning_are_refused(days):
    with pytest.raises(InputProblems, match="days: "):
        lift(days)


def test_tables_by_day_and_over_draws():
    extraction, supply, solution = lift(cure_kg_per_t=12.0).tables()
    assert_allclose(extraction.column("extracted")[-1], 69.67, rtol=0, atol=0.01)
    assert extraction.column("rules")[0] == "reagent"
    assert_allclose(supply.column("supplied_kg_per_t")[-1], 46.55, rtol=0, atol=0.01)
    assert "first bed volume" in solution.caption
    drawn = lift(contacted_fraction=np.array([0.7, 0.8, 0.9])).tables(level=0.8)[0]
    low, mid, high = (drawn.column(k) for k in ("extracted_low", "extracted", "extracted_high"))
    assert low[-1] < mid[-1] < high[-1]
    assert "Extracted, P10 (low)" in [column.heading for column in drawn.columns]


def test_length_factor_of_a_particle_law_and_of_draws():
    longer = lengthen(ParticleLaw(film=1.0, ash_layer=2.0, chemical=3.0), np.array([1.0, 3.0]))
    assert longer.ash_layer.tolist() == [2.0, 18.0]
    assert longer.film.tolist() == [1.0, 1.0] and longer.chemical.tolist() == [3.0, 3.0]
    same = ParticleLaw(chemical=3.0)
    assert lengthen(same, 1.0) is same
    with pytest.raises(InputProblems, match="without an ash layer"):
        lengthen(same, 2.0)


def test_bands_need_draws():
    with pytest.raises(InputProblems, match="two draws or more"):
        bands([1.0])
