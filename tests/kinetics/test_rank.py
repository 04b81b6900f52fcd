import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import (
    MECHANISTIC,
    Bottle,
    ParticleLaw,
    RateLaw,
    Reference,
    Resistance,
    contains,
    in_words,
    rank_laws,
    rank_tests,
    rank_tests_by_p80,
    simulate_observed,
)
from leachkin.kinetics.fit_elements import spread_classes
from leachkin.testwork import SizeDistribution

HOURS = np.array([1, 2, 4, 8, 12, 18, 24, 36, 48, 72.0])
#: Reduction of UO3 grains, conversion against time [h] [levenspiel1999, ch. 25].
UO3_TIME = [0.180, 0.347, 0.453, 0.567, 0.733]
UO3_CONVERSION = [0.45, 0.68, 0.80, 0.95, 0.98]


def test_uo3_is_under_chemical_control():
    # the answer of the text; "ash control" circulates and is wrong
    ranking = rank_laws(UO3_TIME, UO3_CONVERSION, ultimate=1.0)
    assert ranking.indistinguishable == ("chemical",)
    assert ranking.mechanisms == ("chemical",)
    assert ranking.verdict.startswith("Chemical reaction at the core: chemical.")
    assert ranking.rows[0].law == "chemical" and ranking.rows[0].delta == 0


@pytest.mark.parametrize("law", ["film", "ash_layer", "chemical"])
@pytest.mark.parametrize("seed", [3, 4])
def test_one_resistance_is_recognised_in_precise_data(law, seed):
    rng = np.random.default_rng(seed)
    truth = ParticleLaw(**{law: 60.0})
    E = 0.8 * truth.conversion(HOURS) + 0.003 * rng.standard_normal(HOURS.size)
    ranking = rank_laws(HOURS, E, errors=0.003)
    assert ranking.mechanisms == (law,)
    assert not any(contains(name, law) for name in ranking.indistinguishable)


def test_few_rough_points_cannot_be_told_apart():
    time = [1.0, 2, 3, 4, 5, 6, 7]  # the first third: both are still straight lines
    E = ParticleLaw(chemical=60.0).conversion(time) + 0.02 * np.array([1, -1, 1, -1, 0, 1, -1])
    ranking = rank_laws(
        time, E, laws=["film", "chemical", "first_order"], errors=0.02, ultimate=1.0
    )
    assert len(ranking.mechanisms) > 1
    assert ranking.verdict.startswith("These cannot be told apart")


def test_two_fractions_are_none_of_the_particle_laws():
    E = 0.5 * (1 - np.exp(-2.0 * HOURS)) + 0.4 * (1 - np.exp(-0.02 * HOURS))
    ranking = rank_laws(HOURS, E + 0.003 * np.cos(9 * HOURS), errors=0.003)
    assert ranking.rows[0].law == "two_rate"
    assert ranking.verdict.startswith("None of the particle laws describes these data")
    assert ranking.mechanisms == ()
    plain = rank_laws(HOURS, E + 0.003 * np.cos(9 * HOURS))
    assert plain.verdict.startswith("None of the particle laws describes these data")


def test_weights_sum_to_one_and_a_law_that_cannot_be_fitted_stays_as_a_row():
    ranking = rank_laws([1.0, 2, 4], [0.3, 0.5, 0.7], laws=["chemical", "film", "series"])
    assert_allclose(sum(row.weight for row in ranking.rows), 1.0)
    series = next(row for row in ranking.rows if row.law == "series")
    assert series.fit is None and "for 4 quantities" in series.note
    assert ranking.table().column("law") == [row.law for row in ranking.rows]
    assert ranking.fit_of("series") is None


def test_nothing_to_rank_is_an_error():
    with pytest.raises(InputProblems, match="divide by 100"):
        rank_laws([1.0, 2, 4], [30.0, 50, 70])


def test_all_tests_together_find_the_mixed_law():
    reference = Reference(298.15, 20.0, 1.416)
    truth = RateLaw(
        "ash_layer+chemical",
        (Resistance("ash_layer", np.log(7.0), 19.0), Resistance("chemical", np.log(3.0), 46.0)),
        reference,
        [1.0],
        [0.85],
    )
    made = [
        Bottle(f"{d}_{c}", SizeDistribution.single(d), 273.15 + c, 2 * HOURS, 20.0)
        for d in (1.416, 5.641, 10.9)
        for c in (25, 55)
    ]
    tests = simulate_observed(truth, made, head_kg_per_t=6.8, seed=1)
    ranking = rank_tests(
        tests, laws=["chemical", "ash_layer", "ash_layer+chemical", "first_order"], ultimate="one"
    )
    assert ranking.mechanisms == ("ash_layer+chemical",)
    assert ranking.best.law_name == "ash_layer+chemical"


