"""The wide bench sheet, as laboratories lay it out, gives the same tests as the tidy tables."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.files import grid_of
from leachkin.testwork import TestworkSettings, metal_balance, read_tests
from leachkin.testwork.bench_form import is_bench_sheet, tables_of_bench_sheet

SETTINGS = TestworkSettings(
    ("Cu",), "H2SO4", dict.fromkeys(("solution", "tail", "head", "residue"), (0.0, 0.02))
)
ONE = """
Bottle roll leach test,,,,,,,
Client,withheld,,Operator,A. B.,,,
Test no,B40,,Sample,oxide,,,
Charge g (dry),500,,Soln mL,1000,,,
T \u00b0C,40,,Size,-6.7+4.75 mm,,,
Start H2SO4,20 g/L,,Aliquots,replaced by reagent solution,,,
Head Cu %,0.68,0.69,0.67,,,,
,,,,,,,
Time,Aliquot,pH,Cu,,Fe,Free acid,Remarks
h,mL,,mg/L,,g/L,g/L,
2,20,1.1,674,,0.01,19.0,
6,20,1.1,1118,,0.02,18.5,ok
avg,,1.1,896,,,,
24,20,1.2,1988,,0.05,18.0,
pump off here,,,,,,,
72,20,1.2,2605,,0.06,18.0,
,,,,,,,
Residue g,485,,,,,,
Tail Cu %,0.108,0.110,,,,,
Filtrate mL,960,,,,,,
"""
TIDY = {
    "tests": "test,domain,dry solids (g),solution (mL),size lower (mm),size upper (mm),"
    "temperature (degC),start H2SO4 (g/L),aliquots\n"
    "B40,oxide,500,1000,4.75,6.7,40,20,replaced by reagent solution\n",
    "readings": "test,time (h),aliquot (mL),pH,Cu (mg/L),Fe (g/L),free H2SO4 (g/L)\n"
    "B40,2,20,1.1,674,0.01,19.0\nB40,6,20,1.1,1118,0.02,18.5\nB40,24,20,1.2,1988,0.05,18.0\n"
    "B40,72,20,1.2,2605,0.06,18.0\n",
    "heads": "domain,Cu (%)\noxide,0.68\noxide,0.69\noxide,0.67\n",
    "closeout": "test,product,mass (g),volume (mL),Cu (%),replicate\nB40,residue,485,,,\n"
    "B40,residue,,,0.108,1\nB40,residue,,,0.110,2\nB40,filtrate,,960,,\n",
}


def grid(text, file="job.xlsx#B40"):
    rows = [(n, line.split(",")) for n, line in enumerate(text.split("\n"), start=1)]
    return grid_of(file, rows, b"")


def read(*texts, settings=SETTINGS):
    problems, tables = [], {}
    for number, text in enumerate(texts):
        taken = [c for s in tables.get("tests", []) for c in s.column("test")]
        for name, sheet in tables_of_bench_sheet(
            grid(text, f"job.xlsx#tab {number + 1}"), problems, taken
        ).items():
            tables.setdefault(name, []).append(sheet)
    tests, found = read_tests(tables, settings)
    return {test.name: test for test in tests}, [*problems, *found]


def same(one, other):
    for name in ("solids_g", "solution_mL", "temperature_K", "reagent_g_per_L", "domain", "kind"):
        assert getattr(one, name) == pytest.approx(getattr(other, name)), name
    for name in ("time_h", "aliquot_mL", "pH", "free_reagent_g_per_L"):
        assert_allclose(getattr(one, name), getattr(other, name), rtol=1e-12, err_msg=name)
    assert_allclose(one.sizes.size_mm, other.sizes.size_mm, rtol=1e-12)
    assert {k: v.value.tolist() for k, v in one.solution.items()} == {
        k: v.value.tolist() for k, v in other.solution.items()
    }
    assert {p.name: (p.amount, p.grade) for p in one.products} == {
        p.name: (p.amount, p.grade) for p in other.products
    }
    assert one.heads["Cu"] == other.heads["Cu"]
    balances = [metal_balance(test, "Cu") for test in (one, other)]
    assert balances[0].final_on_calculated_head == pytest.approx(
        balances[1].final_on_calculated_head, rel=1e-12
    )


def test_the_same_test_as_from_the_tidy_tables(read_texts):
    tests, problems = read(ONE)
    tidy, _ = read_texts(SETTINGS, **TIDY)
    same(tests["B40"], tidy["B40"])
    assert [str(p) for p in problems if p.level != "note"] == []
    assert sorted(tests["B40"].rows["job.xlsx#tab 1"]) == [4, 12, 13, 15, 17, 19, 20, 20, 21]


def test_what_is_left_out_is_said():
    _, problems = read(ONE)
    texts = "\n".join(str(p) for p in problems)
    assert "rows 14 ('avg') are skipped, as averages and sums" in texts
    assert "rows 16 ('pump off here') are not read" in texts


def test_the_assay_may_stand_before_the_mass(read_texts):
    text = ONE.replace("Residue g,485,,,,,,\nTail Cu %,0.108,0.110,,,,,\n",
                       "Tail Cu %,0.108,0.110,,,,,\nResidue g,485,,,,,,\n")  # fmt: skip
    tests, problems = read(text)
    tidy, _ = read_texts(SETTINGS, **TIDY)
    same(tests["B40"], tidy["B40"])
    assert [str(p) for p in problems if p.level != "note"] == []


def side_by_side(gap):
    left = [line.split(",") for line in ONE.strip("\n").split("\n")]
    right = [line.split(",") for line in ONE.replace("B40", "B55").strip("\n").split("\n")]
    return "\n" + "\n".join(
        ",".join([*a, *[""] * gap, *b]) for a, b in zip(left, right, strict=True)
    )


def test_tests_side_by_side(read_texts):
    tests, problems = read(side_by_side(1))
    tidy, _ = read_texts(SETTINGS, **TIDY)
    assert set(tests) == {"B40", "B55"}
    for test in tests.values():
        same(test, tidy["B40"])
    (question,) = [str(p) for p in problems if p.level != "note"]
    assert "tests B40 and B55 have the same assays in 4 rows: copied?" in question


def test_tests_below_one_another(read_texts):
    tests, problems = read(ONE + ONE.replace("B40", "B55"))
    tidy, _ = read_texts(SETTINGS, **TIDY)
    assert set(tests) == {"B40", "B55"}
    for test in tests.values():
        same(test, tidy["B40"])
    (question,) = [str(p) for p in problems if p.level != "note"]
    assert "tests B40 and B55 have the same assays in 4 rows: copied?" in question


def test_tests_on_tabs_named_by_the_tab(read_texts):
    nameless = ONE.replace("Test no,B40,,", "")
    tests, problems = read(nameless, nameless)
    assert set(tests) == {"tab 1", "tab 2"}
    assert any(
        "no test is named above this table; it is called 'tab 1'" in p.found for p in problems
    )


def test_everything_repeated_on_every_row():
    text = """
