"""What the pictures of a fit need: straightened values, leverage, times of single tests."""

import csv
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import statsmodels.api as sm
from numpy.testing import assert_allclose

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Bottle,
    Noise,
    RateLaw,
    Reference,
    Resistance,
    arrhenius_two_step,
    fit_tests,
    simulate_observed,
)
from leachkin.kinetics.diagnostics import kinetic_diagnostics
from leachkin.kinetics.straightened import (
    measured_extraction,
    slope_through_origin,
    straightened,
    straightened_test,
)
from leachkin.kinetics.time_factors import time_factors, total_time
from leachkin.testwork import SizeDistribution

UO3 = Path(__file__).parents[2] / "example_runs" / "published" / "uo3_reduction.csv"
HOURS = np.array([1, 2, 5, 10, 20, 40, 80.0])
REFERENCE = Reference(298.15, 20.0, 2.0)
TINY = Noise(1e-7, 1e-7, 1e-7, 1e-7, 1e-7)


def law_of(*resistances, ultimate=(0.9, 0.8)):
    name = "+".join(r.kind for r in resistances)
    return RateLaw(name, resistances, REFERENCE, [2.0, 6.0], list(ultimate))


CHEMICAL = Resistance("chemical", np.log(40.0), 50.0)
ASH = Resistance("ash_layer", np.log(40.0), 20.0, size_exponent=2.0)


def bottles(law, sizes=(2.0, 6.0), celsius=(25, 40, 55), strengths=(20.0,), noise=None, seed=8):
    tests = [
        Bottle(f"{mm}mm {c}C {g}", SizeDistribution.single(mm), 273.15 + c, HOURS, g)
        for mm in sizes
        for c in celsius
        for g in strengths
    ]
    return simulate_observed(law, tests, head_kg_per_t=7.0, seed=seed, noise=noise)


@pytest.fixture(scope="module")
def tests():
    return bottles(law_of(CHEMICAL))


@pytest.fixture(scope="module")
def fit(tests):
    return fit_tests(tests, "chemical", reference=REFERENCE)


@pytest.fixture(scope="module")
def found(tests, fit):
    return kinetic_diagnostics(fit, tests, arrhenius_two_step(tests, "chemical"))


def test_straightened_values_are_those_of_the_formulas():
    """Film X, ash layer 1 - 3(1-X)^(2/3) + 2(1-X), chemical 1 - (1-X)^(1/3) [levenspiel1999]."""
    X = np.array([0.0, 0.271, 0.488, 0.784, 0.875, 0.973, 0.999])
    assert_allclose(straightened(X, "film"), X, rtol=1e-14)
    assert_allclose(straightened(X, "chemical"), 1 - np.cbrt(1 - X), rtol=1e-12, atol=1e-15)
    ash = 1 - 3 * np.cbrt(1 - X) ** 2 + 2 * (1 - X)
    assert_allclose(straightened(X, "ash_layer"), ash, rtol=1e-9, atol=1e-14)
    # X = 1 - 0.9^3 and so on: round numbers
    assert_allclose(straightened([0.271, 0.488, 0.973], "chemical"), [0.1, 0.2, 0.7], rtol=1e-12)


def test_the_straightened_line_of_a_published_curve():
    """UO3 reduction, chemical control: 0.995 h by the straightened line [levenspiel1999]."""
    with UO3.open(encoding="utf-8") as file:
        rows = list(csv.reader(file))[1:]
    time, X = np.array(rows, dtype=float).T
    assert 1 / slope_through_origin(time, straightened(X, "chemical")) == pytest.approx(
        0.995, abs=0.0005
    )


def test_where_no_straight_line_can_be_drawn_there_is_no_value():
    assert np.isnan(straightened([-0.01, 1.0, 1.2], "film")).all()
    assert np.isnan(slope_through_origin([0.0, 1.0], [0.0, 0.3]))
    assert np.isnan(slope_through_origin([1.0, 2.0], [np.nan, 0.3]))
    with pytest.raises(InputProblems, match="film, ash_layer, chemical"):
        straightened([0.5], "avrami")


