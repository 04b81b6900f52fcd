from collections import Counter
from dataclasses import replace
from itertools import permutations, product

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from numpy.testing import assert_allclose
from statsmodels.sandbox.stats.runs import runstest_1samp
from statsmodels.stats.anova import anova_lm

from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Bottle,
    Noise,
    RateLaw,
    Reference,
    Resistance,
    fit_curve,
    fit_tests,
    gather_evidence,
    leave_one_out,
    left_out_table,
    nested_test,
    rank_tests,
    residual_checks,
    runs_test,
    simulate_observed,
    stirring_power,
)
from leachkin.kinetics.leave_out import predicted_rows
from leachkin.kinetics.nested import f_upper_tail
from leachkin.kinetics.residual_checks import chance_of_runs, count_runs, pooled_runs, trend
from leachkin.testwork import SizeDistribution

HOURS = np.array([2, 6, 12, 24, 48, 72, 120.0])
REFERENCE = Reference(313.15, 20.0, 2.0)
LAWS = ["film", "ash_layer", "chemical"]
ENERGY = {"film": 12.0, "ash_layer": 12.0, "chemical": 55.0}


def bottles(sizes_mm=(1.0, 2.0, 4.0), celsius=(25, 40, 55)):
    return [
        Bottle(f"{d:g}_{c}", SizeDistribution.single(d), 273.15 + c, HOURS, 20.0)
        for d in sizes_mm
        for c in celsius
    ]


def observed_under(kind, noise=None, seed=1, made=None):
    law = RateLaw(kind, (Resistance(kind, np.log(70.0), ENERGY[kind]),), REFERENCE, [2.0], [0.85])
    return simulate_observed(
        law, made or bottles(), head_kg_per_t=6.8, seed=seed, noise=noise or Noise()
    )


@pytest.fixture(scope="module")
def chemical():
    tests = observed_under("chemical")
    return tests, rank_tests(tests, LAWS, ultimate="one")


# --- runs


@pytest.mark.parametrize(("positive", "negative"), [(4, 3), (5, 2), (1, 4), (3, 3)])
def test_chance_of_runs_by_listing_every_arrangement(positive, negative):
    signs = [1.0] * positive + [-1.0] * negative
    every = list(permutations(signs))
    counted = Counter(count_runs(order)[0] for order in every)
    for runs in range(positive + negative + 2):
        listed = counted[runs] / len(every)
        assert_allclose(chance_of_runs(runs, positive, negative), listed, atol=1e-14)
    few = signs
    tail = sum(n for runs, n in counted.items() if runs <= 2) / len(every)
    assert_allclose(runs_test(few).chance, min(1.0, 2 * tail), rtol=1e-12)
    assert runs_test(few).method == "exact"


def test_mean_of_the_runs_by_listing_every_arrangement():
    every = [signs for signs in product([1.0, -1.0], repeat=7) if sum(signs) == 1]
    mean = np.mean([count_runs(signs)[0] for signs in every])
    assert_allclose(runs_test(every[0]).expected, mean, rtol=1e-14)


def test_many_residuals_against_statsmodels():
    values = np.random.default_rng(5).standard_normal(48)
    values[:24], values[24:] = np.abs(values[:24]), -np.abs(values[24:])
    values[[3, 9, 15, 30, 41]] *= -1
    found = runs_test(values)
    assert found.method == "normal" and found.positive == 24 - 3 + 2
    assert_allclose(found.chance, runstest_1samp(values, cutoff=0)[1], rtol=1e-10)


def test_pooled_runs_of_one_list_and_of_none():
    values = [1.0, 2.0, -1.0, 1.0]
    assert pooled_runs([values]) == runs_test(values) == pooled_runs([values, []])
    alone = pooled_runs([[1.0, 2.0], [-1.0]])
    assert alone.method == "none" and alone.chance == 1.0 and alone.runs == 2
    with pytest.raises(InputProblems, match="finite numbers"):
        runs_test([1.0, np.nan])


