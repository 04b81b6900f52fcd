import time
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from leachkin.errors import InputProblems
from leachkin.inference import from_natural, refit_by_solver, to_natural
from leachkin.kinetics import (
    Bottle,
    RateLaw,
    Reference,
    Resistance,
    bootstrap_tests,
    fit_curve,
    fit_problem,
    fit_tests,
    profile_intervals,
    simulate_observed,
)
from leachkin.testwork import SizeDistribution

HOURS = np.array([2, 6, 12, 24, 48, 72, 120, 168, 240.0])
SIZES_MM = (1.4, 5.6, 10.9)
REFERENCE = Reference(298.15, 20.0, 1.4)
ASH_AND_CHEMICAL = (Resistance("ash_layer", np.log(7.0), 19.0), Resistance("chemical", 1.1, 46.0))
FILM = Resistance("film", np.log(4.0), 12.0)


def copper(resistances=ASH_AND_CHEMICAL, seed=1):
    """Nine bottles: three sizes by three temperatures, nine readings each."""
    name = "+".join(one.kind for one in resistances)
    law = RateLaw(
        "series" if len(resistances) == 3 else name,
        resistances,
        REFERENCE,
        list(SIZES_MM),
        [0.88, 0.84, 0.79],
    )
    bottles = [
        Bottle(f"{size}mm{celsius}", SizeDistribution.single(size), 273.15 + celsius, HOURS, 20.0)
        for size in SIZES_MM
        for celsius in (25, 40, 55)
    ]
    return simulate_observed(law, bottles, head_kg_per_t=6.8, seed=seed)


@pytest.fixture(scope="module")
def tests():
    return copper()


@pytest.fixture(scope="module")
def fit(tests):
    return fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)


@pytest.mark.parametrize("level", [0.8, 0.95])
@pytest.mark.parametrize("name", ["tau_chemical", "activation_energy_ash_layer", "ultimate_5.6_mm"])
def test_a_fit_held_at_either_end_is_worse_by_what_the_level_allows(tests, fit, name, level):
    (found,) = profile_intervals(fit, [name], level)
    allowed = (fit.estimate.multiplier(level) ** 2) * fit.estimate.scatter_variance
    for end in (found.low, found.high):
        held = fit_tests(tests, "ash_layer+chemical", fixed={name: end}, reference=REFERENCE)
        assert held.converged
        assert_allclose(held.sum_of_squares - fit.sum_of_squares, allowed, rtol=1e-6)
    assert found.low < found.value < found.high
    assert (found.method, found.level) == ("profile likelihood", level)


def test_all_fitted_parameters_but_the_heads_come_with_units_and_errors(fit):
    found = profile_intervals(fit)
    assert [p.name for p in found] == [n for n in fit.names if not n.startswith("head_")]
    assert all(p.method == "profile likelihood" and p.level == fit.level for p in found)
    for p in found:
        line = fit.parameter(p.name)
        assert (p.value, p.unit, p.standard_error) == (line.value, line.unit, line.standard_error)
        # the tests are many and precise: both intervals tell nearly the same
        assert_allclose([p.low, p.high], [line.low, line.high], atol=0.15 * (line.high - line.low))


def test_a_parameter_that_was_not_fitted_comes_back_as_it_stands(tests):
    held = fit_tests(tests, "ash_layer+chemical", fixed={"activation_energy_chemical": 46.0})
    (found,) = profile_intervals(held, ["activation_energy_chemical"])
    assert found == held.parameter("activation_energy_chemical")
    assert found.method == "held"


def test_a_curve_that_has_not_bent_leaves_its_ultimate_open_above():
    hours = np.array([1.0, 2.0, 4.0, 8.0, 16.0])
    E = 0.8 * (1 - np.exp(-0.012 * hours)) + 0.002 * np.array([1, -1, 1, 1, -1])
    fit = fit_curve(hours, E, "first_order", errors=0.004)
    (found,) = profile_intervals(fit, ["ultimate"])
    assert found.high is None and found.low is not None
    assert "end of its range" in found.why_no_interval
    assert found.method == "one-sided, profile likelihood"


