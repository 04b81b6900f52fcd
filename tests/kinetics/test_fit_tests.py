import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Bottle,
    Noise,
    RateLaw,
    Reference,
    Resistance,
    extraction_along,
    fit_tests,
    simulate_observed,
)
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_options import FitOptions
from leachkin.kinetics.fit_setup import layout_of
from leachkin.testwork import History, SizeDistribution, observed_from_extraction

HOURS = np.array([2, 6, 12, 24, 48, 72, 120, 168, 240.0])
SIZES_MM = {"A": 1.416, "B": 5.641, "C": 10.90}
REFERENCE = Reference(298.15, 20.0, 1.416)
TRUTH = RateLaw(
    "ash_layer+chemical",
    (Resistance("ash_layer", np.log(7.0), 19.0), Resistance("chemical", np.log(3.0), 46.0)),
    REFERENCE,
    list(SIZES_MM.values()),
    [0.88, 0.84, 0.79],
)
TRUE_VALUES = {
    "tau_ash_layer": 7.0,
    "tau_chemical": 3.0,
    "activation_energy_ash_layer": 19.0,
    "activation_energy_chemical": 46.0,
    "ultimate_1.416_mm": 0.88,
    "ultimate_5.641_mm": 0.84,
    "ultimate_10.9_mm": 0.79,
}
EXACT = Noise(solution=0.0, tail=0.0, head=0.0, residue=0.0)


def bottles():
    return [
        Bottle(
            f"{name}{celsius}",
            SizeDistribution.single(size),
            273.15 + celsius,
            np.r_[0.5, 1.0, HOURS] if name == "A" else HOURS,
            20.0,
        )
        for name, size in SIZES_MM.items()
        for celsius in (25, 40, 55)
    ]


def copper(seed=1, noise=None):
    return simulate_observed(TRUTH, bottles(), head_kg_per_t=6.8, seed=seed, noise=noise)


def mixed_tests():
    """A limit, a size distribution, a reagent history and two strengths, for the derivatives."""
    tests = list(copper())[:5]
    first = tests[0]
    bound = first.bound.copy()
    bound[0], bound[3] = -1, 1
    sizes = SizeDistribution.log_normal(median_mm=3.0, cv=0.6, classes=7)
    history = History(
        np.array([0.0, 24.0, 24.0, 240.0]), np.full(4, 298.15), np.array([20.0, 9.0, 20.0, 6.0])
    )
    return (
        replace(first, bound=bound),
        replace(tests[1], sizes=sizes),
        replace(tests[2], history=history),
        replace(tests[3], reagent_g_per_L=8.0),
        tests[4],
    )


@pytest.mark.parametrize("law", ["series", "two_rate", "avrami", "first_order", "shrinking_film"])
def test_jacobian_agrees_with_differences(law):
    tests = mixed_tests()
    options = FitOptions(law=law, size_exponents="free", reagent_order="free", reference=REFERENCE)
    layout, _ = layout_of(options, tests)
    design = FitDesign.of(layout, tests)
    vector = layout.starts[layout.free_index] + 0.01 * np.arange(layout.free_index.size)
    for j, quantity in enumerate(layout.free):
        if quantity.role == "time":
            vector[j] = (-1.0 if quantity.which == "clock" else 1.0) * np.log(40.0)
    _, jacobian = design.residuals_and_jacobian(vector)
    step = 1e-5
    for j in range(vector.size):
        ends = []
        for sign in (-1, 1):
            moved = vector.copy()
            moved[j] += sign * step
            ends.append(design.residuals_and_jacobian(moved)[0])
        numeric = (ends[1] - ends[0]) / (2 * step)
        assert_allclose(
            jacobian[:, j], numeric, rtol=2e-5, atol=2e-5 * np.abs(numeric).max() + 1e-9
        )


