"""The copper scenario from the constants that made its sheets: every figure known beforehand."""

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.campaign import read_campaign, run_campaign

FILE = Path(__file__).parent / "true_constants.toml"
DAYS = (10, 30, 60, 90, 120)
#: Percent of total copper at those days, from an independent quadrature of the same model.
TRAP = (74.51, 81.54, 82.58, 82.58, 82.58)
ORE_LIMITED = (53.69, 63.33, 67.69, 69.31, 70.07)
CURED = (49.33, 59.90, 66.02, 68.52, 69.67)
UNCURED = (12.18, 35.95, 61.71, 66.94, 68.97)
SUPPLIED = (3.88, 11.64, 23.27, 34.91, 46.55)
TAKEN = (15.14, 19.66, 23.69, 25.60, 26.42)


@pytest.fixture(scope="module")
def result():
    return run_campaign(read_campaign(FILE), draws=0)


@pytest.fixture(scope="module")
def uncured():
    return run_campaign(read_campaign(FILE, {"heap.cure": "0 kg/t"}), "heap", draws=0)


def at_days(heap, band):
    position = [int(np.flatnonzero(np.isclose(heap.days, day))[0]) for day in DAYS]
    return np.array([band.at(i).value for i in position])


@pytest.mark.parametrize(
    ("name", "percent"),
    [("particles_alone", TRAP), ("ore_limited", ORE_LIMITED), ("extracted", CURED)],
)
def test_heap_rows(result, name, percent):
    heap = result.heap
    assert_allclose(100 * at_days(heap, getattr(heap, name)), percent, rtol=0, atol=0.05)


def test_heap_without_cure(uncured):
    heap = uncured.heap
    assert_allclose(100 * at_days(heap, heap.extracted), UNCURED, rtol=0, atol=0.05)


def test_acid_supplied_and_taken(result):
    heap = result.heap
    assert_allclose(at_days(heap, heap.supplied_kg_per_t), SUPPLIED, rtol=0, atol=0.02)
    assert_allclose(at_days(heap, heap.taken_kg_per_t), TAKEN, rtol=0, atol=0.02)


def test_heap_numbers(result):
    heap = result.heap
    assert_allclose(heap.m3_per_t[-1], 2.327, rtol=1e-3)
    assert_allclose(heap.area_m2, 99_700, rtol=1e-3)
    assert_allclose(heap.flow_m3_per_h, 797, rtol=1e-3)
    assert_allclose(heap.mean_pls_g_per_L.value, 2.036, rtol=1e-3)
    assert_allclose(heap.metal_extracted_kg_per_t.value, 4.738, rtol=1e-3)
    assert_allclose(heap.metal_taken_kg_per_t.value, 7.310, rtol=1e-3)
    assert_allclose(heap.gangue_taken_kg_per_t.value, 19.105, rtol=1e-3)
    assert_allclose(float(heap.result.first_solution_day), 4.64, rtol=0, atol=0.005)


def test_extracted_is_recovered_and_in_solution(result):
    heap = result.heap.result
    assert_allclose(heap.extracted_by_clock, heap.recovered + heap.in_solution, rtol=1e-12)


def test_reagent_rules_until_the_rock_does(result, uncured):
    assert result.heap.result.rules[0] == "reagent"
    assert result.heap.result.rules[-1] == "particles"
    cured_days = result.heap.result.rules.count("reagent")
    assert uncured.heap.result.rules.count("reagent") > cured_days


def test_iron(result):
    stage = result.cementation
    assert_allclose(stage.net_kg_per_m3.value, 2.569, rtol=1e-3)
    assert_allclose(stage.net_kg_per_kg.value, 1.328, rtol=1e-3)
    assert_allclose(stage.gross_kg_per_kg.value, 1.457, rtol=1e-3)
    assert_allclose(stage.recovered_kg_per_t.value, 4.501, rtol=1e-3)


@pytest.mark.parametrize(
    ("reagent", "sink", "net", "received", "month", "cost"),
    [
        ("H2SO4", "Cu", 7.310, 7.421, 1855, 222_640),
        ("H2SO4", "gangue", 19.105, 19.396, 4849, 581_880),
        ("H2SO4", "cementation vessels", 1.629, 1.654, 413.5, 49_620),
        ("scrap iron", "cementation", 5.979, 6.556, 1639, 426_110),
    ],
)
def test_budget_lines(result, reagent, sink, net, received, month, cost):
    rows = result.to_dict()["budget"]["tables"]["budget_lines"]
    (row,) = [row for row in rows if (row["reagent"], row["sink"]) == (reagent, sink)]
    assert_allclose(row["net_kg_per_t"], net, rtol=1e-3)
    assert_allclose(row["received_kg_per_t"], received, rtol=1e-3)
    assert_allclose(row["received_t_per_month"], month, rtol=1e-3)
    assert_allclose(row["cost_per_month"], cost, rtol=1e-3)


def test_budget_sum(result):
    assert_allclose(result.budget.cost_per_month.value, 1_280_250, rtol=1e-3)


def test_a_plant_from_print_says_so(result):
    assert result.heap.grade == "FROM PRINT"
    assert any(line.startswith("FROM PRINT: 69.7 % of total Cu") for line in result.headline())
