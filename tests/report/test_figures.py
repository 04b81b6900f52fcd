"""Figures: the same bytes for the same numbers, own ids, what must be readable in them."""

import re
import xml.etree.ElementTree as ElementTree

import numpy as np
import pytest

from leachkin.report.figures import checks, constants, evidence, kinetics, money, plant
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


LAWS = {"film": "film", "ash_layer": "ash (product) layer", "chemical": "chemical reaction"}


def forest():
    row = constants.ForestRow
    return [
        row("time (h)", "tau ash", "ash_layer+chemical", 7.0, 6.5, 7.6, True),
        row("time (h)", "tau ash", "series", 300.0, 100.0, None, True),
        row("ultimate extraction (%)", "ultimate", "series", 80.0, None, None),
    ]


def straight(test, size):
    g = {law: np.array([0.1, 0.3, 0.6, np.nan, np.nan]) for law in LAWS}
    return checks.StraightPanel(test, size, "25 \u00b0C", TIME, g, dict.fromkeys(LAWS, 0.02))


def rates():
    at = np.array([2.0, 2.0, 6.0])
    rate = 0.1 / at
    grid = np.linspace(1.5, 8.0, 10)
    low = np.array([0.04, np.nan, 0.015])
    return constants.RatePoints(("25", "40", "25"), at, rate, low, 2 * rate, grid, 0.1 / grid)


def ways():
    temperature = np.array([298.15, 313.15, 328.15])
    grid = np.linspace(290, 330, 20)
    two = "two steps: 48 kJ/mol (10 to 90)\n1 degree of freedom, t = 12.7"
    one = "all tests: 47 kJ/mol (44 to 50)\n89 degrees of freedom, normal factor 1.96"
    return constants.WaysPanel(
        "1/tau, chemical reaction",
        two,
        one,
        temperature,
        16 - 5800 / temperature,
        np.array([0.1, 0.2, np.nan]),
        grid,
        16 - 5800 / grid,
        16.1 - 5800 / grid,
    )


def every_figure():
    days = np.linspace(0, 120, 61)
    temperature = np.linspace(290, 330, 20)
    tau = np.exp(5000 / temperature - 15)
    line = kinetics.TemperatureLine("chemical", tau, 0.9 * tau, 1.1 * tau)
    nine = [panel(f"{a}{t}", a, f"{t} \u00b0C") for t in (25, 40, 55) for a in "ABC"]
    return {
        "panels": kinetics.extraction_panels("panels", nine, "Cu", "band"),
        "residuals": checks.residual_pair(
            "residuals", TIME, TIME / 300, TIME / 100 - 1.0, list("ABABA")
        ),
        "forest": constants.value_forest("forest", forest(), ["ash_layer+chemical", "series"]),
        "leverage": checks.leverage_strips(
            "leverage",
            list("AAABB"),
            ["solution", "solution", "tail", "solution", "head"],
            np.array([2.0, 6.0, 24.0, 2.0, np.nan]),
            np.array([0.1, 0.3, 0.7, 0.2, 0.05]),
            0.27,
        ),
        "correlation": checks.correlation_squares(
            "correlation", ["tau", "Ea"], np.array([[1.0, -0.93], [-0.93, 1.0]])
        ),
        "straightened": checks.straightened_panels(
            "straightened", [straight("A", "2 mm"), straight("B", "6 mm")], LAWS
        ),
        "size": constants.rate_loglog("size", rates(), "size (mm)", [(-1.0, "slope 1")]),
        "ways": constants.arrhenius_ways("ways", [ways()]),
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
        ("straightened", "diagnostic only: not used for the choice"),
        ("straightened", "straightened conversion g(X) (-)"),
        ("straightened", "ash (product) layer"),
        ("residuals", "standardised residual (-)"),
        ("residuals", "fitted extraction (% of total metal)"),
        ("residuals", "time (h), logarithmic"),
        ("leverage", "leverage (-)"),
        ("leverage", "twice the mean"),
        ("leverage", "24 h"),
        ("correlation", "-0.93"),
        ("correlation", "hollow ones against each other"),
        ("forest", "time (h)"),
        ("forest", "no end on that side"),
        ("forest", "no interval"),
        ("size", "rate constant (1/h), logarithmic"),
        ("size", "slope 1"),
        ("ways", "1 degree of freedom, t = 12.7"),
        ("ways", "1000 / T (1/K)"),
        ("ways", "ln(rate constant / (1/h))"),
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
    places, rows, columns = kinetics.panel_grid([panel(str(i), "", "25") for i in range(7)])
    assert (rows, columns) == (3, 3)
    assert len(set(places)) == 7


def lightness(color):
    red, green, blue = (int(color[i : i + 2], 16) / 255 for i in (1, 3, 5))
    return 0.2126 * red**2.2 + 0.7152 * green**2.2 + 0.0722 * blue**2.2


def test_the_first_three_colours_differ_in_grey_print():
    shades = sorted(lightness(color) ** (1 / 2.2) for color in SERIES[:3])
    assert np.diff(shades).min() > 0.07


def test_tests_beyond_the_sixth_keep_a_marker_and_fill_of_their_own():
    names = [f"T{i}" for i in range(20)]
    svg = checks.residual_pair(
        "many", np.arange(1.0, 21), np.linspace(0, 1, 20), np.ones(20), names
    )
    assert all(name in words_of(svg) for name in names)
    looks = {(checks.MARKERS[i % 6], checks.FILLS[(i // 6) % 4]) for i in range(20)}
    assert len(looks) == 20


def test_long_names_take_fewer_columns_of_a_legend():
    assert checks.legend_columns(["A25", "B25"]) == 2
    assert checks.legend_columns(["x" * 30] * 12) == 2
    assert checks.legend_columns(["x" * 300] * 12) == 1


@pytest.mark.parametrize("name", FIGURES)
def test_no_text_is_cut_off(name):
    """Every text begins within the picture, and by its letters ends there."""
    root = ElementTree.fromstring(FIGURES[name])
    width = float(root.get("viewBox").split()[2])
    for element in root.iter():
        if not element.tag.endswith("}text"):
            continue
        place = re.search(r"translate\(([-\d.]+) [-\d.]+\)", element.get("transform", ""))
        turned = re.search(r"rotate\(-?(?!0\b)\d", element.get("transform", ""))
        x = float(place.group(1)) if place else float(element.get("x", 0))
        assert -1.0 <= x <= width, "".join(element.itertext())
        style = element.get("style", "")
        if not turned and "anchor: middle" not in style and "anchor: end" not in style:
            size = float(re.search(r"([\d.]+)px", style).group(1))
            letters = len("".join(element.itertext()).strip())
            assert x + 0.4 * size * letters <= width + 1.0, "".join(element.itertext())
