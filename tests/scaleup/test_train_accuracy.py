"""Tank trains in high precision, with gangue, several temperatures, empirical laws and draws."""

import mpmath
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.optimize import brentq

from leachkin.errors import InputProblems
from leachkin.kinetics import ParticleLaw, RateLaw, ReagentDemand, Reference, Resistance
from leachkin.scaleup import batch_leach, tank_train
from leachkin.testwork import SizeDistribution

#: Leachable share of a zinc calcine from its assays: 58.0 % Zn, 9.5 % Fe as ferrite, 0.6 % as ZnS.
CALCINE_LEACHABLE = (58.0 - 9.5 * 65.38 / (2 * 55.845) - 0.6) / 58.0
GRAIN = SizeDistribution.single(1.0)


def calcine_law(tau_h=13.0 / 60.0):
    """Chemical control, order 0.8, times at 50 degC and 55 g/L."""
    return RateLaw(
        "chemical",
        (Resistance("chemical", np.log(tau_h), 28.0, 0.8),),
        Reference(323.15, 55.0, 1.0),
        [1.0],
        [CALCINE_LEACHABLE],
    )


def calcine_train(times_h, feed_g_per_L=55.0, **others):
    return tank_train(
        calcine_law(),
        times_h,
        ReagentDemand(1.5, 580.0),
        feed_g_per_L,
        solids_kg_per_m3=60.0,
        sizes=GRAIN,
        **others,
    )


#   unconverted in one tank: tau over mean time; film, ash layer, chemical.
#   Computed from the closed integrals of Levenspiel 1999, ch. 26; digits as tabulated.
ONE_TANK = [
    (0.05, 0.02458849, 0.009888, 0.01237603),
    (0.1, 0.04837418, 0.01955635, 0.02450822),
    (0.33333333, 0.14959393, 0.06195135, 0.07807231),
    (1.0, 0.36787944, 0.16233811, 0.20727665),
    (3.0, 0.68326236, 0.34948429, 0.45550824),
    (10.0, 0.90000454, 0.58296051, 0.75400027),
    (20.0, 0.95, 0.69065305, 0.86425),
]


@pytest.mark.parametrize(("ratio", "film", "ash_layer", "chemical"), ONE_TANK)
def test_one_tank_against_the_closed_integrals(ratio, film, ash_layer, chemical):
    for kind, expected in (("film", film), ("ash_layer", ash_layer), ("chemical", chemical)):
        train = tank_train(ParticleLaw(**{kind: ratio}), [1.0])
        assert_allclose(1.0 - train.extraction[0], expected, rtol=0, atol=2e-8)


def test_film_in_one_tank_exactly():
    for ratio in (0.1, 1.0, 20.0):
        expected = -np.expm1(-ratio) / ratio
        assert_allclose(
            tank_train(ParticleLaw(film=ratio), [1.0]).extraction[0], expected, rtol=1e-13, atol=0
        )


def exact_extraction(film, ash_layer, chemical, means):
    """Expectation by partial fractions in 60 digits, means made distinct at the 25th digit."""
    with mpmath.workdps(60):
        rates = [1 / (mpmath.mpf(m) * (1 + k * mpmath.mpf(10) ** -12)) for k, m in enumerate(means)]
        weights = [
            mpmath.fprod(other / (other - rate) for other in rates if other != rate)
            for rate in rates
        ]

        def survival(time):
            pairs = zip(weights, rates, strict=True)
            return mpmath.fsum(w * mpmath.exp(-rate * time) for w, rate in pairs)

        def slope(z):
            time = film * z * (3 - 3 * z + z * z) + ash_layer * z * z * (3 - 2 * z) + chemical * z
            return 3 * (1 - z) ** 2 * survival(time)

        edges = [0, 1e-4, 1e-3, 1e-2, 0.05, 0.2, 0.5, 1]
        with mpmath.workdps(60):
            return float(mpmath.quad(slope, edges, maxdegree=6))


@pytest.mark.parametrize(
    ("times", "means"),
    [
        ((0.0, 0.0, 1.0), [0.3, 0.1]),
        ((0.0, 0.0, 1.0), [0.2] * 5),
        ((0.0, 1.0, 0.0), [0.3, 0.3 * (1 + 1e-7), 0.3 * (1 - 1e-5)]),
        ((0.0, 10.0, 3.0), [5.0, 1e-3, 2.0, 0.1]),
        ((0.5, 10.0, 3.0), [1e-4, 3e-4, 1e-4]),
        ((0.0, 1.0, 0.0), [40.0, 41.0]),
    ],
)
def test_expectation_against_sixty_digits(times, means):
    law = ParticleLaw(*times)
    found = tank_train(law, means).extraction[-1]
    assert_allclose(found, exact_extraction(*times, means), rtol=1e-10, atol=1e-11)


def test_without_a_balance_the_order_of_the_tanks_does_not_matter():
    law = ParticleLaw(ash_layer=5.0, chemical=2.0)
    one = tank_train(law, [0.3, 2.0, 7.0]).extraction[-1]
    other = tank_train(law, [7.0, 0.3, 2.0]).extraction[-1]
    assert_allclose(one, other, rtol=1e-13, atol=0)