def test_pooled_runs_are_rare_for_long_runs_only():
    long = [[1.0] * 5 + [-1.0] * 5] * 4
    mixed = [[1.0, -1.0, -1.0, 1.0, 1.0, 1.0, -1.0, 1.0, -1.0, -1.0]] * 4
    assert pooled_runs(long).chance < 1e-4 < 0.5 < pooled_runs(mixed).chance


def test_trend_against_statsmodels():
    rng = np.random.default_rng(2)
    x = np.arange(9.0)
    y = 0.1 * x + rng.standard_normal(9)
    line = sm.OLS(y, sm.add_constant(x)).fit()
    assert_allclose(trend(x, y), (line.params[1], line.bse[1], line.pvalues[1]), rtol=1e-9)
    with pytest.raises(InputProblems, match="four or more"):
        trend([1.0, 2.0], [1.0, 2.0])


def test_residuals_of_the_wrong_law_show_a_pattern(chemical):
    _, ranking = chemical
    right, wrong = (residual_checks(ranking.fit_of(law)) for law in ("chemical", "ash_layer"))
    assert right.says == "no pattern beyond chance"
    assert "too few" in wrong.says and wrong.runs.chance < 1e-3


# --- nested laws


def test_f_tail_against_statsmodels_anova():
    rng = np.random.default_rng(7)
    frame = pd.DataFrame({"x": np.arange(12.0), "z": rng.standard_normal(12)})
    frame["y"] = 1.0 + 0.5 * frame.x + 0.3 * frame.z + rng.standard_normal(12)
    small = sm.OLS.from_formula("y ~ x", frame).fit()
    large = sm.OLS.from_formula("y ~ x + z + I(z**2)", frame).fit()
    row = anova_lm(small, large).iloc[1]
    assert_allclose(f_upper_tail(row["F"], 2, 8), row["Pr(>F)"], rtol=1e-10)


def test_nested_test_of_curves_by_hand():
    time = np.array([1, 2, 4, 8, 12, 18, 24, 36.0])
    E = 0.8 * (1 - np.exp(-0.1 * time)) + 0.01 * np.array([1, -1, 2, -2, 1, 0, -1, 1])
    small, large = (fit_curve(time, E, law) for law in ("first_order", "avrami"))
    found = nested_test(large, small)
    fall = small.sum_of_squares - large.sum_of_squares
    assert found.kind == "F" and (found.extra, found.degrees_of_freedom) == (1, 5)
    assert_allclose(found.statistic, fall / (large.sum_of_squares / 5), rtol=1e-9)
    stated = [fit_curve(time, E, law, errors=0.015) for law in ("first_order", "avrami")]
    known = nested_test(stated[1], stated[0])
    assert known.kind == "chi-square"
    assert_allclose(known.statistic, fall / 0.015**2, rtol=1e-4)


def test_a_part_dropped_as_not_needed_gains_nothing(chemical):
    tests, ranking = chemical
    dropped = fit_tests(tests, "ash_layer+chemical", ultimate="one")
    found = nested_test(dropped, ranking.fit_of("chemical"))
    assert 0.0 <= found.chance <= 1.0
    assert (found.chance == 1.0) == bool(dropped.not_needed)
    other = fit_tests(tests[:-1], "chemical", ultimate="one")
    with pytest.raises(InputProblems, match="the same values"):
        nested_test(dropped, other)


# --- tests left out


def test_the_true_law_predicts_a_test_left_out(chemical):
    tests, _ = chemical
    found = [leave_one_out(tests, law, ultimate="one") for law in ("chemical", "ash_layer")]
    assert 0.6 < found[0].error < 1.6
    assert found[1].error > 3.0 * found[0].error
    table = left_out_table(found[::-1])
    assert table.column("law") == ["chemical", "ash_layer"]
    assert found[0].worst in {o.test for o in tests} and not found[0].failed
    with pytest.raises(InputProblems, match="3 or more"):
        leave_one_out(tests[:2], "chemical")


def test_prediction_of_a_fitted_test_is_the_fit_at_its_assay_head(chemical):
    tests, ranking = chemical
    fit = ranking.fit_of("chemical")
    ratio = fit.heads_kg_per_t[tests[4].test] / tests[4].head_kg_per_t
    expected = [r.expected for r in fit.residuals if r.test == tests[4].test]
    assert_allclose(ratio * predicted_rows(fit, tests[4]), expected, rtol=1e-12)


