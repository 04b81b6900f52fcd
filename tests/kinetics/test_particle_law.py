"""Particle laws: 60-digit arithmetic, values by hand, inverses, limits, slopes."""

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import (
    ParticleLaw,
    conversion_and_log_sensitivities,
    particle_conversion,
)

mpmath.mp.dps = 60
SHAPES = ("sphere", "cylinder", "slab", "shrinking_sphere")


def time_shares(shape, X):
    """g of film, ash layer and chemical as printed, in 60 digits: levenspiel1999, table 25.1."""
    left = 1 - X
    third = mpmath.cbrt(left)
    if shape == "slab":
        return X, X * X, X
    if shape == "cylinder":
        ash = X + left * mpmath.log(left) if left > 0 else X
        return X, ash, 1 - mpmath.sqrt(left)
    if shape == "shrinking_sphere":
        return 1 - third**2, mpmath.mpf(0), 1 - third
    return X, 1 - 3 * third**2 + 2 * left, 1 - third


def exact_conversion(shape, taus, time):
    """Root in X of sum tau g(X) = t by halving, 60 digits, without the program's variable."""
    taus, time = [mpmath.mpf(float(tau)) for tau in taus], mpmath.mpf(float(time))
    if time >= sum(taus):
        return mpmath.mpf(1)
    low, high = mpmath.mpf(0), mpmath.mpf(1)
    for _ in range(110):
        middle = (low + high) / 2
        shares = time_shares(shape, middle)
        if sum(t * g for t, g in zip(taus, shares, strict=True)) > time:
            high = middle
        else:
            low = middle
    return (low + high) / 2


def mixtures(count, seed, spread):
    """Times of the three resistances over 2 * spread decades, some of them absent."""
    rng = np.random.default_rng(seed)
    taus = 10.0 ** rng.uniform(-spread, spread, (count, 3))
    absent = rng.integers(0, 8, count)
    for i in range(3):
        taus[absent == i, i] = 0.0
        taus[np.ix_(absent == 3 + i, [j for j in range(3) if j != i])] = 0.0
    near_start = 10.0 ** rng.uniform(-12, 0, count)
    near_end = 1.0 - 10.0 ** rng.uniform(-15, 0, count)
    theta = np.choose(rng.integers(0, 3, count), [near_start, rng.random(count), near_end])
    return taus, theta * taus.sum(axis=1)


def assert_exact(shape, taus, times, atol):
    if shape == "shrinking_sphere":
        taus[:, 1] = 0.0
        taus[taus.sum(axis=1) == 0.0, 2] = 1.0
    found = particle_conversion(*taus.T, times, shape=shape)
    wanted = [exact_conversion(shape, tau, time) for tau, time in zip(taus, times, strict=True)]
    miss = [float(abs(mpmath.mpf(float(x)) - w)) for x, w in zip(found, wanted, strict=True)]
    assert max(miss) <= atol, (taus[np.argmax(miss)], times[np.argmax(miss)])


@pytest.mark.parametrize("shape", SHAPES)
def test_conversion_in_60_digits(shape):
    taus, times = mixtures(60, 20, 8)
    assert_exact(shape, taus, times, 1e-15 if shape == "sphere" else 1e-14)


@pytest.mark.slow
@pytest.mark.parametrize("shape", SHAPES)
def test_conversion_in_60_digits_many(shape):
    taus, times = mixtures(2500, 21, 8)
    assert_exact(shape, taus, times, 1e-15 if shape == "sphere" else 1e-14)


def test_relative_accuracy_at_the_start():
    times = 10.0 ** np.arange(-12.0, -1.0)
    for taus in ((0, 1, 0), (0, 0, 1), (1, 0, 0), (1, 1, 1), (1e-6, 1, 1e-9)):
        found = ParticleLaw(*taus).conversion(times)
        wanted = [float(exact_conversion("sphere", taus, t)) for t in times]
        assert_allclose(found, wanted, rtol=2e-15)


def test_three_sizes_in_plug_flow():
    """levenspiel1999, example 26.1: 8 min, complete in 5, 10, 20 min, shares 0.3, 0.4, 0.3."""
    law = ParticleLaw(chemical=np.array([5.0, 10.0, 20.0]))
    mean = np.array([0.3, 0.4, 0.3]) @ law.conversion(8.0)
    assert_allclose(mean, 0.932, atol=0.0005)


def test_seven_eighths_by_hand():
    """At X = 7/8 half of a sphere's radius is left: chemical 1 - 1/2, ash 1 - 3/4 + 2/8."""
    assert_allclose(ParticleLaw(chemical=1.0).time(0.875), 0.5, rtol=1e-15)
    assert_allclose(ParticleLaw(ash_layer=1.0).time(0.875), 0.5, rtol=1e-15)
    assert_allclose(ParticleLaw(film=1.0).time(0.875), 0.875, rtol=1e-15)


