"""Every bad sheet ends in a clear message with its place, and what can be read is read."""

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.testwork import metal_balance

BAD = Path(__file__).parent / "bad"

#: file, level, what the message says
MESSAGES = [
    ("missing_unit.readings", "stop", r'row 1, column "Cu": the heading has no unit. Allowed: '
     r'g/L.*mg/L.*Try: write it as "Cu \(g/L\)"'),
    ("no_time_unit.readings", "stop", r'"time": the heading has no unit.*as "time \(h\)"'),
    ("unknown_column.readings", "stop", r"unknown column 'tmie \(h\)'.*did you mean time \(h\).*"
     r"begin it with 'note'"),
    ("unknown_element.readings", "stop", r"unknown column 'CU \(mg/L\)'.*did you mean Cu \(g/L\)"),
    ("ppm_in_solution.readings", "ask", r"column \"Cu \(ppm\)\": 'ppm' of a solution is by mass: "
     r'read at a density of 1 g/mL meanwhile.*write solution_density = "1.00 g/mL" under'),
    ("column_twice.readings", "stop", r"\"Cu \(g/L\)\": it means the same as column 'Cu \(mg/L\)'"),
    ("time_backwards.readings", "stop", r'row 4, column "time \(h\)": time goes back: 3 h after '
     r"24 h in row 3"),
    ("time_twice.readings", "ask", r"row 3.*2 h twice in one test"),
    ("clock_time.readings", "note", r"row 2, column \"time \(h\)\": '24:00' and the like are read "
     r"as hours and minutes since the start"),
    ("no_time.readings", "stop", r"row 2, column \"time \(h\)\": the time is missing"),
    ("text_for_number.readings", "stop", r"row 3, column \"Cu \(mg/L\)\": 'about 1100' is not a "
     r'number. Allowed: a number in mg/L, one with "<" or ">" before it, or an empty cell'),
    ("thousands_mark.readings", "stop", r"row 2.*'1,118' has a comma, a decimal or a thousands "
     r'mark.*write it with "." as decimal mark'),
    ("beyond_measure.readings", "stop", r"row 2, column \"Cu \(mg/L\)\": '1e30' is beyond all "
     r"measure"),
    ("negative_assay.readings", "ask", r"row 2, column \"Cu \(mg/L\)\": the assay is negative "
     r'\(-5\): is it below a limit\? Read as missing meanwhile.*write "<5"'),
    ("negative_aliquot.readings", "stop", r'row 2, column "aliquot \(mL\)": -20 has no meaning'),
    ("below_limit.readings", "note", r'1 cell with "<" or ">", kept as below or above that limit: '
     r'row 2 "Cu \(mg/L\)" \'<0.01\''),
    ("below_limit_time.readings", "stop", r"row 2, column \"time \(h\)\": '<2' is not a number"),
    ("missing_words.readings", "note", r"4 cells without a number, read as missing: row 3 "
     r'"Cu \(mg/L\)" \'nil\'; row 4 "Cu \(mg/L\)" \'trace\'; row 2 "pH" \'n/a\''),
    ("unknown_test.readings", "stop", r"row 3, column \"test\": unknown test 'B11'.*did you mean "
     r"B1"),
    ("other_spelling.readings", "ask", r"row 2.*'b-1' is spelled 'B1' in the tests sheet"),
    ("no_aliquot.readings", "ask", r"test B1 has readings without an aliquot volume; taken as 0"),
    ("litres_as_millilitres.readings", "stop", r"row 2.*20000 mL are taken out of the 1000 mL"),
    ("ph_of_105.readings", "ask", r'row 2, column "pH": 105 has no meaning here.*-2 to 15'),
    ("failed_formula.readings", "stop", r"row 2.*#REF! stands where a formula failed"),
    ("mixed_decimal_marks.readings", "stop", r"decimal marks are mixed: '0,674' in row 2.*'1.118'"
     r" in row 3"),
    ("code_page.readings", "note", r"read as Windows-1252 text, not UTF-8; .*'\u00b5' in row 1"),
    ("decimal_commas.readings", "note", r"read with semicolons between cells and decimal commas"),
    ("long_row.readings", "stop", r"row 2: the row has 5 cells under 4 headings"),
    ("empty.readings", "stop", r"empty.readings.csv: the file is empty"),
    ("only_headings.readings", "stop", r"there are headings and no rows"),
    ("no_policy.tests", "ask", r'row 2, column "aliquots": test B1 does not say what happened.*'
     r"replaced by reagent solution / replaced by water / not replaced / returned"),
    ("unknown_policy.tests", "stop", r"row 2.*unknown aliquot policy 'topped up'. Allowed: "
     r"replaced by reagent solution"),
    ("kelvin_under_celsius.tests", "ask", r'row 2, column "temperature \(degC\)": 298 degC for a '
     r"leach in water: read as 298 K meanwhile"),
    ("celsius_under_kelvin.tests", "ask", r"25 K for a leach in water: read as 25 degC"),
    ("no_temperature.tests", "ask", r"test B1 has no temperature; 25 degC is taken meanwhile"),
    ("wet_mass_only.tests", "ask", r"row 2.*500 g wet and no moisture; taken as dry meanwhile"),
    ("no_solids.tests", "stop", r"row 2, column \"dry solids \(g\)\": the dry solids are missing"),
    ("no_solids.tests", "stop", r'row 3, column "dry solids \(g\)": 0 has no meaning here'),
    ("names_alike.tests", "ask", r"row 3.*are 'B1' and 'b 1' the same test\? Kept apart"),
    ("name_twice.tests", "stop", r"row 3, column \"test\": test 'B1' stands in row 2 too"),
    ("sizes_exchanged.tests", "stop", r"row 2.*6.7 mm is not below the upper size 4.75 mm"),
    ("mesh.tests", "ask", r"row 1, column \"size lower \(mesh\)\": 'mesh' of which "
     r'series\? 10 mesh is 2 mm US, 1.65 mm Tyler, 1.7 mm BSS.*write mesh = "US" under \[sheets\]'),
    ("unknown_kind.tests", "stop", r"unknown kind 'botle roll'.*did you mean bottle roll"),
    ("ounces_per_ton.heads", "ask", r"column \"Au \(oz/t\)\": 'oz/t': which ton\?.*"
     r"34.286 g/t.*31.103 g/t.*30.612 g/t.*write ton = \"short\" under"),
    ("unknown_domain.heads", "note", r"row 2.*no test is of domain 'oxid'.*did you mean oxide"),
    ("residue_not_weighed.closeout", "ask", r"row 2.*the mass of the residue is missing; the "
     r"charge is taken for it"),
    ("no_product.closeout", "stop", r"row 2, column \"product\": the row names no product"),
    ("coarse_left.sieves", "stop", r"row 2.*coarsest"),
    ("hole.sieves", "stop", r"row 3, column \"retained \(g\)\": an aperture or a mass is missing"),
]  # fmt: skip