# --- lines of evidence


def test_lines_for_the_truth_agree_and_stirring_stays_open(chemical):
    tests, ranking = chemical
    found = gather_evidence(tests, ranking, ultimate="one")
    scores = {line.line: line.score for line in found.lines}
    assert found.law == "chemical" and found.score == "consistent"
    assert scores["fit ranking"] == scores["size exponent"] == "consistent"
    assert scores["stirring"] == "undetermined"
    assert "cannot be excluded" in found.line("stirring").found
    assert [line.hint_only for line in found.lines] == [False, False, False, True]
    assert found.table().column("score") == [line.score for line in found.lines]
    with pytest.raises(InputProblems, match="fit ranking, size exponent"):
        found.line("odour")


def test_lines_for_another_mechanism_conflict(chemical):
    tests, ranking = chemical
    found = gather_evidence(tests, ranking, "ash_layer", ultimate="one")
    assert found.score == "conflicting"
    assert found.line("fit ranking").score == "conflicting"
    assert found.line("size exponent").score != "consistent"  # its scatter widens the interval
    assert found.line("activation energy").score == "conflicting"


def test_energy_alone_never_decides():
    slow = RateLaw(
        "chemical", (Resistance("chemical", np.log(70.0), 8.0),), REFERENCE, [2.0], [0.85]
    )
    tests = simulate_observed(slow, bottles(), head_kg_per_t=6.8, seed=3)
    found = gather_evidence(tests, rank_tests(tests, LAWS, ultimate="one"), ultimate="one")
    assert found.law == "chemical" and found.line("activation energy").score == "conflicting"
    assert found.score == "consistent"


def test_one_size_and_one_temperature_leave_their_lines_open():
    tests = observed_under("chemical", made=bottles((2.0,), (40,)))
    found = gather_evidence(tests, rank_tests(tests, LAWS), "chemical")
    assert found.line("size exponent").score == "undetermined"
    assert found.line("size exponent").found == "not varied in the tests"
    assert found.line("activation energy").score == "undetermined"
    with pytest.raises(InputProblems, match="chemical"):
        gather_evidence(tests, rank_tests(tests, ["chemical", "first_order"]), "first_order")


def test_a_size_exponent_off_its_theory_conflicts():
    kinetics = Resistance("chemical", np.log(70.0), 55.0, size_exponent=2.0)
    law = RateLaw("chemical", (kinetics,), REFERENCE, [2.0], [0.85])
    tests = simulate_observed(law, bottles(), head_kg_per_t=6.8, seed=5)
    found = gather_evidence(tests, rank_tests(tests, LAWS, ultimate="one"), "chemical")
    assert found.line("size exponent").score == "conflicting" == found.score


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "power"), [("film", 0.6), ("chemical", 0.0)])
def test_stirring_power_comes_back(kind, power):
    # readings taken (speed/mean)^power earlier than at the mean speed: a rate that much higher
    made = bottles((2.0,), (30, 50, 31, 51))
    speeds = [200.0, 200.0, 800.0, 800.0]
    tests = [
        replace(
            o,
            time_h=o.time_h * (s / 400.0) ** -power,
            row_time_h=o.row_time_h * (s / 400.0) ** -power,
            stirring_rpm=s,
        )
        for o, s in zip(observed_under(kind, made=made), speeds, strict=True)
    ]
    found, low, high = stirring_power(tests, kind, ultimate="one")
    assert low < power < high and high - low < 0.4
    assert_allclose(found, power, atol=0.15)
    line = gather_evidence(tests, rank_tests(tests, LAWS, ultimate="one"), kind, ultimate="one")
    assert line.line("stirring").score == "consistent"


def test_stirring_power_needs_two_speeds():
    tests = [replace(o, stirring_rpm=300.0) for o in observed_under("film")[:3]]
    with pytest.raises(InputProblems, match="two or more speeds"):
        stirring_power(tests, "film")
