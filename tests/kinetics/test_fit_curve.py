import sys

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import LAW_NAMES, SHAPE_PARAMETERS, fit_curve, straightened_time
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_options import FitOptions
from leachkin.kinetics.fit_setup import layout_of
from leachkin.testwork import SizeDistribution, observed_from_extraction

TIME = np.array([0.5, 1, 2, 4, 8, 12, 24, 36, 48, 72.0])
#: Reduction of UO3 grains, conversion against time [h] [levenspiel1999, ch. 25].
UO3_TIME = [0.180, 0.347, 0.453, 0.567, 0.733]
UO3_CONVERSION = [0.45, 0.68, 0.80, 0.95, 0.98]
TRUE_SHAPES = {"fast_share": 0.4, "ratio": 20.0, "n": 0.7, "slope": 0.15}


def curve_of(law, time, *, tau=20.0, ultimate=0.85, sizes=None):
    """Exact data from the residual function's own law, by name."""
    observed = observed_from_extraction(
        time, np.full(time.size, 0.5), np.ones(time.size), sizes=sizes
    )
    layout, _ = layout_of(FitOptions(law=law, ultimate=ultimate, one_curve=True), (observed,))
    design = FitDesign.of(layout, (observed,))
    vector = layout.starts[layout.free_index].copy()
    times = [j for j, q in enumerate(layout.free) if q.role == "time"]
    for rank, j in enumerate(times):
        sign = -1.0 if layout.free[j].which == "clock" else 1.0
        vector[j] = sign * np.log(tau * (1.0 + rank) / len(times))
    for j, q in enumerate(layout.free):
        if q.role == "shape":
            value = TRUE_SHAPES[q.which]
            vector[j] = np.log(value / (1 - value)) if q.scale == "logit" else np.log(value)
    return design.extractions(vector)[0], {q.name: vector[j] for j, q in enumerate(layout.free)}


@pytest.mark.parametrize("law", LAW_NAMES)
def test_every_law_recovers_its_own_curve(law):
    ultimate = 1.0 if law == "elovich" else 0.85
    E, truth = curve_of(law, TIME, ultimate=ultimate)
    fit = fit_curve(TIME, E, law)
    assert fit.converged, fit.message
    assert_allclose(fit.predict(TIME), E, rtol=0, atol=1e-7)
    if law not in ("two_rate", "series"):  # those trade their parts on ten points
        for name, value in truth.items():
            assert_allclose(np.log(fit.parameter(name).value), value, atol=1e-4)
        assert_allclose(fit.law.ultimate, ultimate, atol=1e-5)


def test_uo3_by_least_squares_and_by_the_straightened_line():
    fit = fit_curve(UO3_TIME, UO3_CONVERSION, "chemical", ultimate=1.0)
    assert_allclose(fit.parameter("tau_chemical").value, 1.036, rtol=0, atol=5e-4)
    straight = straightened_time(UO3_TIME, UO3_CONVERSION, "chemical")
    assert_allclose(straight, 0.995, rtol=0, atol=5e-4)


@pytest.mark.parametrize("weighted", [False, True])
def test_noisy_first_order_covers_the_truth_from_a_far_time_unit(weighted):
    rng = np.random.default_rng(11)
    minutes = TIME * 60
    E = 0.8 * (1 - np.exp(-0.1 * TIME)) + 0.004 * rng.standard_normal(TIME.size)
    fit = fit_curve(minutes, E, "first_order", errors=0.004 if weighted else None)
    k, ultimate = fit.parameter("k"), fit.parameter("ultimate")
    assert abs(k.value - 0.1 / 60) < 3.5 * k.standard_error
    assert abs(ultimate.value - 0.8) < 3.5 * ultimate.standard_error
    assert k.low < k.value < k.high and k.unit == ""
    assert ("normal" in k.method) == weighted
    if weighted:
        measured = np.array([r.measured - r.expected for r in fit.residuals])
        assert_allclose(fit.sum_of_squares, np.sum((measured / 0.004) ** 2), rtol=1e-9)


