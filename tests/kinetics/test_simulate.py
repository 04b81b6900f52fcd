from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Bottle,
    GangueLaw,
    Noise,
    RateLaw,
    Reference,
    Resistance,
    fit_tests,
    observed_of,
    simulate_observed,
    simulate_tests,
    solution_operator,
)
from leachkin.testwork import Assays, Head, History, Product, SizeDistribution, Test, observe

HOURS = np.array([2.0, 6, 24, 72, 240])
LAW = RateLaw(
    "chemical",
    (Resistance("chemical", np.log(60.0), 46.0),),
    Reference(298.15, 20.0, 1.416),
    [1.0],
    [0.85],
)
BOTTLE = Bottle("A25", SizeDistribution.single(1.416), 298.15, HOURS, 20.0, domain="oxide")
EXACT = Noise(solution=0, tail=0, head=0, residue=0, titration=0)
POLICIES = ("replaced by reagent solution", "replaced by water", "not replaced", "returned")


def test_metal_balance_of_the_worked_bottle():
    # replaced samples: 1000 g, 1500 mL, 20 mL; 0.60/0.90/1.10 mg/L [worked_by_hand]
    bottle = replace(BOTTLE, time_h=np.array([2.0, 6, 24]), solids_g=1000, solution_mL=1500)
    # dissolved [mg]: 0.9, 1.362, 1.68 of a head of 2.230 g/t
    E = np.array([0.9, 1.362, 1.68]) / 2.23
    assert_allclose(2.23 * (solution_operator(bottle) @ E), [0.60, 0.90, 1.10], rtol=1e-12)


@pytest.mark.parametrize("policy", POLICIES)
def test_observed_rows_agree_with_those_made_from_sheets(policy):
    bottle = replace(BOTTLE, aliquots=policy)
    made = simulate_tests(LAW, [bottle], head_kg_per_t=6.8, seed=1)[0]
    m = HOURS.size
    sheet = Test(
        name="A25",
        domain="oxide",
        kind="bottle roll",
        solids_g=500.0,
        solution_mL=1000.0,
        sizes=bottle.sizes,
        temperature_K=298.15,
        reagent_g_per_L=20.0,
        stirring_rpm=None,
        history=History(np.zeros(1), np.full(1, 298.15), np.full(1, 20.0)),
        aliquots=policy,
        time_h=HOURS,
        aliquot_mL=np.full(m, 20.0),
        makeup_mL=np.full(m, np.nan),
        solution={
            "Cu": Assays(made.solution_g_per_L, 0.015 * made.solution_g_per_L, np.zeros(m, int))
        },
        products=(
            Product(
                "residue",
                False,
                made.residue_g,
                {"Cu": (made.tail_kg_per_t, 0.03 * made.tail_kg_per_t, 1)},
            ),
        ),
        heads={"Cu": Head(6.8, 0.136)},
    )
    from_sheet = observe(sheet, "Cu")
    direct = observed_of(made, Noise())
    assert_allclose(direct.operator, from_sheet.operator, rtol=1e-12, atol=1e-15)
    assert_allclose(direct.offset, from_sheet.offset, rtol=1e-12)
    assert_allclose(direct.value, from_sheet.value, rtol=1e-12)
    assert_allclose(direct.sd, from_sheet.sd, rtol=1e-6)
    assert_allclose(direct.head_sd_kg_per_t, from_sheet.head_sd_kg_per_t)


def test_metal_is_conserved_without_noise():
    made = simulate_tests(LAW, [BOTTLE], head_kg_per_t=6.8, seed=1, noise=EXACT)[0]
    in_solution = made.solution_g_per_L[-1] + 0.02 * made.solution_g_per_L[:-1].sum()
    in_residue = made.tail_kg_per_t * made.residue_g / 1000
    assert_allclose(in_solution + in_residue, 6.8 * 0.5, rtol=1e-12)
    observed = simulate_observed(LAW, [BOTTLE], head_kg_per_t=6.8, seed=1, noise=EXACT)[0]
    assert_allclose(observed.expected(made.extraction_true), observed.value, rtol=1e-12)


@pytest.mark.parametrize("policy", POLICIES)
def test_reagent_balance_returns_what_gangue_took(policy):
    gangue = GangueLaw(9.0, 0.8, 14.0, 1 / 0.006, 35.0)
    made = simulate_tests(
        LAW,
        [replace(BOTTLE, aliquots=policy)],
        head_kg_per_t=6.8,
        seed=1,
        noise=EXACT,
        per_metal_kg_per_kg=1.543,
        gangue=gangue,
    )[0]
    assert_allclose(made.gangue_taken_kg_per_t, gangue.taken_kg_per_t(HOURS, 298.15), rtol=1e-10)
    assert_allclose(made.free_reagent_g_per_L, 20.0)
    assert (made.reagent_added_g > 0).all()


def test_noise_has_the_stated_size_and_repeats():
    many = [replace(BOTTLE, name=f"A{i}") for i in range(400)]
    made = simulate_tests(LAW, many, head_kg_per_t=6.8, seed=9)
    heads = np.array([t.head_true_kg_per_t for t in made])
    assert_allclose(heads.std() / 6.8, 0.02, rtol=0.12)
    true = [t.head_true_kg_per_t * solution_operator(t.bottle) @ t.extraction_true for t in made]
    ratio = np.array([t.solution_g_per_L for t in made]) / np.array(true)
    assert_allclose(ratio.std(), 0.015, rtol=0.1)
    again = simulate_tests(LAW, many[5:6], head_kg_per_t=6.8, seed=9)[0]
    assert (again.solution_g_per_L == made[5].solution_g_per_L).all()


def test_two_bottles_of_one_name_are_refused():
    with pytest.raises(InputProblems, match="a name of its own"):
        simulate_tests(LAW, [BOTTLE, BOTTLE], head_kg_per_t=6.8, seed=1)


@pytest.mark.parametrize("name", ["ash_layer+chemical", "first_order"])
def test_a_campaign_along_histories_gives_its_law_back(name):
    """Temperature and strength that change, any law, seeded noise: fitted along the same logs."""
    kinds = {"ash_layer+chemical": ("ash_layer", "chemical"), "first_order": ("clock",)}[name]
    parts = tuple(Resistance(k, np.log(30.0), 30.0, size_exponent=1.0) for k in kinds)
    truth = RateLaw(name, parts, Reference(298.15, 10.0, 2.0), [2.0], [0.85])
    at = np.array([0.0, 10.0, 40.0, 100.0])
    bottles = [
        Bottle(
            f"{kelvin:g}",
            SizeDistribution.single(2.0),
            kelvin,
            np.array([1.0, 3.0, 8.0, 20.0, 45.0, 90.0]),
            10.0,
            history=History(at, kelvin + np.array([0.0, 6.0, 12.0, 4.0]), 10.0 - 0.05 * at),
        )
        for kelvin in (288.15, 303.15)
    ]
    tests = simulate_observed(truth, bottles, head_kg_per_t=5.0, seed=11)
    fit = fit_tests(tests, name, ultimate="one", reference=truth.reference)
    ultimate = fit.parameter("ultimate")
    assert abs(ultimate.value - 0.85) < 3.5 * ultimate.standard_error
    for kind in kinds:
        time = "k" if kind == "clock" else f"tau_{kind}"
        value = 1.0 / 30.0 if kind == "clock" else 30.0
        found = fit.parameter(time)
        assert abs(np.log(found.value / value)) < 3.5 * found.standard_error / found.value