def test_every_mechanism_has_words():
    assert len({in_words(law) for law in MECHANISTIC}) == len(MECHANISTIC)
    assert in_words("series").count(" in series") == 1


def spread_bottles(spread):
    made = []
    for p80_mm in (1.5, 6.0):
        median = p80_mm * np.exp(-0.841621 * np.sqrt(np.log1p(spread**2)))
        sizes = SizeDistribution.log_normal(float(median), spread, 31)
        made += [Bottle(f"{p80_mm}_{c}", sizes, 273.15 + c, 2 * HOURS, 20.0) for c in (25, 55)]
    return made


def test_classes_of_a_fitted_spread_have_the_p80_and_the_mean_asked_for():
    # 80 % below the 0.8 quantile of the normal distribution, 0.841621 (any printed table)
    deviate, share = spread_classes("log_normal")
    width = np.sqrt(np.log1p(0.49))
    assert_allclose(share @ deviate, -0.841621, atol=1e-5)
    mean = np.exp(-0.841621 * width + 0.5 * width**2)
    assert_allclose(share @ np.exp(width * deviate), mean, rtol=2e-3)


@pytest.mark.parametrize("slope", [0.65, 1.3])
def test_families_by_slope_against_their_printed_forms(slope):
    """Passing (d/top)^m of Gates-Gaudin-Schuhmann; 1 - exp(-(d/d')^n) of Rosin-Rammler.

    Means by their closed forms: m/(m+1) of the top size, and d' Gamma(1 + 1/n).
    """
    from scipy.special import gamma

    deviate, share = spread_classes("gates_gaudin_schuhmann")
    top = 0.8 ** (-1.0 / slope)  # in units of the 80 % size
    assert_allclose(share @ np.exp(deviate / slope), top * slope / (slope + 1.0), rtol=1e-3)
    deviate, share = spread_classes("rosin_rammler")
    scale = (-np.log(0.2)) ** (-1.0 / slope)
    assert_allclose(share @ np.exp(deviate / slope), scale * gamma(1 + 1 / slope), rtol=3e-3)


def test_a_spread_that_is_not_known_is_fitted_and_counted():
    reference = Reference(298.15, 20.0, 3.0)
    truth = RateLaw(
        "chemical", (Resistance("chemical", np.log(60.0), 46.0),), reference, [3.0], [0.85]
    )
    tests = simulate_observed(truth, spread_bottles(0.8), head_kg_per_t=6.8, seed=1)
    p80_mm = [1.5, 1.5, 6.0, 6.0]
    laws = ["chemical", "ash_layer"]
    assert rank_tests_by_p80(tests, p80_mm, laws, ultimate="one").mechanisms == ("chemical",)
    ranking = rank_tests_by_p80(tests, p80_mm, laws, families=["log_normal"], ultimate="one")
    assert ranking.mechanisms == ("chemical",)
    spread = ranking.best.parameter("spread")
    assert abs(spread.value - 0.8) < 3.5 * spread.standard_error
    assert f"log normal, spread {spread.value:.2g}" in ranking.best.warnings[-1]
    known = rank_tests(tests, ["chemical"], ultimate="one").best
    assert ranking.best.degrees_of_freedom == known.degrees_of_freedom - 1
    assert ranking.best.aicc - known.aicc < 4.0  # one quantity more, a little better fit
    with pytest.raises(InputProblems, match="one finite size above 0 for each test"):
        rank_tests_by_p80(tests, [1.5, 1.5, 6.0], ["chemical"])


def test_a_further_part_is_named_only_where_the_data_ask_for_it():
    # seeds not chosen: in all of them the smaller, true law is what may be said
    for seed in range(1, 9):
        noise = 0.01 * np.random.default_rng(seed).standard_normal(HOURS.size)
        E = 0.8 * ParticleLaw(chemical=60.0).conversion(HOURS) + noise
        ranking = rank_laws(HOURS, E, laws=["film+chemical", "chemical", "series"], errors=0.01)
        assert ranking.mechanisms == ("chemical",), seed
        assert "chemical" in ranking.indistinguishable
