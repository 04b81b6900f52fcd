"""A small campaign of four bottles, in a folder that a test may spoil."""

import numpy as np
import pytest

from leachkin.kinetics import RateLaw, Reference, Resistance
from leachkin.kinetics.simulate import Bottle, Noise, simulate_tests
from leachkin.testwork import SizeDistribution

SETTINGS = """format = 1
[campaign]
title = "Four bottles"
metals = ["Cu"]
reagent = "H2SO4"
[tables]
tests = "tests.csv"
readings = "readings.csv"
heads = "heads.csv"
closeout = "closeout.csv"
[precision]
solution = "1.5 %"
tail = "3 %"
head = "2 %"
residue = "0.3 %"
[fit]
laws = ["ash_layer", "chemical"]
reference_temperature = "25 degC"
reference_size = "1.416 mm"
reference_reagent = "20 g/L"
"""
HEAP = """
[heap]
ore_rate = "250000 t/month"
lift_height = "6 m"
bulk_density = "1.65 t/m3"
irrigation = "8 L/h/m2"
cycle = "120 d"
temperature = "17 degC"
feed_reagent = "20 g/L"
[heap.sizes]
gates_gaudin_schuhmann = { top = "19 mm", slope = 0.65 }
"""
TESTS = "test,domain,kind,dry solids (g),solution (mL),size lower (mm),size upper (mm),"
TESTS += "temperature (degC),start H2SO4 (g/L),aliquots\n"


def sheets():
    law = RateLaw(
        "ash_layer",
        (Resistance("ash_layer", 3.0, activation_energy_kJ_per_mol=20.0),),
        Reference(298.15, 20.0, 1.416),
        [1.0],
        [0.85],
    )
    size = SizeDistribution.single(1.416)
    time_h = np.array([1.0, 3.0, 8.0, 16.0, 30.0, 60.0])
    bottles = [
        Bottle(name, size, celsius + 273.15, time_h, 20.0)
        for name, celsius in (("P1", 25.0), ("P2", 25.0), ("Q1", 45.0), ("Q2", 45.0))
    ]
    made = simulate_tests(
        law, bottles, head_kg_per_t=6.8, seed=5, noise=Noise(), per_metal_kg_per_kg=1.543
    )
    tests, readings, closeout = TESTS, "test,time (h),aliquot (mL),Cu (g/L)\n", ""
    closeout = "test,product,mass (g),Cu (%)\n"
    for test in made:
        name, celsius = test.bottle.name, test.bottle.temperature_K - 273.15
        tests += f"{name},oxide,bottle roll,500,1000,1.18,1.70,{celsius:g},20,"
        tests += "replaced by reagent solution\n"
        for time, grade in zip(test.bottle.time_h, test.solution_g_per_L, strict=True):
            readings += f"{name},{time:g},20,{grade:.4f}\n"
        closeout += f"{name},residue,{test.residue_g:.1f},{test.tail_kg_per_t / 10:.4f}\n"
    return {
        "tests.csv": tests,
        "readings.csv": readings,
        "closeout.csv": closeout,
        "heads.csv": "domain,Cu (%)\noxide,0.68\n",
        "campaign.toml": SETTINGS,
    }


@pytest.fixture(scope="session")
def sheet_texts():
    return sheets()


@pytest.fixture(scope="session")
def heap_text():
    """A heap with nothing but what it must have, to go to the end of the campaign file."""
    return HEAP


@pytest.fixture
def folder(tmp_path, sheet_texts):
    for name, text in sheet_texts.items():
        (tmp_path / name).write_text(text, encoding="utf-8")
    return tmp_path


@pytest.fixture
def edit(folder):
    """Change a file of the campaign: edit(name, old, new); the campaign file comes back."""

    def change(name, old, new):
        text = (folder / name).read_text(encoding="utf-8")
        assert old in text
        (folder / name).write_text(text.replace(old, new), encoding="utf-8")
        return folder / "campaign.toml"

    return change
