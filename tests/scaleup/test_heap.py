from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import OreCurve, RateLaw, ReagentDemand, Reference, Resistance
from leachkin.scaleup import bands, heap, lengthen
from leachkin.scaleup.bed import Bed, _time_at_depth, bed_front, solve_start
from leachkin.testwork import SizeDistribution

EDGES = [19, 12.5, 9.5, 6.7, 4.75, 2.36, 1.18, 0.6, 0.3, 0.05]
SIZES = SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65, EDGES)
PLANT = {
    "lift_m": 6.0,
    "irrigation_L_per_h_m2": 8.0,
    "bulk_density_t_per_m3": 1.65,
    "feed_g_per_L": 20.0,
    "contacted_fraction": 0.85,
    "delivery_factor": 3.0,
}
T_PER_M2 = 6.0 * 1.65


def copper_law(tau_ash=7.0):
    return RateLaw(
        "ash_layer+chemical",
        (
            Resistance("ash_layer", np.log(tau_ash), activation_energy_kJ_per_mol=19.0),
            Resistance("chemical", np.log(3.0), activation_energy_kJ_per_mol=46.0),
        ),
        Reference(298.15, 20.0, 1.416),
        [1.416, 5.641, 10.90, 15.4],
        [0.88, 0.84, 0.79, 0.77],
    )


def copper_curve():
    return copper_law().ore_curve(SIZES, 290.15)


def copper_demand():
    slow_rate = 0.006 * np.exp(-35e3 / 8.314462618 * (1 / 290.15 - 1 / 298.15))
    return ReagentDemand(1.543, 6.8, 9.0, 0.8, 14.0, 1.0 / slow_rate)


def copper_heap(days, **changed):
    return heap(copper_curve(), days, demand=copper_demand(), **(PLANT | changed))


def bed_of(cure, moisture_h=0.0):
    """The copper lift as a bed of one draw, cure met first."""

    def one(value):
        return np.array([[float(value)]])

    flux = 8.0 * 20.0 * 3.0 / (1000.0 * T_PER_M2)
    bed = Bed(
        copper_curve(), copper_demand(), one(0.85), one(0.0), one(flux), one(1 / 3), one(moisture_h)
    )
    return replace(bed, start_h=solve_start(bed, one(cure))) if cure else bed


@pytest.mark.parametrize("cure", [0.0, 12.0])
@pytest.mark.parametrize("day", [10.0, 60.0, 120.0])
def test_reagent_used_is_what_the_equivalent_times_say(cure, day):
    """Bed mean of D(s(z)) - D(s0), by depth quadrature, against the identity."""
    bed = bed_of(cure)
    table = bed_front(bed, day * 24.0)
    top, bottom = (
        float(_time_at_depth(bed, table, np.array([[day * 24.0]]), np.array([[z]]))[0, 0])
        for z in (0.0, 1.0)
    )
    identity = float(bed.capacity_kg_per_t_h[0, 0]) * (top - bottom)
    # panels between the depths at which the ore has seen chosen times: the profile is smooth there
    nodes = np.concatenate([table.time_h[0], bed.curve.equivalent_h])
    breaks = np.unique(np.clip(nodes, max(bottom, 1e-300), top))
    reach = table.reach_at(np.concatenate([[top], breaks])[None, :])[0]
    depth = np.clip(float(bed.capacity_kg_per_t_h[0, 0]) * (reach[0] - reach[1:]), 0.0, 1.0)
    edges = np.unique(np.concatenate([[0.0, 1.0], depth]))
    place, weight = np.polynomial.legendre.leggauss(12)
    z = (edges[:-1, None] + np.diff(edges)[:, None] * (1 + place) / 2).ravel()
    hours = np.full((1, z.size), day * 24.0)
    since = _time_at_depth(bed, table, hours, z[None, :])
    taken = bed.taken_kg_per_t(bed.start_h + since) - bed.taken_kg_per_t(bed.start_h)
    mean = float((taken.reshape(-1, 12) * weight / 2).sum(axis=1) @ np.diff(edges))
    assert_allclose(mean, identity, rtol=1e-9)
    whole = copper_heap([day], cure_kg_per_t=cure)
    assert_allclose(whole.taken_kg_per_t[0] - cure, identity, rtol=1e-9, atol=1e-9)


