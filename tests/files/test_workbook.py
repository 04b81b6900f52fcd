"""Workbooks in and out."""

import datetime
import io
import zipfile

import openpyxl
import pytest

from leachkin.errors import InputProblems
from leachkin.files import (
    read_sheet,
    read_workbook,
    read_xlsx_sheet,
    sheet_names,
    write_csv,
    write_xlsx,
)
from leachkin.result_table import Column, ResultTable


def made(tmp_path, fill, name="book.xlsx"):
    book = openpyxl.Workbook()
    fill(book)
    book.save(tmp_path / name)
    return tmp_path / name


def bench(book):
    sheet = book.active
    sheet.title = "Readings"
    sheet.append(["test", "time (h)", "Cu (%)", "started"])
    sheet.append(["B1", 2, 0.0068, datetime.date(2026, 3, 1)])
    sheet.append([])
    sheet.append(["B2", 0.1, 0.5, None])
    sheet["C2"].number_format = "0.00%"
    book.create_sheet("Tests")


def test_values_as_a_person_sees_them(tmp_path):
    made(tmp_path, bench)
    sheet = read_sheet("book.xlsx#Readings", tmp_path)
    assert sheet.file == "book.xlsx#Readings"
    assert sheet.header == ("test", "time (h)", "Cu (%)", "started")
    assert [(row.number, row.cells) for row in sheet.rows] == [
        (2, ("B1", "2", "0.68 %", "2026-03-01 00:00:00")),
        (4, ("B2", "0.1", "0.5", "")),
    ]
    assert sheet.problems == ()
    assert sheet_names(tmp_path / "book.xlsx") == ["Readings", "Tests"]


def test_the_sheet_must_be_named_and_known(tmp_path):
    made(tmp_path, bench)
    with pytest.raises(InputProblems, match="2 sheets and none is named.*book.xlsx#Readings"):
        read_sheet("book.xlsx", tmp_path)
    with pytest.raises(InputProblems, match="unknown sheet 'Reading'.*did you mean Readings"):
        read_sheet("book.xlsx#Reading", tmp_path)
    with pytest.raises(InputProblems, match="no such file.*did you mean book.xlsx"):
        read_sheet("bok.xlsx#Readings", tmp_path)


def test_one_sheet_needs_no_name(tmp_path):
    path = made(tmp_path, lambda book: [book.active.append(row) for row in (["a"], [1])])
    assert read_xlsx_sheet(path).rows[0].cells == ("1",)


def test_formulas_never_calculated_and_failed_ones(tmp_path):
    def fill(book):
        book.active.append(["a", "b", "c"])
        book.active.append([1, "=A2*2", "#REF!"])

    problems = read_xlsx_sheet(made(tmp_path, fill)).problems
    texts = [str(p) for p in problems]
    assert "cell B2 has a formula without a stored value" in texts[0]
    assert 'row 2, column "c": #REF! stands where a formula failed' in texts[1]
    assert {p.level for p in problems} == {"stop"}


def test_what_is_no_workbook(tmp_path):
    (tmp_path / "old.xlsx").write_bytes(b"\xd0\xcf\x11\xe0 and so on")
    with pytest.raises(InputProblems, match="an old .xls workbook or one with a password"):
        read_sheet("old.xlsx#A", tmp_path)
    (tmp_path / "text.xlsx").write_text("a,b\n")
    with pytest.raises(InputProblems, match="not a workbook, or it is damaged"):
        read_sheet("text.xlsx#A", tmp_path)
    with zipfile.ZipFile(tmp_path / "zip.xlsx", "w") as archive:
        archive.writestr("a.txt", "nothing")
    with pytest.raises(InputProblems, match="not a workbook, or it is damaged"):
        read_sheet("zip.xlsx#A", tmp_path)
    with pytest.raises(InputProblems, match="an old .xls workbook"):
        read_sheet("book.xls#A", tmp_path)


def test_a_workbook_that_unpacks_too_far(tmp_path, monkeypatch):
    made(tmp_path, bench)
    monkeypatch.setattr("leachkin.files.workbook.LARGEST_UNPACKED_BYTES", 1000)
    with pytest.raises(InputProblems, match="the workbook unpacks to"):
        read_sheet("book.xlsx#Readings", tmp_path)


def test_a_workbook_with_entities_of_its_own(tmp_path):
    source = made(tmp_path, bench)
    target = tmp_path / "entities.xlsx"
    with zipfile.ZipFile(source) as old, zipfile.ZipFile(target, "w") as new:
        for entry in old.infolist():
            content = old.read(entry)
            if entry.filename == "xl/workbook.xml":
                content = b'<!DOCTYPE x [<!ENTITY y "z">]>' + content
            new.writestr(entry.filename, content)
    with pytest.raises(InputProblems, match="defines its own entities"):
        read_sheet("entities.xlsx#Readings", tmp_path)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "the path is empty"),
        ("sheets\\tests.csv", r"has a backslash in it.*write \"sheets/tests.csv\""),
        ("sheets\tests.csv", r"control character in it \(U\+0009\)"),
        ("a\u202eb.csv", r"control character in it \(U\+202E\)"),
        ("a\x00b.csv", r"control character in it \(U\+0000\)"),
    ],
)
def test_paths_that_may_not_be_used(text, message):
    with pytest.raises(InputProblems, match=message):
        read_sheet(text)


