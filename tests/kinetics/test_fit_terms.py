"""Drives, optional terms and a second fraction inside a fit."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Drive,
    DriveForm,
    RateLaw,
    Reference,
    Resistance,
    fit_tests,
)
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_options import FitOptions
from leachkin.kinetics.fit_setup import layout_of
from leachkin.testwork import History, SizeDistribution
from tests.kinetics.bench import NOISE, ORE, TIME_H, conditions, history, law, near, observed

# --- derivatives: every path against differences, every quantity at once


CASES = {
    **{kind: {"drive": DriveForm(kind)} for kind in ("two_reagents", "either", "ratio")},
    **{kind: {"drive": DriveForm(kind)} for kind in ("acidity", "solubility")},
    "lag": {"terms": ("lag",)},
    "soluble": {"terms": ("soluble",)},
    "fade": {"terms": ("fade",)},
    "loss": {"terms": ("loss",)},
    "all terms": {"terms": ("lag", "soluble", "fade", "loss")},
    "slow fraction": {"slow_law": "ash_layer"},
    "slow first order": {"slow_law": "first_order"},
    "by temperature": {"ultimate": "by temperature"},
    "spread": {"spread": "free"},
    "by test": {"ultimate": "by test"},
}


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("name", ["film+chemical", "avrami"])
def test_jacobian_against_differences(case, name):
    options = FitOptions(law=name, reagent_order="free", size_exponents="free", **CASES[case])
    tests = conditions(case)
    if case == "spread":
        sizes = map(SizeDistribution.single, (1.0, 2.0, 4.0))
        tests = [replace(o, sizes=size) for o, size in zip(tests, sizes, strict=True)]
    layout, _ = layout_of(options, tests)
    design = FitDesign.of(layout, tests)
    generator = np.random.default_rng(0)
    low, high = (np.array([getattr(q, end) for q in layout.free]) for end in ("low", "high"))
    vector = layout.starts[layout.free_index] + 0.02 * generator.standard_normal(low.size)
    vector = np.clip(vector, low + 1e-3 * (high - low), high)
    _, jacobian = design.residuals_and_jacobian(vector)
    for j, quantity in enumerate(layout.free):
        h = 1e-6 * max(1.0, abs(vector[j]))
        move = h * (np.arange(low.size) == j)
        up, down = (design.residuals_and_jacobian(vector + s * move)[0] for s in (1, -1))
        by = (up - down) / (2 * h)
        scale = np.abs(by).max() + 1.0
        assert_allclose(jacobian[:, j] / scale, by / scale, atol=2e-6, err_msg=quantity.name)


def test_a_batch_of_vectors_is_no_other_path():
    for options in CASES.values():
        tests = conditions("")
        if "spread" in options:
            tests = [replace(o, sizes=SizeDistribution.single(1.0)) for o in tests]
        layout, _ = layout_of(FitOptions(law="ash_layer+chemical", **options), tests)
        design = FitDesign.of(layout, tests)
        base = layout.starts[layout.free_index]
        both = np.stack([base, base + 0.01])
        assert_allclose(design.expected(both)[1], design.expected(base + 0.01), rtol=1e-12)


# --- recovery of known constants


def test_two_reagents_are_told_apart():
    form = Drive("two_reagents", {"reagent": 1.0, "second": 0.008}, {"reagent_order": 0.7,
                 "second_order": 0.4})  # fmt: skip
    tests = []
    for a in (0.5, 1.0, 2.0):
        for b in (0.004, 0.016):
            pace = float(form.rate({"reagent": a, "second": b}))
            own = history([0.0, 48.0], reagent=a)
            own = replace(own, others={"O2": np.full(2, b)})
            E = law().extraction(pace * TIME_H, ORE)
            tests.append(observed(f"{a} {b}", E, reagent_g_per_L=a, history=own))
    fit = fit_tests(
        tests,
        "chemical",
        ultimate="one",
        reagent_order="free",
        drive="two_reagents",
        reference=Reference(reagent_g_per_L=1.0),
    )
    near(fit, "reagent_order", 0.7)
    near(fit, "second_order", 0.4)
    near(fit, "ultimate", 0.88)
    held = fit.law.held_at({"reagent": 2.0, "second": 0.004})
    pace = float(form.rate({"reagent": 2.0, "second": 0.004}))
    assert_allclose(
        held.extraction(TIME_H, ORE), law().extraction(pace * TIME_H, ORE), atol=3 * NOISE
    )


def test_the_scarcer_reagent_is_found():
    form = Drive("either", {"reagent": 0.5, "second": 0.008}, {"preference": 2.5})
    tests = []
    for a in (0.1, 0.5, 2.5):
        for b in (0.002, 0.008, 0.032):
            pace = float(form.rate({"reagent": a, "second": b}))
            own = replace(history([0.0, 48.0], reagent=a), others={"O2": np.full(2, b)})
            E = law().extraction(pace * TIME_H, ORE)
            tests.append(observed(f"{a} {b}", E, reagent_g_per_L=a, history=own))
    fit = fit_tests(tests, "chemical", ultimate="one", drive="either")
    found = fit.parameter("preference")
    reference = fit.law.drive.reference
    truth = 2.5 * (reference["second"] / 0.008) / (reference["reagent"] / 0.5)
    assert abs(np.log(found.value / truth)) < 3.5 * found.standard_error / found.value


def test_a_changing_solution_enters_exactly():
    """Ratio of Fe3+ to Fe2+ that falls: the drive is summed along the way."""
    form = Drive("ratio", {"oxidised": 3.0, "reduced": 1.0}, {"saturation": 0.8})
    at = np.linspace(0.0, 48.0, 200)
    oxidised, reduced = 3.0 - 0.05 * at, 1.0 + 0.04 * at
    rate = form.rate({"oxidised": oxidised, "reduced": reduced})
    hours = np.concatenate([[0.0], np.cumsum(0.5 * (rate[1:] + rate[:-1]) * np.diff(at))])
    tests = []
    for i, lift in enumerate((1.0, 4.0)):
        pace = form.rate({"oxidised": lift * oxidised, "reduced": reduced})
        hours = np.concatenate([[0.0], np.cumsum(0.5 * (pace[1:] + pace[:-1]) * np.diff(at))])
        own = History(at, np.full(200, 298.15), None, {"Fe3+": lift * oxidised, "Fe2+": reduced})
        E = law().extraction(np.interp(TIME_H, at, hours), ORE)
        tests.append(observed(f"r{i}", E, history=own))
    fit = fit_tests(tests, "chemical", ultimate="one", drive="ratio")
    reference = fit.law.drive.reference
    found = fit.parameter("saturation")
    truth = 0.8 * (reference["oxidised"] / reference["reduced"]) / 3.0
    assert abs(np.log(found.value / truth)) < 3.5 * found.standard_error / found.value
    near(fit, "ultimate", 0.88)


@pytest.mark.parametrize(
    ("terms", "truth", "name", "value"),
    [
        (("lag",), {"lag_h": 1.3}, "lag", 1.3),
        (("soluble",), {"soluble_share": 0.2}, "soluble_share", 0.2),
        (("fade",), {"fade_per_h": 0.05}, "fade", 0.05),
    ],
)
def test_terms_come_back(terms, truth, name, value):
    tests = [
        observed(f"{kelvin:g}", law(**truth).extraction(TIME_H, ORE, kelvin), temperature_K=kelvin)
        for kelvin in (288.15, 298.15, 313.15)
    ]
    fit = fit_tests(
        tests, "chemical", ultimate="one", terms=terms, reference=Reference(size_mm=1.0)
    )
    near(fit, name, value)
    near(fit, "ultimate", 0.88)
    near(fit, "activation_energy_chemical", 46.0)
    near(fit, "tau_chemical", 12.0 * float(np.exp(0.0)))
    drawn = fit.draw(50, 3)
    assert drawn.extraction(TIME_H, ORE).shape == (50, TIME_H.size)


def test_loss_from_solution_comes_back_and_is_tied_to_the_tail():
    """A curve that falls again: without the loss the ultimate would be taken too low."""
    from scipy.integrate import solve_ivp

    truth = law()
    Q, k = 0.12, 0.15

    def slope(t, lost):
        E = float(truth.extraction(max(t, 0.0), ORE))
        return k * (E - lost) * (1.0 - lost / Q)

    lost = solve_ivp(slope, (0.0, 48.0), [0.0], t_eval=TIME_H, rtol=1e-9, atol=1e-11).y[0]
    tests = [observed(f"{i}", truth.extraction(TIME_H, ORE) - lost, seed=i) for i in range(3)]
    fit = fit_tests(
        tests, "chemical", ultimate="one", terms=("loss",), reference=Reference(size_mm=1.0)
    )
    near(fit, "loss_capacity", Q)
    near(fit, "ultimate", 0.88)
    without = fit_tests(tests, "chemical", ultimate="one", reference=Reference(size_mm=1.0))
    assert without.sum_of_squares > 3.0 * fit.sum_of_squares
    assert without.parameter("ultimate").value < 0.82


def test_two_fractions_come_back():
    slow = RateLaw("chemical", (Resistance("chemical", np.log(150.0)),), Reference(), [1.0], [1.0])
    truth = law(slow=slow, slow_share=0.35)
    time = np.geomspace(0.3, 200.0, 14)
    tests = [
        observed(f"{i}", truth.extraction(time, ORE), seed=i, time_h=time, noise=0.002)
        for i in range(3)
    ]
    fit = fit_tests(
        tests,
        "chemical",
        ultimate="one",
        slow_law="chemical",
        reference=Reference(size_mm=1.0),
        fixed={"activation_energy_chemical": 46.0},
    )
    near(fit, "slow_share", 0.35)
    near(fit, "slow_tau_chemical", 150.0)
    near(fit, "tau_chemical", 12.0)
    near(fit, "ultimate", 0.88)
    assert_allclose(fit.law.extraction(time, ORE), truth.extraction(time, ORE), atol=0.004)


def test_a_share_known_from_assays_is_a_prior():
    slow = RateLaw("chemical", (Resistance("chemical", np.log(150.0)),), Reference(), [1.0], [1.0])
    tests = [observed("a", law(slow=slow, slow_share=0.35).extraction(TIME_H, ORE))]
    same = {"ultimate": "one", "slow_law": "chemical", "reference": Reference(size_mm=1.0)}
    loose = fit_tests(tests, "chemical", **same).parameter("slow_share")
    tight = fit_tests(tests, "chemical", priors={"slow_share": (0.35, 0.01)}, **same)
    share = tight.parameter("slow_share")
    assert share.standard_error < 0.0101
    assert abs(share.value - 0.35) < 0.01 < abs(loose.value - 0.35)


def test_ultimate_by_temperature_comes_back():
    truth = law(ultimate=[0.7, 0.85], ultimate_temperature_K=np.array([288.15, 313.15]))
    tests = [
        observed(f"{kelvin:g}", truth.extraction(TIME_H, ORE, kelvin), temperature_K=kelvin)
        for kelvin in (288.15, 313.15)
    ]
    fit = fit_tests(tests, "chemical", ultimate="by temperature")
    near(fit, "ultimate_288.1_K", 0.7)
    near(fit, "ultimate_313.1_K", 0.85)


def test_an_ultimate_for_each_test_where_the_charges_ask_for_it():
    from leachkin.kinetics import tests_of_need as needs_of

    truths = {"a": 0.70, "b": 0.80, "c": 0.90}
    tests = [
        observed(name, law(ultimate=[u]).extraction(TIME_H, ORE)) for name, u in truths.items()
    ]
    same = {"ultimate": "one", "reference": Reference(size_mm=1.0)}
    fit = fit_tests(tests, "chemical", **{**same, "ultimate": "by test"})
    for name, truth in truths.items():
        near(fit, f"ultimate_{name}", truth)
    near(fit, "tau_chemical", 12.0)
    mean = np.mean([fit.parameter(f"ultimate_{name}").value for name in truths])
    assert float(fit.law.ultimate[0]) == pytest.approx(mean)
    assert needs_of(tests, "chemical", ["ultimate by test"], **same)[0].needed
    alike = [observed(name, law().extraction(TIME_H, ORE)) for name in truths]
    assert not needs_of(alike, "chemical", ["ultimate by test"], **same)[0].needed


def test_a_spread_comes_back_where_only_p80_is_known():
    tests = []
    for p80 in (0.5, 1.0, 2.0):
        median = p80 * np.exp(-0.8416212 * np.sqrt(np.log1p(0.9**2)))
        sizes = SizeDistribution.log_normal(float(median), 0.9, 61)
        E = law().extraction(TIME_H, sizes)
        one = observed(f"{p80:g}", E, noise=0.002)
        tests.append(replace(one, sizes=SizeDistribution.single(p80)))
    same = {"ultimate": "one", "reference": Reference(size_mm=1.0)}
    fit = fit_tests(tests, "chemical", spread="free", **same)
    found = fit.parameter("spread")
    assert abs(np.log(found.value / 0.9)) < 3.5 * found.standard_error / found.value
    near(fit, "tau_chemical", 12.0)
    single = fit_tests(tests, "chemical", **same)
    assert single.sum_of_squares > 10.0 * fit.sum_of_squares


def test_stirring_moves_the_film_only():
    tests = []
    for rpm in (150.0, 300.0, 600.0):
        parts = (
            Resistance("film", np.log(10.0), stirring_exponent=0.6),
            Resistance("chemical", np.log(8.0)),
        )
        truth = RateLaw("film+chemical", parts, Reference(stirring_rpm=300.0), [1.0], [0.88])
        E = truth.extraction(TIME_H, ORE, stirring_rpm=rpm)
        tests.append(observed(f"{rpm:g}", E, stirring_rpm=rpm, noise=0.001))
    fit = fit_tests(
        tests,
        "film+chemical",
        ultimate="one",
        reference=Reference(size_mm=1.0, stirring_rpm=300.0),
    )
    near(fit, "stirring_exponent_film", 0.6)
    near(fit, "tau_film", 10.0)


# --- refusals


def test_what_a_drive_lacks_is_asked_for():
    tests = [observed("a", 0.5 * TIME_H / 48.0, history=history([0.0, 48.0]))]
    with pytest.raises(InputProblems, match="test a: no readings of O2.*a column O2"):
        fit_tests(tests, "chemical", drive="either")
    with pytest.raises(InputProblems, match="unknown term 'lags'.*did you mean lag"):
        fit_tests(tests, "chemical", terms=("lags",))
    with pytest.raises(InputProblems, match="renewal without a reagent balance"):
        fit_tests(tests, "chemical", terms=("renewal",))
    with pytest.raises(InputProblems, match="unknown resistance 'chemcal'"):
        fit_tests(tests, "chemical", reagent_order={"chemcal": 1.0})
