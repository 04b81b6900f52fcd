"""Figures: the same bytes for the same numbers, own ids, what must be readable in them."""

import re
import xml.etree.ElementTree as ElementTree

import numpy as np
import pytest

from leachkin.report.figures import evidence, kinetics, money, plant
from leachkin.report.figures.style import SERIES

TIME = np.array([2.0, 6.0, 24.0, 72.0, 240.0])


def panel(test, size, temperature):
    fit_time = np.linspace(0, 250, 30)
    fit = 0.8 * (1 - np.exp(-fit_time / 40))
    return kinetics.Panel(
        test,
        size,
        temperature,
        TIME,
        0.8 * (1 - np.exp(-TIME / 40)),
        0.01 * np.ones(5),
        fit_time,
        fit,
        0.97 * fit,
        1.03 * fit,
        0.8,
    )


def heap():
    days = np.linspace(0, 120, 61)
    curve = 0.7 * (1 - np.exp(-days / 30))
    rules = ["acid supply"] * 30 + ["ore"] * 31
    curves = (("extracted", curve), ("ore-limited", 1.05 * curve))
    return plant.HeapCurves(days, days / 50, curves, 0.9 * curve, 1.1 * curve, rules)


def every_figure():
    days = np.linspace(0, 120, 61)
    temperature = np.linspace(290, 330, 20)
    tau = np.exp(5000 / temperature - 15)
    line = kinetics.TemperatureLine("chemical", tau, 0.9 * tau, 1.1 * tau)
    nine = [panel(f"{a}{t}", a, f"{t} \u00b0C") for t in (25, 40, 55) for a in "ABC"]
    return {
        "panels": kinetics.extraction_panels("panels", nine, "Cu", "band"),
        "residuals": kinetics.residual_plot("residuals", TIME, TIME / 100, list("ABABA"), "sd"),
        "forest": kinetics.parameter_forest("forest", ["tau (h)", "Ea"], [0.8, 0.9], [1.2, 1.1]),
        "arrhenius": kinetics.arrhenius_plot(
            "arrhenius", temperature, [line], [298.15, 313.15], [("heap", 291.0)]
        ),
        "heap": plant.heap_twin("heap", heap(), "Cu", "P10 (low) to P90", "SCOPING"),
        "supply": plant.supply_demand("supply", days, days, 0.5 * days, "H2SO4", "SCOPING"),
        "tanks": plant.tank_bars("tanks", [0.5, 0.7], [20.0, 9.0], ("Zn", "H2SO4"), "SCOPING"),
        "sinks": money.sink_bars("sinks", [("acid", 0.4), ("copper", 1.7)], "kg/m3", "iron"),
        "cost": money.cost_bars("cost", [("acid", 2e5)], "USD/month", "cost", ["antiscalant"]),
        "closure": evidence.closure_plot(
            "closure", ["A", "B"], [1.02, None], [0.02, None], (0.95, 1.05), "Cu"
        ),
    }


FIGURES = every_figure()


def words_of(svg):
    return " ".join(
        " ".join(e.itertext())
        for e in ElementTree.fromstring(svg).iter()
        if e.tag.endswith("}text")
    )


def test_the_same_numbers_give_the_same_bytes():
    assert every_figure() == FIGURES


@pytest.mark.parametrize("name", FIGURES)
def test_figures_load_nothing_and_share_no_ids(name):
    svg = FIGURES[name]
    assert svg.startswith("<svg")
    ids = re.findall(r'\bid="([^"]+)"', svg)
    assert ids
    assert all(one.startswith(f"{name}-") for one in ids)
    assert len(set(ids)) == len(ids)
    for used in re.findall(r'(?:url\(#|href="#)([^)"]+)', svg):
        assert used in ids
    assert "<metadata" not in svg
    links = re.findall(r'(?:href|src)="([^#"][^"]*)"', svg)
    assert links == []


@pytest.mark.parametrize("name", ["heap", "supply", "tanks"])
def test_plant_figures_carry_their_grade(name):
    assert "SCOPING" in words_of(FIGURES[name])


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("panels", "extraction (% of total Cu)"),
        ("heap", "extracted (% of total Cu)"),
        ("heap", "solution to ore (m\u00b3 per dry tonne)"),
        ("heap", "acid supply rules"),
        ("heap", "P10 (low) to P90"),
        ("supply", "H2SO4 (kg 100 % per dry tonne)"),
        ("tanks", "extraction (% of total Zn)"),
        ("cost", "INCOMPLETE: no cost for antiscalant"),
        ("closure", "no tail"),
        ("arrhenius", "30 \u00b0C"),
    ],
)
def test_axes_say_denominator_and_unit(name, words):
    assert words in words_of(FIGURES[name])


def test_bars_stand_largest_first_with_their_share():
    words = words_of(FIGURES["sinks"])
    assert words.index("copper") < words.index("acid") or "1.70 (81 %)" in words
    assert "1.70 (81 %)" in words
    assert "0.400 (19 %)" in words


def test_tests_without_a_grid_are_laid_out_in_rows_of_three():
    places, rows, columns = kinetics._grid([panel(str(i), "", "25") for i in range(7)])
    assert (rows, columns) == (3, 3)
    assert len(set(places)) == 7


def lightness(color):
    red, green, blue = (int(color[i : i + 2], 16) / 255 for i in (1, 3, 5))
    return 0.2126 * red**2.2 + 0.7152 * green**2.2 + 0.0722 * blue**2.2


def test_the_first_three_colours_differ_in_grey_print():
    shades = sorted(lightness(color) ** (1 / 2.2) for color in SERIES[:3])
    assert np.diff(shades).min() > 0.07