def test_particle_law_rate_law_and_ore_curve_agree():
    by_rate_law = calcine_train([0.25] * 4)
    balance = {"demand": ReagentDemand(1.5, 580.0), "feed_g_per_L": 55.0, "solids_kg_per_m3": 60.0}
    by_particle = tank_train(
        ParticleLaw(chemical=13.0 / 60.0), [0.25] * 4, ultimate=CALCINE_LEACHABLE,
        reagent_order=0.8, **balance,
    )  # fmt: skip
    by_curve = tank_train(calcine_law().ore_curve(GRAIN), [0.25] * 4, **balance)
    assert_allclose(by_particle.extraction, by_rate_law.extraction, rtol=1e-12, atol=0)
    assert_allclose(by_curve.extraction, by_rate_law.extraction, rtol=0, atol=1e-7)


def test_train_with_gangue_against_quadrature_and_a_scalar_root():
    demand = ReagentDemand(2.0, 50.0, 8.0, 0.5, 20.0, 6.0)
    law = ParticleLaw(chemical=3.0)
    train = tank_train(law, [2.0, 3.0], demand, 12.0, solids_kg_per_m3=100.0, reagent_order=0.7)

    def taken(survival):
        metal = quad(lambda z: 3 * (1 - z) ** 2 * survival(3.0 * z), 0, 1, epsabs=1e-13)[0]
        parts = [
            most * quad(lambda s, h=h: np.exp(-s / h) / h * survival(s), 0, 60 * h, limit=200,
                        epsabs=1e-13)[0]
            for most, h in ((8.0, 0.5), (20.0, 6.0))
        ]  # fmt: skip
        return metal, 100.0 * metal + sum(parts)

    def one(a):
        return taken(lambda s: np.exp(-s / a))

    def two(a, b):
        return taken(lambda s: (a * np.exp(-s / a) - b * np.exp(-s / b)) / (a - b))

    def mean(strength, hours):
        return hours * (strength / 12.0) ** 0.7

    first = brentq(lambda c: c - 12.0 + 0.1 * one(mean(c, 2.0))[1], 1e-9, 12.0, xtol=1e-13)
    a = mean(first, 2.0)
    second = brentq(lambda c: c - 12.0 + 0.1 * two(a, mean(c, 3.0))[1], 1e-9, first, xtol=1e-13)
    assert_allclose(train.reagent_g_per_L, [first, second], rtol=1e-9, atol=0)
    assert_allclose(train.extraction[1], two(a, mean(second, 3.0))[0], rtol=1e-9, atol=0)


def test_a_batch_of_draws_equals_its_members():
    tau = np.array([0.1, 0.2, 0.9])
    feed = np.array([55.0, 70.0, 35.0])
    demand = ReagentDemand(np.array([1.5, 1.6, 1.4]), 580.0)
    together = tank_train(
        calcine_law(tau), [[0.2, 0.3]], demand, feed, solids_kg_per_m3=60.0, sizes=GRAIN
    )
    assert together.extraction.shape == (3, 2)
    for i in range(3):
        alone = tank_train(
            calcine_law(tau[i]), [0.2, 0.3], demand.select(i), feed[i], solids_kg_per_m3=60.0,
            sizes=GRAIN,
        )  # fmt: skip
        assert_allclose(together.extraction[i], alone.extraction, rtol=1e-11, atol=0)
        assert_allclose(together.reagent_g_per_L[i], alone.reagent_g_per_L, rtol=1e-9, atol=0)


def test_starvation_is_named_and_not_called_ultimate():
    train = calcine_train([0.25] * 6, feed_g_per_L=40.0)
    assert train.starved.tolist() == [False, False, False, True, True, True]
    assert "starved of reagent in tank 4, 5 and 6" in train.warnings[0]
    # all the acid gives 40 / (60 * 1.5 * 0.58) of the zinc
    assert train.extraction[-1] < 40.0 / (0.060 * 1.5 * 580.0) < train.ultimate


def test_a_train_far_beyond_its_reagent_stays_finite():
    law = ParticleLaw(ash_layer=1e-3)
    train = tank_train(law, [10.0] * 8, ReagentDemand(1.0, 500.0), 1.0, solids_kg_per_m3=1000.0)
    assert np.all(np.isfinite(train.extraction))
    assert np.all(train.reagent_g_per_L >= 0.0)
    assert_allclose(500.0 * train.extraction[-1], 1.0, rtol=1e-3, atol=0)


def test_no_reagent_no_extraction():
    train = calcine_train([0.5, 0.5], feed_g_per_L=0.0)
    assert train.extraction.tolist() == [0.0, 0.0]
    assert train.warnings[0] == "the feed holds no reagent: nothing is leached"


