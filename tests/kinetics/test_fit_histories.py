"""Temperatures, orders and reagents that change along a test, inside a fit."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.kinetics import (
    RateLaw,
    ReagentBalance,
    Reference,
    Resistance,
    extraction_along,
    fit_tests,
)
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_grains import GrainSteps
from leachkin.kinetics.fit_options import FitOptions
from leachkin.kinetics.fit_setup import layout_of
from leachkin.kinetics.leave_out import predicted_rows
from leachkin.testwork import History, Observed
from tests.kinetics.bench import NOISE, ORE, TIME_H, conditions, law, near, observed

# --- no one clock: the march


def warming(kelvin: float) -> History:
    at = np.array([0.0, 10.0, 30.0, 48.0])
    return History(at, kelvin + np.array([0.0, 8.0, 15.0, 10.0]))


def marched_tests(noise: float) -> list[Observed]:
    found = []
    for kelvin in (288.15, 303.15):
        own = warming(kelvin)
        E = extraction_along(
            law("ash_layer+chemical"),
            ORE,
            TIME_H,
            lambda t, own=own: float(np.interp(t, own.time_h, own.temperature_K)),
            steps_per_interval=400,
        )
        found.append(observed(f"{kelvin:g}", E, temperature_K=kelvin, history=own, noise=noise))
    return found


def test_a_logged_temperature_moves_each_resistance_by_its_own_energy():
    tests = marched_tests(0.0)
    same = {"ultimate": "one", "reference": Reference(size_mm=1.0)}
    fit = fit_tests(tests, "ash_layer+chemical", **same)
    assert fit.design.path.grains is not None
    assert fit.parameter("tau_ash_layer").value == pytest.approx(20.0, rel=4e-3)
    assert fit.parameter("activation_energy_ash_layer").value == pytest.approx(19.0, abs=0.4)
    assert fit.parameter("activation_energy_chemical").value == pytest.approx(46.0, abs=0.8)
    blind = fit_tests([replace(o, history=None) for o in tests], "ash_layer+chemical", **same)
    assert abs(blind.parameter("tau_ash_layer").value / 20.0 - 1.0) > 0.1


def test_grains_and_clock_agree_where_both_serve():
    """One energy for both resistances at a changing temperature and strength: one clock, exactly.

    Of the grains second order in the step, so that the difference is that of the steps.
    """
    at = np.array([0.0, 10.0, 30.0, 48.0])
    own = History(at, 298.15 + np.zeros(4), np.array([10.0, 8.0, 6.0, 4.0]))
    tests = [observed("a", 0.5 * TIME_H / 48.0, history=own, reagent_g_per_L=10.0)]
    options = FitOptions(law="ash_layer+chemical", ultimate="one", reagent_order="free")
    layout, _ = layout_of(options, tests)
    clock = FitDesign.of(layout, tests)
    assert clock.path.grains is None
    grains = GrainSteps.of(layout, tests, clock.elements)
    by_grains = replace(clock, path=replace(clock.path, grains=grains))
    vector = layout.starts[layout.free_index]
    assert_allclose(by_grains.expected(vector), clock.expected(vector), atol=1e-5)
    found, exact = (one.residuals_and_jacobian(vector)[1] for one in (by_grains, clock))
    assert_allclose(found * NOISE, exact * NOISE, atol=3e-5)


@pytest.mark.parametrize("law", ["ash_layer+chemical", "series"])
def test_grain_derivatives_against_differences(law):
    """Energies, orders by resistance, exponents, times, at a temperature and strength that move."""
    tests = [
        replace(o, history=replace(o.history, temperature_K=o.temperature_K + np.arange(4.0)))
        for o in conditions("")
    ]
    orders = {"chemical": "free", "ash_layer": "free"}
    layout, _ = layout_of(
        FitOptions(law=law, reagent_order=orders, size_exponents="free", ultimate="one"), tests
    )
    design = FitDesign.of(layout, tests)
    assert design.path.grains is not None
    vector = layout.starts[layout.free_index]
    _, jacobian = design.residuals_and_jacobian(vector)
    for j, quantity in enumerate(layout.free):
        h = 1e-5 * max(1.0, abs(vector[j]))
        move = h * (np.arange(vector.size) == j)
        up, down = (design.residuals_and_jacobian(vector + s * move)[0] for s in (1, -1))
        by = (up - down) / (2 * h)
        scale = np.abs(by).max() + 1.0
        assert_allclose(jacobian[:, j] / scale, by / scale, atol=2e-6, err_msg=quantity.name)
    both = np.stack([vector, vector + 0.01])
    assert_allclose(design.expected(both)[1], design.expected(vector + 0.01), rtol=1e-12)


@pytest.mark.slow
def test_the_grains_of_a_fit_step_as_those_of_the_law():
    tests = marched_tests(0.0)
    layout, _ = layout_of(FitOptions(law="ash_layer+chemical", ultimate="one"), tests)
    design = FitDesign.of(layout, tests)
    vector = layout.starts[layout.free_index]
    fitted = layout.law(vector)
    for one, E in zip(tests, design.extractions(vector), strict=True):
        own = one.history
        alone = extraction_along(
            fitted,
            ORE,
            TIME_H,
            lambda t, own=own: float(np.interp(t, own.time_h, own.temperature_K)),
            steps_per_interval=400,
        )
        assert_allclose(E, alone, atol=2e-3)


def test_orders_by_resistance():
    parts = (
        Resistance("ash_layer", np.log(20.0), order=1.0),
        Resistance("chemical", np.log(8.0), order=0.4),
    )
    truth = RateLaw("ash_layer+chemical", parts, Reference(reagent_g_per_L=10.0), [1.0], [0.88])
    tests = [
        observed(
            f"{strength:g}",
            truth.extraction(TIME_H, ORE, reagent_g_per_L=strength),
            reagent_g_per_L=strength,
            noise=0.002,
        )
        for strength in (3.0, 10.0, 30.0)
    ]
    fit = fit_tests(
        tests,
        "ash_layer+chemical",
        ultimate="one",
        reagent_order={"chemical": "free"},
        reference=Reference(size_mm=1.0, reagent_g_per_L=10.0),
    )
    near(fit, "order_chemical", 0.4)
    near(fit, "tau_ash_layer", 20.0)
    assert not fit.law.shared_clock()


# --- a reagent by its own balance


def run_down(seed: int, noise: float = NOISE, renewal: float = 0.0) -> list[Observed]:
    """Acid that the ore itself spends, to 30 % of its start: by an integrator of its own."""
    from scipy.integrate import solve_ivp

    truth = law()
    found = []
    for i, start in enumerate((6.0, 20.0)):

        def slopes(_t, state, start=start):
            s, C = state
            E1, E0 = (float(truth.extraction(max(s, 0.0) + h, ORE)) for h in (1e-4, 0.0))
            pace = max(C, 0.0) / 10.0
            return [pace, -4.0 * (E1 - E0) / 1e-4 * pace + renewal * (start - C)]

        path = solve_ivp(slopes, (0.0, 48.0), [0.0, start], t_eval=TIME_H, rtol=1e-8, atol=1e-8)
        E = truth.extraction(path.y[0], ORE)
        found.append(observed(f"{start:g}", E, seed=seed + i, noise=noise, reagent_g_per_L=start))
    return found


def balances(renewal: float = 0.0) -> dict[str, ReagentBalance]:
    return {
        f"{start:g}": ReagentBalance(
            start, solids_kg_per_m3=500.0, per_metal_kg_per_kg=8.0, renewal_per_h=renewal
        )
        for start in (6.0, 20.0)
    }


REF = Reference(size_mm=1.0, reagent_g_per_L=10.0)


def test_a_reagent_by_balance_gives_the_law_back():
    """E counts on a head of 1 kg/t: 500 kg/m3 and 8 kg/kg take 4 g/L per unit of E."""
    exact = fit_tests(
        run_down(0, 0.0), "chemical", ultimate="one", reference=REF, balances=balances()
    )
    assert exact.parameter("tau_chemical").value == pytest.approx(12.0, rel=3e-3)
    assert exact.parameter("ultimate").value == pytest.approx(0.88, abs=1e-3)
    noisy = fit_tests(run_down(3), "chemical", ultimate="one", reference=REF, balances=balances())
    near(noisy, "tau_chemical", 12.0)
    held = fit_tests(run_down(3), "chemical", ultimate="one", reference=REF)
    assert held.parameter("tau_chemical").value > 1.1 * 12.0


def test_a_test_left_out_is_predicted_with_its_own_balance():
    tests = run_down(3, 0.0)
    fit = fit_tests(tests[1:], "chemical", ultimate="one", reference=REF, balances=balances())
    own = predicted_rows(fit, tests[0], balances()["6"])
    assert_allclose(own, tests[0].value, atol=3e-3)
    blind = predicted_rows(fit, tests[0])
    assert np.abs(blind - tests[0].value).max() > 0.05


def test_a_renewed_reagent_is_found():
    fit = fit_tests(
        run_down(1, 0.002, renewal=0.05),
        "chemical",
        ultimate="one",
        reference=REF,
        balances=balances(),
        terms=("renewal",),
    )
    near(fit, "renewal", 0.05)
    near(fit, "tau_chemical", 12.0)