def march(days, cells, cure, steps_per_day=400):
    """An independent march: upwind cells, each parcel of solution gives what its cell takes."""
    curve, demand = copper_curve(), copper_demand()
    start = float(solve_start(bed_of(0.0), np.array([[cure]]))[0, 0]) if cure else 0.0
    table = np.concatenate([[0.0], np.geomspace(1e-7, 3000.0, 6000)])
    taken = 0.85 * demand.kg_per_t(curve, table)
    s, out = np.full(cells, start), []
    dt = 24.0 / steps_per_day
    flux = 8.0 * cells / (1000.0 * T_PER_M2)  # m3/h a tonne of one cell
    for step in range(int(max(days) * steps_per_day)):
        strength = 20.0
        now = np.interp(s, table, taken)
        for cell in range(cells):
            strength, s[cell] = _cell(strength, s[cell], now[cell], flux, dt, table, taken)
        if (step + 1) % steps_per_day == 0 and (step + 1) // steps_per_day in days:
            out.append(float(0.85 * curve(s).mean()))
    return out


def _cell(strength, s, before, flux, dt, table, taken):
    """Implicit step of one cell: C_out = C_in - (D(s + C_out dt/(C_ref F)) - D(s))/(flux dt)."""
    low, high = 0.0, strength
    for _ in range(40):
        middle = 0.5 * (low + high)
        after = np.interp(s + middle * dt / 60.0, table, taken)
        if middle + (after - before) / (flux * dt) > strength:
            high = middle
        else:
            low = middle
    return low, s + low * dt / 60.0


@pytest.mark.slow
def test_agrees_with_a_march_through_cells():
    (marched,) = march([10], 400, 12.0, 48)
    assert_allclose(marched, copper_heap([10], cure_kg_per_t=12.0).extracted[0], rtol=0, atol=1e-3)


def test_solution_and_metal_balance():
    result = copper_heap(np.linspace(0.0, 120.0, 4001), cure_kg_per_t=12.0, moisture_m3_per_t=0.09)
    assert_allclose(result.first_solution_day, 0.09 * T_PER_M2 * 1000 / 8 / 24, rtol=1e-12)
    assert_allclose(result.extracted_by_clock, result.recovered + result.in_solution, rtol=1e-12)
    early = result.days < float(result.first_solution_day)
    assert (result.recovered[early] == 0.0).all()
    assert (result.in_solution >= 0.0).all() and (np.diff(result.recovered) >= -1e-15).all()
    # what leaves day by day adds up to what is recovered
    per_day = result.pls_g_per_L * 8.0 * 24.0 / (1000.0 * T_PER_M2) / 6.8
    left = np.concatenate(
        [[0.0], np.cumsum(0.5 * (per_day[1:] + per_day[:-1]) * np.diff(result.days))]
    )
    assert_allclose(left[-1], result.recovered[-1], rtol=2e-3)


def test_reagent_balance_in_the_solution():
    """What the feed brings is taken or leaves at the bottom."""
    days = np.linspace(0.0, 60.0, 6001)
    result = copper_heap(days)
    out = result.pls_reagent_g_per_L * 8.0 * 24.0 / (1000.0 * T_PER_M2)
    left = np.sum(0.5 * (out[1:] + out[:-1]) * np.diff(days))
    assert_allclose(result.taken_kg_per_t[-1] + left, result.supplied_kg_per_t[-1], rtol=1e-3)


def test_without_much_demand_the_ore_rules():
    curve = copper_curve()
    little = ReagentDemand(1e-6, 6.8)
    result = heap(curve, [5.0, 50.0], demand=little, **PLANT)
    assert_allclose(result.extracted, result.ore_limited, rtol=1e-6)
    assert result.rules == ("particles", "particles")
    assert_allclose(result.particles_alone, curve(np.array([5.0, 50.0]) * 24.0), rtol=1e-12)
    assert_allclose(
        result.ore_limited, 0.85 * curve(np.array([5.0, 50.0]) * 24.0 / 3.0), rtol=1e-12
    )