@pytest.mark.parametrize(
    "shape, name, theta, wanted",
    [
        ("sphere", "chemical", 0.3, 1 - 0.7**3),
        ("cylinder", "chemical", 0.3, 1 - 0.7**2),
        ("slab", "chemical", 0.3, 0.3),
        ("slab", "ash_layer", 0.3, 0.3**0.5),
        ("cylinder", "film", 0.3, 0.3),
        ("shrinking_sphere", "film", 0.3, 1 - 0.7**1.5),
        ("shrinking_sphere", "chemical", 0.3, 1 - 0.7**3),
    ],
)
def test_single_resistance_by_hand(shape, name, theta, wanted):
    law = ParticleLaw(**{name: 4.0}, shape=shape)
    assert_allclose(law.conversion(4.0 * theta), wanted, rtol=1e-15)


times_or_none = st.one_of(st.just(0.0), st.floats(1e-6, 1e6))


@settings(max_examples=60, deadline=None)
@given(
    st.tuples(times_or_none, times_or_none, times_or_none).filter(lambda taus: sum(taus) > 0),
    st.lists(st.floats(0.0, 1.2), min_size=2, max_size=20),
    st.sampled_from(("sphere", "cylinder", "slab")),
)
def test_inverse_monotone_and_bounded(taus, thetas, shape):
    law = ParticleLaw(*taus, shape=shape)
    times = np.sort(thetas) * sum(taus)
    X = law.conversion(times)
    assert np.all((X >= 0.0) & (X <= 1.0))
    assert np.all(np.diff(X) >= -4e-16)
    done = times >= sum(taus)
    assert_allclose(X[done], 1.0, atol=1e-15)
    assert_allclose(law.conversion(law.time(X)), X, rtol=0, atol=5e-15)
    early = X < 0.999  # nearer the end the time hangs on the last digit of X
    assert_allclose(law.time(X)[early], times[early], rtol=0, atol=1e-12 * sum(taus))
    by_depth = law.time_of_depth(law.depth(times))
    assert_allclose(by_depth[~done], times[~done], rtol=0, atol=1e-13 * sum(taus))


@pytest.mark.parametrize("shape", SHAPES)
def test_ends(shape):
    ash = 0.0 if shape == "shrinking_sphere" else 2.0
    law = ParticleLaw(1.0, ash, 3.0, shape=shape)
    assert law.conversion(0.0) == 0.0
    assert law.depth(0.0) == 0.0
    assert_allclose(law.complete_at, 4.0 + ash, rtol=1e-15)
    for time in (law.complete_at, 1e9):
        assert law.conversion(time) == 1.0
        assert law.depth(time) == 1.0
    assert_allclose(law.time([0.0, 1.0]), [0.0, law.complete_at], atol=1e-15)


def test_numbers_at_the_edge_of_floating_point():
    law = ParticleLaw(1.0, 108.0, 0.0)
    X = law.conversion([0.0, 5e-324, 1e-300, 1e300])
    assert np.all((X >= 0.0) & (X <= 1.0))
    assert X[-1] == 1.0
    for shape in SHAPES:
        assert ParticleLaw(chemical=1e-200, shape=shape).conversion(1e200) == 1.0


def test_more_resistance_is_never_faster():
    times = np.linspace(0.0, 12.0, 50)
    base = ParticleLaw(1.0, 2.0, 3.0).conversion(times)
    for more in ((2.0, 2.0, 3.0), (1.0, 3.0, 3.0), (1.0, 2.0, 5.0)):
        assert np.all(ParticleLaw(*more).conversion(times) <= base + 1e-15)


def test_spheres_convert_before_cylinders_before_slabs():
    """At equal chemical time the grain with more surface for its volume is ahead."""
    at = np.linspace(0.05, 0.95, 10)
    sphere, cylinder, slab = (
        ParticleLaw(chemical=1.0, shape=shape).conversion(at)
        for shape in ("sphere", "cylinder", "slab")
    )
    assert np.all(sphere > cylinder)
    assert np.all(cylinder > slab)


def test_depth_gives_conversion():
    law = ParticleLaw(0.3, 5.0, 1.0)
    times = np.linspace(0.0, 7.0, 40)
    assert_allclose(1.0 - (1.0 - law.depth(times)) ** 3, law.conversion(times), atol=1e-14)
    assert_allclose(law.conversion_of_depth(law.depth(times)), law.conversion(times), atol=1e-14)


def test_steps_in_a_row_are_one_step():
    law = ParticleLaw(0.3, 5.0, 1.0)
    depth = np.asarray(0.0)
    for _ in range(25):
        depth = law.advanced(depth, 0.2)
    assert_allclose(depth, law.depth(5.0), rtol=1e-13)