def test_a_batch_of_vectors_equals_one_by_one():
    tests = mixed_tests()
    layout, _ = layout_of(FitOptions(law="series", reference=REFERENCE), tests)
    design = FitDesign.of(layout, tests)
    start = layout.starts[layout.free_index]
    vectors = start + 0.05 * np.random.default_rng(4).standard_normal((3, start.size))
    residuals, jacobian = design.residuals_and_jacobian(vectors)
    squares = design.squares(vectors)
    for i in range(3):
        one, slope = design.residuals_and_jacobian(vectors[i])
        assert_allclose(residuals[i], one, rtol=1e-12, atol=1e-12)
        assert_allclose(jacobian[i], slope, rtol=1e-10, atol=1e-10)
        assert_allclose(squares[i], one @ one, rtol=1e-12)


def test_residual_function_and_rate_law_are_one_formula():
    tests = copper()
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    design = FitDesign.of(fit.layout, tests)
    E = np.concatenate(design.extractions(fit.vector))
    for observed, part in zip(tests, design.slices, strict=True):
        law = fit.law.extraction(
            observed.time_h, observed.sizes, observed.temperature_K, observed.reagent_g_per_L
        )
        assert_allclose(E[part.readings], law, rtol=1e-12)


def test_exact_bottles_give_the_truth_back():
    fit = fit_tests(copper(noise=EXACT), "ash_layer+chemical", reference=REFERENCE)
    assert fit.converged
    for name, value in TRUE_VALUES.items():
        assert_allclose(fit.parameter(name).value, value, rtol=1e-6)


@pytest.mark.parametrize("seed", [1, 2])
def test_copper_bottles_give_the_truth_within_their_errors(seed):
    fit = fit_tests(copper(seed), "ash_layer+chemical", reference=REFERENCE)
    for name, value in TRUE_VALUES.items():
        parameter = fit.parameter(name)
        assert abs(parameter.value - value) < 3.5 * parameter.standard_error, name
    assert fit.n_tests == 9 and fit.n_points == 96
    assert fit.degrees_of_freedom == 96 + 9 - 16  # rows and head assays less fitted quantities


def test_free_size_exponents_come_out_near_theory():
    fit = fit_tests(copper(), "ash_layer+chemical", reference=REFERENCE, size_exponents="free")
    assert len(fit.names) == 18
    for name, theory in (("size_exponent_ash_layer", 2.0), ("size_exponent_chemical", 1.0)):
        parameter = fit.parameter(name)
        assert abs(parameter.value - theory) < 3.5 * parameter.standard_error


def test_remarks_are_raised_by_the_data():
    said = "\n".join(fit_tests(copper(), "ash_layer+chemical", reference=REFERENCE).warnings)
    assert "three or fewer readings before the plateau" in said and "A55" in said
    assert "not reached in C25" in said
    assert "the widest activation energy is activation_energy_chemical" in said
    assert "order 1 in reagent is assumed" in said


def test_wrong_law_is_widened_and_says_so():
    fit = fit_tests(copper(), "chemical", reference=REFERENCE)
    assert fit.estimate.widening > 3
    assert any("times the stated precision" in w for w in fit.warnings)


def test_a_resistance_that_is_not_there_is_not_needed():
    truth = replace(
        TRUTH, name="chemical", resistances=(Resistance("chemical", np.log(9.0), 46.0),)
    )
    tests = simulate_observed(truth, bottles(), head_kg_per_t=6.8, seed=3, noise=EXACT)
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    assert fit.not_needed == ("ash_layer",)
    ash = fit.parameter("tau_ash_layer")
    assert ash.value == 0.0 and ash.low is None and 0 < ash.high < 1.0
    assert_allclose(fit.parameter("tau_chemical").value, 9.0, rtol=1e-5)
    assert fit.law.batch_shape == () and fit.draw(3, 1).batch_shape == (3,)


def test_one_temperature_holds_the_activation_energy_and_says_so():
    tests = [o for o in copper() if o.temperature_K < 300]
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    assert fit.parameter("activation_energy_chemical").method == "held"
    assert any("one temperature was tested" in w for w in fit.warnings)
    given = {"activation_energy_chemical": 46.0, "activation_energy_ash_layer": 19.0}
    fit = fit_tests(tests, "ash_layer+chemical", fixed=given, reference=REFERENCE)
    assert fit.parameter("activation_energy_chemical").value == 46.0
    assert not any("one temperature" in w for w in fit.warnings)