TABLE = ResultTable(
    "metal balance: B/1",
    (Column("test", "Test"), Column("x", "Extraction", "%"), Column("good", "Good")),
    (("=1+1", 83.99009416238053, True), ("+x", -1.5, False), ("-y", None, None), ("@z", 7, True)),
)


def test_no_live_formula_is_written(tmp_path):
    path = tmp_path / "out.xlsx"
    write_xlsx([TABLE, TABLE], path)
    book = openpyxl.load_workbook(path)
    assert book.sheetnames == ["metal balance  B 1", "metal balance  B 1 2"]
    sheet = book.worksheets[0]
    assert [cell.data_type for cell in sheet["A"]] == ["s"] * 5
    assert [cell.value for cell in sheet["A"]] == ["Test", "=1+1", "+x", "-y", "@z"]
    assert sheet["A2"].quotePrefix
    assert sheet["B1"].value == "Extraction (%)"
    assert sheet["B1"].font.bold
    assert sheet["B2"].value == 83.99009416238053
    assert sheet["B4"].value is None
    with zipfile.ZipFile(path) as archive:
        assert all(b"<f>" not in archive.read(name) for name in archive.namelist())


def test_the_same_tables_give_the_same_bytes(tmp_path):
    for name in ("one.xlsx", "two.xlsx"):
        write_xlsx([TABLE], tmp_path / name)
    one, two = ((tmp_path / name).read_bytes() for name in ("one.xlsx", "two.xlsx"))
    assert one == two
    with zipfile.ZipFile(io.BytesIO(one)) as archive:
        assert {entry.date_time[0] for entry in archive.infolist()} == {1980}
        assert b"1980-01-01T00:00:00Z" in archive.read("docProps/core.xml")


def test_what_is_written_reads_back(tmp_path):
    write_xlsx([TABLE], tmp_path / "out.xlsx")
    write_csv(TABLE, tmp_path / "out.csv")
    from_book = read_sheet("out.xlsx", tmp_path)
    from_csv = read_sheet("out.csv", tmp_path)
    assert from_book.header == from_csv.header == ("Test", "Extraction (%)", "Good")
    numbers = [row.cells[1] for row in from_csv.rows]
    assert numbers == [row.cells[1] for row in from_book.rows]
    assert numbers == ["83.99009416238053", "-1.5", "", "7"]
    assert from_book.column("Test") == from_csv.column("Test")


def test_wrong_numbers_are_not_written(tmp_path):
    bad = ResultTable("t", (Column("x", "X"),), ((float("nan"),),))
    for write in (write_csv, lambda table, path: write_xlsx([table], path)):
        with pytest.raises(ValueError, match="table 't', column 'x': nan is no number"):
            write(bad, tmp_path / "bad")
    with pytest.raises(ValueError, match="at least one table"):
        write_xlsx([], tmp_path / "bad")


def test_numbers_that_stand_as_text(tmp_path):
    def fill(book):
        book.active.append(["test", "pH", "Cu (mg/L)"])
        book.active.append(["B1", "10,5", 0.674])
        book.active.append(["B2", "9,25", "<0,01"])
        book.active.append(["B3", 10.25, "1.234,5"])

    sheet = read_xlsx_sheet(made(tmp_path, fill))
    assert [row.cells[1:] for row in sheet.rows] == [
        ("10.5", "0.674"),
        ("9.25", "<0.01"),
        ("10.25", "1234.5"),
    ]
    assert sheet.decimal == "."
    said = "decimal commas in 4 cells, as '10,5' in row 2, column \"pH\""
    assert said in sheet.problems[-1].found


def test_marks_mixed_in_text_cells(tmp_path):
    def fill(book):
        book.active.append(["test", "pH"])
        book.active.append(["B1", "10,5"])
        book.active.append(["B2", "9.25"])

    (problem,) = read_xlsx_sheet(made(tmp_path, fill)).problems
    assert (problem.level, problem.row, problem.column) == ("stop", 3, "pH")


def test_hidden_rows_are_told(tmp_path):
    def fill(book):
        for i in range(5):
            book.active.append([f"a{i}"])
        book.active.row_dimensions[3].hidden = True

    sheet = read_xlsx_sheet(made(tmp_path, fill))
    assert len(sheet.rows) == 4
    assert "1 hidden row is read like the others: 3" in str(sheet.problems[0])


def test_failed_formulas_by_cell_name(tmp_path):
    def fill(book):
        book.active.append(["a", "", "c"])
        book.active.append([1, None, "#DIV/0!"])

    (problem,) = read_xlsx_sheet(made(tmp_path, fill)).problems
    assert "in cell C2" in problem.found


def test_every_sheet_of_a_workbook(tmp_path):
    grids = read_workbook(made(tmp_path, bench))
    assert [(grid.tab, len(grid.rows)) for grid in grids] == [("Readings", 3)]
