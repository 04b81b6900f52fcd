"""Sieve tables either way round give the same distribution."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.testwork import Answers, TestworkSettings

PRECISION = dict.fromkeys(("solution", "tail", "head", "residue"), (0.0, 0.02))
TESTS = "test,domain,dry solids (g),solution (mL),temperature (degC),aliquots\n"
TESTS += "B1,ore,500,1000,25,returned\n"
APERTURES = ["12.5", "9.5", "6.7", "4.75", "pan"]
RETAINED = [0.0, 25.0, 40.0, 20.0, 15.0]
PASSING = [100.0, 75.0, 35.0, 15.0, 0.0]
FORMS = {
    "retained (g)": [4 * r for r in RETAINED],
    "retained (%)": RETAINED,
    "passing (%)": PASSING,
    "cumulative retained (%)": [100.0 - p for p in PASSING],
    "% passing": PASSING,
    "% ret": RETAINED,
}


def of(**answers):
    return TestworkSettings(("Cu",), "H2SO4", PRECISION, answers=Answers(**answers))


def read(read_texts, heading, values, apertures=APERTURES, size="aperture (mm)", settings=None):
    sieves = f"domain,{size},{heading}\n"
    sieves += "".join(f"ore,{a},{v}\n" for a, v in zip(apertures, values, strict=True))
    tests, problems = read_texts(settings or of(), tests=TESTS, sieves=sieves)
    return tests["B1"].sizes, problems


@pytest.mark.parametrize("heading", sorted(FORMS))
@pytest.mark.parametrize("turned", [False, True])
def test_every_form_is_the_same_ore(read_texts, heading, turned):
    step = -1 if turned else 1
    sizes, problems = read(read_texts, heading, FORMS[heading][::step], APERTURES[::step])
    assert [str(p) for p in problems] == []
    order = np.argsort(sizes.size_mm)[::-1]
    assert_allclose(sizes.mass_share[order], [0.25, 0.40, 0.20, 0.15], rtol=1e-9)
    assert_allclose(sizes.size_mm[order][:3], np.sqrt([12.5 * 9.5, 9.5 * 6.7, 6.7 * 4.75]))


def test_mesh_pan_and_total(read_texts):
    apertures = ["4", "10", "20", "-20", "Total"]
    values = [0, 50, 30, 20, 100]
    sizes, problems = read(read_texts, "retained (g)", values, apertures, "Mesh", of(mesh="US"))
    assert_allclose(sizes.size_mm[0], np.sqrt(4.75 * 2.0), rtol=1e-9)
    assert_allclose(sizes.mass_share, [0.5, 0.3, 0.2])
    assert "rows 6 ('Total') are left out, as totals" in str(problems[0])
    _, problems = read(read_texts, "retained (g)", values, apertures, "Mesh")
    assert 'sheets.mesh = "US"' in [p.paste for p in problems]


@pytest.mark.parametrize(
    ("heading", "values", "level", "message"),
    [
        ("retained (%)", [0, 25, 40, 20, 11.8], "ask", "sums to 96.8 %: is the pan missing"),
        ("passing (%)", [0, 25, 65, 85, 100], "ask", "cumulative passing rises with falling size"),
        ("passing (%)", [100, 75, 80, 15, 0], "stop", "row 4.*goes up and down"),
        ("retained (g)", [10, 25, 40, 20, 5], "stop", "12.5 mm.*coarser sieve"),
        ("kept", [0, 25, 40, 20, 15], "stop", "no column of what stays on each sieve"),
        ("retained (g)", [0, 25, "", 20, 15], "stop", "an aperture or a mass is missing"),
    ],
)
def test_wrong_tables(read_texts, heading, values, level, message):
    _, problems = read(read_texts, heading, values)
    told = [str(p) for p in problems if p.level == level]
    assert re.search(message, "\n".join(told)), [str(p) for p in problems]


def test_the_wrong_way_is_read_meanwhile(read_texts):
    sizes, _ = read(read_texts, "passing (%)", [0, 25, 65, 85, 100])
    assert_allclose(sizes.mass_share, [0.25, 0.40, 0.20, 0.15], rtol=1e-9)