def test_relative_errors_are_shares_of_the_extraction():
    E = 0.8 * (1 - np.exp(-0.1 * TIME)) + 0.01 * np.cos(5 * TIME)
    relative = fit_curve(TIME, E, "first_order", errors=0.02, errors_are="relative")
    absolute = fit_curve(TIME, E, "first_order", errors=0.02 * E)
    assert_allclose(relative.vector, absolute.vector, rtol=1e-9)


def test_point_at_the_origin_tells_nothing():
    E = 0.8 * (1 - np.exp(-0.1 * TIME)) + 0.01 * np.cos(5 * TIME)
    without = fit_curve(TIME, E, "chemical")
    with_it = fit_curve(np.r_[0.0, TIME], np.r_[0.0, E], "chemical")
    assert_allclose(with_it.vector, without.vector, rtol=1e-12)
    assert with_it.n_points == 10 and with_it.degrees_of_freedom == without.degrees_of_freedom


def test_sizes_are_integrated_and_times_refer_to_the_mean_size():
    # chemical control over log-normal sizes: a fit with the sizes returns the time of the mean one
    sizes = SizeDistribution.log_normal(median_mm=0.1, cv=0.9)
    from leachkin.kinetics import RateLaw, Reference, Resistance

    truth = RateLaw(
        "chemical",
        (Resistance("chemical", np.log(7.4)),),
        Reference(size_mm=sizes.mass_mean_mm),
        [1.0],
        [0.92],
    )
    E = truth.extraction(TIME, sizes)
    fit = fit_curve(TIME, E, "chemical", sizes=sizes)
    assert_allclose(fit.parameter("tau_chemical").value, 7.4, rtol=1e-6)
    median = fit_curve(TIME, E, "chemical", sizes=sizes, reference_size=0.1)
    assert_allclose(
        median.parameter("tau_chemical").value, 7.4 * 0.1 / sizes.mass_mean_mm, rtol=1e-6
    )


@pytest.mark.parametrize("law", ["film", "chemical", "first_order"])
def test_curve_that_never_bends_says_so(law):
    E = 0.01 * np.array([1, 2.02, 2.99, 4.01, 5, 5.98])
    fit = fit_curve([1, 2, 3, 4, 5, 6], E, law)
    ultimate = fit.parameter("ultimate")
    assert ultimate.high is None and ultimate.why_no_interval
    assert any("ultimate" in w for w in fit.warnings)


def test_everything_at_the_plateau_has_no_interval_for_the_time():
    fit = fit_curve([10, 20, 30, 40, 50], [0.80, 0.801, 0.799, 0.8, 0.8005], "chemical")
    assert fit.parameter("tau_chemical").low is None
    assert fit.parameter("tau_chemical").why_no_interval
    assert_allclose(fit.parameter("ultimate").value, 0.8, atol=0.002)


def test_extraction_a_little_above_one_is_data():
    E = np.array([0.3, 0.55, 0.8, 0.97, 1.02, 1.01])
    fit = fit_curve([1, 2, 4, 8, 16, 24], E, "first_order")
    assert fit.converged
    top = fit.parameter("ultimate")
    assert top.value > 0.999 and top.high is None and 0.9 < top.low < 1


@pytest.mark.parametrize(
    "time, extraction, options, match",
    [
        ([1, 2, 3], [10, 20, 30], {}, "divide by 100 if these are percent"),
        ([1, 2, 3], [0.1, np.nan, 0.3], {}, "value 2 is nan"),
        ([3, 2, 1], [0.1, 0.2, 0.3], {}, "times that run backwards"),
        ([1, 2], [0.1], {}, "one value for each time"),
        ([1, 2, 3], [0.1, 0.2, 0.3], {"errors": 0.0}, "standard deviations above 0"),
        ([1, 2, 3], [0.1, 0.2, 0.3], {"ultimate": 85}, "ultimate=0.85"),
        ([1, 2], [0.1, 0.2], {"law": "series"}, "2 measured values for 4 quantities"),
        ([1, 2, 3], [0.1, 0.2, 0.3], {"law": "chemicle"}, "did you mean chemical"),
        ([-1, 2, 3], [0.1, 0.2, 0.3], {}, "0 and above"),
    ],
)
def test_input_without_meaning_is_refused_in_words(time, extraction, options, match):
    given = {"law": "chemical", **options}
    with pytest.raises(InputProblems, match=match):
        fit_curve(time, extraction, **given)


