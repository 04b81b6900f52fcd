"""Drives: limits, derivatives, and what a law makes of them."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import Drive, DriveForm, RateLaw, Reference, Resistance, ln_drive
from leachkin.testwork import SizeDistribution

ORE = SizeDistribution.from_classes([0.25, 1.0, 4.0], [0.4, 0.6])
REFERENCE = {
    "reagent": 1.0,
    "second": 8.0,
    "oxidised": 5.0,
    "reduced": 2.0,
    "pH": 1.5,
    "metal": 0.0,
}
PARAMETERS = {
    "power": {"reagent_order": 0.8},
    "two_reagents": {"reagent_order": 0.7, "second_order": 0.4},
    "either": {"preference": 1.7},
    "ratio": {"saturation": 0.6},
    "acidity": {"reagent_order": 0.9},
    "solubility": {"reagent_order": 1.1, "solubility_g_per_L": 20.0},
}
SOLUTION = {
    "reagent": np.array([0.3, 1.0, 4.0]),
    "second": np.array([2.0, 8.0, 30.0]),
    "oxidised": np.array([1.0, 5.0, 9.0]),
    "reduced": np.array([6.0, 2.0, 0.5]),
    "pH": np.array([2.2, 1.5, 1.0]),
    "metal": np.array([12.0, 0.0, 19.0]),
}


def drive(kind: str, **changed: float) -> Drive:
    return Drive(kind, REFERENCE, {**PARAMETERS[kind], **changed})


def read(kind: str) -> dict[str, np.ndarray]:
    from leachkin.kinetics.drive import READS

    return {name: SOLUTION[name] for name in READS[kind]}


def test_forms_by_hand():
    s = SOLUTION
    assert_allclose(drive("power").rate(read("power")), s["reagent"] ** 0.8)
    assert_allclose(
        drive("two_reagents").rate(read("two_reagents")),
        s["reagent"] ** 0.7 * (s["second"] / 8.0) ** 0.4,
    )
    a, b = s["reagent"], s["second"] / 8.0
    assert_allclose(drive("either").rate(read("either")), a * b / (a + 1.7 * b) * 2.7)
    r = s["oxidised"] / s["reduced"] / 2.5
    assert_allclose(drive("ratio").rate(read("ratio")), 1.6 * r / (1.0 + 0.6 * r))
    assert_allclose(drive("acidity").rate(read("acidity")), 10.0 ** (-0.9 * (s["pH"] - 1.5)))
    assert_allclose(
        drive("solubility").rate(read("solubility")),
        s["reagent"] ** 1.1 * (1.0 - s["metal"] / 20.0),
    )


@pytest.mark.parametrize("kind", PARAMETERS)
def test_the_reference_solution_drives_one_hour_an_hour(kind):
    assert drive(kind).rate({}) == pytest.approx(1.0, rel=1e-15)


@pytest.mark.parametrize("kind", PARAMETERS)
def test_derivatives_against_differences(kind):
    parameters = {name: np.asarray(value) for name, value in PARAMETERS[kind].items()}
    slopes = ln_drive(kind, read(kind), REFERENCE, parameters)[1]
    assert set(slopes) == set(parameters)
    for name, value in parameters.items():
        h = 1e-6 * value
        up, down = (
            ln_drive(kind, read(kind), REFERENCE, {**parameters, name: value + sign * h})[0]
            for sign in (1, -1)
        )
        assert_allclose(slopes[name], (up - down) / (2 * h), rtol=1e-6, atol=1e-9)


def test_the_scarcer_of_two_reagents_rules():
    """Far apart, the form is first order in the scarce one and blind to the other."""
    either = drive("either", preference=1.0)
    assert_allclose(
        either.rate({"reagent": 2e-4, "second": [8.0, 80.0]}), 2 * np.array([2e-4, 2e-4]), rtol=1e-3
    )
    assert_allclose(
        either.rate({"reagent": [1.0, 10.0], "second": 8e-4}), 2 * np.array([1e-4] * 2), rtol=1e-3
    )


def test_a_batch_of_parameters():
    both = Drive("either", REFERENCE, {"preference": np.array([0.5, 1.7])})
    rates = both.rate({"reagent": 0.3, "second": 2.0})
    assert rates.shape == (2,)
    assert both.select(1).rate({"reagent": 0.3, "second": 2.0}) == pytest.approx(rates[1])


def law(kind: str | None = "either", **more) -> RateLaw:
    parts = (
        Resistance("chemical", 2.0, activation_energy_kJ_per_mol=40.0),
        Resistance("ash_layer", 1.0, activation_energy_kJ_per_mol=20.0),
    )
    form = None if kind is None else drive(kind)
    return RateLaw("ash_layer+chemical", parts, Reference(), [1.0], [0.9], drive=form, **more)


def test_a_solution_that_is_held_only_rescales_time():
    held = law().held_at({"reagent": 0.3, "second": 2.0})
    pace = float(law().drive.rate({"reagent": 0.3, "second": 2.0}))
    times = np.array([0.5, 3.0, 9.0])
    assert held.drive is None
    assert float(held.order) == 0.0
    assert_allclose(held.extraction(times, ORE), law().extraction(pace * times, ORE), rtol=1e-13)


def test_a_reagent_that_is_not_held_keeps_its_order():
    both = law("two_reagents")
    partly = both.held_at({"second": 2.0})
    assert float(partly.order) == 0.7
    times = np.array([0.5, 3.0, 9.0])
    pace = float(both.drive.rate({"reagent": 3.0, "second": 2.0}))
    assert_allclose(
        partly.extraction(times, ORE, reagent_g_per_L=3.0),
        both.extraction(pace * times, ORE),
        rtol=1e-13,
    )
    assert float(law("solubility").held_at({"metal": 5.0}).order) == 1.1


def test_holding_a_power_is_the_power():
    plain = law(None)
    times = np.array([0.5, 3.0, 9.0])
    assert_allclose(
        plain.held_at({"reagent": 4.0}).extraction(times, ORE),
        plain.extraction(times, ORE, reagent_g_per_L=4.0),
        rtol=1e-13,
    )


def test_one_drive_is_one_clock_without_an_order():
    assert law().shared_clock()
    assert law().order is None
    assert float(law("two_reagents").order) == 0.7
    curve = law().ore_curve(ORE)
    assert_allclose(curve([1.0, 5.0]), law().extraction([1.0, 5.0], ORE), atol=1e-5)
    with pytest.raises(InputProblems, match="no power of the reagent"):
        curve.drive(2.0)


def test_unknown_names_are_refused():
    with pytest.raises(InputProblems, match="unknown drive 'eiter'.*did you mean either"):
        DriveForm("eiter")
    with pytest.raises(InputProblems, match="unknown solution 'secnd'.*second"):
        drive("either").rate({"secnd": 3.0})
    with pytest.raises(InputProblems, match="no second"):
        Drive("either", {"reagent": 1.0}, {"preference": 1.0})