def test_reagent_order_is_found_from_two_strengths():
    made = [
        replace(b, name=f"{b.name}_{g:g}", reagent_g_per_L=g) for b in bottles() for g in (5, 20)
    ]
    tests = simulate_observed(TRUTH, made, head_kg_per_t=6.8, seed=5)
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE, reagent_order="free")
    order = fit.parameter("reagent_order")
    assert abs(order.value - 1.0) < 3.5 * order.standard_error and order.standard_error < 0.05


def test_falling_reagent_enters_exactly_and_is_remarked():
    history = History(np.array([0.0, 100.0, 240.0]), np.full(3, 298.15), np.array([20.0, 6.0, 4.0]))
    sizes = SizeDistribution.single(5.641)
    truth = replace(TRUTH, ultimate_size_mm=[5.641], ultimate=[0.84])
    # the grain path in small steps, an independent way through the same history
    path = extraction_along(
        truth,
        sizes,
        HOURS,
        reagent_g_per_L=lambda t: np.interp(t, history.time_h, history.reagent_g_per_L),
        steps_per_interval=400,
    )
    sd = np.full(HOURS.size, 0.005)
    tests = (
        replace(
            observed_from_extraction(HOURS, path, sd, sizes=sizes),
            history=history,
            reagent_g_per_L=20.0,
        ),
    )
    given = {"activation_energy_chemical": 46.0, "activation_energy_ash_layer": 19.0}
    fit = fit_tests(tests, "ash_layer+chemical", fixed=given, reference=REFERENCE)
    assert_allclose(fit.parameter("tau_ash_layer").value, 7.0, rtol=1e-4)
    assert_allclose(fit.parameter("tau_chemical").value, 3.0, rtol=1e-3)
    assert any("reagent fell below half" in w for w in fit.warnings)


def test_temperature_that_strays_is_remarked():
    tests = list(copper())
    log = History(np.array([0.0, 2.0]), np.array([293.15, 298.15]), np.full(2, 20.0))
    tests[0] = replace(tests[0], history=log)
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    assert any("temperature strays" in w and "A25 (by 5.0 K)" in w for w in fit.warnings)


def test_a_test_without_values_is_left_out_and_named():
    tests = list(copper())
    empty = np.zeros(0)
    tests[8] = replace(
        tests[8],
        operator=np.zeros((0, HOURS.size)),
        offset=empty,
        brought=empty,
        value=empty,
        sd=empty,
        bound=np.zeros(0, dtype=int),
        row_kind=(),
        row_time_h=empty,
    )
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    assert fit.n_tests == 8 and "no measured value left in C55" in fit.warnings[0]


def test_extractions_without_precision_use_the_scatter_found():
    tests = [
        observed_from_extraction(
            HOURS,
            TRUTH.extraction(HOURS, b.sizes, b.temperature_K) + 0.004 * np.cos(3 * HOURS + i),
            test=b.name,
            sizes=b.sizes,
            temperature_K=b.temperature_K,
        )
        for i, b in enumerate(bottles())
    ]
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    assert fit.estimate.student_degrees == 81 - 7
    assert 0.001 < fit.residual_sd < 0.006
    assert_allclose(fit.parameter("tau_ash_layer").value, 7.0, rtol=0.1)


def test_sizes_within_a_test_are_integrated():
    ore = SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65, [19.0, 9.5, 4.75, 2.36, 0.6, 0.05])
    made = [replace(b, sizes=ore) for b in bottles() if b.name.startswith("B")]
    truth = replace(TRUTH, ultimate_size_mm=[1.0], ultimate=[0.85])
    tests = simulate_observed(truth, made, head_kg_per_t=6.8, seed=5, noise=EXACT)
    fit = fit_tests(tests, "ash_layer+chemical", ultimate="one", reference=REFERENCE)
    assert_allclose(fit.parameter("tau_ash_layer").value, 7.0, rtol=1e-4)
    assert_allclose(fit.parameter("ultimate").value, 0.85, rtol=1e-6)


