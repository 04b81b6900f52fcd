import csv
import io

import pytest

from leachkin.report import render_table
from leachkin.result_table import Column, ResultTable

TABLE = ResultTable(
    "sinks",
    (Column("sink", "taken by"), Column("kg", "iron", "kg/m3", 4)),
    (("copper", 1.7009), ('ferric <iron> & "rust"', 0.45), ("oxygen", None)),
    "Iron by sink",
)


def test_terminal_text_lines_up_and_is_plain_ascii():
    text = render_table(TABLE)
    lines = text.splitlines()
    assert lines[:2] == ["Sinks", "Iron by sink"]
    assert text.isascii()
    assert "1.701" in text
    assert "0.450" in text
    ends = {len(line) for line in lines[3:5]} | {len(lines[-1]), len(lines[-2])}
    assert len(ends) == 1, "right-aligned numbers end in one column"


def test_terminal_wraps_words_and_never_cuts_a_number():
    long = ResultTable(
        "notes",
        (Column("note", "note"), Column("value", "value", "kg/t")),
        (("a long sentence that goes on and on over the edge of any screen", 123456.7),),
    )
    text = render_table(long, "terminal", width=30)
    assert max(len(line) for line in text.splitlines()) <= 30
    assert "123500" in text
    for word in ("sentence", "that", "edge", "screen"):
        assert word in text


def test_rows_with_units_of_their_own_keep_their_own_digits():
    columns = (Column("item", "Item"), Column("value", "Value"), Column("unit", "Unit"))
    rows = (("area", 99681.02, "m2"), ("flow", 797.448, "m3/h"), ("factor", 1.3264, "kg/kg"))
    text = render_table(ResultTable("figures", columns, rows))
    for number in ("99680", "797.4", "1.326"):
        assert f" {number} " in text


def test_long_headings_and_units_wrap_over_narrow_numbers():
    columns = (Column("day", "Day"), Column("x", "Particles alone, not a heap", "% of total metal"))
    text = render_table(ResultTable("heap", columns, ((1.0, 74.9), (2.0, 80.2))))
    assert max(len(line) for line in text.splitlines()) < 20
    assert "(% of" in text


def test_an_empty_table_says_so():
    assert "(no rows)" in render_table(ResultTable("x", (Column("a", "a"),), ()))


def test_csv_keeps_every_digit_and_comes_back():
    rows = list(csv.reader(io.StringIO(render_table(TABLE, "csv"))))
    assert rows[0] == ["taken by", "iron (kg/m3)"]
    assert float(rows[1][1]) == 1.7009
    assert rows[2][0] == 'ferric <iron> & "rust"'
    assert rows[3][1] == ""


def test_html_escapes_what_was_typed():
    text = render_table(TABLE, "html")
    assert "ferric &lt;iron&gt; &amp; &quot;rust&quot;" in text
    assert "<iron>" not in text
    assert '<td class="n">1.701</td>' in text


def test_an_unknown_form_is_refused():
    with pytest.raises(ValueError, match="form: 'pdf'. Allowed: terminal, csv, html"):
        render_table(TABLE, "pdf")