@pytest.mark.parametrize("shape", SHAPES)
def test_rate_is_the_slope(shape):
    ash = 0.0 if shape == "shrinking_sphere" else 4.0
    law = ParticleLaw(1.0, ash, 2.0, shape=shape)
    times = np.linspace(0.3, 0.95, 9) * law.complete_at
    h = 1e-5
    slope = (law.conversion(times + h) - law.conversion(times - h)) / (2 * h)
    assert_allclose(law.rate(law.conversion(times)), slope, rtol=1e-6)
    assert_allclose(law.rate_of_time(times), slope, rtol=1e-6)


def test_rate_at_the_ends():
    assert ParticleLaw(ash_layer=2.0).rate(0.0) == np.inf
    assert_allclose(ParticleLaw(chemical=2.0).rate([0.0, 1.0]), [1.5, 0.0])
    assert_allclose(ParticleLaw(film=2.0).rate([0.0, 0.5, 1.0]), [0.5, 0.5, 0.5])
    assert_allclose(ParticleLaw(film=2.0).rate_of_time([1.0, 2.0, 3.0]), [0.5, 0.0, 0.0])


@pytest.mark.parametrize("shape", SHAPES)
def test_sensitivities_against_differences(shape):
    taus = np.array([0.7, 0.0 if shape == "shrinking_sphere" else 3.0, 1.5])
    times = np.linspace(0.02, 0.98, 15) * taus.sum()
    found = ParticleLaw(*taus, shape=shape).sensitivities(times)
    for i in np.flatnonzero(taus):
        h = 1e-6
        up, down = taus.copy(), taus.copy()
        up[i] *= np.exp(h)
        down[i] *= np.exp(-h)
        up_x = ParticleLaw(*up, shape=shape).conversion(times)
        down_x = ParticleLaw(*down, shape=shape).conversion(times)
        assert_allclose(found[i], (up_x - down_x) / (2 * h), atol=2e-8)


def test_sensitivities_add_up_to_the_rate():
    """Stretching every time alike is stretching the clock: their sum is -t dX/dt."""
    law = ParticleLaw(0.7, 3.0, 1.5)
    times = np.linspace(0.0, 6.0, 31)
    moving = times * law.rate_of_time(times)
    assert_allclose(sum(law.sensitivities(times)), -moving, atol=1e-14)


def test_sensitivities_are_finite_at_both_ends():
    for taus in ((0, 2, 0), (2, 0, 0), (0, 0, 2)):
        X, *slopes = conversion_and_log_sensitivities(*taus, [0.0, 1e-300, 2.0, 5.0])
        assert np.all(np.isfinite(X))
        for slope in slopes:
            assert np.all(np.isfinite(slope))
            assert slope[0] == 0.0
            assert_allclose(slope[2:], 0.0, atol=1e-15)


def test_batch_is_the_loop():
    rng = np.random.default_rng(4)
    film, ash, chemical = rng.random((3, 5))
    times = np.linspace(0.0, 2.0, 7)
    batch = ParticleLaw(film, ash, chemical)
    assert batch.conversion(times).shape == (5, 7)
    assert batch.conversion(0.5).shape == (5,)
    for i in range(5):
        one = ParticleLaw(film[i], ash[i], chemical[i])
        assert_allclose(batch.conversion(times)[i], one.conversion(times), atol=1e-15)
        own = batch.conversion(np.tile(times, (5, 1)))[i]
        assert_allclose(own, one.conversion(times), atol=1e-15)


def test_blocks_meet():
    """More elements than one block gives the same as one by one."""
    times = np.linspace(0.0, 7.0, 40001)
    law = ParticleLaw(1.0, 3.0, 2.0)
    some = [0, 16383, 16384, 32767, 32768, 40000]
    assert_allclose(law.conversion(times)[some], [law.conversion(times[i]) for i in some], atol=0)


@pytest.mark.parametrize(
    "arguments, message",
    [
        ({}, "all three times are 0"),
        ({"film": -1.0}, "film: -1"),
        ({"chemical": float("nan")}, "chemical: nan"),
        ({"chemical": float("inf")}, "chemical: inf"),
        ({"chemical": 1.0, "shape": "spher"}, "did you mean sphere"),
        ({"ash_layer": 1.0, "shape": "shrinking_sphere"}, "ash layer on a grain that shrinks"),
        ({"chemical": np.array([1.0, 0.0])}, "all three times are 0"),
    ],
)
def test_laws_without_meaning_are_refused(arguments, message):
    with pytest.raises(InputProblems, match=message):
        ParticleLaw(**arguments)


@pytest.mark.parametrize("time", [-1.0, float("nan"), float("inf"), [1.0, -2.0]])
def test_times_without_meaning_are_refused(time):
    law = ParticleLaw(chemical=1.0)
    for ask in (law.conversion, law.depth, law.sensitivities):
        with pytest.raises(InputProblems, match="time: .* Allowed: finite times"):
            ask(time)


@pytest.mark.parametrize("conversion", [-0.1, 1.1, float("nan")])
def test_conversions_without_meaning_are_refused(conversion):
    with pytest.raises(InputProblems, match="fractions from 0 to 1"):
        ParticleLaw(chemical=1.0).time(conversion)