def test_measured_extraction_undoes_aliquots_and_make_up():
    law = law_of(CHEMICAL)
    (test,) = bottles(law, sizes=(2.0,), celsius=(40,), noise=TINY)
    truth = law.extraction(HOURS, test.sizes, test.temperature_K, 20.0)
    time_h, E = measured_extraction(test, 7.0, np.zeros(HOURS.size))
    assert_allclose(time_h, HOURS)
    assert_allclose(E, truth, rtol=1e-5)
    # a reading that was not assayed: the fitted extraction stands in, the others keep theirs
    kept = [i for i in range(test.value.size) if test.row_time_h[i] != 10.0]
    thinner = replace(
        test,
        **{n: getattr(test, n)[kept] for n in ("operator", "offset", "brought", "value", "sd")},
        bound=test.bound[kept],
        row_kind=tuple(test.row_kind[i] for i in kept),
        row_time_h=test.row_time_h[kept],
    )
    time_h, E = measured_extraction(thinner, 7.0, truth)
    assert_allclose(E, truth[HOURS != 10.0], rtol=1e-5)
    # a limit is no value
    limit = replace(test, bound=np.array([-1, *test.bound[1:]]))
    assert measured_extraction(limit, 7.0, truth)[0][0] == HOURS[1]


def test_the_right_law_is_straight_and_the_plateau_is_left_out():
    law = law_of(CHEMICAL)
    (test,) = bottles(law, sizes=(2.0,), celsius=(40,), noise=TINY)
    truth = law.extraction(HOURS, test.sizes, test.temperature_K, 20.0)
    found = straightened_test(test, 7.0, truth, np.full(HOURS.size, 0.9))
    tau = float(total_time(law, np.array([2.0]), test.temperature_K)[0])
    rising = found.conversion < 0.97
    assert 3 <= rising.sum() < HOURS.size
    assert_allclose(found.g["chemical"][rising], HOURS[rising] / tau, rtol=1e-4)
    assert np.isnan(found.g["chemical"][~rising]).all()
    assert found.slope_per_h["chemical"] == pytest.approx(1 / tau, rel=1e-4)


def test_one_test_that_is_slower_gets_its_factor():
    fit = fit_tests(bottles(law_of(CHEMICAL), noise=TINY), "chemical", reference=REFERENCE)
    slow = law_of(replace(CHEMICAL, ln_tau=np.log(40.0 * 1.3)))
    tests = bottles(slow, noise=TINY)
    for one in time_factors(fit, tests):
        assert one.factor == pytest.approx(1.3, rel=1e-5)
        assert one.low <= one.factor <= one.high


def test_the_interval_of_a_factor_is_that_of_a_fit_of_its_test_alone(tests, fit):
    factors = time_factors(fit, tests)
    for test, one in zip(tests, factors, strict=True):
        values = {p.name: p.value for p in fit.parameters}
        name = "activation_energy_chemical"
        tau, held = values["tau_chemical"], {name: values[name]}
        ultimate = values[f"ultimate_{one.size_mm:g}_mm"]
        alone = fit_tests([test], "chemical", reference=REFERENCE, fixed=held, ultimate=ultimate)
        p = alone.parameter("tau_chemical")
        assert one.factor == pytest.approx(p.value / tau, rel=1e-5)
        widening = alone.estimate.widening  # by its own scatter; the factor goes by that of all
        assert np.log(one.high / one.low) == pytest.approx(
            np.log(p.high / p.low) / widening * fit.estimate.widening, rel=0.02
        )


def test_a_test_that_was_over_before_its_first_reading_has_no_factor(fit):
    name = "2.0mm 55C 20.0"
    (late,) = simulate_observed(
        law_of(CHEMICAL),
        [Bottle(name, SizeDistribution.single(2.0), 328.15, np.array([300.0, 400.0]), 20.0)],
        head_kg_per_t=7.0,
        seed=1,
    )
    (one,) = time_factors(fit, [late])
    assert one.factor is None and "do not tell its time" in one.why
    with pytest.raises(InputProblems, match="test 'late'"):
        time_factors(fit, [replace(late, test="late")])


@pytest.mark.parametrize(("true", "power"), [(CHEMICAL, -1.0), (ASH, -2.0)])
def test_rates_by_size_have_the_slope_of_the_truth_even_where_the_fit_has_another(true, power):
    tests = bottles(law_of(true, ultimate=(0.85, 0.85)), celsius=(25,), noise=TINY)
    wrong = {f"size_exponent_{true.kind}": 1.5}
    fit = fit_tests(tests, true.kind, reference=REFERENCE, fixed=wrong, ultimate=0.85)
    plot = kinetic_diagnostics(fit, tests).by_size
    slope = np.diff(np.log(plot.rate)) / np.diff(np.log(plot.at))
    assert_allclose(slope, power, rtol=1e-3)
    line = np.diff(np.log(plot.line_rate)) / np.diff(np.log(plot.line_at))
    assert_allclose(line, -1.5, rtol=1e-9)
    assert plot.line_at[0] < 2.0 and plot.line_at[-1] > 6.0
    assert plot.left_out == ()