def test_a_demand_that_takes_nothing_is_refused():
    with pytest.raises(InputProblems, match="takes no reagent.*use the ore curve itself"):
        heap(copper_curve(), [10.0], demand=ReagentDemand(0.0, 6.8), **PLANT)


def test_contacted_ore_is_a_smaller_bed_with_all_the_solution():
    """A share of the ore, with all the solution and cure for itself; the rest gives nothing."""
    days, share = [5.0, 20.0, 60.0, 120.0], 0.6
    part = copper_heap(days, contacted_fraction=share, cure_kg_per_t=6.0, moisture_m3_per_t=0.06)
    whole = copper_heap(
        days,
        contacted_fraction=1.0,
        irrigation_L_per_h_m2=8.0 / share,
        cure_kg_per_t=6.0 / share,
        moisture_m3_per_t=0.06 / share,
    )
    assert_allclose(part.start_h, whole.start_h, rtol=1e-12)
    for name in ("extracted", "recovered", "ore_limited", "taken_kg_per_t", "supplied_kg_per_t"):
        assert_allclose(getattr(part, name), share * getattr(whole, name), rtol=1e-9)


def test_delivery_factor_is_a_slower_clock_in_the_bed():
    """Three times the days at a third of the flow do what a factor of 1 does."""
    days = np.array([5.0, 20.0, 40.0])
    slow = copper_heap(3.0 * days, moisture_m3_per_t=0.09)
    fast = copper_heap(
        days, delivery_factor=1.0, irrigation_L_per_h_m2=24.0, moisture_m3_per_t=0.09
    )
    for name in ("extracted", "recovered", "taken_kg_per_t", "pls_g_per_L"):
        assert_allclose(getattr(slow, name), getattr(fast, name), rtol=1e-9)
    assert_allclose(slow.first_solution_day, 3.0 * fast.first_solution_day, rtol=1e-12)


def test_what_the_ore_would_take_with_reagent_everywhere():
    days = np.array([5.0, 60.0])
    result = copper_heap(days, cure_kg_per_t=12.0)
    bare = copper_heap(days)
    demand, curve = copper_demand(), copper_curve()
    assert_allclose(0.85 * demand.kg_per_t(curve, result.start_h), 12.0, rtol=1e-10)
    for found in (result, bare):
        hours = found.start_h + days * 24.0 / 3.0
        assert_allclose(found.wanted_kg_per_t, 0.85 * demand.kg_per_t(curve, hours), rtol=1e-12)


def test_cured_metal_leaves_with_the_first_bed_volume():
    filling = 0.09 * T_PER_M2 * 1000.0 / 8.0 / 24.0
    result = copper_heap(
        filling * np.array([1.0, 1.25, 1.5, 2.0, 3.0]),
        cure_kg_per_t=12.0,
        feed_g_per_L=0.0,
        moisture_m3_per_t=0.09,
    )
    cured = 0.85 * copper_curve()(result.start_h)
    assert_allclose(result.extracted_by_clock, cured, rtol=1e-12)
    assert_allclose(
        result.recovered, cured * np.array([0.0, 0.25, 0.5, 1.0, 1.0]), rtol=1e-12, atol=1e-15
    )


@pytest.mark.parametrize("cure", [0.0, 12.0])
def test_the_table_goes_on_below_its_first_node(cure):
    """Depth between two times below the first node, against a quadrature over ln of the time."""
    table = bed_front(bed_of(cure), 240.0)
    first = float(table.time_h[0, 0])
    low, high = 0.25 * first, first
    place, weight = np.polynomial.legendre.leggauss(12)
    u = low * (high / low) ** ((1.0 + place) / 2.0)
    between = 0.5 * np.log(high / low) * float((weight * u / table.taken(u[None, :])[0]).sum())
    reach = table.reach_at(np.array([[low, high]]))[0]
    assert_allclose(reach[1] - reach[0], between, rtol=1e-7)
    assert_allclose(table.time_at(reach[None, :])[0], [low, high], rtol=1e-9)


