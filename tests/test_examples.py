"""Every folder of example_runs is run, and its figures compared."""

import csv
import importlib.util
import json
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.campaign import read_campaign, run_campaign
from leachkin.kinetics import fit_arrhenius, fit_curve, rank_laws, straightened_time

EXAMPLES = Path(__file__).parent.parent / "example_runs"
COPPER = EXAMPLES / "copper_heap"
PUBLISHED = EXAMPLES / "published"


def read_columns(path):
    with path.open(encoding="utf-8") as file:
        rows = list(csv.reader(file))[1:]
    return np.array(rows, dtype=float).T


def sheet_maker():
    spec = importlib.util.spec_from_file_location("make_sheets", COPPER / "make_sheets.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def copper():
    return run_campaign(read_campaign(COPPER / "campaign.toml"), seed=1, draws=400)


def test_every_example_has_a_readme():
    for folder in EXAMPLES.iterdir():
        assert (folder / "README.md").is_file(), f"{folder.name} has no README.md"


def test_the_copper_sheets_are_what_the_simulation_makes(tmp_path):
    sheet_maker().main(tmp_path)
    for made in tmp_path.iterdir():
        assert made.read_text() == (COPPER / made.name).read_text(), made.name


def test_the_copper_fit_finds_the_law_behind_the_sheets(copper):
    maker = sheet_maker()
    truth = {
        "tau_ash_layer": 7.0,
        "tau_chemical": 3.0,
        "activation_energy_ash_layer": 19.0,
        "activation_energy_chemical": 46.0,
    }
    fit = copper.kinetics["oxide/Cu"].fit
    for name, value in truth.items():
        found = fit.parameter(name)
        assert abs(found.value - value) < 3.5 * found.standard_error, name
    knots = [p for p in fit.parameters if p.name.startswith("ultimate")]
    for found, value in zip(knots, maker.ULTIMATE, strict=True):
        assert abs(found.value - value) < 3.5 * found.standard_error, found.name


def test_the_copper_figures_have_not_moved(copper):
    """Own output: it proves only that nothing moved; rtol leaves room for other machines."""
    result = copper.to_dict()
    expected = json.loads((COPPER / "expected.json").read_text())
    for dotted, value in expected.items():
        found = result
        for key in dotted.split(":"):
            found = found[int(key)] if isinstance(found, list) else found[key]
        assert_allclose(found, value, rtol=1e-4, err_msg=dotted)


def test_uo3_reduction():
    """Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 25: chemical control."""
    time, extraction = read_columns(PUBLISHED / "uo3_reduction.csv")
    expected = json.loads((PUBLISHED / "expected.json").read_text())
    laws = ["film", "ash_layer", "chemical"]
    ranking = rank_laws(time, extraction, laws, ultimate=1.0)
    assert ranking.indistinguishable == ("chemical",)
    fit = fit_curve(time, extraction, "chemical", ultimate=1.0)
    found = fit.parameter("tau_chemical").value
    assert_allclose(found, expected["uo3_tau_chemical_h"], rtol=0, atol=5e-4)
    straight = straightened_time(time, extraction, "chemical")
    assert_allclose(straight, expected["uo3_straightened_h"], rtol=0, atol=5e-4)


def test_hydrogen_iodide():
    """McMurry & Fay, Chemistry, ch. 12: five temperatures."""
    celsius, k = read_columns(PUBLISHED / "hydrogen_iodide.csv")
    expected = json.loads((PUBLISHED / "expected.json").read_text())
    fit = fit_arrhenius(celsius + 273.15, k)
    assert_allclose(fit.activation_energy_kJ_per_mol, expected["hi_kJ_per_mol"], atol=0.05, rtol=0)
    assert_allclose(
        fit.standard_error_kJ_per_mol, expected["hi_standard_error_kJ_per_mol"], atol=0.05, rtol=0
    )
    assert fit.degrees_of_freedom == 3
