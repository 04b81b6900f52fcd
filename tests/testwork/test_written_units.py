"""Units as people write them: factors from definitions and molar masses, questions with answers."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.testwork import Answers, TestworkSettings

PRECISION = dict.fromkeys(("solution", "tail", "head", "residue"), (0.0, 0.02))
TESTS = "test,domain,dry solids (g),solution (mL),temperature (degC),aliquots\n"
TESTS += "B1,ore,500,1000,25,returned\n"
#: Atomic weights by hand: Na 22.990, K 39.098, C 12.011, N 14.007, O 15.999, H 1.008, S 32.06,
#: Ca 40.078, U 238.029, Zn 65.38, Al 26.982, Cu 63.546.
NACN, KCN, CN = 22.990 + 26.018, 39.098 + 26.018, 26.018


def of(metals=("Cu",), reagent="H2SO4", **answers):
    return TestworkSettings(metals, reagent, PRECISION, answers=Answers(**answers))


def reading(read_texts, heading, cell, settings, more=""):
    readings = f"test,time (h),{heading}\nB1,0,{cell}\nB1,2,{cell}\n"
    tests, problems = read_texts(settings, tests=TESTS, readings=readings)
    return tests["B1"], problems


#: heading, cell, campaign's reagent, what is read as free reagent [g/L]
TITRATIONS = [
    ("free H2SO4 (g/L)", "10", "H2SO4", 10.0),
    ("Free acid g/L", "10", "H2SO4", 10.0),
    ("H2SO4 (g/L)", "10", "H2SO4", 10.0),
    ("H\u2082SO\u2084 (N)", "1", "H2SO4", 98.072 / 2),
    ("free acid (M)", "1", "H2SO4", 98.072),
    ("free HCl (N)", "2", "HCl", 2 * 36.46),
    ("NaCN (ppm)", "500", "NaCN", 0.5),
    ("free KCN (%)", "0.10", "NaCN", 1.0 * NACN / KCN),
    ("free CN (mg/L)", "500", "NaCN", 0.5 * NACN / CN),
    ("free Ca(CN)2 (g/L)", "1", "NaCN", 2 * NACN / (40.078 + 2 * CN)),
    ("free Ca(OH)2 (g/L)", "1", "CaO", 56.077 / 74.093),
    ("free H2SO4 (% w/v)", "1", "H2SO4", 10.0),
]


@pytest.mark.parametrize(("heading", "cell", "reagent", "expected"), TITRATIONS)
def test_titrations(read_texts, heading, cell, reagent, expected):
    answered = of(reagent=reagent, solution_density_g_per_mL=1.0)
    test, problems = reading(read_texts, heading, cell, answered)
    assert [str(p) for p in problems if p.level != "note"] == []
    assert_allclose(test.free_reagent_g_per_L, expected, rtol=2e-4)


#: heading, cell, metals, analyte, value [g/L]
ASSAYS = [
    ("Cu mg/L", "5", ("Cu",), "Cu", 0.005),
    ("Copper (mg/L)", "5", ("Cu",), "Cu", 0.005),
    ("Cu_mg_per_L", "5", ("Cu",), "Cu", 0.005),
    ("Cu total (g/L)", "5", ("Cu",), "Cu", 5.0),
    ("Fe\u00b3\u207a (g/L)", "5", ("Cu",), "Fe3+", 5.0),
    ("Fe(II) (g/L)", "5", ("Cu",), "Fe2+", 5.0),
    ("Fe+2 (g/L)", "5", ("Cu",), "Fe2+", 5.0),
    ("ferrous iron (g/L)", "5", ("Cu",), "Fe2+", 5.0),
    ("U3O8 (mg/L)", "1000", ("U",), "U", 3 * 238.029 / (3 * 238.029 + 8 * 15.999)),
    ("Al2O3 (g/L)", "1", ("Al",), "Al", 2 * 26.982 / (2 * 26.982 + 3 * 15.999)),
    ("ZnO (g/L)", "1", ("Zn",), "Zn", 65.38 / 81.379),
    ("CuSO4.5H2O (g/L)", "1", ("Cu",), "Cu", 63.546 / 249.677),
]


@pytest.mark.parametrize(("heading", "cell", "metals", "analyte", "expected"), ASSAYS)
def test_assays(read_texts, heading, cell, metals, analyte, expected):
    test, problems = reading(read_texts, heading, cell, of(metals))
    assert [str(p) for p in problems if p.level in ("stop",)] == []
    assert_allclose(test.solution[analyte].value, expected, rtol=1e-4)


def head(read_texts, heading, settings, cell="0.1"):
    heads = f"domain,{heading}\nore,{cell}\n"
    tests, problems = read_texts(settings, tests=TESTS, heads=heads)
    return tests["B1"].heads, problems


@pytest.mark.parametrize(
    ("heading", "ton", "expected"),
    [
        ("Au (oz/t)", "short", 0.1 * 31.1034768 / 0.90718474),
        ("Au opt", "metric", 0.1 * 31.1034768),
        ("Au (oz/ton)", "long", 0.1 * 31.1034768 / 1.0160469088),
        ("Au (lb/t)", "short", 500 * 0.1),
        ("Au (lb/ton)", "metric", 453.59237 * 0.1),
    ],
)
def test_tons_are_asked_once(read_texts, heading, ton, expected):
    heads, problems = head(read_texts, heading, of(("Au",), "NaCN"))
    assert "Au" not in heads
    (question,) = [p for p in problems if p.level == "ask"]
    assert question.paste == 'sheets.ton = "short"'
    heads, problems = head(read_texts, heading, of(("Au",), "NaCN", ton=ton))
    assert [p for p in problems if p.level == "ask"] == []
    assert_allclose(heads["Au"].value_kg_per_t * 1000, expected, rtol=1e-6)


def test_compounds_in_the_heads(read_texts):
    heads, _ = head(read_texts, "U3O8 (%)", of(("U",)))
    assert_allclose(heads["U"].value_kg_per_t, 1.0 * 0.8480, rtol=1e-4)
    heads, _ = head(read_texts, "CaCO3 (%)", of(("Cu",)))
    assert set(heads) == {"CaCO3"}


def test_normality_and_basis_are_said(read_texts):
    _, problems = reading(read_texts, "free H2SO4 (N)", "1", of())
    assert "1 N H2SO4 is read as 49.036 g/L" in str(problems[0])
    _, problems = reading(read_texts, "free KCN (g/L)", "1", of(reagent="NaCN"))
    assert "KCN is read as NaCN, 1 g as 0.7526 g" in str(problems[0])


@pytest.mark.parametrize(
    ("heading", "answer", "expected"),
    [
        ("free cyanide (mg/L)", {"cyanide": "NaCN"}, 0.5),
        ("free cyanide (mg/L)", {"cyanide": "CN"}, 0.5 * NACN / CN),
        ("free cyanide (mg/L)", {"cyanide": "KCN"}, 0.5 * NACN / KCN),
    ],
)
def test_cyanide_strength_is_asked(read_texts, heading, answer, expected):
    test, problems = reading(read_texts, heading, "500", of(reagent="NaCN"))
    assert test.free_reagent_g_per_L is None
    (question,) = [p for p in problems if p.level == "ask"]
    assert "'cyanide' given as what?" in question.found
    assert question.paste == 'sheets.cyanide = "NaCN"'
    test, _ = reading(read_texts, heading, "500", of(reagent="NaCN", **answer))
    assert_allclose(test.free_reagent_g_per_L, expected, rtol=2e-4)


def test_lime_is_asked(read_texts):
    test, problems = reading(read_texts, "lime added (g)", "1", of(reagent="NaCN"))
    assert test.added_g == {}
    assert 'sheets.lime = "CaO"' in [p.paste for p in problems]
    test, _ = reading(read_texts, "lime added (g)", "1", of(reagent="NaCN", lime="Ca(OH)2"))
    assert set(test.added_g) == {"Ca(OH)2"}


def test_reagent_added_by_volume(read_texts):
    test, problems = reading(read_texts, "H2SO4 added (mL)", "2", of())
    (question,) = [p for p in problems if p.paste.startswith("sheets")]
    assert question.paste == 'sheets.stock_solutions.H2SO4 = "1804 g/L"'
    stock = of(stock_solutions={"H2SO4": 1800.0})
    test, _ = reading(read_texts, "acid added (mL)", "2", stock)
    assert_allclose(test.added_g["H2SO4"], 3.6, rtol=1e-12)


def test_density_of_solutions(read_texts):
    test, problems = reading(read_texts, "Cu (ppm)", "1000", of())
    assert 'sheets.solution_density = "1.00 g/mL"' in [p.paste for p in problems]
    assert_allclose(test.solution["Cu"].value, 1.0, rtol=1e-12)
    test, problems = reading(read_texts, "Cu (ppm)", "1000", of(solution_density_g_per_mL=1.1))
    assert [p for p in problems if p.level == "ask"] == []
    assert_allclose(test.solution["Cu"].value, 1.1, rtol=1e-12)


@pytest.mark.parametrize(
    ("heading", "electrode", "shift"),
    [
        ("Eh (mV SHE)", None, 0.0),
        ("Eh (mV vs SHE)", None, 0.0),
        ("Eh vs SCE (mV)", None, 244.0),
        ("ORP mV", "Ag/AgCl 3 M", 210.0),
        ("Eh (mV vs Ag/AgCl 3.5 M)", None, 205.0),
        ("Eh (V)", "Ag/AgCl saturated", 197.0),
    ],
)
def test_eh_against_its_electrode(read_texts, heading, electrode, shift):
    cell = "0.45" if "(V)" in heading else "450"
    test, problems = reading(read_texts, heading, cell, of(electrode=electrode))
    assert [str(p) for p in problems if p.level == "ask" and "Eh" in p.column] == []
    assert_allclose(test.logged["Eh_mV_SHE"], 450.0 + shift, rtol=1e-12)


def test_electrode_and_filling_are_asked(read_texts):
    test, problems = reading(read_texts, "Eh (mV)", "450", of())
    (question,) = [p for p in problems if p.column == "Eh (mV)"]
    assert "against which electrode?" in question.found
    assert question.paste == 'sheets.electrode = "Ag/AgCl 3 M"'
    assert_allclose(test.logged["Eh_mV_SHE"], 450.0)
    _, problems = reading(read_texts, "ORP mV", "450", of())
    assert "against which electrode?" in [p for p in problems if p.paste][0].found
    test, problems = reading(read_texts, "Eh (mV Ag/AgCl)", "450", of())
    (question,) = [p for p in problems if p.column.startswith("Eh")]
    assert "Ag/AgCl with which filling? It is 197 to 236 mV" in question.found


MESH = "test,domain,dry solids (g),solution (mL),temperature (degC),aliquots,"
MESH += "size lower (mesh),size upper (mesh)\nB1,ore,500,1000,25,returned,10,4\n"


@pytest.mark.parametrize(("series", "lower"), [("US", 2.0), ("BSS", None), ("Tyler", 1.651)])
def test_mesh_by_series(read_texts, series, lower):
    tests, problems = read_texts(of(mesh=series), tests=MESH)
    if lower is None:  # there is no 4 mesh in that series
        assert any("'4' is no mesh of the BSS series" in p.found for p in problems)
        return
    assert_allclose(tests["B1"].sizes.edges_mm.min(), lower, rtol=1e-12)


def test_codes_and_limits(read_texts):
    readings = "test,time (h),Cu (mg/L),pH\nB1,0,BDL,1\nB1,2,-99,1\nB1,4,-0.5,1\nB1,6,~5,\u2264 1\n"
    tests, problems = read_texts(of(), tests=TESTS, readings=readings)
    pastes = {p.paste for p in problems if p.paste}
    assert pastes == {
        'sheets.limits.Cu = "0.01 mg/L"',
        'sheets.codes."-99" = "missing"',
        'sheets.negative_assays = "below limit"',
    }
    assert np.isnan(tests["B1"].solution["Cu"].value).tolist() == [True, True, True, False]
    assert any("'\u2264 1' is not a number" in p.found for p in problems)  # no bound of a pH
    answered = of(
        limits={"Cu": "0.5 mg/L"}, codes={"-99": "missing"}, negative_assays="below limit"
    )
    tests, problems = read_texts(answered, tests=TESTS, readings=readings)
    assays = tests["B1"].solution["Cu"]
    assert_allclose(assays.value, [0.0005, np.nan, 0.0005, 0.005], rtol=1e-12)
    assert assays.bound.tolist() == [-1, 0, -1, 0]
    assert [p for p in problems if p.paste] == []
    tests, _ = read_texts(replace(answered, answers=replace(answered.answers, negative_assays=
        "missing")), tests=TESTS, readings=readings)  # fmt: skip
    assert np.isnan(tests["B1"].solution["Cu"].value[2])


@pytest.mark.parametrize("word", ["< 0.5", "\u22640.5", "less than 0.5", "<=0.5"])
def test_ways_to_write_a_bound(read_texts, word):
    test, _ = reading(read_texts, "Cu (g/L)", word, of())
    assert test.solution["Cu"].bound.tolist() == [-1, -1]
    assert_allclose(test.solution["Cu"].value, 0.5, rtol=1e-12)
