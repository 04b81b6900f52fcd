"""The daily log of a column: extraction by hand, rests in the time and not in the flow."""

import re

import pytest
from numpy.testing import assert_allclose

from leachkin.files import grid_of
from leachkin.testwork import extraction_of_column_log, is_column_log
from leachkin.testwork.column_log import read_column_log

LOG = """Column test,,,,,,
Column no,C1,,Sample,oxide,,
Dry mass kg,100,,Head Cu %,0.5,,
,,,,,,
Day,Date,Feed L,PLS L,PLS Cu g/L,pH,Remarks
1,2026-03-01,20,0,,1.5,
2,2026-03-02,20,10,5.0,1.5,
3,2026-03-03,20,20,4.0,1.5,
4,2026-03-04,0,0,,,pump off
5,2026-03-05,0,0,,,rest
6,2026-03-06,20,20,3000 mg,1.6,
8,2026-03-08,20,20,1.0,1.6,
"""


def grid(text):
    rows = [(n, line.split(",")) for n, line in enumerate(text.split("\n"), start=1)]
    return grid_of("column.csv", rows, b"")


def test_cumulative_extraction():
    problems = []
    log = read_column_log(grid(LOG.replace("3000 mg", "3.0")), problems)
    # head 100 kg * 5 kg/t = 500 g; out 50, 130, 130, 130, 190, 210 g
    expected = [0.0, 0.10, 0.26, 0.26, 0.26, 0.38, 0.42]
    assert_allclose(log.extraction("Cu"), expected, rtol=1e-12)
    assert log.rests.tolist() == [False, False, False, True, True, False, False]
    sheet = extraction_of_column_log(grid(LOG.replace("3000 mg", "3.0")), problems)
    assert sheet.header == ("test", "domain", "time (d)", "Cu extraction (%)")
    assert sheet.rows[-1].cells == ("C1", "oxide", "8", "42")
    text = "\n".join(str(p) for p in problems)
    assert "2 rest days (rows 9, 10) count in the time and not in the flow" in text
    assert "0.7 m3 of solution a tonne" in text


def test_metal_that_the_feed_brings_is_taken_off():
    text = LOG.replace("3000 mg", "3.0").replace("pH,", "Feed Cu g/L,").replace(",1.5,", ",0.1,")
    log = read_column_log(grid(text.replace(",1.6,", ",0.1,")), [])
    assert_allclose(log.extraction("Cu")[-1], (210.0 - 5 * 2.0) / 500.0, rtol=1e-12)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("x", "x", r"row 11, column \"PLS Cu g/L\": '3000 mg' is not a number"),
        ("Dry mass kg,100", "Dry mass kg,", "lacks the dry mass"),
        ("Head Cu %,0.5", "Head Cu,0.5", "lacks a head"),
        ("2,2026-03-02,20,10", "2,2026-03-02,20,-10", "row 7.*-10 is a volume below 0"),
        ("3,2026-03-03", "1,2026-03-03", "row 8.*day 1 comes after day 2"),
        (",20,20,4.0", ",20,20,", "row 8.*2 days with PLS and no Cu assay count as none"),
        ("PLS L", "PLS kg", "'kg' does not measure"),
    ],
)
def test_wrong_logs(old, new, message):
    problems = []
    extraction_of_column_log(grid(LOG.replace(old, new)), problems)
    assert re.search(message, "\n".join(str(p) for p in problems)), [str(p) for p in problems]


def test_what_is_no_log():
    assert not is_column_log(grid("Day,pH\n1,2\n"))
    assert extraction_of_column_log(grid("Day,pH\n1,2\n"), []) is None