def read_bad(read_with, name):
    return read_with({name.split(".")[1]: BAD / f"{name}.csv"})


@pytest.mark.parametrize(("name", "level", "message"), MESSAGES)
def test_message(read_with, name, level, message):
    _, problems = read_bad(read_with, name)
    of_file = [p for p in problems if p.file == f"{name}.csv" and p.level == level]
    texts = "\n".join(str(p) for p in of_file)
    assert of_file, [str(p) for p in problems]
    with pytest.raises(InputProblems, match=message):
        raise InputProblems(of_file) from None
    assert "Traceback" not in texts


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("not_text.readings", r"not_text.readings.csv, row 2: character U\+0000 does not belong"),
    ],
)
def test_not_text(read_with, name, message):
    with pytest.raises(InputProblems, match=message):
        read_bad(read_with, name)


def test_every_bad_file_is_matched():
    told = {name for name, _, _ in MESSAGES} | {"not_text.readings"}
    told |= {"residue_heavier.closeout", "no_closure.closeout", "wash_alone.closeout"}
    assert told == {path.stem for path in BAD.glob("*.csv")}


def test_what_can_be_read_is_read(read_with):
    tests, _ = read_bad(read_with, "text_for_number.readings")
    assert_allclose(tests["B1"].solution["Cu"].value, [0.674, np.nan], rtol=1e-12)
    tests, _ = read_bad(read_with, "time_backwards.readings")
    assert tests["B1"].time_h.tolist() == [2.0, 24.0]
    tests, _ = read_bad(read_with, "negative_assay.readings")
    assert_allclose(tests["B1"].solution["Cu"].value, [np.nan, 1.118], rtol=1e-12)
    tests, _ = read_bad(read_with, "other_spelling.readings")
    assert tests["B1"].time_h.tolist() == [2.0, 6.0]
    tests, _ = read_bad(read_with, "decimal_commas.readings")
    assert tests["B1"].time_h.tolist() == [2.0, 6.5]
    assert tests["B1"].solution["Cu"].value.tolist() == [0.674, 1.118]
    tests, _ = read_bad(read_with, "kelvin_under_celsius.tests")
    assert_allclose([tests[n].temperature_K for n in ("B1", "B2")], [298.0, 313.15], rtol=1e-12)
    tests, _ = read_bad(read_with, "celsius_under_kelvin.tests")
    assert_allclose([tests[n].temperature_K for n in ("B1", "B2")], [298.15, 313.15], rtol=1e-12)
    tests, _ = read_bad(read_with, "ounces_per_ton.heads")
    assert set(tests["B1"].heads) == {"Cu"}
    tests, _ = read_bad(read_with, "below_limit.readings")
    assays = tests["B1"].solution["Cu"]
    assert assays.bound.tolist() == [-1, 0]
    assert_allclose(assays.value, [1e-5, 1.118], rtol=1e-12)


def test_questions_put_a_test_on_hold(read_with):
    tests, problems = read_bad(read_with, "no_policy.tests")
    assert tests["B1"].state == "waiting for an answer"
    assert [p for p in problems if p.level == "ask"] == list(tests["B1"].problems)


def remarks(read_with, name, test="B1"):
    tests, _ = read_bad(read_with, name)
    return metal_balance(tests[test], "Cu")


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("residue_heavier.closeout", "test B1 has 512 g of residue from a charge of 500 g"),
        ("residue_not_weighed.closeout", "not weighed: 60.9 % without a loss of mass, 63.4 % with"),
        ("no_closure.closeout", "test B1 closes at 1.394.*the basis matters: 59.5 % on the assay"),
        ("wash_alone.closeout", "no filtrate with a volume.*wash not counted"),
        ("no_policy.tests", "61.6 % if they were and 60.7 % if not, 1.0 points apart"),
    ],
)
def test_remarks_of_the_balance(read_with, name, message):
    problems = remarks(read_with, name).problems
    assert {p.level for p in problems} == {"note"}
    with pytest.raises(InputProblems, match=message):
        raise InputProblems(problems)
