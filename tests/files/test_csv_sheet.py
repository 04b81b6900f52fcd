"""Reading CSV files: what is found is said, what is mixed or damaged is refused."""

import re

import pytest

from leachkin.errors import InputProblems
from leachkin.files import parse_numeral, read_csv


def written(tmp_path, content, name="a.csv"):
    path = tmp_path / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


def test_rows_keep_their_numbers(tmp_path):
    sheet = read_csv(written(tmp_path, "\ntime (h), Cu (g/L)\n1,0.5\n,\n\n2,0.7\n"))
    assert sheet.header == ("time (h)", "Cu (g/L)")
    assert sheet.header_row == 2
    assert [(row.number, row.cells) for row in sheet.rows] == [(3, ("1", "0.5")), (6, ("2", "0.7"))]
    assert sheet.decimal == "."
    assert sheet.problems == ()
    assert sheet.column("Cu (g/L)") == ["0.5", "0.7"]


def test_byte_order_mark_and_windows_line_ends(tmp_path):
    sheet = read_csv(written(tmp_path, b"\xef\xbb\xbftest,time (h)\r\nB1,2\r\n"))
    assert sheet.header == ("test", "time (h)")
    assert sheet.rows[0].cells == ("B1", "2")


@pytest.mark.parametrize("separator", [";", "\t"])
def test_decimal_commas_are_found_and_said(tmp_path, separator):
    text = "time (h)|Cu (g/L)|remark\n1|0,674|pump off, 2.5 h\n2|1,118|2.5\n"
    sheet = read_csv(written(tmp_path, text.replace("|", separator)))
    assert sheet.decimal == ","
    assert parse_numeral(sheet.rows[1].cells[1], sheet.decimal) == 1.118
    assert [p.level for p in sheet.problems] == ["note"]
    assert "decimal commas" in sheet.problems[0].found


def test_semicolons_with_points_need_no_note(tmp_path):
    sheet = read_csv(written(tmp_path, "Au, fire assay (g/t);t\n1.5;2\n2.5;3\n"))
    assert sheet.header == ("Au, fire assay (g/t)", "t")
    assert (sheet.decimal, sheet.problems) == (".", ())


def test_three_digits_after_every_comma_are_asked_about(tmp_path):
    sheet = read_csv(written(tmp_path, "a;b\n1,234;5\n2,345;6\n"))
    assert [p.level for p in sheet.problems] == ["ask"]
    assert "may be a thousands mark" in sheet.problems[0].found


MIXED = [
    ("a;b\n1,5;2\n2.5;3\n", "a"),
    ("a;b\n1.234,5;2\n0.5;2\n", "a"),
    ("a;b\n0,674;2\n1.118;2\n", "a"),
    ("a;b\n1,234;2.5\n0,5;1\n", "a"),
    ('a,b\n0.674,1\n"1,118",2.5\n', "a"),
]


@pytest.mark.parametrize(("text", "column"), MIXED)
def test_mixed_marks_are_refused(tmp_path, text, column):
    problems = read_csv(written(tmp_path, text)).problems
    assert [p.level for p in problems] == ["stop"]
    assert "decimal marks are mixed" in problems[0].found
    assert (problems[0].row, problems[0].column) == (3, column)


#: What is written, the decimal mark, the number in row 2 of the first column.
MARKS = [
    ("a;b\n1.234,5;2\n", ",", 1234.5),
    ("a;b\n1.234.567;2\n0,5;2\n", ",", 1234567.0),
    ("a;b\n1.234;2\n5.678.901;2\n", ",", 1234.0),
    ("a;b\n1,234.5;1\n", ".", 1234.5),
    ('a,b\n"1,234,567",1\n', ".", 1234567.0),
    ('a,b\n"1,118",1.5\n998.5,1.5\n', ".", 1118.0),
    ("a;b\n1 234,5;2\n", ",", 1234.5),
    ("a,b\n1 234.5,2\n", ".", 1234.5),
    ("a,b\n1'234.5,2\n", ".", 1234.5),
    ("a;b\n1\u202f234,5;2\n", ",", 1234.5),
    ('a,b\n"0,5",2\n', ",", 0.5),
    ("a|b\n0,5|2\n", ",", 0.5),
    ("sep=;\na;b\n0,5;2\n", ",", 0.5),
    ("a;b\n<0,5;2\n", ",", None),
]


