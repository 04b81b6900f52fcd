import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Bottle,
    Drive,
    RateLaw,
    Reference,
    Resistance,
    extraction_along,
    simulate_observed,
    simulate_tests,
    true_extraction,
)
from leachkin.testwork import History, SizeDistribution

HOURS = np.array([1.0, 3.0, 8.0, 20.0, 45.0])
REFERENCE = Reference(298.15, 10.0, 2.0, 300.0)
ORE = SizeDistribution.log_normal(2.0, 0.6, 9)
AT = np.array([0.0, 10.0, 50.0])
FALLING = History(AT, np.full(3, 298.15), np.array([10.0, 6.0, 4.0]))
WARMING = History(AT, np.array([298.15, 310.0, 305.0]), np.array([10.0, 6.0, 4.0]))


def law(name="chemical", kinds=("chemical",), order=1.0, **more):
    parts = tuple(Resistance(kind, np.log(40.0), 30.0, order=order) for kind in kinds)
    return RateLaw(name, parts, REFERENCE, [2.0], [0.9], **more)


def bottle(history=None, **more):
    settings = {"aliquot_mL": 0.0, "aliquots": "returned", "history": history} | more
    return Bottle("one", ORE, 298.15, HOURS, 10.0, **settings)


@pytest.mark.parametrize("name", ["chemical", "ash_layer+chemical", "first_order"])
@pytest.mark.parametrize("history", [FALLING, WARMING])
def test_histories_agree_with_grains_stepped_along_them(name, history):
    kinds = ("clock",) if name == "first_order" else tuple(name.split("+"))
    truth = law(name, kinds)
    stepped = extraction_along(
        truth,
        ORE,
        HOURS,
        lambda t: float(np.interp(t, AT, history.temperature_K)),
        lambda t: float(np.interp(t, AT, history.reagent_g_per_L)),
        200,
    )
    assert_allclose(true_extraction(truth, bottle(history)), stepped, rtol=1e-4)


def test_grains_where_no_one_clock_serves():
    truth = RateLaw(
        "ash_layer+chemical",
        (Resistance("ash_layer", 3.0, 19.0), Resistance("chemical", 3.0, 46.0, order=0.7)),
        REFERENCE,
        [2.0],
        [0.9],
    )
    assert not truth.shared_clock()
    stepped = extraction_along(
        truth,
        ORE,
        HOURS,
        lambda t: float(np.interp(t, AT, WARMING.temperature_K)),
        lambda t: float(np.interp(t, AT, WARMING.reagent_g_per_L)),
        100,
    )
    assert_allclose(true_extraction(truth, bottle(WARMING)), stepped, rtol=3e-4)
    with pytest.raises(InputProblems, match="a lag or a fade"):
        true_extraction(
            RateLaw("ash_layer+chemical", truth.resistances, REFERENCE, [2.0], [0.9], lag_h=1.0),
            bottle(WARMING),
        )


def test_a_reagent_that_is_gone_stops_the_clock():
    """First order in a strength that falls as exp(-t/T): T (1 - exp(-t/T)) equivalent hours."""
    at = np.linspace(0.0, 50.0, 4001)
    gone = History(at, np.full(at.size, 298.15), 10.0 * np.exp(-at / 8.0))
    truth = law()
    expected = truth.extraction(8.0 * -np.expm1(-HOURS / 8.0), ORE)
    assert_allclose(true_extraction(truth, bottle(gone)), expected, rtol=1e-5)


def test_lag_fade_and_soluble_share_along_a_history():
    truth = law(lag_h=2.0, fade_per_h=0.02, soluble_share=0.1)
    found = true_extraction(truth, bottle(FALLING))
    assert found[0] == pytest.approx(0.9 * 0.1)  # before the lag is over
    # equivalent hours by 3 h: 10 g/L falling by 0.4 g/L each hour, over 10 g/L
    hours = 3.0 - 0.02 * 9.0
    assert found[1] == pytest.approx(float(truth.extraction(hours, ORE)), rel=1e-9)
    held = true_extraction(truth, bottle())
    assert_allclose(held, truth.extraction(HOURS, ORE), rtol=1e-12)


def test_two_reagents_by_their_own_drive():
    drive = Drive(
        "two_reagents",
        {"reagent": 10.0, "second": 8.0},
        {"reagent_order": 1.0, "second_order": 0.5},
    )
    truth = law(drive=drive)
    half = History(np.zeros(1), np.full(1, 298.15), np.full(1, 10.0), {"O2": np.full(1, 2.0)})
    found = true_extraction(truth, bottle(half))
    assert_allclose(found, truth.extraction(HOURS * 0.5, ORE), rtol=1e-12)


def test_a_metal_near_its_solubility_needs_its_history():
    drive = Drive(
        "solubility",
        {"reagent": 10.0, "metal": 1.0},
        {"reagent_order": 1.0, "solubility_g_per_L": 4.0},
    )
    with pytest.raises(InputProblems, match="near its solubility"):
        true_extraction(law(drive=drive), bottle())


def test_stirring_reaches_the_law_and_the_fit():
    part = (Resistance("film", np.log(40.0), stirring_exponent=0.5),)
    truth = RateLaw("film", part, REFERENCE, [2.0], [0.9])
    fast = bottle(stirring_rpm=1200.0)  # four times the reference: twice the rate
    assert_allclose(true_extraction(truth, fast), truth.extraction(2.0 * HOURS, ORE), rtol=1e-12)
    observed = simulate_observed(truth, [fast], head_kg_per_t=5.0, seed=1)
    assert observed[0].stirring_rpm == 1200.0


def test_make_up_moves_the_strength_until_the_next_reading():
    made = simulate_tests(
        law(),
        [bottle(FALLING, aliquot_mL=100.0, aliquots="replaced by reagent solution")],
        head_kg_per_t=5.0,
        seed=1,
    )[0]
    course = made.history
    at_20 = 10.0 - 4.0 - 2.0 * 10.0 / 40.0
    # 900 mL at the strength of the reading and 100 mL at the start's
    after = np.interp(20.0 + 1e-5, course.time_h, course.reagent_g_per_L)
    assert after == pytest.approx(0.9 * at_20 + 0.1 * 10.0, rel=1e-5)
    assert np.interp(45.0, course.time_h, course.reagent_g_per_L) == pytest.approx(4.25)
    assert (made.reagent_added_g == 0.0).all()


def test_what_the_ore_took_closes_the_reagent_balance():
    still = bottle(FALLING, aliquot_mL=20.0, aliquots="not replaced")
    made = simulate_tests(law(), [still], head_kg_per_t=5.0, seed=1)[0]
    # 1 L at 10 g/L; at 3 h 8.8 g/L in 980 mL and 20 mL of 9.6 g/L drawn, from 500 g
    assert made.reagent_taken_kg_per_t[1] == pytest.approx(2.0 * (10.0 - 8.8 * 0.98 - 0.192))


def test_one_start_for_bottle_and_history():
    other = History(AT, np.full(3, 298.15), np.array([12.0, 6.0, 4.0]))
    with pytest.raises(InputProblems, match="one starting strength"):
        true_extraction(law(), bottle(other))
