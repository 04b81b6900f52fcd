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
    assert lines[0] == "Iron by sink"
    assert text.isascii()
    assert "1.701" in text
    assert "0.450" in text
    ends = {len(line) for line in lines[2:4] if line} | {len(lines[-1]), len(lines[-2])}
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
