"""The figures by which a fit is checked say what they show, and hold only what was computed."""

import re
import xml.etree.ElementTree as ElementTree
from dataclasses import replace

import numpy as np
import pytest

from leachkin.kinetics import RatePlot, TimeFactor, fit_tests
from leachkin.report.diagnostic_figures import forest_figure, further_figures, residual_figure

KEY = "oxide/Cu"


@pytest.fixture(scope="module")
def stage(bottles):
    return bottles.kinetics[KEY]


@pytest.fixture(scope="module")
def folded(stage):
    found = further_figures(KEY, stage, stage.fit, stage.diagnostics)
    return {figure.name.removesuffix("_oxide_Cu"): figure for figure in found}


def words_of(svg):
    root = ElementTree.fromstring(svg)
    return " ".join(" ".join(e.itertext()) for e in root.iter() if e.tag.endswith("}text"))


def test_each_stands_in_the_kinetics_part_and_is_folded(folded):
    assert all(figure.folded and figure.section == "kinetics" for figure in folded.values())
    assert all(KEY in figure.caption and KEY in figure.title for figure in folded.values())


def test_straightened_panels_say_thrice_that_they_decide_nothing(folded):
    figure = folded["straightened"]
    assert "diagnostic only: not used for the choice" in words_of(figure.svg)
    assert figure.caption.startswith("DIAGNOSTIC ONLY: not used for the choice")
    assert "diagnostic only" in figure.title
    assert words_of(figure.svg).count("25 \u00b0C") == 3


def test_the_activation_energy_shows_degrees_of_freedom_and_t_of_both_ways(folded, stage):
    words = words_of(folded["arrhenius"].svg)
    freedom = stage.fit.degrees_of_freedom
    assert words.count("1 degree of freedom, t = 12.7") == 2
    assert words.count(f"{freedom} degrees of freedom, normal factor 1.96") == 2
    for name in ("activation_energy_ash_layer", "activation_energy_chemical"):
        p = stage.fit.parameter(name)
        assert f"all tests: {p.value:.1f} kJ/mol ({p.low:.1f} to {p.high:.1f})" in words


def test_the_forest_names_the_methods_and_shows_every_law_left(stage):
    other = fit_tests(stage.observed, "first_order", reference=stage.law.reference)
    alone = forest_figure(KEY, stage, stage.fit)
    both = forest_figure(KEY, replace(stage, alternatives=(other,)), stage.fit)
    assert "no other law is left by the data" in alone.caption
    assert "laws not rejected" in both.caption
    assert "profile likelihood" in alone.caption
    assert "first_order" in words_of(both.svg) and "first_order" not in words_of(alone.svg)
    assert "rate constant (1/h)" in words_of(both.svg)
    for group in ("time for complete conversion (h)", "activation energy (kJ/mol)"):
        assert group in words_of(alone.svg)
    assert "ultimate extraction (% of total metal)" in words_of(alone.svg)
    assert "reagent order" not in words_of(alone.svg), "held values are no estimates"


def test_size_shows_both_slopes_and_the_state_it_is_carried_to(folded, stage):
    words = words_of(folded["size"].svg)
    assert "slope 1 (1/d: chemical reaction)" in words
    assert "slope 2 (1/d\u00b2: ash layer)" in words
    reference = stage.law.reference
    assert f"carried to 25 \u00b0C and {reference.reagent_g_per_L:g} g/L" in folded["size"].caption


def test_a_test_that_does_not_tell_is_named_under_the_size_plot(stage):
    plot = stage.diagnostics.by_size
    less = replace(plot, left_out=("A55: its readings do not tell its time",))
    figures = further_figures(
        KEY, stage, stage.fit, replace(stage.diagnostics, by_size=less, arrhenius=())
    )
    size = next(f for f in figures if f.name.startswith("size"))
    assert "Left out: A55: its readings do not tell its time." in size.caption


def test_several_strengths_give_an_order_plot(stage):
    factors = tuple(TimeFactor(f"T{g:g}", 2.0, 298.15, g, 1.0, 0.9, 1.1) for g in (5.0, 20.0))
    at = np.array([5.0, 20.0])
    plot = RatePlot(factors, at, at / 100, at / 120, at / 80, at, at / 100)
    found = replace(stage.diagnostics, by_strength=plot)
    figures = {f.name: f for f in further_figures(KEY, stage, stage.fit, found)}
    order = figures["order_oxide_Cu"]
    assert "The slope is the order" in order.caption
    words = words_of(order.svg)
    assert "reagent strength of the test (g/L), logarithmic" in words
    assert "order 0.5" in words and "order 1" in words


def test_a_strong_correlation_is_said_in_words(stage):
    found = stage.diagnostics
    assert "None exceeds 0.9" in next(
        f.caption
        for f in further_figures(KEY, stage, stage.fit, found)
        if f.name.startswith("corr")
    )
    strong = found.correlation.copy()
    strong[0, 1] = strong[1, 0] = -0.97
    figures = further_figures(KEY, stage, stage.fit, replace(found, correlation=strong))
    caption = next(f.caption for f in figures if f.name.startswith("corr"))
    assert re.search(r"Held mostly together: .* and .* \(-0\.97\)\.", caption)


def test_residuals_are_the_standardised_ones_of_the_rows(stage):
    figure = residual_figure(KEY, stage.diagnostics)
    rows = stage.diagnostics.rows
    shown = np.isfinite(rows.standardised) & (np.nan_to_num(rows.time_h) > 0)
    root = ElementTree.fromstring(figure.svg)
    marks = [e for e in root.iter() if e.tag.endswith("}use")]
    assert len(marks) > 2 * int(shown.sum())  # two panels, and ticks
    assert not figure.folded
    assert "standardised residual" in words_of(figure.svg)
