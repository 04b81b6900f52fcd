"""Times by date and clock, and sizes and charges as people write them."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.testwork import Answers, TestworkSettings
from leachkin.testwork.clock import day_comes_first, read_stamp
from leachkin.testwork.written_sizes import SizeProblem, read_size

PRECISION = dict.fromkeys(("solution", "tail", "head", "residue"), (0.0, 0.02))
TESTS = "test,dry solids (g),solution (mL),temperature (degC),aliquots{}\n"
ROW = "B1,500,1000,25,returned{}\n"


def of(**answers):
    return TestworkSettings(("Cu",), "H2SO4", PRECISION, answers=Answers(**answers))


@pytest.mark.parametrize(
    ("text", "moment"),
    [
        ("2026-03-01 14:30", "2026-03-01T14:30"),
        ("2026-03-01T14:30:00", "2026-03-01T14:30"),
        ("01/03/2026 2:30 pm", "2026-03-01T14:30"),
        ("1.3.26 14:30", "2026-03-01T14:30"),
        ("1-Mar-2026 12:00 am", "2026-03-01T00:00"),
        ("Mar 1, 2026 24:00", "2026-03-02T00:00"),
        ("46082.5", "2026-03-01T12:00"),
    ],
)
def test_stamps(text, moment):
    assert np.datetime64(read_stamp(text).moment) == np.datetime64(moment)


@pytest.mark.parametrize("text", ["", "soon", "32/13/2026", "14:75", "13:00 pm", "12", "1/2"])
def test_no_stamps(text):
    stamp = read_stamp(text)
    assert stamp is None or stamp.moment is None


def test_order_of_day_and_month():
    assert day_comes_first(["3/4/2026", "13/4/2026"], None) == (True, "")
    assert day_comes_first(["3/4/2026", "3/14/2026"], None) == (False, "")
    assert day_comes_first(["3/4/2026"], "month first") == (False, "")
    assert day_comes_first(["4/4/2026", "5.6.2026"], None) == (True, "")


def times(read_texts, header, cells, settings=None, start=""):
    readings = f"test,{header},Cu (g/L)\n" + "".join(f"B1,{cell},1\n" for cell in cells)
    column, cell = (",started", f",{start}") if start else ("", "")
    tests = TESTS.format(column) + ROW.format(cell)
    found, problems = read_texts(settings or of(), tests=tests, readings=readings)
    return found["B1"].time_h, problems


def test_dates_with_times(read_texts):
    cells = ["2026-03-01 08:00", "2026-03-01 10:30", "2026-03-02 08:00", "2026-03-04 08:00"]
    hours, problems = times(read_texts, "date and time", cells)
    assert_allclose(hours, [0.0, 2.5, 24.0, 72.0], rtol=1e-9)
    assert "hours are counted from the first row of each test" in str(problems[0])
    hours, problems = times(read_texts, "time", cells, start="2026-03-01 07:00")
    assert_allclose(hours, [1.0, 3.5, 25.0, 73.0], rtol=1e-9)
    assert "the start in the tests sheet" in str(problems[0])


def test_a_date_and_a_clock_column(read_texts):
    cells = ["01/03/2026,22:00", "02/03/2026,02:00", "13/03/2026,24:00"]
    hours, problems = times(read_texts, "date,clock time", cells)
    assert_allclose(hours, [0.0, 4.0, 12 * 24 + 2.0], rtol=1e-9)
    assert [p for p in problems if p.level == "ask"] == []


def test_clock_times_across_midnight(read_texts):
    cells = ["20:00", "22:00", "02:00", "20:00", "08:00"]
    hours, problems = times(read_texts, "clock time", cells)
    assert_allclose(hours, [0.0, 2.0, 6.0, 24.0, 36.0], rtol=1e-9)
    (question,) = [p for p in problems if p.level == "ask"]
    assert "02:00 comes before the time in the row above: a new day? Read as 6 h" in question.found
    assert question.paste == 'sheets.clock_times = "within a day"'
    _, problems = times(read_texts, "time (h)", cells, of(clock_times="within a day"))
    assert [p for p in problems if p.level == "ask"] == []


def test_hours_and_minutes(read_texts):
    hours, problems = times(read_texts, "time (h)", ["0:00", "2:30", "24:00", "72"])
    assert_allclose(hours, [0.0, 2.5, 24.0, 72.0], rtol=1e-9)
    assert {p.level for p in problems} == {"note"}


def test_day_or_month_is_asked(read_texts):
    cells = ["03/04/2026 08:00", "03/04/2026 12:00"]
    hours, problems = times(read_texts, "date and time", cells)
    assert_allclose(hours, [0.0, 4.0])
    (question,) = [p for p in problems if p.level == "ask"]
    assert question.paste == 'sheets.dates = "day first"'
    hours, problems = times(
        read_texts, "date and time", ["03/04/2026", "04/04/2026"], of(dates="month first")
    )
    assert_allclose(hours, [0.0, 31 * 24.0])


def test_what_is_no_time_is_told(read_texts):
    hours, problems = times(read_texts, "date and time", ["2026-03-01", "late", "2026-03-02"])
    assert_allclose(hours, [0.0, 24.0])
    assert any("'late' is no date or time" in p.found and p.row == 3 for p in problems)


@pytest.mark.parametrize(
    ("text", "spelling", "size"),
    [
        ("-12.5+9.5", "mm", ("pair_mm", (9.5, 12.5))),
        ("-12.5 +9.5 mm", "", ("pair_mm", (9.5, 12.5))),
        ("9.5-12.5 mm", "", ("pair_mm", (9.5, 12.5))),
        ("-1/2+1/4 in", "", ("pair_mm", (6.35, 12.7))),
        ("-1-1/2 in +1 in", "", ("pair_mm", (25.4, 38.1))),
        ("-106+75 \u00b5m", "", ("pair_mm", (0.075, 0.106))),
        ("-10+20 mesh", "", ("pair_mm", (0.85, 2.0))),
        ("75", "um", ("single_mm", 0.075)),
        ("P80 75 um", "", ("p80_mm", 0.075)),
        ("80 % passing 106 um", "", ("p80_mm", 0.106)),
    ],
)
def test_sizes_in_words(text, spelling, size):
    read = read_size(text, spelling, Answers(mesh="US"))
    assert_allclose(getattr(read, size[0]), size[1], rtol=1e-9)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("-19 mm", "is a top size"),
        ("fine", "is no size"),
        ("12.5", "has no unit"),
        ("-10+20 mesh", "mesh of which series"),
        ("1/0 in", "divided by zero"),
        ("-4+4 mm", "the same size twice"),
    ],
)
def test_sizes_that_are_not_read(text, message):
    with pytest.raises(SizeProblem) as fault:
        read_size(text, "", Answers())
    assert message in fault.value.found


def test_p80_alone_needs_a_slope(read_texts):
    tests = TESTS.format(",P80 (um)") + ROW.format(",106")
    found, problems = read_texts(of(), tests=tests)
    assert_allclose(found["B1"].sizes.p80_mm, 0.106, rtol=1e-3)
    (question,) = [p for p in problems if p.level == "ask"]
    assert question.paste == "sheets.size_slope = 0.65"
    found, problems = read_texts(of(size_slope=1.0), tests=tests)
    assert problems == []
    assert_allclose(found["B1"].sizes.p80_mm, 0.106, rtol=1e-3)


def test_one_size_and_a_pair(read_texts):
    tests = (
        TESTS.format(",size (mm)") + ROW.format(",9.5") + ROW.format(",-2+1").replace("B1", "B2")
    )
    found, _ = read_texts(of(), tests=tests)
    assert_allclose(found["B1"].sizes.size_mm, [9.5])
    assert_allclose(found["B2"].sizes.size_mm, [np.sqrt(2.0)])


def test_wet_charge_with_its_moisture(read_texts):
    tests = "test,wet solids (g),moisture (%),solution (mL),start H2SO4 (g/L),temperature (degC),"
    tests += "aliquots\nB1,500,4.2,1000,20,25,returned\n"
    found, problems = read_texts(of(), tests=tests)
    assert_allclose(found["B1"].solids_g, 479.0, rtol=1e-12)
    assert_allclose(found["B1"].solution_mL, 1021.0, rtol=1e-12)
    assert_allclose(found["B1"].reagent_g_per_L, 20.0 / 1.021, rtol=1e-12)
    assert "charge 500 g with 4.2 % moisture: dry 479.0 g used" in str(problems[0])


def test_solution_from_per_cent_solids(read_texts):
    tests = "test,Charge g (dry),% solids,temperature (degC),aliquots\nB1,1000,40,25,returned\n"
    found, problems = read_texts(of(), tests=tests)
    assert_allclose(found["B1"].solution_mL, 1500.0, rtol=1e-12)
    assert "worked out from 40 % solids: 1500 mL" in str(problems[0])
