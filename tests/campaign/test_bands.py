"""Bands of a plant: they hold the figure, say what is in them, and move nothing else."""

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.campaign import read_campaign, run_campaign

FILE = Path(__file__).parent / "true_constants.toml"
CONTACT = "contacted_fraction = { value = 0.85, low = 0.75, high = 0.95, source = 'judgement' }"
DRAWS = 24
PEAK = 1e-4
TANK = """
[tank]
residence_times = ["4 h", "4 h", "4 h"]
temperature = "25 degC"
feed_reagent = "20 g/L"
solids = "100 kg/m3"
[tank.sizes]
single = "1.416 mm"
"""


def ranges_in(tree):
    """Every figure or curve with a band in a result, as (value, low, high)."""
    if isinstance(tree, list):
        for item in tree:
            yield from ranges_in(item)
    elif isinstance(tree, dict):
        if {"value", "low", "high", "level"} <= set(tree):
            if tree["low"] is not None:
                yield tuple(np.asarray(tree[end], float) for end in ("value", "low", "high"))
            return
        for item in tree.values():
            yield from ranges_in(item)


def ranged_text():
    text = FILE.read_text(encoding="utf-8")
    return text.replace('cycle = "120 d"', 'cycle = "60 d"').replace(
        "contacted_fraction = 0.85", CONTACT
    )


def run(folder, text, upto=None, **options):
    folder.mkdir(exist_ok=True)
    (folder / "campaign.toml").write_text(text, encoding="utf-8")
    return run_campaign(read_campaign(folder), upto, draws=DRAWS, **options)


@pytest.fixture(scope="module")
def place(tmp_path_factory):
    return tmp_path_factory.mktemp("bands")


@pytest.fixture(scope="module")
def ranged(place):
    return run(place / "ranged", ranged_text())


@pytest.fixture(scope="module")
def fitted(place, sheet_texts, heap_text):
    """Four bottles and a heap whose only band is that of the fit; no gangue is known."""
    folder = place / "fitted"
    folder.mkdir()
    for name, text in sheet_texts.items():
        (folder / name).write_text(text, encoding="utf-8")
    return run(folder, sheet_texts["campaign.toml"] + heap_text)


def test_bands_hold_the_value(ranged, fitted):
    for result in (ranged, fitted):
        bands = list(ranges_in(result.to_dict()))
        assert len(bands) > 8
        for value, low, high in bands:
            # in the first days what is recovered peaks at the stated contact, so that the
            # value is the greatest of all draws and lies a hair above the upper end
            assert np.all(low <= value + PEAK) and np.all(value <= high + PEAK)


def test_bands_at_the_end_hold_the_value_strictly(ranged):
    heap, budget = ranged.heap, ranged.budget
    figures = [heap.extracted.at(-1), heap.recovered.at(-1), heap.taken_kg_per_t.at(-1)]
    figures += [heap.mean_pls_g_per_L, heap.metal_taken_kg_per_t, budget.cost_per_month]
    assert all(figure.low < figure.value < figure.high for figure in figures)


def test_the_band_names_the_scale_up_range(ranged):
    assert ranged.heap.contains == ("scale-up ranges of contacted_fraction",)
    answer = next(line for line in ranged.headline() if "extracted at 60 d" in line)
    assert "95 % band of scale-up ranges of contacted_fraction" in answer
    (row,) = [row for row in ranged.assumed if row.key == "heap.contacted_fraction"]
    assert row.in_band and row.why == "judgement"


def test_the_band_of_a_fit_says_that_no_scale_up_is_in_it(fitted):
    assert fitted.heap.contains[0] == "fit"
    assert "no scale-up range is stated" in fitted.heap.contains[-1]
    assert fitted.heap.grade == "SCOPING"


def test_an_assumed_energy_with_a_range_is_named_in_the_band(place, sheet_texts, heap_text):
    assumed = """[[assumed]]
parameter = "activation_energy_ash_layer"
value = "20 kJ/mol"
low = "15 kJ/mol"
high = "25 kJ/mol"
source = "common practice"
by = "process engineer (invented)"
"""
    folder = place / "assumed"
    folder.mkdir()
    for name, text in sheet_texts.items():
        (folder / name).write_text(text, encoding="utf-8")
    result = run(folder, sheet_texts["campaign.toml"] + heap_text + assumed, "heap")
    assert "assumed ranges of activation_energy_ash_layer" in result.heap.contains
    (row,) = [row for row in result.assumed if row.key == "activation_energy_ash_layer"]
    assert row.in_band


def test_an_unknown_gangue_is_not_told_as_none(fitted):
    gangue = fitted.heap.gangue_taken_kg_per_t
    assert (gangue.value, gangue.low) == (0.0, None)
    line = next(line for line in fitted.headline() if "bound by the metal" in line)
    assert "gangue not known" in line and "0 kg/t by gangue" not in line


def test_tanks_with_an_unknown_gangue_show_no_band_of_it(place, sheet_texts):
    folder = place / "tanks"
    folder.mkdir()
    for name, text in sheet_texts.items():
        (folder / name).write_text(text, encoding="utf-8")
    tank = run(folder, sheet_texts["campaign.toml"] + TANK, "tank").tank
    assert tank.extraction.low is not None and not tank.gangue_known
    assert (tank.gangue_taken_kg_per_t.value, tank.gangue_taken_kg_per_t.low) == (0.0, None)


def test_the_stated_figure_does_not_depend_on_draws_or_seed(ranged, place):
    other = run(place / "seed", ranged_text(), seed=2)
    assert_allclose(other.heap.extracted.value, ranged.heap.extracted.value, rtol=0)
    assert other.heap.extracted.low[-1] != ranged.heap.extracted.low[-1]


def test_a_stage_more_moves_no_other_number(ranged, place):
    full = ranged.to_dict()
    heap_only = run(place / "ranged", ranged_text(), "heap").to_dict()
    assert heap_only["budget"] is None
    for stage in ("kinetics", "gangue", "heap"):
        assert heap_only[stage] == full[stage]
    with_tank = run(place / "tank", ranged_text() + TANK).to_dict()
    assert with_tank["tank"] is not None
    for stage in ("kinetics", "gangue", "heap", "cementation", "budget"):
        assert with_tank[stage] == full[stage]


def test_a_draw_keeps_its_index_to_the_budget(ranged):
    # more metal out of a draw of the heap is more iron and more metal in the same draw's budget
    metal = ranged.heap.metal_extracted_draws
    recovered = ranged.cementation.draws["recovered_kg_per_t"]
    assert metal.shape == recovered.shape == (DRAWS,)
    assert_allclose(recovered, 0.95 * metal, rtol=1e-12)
