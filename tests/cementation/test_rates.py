"""Rate laws of cementation: published points, inverses, recovery, ranking, intervals."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from leachkin.cementation import (
    CEMENTATION_LAWS,
    CementationLaw,
    cementation_test,
    fit_cementation,
    fit_cementation_tests,
    rank_cementation,
    rank_cementation_tests,
    share_left,
)
from leachkin.cementation.rate_laws import FORMS
from leachkin.errors import InputProblems

TIMES = np.array([0.0, 0.05, 0.1, 0.2, 0.3, 0.5, 0.75, 1.0, 1.5, 2.0])
SHAPES = {
    "first_order": {},
    "two_stage": {"break": 0.8, "ratio": 2.5},
    "growing_area": {"power": 1.5},
    "back_dissolution": {"back": 0.05},
    "back_dissolution+fade": {"back": 0.04, "fade": 0.3},
}


#   minutes, share removed, rate constant [1/min]: Shishkin et al., Metals 8, 920, 2018
SHISHKIN = [(5.0, 0.90, 0.461), (7.0, 0.95, 0.428), (7.0, 0.55, 0.114)]


@pytest.mark.parametrize(("minutes", "removed", "per_min"), SHISHKIN)
def test_copper_onto_iron_powder(minutes, removed, per_min):
    fit = fit_cementation([minutes / 60], [1.0 - removed], start=1.0)
    assert_allclose(fit.parameter("k").value / 60, per_min, rtol=0, atol=5e-4)
    assert fit.parameter("k").low is None
    assert "no scatter to judge by" in fit.parameter("k").why_no_interval


@pytest.mark.parametrize("law", CEMENTATION_LAWS)
def test_slopes_are_derivatives(law):
    theta = np.array([0.3, 0.79, 1.7, 6.0])
    shapes = {name: np.asarray(value) for name, value in SHAPES[law].items()}
    left, slope, by_shape = FORMS[law].left(theta, shapes)
    step = 1e-6
    up, down = (FORMS[law].left(theta + s, shapes)[0] for s in (step, -step))
    assert_allclose(slope, (up - down) / (2 * step), rtol=0, atol=1e-8)
    for name, value in SHAPES[law].items():
        up, down = (share_left(law, theta, SHAPES[law] | {name: value + s}) for s in (step, -step))
        assert_allclose(by_shape[name], (up - down) / (2 * step), rtol=0, atol=1e-7)
    assert np.all((left > 0.0) & (left < 1.0))


@pytest.mark.parametrize("law", CEMENTATION_LAWS)
def test_nothing_is_gone_at_the_start(law):
    assert_allclose(share_left(law, 0.0, SHAPES[law]), 1.0, rtol=0, atol=1e-14)


@pytest.mark.parametrize(("back", "fade"), [(0.05, 0.1), (0.2, 0.5), (1e-3, 2.0), (2.0, 0.01)])
def test_fading_law_against_an_integrator(back, fade):
    theta = np.array([0.1, 1.0, 4.0, 15.0])
    found = solve_ivp(
        lambda t, c: -c * np.exp(-fade * t) + back * (1 - c), (0, 15), [1.0], t_eval=theta,
        rtol=1e-11, atol=1e-13,
    )  # fmt: skip
    left = share_left("back_dissolution+fade", theta, {"back": back, "fade": fade})
    assert_allclose(left, found.y[0], rtol=0, atol=1e-9)


def test_larger_laws_become_the_smaller_ones():
    theta = np.linspace(0.0, 5.0, 11)
    first = share_left("first_order", theta)
    assert_allclose(share_left("two_stage", theta, {"break": 0.5, "ratio": 1.0}), first, rtol=1e-14)
    assert_allclose(share_left("growing_area", theta, {"power": 1.0}), first, rtol=1e-12)
    assert_allclose(share_left("back_dissolution", theta, {"back": 0.0}), first, rtol=1e-12)
    floor = share_left("back_dissolution", theta, {"back": 0.1})
    fading = share_left("back_dissolution+fade", theta, {"back": 0.1, "fade": 1e-9})
    assert_allclose(fading, floor, rtol=0, atol=1e-8)
    assert_allclose(share_left("back_dissolution", 100.0, {"back": 0.1}), 0.1 / 1.1, rtol=1e-12)


@pytest.mark.parametrize("law", CEMENTATION_LAWS)
def test_contact_is_the_inverse(law):
    shapes = {name: np.asarray(value) for name, value in SHAPES[law].items()}
    rate = CementationLaw(law, np.asarray(3.0), "1/h", shapes)
    for share in (0.8, 0.3, 0.15):
        hours = float(rate.contact_h(share))
        assert_allclose(rate.left([hours])[0], share, rtol=1e-9)


def test_longer_contact_can_hurt():
    shapes = {"back": np.asarray(0.05), "fade": np.asarray(0.4)}
    rate = CementationLaw("back_dissolution+fade", np.asarray(2.0), "1/h", shapes)
    hours, least = rate.best_contact_h()
    assert_allclose(rate.left([float(hours)])[0], least, rtol=1e-9)
    assert np.all(rate.left([0.5 * float(hours), 2.0 * float(hours)]) > least)
    assert np.isinf(rate.contact_h(0.5 * float(least)))
    assert np.isinf(CementationLaw("first_order", np.asarray(1.0)).best_contact_h()[0])


@pytest.mark.parametrize("law", CEMENTATION_LAWS)
@pytest.mark.parametrize("stated", [True, False])
def test_known_constants_come_back(law, stated):
    """Exact data, poor starts by the fit itself."""
    left = 1.7 * share_left(law, 2.3 * TIMES, SHAPES[law])
    errors = {"errors": 0.02, "errors_are": "relative"} if stated else {}
    fit = fit_cementation(TIMES, left, law, **errors)
    assert fit.converged
    assert_allclose(fit.law.k, 2.3, rtol=1e-5)
    for name, value in SHAPES[law].items():
        assert_allclose(fit.law.shapes[name], value, rtol=1e-4)
    assert_allclose(fit.parameter("start test").value, 1.7, rtol=1e-6)


def test_a_break_is_reported_as_the_share_removed_there():
    left = share_left("two_stage", 2.0 * TIMES, SHAPES["two_stage"])
    fit = fit_cementation(TIMES, left, "two_stage", start=1.0)
    assert_allclose(fit.parameter("removed_at_break").value, 1 - np.exp(-0.8), rtol=1e-5)
    assert_allclose(fit.parameter("ratio").value, 2.5, rtol=1e-5)


def test_published_form_of_a_growing_area():
    """ln(C0/C) = c t^(3/2), de Oliveira et al. 2019: c is k to the power."""
    minutes = np.array([0.5, 1.0, 2.0, 3.0, 4.0])
    fit = fit_cementation(minutes / 60, np.exp(-0.35 * minutes**1.5), "growing_area", start=1.0)
    assert_allclose(fit.parameter("power").value, 1.5, rtol=1e-6)
    assert_allclose((fit.law.k / 60) ** 1.5, 0.35, rtol=1e-6)


def test_intervals_cover_the_truth():
    """First order with 3 % noise: 95 % intervals cover about 95 % of 400 tests."""
    generator = np.random.default_rng(17)
    times, inside = TIMES[1:8], 0
    clean = np.exp(-2.0 * times)
    for _ in range(400):
        noisy = clean * (1.0 + 0.03 * generator.standard_normal(times.size))
        sd = 0.03 * clean
        k = fit_cementation(times, noisy, start=1.0, errors=sd).parameter("k")
        inside += k.low <= 2.0 <= k.high
    assert 0.91 <= inside / 400 <= 0.985


def test_profile_intervals_agree_where_the_law_is_nearly_straight():
    generator = np.random.default_rng(4)
    left = np.exp(-2.0 * TIMES) * (1 + 0.02 * generator.standard_normal(TIMES.size))
    same = {"errors": 0.02, "errors_are": "relative"}
    lines = fit_cementation(TIMES, left, **same).parameter("k")
    profile = fit_cementation(TIMES, left, intervals="profile", **same).parameter("k")
    assert_allclose((profile.low, profile.high), (lines.low, lines.high), rtol=5e-3)
    assert profile.method == "profile likelihood"


def several_tests(noise=0.02):
    conditions = [(288.15, 300), (298.15, 300), (318.15, 300), (298.15, 150), (298.15, 600)]
    tests = []
    for i, (kelvin, rpm) in enumerate(conditions):
        generator = np.random.default_rng(100 + i)
        k = 1e-5 * np.exp(-15_050 / 8.314462618 * (1 / kelvin - 1 / 298.15)) * (rpm / 300) ** 0.7
        area = 30.0 + 10.0 * i
        left = 1.2 * np.exp(-3600 * k * area * TIMES[:8])
        left = left * (1 + noise * generator.standard_normal(left.size))
        tests.append(
            cementation_test(
                TIMES[:8], left, errors=max(noise, 0.01), errors_are="relative", name=f"T{i}",
                temperature_K=kelvin, stirring_rpm=rpm, area_m2_per_m3=area,
            )
        )  # fmt: skip
    return tests


def test_temperature_stirring_and_area_together():
    exact = fit_cementation_tests(several_tests(1e-12), reference_temperature_K=298.15)
    assert_allclose(exact.parameter("activation_energy").value, 15.05, rtol=1e-4)
    assert_allclose(exact.parameter("stirring_power").value, 0.7, rtol=1e-4)
    assert exact.parameter("k").unit == "m/s"
    fit = fit_cementation_tests(several_tests(), reference_temperature_K=298.15)
    energy, power = fit.parameter("activation_energy"), fit.parameter("stirring_power")
    assert energy.low < 15.05 < energy.high
    assert power.low < 0.7 < power.high
    assert "as transport through liquid has it" in fit.control[0]
    assert "as transfer to a moving surface has it" in fit.control[1]
    assert_allclose(
        fit.law.rate_per_h(318.15, 300, 40.0) / fit.law.rate_per_h(298.15, 300, 40.0),
        np.exp(energy.value * 1e3 / 8.314462618 * (1 / 298.15 - 1 / 318.15)), rtol=1e-9,
    )  # fmt: skip


def test_one_temperature_and_one_speed_say_nothing_of_the_control():
    fit = fit_cementation(TIMES, np.exp(-TIMES), start=1.0)
    assert "one temperature" in fit.control[0]
    assert "cannot be excluded" in fit.control[1]


def test_a_surface_step_is_told_from_transport():
    tests = []
    for i, kelvin in enumerate((298.15, 313.15, 328.15)):
        k = np.exp(-60_000 / 8.314462618 * (1 / kelvin - 1 / 298.15))
        tests.append(cementation_test(TIMES, np.exp(-k * TIMES), errors=0.01, name=f"T{i}",
                                      temperature_K=kelvin))  # fmt: skip
    assert "a surface step takes part" in fit_cementation_tests(tests).control[0]


def test_limits_enter_as_limits():
    clean = 2.0 * np.exp(-3.0 * TIMES)
    limit = 0.02
    below = clean < limit
    values = np.where(below, limit, clean)
    test = cementation_test(TIMES, values, errors=0.01, bound=np.where(below, -1, 0))
    fit = fit_cementation_tests([test])
    assert below.sum() >= 1
    assert_allclose(fit.law.k, 3.0, rtol=2e-3)
    taken_as_values = fit_cementation(TIMES, values, errors=0.01)
    assert abs(taken_as_values.law.k - 3.0) > abs(fit.law.k - 3.0)
    assert [r.bound for r in fit.residuals].count(-1) == below.sum()


def test_draws_carry_the_covariance_and_the_seed():
    fit = fit_cementation_tests(several_tests())
    drawn = fit.draw(4000, 3)
    error = fit.parameter("k").standard_error
    assert_allclose(drawn.k.std(), error, rtol=0.06)
    assert drawn.left([0.5, 1.0], area_m2_per_m3=40.0).shape == (4000, 2)
    assert np.array_equal(fit.draw(5, 3).k, fit.draw(5, 3).k)


def noisy(law, seed):
    generator = np.random.default_rng(seed)
    times = np.linspace(0.0, 3.0, 16)
    left = 2.0 * share_left(law, 2.0 * times, SHAPES[law])
    return times, left * (1 + 0.01 * generator.standard_normal(times.size))


@pytest.mark.parametrize("law", ["two_stage", "growing_area", "back_dissolution"])
def test_ranking_finds_the_law_behind_clear_data(law):
    times, left = noisy(law, 5)
    ranking = rank_cementation(times, left, errors=0.01, errors_are="relative")
    assert ranking.indistinguishable[0] == law
    assert ranking.best.law_name == law
    assert ranking.table().caption == ranking.verdict


@pytest.mark.slow
def test_ranking_names_no_larger_law_than_the_readings_ask_for():
    named = 0
    for seed in range(20):
        times, left = noisy("first_order", seed)
        ranking = rank_cementation(times, left, errors=0.01, errors_are="relative")
        named += ranking.indistinguishable == ("first_order",)
    assert named >= 17


def test_ranking_of_all_tests_together():
    ranking = rank_cementation_tests(several_tests(), ["first_order", "growing_area"])
    assert ranking.indistinguishable == ("first_order",)


def test_what_no_law_describes_is_said():
    times = np.linspace(0.0, 2.0, 12)
    wild = np.exp(-times) * (1 + 0.5 * np.sin(9 * times))
    ranking = rank_cementation(times, wild, errors=0.01)
    assert ranking.verdict.startswith("None of the laws describes")


REFUSED = [
    (lambda: fit_cementation([0.1], [0.5]), "one reading and no start"),
    (lambda: fit_cementation([0.2, 0.1], [0.5, 0.4]), "times that do not rise"),
    (lambda: fit_cementation([0.1, 0.2], [0.5, -0.4]), "is it a code for below limit"),
    (lambda: fit_cementation([0.1, 0.2], [0.5]), "one value for each time"),
    (lambda: fit_cementation([0.1, np.nan], [0.5, 0.4]), "not a finite number"),
    (lambda: fit_cementation([0.1, 0.2], [0.5, 0.4], "first order law"), "unknown cementation law"),
    (lambda: fit_cementation([0.1, 0.2], [0.5, 0.4], "two_stage"), "quantities for 2 readings"),
    (lambda: fit_cementation([0.1, 0.2], [0.5, 0.4], errors=0.0), "sd: 0"),
    (lambda: fit_cementation([0.1, 0.2], [0.5, 0.4], errors=0.1, errors_are="x"), "errors_are"),
    (lambda: fit_cementation([0.1, 0.2], [0.5, 0.4], intervals="exact"), "intervals"),
    (lambda: fit_cementation([0.1, 0.2], [0.5, 0.4], start=-1.0), "start: -1"),
    (lambda: cementation_test([0.1, 0.2], [0.5, 0.4], bound=[0, -1]), "no precision"),
    (lambda: fit_cementation_tests([]), "no test"),
    (lambda: fit_cementation_tests([cementation_test(TIMES, np.exp(-TIMES))] * 2), "two tests"),
    (lambda: fit_cementation_tests(
        [cementation_test(TIMES, np.exp(-TIMES), name="a", area_m2_per_m3=5.0),
         cementation_test(TIMES, np.exp(-TIMES), name="b")]), "area of some tests only"),
    (lambda: CementationLaw("first_order", np.ones(()), "m/s").left([1.0]), "no area"),
    (lambda: CementationLaw("first_order", np.ones(())).contact_h(1.0), "above 0 and below 1"),
    (lambda: fit_cementation(TIMES, np.exp(-TIMES)).parameter("kk"), "unknown parameter"),
]  # fmt: skip


@pytest.mark.parametrize(("call", "message"), REFUSED)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