def test_more_irrigation_cure_or_strength_never_extracts_less():
    days = [20.0, 80.0]
    base = copper_heap(days).extracted
    for changed in (
        {"irrigation_L_per_h_m2": 10.0},
        {"cure_kg_per_t": 5.0},
        {"feed_g_per_L": 25.0},
        {"lift_m": 4.0},
    ):
        assert (copper_heap(days, **changed).extracted > base).all()


def test_a_batch_of_draws_is_each_alone():
    fractions, factors = np.array([0.75, 0.85, 0.95]), np.array([5.0, 3.0, 2.0])
    many = copper_heap([30.0], contacted_fraction=fractions, delivery_factor=factors)
    assert many.batch_shape == (3,)
    for i in range(3):
        one = copper_heap([30.0], contacted_fraction=fractions[i], delivery_factor=factors[i])
        assert_allclose(many.extracted[i], one.extracted, rtol=1e-10)
        assert_allclose(many.taken_kg_per_t[i], one.taken_kg_per_t, rtol=1e-10)


def test_other_orders_are_refused_with_the_reason():
    curve = copper_curve()
    other = OreCurve(curve.equivalent_h, curve.extraction, curve.ultimate, 290.15, 20.0, order=0.8)
    with pytest.raises(InputProblems, match="order 0.8.*order 1.*cell by cell"):
        heap(other, [10.0], demand=copper_demand(), **PLANT)


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"irrigation_L_per_h_m2": 0.0}, "irrigation_L_per_h_m2.*above 0"),
        ({"lift_m": -6.0}, "lift_m.*above 0"),
        ({"contacted_fraction": 0.0}, "contacted_fraction"),
        ({"contacted_fraction": 1.2}, "contacted_fraction"),
        ({"delivery_factor": 0.5}, "delivery_factor"),
        ({"feed_g_per_L": np.nan}, "feed_g_per_L"),
        ({"cure_kg_per_t": 500.0}, "cure_kg_per_t.*all that the contacted ore takes"),
        ({"head_kg_per_t": 5.0}, "one head for both"),
        ({"lift_m": np.inf}, "lift_m: inf.*finite"),
        ({"bulk_density_t_per_m3": np.nan}, "bulk_density_t_per_m3: nan.*finite"),
        ({"cure_kg_per_t": -1.0}, "cure_kg_per_t: -1 kg/t.*at least 0"),
        ({"moisture_m3_per_t": -0.1}, "moisture_m3_per_t: -0.1 m3/t.*at least 0"),
        ({"irrigation_L_per_h_m2": "eight"}, "irrigation_L_per_h_m2: 'eight'.*numbers"),
        ({"lift_m": [5.0, 6.0], "feed_g_per_L": [18.0, 20.0, 22.0]}, "batch: .*n the same for all"),
    ],
)
def test_refusals(changed, message):
    with pytest.raises(InputProblems, match=message):
        copper_heap([10.0], **changed)


def test_no_solution_yet_is_said():
    result = copper_heap([2.0], moisture_m3_per_t=0.09)
    assert result.recovered[0] == 0.0
    assert any("no solution leaves by day 2" in words for words in result.warnings)


def test_length_acts_on_the_ash_layer_alone():
    longer = lengthen(copper_law(), 2.0)
    ash, chemical = longer.resistances
    assert_allclose(np.exp(ash.ln_tau), 28.0, rtol=1e-12)
    assert_allclose(np.exp(chemical.ln_tau), 3.0, rtol=1e-12)
    with pytest.raises(InputProblems, match="length_factor"):
        lengthen(copper_law(), 0.0)


def test_bands_name_their_ends():
    band = bands(np.arange(101.0), level=0.8)
    assert_allclose([band.low, band.median, band.high], [10.0, 50.0, 90.0], rtol=1e-12)
    assert (band.low_name, band.high_name) == ("P10 (low)", "P90 (high)")
    with pytest.raises(InputProblems, match="level"):
        bands([1.0, 2.0], level=1.5)
