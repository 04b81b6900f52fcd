"""The long export of a laboratory system: samples find their test and time, checks are kept."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.files import grid_of, read_sheet
from leachkin.testwork import (
    Answers,
    TestworkSettings,
    is_lab_export,
    precision_of_pairs,
    read_lab_export,
    read_tests,
)
from leachkin.testwork.sample_ids import place_of_sample

PRECISION = dict.fromkeys(("solution", "tail", "head", "residue"), (0.0, 0.02))
EXPORT = """job,sample_id,lab_no,analyte,method,value,qualifier,unit,LOD,dilution,type
J1,B4 2 h,L1,CU,ICP,674,,mg/L,0.1,1,
J1,B4 2 h,L1,Fe,ICP,0.05,<,mg/L,0.05,1,
J1,B40-24h,L2,Copper,ICP,1988,,mg/L,0.1,1,
J1,B40-24h,L2,Fe,ICP,BDL,,mg/L,0.05,1,
J1,B40-2h,L3,Cu,ICP,700,,mg/L,0.1,1,
J1,B40-24h dup,L4,Cu,ICP,2008,,mg/L,0.1,1,duplicate
J1,B40 residue,L5,Cu,AAS,0.108,,%,0.001,1,
J1,B40 residue,L6,Cu,AAS,0.110,,%,0.001,1,
J1,oxide head 1,L7,Cu,AAS,0.68,,%,0.001,1,
J1,oxide head 2,L8,Cu,AAS,0.69,,%,0.001,1,
J1,Blank,L9,Cu,ICP,0.1,<,mg/L,0.1,1,
J1,unknown thing,L11,Cu,ICP,3,,mg/L,0.1,1,
"""
TESTS = "test,domain,dry solids (g),solution (mL),temperature (degC),aliquots\n"
TESTS += "B4,oxide,500,1000,25,returned\nB40,oxide,500,1000,40,returned\n"
READINGS = "test,time (h),aliquot (mL),pH\nB40,2,20,1.1\nB40,24,20,1.2\n"


def of(**answers):
    return TestworkSettings(("Cu",), "H2SO4", PRECISION, answers=Answers(**answers))


def grid(text):
    rows = [(n, line.split(",")) for n, line in enumerate(text.split("\n"), start=1)]
    return grid_of("lims.csv", rows, b"")


@pytest.fixture
def read(tmp_path):
    def reading(text, settings=None, readings=READINGS):
        settings = settings or of()
        sheets = {}
        for name, content in (("tests", TESTS), ("readings", readings)):
            (tmp_path / f"{name}.csv").write_text(content)
            sheets[name] = [read_sheet(f"{name}.csv", tmp_path)]
        problems = []
        export = read_lab_export(
            grid(text), ["B4", "B40"], ["oxide"], sheets["readings"], settings, problems
        )
        sheets["readings"] = [export.replaced.get(s.file, s) for s in sheets["readings"]]
        for name, sheet in export.tables.items():
            sheets.setdefault(name, []).append(sheet)
        tests, found = read_tests(sheets, settings)
        return {test.name: test for test in tests}, [*problems, *found], export

    return reading


def test_samples_find_their_test_and_time(read):
    tests, problems, _ = read(EXPORT)
    assert [str(p) for p in problems if p.level == "stop"] == []
    b40 = tests["B40"]
    assert b40.time_h.tolist() == [2.0, 24.0]
    assert b40.aliquot_mL.tolist() == [20.0, 20.0]
    assert_allclose(b40.solution["Cu"].value, [0.700, 1.988], rtol=1e-12)
    assert_allclose(b40.solution["Fe"].value, [np.nan, 5e-5], rtol=1e-12)
    assert b40.solution["Fe"].bound.tolist() == [0, -1]
    assert_allclose(b40.pH, [1.1, 1.2])
    assert_allclose(tests["B4"].solution["Cu"].value, [0.674], rtol=1e-12)
    assert tests["B4"].solution["Fe"].bound.tolist() == [-1]
    assert_allclose(b40.heads["Cu"].value_kg_per_t, 6.85, rtol=1e-12)
    (residue,) = b40.products
    assert_allclose(residue.grade["Cu"][0], 1.09, rtol=1e-12)
    assert residue.grade["Cu"][2] == 2


def test_what_is_not_used_is_said(read):
    _, problems, export = read(EXPORT)
    texts = "\n".join(str(p) for p in problems)
    assert 'lims.csv, row 13, column "sample": samples that name no test and time' in texts
    assert "1 blanks: Blank Cu <0.1 mg/L" in texts
    assert "a second Cu of sample B40 residue and 2 more" in texts
    assert {r.kind for r in export.quality} == {"blank", "duplicate"}
    assert sorted(p.kind for p in export.pairs) == ["head", "solution", "tail"]


def test_samples_by_the_number_of_the_laboratory(read):
    readings = "test,time (h),aliquot (mL),sample id\nB40,2,20,X-17\nB40,24,20,x17b\n"
    export = "sample,analyte,result,unit\nX17,Cu,700,mg/L\nX-17b,Cu,1.9,g/L\nX 17,Fe,3,mg/L\n"
    tests, problems, _ = read(export, readings=readings)
    assert any("assays of 2 samples are put in by their sample id" in p.found for p in problems)
    assert [p for p in problems if p.level == "stop"] != []  # two columns of copper: mg/L and g/L
    tests, problems, _ = read(export.replace("1.9,g/L", "1900,mg/L"), readings=readings)
    assert [str(p) for p in problems if p.level == "stop"] == []
    assert_allclose(tests["B40"].solution["Cu"].value, [0.7, 1.9], rtol=1e-12)
    assert_allclose(tests["B40"].solution["Fe"].value, [0.003, np.nan], rtol=1e-12)


def test_dilution_is_asked_once(read):
    text = EXPORT.replace("1988,,mg/L,0.1,1,", "198.8,,mg/L,0.1,10,")
    tests, problems, _ = read(text)
    assert 'sheets.dilution = "applied"' in [p.paste for p in problems]
    assert_allclose(tests["B40"].solution["Cu"].value[1], 0.1988)
    tests, problems, _ = read(text, of(dilution="to apply"))
    assert "sheets.dilution" not in "".join(p.paste for p in problems)
    assert_allclose(tests["B40"].solution["Cu"].value[1], 1.988)


def test_two_numbers_for_one_reading_are_asked(read):
    readings = "test,time (h),aliquot (mL),Cu (g/L)\nB40,2,20,0.9\nB40,24,20,\n"
    tests, problems, _ = read(EXPORT, readings=readings)
    assert any("Cu of test B40 differs from readings.csv" in p.found for p in problems)
    assert_allclose(tests["B40"].solution["Cu"].value, [0.9, 1.988])


@pytest.mark.parametrize(
    ("sample", "table", "record"),
    [
        ("B40 24 h", "readings", {"test": "B40", "time (h)": "24"}),
        ("b40_t=1.5h", "readings", {"test": "B40", "time (h)": "1.5"}),
        ("B-40/2d", "readings", {"test": "B40", "time (h)": "48"}),
        ("B40 90 min", "readings", {"test": "B40", "time (h)": "1.5"}),
        ("B40 head", "heads", {"test": "B40"}),
        ("head oxide", "heads", {"domain": "oxide"}),
        ("B40 tails R2", "closeout", {"test": "B40", "product": "residue"}),
        ("B40-PLS", "closeout", {"test": "B40", "product": "filtrate"}),
    ],
)
def test_names_of_samples(sample, table, record):
    place = place_of_sample(sample, ["B4", "B40"], ["oxide"])
    assert place is not None
    assert (place.table, dict(place.record)) == (table, record)


@pytest.mark.parametrize("sample", ["B401 24 h", "B40", "B40-24", "24 h", "", "oxide", "B40 x"])
def test_names_that_say_nothing(sample):
    assert place_of_sample(sample, ["B4", "B40"], ["oxide"]) is None


def test_what_is_no_export():
    assert is_lab_export(grid(EXPORT))
    assert not is_lab_export(grid("test,time (h),Cu (mg/L)\nB1,2,3\n"))


@pytest.mark.parametrize(("floor", "part"), [(0.0, 0.02), (0.01, 0.02), (0.02, 0.0)])
def test_precision_from_pairs_recovers_the_truth(floor, part):
    """400 pairs from 0.01 to 10: both parts within four of their own errors (about 4 %)."""
    generator = np.random.default_rng(7)
    true = 10.0 ** generator.uniform(-2.0, 1.0, 400)
    sd = floor + part * true
    first, second = (true + sd * generator.normal(size=400) for _ in range(2))
    found = precision_of_pairs(first, second)
    assert found.pairs > 350
    assert found.floor == pytest.approx(floor, rel=0.25, abs=5e-4)
    assert found.proportional == pytest.approx(part, rel=0.2, abs=1e-3)


def test_few_pairs_give_no_floor():
    assert precision_of_pairs(np.ones(2), np.ones(2) * 1.1) is None
    assert precision_of_pairs(np.ones(5), np.ones(5)) is None
    found = precision_of_pairs(np.array([1.0, 2.0, 4.0]), np.array([1.02, 1.96, 4.08]))
    assert found.floor == 0.0