def test_values_below_the_limit_are_used_as_limits():
    # the tail is only known to lie below 1.2 kg/t; as a value it would bias the ultimate extraction
    tests = []
    for observed in copper(noise=EXACT):
        value, sd, bound = observed.value.copy(), observed.sd.copy(), observed.bound.copy()
        if observed.test.startswith("A"):
            value[-1], sd[-1], bound[-1] = 1.2, 0.04, -1
        tests.append(replace(observed, value=value, sd=sd, bound=bound, head_sd_kg_per_t=0.07))
    fit = fit_tests(tests, "ash_layer+chemical", reference=REFERENCE)
    assert_allclose(fit.parameter("ultimate_1.416_mm").value, 0.88, rtol=5e-3)
    limits = [r for r in fit.residuals if r.bound == -1]
    assert len(limits) == 3 and all(r.in_sd < 0.1 for r in limits)


def test_empirical_law_over_several_sizes_fits_its_own_exponent():
    fit = fit_tests(copper(), "first_order", reference=REFERENCE)
    assert fit.parameter("size_exponent").method != "held"
    assert any("no theory of size" in w for w in fit.warnings)


def test_draws_carry_the_covariance_through_the_law():
    fit = fit_tests(copper(), "ash_layer+chemical", reference=REFERENCE)
    law = fit.draw(3000, seed=2)
    ln_tau = {r.kind: r.ln_tau for r in law.resistances}
    j, k = fit.names.index("tau_ash_layer"), fit.names.index("tau_chemical")
    found = np.cov(ln_tau["ash_layer"], ln_tau["chemical"])
    assert_allclose(found, fit.covariance[np.ix_([j, k], [j, k])], rtol=0.15)
    assert law.ultimate.shape == (3000, 3) and law.ultimate.max() < 1
    again = fit.draw(3000, seed=2)
    assert (again.ultimate == law.ultimate).all()


def test_names_and_values_are_checked():
    tests = copper()
    with pytest.raises(InputProblems, match="did you mean activation_energy_chemical"):
        fit_tests(tests, "chemical", fixed={"activation_energy_chemcal": 46.0})
    with pytest.raises(InputProblems, match="a name of its own"):
        fit_tests([tests[0], tests[0]], "chemical")
    with pytest.raises(InputProblems, match="no tests"):
        fit_tests([], "chemical")
    with pytest.raises(InputProblems, match="value with a value that is not a number"):
        fit_tests([replace(tests[0], value=tests[0].value * np.nan)], "chemical")
    with pytest.raises(InputProblems, match="'by size', 'by temperature', 'by test', 'one'"):
        fit_tests(tests, "chemical", ultimate="each")


def test_law_names_may_come_in_any_order():
    fit = fit_tests(copper(), "chemical+ash_layer", reference=REFERENCE)
    assert fit.law_name == "ash_layer+chemical"


def test_the_phosphate_law_comes_back_from_its_curves():
    """Ashraf et al., phosphate rock in succinic acid: k0 1.47e6 1/s, Ea 64.92 kJ/mol, R = 8.314.

    Chemical control, unrounded curves at the five temperatures of the print.
    """
    seconds = np.array([300.0, 600.0, 1200.0, 1800.0, 2400.0])
    tests = []
    for kelvin in (313.0, 323.0, 333.0, 343.0, 353.0):
        k = 1.47e6 * math.exp(-64920.0 / (8.314 * kelvin))
        X = 1.0 - (1.0 - k * seconds) ** 3
        tests.append(
            observed_from_extraction(seconds, X, 1e-3, test=f"{kelvin:g}", temperature_K=kelvin)
        )
    fit = fit_tests(tests, "chemical", ultimate=1.0)
    energy = fit.parameter("activation_energy_chemical").value
    printed = energy * 8.314 / GAS_CONSTANT_J_per_mol_K
    k_ref = 1.0 / fit.parameter("tau_chemical").value
    k0 = k_ref * math.exp(printed * 1000.0 / (8.314 * fit.law.reference.temperature_K))
    assert printed == pytest.approx(64.92, rel=1e-6)
    assert k0 == pytest.approx(1.47e6, rel=1e-6)
