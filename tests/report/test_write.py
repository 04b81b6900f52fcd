"""The folder of results: whole or not at all, the same bytes for the same run."""

import csv
import json
import xml.etree.ElementTree as ElementTree

import pytest

from leachkin.report import check_out, read_results, write_report
from leachkin.report.write import file_names
from leachkin.result_table import Column, ResultTable


@pytest.fixture(scope="module")
def folder(copper, tmp_path_factory):
    return write_report(copper, tmp_path_factory.mktemp("run") / "out")


def every_file(folder):
    return {
        p.relative_to(folder).as_posix(): p.read_bytes() for p in folder.rglob("*") if p.is_file()
    }


def test_everything_is_there(copper, folder):
    files = every_file(folder)
    assert {"results.json", "report.html", "results.xlsx"} <= set(files)
    tables = {name for name in files if name.startswith("tables/")}
    assert tables == {f"tables/{name}.csv" for name in file_names(copper.tables())}
    assert sum(name.startswith("figures/") for name in files) == 14


def test_results_come_back(copper, folder):
    results = read_results(folder)
    assert results["schema"] == 1
    assert results["tank"] is None
    assert results["heap"]["extracted"]["value"][-1] == pytest.approx(
        float(copper.heap.extracted.value[-1]), rel=1e-12, abs=0
    )


def test_csv_keeps_every_digit(copper, folder):
    rows = list(csv.reader((folder / "tables" / "heap.csv").read_text("utf-8").splitlines()))
    position = rows[0].index("Extracted (% of total metal)")
    assert float(rows[-1][position]) == 100 * float(copper.heap.extracted.value[-1])


def test_figures_are_svg(folder):
    for path in (folder / "figures").iterdir():
        assert ElementTree.fromstring(path.read_text("utf-8")).tag.endswith("svg")


def test_the_same_run_gives_the_same_bytes(copper, folder, tmp_path):
    again = write_report(copper, tmp_path / "again")
    assert every_file(again) == every_file(folder)


def test_a_folder_in_use_is_refused_before_and_at_writing(zinc, tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    for attempt in (check_out, lambda out, overwrite: write_report(zinc, out, overwrite)):
        with pytest.raises(ValueError, match="the folder is not empty"):
            attempt(tmp_path, False)
        with pytest.raises(ValueError, match="not a folder of results"):
            attempt(tmp_path, True)
    assert [p.name for p in tmp_path.iterdir()] == ["notes.txt"]


def test_checking_a_new_folder_leaves_nothing(tmp_path):
    check_out(tmp_path / "new")
    assert list(tmp_path.iterdir()) == []


def test_earlier_results_are_replaced_on_request(zinc, tmp_path):
    out = write_report(zinc, tmp_path / "out")
    (out / "old.txt").write_text("left over")
    write_report(zinc, out, overwrite=True)
    assert not (out / "old.txt").exists()
    assert json.loads((out / "results.json").read_text("utf-8"))["tank"]


def test_a_failure_half_way_leaves_nothing(zinc, tmp_path, monkeypatch):
    def broken(tables, path):
        raise OSError(28, "No space left on device", str(path))

    monkeypatch.setattr("leachkin.report.write.write_xlsx", broken)
    with pytest.raises(OSError, match="No space left"):
        write_report(zinc, tmp_path / "out")
    assert list(tmp_path.iterdir()) == []


def test_file_names_are_plain_and_never_meet():
    tables = [ResultTable(name, (Column("a", "a"),), ()) for name in ("a/b", "a b", "../x", "")]
    assert file_names(tables) == ["a_b", "a_b_2", "x", "table"]