def test_rates_by_strength_have_the_true_order():
    tests = bottles(
        law_of(replace(CHEMICAL, order=0.6)), (2.0,), (25,), strengths=(5.0, 20.0, 60.0), noise=TINY
    )
    fit = fit_tests(tests, "chemical", reference=REFERENCE, ultimate="one", reagent_order=1.0)
    found = kinetic_diagnostics(fit, tests)
    slope = np.diff(np.log(found.by_strength.rate)) / np.diff(np.log(found.by_strength.at))
    assert_allclose(slope, 0.6, rtol=0.02)
    assert found.by_size is None


def test_leverage_of_the_rows_sums_to_the_quantities_and_counts_the_heads(tests, fit, found):
    rows = found.rows
    assert rows.leverage.sum() == pytest.approx(len(fit.names))
    assert rows.mean_leverage == pytest.approx(len(fit.names) / rows.leverage.size)
    assert rows.kind.count("head") == len(tests) and rows.kind.count("tail") == len(tests)
    assert np.isnan(rows.time_h[-1]) and np.isnan(rows.extraction[-1])
    outside = sm.OLS(np.zeros(rows.leverage.size), fit.estimate.jacobian).fit().get_influence()
    assert_allclose(rows.leverage, outside.hat_matrix_diag, rtol=1e-6)
    assert 0.6 < np.nanstd(rows.standardised) < 1.5
    assert rows.test[: len(tests[0].row_kind)] == (tests[0].test,) * len(tests[0].row_kind)
    assert_allclose(rows.extraction[: HOURS.size], fit.design.extractions(fit.vector)[0])


def test_a_limit_has_no_standardised_residual(tests):
    limited = (replace(tests[0], bound=np.array([-1, *tests[0].bound[1:]])), *tests[1:])
    fit = fit_tests(limited, "chemical", reference=REFERENCE)
    rows = kinetic_diagnostics(fit, limited).rows
    assert np.isnan(rows.standardised[0]) and np.isfinite(rows.standardised[1:5]).all()


def test_correlations_are_those_of_the_parameters_without_heads(fit, found):
    assert found.correlated == tuple(n for n in fit.names if not n.startswith("head_"))
    i, j = fit.names.index("tau_chemical"), fit.names.index("activation_energy_chemical")
    expected = fit.covariance[i, j] / np.sqrt(fit.covariance[i, i] * fit.covariance[j, j])
    place = [found.correlated.index(fit.names[k]) for k in (i, j)]
    assert found.correlation[place[0], place[1]] == pytest.approx(expected)


def test_three_temperatures_leave_one_degree_of_freedom_and_a_factor_of_12_7(fit, found):
    (panel,) = found.arrhenius
    assert panel.line.degrees_of_freedom == 1
    assert panel.line_t == pytest.approx(12.706, abs=5e-4)  # printed tables of Student's t
    assert panel.shared_multiplier == pytest.approx(1.96, abs=5e-3)
    assert panel.shared == fit.parameter("activation_energy_chemical")
    slope = np.polyfit(1 / panel.grid_K, panel.shared_ln_rate, 1)[0]
    assert -slope * GAS_CONSTANT_J_per_mol_K / 1000 == pytest.approx(panel.shared.value)
    at = np.interp(298.15, panel.grid_K, panel.shared_ln_rate)
    assert at == pytest.approx(-np.log(fit.parameter("tau_chemical").value), abs=1e-3)
    assert (panel.ln_rate_sd > 0).all()


def test_an_empirical_law_has_its_pictures_too(tests):
    fit = fit_tests(tests, "first_order", reference=REFERENCE)
    found = kinetic_diagnostics(fit, tests, arrhenius_two_step(tests, "first_order"))
    assert found.arrhenius[0].name == "k"
    assert found.by_size is not None and len(found.by_size.tests) == len(tests)
    assert_allclose(total_time(fit.law, np.array([2.0])), 1 / fit.parameter("k").value)