@pytest.mark.parametrize("law", ["two_rate", "avrami", "series"])
def test_no_end_lies_inside_by_a_fit_started_at_the_minimum(law):
    # seven readings for up to four quantities: the others have more than one minimum
    hours = np.array([1, 2, 4, 8, 16, 32.0, 64])
    noise = 0.02 * np.random.default_rng(0).standard_normal((3, hours.size))
    ends = 0
    for error in noise:
        fit = fit_curve(hours, 0.7 * (1 - np.exp(-0.1 * hours)) + error, law)
        problem = fit_problem(fit)
        allowed = fit.estimate.multiplier(0.95) ** 2 * fit.estimate.scatter_variance
        for found in profile_intervals(fit):
            j = fit.names.index(found.name)
            for end in (found.low, found.high):
                if end is None or fit.estimate.states[j] != "free":
                    continue
                at = float(from_natural(problem.scales[j], end))
                _, squares = refit_by_solver(problem, j, at, fit.vector)
                assert squares - fit.sum_of_squares > 0.999 * allowed, found
                ends += 1
    assert ends >= 2  # not for want of ends


def test_bad_asking_is_refused(fit):
    with pytest.raises(InputProblems, match="tau_chemical"):
        profile_intervals(fit, ["tau_chemica"])
    with pytest.raises(InputProblems, match="level"):
        profile_intervals(fit, level=95)
    with pytest.raises(InputProblems, match="without its design"):
        profile_intervals(replace(fit, design=None))


@pytest.mark.slow
def test_bottles_drawn_again_give_intervals_of_the_size_of_the_linearised_ones(tests):
    found = bootstrap_tests(tests, "ash_layer+chemical", n=120, seed=4, reference=REFERENCE)
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    assert found.groups == 9 and found.asked == 120
    assert 100 <= found.converged <= 120
    assert found.names == tuple(n for n in fit.names if not n.startswith("head_"))
    for name in ("tau_ash_layer", "activation_energy_ash_layer"):
        ends, line = found.interval(name, 0.9), fit.parameter(name)
        assert ends.value == line.value
        assert ends.low < ends.high
        assert 1 / 3 < ends.standard_error / line.standard_error < 3
    # a resample without a size tells nothing of the ultimate at that size
    absent = (2 / 3) ** 9
    gave = found.gave("ultimate_1.4_mm")
    assert gave <= found.converged
    assert abs(gave / found.converged - (1 - absent)) < 5 * np.sqrt(absent / found.converged)


def _cold(problem, fit, j, allowed):
    """Both ends by a root finder, every fit started anew at the minimum."""

    def rise(at):
        _, squares = refit_by_solver(problem, j, at, fit.vector)
        return squares - fit.sum_of_squares - allowed

    half = np.sqrt(fit.covariance[j, j]) * fit.estimate.multiplier(0.95)
    best = fit.vector[j]
    ends = []
    for direction in (-1.0, 1.0):
        far = half
        while rise(best + direction * far) < 0:
            far *= 2
        pair = sorted((best, best + direction * far))
        ends.append(brentq(rise, *pair, xtol=1e-7 * half))
    return ends


@pytest.mark.benchmark
def test_nine_bottles_with_eighteen_parameters():
    tests = copper((FILM, *ASH_AND_CHEMICAL))
    start = time.perf_counter()
    fit = fit_tests(tests, "series", reference=REFERENCE)
    fitted = time.perf_counter()
    names = [n for n in fit.names if not n.startswith("head_")]
    profiles = profile_intervals(fit, names)
    done = time.perf_counter()
    assert len(fit.names) == 18 and len(names) == 9, fit.names
    problem = fit_problem(fit)
    allowed = fit.estimate.multiplier(0.95) ** 2 * fit.estimate.scatter_variance
    cold_s = 0.0
    compared = 0
    for found in profiles:
        j = fit.names.index(found.name)
        if found.low is None or found.high is None:
            continue
        begin = time.perf_counter()
        ends = _cold(problem, fit, j, allowed)
        cold_s += time.perf_counter() - begin
        ends = to_natural(fit.layout.free[j].scale, ends)
        width = found.high - found.low
        assert_allclose([found.low, found.high], ends, rtol=0, atol=1e-5 * width)
        compared += 1
    profile_s = done - fitted
    print(
        f"\n9 bottles, 18 parameters: fit {fitted - start:.2f} s, 9 profiles {profile_s:.2f} s; "
        f"{compared} profiles by cold restarts {cold_s:.2f} s: {cold_s / profile_s:.0f} times"
    )
    assert compared >= 6
    assert done - start < 3.0
    assert cold_s / profile_s > 3.0
