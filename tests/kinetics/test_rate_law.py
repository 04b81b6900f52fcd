"""The rate law: scaling by hand, batch rule, sensitivities, grain path, refusals."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.errors import InputProblems
from leachkin.kinetics import (
    DataBox,
    RateLaw,
    Reference,
    Resistance,
    extraction_along,
    knot_weights,
)
from leachkin.testwork import SizeDistribution

ORE = SizeDistribution.gates_gaudin_schuhmann(
    19.0, 0.65, [19, 12.5, 9.5, 6.7, 4.75, 2.36, 1.18, 0.6, 0.3, 0.05]
)
KNOTS = [1.416, 5.641, 10.90, 15.4]
TIMES = np.array([0.0, 1.0, 10.0, 100.0, 500.0, 2000.0])


def copper_law(orders=(1.0, 1.0), energies=(46.0, 19.0), **more):
    chemical = Resistance("chemical", np.log(3.0), energies[0], orders[0])
    ash = Resistance("ash_layer", np.log(7.0), energies[1], orders[1])
    return RateLaw(
        "ash_layer+chemical",
        (chemical, ash),
        Reference(298.15, 20.0, 1.416),
        KNOTS,
        [0.88, 0.84, 0.79, 0.77],
        **more,
    )


def copper_batch(n=4):
    rng = np.random.default_rng(12)
    chemical = Resistance("chemical", np.log(3.0) + rng.normal(0, 0.1, n), 46.0)
    ash = Resistance("ash_layer", np.log(7.0), rng.normal(19.0, 1.0, n))
    ultimate = np.array([0.88, 0.84, 0.79, 0.77]) + rng.normal(0, 0.005, (n, 1))
    return RateLaw(
        "ash_layer+chemical", (chemical, ash), Reference(298.15, 20.0, 1.416), KNOTS, ultimate
    )


def test_times_by_hand():
    """At twice the size a chemical time doubles and an ash time is four times as long."""
    law = copper_law().times([1.416, 2.832], 298.15, 20.0)
    assert_allclose(law.chemical, [3.0, 6.0], rtol=1e-14)
    assert_allclose(law.ash_layer, [7.0, 28.0], rtol=1e-14)
    assert_allclose(law.film, 0.0)
    weaker = copper_law(orders=(0.5, 1.0)).times([1.416], 298.15, 5.0)
    assert_allclose(weaker.chemical, [6.0], rtol=1e-14)
    assert_allclose(weaker.ash_layer, [28.0], rtol=1e-14)


def test_temperature_by_hand():
    cold = copper_law().times([1.416], 290.15)
    inverse = 1.0 / 290.15 - 1.0 / 298.15
    factor = np.exp(46000.0 / GAS_CONSTANT_J_per_mol_K * inverse)
    assert_allclose(cold.chemical, [3.0 * factor], rtol=1e-13)


def test_stirring_and_free_exponents():
    film = Resistance("film", 0.0, size_exponent=1.5, stirring_exponent=0.5)
    law = RateLaw("film", (film,), Reference(size_mm=1.0, stirring_rpm=100.0), [1.0], [1.0])
    assert_allclose(law.times([4.0], stirring_rpm=400.0).film, [8.0 / 2.0], rtol=1e-14)
    assert_allclose(law.times([4.0]).film, [8.0], rtol=1e-14)


def test_ultimate_is_linear_in_ln_size_and_flat_outside():
    law = copper_law()
    middle = np.sqrt(1.416 * 5.641)
    found = law.ultimate_at([0.05, 1.416, middle, 15.4, 100.0])
    assert_allclose(found, [0.88, 0.88, 0.86, 0.77, 0.77], rtol=1e-14)
    assert_allclose(knot_weights(np.array([middle]), np.array(KNOTS))[0], [0.5, 0.5, 0, 0])


def test_extraction_ends_at_the_ultimate():
    law = copper_law()
    end = law.extraction(1e6, ORE)
    assert_allclose(end, ORE.metal_share @ law.ultimate_at(ORE.size_mm), rtol=1e-14)
    assert law.extraction(0.0, ORE) == 0.0


def test_metal_share_weights_the_extraction():
    ore = SizeDistribution(np.array([1.0, 10.0]), np.array([0.5, 0.5]), np.array([0.9, 0.1]))
    law = copper_law()
    X = law.conversion(5.0, ore.size_mm) * law.ultimate_at(ore.size_mm)
    assert_allclose(law.extraction(5.0, ore), 0.9 * X[0] + 0.1 * X[1], rtol=1e-14)


def test_batch_is_the_loop():
    batch = copper_batch()
    assert batch.batch_shape == (4,)
    E = batch.extraction(TIMES, ORE, 290.15, 10.0)
    assert E.shape == (4, 6)
    assert batch.conversion(TIMES, ORE.size_mm).shape == (4, 10, 6)
    own_times = batch.extraction(np.tile(TIMES, (4, 1)), ORE, 290.15, 10.0)
    assert_allclose(own_times, E, rtol=1e-14)
    depth = batch.advance(batch.initial_depth(ORE), 10.0, ORE, 290.15, 10.0)
    assert depth.shape == (4, 10)
    for i in range(4):
        one = batch.select(i)
        assert one.batch_shape == ()
        assert_allclose(one.extraction(TIMES, ORE, 290.15, 10.0), E[i], rtol=1e-14)
        along = one.advance(one.initial_depth(ORE), 10.0, ORE, 290.15, 10.0)
        assert_allclose(along, depth[i], rtol=1e-14)


def test_conditions_may_be_a_batch():
    law = copper_law()
    warm = np.array([290.15, 310.15])
    E = law.extraction(TIMES, ORE, warm, [20.0, 10.0])
    assert_allclose(E[0], law.extraction(TIMES, ORE, 290.15, 20.0), rtol=1e-14)
    assert_allclose(E[1], law.extraction(TIMES, ORE, 310.15, 10.0), rtol=1e-14)


def test_shared_clock():
    law = copper_law()
    assert law.shared_clock()
    assert not law.shared_clock(one_temperature=False)
    assert copper_law(energies=(30.0, 30.0)).shared_clock(one_temperature=False)
    apart = copper_law(orders=(0.5, 1.0))
    assert not apart.shared_clock()
    assert apart.order is None
    assert law.order == 1.0
    assert_allclose(law.clock_rate(reagent_g_per_L=10.0), 0.5, rtol=1e-14)


def test_clock_rate_scales_time():
    law = copper_law(energies=(30.0, 30.0), orders=(0.8, 0.8))
    rate = law.clock_rate(310.0, 7.0)
    assert_allclose(
        law.extraction(TIMES, ORE, 310.0, 7.0), law.extraction(TIMES * rate, ORE), atol=1e-14
    )


def test_grain_path_equals_the_curve_where_one_clock_holds():
    """A changing reagent and temperature with one order and one activation energy."""
    law = copper_law(energies=(30.0, 30.0))

    def strength(t):
        return 20.0 - 0.4 * t if t < 20 else 12.0

    def warmth(t):
        return 298.15 + 0.5 * t

    steps, end = 8, np.array([5.0, 15.0, 40.0])
    path = extraction_along(law, ORE, end, warmth, strength, steps)
    exposure, now, total = [], 0.0, 0.0
    for until in end:
        step = (until - now) / steps
        middles = now + (np.arange(steps) + 0.5) * step
        total += step * sum(float(law.clock_rate(warmth(t), strength(t))) for t in middles)
        exposure.append(total)
        now = until
    assert_allclose(path, law.extraction(exposure, ORE), rtol=0, atol=1e-12)


def test_grain_path_at_constant_conditions_is_exact():
    law = copper_law(orders=(0.5, 1.0))
    path = extraction_along(law, ORE, TIMES, 310.0, 7.0, steps_per_interval=7)
    assert_allclose(path, law.extraction(TIMES, ORE, 310.0, 7.0), rtol=0, atol=1e-12)


@pytest.mark.parametrize("orders, energies", [((0.5, 1.0), (30, 30)), ((1.0, 1.0), (46, 19))])
def test_grain_path_is_second_order_in_the_step(orders, energies):
    """Halving the step takes three quarters of the error where no one clock holds."""
    law = copper_law(orders=orders, energies=energies)
    ore = SizeDistribution.single(3.0)

    def extraction(steps):
        return extraction_along(
            law,
            ore,
            [20.0],
            lambda t: 298.15 + 1.5 * t,
            lambda t: 20.0 * np.exp(-t / 12.0),
            steps,
        )[0]

    change = np.abs(np.diff([extraction(steps) for steps in (64, 128, 256, 512)]))
    assert change[0] > 1e-8
    assert_allclose(np.log2(change[:-1] / change[1:]), 2.0, atol=0.15)


def test_no_reagent_no_progress():
    law = copper_law()
    depth = law.advance(law.initial_depth(ORE), 5.0, ORE)
    later = law.advance(depth, 24.0, ORE, reagent_g_per_L=0.0)
    assert_allclose(later, depth, atol=1e-6)
    assert np.all(later >= depth - 1e-15)


def test_clock_law_along_a_path():
    k = Resistance("clock", np.log(10.0), 40.0)
    law = RateLaw("avrami", (k,), Reference(298.15, 5.0), [1.0], [0.9], {"n": 0.7})
    assert law.is_clock
    path = extraction_along(law, ORE, [3.0, 30.0], 310.0, 4.0, 5)
    assert_allclose(path, law.extraction([3.0, 30.0], ORE, 310.0, 4.0), atol=1e-12)
    rate = law.clock_rate(310.0, 4.0)
    by_hand = 0.9 * -np.expm1(-((rate * 3.0 / 10.0) ** 0.7))
    assert_allclose(path[0], by_hand, rtol=1e-12)


def test_lag_shifts_the_curve():
    plain, late = copper_law(), copper_law(lag_h=4.0)
    assert_allclose(late.extraction(TIMES + 4.0, ORE), plain.extraction(TIMES, ORE), atol=1e-14)
    assert late.extraction(3.0, ORE) == 0.0
    with pytest.raises(InputProblems, match="a law with a lag or a fade"):
        late.advance(late.initial_depth(ORE), 1.0, ORE)


def test_clocks_that_are_not_shared_are_refused():
    with pytest.raises(InputProblems, match="no single equivalent leach time.*extraction_along"):
        copper_law(orders=(0.5, 1.0)).ore_curve(ORE)
    with pytest.raises(InputProblems, match="no single equivalent leach time"):
        copper_law().clock_rate(temperature_K=310.0)


@pytest.mark.parametrize(
    "make, message",
    [
        (lambda: Resistance("filmm", 0.0), "kind: 'filmm'. Allowed: film"),
        (lambda: Resistance("film", float("nan")), "ln_tau: a number that is not finite"),
        (lambda: Reference(temperature_K=0.0), "temperature_K: 0.0. Allowed"),
        (lambda: RateLaw("film", (Resistance("clock", 0.0),), Reference(), [1], [1]), "law film"),
        (
            lambda: RateLaw("film", (Resistance("film", 0.0),), Reference(), [2, 1], [1, 1]),
            "ultimate_size_mm: .* Allowed: rising sizes",
        ),
        (
            lambda: RateLaw("film", (Resistance("film", 0.0),), Reference(), [1, 2], [1]),
            "ultimate: 1 values. Allowed: one for each of 2",
        ),
        (lambda: copper_law().extraction([-1.0], ORE), "time_h: a time below 0"),
        (lambda: copper_law().extraction([1.0], ORE, 0.0), "temperature_K: 0"),
        (lambda: copper_law().extraction([1.0], ORE, 298.0, -1.0), "reagent_g_per_L: -1"),
        (lambda: copper_law().times([0.0]), "size_mm: "),
        (
            lambda: copper_law().advance(np.zeros(10), -1.0, ORE),
            "hours: -1.0. Allowed: finite, not below 0 h",
        ),
        (lambda: extraction_along(copper_law(), ORE, [2.0, 1.0]), "times that do not rise"),
        (lambda: extraction_along(copper_law(), ORE, [2.0], None, None, 0), "steps_per_interval"),
    ],
)
def test_what_has_no_meaning_is_refused(make, message):
    with pytest.raises(InputProblems, match=message):
        make()


def test_data_box_names_what_lies_outside():
    box = DataBox((298.15, 328.15), (1.4, 10.9), (2.0, 240.0), (20.0, 20.0))
    inside = box.outside(temperature_K=300.0, size_mm=[2.0, 10.9], reagent_g_per_L=20.0, time_h=5)
    assert inside == ()
    found = box.outside(temperature_K=290.15, size_mm=ORE.size_mm, time_h=2880.0)
    assert found == (
        "temperature 17 degC is outside the tests (25 to 55 degC)",
        "size 0.05 mm is outside the tests (1.4 to 10.9 mm)",
        "size 15.41 mm is outside the tests (1.4 to 10.9 mm)",
        "time 2880 h is outside the tests (2 to 240 h)",
    )
    with pytest.raises(InputProblems, match="time_h"):
        DataBox((298.0, 299.0), (1.0, 2.0), (5.0, 1.0))