@pytest.mark.parametrize(("text", "decimal", "value"), MARKS)
def test_marks_are_found_and_said(tmp_path, text, decimal, value):
    sheet = read_csv(written(tmp_path, text))
    assert sheet.decimal == decimal
    assert [p.level for p in sheet.problems if p.level != "note"] == []
    assert "decimal" in str(sheet.problems[-1])
    if value is not None:
        assert parse_numeral(sheet.rows[0].cells[0], decimal) == value


def test_nothing_proves_a_mark(tmp_path):
    sheet = read_csv(written(tmp_path, 'a,b\n"1,118",2\n'))
    assert (sheet.decimal, sheet.rows[0].cells[0]) == (".", "1,118")
    for answer, value in ((",", 1.118), (".", 1118.0)):
        sheet = read_csv(written(tmp_path, 'a,b\n"1,118",2\n'), decimal_mark=answer)
        assert parse_numeral(sheet.rows[0].cells[0], sheet.decimal) == value
    (problem,) = read_csv(written(tmp_path, "a;b\n1,5;2\n"), decimal_mark=".").problems
    assert "the settings say decimal_mark = '.', but '1,5' in row 2" in problem.found


def test_names_that_look_like_numbers_prove_nothing(tmp_path):
    sheet = read_csv(written(tmp_path, "sample no;Cu (g/L);remark\n1.5;0,674;2.5\n"))
    assert sheet.decimal == ","
    assert sheet.rows[0].cells[0] == "1.5"


#: Bytes, what the note says, the second heading.
ENCODED = [
    (
        "test,Cu (\u00b5g/L)\nB1,2\n".encode("cp1252"),
        "Windows-1252.*'\u00b5' in row 1",
        "\u00b5g/L",
    ),
    ("test,Cu (\u00b5g/L)\nB1,2\n".encode("cp850"), "code page 850", "\u00b5g/L"),
    ("test,T (\u00b0C)\nB1,2\n".encode("mac_roman"), "Mac Roman", "\u00b0C"),
    ("test,T (\u00b0C)\nB1,2\n".encode("latin-1"), "Windows-1252", "\u00b0C"),
    ("test,Cu (\u00b5g/L)\nB1,2\n".encode("utf-16"), "UTF-16", "\u00b5g/L"),
    ("test,Cu (\u00b5g/L)\nB1,2\n".encode("utf-16-be"), "UTF-16", "\u00b5g/L"),
    ("test,Cu (\u00b5g/L)\nB1,2\n".encode("utf-16-le"), "UTF-16", "\u00b5g/L"),
]


@pytest.mark.parametrize(("content", "said", "unit"), ENCODED)
def test_code_pages_are_found_and_said(tmp_path, content, said, unit):
    sheet = read_csv(written(tmp_path, content))
    assert unit in sheet.header[1]
    (note,) = sheet.problems
    assert note.level == "note"
    assert re.search(said, note.found)


def test_unseen_marks_are_left_out(tmp_path):
    sheet = read_csv(written(tmp_path, "test,Cu\u200b (g/L)\nB1,0.5\ufeff\n"))
    assert sheet.header[1] == "Cu (g/L)"
    assert sheet.rows[0].cells[1] == "0.5"


def test_long_rows_stop_and_short_rows_are_asked_about(tmp_path):
    sheet = read_csv(written(tmp_path, "a,b,c\n1,2,3,4\n1,2\n5,6\n1,2,\n"))
    texts = [str(p) for p in sheet.problems]
    assert "row 2: the row has 4 cells under 3 headings" in texts[0]
    assert "row 3: the row has fewer cells than there are headings, as have 1 more" in texts[1]
    assert [p.level for p in sheet.problems] == ["stop", "ask"]
    assert sheet.rows[1].cells == ("1", "2", "")