def test_draws_agree_with_the_covariance_and_stay_in_range():
    E = 0.93 * (1 - np.exp(-0.1 * TIME)) + 0.02 * np.cos(5 * TIME)
    fit = fit_curve(TIME, E, "first_order", errors=0.02)
    law = fit.draw(4000, seed=8)
    assert law.batch_shape == (4000,)
    assert law.ultimate.max() <= 1.0
    ultimate = fit.parameter("ultimate")
    low, high = np.quantile(law.ultimate[:, 0], [0.025, 0.975])
    assert_allclose([low, high], [ultimate.low, ultimate.high], atol=0.004)
    band = fit.predict([10.0, 20.0], draws=4000, seed=8)
    assert band.shape == (4000, 2)
    assert_allclose(band[0], law.select(0).extraction([10.0, 20.0], SizeDistribution.single(1.0)))


def test_two_rate_reports_the_fast_rate_with_an_interval():
    E, _ = curve_of("two_rate", TIME)
    fit = fit_curve(TIME, E + 0.002 * np.cos(9 * TIME), "two_rate", ultimate=0.85)
    fast = fit.parameter("k_fast")
    assert_allclose(fast.value, fit.parameter("k_slow").value * fit.parameter("ratio").value)
    assert fast.low < fast.value < fast.high


def test_unknown_parameter_names_the_nearest():
    fit = fit_curve(UO3_TIME, UO3_CONVERSION, "chemical", ultimate=1.0)
    with pytest.raises(InputProblems, match="tau_chemical"):
        fit.parameter("tau_chem")


def test_tables_hold_every_parameter_and_row():
    fit = fit_curve(UO3_TIME, UO3_CONVERSION, "chemical", ultimate=1.0)
    assert "tau_chemical" in fit.parameter_table().column("parameter")
    assert fit.residual_table().column("measured") == UO3_CONVERSION


def test_not_converged_has_no_intervals_and_says_what_to_look_at(monkeypatch):
    from leachkin.inference import least_squares

    module = sys.modules["leachkin.kinetics.fit_tests"]
    monkeypatch.setattr(module, "least_squares", lambda problem: least_squares(problem, 1))
    E, _truth = curve_of("series", TIME)
    fit = fit_curve(TIME, E + 0.02 * np.cos(7 * TIME), "series")
    assert not fit.converged
    assert all(p.low is None and p.high is None for p in fit.parameters)
    assert "Look at:" in fit.message and "try a smaller one" in fit.message


def test_shape_names_all_have_bounds_and_starts():
    from leachkin.kinetics.fit_start import SHAPE_STARTS
    from leachkin.kinetics.fit_terms import SHAPE_BOUNDS

    names = {name for names in SHAPE_PARAMETERS.values() for name in names}
    assert names <= set(SHAPE_BOUNDS) and names <= set(SHAPE_STARTS)


@pytest.mark.slow
def test_film_alone_is_tried_from_every_dip():
    """The sum of squares of a film has a kink at each reading: against a scan of the time."""
    generator = np.random.default_rng(1)
    time = np.array([1.0, 2.0, 4.0, 8.0, 16.0, 32.0, 64.0])
    scan = np.exp(np.linspace(np.log(0.5), np.log(400.0), 8001))
    X = np.minimum(time / scan[:, None], 1.0)
    as_low = 0
    for _ in range(40):
        tau, ultimate = generator.uniform(5.0, 50.0), generator.uniform(0.6, 0.95)
        E = ultimate * np.minimum(time / tau, 1.0) + generator.normal(0.0, 0.02, 7)
        level = np.clip((X @ E) / (X * X).sum(axis=1), 0.0, 1.0)
        lowest = ((E - level[:, None] * X) ** 2).sum(axis=1).min()
        as_low += fit_curve(time, E, "film").sum_of_squares <= 1.002 * lowest
    assert as_low >= 38
