"""Intervals by every method: named, one-sided at bounds, absent with a reason."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.inference import Bootstrap
from leachkin.kinetics import (
    INTERVAL_METHODS,
    Bottle,
    RateLaw,
    Reference,
    Resistance,
    bootstrap_fit,
    bootstrap_parameter,
    bootstrap_tests,
    fit_curve,
    fit_tests,
    fit_with_intervals,
    intervals_differ,
    posterior_tests,
    simulate_observed,
)
from leachkin.kinetics.resampled import refit_counted, rows_by_test, telling_tests
from leachkin.testwork import SizeDistribution

HOURS = np.array([2, 6, 12, 24, 48, 96, 168, 240.0])
REFERENCE = Reference(298.15, 20.0, 2.0)
SHORT = np.array([1.0, 2.0, 4.0, 8.0, 16.0])
NEEDS_EMCEE = "emcee is not installed: pip install 'leachkin[posterior]'"


def bottles(hours=HOURS, repeats=2, celsius=(25, 45), ultimate=(0.9, 0.8)):
    """Two sizes by two temperatures, in repeat, under chemical control."""
    law = RateLaw(
        "chemical", (Resistance("chemical", np.log(30.0), 50.0),), REFERENCE, [2.0, 6.0], ultimate
    )
    tests = [
        Bottle(f"{mm}mm{c}C{k}", SizeDistribution.single(mm), 273.15 + c, hours, 20.0)
        for mm in (2.0, 6.0)
        for c in celsius
        for k in range(repeats)
    ]
    return simulate_observed(law, tests, head_kg_per_t=7.0, seed=11)


@pytest.fixture(scope="module")
def tests():
    return bottles()


@pytest.fixture(scope="module")
def fit(tests):
    return fit_tests(tests, "chemical", reference=REFERENCE)


@pytest.fixture(scope="module")
def unbent():
    """A curve that is nearly straight: its ultimate extraction may be anything up to 1."""
    E = 0.8 * (1 - np.exp(-0.012 * SHORT)) + 0.002 * np.array([1, -1, 1, 1, -1])
    return fit_curve(SHORT, E, "first_order", errors=0.004)


@pytest.fixture(scope="module")
def by_posterior(fit):
    pytest.importorskip("emcee", reason=NEEDS_EMCEE)
    return fit_with_intervals(fit, "posterior", seed=2, most_steps=2500)


def by(fit, method, **more):
    if method == "posterior":
        pytest.importorskip("emcee", reason=NEEDS_EMCEE)
    return fit_with_intervals(fit, method, seed=2, **more)


@pytest.mark.parametrize("method", INTERVAL_METHODS)
def test_each_method_is_named_with_its_intervals_and_agrees_where_the_tests_are_many(
    fit, by_posterior, method
):
    found = by_posterior if method == "posterior" else by(fit, method)
    words = {"profile": "profile likelihood", "bootstrap": "bootstrap of 8 groups"}
    for name in ("tau_chemical", "activation_energy_chemical", "ultimate_2_mm"):
        p, line = found.parameter(name), fit.parameter(name)
        assert p.method.startswith(words.get(method, method))
        assert p.low < p.value < p.high and p.level == 0.95
        assert p.value == line.value
        ratio = (p.high - p.low) / (line.high - line.low)
        # a few bottles drawn again tell less surely how wide they scatter
        assert 0.3 < ratio < 2.0 if method == "bootstrap" else 0.8 < ratio < 1.25
    assert found.parameter("size_exponent_chemical") == fit.parameter("size_exponent_chemical")
    assert_allclose(found.vector, fit.vector, rtol=0, atol=0)


def test_an_unknown_method_is_refused_with_the_nearest_name(fit):
    with pytest.raises(InputProblems, match="profile"):
        fit_with_intervals(fit, "profil")


@pytest.mark.parametrize("method", ["linearised", "profile", "posterior"])
def test_an_ultimate_extraction_that_was_not_reached_has_a_low_end_only(unbent, method):
    found = by(unbent, method, most_steps=3000)
    p = found.parameter("ultimate")
    assert p.high is None and 0.0 < p.low < p.value
    assert p.method.startswith("one-sided")
    assert "run longer" in p.why_no_interval
    assert found.parameter("k").low is not None


def test_methods_that_tell_something_else_say_so(unbent):
    line, profile = by(unbent, "linearised"), by(unbent, "profile")
    assert line.parameter("k").method.startswith("linearised")
    low, high = profile.parameter("k").low, profile.parameter("k").high
    assert line.parameter("k").remark == f"profile differs: {low:.4g} to {high:.4g}"
    low, high = line.parameter("k").low, line.parameter("k").high
    assert profile.parameter("k").remark == f"differs from linearised: {low:.4g} to {high:.4g}"
    records = {r["parameter"]: r for r in profile.parameter_table().to_records()}
    assert "differs from linearised" in records["k"]["why_no_interval"]
    assert records["k"]["method"] == "profile likelihood"


def test_intervals_differ_by_a_fifth_of_the_half_width_or_by_an_end(fit):
    line = fit.parameter("activation_energy_chemical")
    half = 0.5 * (line.high - line.low)
    assert not intervals_differ(fit, line, replace(line, high=line.high + 0.19 * half))
    assert intervals_differ(fit, line, replace(line, high=line.high + 0.21 * half))
    assert intervals_differ(fit, line, replace(line, low=None))
    assert not intervals_differ(fit, line, line)
    # on the fitted scale: 21 % of the half width of ln tau
    tau = fit.parameter("tau_chemical")
    factor = (tau.high / tau.low) ** 0.5
    assert intervals_differ(fit, tau, replace(tau, high=tau.high * factor**0.21))
    assert not intervals_differ(fit, tau, replace(tau, high=tau.high * factor**0.19))


def test_a_fit_that_did_not_converge_comes_back_as_it_is(fit):
    lost = replace(fit, converged=False)
    assert fit_with_intervals(lost, "profile") is lost


def test_bottles_that_count_twice_are_bottles_drawn_twice(tests, fit):
    """The refit with counts against a fit of copies under names of their own."""
    picked = (0, 0, 2, 3, 4, 4, 4, 7)
    copies = [replace(tests[i], test=f"{i} {k}") for k, i in enumerate(picked)]
    outside = fit_tests(copies, "chemical", reference=REFERENCE)
    counts = np.bincount(picked, minlength=8)
    found = refit_counted(fit, rows_by_test(fit.design), counts)
    assert set(found) == {n for n in fit.names if not n.startswith("head_")}
    for name, value in found.items():
        assert value == pytest.approx(outside.parameter(name).value, rel=1e-6)


def test_a_resample_does_not_give_what_it_lacks(fit):
    rows = rows_by_test(fit.design)
    small_only = refit_counted(fit, rows, np.array([2, 2, 2, 2, 0, 0, 0, 0]))
    assert "ultimate_6_mm" not in small_only and "tau_chemical" in small_only
    warm_only = refit_counted(fit, rows, np.array([0, 0, 2, 2, 0, 0, 2, 2]))
    assert "tau_chemical" not in warm_only, "time and energy stand for each other"
    assert "activation_energy_chemical" not in warm_only and "ultimate_2_mm" in warm_only


def test_bootstrap_of_tests_is_that_of_their_fit(tests, fit):
    by_tests = bootstrap_tests(tests, "chemical", n=6, seed=4, reference=REFERENCE)
    told = []
    by_fit = bootstrap_fit(fit, n=6, seed=4, progress=lambda *a: told.append(a))
    assert_allclose(by_tests.draws, by_fit.draws, rtol=1e-9)
    assert told == [(k, 6) for k in range(1, 7)]
    assert bootstrap_fit(fit, n=6, seed=5).draws.shape == (6, 4)


def test_what_few_bottles_tell_has_no_bootstrap_interval():
    three = bottles(repeats=1, celsius=(25, 35, 45))
    fit = fit_tests(three, "chemical", reference=REFERENCE)
    assert (telling_tests(fit, "ultimate_2_mm"), telling_tests(fit, "tau_chemical")) == (3, 6)
    found = fit_with_intervals(fit, "bootstrap", seed=1, resamples=220)
    p = found.parameter("ultimate_2_mm")
    assert (p.low, p.high, p.method) == (None, None, "none")
    assert "3 tests tell it: 4 or more" in p.why_no_interval
    assert "differs from linearised" in p.remark
    assert found.parameter("tau_chemical").low is not None


def test_too_few_resamples_give_no_interval(fit):
    found = fit_with_intervals(fit, "bootstrap", seed=1, resamples=20)
    p = found.parameter("tau_chemical")
    assert p.low is None and "20 resamples gave it, 200 are needed" in p.why_no_interval
    assert any("20 of 20 resamples converged" in w for w in found.warnings)


def test_resamples_that_pile_up_at_a_bound_leave_that_side_open(fit):
    name = "ultimate_2_mm"
    generator = np.random.default_rng(1)
    column = np.clip(0.97 + 0.02 * generator.standard_normal(400), 0.005, 0.99995)
    drawn = Bootstrap((name,), np.array([0.97]), column[:, None], 8, 400)
    p = bootstrap_parameter(fit, drawn, name)
    assert p.high is None and p.method.startswith("one-sided, bootstrap")
    assert p.low == pytest.approx(np.quantile(column, 0.05))
    assert "of the resamples end at the end of its range" in p.why_no_interval


@pytest.mark.slow
def test_drawing_the_same_readings_again_does_not_close_what_the_fit_found_open():
    hours = np.array([0.25, 0.5, 0.75, 1.0])
    tests = bottles(hours, celsius=(25, 30), ultimate=(0.5, 0.5))
    fit = fit_tests(tests, "chemical", reference=REFERENCE, ultimate="one")
    assert fit.parameter("ultimate").high is None
    found = fit_with_intervals(fit, "bootstrap", seed=1, resamples=220).parameter("ultimate")
    assert found.high is None and 0.1 < found.low < fit.parameter("ultimate").value
    assert "run longer" in found.why_no_interval


def test_resamples_that_all_lie_at_a_bound_give_no_interval(fit):
    name = "ultimate_2_mm"
    drawn = Bootstrap((name,), np.array([0.97]), np.full((400, 1), 0.99995), 8, 400)
    p = bootstrap_parameter(fit, drawn, name)
    assert (p.low, p.high, p.method) == (None, None, "none")
    assert "100 % of the resamples end at the end of its range" in p.why_no_interval


@pytest.mark.parametrize("method", ["linearised", "profile", "posterior"])
def test_what_the_data_do_not_hold_is_said_by_every_method(method):
    """One temperature and a free energy: time and energy only together."""
    tests = bottles(celsius=(40,))
    fit = fit_tests(
        tests, "chemical", free=["activation_energy_chemical"], reference=REFERENCE, ultimate=0.85
    )
    p = by(fit, method, most_steps=1000).parameter("activation_energy_chemical")
    assert (p.low, p.high) == (None, None)
    assert p.method == "none"
    assert "together with tau_chemical" in p.why_no_interval or "whole range" in p.why_no_interval


@pytest.mark.parametrize("method", ["linearised", "profile", "posterior"])
def test_where_the_tests_tell_nothing_the_interval_is_that_of_the_prior(method):
    """A normal prior of 50 +- 4 kJ/mol and one temperature at the reference."""
    tests = bottles(celsius=(25,), repeats=1)
    fit = fit_tests(
        tests, "chemical", reference=REFERENCE, priors={"activation_energy_chemical": (50.0, 4.0)}
    )
    p = by(fit, method).parameter("activation_energy_chemical")
    wide = 1.959964 * 4.0
    close = 1.2 if method == "posterior" else 1e-3 * wide
    assert_allclose([p.low, p.high], [50.0 - wide, 50.0 + wide], atol=close)
    assert p.method.endswith("with a prior")


def test_draws_of_the_posterior_serve_as_those_of_the_fit(fit, by_posterior):
    law = by_posterior.draw(300, 7)
    plain = fit.draw(300, 7)
    assert type(law) is type(plain) and law.name == plain.name
    assert law.ultimate.shape == plain.ultimate.shape == (300, 2)
    band = np.quantile(by_posterior.predict(HOURS, draws=300, seed=7), [0.025, 0.975], axis=0)
    usual = np.quantile(fit.predict(HOURS, draws=300, seed=7), [0.025, 0.975], axis=0)
    assert_allclose(band, usual, atol=0.02)
    assert np.ptp(band, axis=0)[2] > 0.005
    assert any("autocorrelation times" in w for w in by_posterior.warnings)


def test_the_fast_rate_of_two_fractions_has_an_interval_of_its_own():
    pytest.importorskip("emcee", reason=NEEDS_EMCEE)
    hours = np.array([0.5, 1, 2, 4, 8, 16, 32, 64, 128.0])
    E = 0.9 * (0.4 * (1 - np.exp(-0.9 * hours)) + 0.6 * (1 - np.exp(-0.02 * hours)))
    fit = fit_curve(hours, E, "two_rate", errors=0.004)
    posterior = posterior_tests(fit, seed=3, most_steps=6000)
    p = posterior.parameter("k_fast")
    line = fit.parameter("k_fast")
    assert p.method.startswith("posterior")
    assert_allclose([p.low, p.high], [line.low, line.high], rtol=0.1)
    with pytest.raises(InputProblems, match="k_fast"):
        posterior.parameter("k_fas")


@pytest.mark.parametrize("method", ["linearised", "profile", "posterior"])
def test_an_ultimate_extraction_at_the_end_of_its_range_is_one_sided(method):
    """A curve that ends a little above all of the metal: the best ultimate extraction is all."""
    hours = np.array([2.0, 4.0, 8.0, 12.0, 20.0, 30.0, 40.0])
    E = (
        1
        - (1 - np.minimum(hours / 20.0, 1.0)) ** 3
        + 0.01 * np.array([1, -1, 1, -1, 1.5, 1.5, 1.5])
    )
    fit = fit_curve(hours, E, "chemical", errors=0.01)
    assert fit.estimate.states[fit.names.index("ultimate")] == "at its high bound"
    p = by(fit, method, most_steps=2000).parameter("ultimate")
    assert p.high is None and 0.98 < p.low < 1.0
    assert p.method.startswith("one-sided")
    assert "end of its range" in p.why_no_interval
