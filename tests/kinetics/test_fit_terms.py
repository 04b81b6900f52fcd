"""Drives, optional terms, a second fraction, orders and temperatures inside a fit."""

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
    extraction_along,
    fit_tests,
)
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_march import MarchPath
from leachkin.kinetics.fit_options import FitOptions
from leachkin.kinetics.fit_setup import layout_of
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.testwork import History, Observed, SizeDistribution, observed_from_extraction

TIME_H = np.array([0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 30.0, 48.0])
ORE = SizeDistribution.from_classes([0.5, 1.0, 2.0, 4.0], [0.3, 0.4, 0.3])
NOISE = 0.004


def law(name: str = "chemical", **more) -> RateLaw:
    parts = {
        "chemical": (Resistance("chemical", np.log(12.0), 46.0),),
        "ash_layer+chemical": (
            Resistance("ash_layer", np.log(20.0), 19.0),
            Resistance("chemical", np.log(8.0), 46.0),
        ),
        "first_order": (Resistance("clock", np.log(6.0), 46.0),),
    }[name]
    ultimate = more.pop("ultimate", [0.88])
    reference = more.pop("reference", Reference())
    return RateLaw(name, parts, reference, [1.0], ultimate, **more)


def observed(test: str, E, seed: int = 5, noise: float = NOISE, time_h=TIME_H, **more) -> Observed:
    generator = np.random.default_rng([seed, len(test), *map(ord, test)])
    values = np.asarray(E) + noise * generator.standard_normal(time_h.size)
    sd = max(noise, 1e-6)
    return observed_from_extraction(time_h, values, sd, test=test, sizes=ORE, **more)


def history(time_h, *, temperature_K=298.15, reagent=10.0, **others) -> History:
    time = np.asarray(time_h, dtype=float)
    full = np.ones(time.size)
    return History(
        time,
        full * temperature_K,
        full * reagent,
        {name.replace("_", "+"): full * value for name, value in others.items()},
    )


def near(fit, name: str, truth: float, errors: float = 3.5) -> None:
    found = fit.parameter(name)
    assert found.standard_error is not None, f"{name}: {found.why_no_interval}"
    assert abs(found.value - truth) <= errors * found.standard_error, f"{name}: {found}"


# --- derivatives: every path against differences, every quantity at once


def conditions(kind: str) -> list[Observed]:
    """Three tests that differ in all that a drive may read, with histories."""
    found = []
    for i, (kelvin, strength) in enumerate([(298.15, 10.0), (313.15, 20.0), (298.15, 5.0)]):
        at = np.array([0.0, 6.0, 20.0, 48.0])
        own = History(
            at,
            kelvin + np.zeros(4),
            strength * np.array([1.0, 0.8, 0.7, 0.5]),
            {
                "O2": np.array([8.0, 6.0, 7.0, 8.0]) / 1000.0 * (1 + i),
                "Fe3+": np.array([3.0, 2.0, 1.5, 1.0]) + i,
                "Fe2+": np.array([0.5, 1.0, 1.5, 2.0]),
                "pH": np.array([1.5, 1.6, 1.8, 2.0]) + 0.1 * i,
                "Cu": np.array([0.0, 1.0, 2.0, 3.0]),
            },
        )
        found.append(
            observed(
                f"t{i}",
                0.5 * (1 - np.exp(-TIME_H / 10)),
                temperature_K=kelvin,
                reagent_g_per_L=strength,
                history=own,
                key="ore/Cu",
                stirring_rpm=100.0 * (i + 1),
            )
        )
    return found


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
    assert isinstance(fit.design.path, MarchPath)
    assert fit.parameter("tau_ash_layer").value == pytest.approx(20.0, rel=4e-3)
    assert fit.parameter("activation_energy_ash_layer").value == pytest.approx(19.0, abs=0.4)
    assert fit.parameter("activation_energy_chemical").value == pytest.approx(46.0, abs=0.8)
    blind = fit_tests([replace(o, history=None) for o in tests], "ash_layer+chemical", **same)
    assert abs(blind.parameter("tau_ash_layer").value / 20.0 - 1.0) > 0.1


def test_march_and_clock_agree_where_both_serve():
    """One resistance at a changing temperature: exact by the sum, second order by the march."""
    own = warming(298.15)
    tests = [observed("a", 0.5 * TIME_H / 48.0, history=own)]
    layout, _ = layout_of(FitOptions(law="chemical", ultimate="one"), tests)
    clock = FitDesign.of(layout, tests)
    assert not isinstance(clock.path, MarchPath)
    march = replace(clock, path=MarchPath.of(layout, tests))
    vector = layout.starts[layout.free_index]
    assert_allclose(march.expected(vector), clock.expected(vector), atol=2e-5)
    by_march, by_clock = (one.residuals_and_jacobian(vector)[1] * NOISE for one in (march, clock))
    assert_allclose(by_march, by_clock, atol=1e-4)


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