def test_headings_twice_and_cells_without_heading(tmp_path):
    sheet = read_csv(written(tmp_path, "a,A,,c\n1,2,,3\n1,2,9,3\n"))
    texts = [str(p) for p in sheet.problems]
    assert "columns 1 and 2 have the same heading" in texts[0]
    assert "row 3: column 3 has '9' in it and no heading" in texts[1]
    assert sheet.header == ("a", "A", "c")
    assert sheet.rows[0].cells == ("1", "2", "3")


def test_failed_formulas_are_told_by_cell(tmp_path):
    sheet = read_csv(written(tmp_path, "a,b\n1,#REF!\n#DIV/0!,2\n"))
    assert [(p.row, p.column) for p in sheet.problems] == [(2, "b"), (3, "a")]
    assert "#REF! stands where a formula failed" in sheet.problems[0].found


def test_inches_in_an_open_quote(tmp_path):
    with pytest.raises(InputProblems, match="row 3: a double quote opens a cell"):
        read_csv(written(tmp_path, 'size,b\n1,2\n"1/2" screen,3\n'))


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "the file is empty"),
        (b"\n , \n", "the file is empty"),
        (b"a,b\n", "there are headings and no rows under them"),
    ],
)
def test_nothing_to_read(tmp_path, content, message):
    problems = read_csv(written(tmp_path, content)).problems
    assert [p.level for p in problems] == ["stop"]
    assert message in problems[0].found


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"a,b\n1,\x00\n", r"row 2: character U\+0000 does not belong"),
        (b"PK\x03\x04rest", r"a workbook or a zip archive.*book.xlsx#Sheet"),
        (b"\xd0\xcf\x11\xe0rest", r"an old .xls workbook or one with a password"),
        (b"\xff\xfea\x00,", "this begins as UTF-16 text and does not go on"),
        (b"\xc2\xb5,b\n1,caf\xe9\n", r"row 2: byte 11 \(0xE9\).*row 1 is: two encodings"),
        (b"%PDF-1.7", "a PDF"),
    ],
)
def test_not_text(tmp_path, content, message):
    with pytest.raises(InputProblems, match=message):
        read_csv(written(tmp_path, content))


def test_not_there(tmp_path):
    written(tmp_path, "a,b\n1,2\n", "readings.csv")
    with pytest.raises(InputProblems, match=r"no such file.*did you mean readings.csv\?"):
        read_csv(tmp_path / "reading.csv")
    with pytest.raises(InputProblems, match="nor its folder"):
        read_csv(tmp_path / "none" / "reading.csv")
    with pytest.raises(InputProblems, match="this is a folder"):
        read_csv(tmp_path)


NUMERALS = [
    ("10.5", ".", 10.5),
    (" -3 ", ".", -3.0),
    ("\u22123", ".", -3.0),
    (".5", ".", 0.5),
    ("1e-3", ".", 0.001),
    ("10,5", ",", 10.5),
    ("7", ",", 7.0),
]


@pytest.mark.parametrize(("text", "decimal", "value"), NUMERALS)
def test_numerals(text, decimal, value):
    assert parse_numeral(text, decimal) == value


@pytest.mark.parametrize(
    ("text", "decimal", "message"),
    [
        ("1,234", ".", "has a comma, a decimal or a thousands mark"),
        ("1.234", ",", "has a point in a file with decimal commas"),
        ("1,234.5", ".", "has a thousands mark"),
        ("nan", ".", "is not a number"),
        ("inf", ".", "is not a number"),
        ("1_000", ".", "is not a number"),
        ("0x10", ".", "is not a number"),
        ("1e999", ".", "too large"),
        ("\u0663", ".", "is not a number"),
        ("", ".", "is not a number"),
    ],
)
def test_what_is_no_numeral(text, decimal, message):
    with pytest.raises(ValueError, match=message):
        parse_numeral(text, decimal)
