"""One-clock laws: values by hand, inverses, limits, slopes, names."""

import mpmath
import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import (
    CLOCK_LAWS,
    LAW_NAMES,
    MECHANISTIC,
    ClockLaw,
    canonical_law,
    clock_conversion_and_sensitivities,
    clock_of_conversion,
    conversion_of_clock,
    law_terms,
)
from leachkin.kinetics.other_laws import end_of_clock

SHAPES = {"fast_share": 0.4, "ratio": 20.0, "n": 0.6, "slope": 0.15}
LAWS = sorted(CLOCK_LAWS)


def shapes_of(name):
    return {key: np.asarray(SHAPES[key]) for key in CLOCK_LAWS[name].shape_names}


@pytest.mark.parametrize(
    "name, theta, wanted",
    [
        ("shrinking_film", 0.75, 0.875),  # 1 - (1/4)^(3/2)
        ("first_order", np.log(4.0), 0.75),
        ("second_order", 3.0, 0.75),
        ("avrami", np.log(2.0) ** (1 / 0.6), 0.5),
        ("elovich", np.expm1(2.0), 0.3),
        ("jander", 0.25, 0.875),  # half of the radius gone
        ("zlt", 1.0, 0.875),  # (1/8)^(-1/3) - 1 = 1
        ("interface_diffusion", 1.0 - np.log(2.0), 0.875),  # ln(1/8)/3 + 2 - 1
        ("two_rate", np.log(2.0), 0.4 * (1 - 2.0**-20) + 0.3),
    ],
)
def test_values_by_hand(name, theta, wanted):
    assert_allclose(conversion_of_clock(name, theta, shapes_of(name)), wanted, rtol=1e-14)


def test_interface_diffusion_in_50_digits():
    """v - ln(1+v) = theta solved by the Lambert function: v = -1 - W_-1(-exp(-1-theta))."""
    with mpmath.workdps(50):
        for theta in 10.0 ** np.arange(-12.0, 4.0):
            v = -1 - mpmath.lambertw(-mpmath.exp(-1 - mpmath.mpf(theta)), -1).real
            wanted = 1 - (1 + v) ** -3
            found = conversion_of_clock("interface_diffusion", theta, {})
            assert abs(mpmath.mpf(float(found)) - wanted) < 1e-13, theta


@pytest.mark.parametrize("name", LAWS)
def test_inverse_and_monotone(name):
    X = np.concatenate([10.0 ** np.arange(-6.0, 0.0), np.linspace(0.15, 0.995, 30)])
    theta = clock_of_conversion(name, X, shapes_of(name))
    assert_allclose(conversion_of_clock(name, theta, shapes_of(name)), X, rtol=1e-10)
    assert np.all(np.diff(theta[np.argsort(X)]) > 0.0)


@pytest.mark.parametrize("name", LAWS)
def test_starts_at_zero_and_stays_below_one(name):
    theta = np.concatenate([[0.0], np.geomspace(1e-9, 1e6, 200)])
    X = conversion_of_clock(name, theta, shapes_of(name))
    assert X[0] == 0.0
    assert np.all(np.diff(X) >= -1e-15)
    assert np.all(X <= 1.0)
    assert X[-1] > 0.99


@pytest.mark.parametrize("name", LAWS)
def test_slopes_against_differences(name):
    theta = np.array([0.003, 0.02, 0.1, 0.3, 0.7, 0.9])
    shapes = shapes_of(name)
    X, slope, by_shape = clock_conversion_and_sensitivities(name, theta, shapes)
    assert_allclose(X, conversion_of_clock(name, theta, shapes), rtol=0)
    h = 1e-6 * theta
    up, down = (conversion_of_clock(name, theta + sign * h, shapes) for sign in (1, -1))
    assert_allclose(slope, (up - down) / (2 * h), rtol=1e-7)
    assert set(by_shape) == set(shapes)
    for key, value in shapes.items():
        step = 1e-6 * value
        up, down = (
            conversion_of_clock(name, theta, {**shapes, key: value + sign * step})
            for sign in (1, -1)
        )
        assert_allclose(by_shape[key], (up - down) / (2 * step), atol=1e-8)


