"""TOML with lines."""

import pytest

from leachkin.errors import InputProblems
from leachkin.files import read_toml

TEXT = '''# a campaign
format = 1
[tables]
tests = "tests.csv"   # [not a table]
long = """
[heap]
fake = 1
"""
list = [
  1,
  "a = b",
]

[[exclude]]
test = "B1"
[[exclude]]
test = "B2"
time = 24

[budget.prices."scrap iron"]
price = 1
[heap]
sizes.top = "19 mm"
factor = { value = 0.85, low = 0.75 }
cure = 12
'''


def saved(tmp_path, content):
    path = tmp_path / "campaign.toml"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


def line(text):
    return TEXT.split("\n").index(text) + 1


def test_lines_of_keys(tmp_path):
    document = read_toml(saved(tmp_path, TEXT))
    assert document.data["exclude"][1] == {"test": "B2", "time": 24}
    assert document.line_of("format") == 2
    assert document.line_of("tables.tests") == 4
    assert document.line_of("tables.list") == line("list = [")
    assert document.line_of("exclude.0.test") == line('test = "B1"')
    assert document.line_of("exclude[1].time") == line("time = 24")
    assert document.line_of("budget.prices.scrap iron.price") == line("price = 1")
    assert document.line_of("heap.sizes.top") == line('sizes.top = "19 mm"')
    assert document.line_of("heap.cure") == line("cure = 12")
    assert document.line_of("heap.factor.low") == document.line_of("heap.factor")
    assert document.line_of("nothing.at.all") == 1
    assert "tables.fake" not in document.lines
    assert document.content == TEXT.encode()


def test_a_table_after_a_multi_line_string_is_not_taken_from_inside_it(tmp_path):
    document = read_toml(saved(tmp_path, TEXT))
    assert document.line_of("heap.cure") > document.line_of("exclude.1.time")
    assert document.line_of("heap") == document.line_of("heap.sizes.top") - 1


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("", "the file is empty"),
        ("a = 1\nb = \n", "campaign.toml, row 2: this is not TOML: invalid value"),
        ('a = 1\nt = "data\\sheets.csv"\n', "row 2: this is not TOML.*forward slashes"),
        ("a = 1\na = 2\n", "row 2: this is not TOML: cannot overwrite a value"),
        (b'a = 1\nb = "caf\xe9"\n', r"row 2: byte 15 \(0xE9\) is not UTF-8 text"),
    ],
)
def test_what_is_no_toml(tmp_path, content, message):
    with pytest.raises(InputProblems, match=message):
        read_toml(saved(tmp_path, content))


def test_not_there(tmp_path):
    saved(tmp_path, "a = 1")
    with pytest.raises(InputProblems, match="no such file.*did you mean campaign.toml"):
        read_toml(tmp_path / "campain.toml")


def test_byte_order_mark_and_windows_line_ends(tmp_path):
    document = read_toml(saved(tmp_path, b"\xef\xbb\xbf[a]\r\nb = 1\r\n"))
    assert document.data == {"a": {"b": 1}}
    assert document.line_of("a.b") == 2
