"""Titration arithmetic, the reagent balance, and what is due at a running test."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.testwork import (
    Exclusion,
    Head,
    VesselLog,
    addition_to_set_point,
    due_list,
    due_table,
    grams_to_set_point,
    reagent_by_time_table,
    reagent_ledger,
    reagent_table,
    reagents_of,
    stock_strength_g_per_L,
    stock_to_set_point_mL,
    strength_by_titration_g_per_L,
)
from tests.testwork.test_balance import bottle, solid

USUAL_H = (2.0, 6.0, 24.0, 48.0)


def titrated(free, added=None, **changes):
    """A bottle of 500 g in 1 L at 10 g/L of acid, 20 mL samples replaced by the same solution."""
    free = np.asarray(free, float)
    fields = {
        "reagent": "H2SO4",
        "reagent_g_per_L": 10.0,
        "free_reagent_g_per_L": free,
        "reagent_added_g": np.zeros(free.size) if added is None else np.asarray(added, float),
        "heads": {"Cu": Head(6.8, 0.1)},
    }
    return bottle(
        [2.0, 24.0, 48.0][: free.size], [1.0, 1.5, 2.0][: free.size], **(fields | changes)
    )


@pytest.mark.parametrize(
    ("reagent", "titrant_mL", "molar", "sample_mL", "g_per_L"),
    [
        # 4.33 g/L silver nitrate on 25 mL: 1 mL is 0.01 % NaCN (common practice)
        ("NaCN", 5.0, 4.33 / 169.87, 25.0, 0.50),
        # 20 mL of 1 M NaOH on 10 mL: 1 M sulphuric acid, 98.08 g/L
        ("H2SO4", 20.0, 1.0, 10.0, 98.08),
        # 1.321 g of Ca(OH)2 is 1 g of CaO
        ("CaO", 10.0, 0.1, 28.04, 1.0),
    ],
)
def test_strength_by_titration(reagent, titrant_mL, molar, sample_mL, g_per_L):
    found = strength_by_titration_g_per_L(reagent, titrant_mL, molar, sample_mL)
    assert_allclose(found, g_per_L, rtol=2e-3)
    blank = strength_by_titration_g_per_L(reagent, titrant_mL + 0.1, molar, sample_mL, blank_mL=0.1)
    assert_allclose(blank, found, rtol=1e-12)


def test_titrations_without_a_meaning():
    with pytest.raises(InputProblems, match="on 0 mL. Allowed: volumes and a strength above 0"):
        strength_by_titration_g_per_L("NaCN", 1.0, 0.1, 0.0)
    with pytest.raises(InputProblems, match="reagent: Fe2. Allowed: NaCN"):
        strength_by_titration_g_per_L("Fe2", 1.0, 0.1, 10.0)
    assert strength_by_titration_g_per_L("Fe", 1.0, 0.1, 10.0, moles_per_titrant=1.0) > 0.5
    with pytest.raises(InputProblems, match="a share from 0 to 1"):
        stock_strength_g_per_L(98.0, 1.84)
    with pytest.raises(InputProblems, match="volume_mL: 0"):
        grams_to_set_point(1.0, 2.0, 0.0)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    found=st.floats(0.0, 50.0),
    target=st.floats(0.1, 50.0),
    volume=st.floats(50.0, 5000.0),
    stock=st.floats(60.0, 1800.0),
)
def test_what_is_added_brings_the_strength_to_its_set_point(found, target, volume, stock):
    grams = grams_to_set_point(found, target, volume)
    assert_allclose(found * volume / 1000 + grams, max(found, target) * volume / 1000, rtol=1e-12)
    added = stock_to_set_point_mL(found, target, volume, stock)
    mixed = (found * volume + stock * added) / (volume + added)
    assert_allclose(mixed, max(found, target), rtol=1e-12)


def test_a_stock_that_is_too_weak_does_not_do():
    assert stock_to_set_point_mL(1.0, 10.0, 1000.0, 10.0) is None
    assert stock_to_set_point_mL(11.0, 10.0, 1000.0, 10.0) == 0.0


def test_acid_by_hand():
    # 10 g in 1 L; 2 h: 8 g/L, 20 mL out and in; 24 h: 6 g/L, 3.2 g added; 48 h: 7 g/L
    # gross 20 / 20.4 / 27.2 kg/t; gone with samples 0, 0.32, 0.56; in solution 16, 12, 14
    test = titrated([8.0, 6.0, 7.0], [0.0, 3.2, 0.0])
    found = reagent_ledger(test, per_metal_kg_per_kg={"Cu": 1.543})
    assert_allclose(found.gross_kg_per_t, [20.0, 20.4, 27.2], rtol=1e-12)
    assert_allclose(found.in_solution_kg_per_t, [16.0, 12.0, 14.0], rtol=1e-12)
    assert_allclose(found.with_samples_kg_per_t, [0.0, 0.32, 0.56], rtol=1e-12)
    assert_allclose(found.net_kg_per_t, [4.0, 8.08, 12.64], rtol=1e-12)
    copper = np.array([1.0, 1.52, 2.05])  # g dissolved, aliquots included
    assert_allclose(found.bound_kg_per_t["Cu"], 1.543 * copper * 2.0, rtol=1e-12)
    assert_allclose(found.gangue_kg_per_t, found.net_kg_per_t - 3.086 * copper, rtol=1e-12)
    record = reagent_table([found]).to_records()[0]
    assert_allclose(record["gangue"], 12.64 - 3.086 * 2.05, rtol=1e-12)
    assert len(reagent_by_time_table([found]).rows) == 3


@settings(max_examples=60, deadline=None, derandomize=True)
@given(data=st.data())
def test_gross_is_net_and_what_is_left_and_what_left(data):
    def numbers(low, high):
        return np.array([data.draw(st.floats(low, high)) for _ in range(3)])

    policy = data.draw(
        st.sampled_from(["replaced by reagent solution", "not replaced", "made up with water"])
    )
    log = VesselLog(
        evaporated_mL=numbers(0.0, 20.0),
        decanted_mL=numbers(0.0, 50.0),
        solids_g=numbers(0.0, 5.0) if data.draw(st.booleans()) else None,
    )
    test = titrated(numbers(1.0, 10.0), numbers(0.0, 5.0), aliquots=policy, vessel=log)
    found = reagent_ledger(test)
    parts = found.in_solution_kg_per_t + found.with_samples_kg_per_t + found.net_kg_per_t
    assert_allclose(found.gross_kg_per_t, parts, rtol=1e-12, atol=1e-12)


def test_lime_that_nobody_titrates_is_spent_as_it_is_added():
    test = titrated([8.0, 6.0], added_g={"CaO": np.array([1.0, 0.5]), "H2SO4": np.zeros(2)})
    assert reagents_of(test) == ("H2SO4", "CaO")
    lime = reagent_ledger(test, "CaO")
    assert_allclose(lime.net_kg_per_t, [2.0, 3.0], rtol=1e-12)
    assert not lime.titrated
    assert reagent_table([lime]).to_records()[0]["strength"] is None
    assert reagent_ledger(test, "NaCN") is None


def test_cyanide_beside_the_reagent_of_the_campaign():
    test = titrated(
        [8.0, 6.0],
        free_g_per_L={"NaCN": np.array([0.4, 0.3])},
        added_g={"NaCN": np.array([0.1, 0.0])},
        start_g_per_L={"NaCN": 0.5},
        aliquots="not replaced",
    )
    found = reagent_ledger(test, "NaCN")
    # 0.5 g in 1 L; 0.4 at 2 h (0.1 g gone); 0.1 g added, 8 mg left with the sample, 0.294 g left
    assert_allclose(found.net_kg_per_t, [0.2, (0.6 - 0.008 - 0.294) / 0.5], rtol=1e-12)


def test_addition_by_hand():
    # 6 g/L found at 24 h, 20 mL of 10 g/L put in: 6.08 g/L in 1000 mL, 3.92 g to 10 g/L
    found = addition_to_set_point(titrated([8.0, 6.0]), 500.0)
    assert_allclose(found.found_g_per_L, 6.08, rtol=1e-12)
    assert_allclose(found.grams, 3.92, rtol=1e-12)
    assert_allclose(found.stock_mL, 1000.0 * 3.92 / 490.0, rtol=1e-12)
    assert found.text.startswith("3.92 g of H2SO4 (100 %) or 8 mL of stock: 6.08 g/L found at 24 h")
    lower = dataclasses.replace(titrated([8.0, 6.0]), set_point_g_per_L=7.0)
    assert_allclose(addition_to_set_point(lower).grams, 0.92, rtol=1e-12)
    assert addition_to_set_point(dataclasses.replace(lower, set_point_g_per_L=6.0)) is None
    done = titrated([8.0, 6.0], [0.0, 3.92])
    assert addition_to_set_point(done) is None
    assert addition_to_set_point(titrated([np.nan, np.nan])) is None


def test_the_last_titration_counts_where_the_last_row_has_none():
    found = addition_to_set_point(titrated([8.0, 6.0, np.nan], aliquots="not replaced"))
    assert found.titrated_h == 24.0
    assert_allclose((found.found_g_per_L, found.volume_mL), (6.0, 960.0), rtol=1e-12)


def test_what_is_due_and_when():
    running = titrated(
        [8.0, 6.0], name="B2", started="2026-03-01 08:00", planned_h=(2.0, 24.0, 30.0)
    )
    closed = titrated([8.0, 6.0, 5.0], name="B1", products=(solid(485.0, 2.0),))
    (due,) = due_list([closed, running], USUAL_H, {"H2SO4": 500.0})
    assert (due.test, due.last_h, due.next_h, due.why) == ("B2", 24.0, 30.0, "planned")
    assert due.next_moment == "2026-03-02 14:00"
    assert due.close_out == ("residue mass", "two tail assays")
    value, sd = due.extraction["Cu"]
    assert_allclose(value, 1.52 / 3.4, rtol=1e-12)
    assert 0.0 < sd < 0.05
    record = due_table([due]).to_records()[0]
    assert record["extraction"].startswith("Cu 44.7 +- ")
    assert record["add"].endswith("1000 mL")


@pytest.mark.parametrize(
    ("changes", "next_h", "why"),
    [
        ({}, 48.0, "as test B1"),
        ({"planned_h": (2.0, 24.0)}, None, "the plan is at its end: close out"),
        ({"domain": "sulphide"}, 48.0, "usual times"),
        ({"domain": "sulphide", "time_h": np.array([2.0, 60.0])}, None,
         "past the usual times: close out"),
        ({"time_h": np.array([24.0, 48.0])}, None,
         "as long as the longest of its kind: close out"),
    ],
)  # fmt: skip
def test_where_the_next_time_comes_from(changes, next_h, why):
    closed = titrated([8.0, 6.0, 5.0], name="B1", products=(solid(485.0, 2.0),))
    running = dataclasses.replace(titrated([8.0, 6.0], name="B2"), **changes)
    due = due_list([closed, running], USUAL_H)[0]
    assert (due.next_h, due.why) == (next_h, why)
    assert due.next_moment == ""


def test_a_test_that_has_only_started():
    empty = bottle([], [], name="B3", heads={"Cu": Head(6.8, 0.1)}, vessel=VesselLog(carbon_g=10.0))
    (due,) = due_list([empty], USUAL_H)
    assert (due.last_h, due.next_h) == (None, 2.0)
    assert due.close_out[-1] == "carbon mass and assay"
    assert due_table([due]).column("extraction") == [""]


def test_excluded_tests_are_not_due():
    test = titrated([8.0, 6.0])
    kept_out = dataclasses.replace(test, exclusions=(Exclusion("B1", None, "broken", "A. B."),))
    assert due_list([kept_out], USUAL_H) == ()