Test no,Sample,Charge g (dry),Soln mL,% solids,T \u00b0C,Size,Time h,Aliquot mL,pH,Eh mV,DO mg/L,\
Cu mg/L,Fe mg/L,Fe2+ mg/L,Free acid g/L,H2SO4 added g,Remarks
B1,oxide,500,1000,33.3,25,-6.7+4.75 mm,2,20,1.1,450,6,674,10,2,19,1.5,
,,,,,,,6,20,1.1,450,6,1118,20,3,18,1.0,
B2,oxide,500,1000,33.3,40,-6.7+4.75 mm,2,20,1.1,450,6,700,10,2,19,1.5,
,,,,,,,6,20,1.1,450,6,1200,20,3,18,1.0,
"""
    tests, problems = read(text)
    assert set(tests) == {"B1", "B2"}
    assert tests["B2"].temperature_K == pytest.approx(313.15)
    assert tests["B1"].time_h.tolist() == [2.0, 6.0]
    assert set(tests["B1"].solution) == {"Cu", "Fe", "Fe2+"}
    assert_allclose(tests["B1"].added_g["H2SO4"], [1.5, 1.0])
    assert [str(p) for p in problems if p.level == "stop"] == []


def test_dates_and_hours_in_one_table_and_units_behind_values():
    text = """
Leach log,,,,,
Test,R1,,Ore,sulphide,
Charge (dry),500 g,,Solution,1.2 L,
Temp,25 \u00b0C,,Aliquots,returned,
Date,Time,Elapsed,Aliquot,pH,Cu
,,h,mL,,g/L
2026-03-01,10:00,2,20,1.5,0.4
2026-03-02,08:00,24,20,1.5,1.2
"""
    tests, problems = read(text)
    assert [str(p) for p in problems if p.level != "note"] == []
    assert tests["R1"].time_h.tolist() == [2.0, 24.0]
    assert (tests["R1"].solids_g, tests["R1"].solution_mL) == (500.0, 1200.0)
    assert tests["R1"].temperature_K == pytest.approx(298.15)


def test_what_is_no_bench_sheet():
    assert not is_bench_sheet(grid("a,b\n1,2\n"))
    assert not is_bench_sheet(grid("time,temperature\n1,2\n"))
    assert is_bench_sheet(grid(ONE))


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        (
            "2,20,1.1,674",
            "2,20,1.1,about 700",
            r"row 12, column \"Cu \(mg/L\)\": 'about 700' is not",
        ),
        ("24,20,1.2", "4,20,1.2", r"row 15.*time goes back: 4 h after 6 h in row 13"),
        ("Charge g (dry),500", "Charge g (dry),", "dry solids"),
        ("h,mL,,mg/L,,g/L,g/L,", "", r'row 10, column "Time": the heading has no unit'),
        ("T \u00b0C,40", "T \u00b0C,313", "313 degC for a leach in water|313 .*read as 313 K"),
        ("Head Cu %,0.68", "Head Au oz/t,0.68", "which ton"),
        ("Charge g (dry),500", "Charge g (wet),500", "500 g wet and no moisture"),
        ("Cu,,Fe", "Cobre,,Fe", 'column "Cobre.*this column is not used'),
    ],
)
def test_wrong_bench_sheets(old, new, message):
    import re

    assert old in ONE
    _, problems = read(ONE.replace(old, new))
    assert re.search(message, "\n".join(str(p) for p in problems)), [str(p) for p in problems]


def test_damaged_bench_sheets_end_in_problems():
    generator = np.random.default_rng(3)
    pieces = [
        ",",
        "\n",
        "avg",
        "",
        "2",
        "Time",
        "g/L",
        "Residue g",
        "B40",
        ":",
        "-",
        "#REF!",
        "nil",
    ]
    for _ in range(150):
        start = int(generator.integers(len(ONE)))
        end = start + int(generator.integers(0, 12))
        text = ONE[:start] + str(generator.choice(pieces)) + ONE[end:]
        tests, problems = read(text)
        assert all(str(p) for p in problems)
        for test in tests.values():
            for analyte in test.solution:
                metal_balance(test, analyte)