def test_temperature_of_each_tank_on_one_clock():
    law = calcine_law()
    hot = tank_train(law, [0.2, 0.2], sizes=GRAIN, temperature_K=[338.15, 323.15])
    factor = np.exp(-28.0 / 8.314462618e-3 * (1 / 338.15 - 1 / 323.15))
    same = tank_train(law, [0.2 * factor, 0.2], sizes=GRAIN)
    assert_allclose(hot.extraction, same.extraction, rtol=1e-10, atol=0)
    one = tank_train(law, [0.2, 0.2], sizes=GRAIN, temperature_K=338.15)
    assert one.extraction[1] > hot.extraction[1]


def test_draws_of_the_temperature():
    warm = np.array([310.0, 330.0, 350.0])
    train = tank_train(calcine_law(), [0.2, 0.2], sizes=GRAIN, temperature_K=warm)
    for i, temperature in enumerate(warm):
        alone = tank_train(calcine_law(), [0.2, 0.2], sizes=GRAIN, temperature_K=temperature)
        assert_allclose(train.extraction[i], alone.extraction, rtol=1e-12, atol=0)


def test_empirical_law_first_order_in_equal_tanks():
    law = RateLaw("first_order", (Resistance("clock", np.log(2.0), 40.0),),
                  Reference(298.15, 1.0, 1.0), [1.0], [0.9])  # fmt: skip
    train = tank_train(law, [1.0, 1.0, 1.0], sizes=GRAIN)
    exact = 0.9 * (1.0 - (1.0 + 1.0 / 2.0) ** -np.arange(1.0, 4.0))  # first order in N tanks
    assert_allclose(train.extraction, exact, rtol=0, atol=2e-6)
    factor = float(law.clock_rate(310.0))
    warm = tank_train(law, [1.0], sizes=GRAIN, temperature_K=310.0)
    assert_allclose(warm.extraction, [0.9 * (1 - 1 / (1 + factor / 2))], rtol=0, atol=2e-6)


def test_gold_and_silver_feel_the_train_differently():
    # five tanks of 6 h; gold: chemical control over log-normal grains; silver: chemical and ash
    grains = SizeDistribution.log_normal(1.0, 0.9, classes=41)
    gold = RateLaw("chemical", (Resistance("chemical", np.log(5.5)),), Reference(), [1.0], [0.92])
    train = tank_train(gold, [6.0] * 5, sizes=grains)
    silver = ParticleLaw(ash_layer=60.0, chemical=4.0)
    assert_allclose(train.extraction[-1], 0.918, rtol=0, atol=1.5e-3)
    assert_allclose(gold.extraction(30.0, grains), 0.920, rtol=0, atol=1.5e-3)
    assert_allclose(
        tank_train(silver, [6.0] * 5, ultimate=0.76).extraction[-1], 0.627, rtol=0, atol=5e-4
    )
    assert_allclose(0.76 * silver.conversion(30.0), 0.652, rtol=0, atol=5e-4)


def test_two_orders_are_refused_once_a_strength_is_given():
    law = RateLaw(
        "ash_layer+chemical",
        (Resistance("ash_layer", 1.0, order=1.0), Resistance("chemical", 1.0, order=0.5)),
        Reference(),
        [1.0],
        [0.9],
    )
    assert tank_train(law, [1.0], sizes=GRAIN).extraction[0] > 0.0
    with pytest.raises(InputProblems, match="resistances of different order"):
        tank_train(law, [1.0], feed_g_per_L=2.0, sizes=GRAIN)


def test_table_of_a_train_and_of_draws():
    table = calcine_train([0.25] * 4).table()
    assert_allclose(table.column("extraction")[3], 87.80, rtol=0, atol=0.01)
    assert table.column("tank") == [1, 2, 3, 4]
    drawn = tank_train(calcine_law(np.array([0.1, 0.2, 0.3])), [0.5], sizes=GRAIN).table(0.8)
    headings = [column.heading for column in drawn.columns]
    assert "Extraction, cumulative, P10 (low)" in headings
    assert drawn.column("extraction_low")[0] < drawn.column("extraction_high")[0]


#   minutes, degC, feed g/L, extraction: computed from the constants of the calcine
CALCINE_BATCH = [
    (308.15, 55.0, [0.113, 0.209, 0.289, 0.416, 0.550, 0.665, 0.787, 0.853, 0.894]),
    (323.15, 55.0, [0.178, 0.312, 0.415, 0.561, 0.692, 0.786, 0.865, 0.891, 0.894]),
    (338.15, 55.0, [0.261, 0.431, 0.547, 0.690, 0.798, 0.860, 0.893, 0.894, 0.894]),
]


@pytest.mark.parametrize(("temperature_K", "feed", "expected"), CALCINE_BATCH)
def test_calcine_in_batch(temperature_K, feed, expected):
    leach = batch_leach(
        calcine_law().ore_curve(GRAIN, temperature_K),
        np.array([1, 2, 3, 5, 8, 12, 20, 30, 60]) / 60.0,
        ReagentDemand(1.5, 580.0),
        feed,
        solids_kg_per_m3=60.0,
    )
    assert_allclose(leach.extraction, expected, rtol=0, atol=5.1e-4)
    assert leach.warnings == ()