@pytest.mark.parametrize("name", LAWS)
def test_sensitivity_to_the_clock_is_finite_everywhere(name):
    theta = np.array([0.0, 1e-200, 1.0, 1e8])
    _, slope, by_shape = clock_conversion_and_sensitivities(name, theta, shapes_of(name))
    assert np.all(np.isfinite(theta * slope))
    assert (theta * slope)[0] == 0.0
    for value in by_shape.values():
        assert np.all(np.isfinite(value))


def test_two_rate_with_one_rate_is_first_order():
    theta = np.linspace(0.0, 5.0, 20)
    one = conversion_of_clock("two_rate", theta, {"fast_share": 0.3, "ratio": 1.0})
    assert_allclose(one, conversion_of_clock("first_order", theta, {}), rtol=1e-14)


def test_avrami_with_power_one_is_first_order():
    theta = np.linspace(0.0, 5.0, 20)
    one = conversion_of_clock("avrami", theta, {"n": 1.0})
    assert_allclose(one, conversion_of_clock("first_order", theta, {}), rtol=1e-14)


def test_clock_law_steps_add():
    law = ClockLaw("first_order", np.array([2.0, 5.0]))
    depth = law.advanced(law.advanced(np.zeros(2), 1.0), 2.0)
    assert_allclose(law.conversion_of_depth(depth), law.conversion(3.0), rtol=1e-15)
    assert_allclose(law.conversion([3.0])[:, 0], 1 - np.exp([-1.5, -0.6]), rtol=1e-15)
    assert_allclose(law.rate_of_time([3.0])[:, 0], np.exp([-1.5, -0.6]) / [2, 5], rtol=1e-14)


def test_ends():
    assert end_of_clock("jander", {}) == 1.0
    assert end_of_clock("shrinking_film", {}) == 1.0
    assert_allclose(end_of_clock("first_order", {}), np.log(1e12), rtol=1e-4)
    assert end_of_clock("second_order", {}) == 1e4


def test_names():
    assert canonical_law("chemical+film") == "film+chemical"
    assert canonical_law("film + ash_layer + chemical") == "series"
    assert law_terms("series") == ("film", "ash_layer", "chemical")
    assert law_terms("zlt") == ("clock",)
    assert set(MECHANISTIC) <= set(LAW_NAMES)
    assert len(set(LAW_NAMES)) == len(LAW_NAMES)


@pytest.mark.parametrize("ask", [canonical_law, law_terms])
def test_unknown_name_has_the_nearest(ask):
    with pytest.raises(InputProblems, match="unknown law 'avramy'.*did you mean avrami"):
        ask("avramy")


@pytest.mark.parametrize(
    "name, theta, shapes, message",
    [
        ("film", 1.0, {}, "unknown law 'film'"),
        ("first_order", -1.0, {}, "theta: a value below 0"),
        ("first_order", float("nan"), {}, "theta: a value below 0 or not finite"),
        ("avrami", 1.0, {}, "none for law avrami. Allowed: n"),
        ("first_order", 1.0, {"n": 1.0}, "n for law first_order. Allowed: none"),
        ("two_rate", 1.0, {"fast_share": 1.2, "ratio": 2.0}, "fast_share: 1.2. Allowed: from 0"),
        ("two_rate", 1.0, {"fast_share": 0.2, "ratio": 0.5}, "ratio: 0.5. Allowed: from 1"),
    ],
)
def test_what_has_no_meaning_is_refused(name, theta, shapes, message):
    with pytest.raises(InputProblems, match=message):
        conversion_of_clock(name, theta, shapes)


def test_end_of_an_endless_law_is_refused():
    with pytest.raises(InputProblems, match="may only approach 1"):
        clock_of_conversion("first_order", 1.0, {})
