"""Consumption by sink: acid and cyanide against the scenarios."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import Precipitant, Solution, cementation_demand
from leachkin.errors import InputProblems
from leachkin.reagents import (
    acid_lines,
    acid_per_metal,
    cementation_lines,
    cyanide_kg_per_t,
    gangue_acid_kg_per_t,
)


@pytest.mark.parametrize(
    ("metal", "factor"),
    [("Cu", 1.543), ("Zn", 1.500), ("Ni", 1.671), ("Mg", 4.035), ("Mn", 1.785), ("Al", 5.452)],
)
def test_acid_per_metal_to_the_digits_shown(metal, factor):
    assert_allclose(acid_per_metal(metal), factor, rtol=0, atol=5.01e-4)


def test_acid_of_the_copper_scenario():
    """4.738 kg/t of copper takes 7.31 kg/t of 26.415; gangue takes the rest, 19.105."""
    gangue = gangue_acid_kg_per_t(26.415, {"Cu": 4.738})
    assert_allclose(gangue, 19.105, rtol=1e-3)
    lines = acid_lines({"Cu": 7.310}, gangue, vessels_g_per_L=0.7, solution_m3_per_t=2.327)
    assert [line.sink for line in lines] == ["Cu", "gangue", "cementation vessels"]
    assert_allclose(lines[-1].amount, 1.629, rtol=1e-3)


def test_an_ore_that_makes_acid_keeps_its_sign():
    assert gangue_acid_kg_per_t([5.0, 10.0], {"Cu": 4.738}).tolist()[0] < 0


def test_cyanide_of_the_gold_scenario_by_its_parts():
    """Cu 0.36, SCN 0.18, Fe 0.05, Ag 0.035, Au 0.001, HCN 0.03: 0.67 kg/t."""
    tied = {
        "Cu": 0.45 * 0.35, "S to SCN-": 0.03 * 4.0, "Fe": 0.010, "Ag": 0.627 * 0.062,
        "Au": 0.918 * 0.00185,
    }  # fmt: skip
    parts = cyanide_kg_per_t(tied, {"HCN": 0.03})
    assert_allclose(parts["Cu"], 0.36, rtol=0, atol=0.005)
    assert_allclose(parts["S to SCN-"], 0.18, rtol=0, atol=0.005)
    assert_allclose(parts["Fe"], 0.05, rtol=0, atol=0.005)
    assert_allclose(parts["Ag"], 0.035, rtol=0, atol=0.0005)
    assert_allclose(parts["Au"], 0.001, rtol=0, atol=0.0005)
    assert_allclose(sum(parts.values()), 0.67, rtol=0, atol=0.005)


def test_cyanide_takes_draws():
    parts = cyanide_kg_per_t({"Cu": np.array([0.1, 0.2])})
    assert_allclose(parts["Cu"][1], 2 * parts["Cu"][0], rtol=1e-15)


def test_zinc_of_a_range_is_budgeted_at_its_middle():
    liquor = Solution({"Au": 0.71e-3, "Ag": 16.2e-3}, oxygen_mg_per_L=0.4)
    demand = cementation_demand(liquor, Precipitant("zinc", 1.0), recovery=1.0)
    (line,) = cementation_lines(demand, "zinc dust")
    assert line.driver == "m3"
    assert_allclose(line.amount, 0.5 * (6.66e-3 + 11.69e-3), rtol=2e-3)
    assert line.missing == ()


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: acid_per_metal("Au"), "no acid factor is held for 'Au'.*Cu"),
        (lambda: acid_lines({"Cu": 1.0}, 1.0, vessels_g_per_L=0.7), "solution_m3_per_t: none"),
        (lambda: cyanide_kg_per_t({"Pb": 1.0}), "tied_kg_per_t: 'Pb'"),
    ],
)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()
